"""One run of a model by OR-Tools' wrapper (pywraplp): SCIP with whole-number variables, GLOP without.

The only module that imports OR-Tools, loaded when the first model is run.
"""

import math
import threading
import time
from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import ArrayLike
from ortools.linear_solver import linear_solver_pb2, pywraplp

from ledgersolve.mip.model import LinearModel, LinearResult, vector

SCIP_INFINITY = 1e19
_STATUS = {0: "optimal", 1: "feasible", 2: "infeasible", 3: "unbounded"}


def message(model: LinearModel) -> linear_solver_pb2.MPModelProto:
    """Give the model as the wrapper's own message, checked for finiteness."""
    lower, upper, cost, whole = model.columns()
    proto = linear_solver_pb2.MPModelProto(objective_offset=model.offset)
    add = proto.variable.add
    for low, high, price, integer in zip(
        lower.tolist(), upper.tolist(), cost.tolist(), whole.tolist(), strict=True
    ):
        add(lower_bound=low, upper_bound=high, objective_coefficient=price, is_integer=integer)
    for low_rows, high_rows, starts, variables, values in model.sorted_blocks():
        ends, indices, numbers = starts.tolist(), variables.tolist(), values.tolist()
        for k, (low, high) in enumerate(zip(low_rows.tolist(), high_rows.tolist(), strict=True)):
            part = slice(ends[k], ends[k + 1])
            proto.constraint.add(
                lower_bound=low, upper_bound=high, var_index=indices[part], coefficient=numbers[part]
            )
    return proto


class Run:
    """One call of the wrapper: load, limit, hint, interrupt, read back."""

    def __init__(
        self, model: LinearModel, seconds: float, gap: float, hint: ArrayLike | None,
        cancelled: Callable[[], bool] | None, parameters: Sequence[str], log: bool,
    ) -> None:
        self.model, self.seconds, self.gap = model, seconds, gap
        self.hint, self.cancelled, self.parameters, self.log = hint, cancelled, parameters, log
        self.whole = bool(model.columns()[3].any())

    def result(self) -> LinearResult:
        """Run the model and read the answer back."""
        if self.seconds <= 0 or (self.cancelled is not None and self.cancelled()):
            return LinearResult("unknown", None, math.inf, -math.inf)
        began = time.monotonic()
        solver = pywraplp.Solver.CreateSolver("SCIP" if self.whole else "GLOP")
        refusal = solver.LoadModelFromProto(message(self.model))
        if refusal:
            raise ValueError(f"the wrapper refuses the model: {refusal}")
        if self.whole:
            self._prepare_scip(solver)
        if self.log:
            solver.EnableOutput()
        solver.SetTimeLimit(max(1, int((self.seconds - (time.monotonic() - began)) * 1000)))
        options = pywraplp.MPSolverParameters()
        options.SetDoubleParam(pywraplp.MPSolverParameters.RELATIVE_MIP_GAP, self.gap)
        return self._read(solver, self._interruptible(solver, options))

    def _prepare_scip(self, solver: pywraplp.Solver) -> None:
        if self.hint is not None:
            given = vector(self.hint, self.model.variables)
            known = np.flatnonzero(np.isfinite(given))
            variables = solver.variables()
            solver.SetHint([variables[k] for k in known.tolist()], given[known].tolist())
        text = "\n".join(self.parameters)
        if text and not solver.SetSolverSpecificParametersAsString(text):
            raise ValueError(f"SCIP does not take these parameters: {text!r}")

    def _interruptible(self, solver: pywraplp.Solver, options: pywraplp.MPSolverParameters) -> int:
        """Solve, and interrupt once ``cancelled`` says so (an early interrupt is lost, hence the loop)."""
        if self.cancelled is None:
            return int(solver.Solve(options))
        ended = threading.Event()

        def watch() -> None:
            while not ended.wait(0.1):
                if self.cancelled is not None and self.cancelled():
                    solver.InterruptSolve()

        watcher = threading.Thread(target=watch, daemon=True)
        watcher.start()
        try:
            return int(solver.Solve(options))
        finally:
            ended.set()
            watcher.join()

    def _read(self, solver: pywraplp.Solver, code: int) -> LinearResult:
        status = _STATUS.get(code, "unknown")
        if status == "infeasible" and not self.model.surely_bounded():
            status = "unbounded"  # presolve calls a model that can run away infeasible
        if status in ("infeasible", "unbounded"):
            return LinearResult(status, None, math.inf, math.inf if status == "infeasible" else -math.inf)
        nodes = int(solver.nodes()) if self.whole else 0
        bound = float(solver.Objective().BestBound()) if self.whole else -math.inf
        if not math.isfinite(bound) or abs(bound) >= SCIP_INFINITY:
            bound = -math.inf
        if status == "unknown":
            # without a plan the wrapper gives 0 whatever was proven, which is no bound where costs can be negative
            return LinearResult(status, None, math.inf, -math.inf, nodes=nodes)
        answer = linear_solver_pb2.MPSolutionResponse()
        solver.FillSolutionResponseProto(answer)
        values = np.array(answer.variable_value, dtype=np.float64)
        if not np.isfinite(values).all():
            return LinearResult("unknown", None, math.inf, -math.inf, nodes=nodes)
        lower, upper, cost, whole = self.model.columns()
        values[whole] = np.round(values[whole])
        values = np.clip(values, lower, upper)
        objective = float(cost @ values) + self.model.offset
        if self.whole:
            return LinearResult(status, values, objective, bound, nodes=nodes)
        duals = np.array(answer.dual_value, dtype=np.float64)
        reduced = np.array(answer.reduced_cost, dtype=np.float64)
        return LinearResult(status, values, objective, objective if code == 0 else -math.inf, duals, reduced)
