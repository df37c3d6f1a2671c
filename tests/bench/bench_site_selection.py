"""Site selection beside whole models, in one run: time, cost, bound, gap, memory and the ratio of times.

Run with ``python -m tests.bench.bench_site_selection [CASE ...] [--methods ...] [--seconds S]``.

A CASE is a name of a published instance (``capa``, ``MO1``, ``pmed3``, ``capa-8000``, ``p12``), a folder of them
(``orlib_uncapacitated``), ``like-capc``, or ``MxN`` or ``MxN@LEVEL`` for a case from coordinates (``500x5000@0.1``;
the level says how dear sites are). Methods: ``whole`` is the strong model handed whole to the wrapper, ``highs``
the same model in HiGHS, ``ours`` the engine. Without a CASE: capa, capb and like-capc with all three methods, then
the growth table with the engine alone.

Every measurement runs in a process of its own, so that memory is its own too. Wall and CPU seconds are both given:
limits are wall time, and on a busy machine the CPU seconds tell how little a method was given.
"""

import argparse
import json
import resource
import subprocess
import sys
import time
from dataclasses import asdict, dataclass

import highspy
import numpy as np

from ledgersolve.mip import Limits
from ledgersolve.mip.wrapper import message
from ledgersolve.site_selection.audit import audit
from ledgersolve.site_selection.case import Case
from ledgersolve.site_selection.lanes import Lanes
from ledgersolve.site_selection.model import build
from ledgersolve.site_selection.solve import solve
from ledgersolve.site_selection.whole import solve_whole
from tests.site_benchmarks import from_coordinates, like_capc, published

FOLDERS = (
    "orlib_uncapacitated", "orlib_capacitated", "orlib_single_source", "holmberg_single_source",
    "ufllib_uncapacitated", "orlib_pmedian",
)
SIDE = ("capa", "capb", "like-capc")
GROWTH = (("100x1000", 60.0), ("200x2000", 60.0), ("500x5000", 120.0), ("1000x10000", 300.0), ("1000x20000", 300.0))
METHODS = ("whole", "highs", "ours")


@dataclass(frozen=True)
class Figures:
    """What one method gave on one case."""

    cost: float | None
    bound: float | None
    wall: float
    cpu: float
    megabytes: float

    @property
    def gap(self) -> float | None:
        """Gap in per cent of the cost."""
        if self.cost is None or self.bound is None:
            return None
        return 100.0 * max(self.cost - self.bound, 0.0) / self.cost if self.cost else 0.0


def names(given: list[str]) -> list[str]:
    """Names of cases, folders taken apart into ``folder/instance``."""
    found: list[str] = []
    for name in given:
        inside = [f"{name}/{entry.name}" for entry in published(name)] if name in FOLDERS else [name]
        found.extend(inside)
    return found


def case_named(name: str) -> tuple[Case, float | None]:
    """Give a case and its published value, where there is one."""
    if name == "like-capc":
        return like_capc(), None
    size, _, level = name.partition("@")
    m, _, n = size.partition("x")
    if m.isdigit() and n.isdigit():
        return from_coordinates(int(m), int(n), seed=1, level=float(level or 0.1)), None
    folder, _, instance = name.rpartition("/")
    for place in (folder,) if folder else FOLDERS:
        for entry in published(place):
            if entry.name == instance:
                return entry.case(), entry.value
    raise SystemExit(f"no case is called {name!r}")


def highs(case: Case, seconds: float) -> tuple[float | None, float | None]:
    """Run the strong model in HiGHS, filled in one go: cost and bound."""
    model = build(Lanes.of(case)).model
    lower, upper, cost, whole = model.columns()
    proto = message(model)
    rows = [(row.lower_bound, row.upper_bound, row.var_index, row.coefficient) for row in proto.constraint]
    solver = highspy.Highs()
    for option, value in (("output_flag", False), ("time_limit", seconds), ("threads", 1), ("mip_rel_gap", 1e-4)):
        solver.setOptionValue(option, value)
    lp = highspy.HighsLp()
    lp.num_col_, lp.num_row_, lp.offset_ = model.variables, len(rows), model.offset
    lp.col_cost_, lp.col_lower_, lp.col_upper_ = cost, lower, upper
    lp.row_lower_ = np.array([row[0] for row in rows])
    lp.row_upper_ = np.array([row[1] for row in rows])
    lp.a_matrix_.format_ = highspy.MatrixFormat.kRowwise
    lp.a_matrix_.start_ = np.concatenate([[0], np.cumsum([len(row[2]) for row in rows])]).astype(np.int32)
    lp.a_matrix_.index_ = np.concatenate([np.array(row[2], dtype=np.int32) for row in rows])
    lp.a_matrix_.value_ = np.concatenate([np.array(row[3]) for row in rows])
    kinds = highspy.HighsVarType
    lp.integrality_ = [kinds.kInteger if flag else kinds.kContinuous for flag in whole.tolist()]
    solver.passModel(lp)
    solver.run()
    info = solver.getInfo()
    found = info.primal_solution_status == 2
    return (info.objective_function_value if found else None), info.mip_dual_bound


def run_method(method: str, case: Case, seconds: float) -> tuple[float | None, float | None]:
    """Cost and bound of one method."""
    if method == "highs":
        return highs(case, seconds)
    if method == "whole":
        answer = solve_whole(Lanes.of(case), Limits(seconds).start())
        return (None if answer.plan is None else audit(case, answer.plan).total), answer.bound
    solved = solve(case, Limits(seconds))
    if solved.plan is not None and not audit(case, solved.plan).ok:
        raise AssertionError("the audit does not confirm the plan")
    return solved.cost, solved.bound


def measured(method: str, name: str, seconds: float) -> Figures:
    """Run one method on one case in a process of its own."""
    this = "tests.bench.bench_site_selection"
    command = [sys.executable, "-m", this, "--one", method, name, "--seconds", str(seconds)]
    done = subprocess.run(command, capture_output=True, text=True, check=True)
    return Figures(**json.loads(done.stdout.strip().split("\n")[-1]))


def one(method: str, name: str, seconds: float) -> None:
    """Body of the process: measure and print."""
    case, _ = case_named(name)
    wall, cpu = time.monotonic(), time.process_time()
    cost, bound = run_method(method, case, seconds)
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    bound = None if bound is None or not np.isfinite(bound) else bound
    print(json.dumps(asdict(Figures(cost, bound, time.monotonic() - wall, time.process_time() - cpu, peak))))


def text(value: float | None, form: str) -> str:
    """A figure of a table, or a dash."""
    return "-" if value is None else format(value, form)


def row(name: str, method: str, figures: Figures, value: float | None, ours: Figures | None) -> None:
    """Print one line; ``value`` is the published one, ``ours`` what times are compared with."""
    above = None if value is None or figures.cost is None else 100.0 * (figures.cost / value - 1.0)
    over = "" if value is None or figures.bound is None or figures.bound <= value * (1 + 1e-7) else " BOUND TOO HIGH"
    ratio = None if ours is None else figures.cpu / max(ours.cpu, 1e-3)
    print(
        f"| {name} | {method} | {text(figures.cost, '.2f')} | {text(figures.bound, '.2f')}{over} "
        f"| {text(figures.gap, '.4f')} | {text(above, '.4f')} | {figures.wall:.2f} | {figures.cpu:.2f} "
        f"| {figures.megabytes:.0f} | {text(ratio, '.1f')} |", flush=True,
    )


def head() -> None:
    """Print the head of a table."""
    print("| case | method | cost | bound | gap % | above published % | wall s | CPU s | MB | CPU / ours |")
    print("|---|---|---|---|---|---|---|---|---|---|")


def side_by_side(cases: list[str], methods: list[str], seconds: float) -> None:
    """All methods on the same cases with the same seconds, and how much CPU time each took on the sum."""
    head()
    total = dict.fromkeys(methods, 0.0)
    for name in cases:
        _, value = case_named(name)
        found = {method: measured(method, name, seconds) for method in methods}
        for method, figures in found.items():
            row(name, method, figures, value, found.get("ours"))
            total[method] += figures.cpu
    if len(cases) > 1:
        print("CPU seconds on the sum: " + ", ".join(f"{method} {used:.2f}" for method, used in total.items()))


def growth() -> None:
    """How time and memory of the engine grow with size."""
    print("\nGrowth, cases from coordinates, the engine alone:")
    head()
    for name, seconds in GROWTH:
        row(name, "ours", measured("ours", name, seconds), None, None)


def main() -> None:
    """Read the command line and run."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("cases", nargs="*", metavar="CASE")
    parser.add_argument("--methods", nargs="+", choices=METHODS, default=list(METHODS))
    parser.add_argument("--seconds", type=float, default=60.0, help="wall limit of each method on each case")
    parser.add_argument("--one", nargs=2, metavar=("METHOD", "CASE"), help=argparse.SUPPRESS)
    given = parser.parse_args()
    if given.one:
        one(*given.one, given.seconds)
    elif given.cases:
        side_by_side(names(given.cases), given.methods, given.seconds)
    else:
        side_by_side(list(SIDE), given.methods, given.seconds)
        growth()


if __name__ == "__main__":
    main()
