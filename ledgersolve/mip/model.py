"""Linear and mixed-integer models built from arrays and run by OR-Tools' wrapper (pywraplp).

SCIP runs models with whole-number variables, GLOP those without. Everything is checked for finiteness
before it reaches a solver: a NaN coefficient crashes SCIP and a NaN right-hand side is called optimal.
"""

import math
import threading
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray
from ortools.linear_solver import linear_solver_pb2, pywraplp

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True)
class LinearResult:
    """The end of one wrapper run.

    ``status`` is ``optimal`` (within the gap asked for), ``feasible`` (stopped with a plan),
    ``infeasible``, ``unbounded`` (or infeasible, but a cost can run away) or ``unknown`` (stopped without
    a plan). ``values`` has one figure a
    variable (None without a plan); ``bound`` is -inf where none is proven. ``duals`` (one a row) and
    ``reduced_costs`` exist for models without whole-number variables only.
    """

    status: str
    values: Floats | None
    objective: float
    bound: float
    duals: Floats | None = None
    reduced_costs: Floats | None = None
    nodes: int = 0

    @property
    def has_plan(self) -> bool:
        """Whether values exist."""
        return self.values is not None


@dataclass
class LinearModel:
    """A minimisation model put together block by block from arrays.

    Variables and rows are numbered in the order in which they are added; every ``add`` returns the
    numbers of what it added.
    """

    offset: float = 0.0
    _lower: list[Floats] = field(default_factory=list)
    _upper: list[Floats] = field(default_factory=list)
    _cost: list[Floats] = field(default_factory=list)
    _whole: list[NDArray[np.bool_]] = field(default_factory=list)
    _blocks: list[tuple[Floats, Floats, Ints, Ints, Floats]] = field(default_factory=list)
    variables: int = 0
    rows: int = 0

    def add_variables(
        self, count: int, *, lower: ArrayLike = 0.0, upper: ArrayLike = math.inf, cost: ArrayLike = 0.0,
        whole: bool = False,
    ) -> Ints:
        """Add ``count`` variables; bounds and costs are one figure or one a variable."""
        self._lower.append(_vector(lower, count))
        self._upper.append(_vector(upper, count))
        self._cost.append(_vector(cost, count))
        self._whole.append(np.full(count, whole))
        numbers = np.arange(self.variables, self.variables + count, dtype=np.int64)
        self.variables += count
        return numbers

    def add_rows(
        self, count: int, row: ArrayLike, variable: ArrayLike, coefficient: ArrayLike, *,
        lower: ArrayLike = -math.inf, upper: ArrayLike = math.inf,
    ) -> Ints:
        """Add ``count`` rows lower <= sum of coefficient x variable <= upper.

        ``row`` (0 .. count-1), ``variable`` and ``coefficient`` are the entries in coordinate form; a
        pair that occurs twice is summed.
        """
        rows = np.asarray(row, dtype=np.int64).ravel()
        columns = np.asarray(variable, dtype=np.int64).ravel()
        values = np.broadcast_to(np.asarray(coefficient, dtype=np.float64), rows.shape).ravel()
        if rows.shape != columns.shape:
            raise ValueError("row and variable must have the same length")
        self._blocks.append((_vector(lower, count), _vector(upper, count), rows, columns, values))
        numbers = np.arange(self.rows, self.rows + count, dtype=np.int64)
        self.rows += count
        return numbers

    def add_row(
        self, variable: ArrayLike, coefficient: ArrayLike, *, lower: float = -math.inf,
        upper: float = math.inf,
    ) -> int:
        """Add one row; returns its number."""
        columns = np.asarray(variable, dtype=np.int64).ravel()
        zeros = np.zeros(columns.size, dtype=np.int64)
        return int(self.add_rows(1, zeros, columns, coefficient, lower=lower, upper=upper)[0])

    def solve(
        self, seconds: float, *, gap: float = 0.0, hint: ArrayLike | None = None,
        cancelled: Callable[[], bool] | None = None, parameters: Sequence[str] = (), log: bool = False,
    ) -> LinearResult:
        """Run the model.

        Parameters
        ----------
        seconds
            Wall limit; SCIP keeps it within about 1.5 s.
        gap
            Relative gap at which SCIP may stop.
        hint
            One figure a variable; NaN where there is no hint.
        cancelled
            Asked every 0.1 s; True interrupts SCIP.
        parameters
            Lines ``name = value`` in SCIP's own form.

        Raises
        ------
        ValueError
            A coefficient is not finite, or SCIP does not know a parameter.
        """
        return _Run(self, seconds, gap, hint, cancelled, parameters, log).result()

    def bounded(self, variables: ArrayLike, lower: ArrayLike, upper: ArrayLike) -> "LinearModel":
        """Give the same model with other bounds for these variables; this one stays as it is."""
        low, high, cost, whole = self.columns()
        which = np.asarray(variables, dtype=np.int64).ravel()
        low[which], high[which] = _vector(lower, which.size), _vector(upper, which.size)
        return LinearModel(
            self.offset, [low], [high], [cost], [whole], list(self._blocks), self.variables, self.rows
        )

    def to_proto(self) -> linear_solver_pb2.MPModelProto:
        """Give the model as the wrapper's own message, checked for finiteness."""
        lower, upper, cost, whole = self.columns()
        proto = linear_solver_pb2.MPModelProto(objective_offset=self.offset)
        add = proto.variable.add
        for low, high, price, integer in zip(
            lower.tolist(), upper.tolist(), cost.tolist(), whole.tolist(), strict=True
        ):
            add(lower_bound=low, upper_bound=high, objective_coefficient=price, is_integer=integer)
        for low_rows, high_rows, starts, variables, values in self._sorted_blocks():
            ends, indices, numbers = starts.tolist(), variables.tolist(), values.tolist()
            for k, (low, high) in enumerate(zip(low_rows.tolist(), high_rows.tolist(), strict=True)):
                part = slice(ends[k], ends[k + 1])
                proto.constraint.add(
                    lower_bound=low, upper_bound=high, var_index=indices[part], coefficient=numbers[part]
                )
        return proto

    def columns(self) -> tuple[Floats, Floats, Floats, NDArray[np.bool_]]:
        """Lower bounds, upper bounds, costs and whole-number flags, checked.

        Raises
        ------
        ValueError
            A figure is NaN, a cost is infinite, or a lower bound exceeds its upper bound.
        """
        lower, upper, cost = (_joined(part) for part in (self._lower, self._upper, self._cost))
        whole = np.concatenate(self._whole) if self._whole else np.zeros(0, dtype=bool)
        if not np.isfinite(cost).all() or not math.isfinite(self.offset):
            raise ValueError("a cost of the model is not finite")
        if not (lower <= upper).all():
            raise ValueError("a lower bound of the model exceeds its upper bound")
        return lower, upper, cost, whole

    def surely_bounded(self) -> bool:
        """Whether no variable can lower the cost without end, whatever the rows say."""
        lower, upper, cost, _ = self.columns()
        return not bool(((cost < 0) & np.isinf(upper) | (cost > 0) & np.isinf(lower)).any())

    def _sorted_blocks(self) -> list[tuple[Floats, Floats, Ints, Ints, Floats]]:
        blocks = []
        for lower, upper, rows, variables, values in self._blocks:
            if not np.isfinite(values).all() or not (lower <= upper).all():
                raise ValueError("a row of the model is not finite, or asks for the impossible")
            key = rows * max(self.variables, 1) + variables
            unique, place = np.unique(key, return_inverse=True)
            summed = np.bincount(place, weights=values, minlength=unique.size)
            counts = np.bincount(unique // max(self.variables, 1), minlength=lower.size)
            starts = np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)
            columns = (unique % max(self.variables, 1)).astype(np.int64)
            blocks.append((lower, upper, starts, columns, summed.astype(np.float64)))
        return blocks


class _Run:
    """One call of the wrapper: load, limit, hint, interrupt, read back."""

    def __init__(
        self, model: LinearModel, seconds: float, gap: float, hint: ArrayLike | None,
        cancelled: Callable[[], bool] | None, parameters: Sequence[str], log: bool,
    ) -> None:
        self.model, self.seconds, self.gap = model, seconds, gap
        self.hint, self.cancelled, self.parameters, self.log = hint, cancelled, parameters, log
        self.whole = bool(model.columns()[3].any())

    def result(self) -> LinearResult:
        if self.seconds <= 0 or (self.cancelled is not None and self.cancelled()):
            return LinearResult("unknown", None, math.inf, -math.inf)
        began = time.monotonic()
        solver = pywraplp.Solver.CreateSolver("SCIP" if self.whole else "GLOP")
        refusal = solver.LoadModelFromProto(self.model.to_proto())
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
            given = _vector(self.hint, self.model.variables)
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


SCIP_INFINITY = 1e19
_STATUS = {0: "optimal", 1: "feasible", 2: "infeasible", 3: "unbounded"}


def _vector(value: ArrayLike, count: int) -> Floats:
    """One figure for each of ``count`` from one figure or ``count`` figures."""
    given = np.asarray(value, dtype=np.float64)
    if given.ndim and given.shape != (count,):
        raise ValueError(f"{count} figures expected, not shape {given.shape}")
    return np.array(np.broadcast_to(given, (count,)))


def _joined(parts: list[Floats]) -> Floats:
    joined = np.concatenate(parts) if parts else np.zeros(0)
    if np.isnan(joined).any():
        raise ValueError("a figure of the model is not a number")
    return joined
