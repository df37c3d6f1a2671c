"""Lot sizing beside whole models, in one run: time, cost, bound, memory and the gap that is left.

Run with ``python -m tests.bench.bench_lot_sizing [bars | side | growth | published | alone] [--seeds N]``.

- ``bars``: the sizes that the engine is held to, several seeds each.
- ``side``: the engine beside the textbook big-M model and the strong model through the wrapper and the strong
  model in HiGHS (``highspy``), the same seconds each.
- ``growth``: how time and gap grow from 20 x 26 to 2000 x 104.
- ``published``: the cases of Trigeiro, Thomas & McClain (1989), beside the strong model, and the case of Pochet &
  Wolsey (2006).
- ``alone``: items without shared resources.

Every measurement runs in a process of its own, so that memory is its own too. Wall and CPU seconds are both
given: limits are wall time, and on a busy machine the CPU seconds tell how little the engine was given.
"""

import argparse
import json
import resource
import subprocess
import sys
import time
from dataclasses import asdict, dataclass, replace

import highspy
import numpy as np

from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.model import whole_model
from ledgersolve.lot_sizing.solve import solve
from ledgersolve.lot_sizing.whole import solve_whole
from ledgersolve.mip import Limits
from ledgersolve.mip.wrapper import message
from tests.bench.lot_cases import Recipe, consumer_goods, generated, trigeiro_set
from tests.lot_oracle import whole_big_m

FULL = Recipe(500, 52, 4, 0.90, families=6, overtime=0.2, least_lots=0.3)
BARS = {
    "200 x 52, 1 resource 95 %": (Recipe(200, 52, 1, 0.95), 30),
    "500 x 52, 4 resources 90 %, families, overtime, least lots": (FULL, 120),
    "2000 x 52, 8 resources 90 %": (Recipe(2000, 52, 8, 0.90), 300),
    "2000 x 52, 8 resources 90 %, families, overtime, least lots": (
        replace(FULL, items=2000, resources=8), 300,
    ),
}
GROWTH = (
    (20, 26, 1, 30), (50, 26, 1, 30), (100, 52, 1, 30), (200, 52, 1, 30), (500, 52, 4, 60), (1000, 52, 4, 120),
    (2000, 52, 8, 300), (2000, 104, 8, 300),
)
SIDE = ((20, 26, 1), (100, 52, 1), (200, 52, 1))


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
        return 100.0 * max(self.cost - self.bound, 0.0) / self.cost


def highs(case: Case, seconds: float) -> tuple[float | None, float | None]:
    """Run the strong model in HiGHS: cost and bound."""
    proto = message(whole_model(case).model)
    solver = highspy.Highs()
    solver.setOptionValue("output_flag", False)
    solver.setOptionValue("time_limit", seconds)
    solver.setOptionValue("threads", 1)
    inf = highspy.kHighsInf
    for k, variable in enumerate(proto.variable):
        solver.addVar(variable.lower_bound, min(variable.upper_bound, inf))
        solver.changeColCost(k, variable.objective_coefficient)
        if variable.is_integer:
            solver.changeColIntegrality(k, highspy.HighsVarType.kInteger)
    for row in proto.constraint:
        index, value = np.array(row.var_index, dtype=np.int32), np.array(row.coefficient)
        solver.addRow(max(row.lower_bound, -inf), min(row.upper_bound, inf), index.size, index, value)
    solver.run()
    info = solver.getInfo()
    found = info.primal_solution_status == 2
    return (info.objective_function_value if found else None), info.mip_dual_bound


def run_method(method: str, case: Case, seconds: float) -> tuple[float | None, float | None]:
    """Cost and bound of one method."""
    if method == "big M":
        result = whole_big_m(case, seconds)
        return (result.objective if result.has_plan else None), result.bound
    if method == "HiGHS":
        return highs(case, seconds)
    engine = solve if method == "ours" else solve_whole
    answer = engine(case, Limits(seconds))
    if answer.plan is not None and not audit(case, answer.plan).ok:
        raise AssertionError("the audit does not confirm the plan")
    return answer.cost, answer.bound


def case_named(name: str) -> Case:
    """Give a case by its name: a recipe with a seed, or a published one."""
    given = json.loads(name)
    if "published" in given:
        if given["published"] == "consumer goods":
            return consumer_goods()
        return next(entry.case for entry in trigeiro_set() if entry.name == given["published"])
    if "long item" in given:
        rng = np.random.default_rng(given["seed"])
        return plain_case(rng.integers(0, 100, (1, given["long item"])), 500.0, 1.0)
    return generated(Recipe(**given["recipe"]), given["seed"])


def measured(method: str, name: dict[str, object], seconds: float) -> Figures:
    """Run one method on one case in a process of its own."""
    command = [sys.executable, "-m", "tests.bench.bench_lot_sizing", "one", method, json.dumps(name), str(seconds)]
    done = subprocess.run(command, capture_output=True, text=True, check=True)
    return Figures(**json.loads(done.stdout.strip().split("\n")[-1]))


def one(method: str, name: str, seconds: float) -> None:
    """Body of the process: measure and print."""
    case = case_named(name)
    wall, cpu = time.monotonic(), time.process_time()
    cost, bound = run_method(method, case, seconds)
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    figures = Figures(cost, bound, time.monotonic() - wall, time.process_time() - cpu, peak)
    print(json.dumps(asdict(figures)))


def row(label: str, method: str, figures: Figures, best: float | None = None) -> None:
    """Print one line of a table; ``best`` adds the cost above it in per cent."""
    def text(value: float | None, form: str) -> str:
        return "-" if value is None else format(value, form)

    above = None if best is None or figures.cost is None else 100.0 * (figures.cost / best - 1.0)
    print(
        f"| {label} | {method} | {text(figures.cost, '.2f')} | {text(figures.bound, '.2f')} "
        f"| {text(figures.gap, '.4f')} | {text(above, '.3f')} | {figures.wall:.1f} | {figures.cpu:.1f} "
        f"| {figures.megabytes:.0f} |", flush=True,
    )


def head() -> None:
    """Print the head of a table."""
    print("| case | method | cost | bound | gap % | above best % | wall s | CPU s | MB |")
    print("|---|---|---|---|---|---|---|---|---|")


def recipe_name(recipe: Recipe, seed: int) -> dict[str, object]:
    """Give the name of a generated case."""
    return {"recipe": asdict(recipe), "seed": seed}


def bars(seeds: int) -> None:
    """The sizes that the engine is held to."""
    head()
    for label, (recipe, seconds) in BARS.items():
        for seed in range(1, seeds + 1):
            row(f"{label}, seed {seed}", "ours", measured("ours", recipe_name(recipe, seed), seconds))


def side(seeds: int) -> None:
    """All methods on the same cases with the same seconds."""
    head()
    for items, periods, resources in SIDE:
        for seed in range(1, seeds + 1):
            name = recipe_name(Recipe(items, periods, resources, 0.95), seed)
            found = {method: measured(method, name, 60) for method in ("big M", "strong", "HiGHS", "ours")}
            best = min(f.cost for f in found.values() if f.cost is not None)
            for method, figures in found.items():
                row(f"{items} x {periods}, seed {seed}", method, figures, best)


def growth(seeds: int) -> None:
    """How time and gap grow with size."""
    head()
    for items, periods, resources, seconds in GROWTH:
        for seed in range(1, seeds + 1):
            name = recipe_name(Recipe(items, periods, resources, 0.95), seed)
            row(f"{items} x {periods} over {resources}, seed {seed}", "ours", measured("ours", name, seconds))


def published(_: int) -> None:
    """Published cases, beside the strong model; ``above best`` is above the published optimum or upper bound."""
    head()
    away: dict[str, list[float]] = {"ours": [], "strong": []}
    for entry in trigeiro_set():
        for method in away:
            figures = measured(method, {"published": entry.name}, 60)
            row(entry.name, method, figures, entry.upper)
            away[method].append(np.inf if figures.cost is None else 100 * (figures.cost / entry.upper - 1))
    for method, distances in away.items():
        print(f"mean distance of {method}: {np.mean(distances):.3f} %")
    row("ML-01", "ours", measured("ours", {"published": "consumer goods"}, 120), 5730.0)


def alone(seeds: int) -> None:
    """Items without shared resources."""
    head()
    for seed in range(1, seeds + 1):
        name = recipe_name(Recipe(1000, 104, 0), seed)
        row(f"1000 x 104 alone, seed {seed}", "ours", measured("ours", name, 60))
        row(f"1 x 5000, seed {seed}", "ours", measured("ours", {"long item": 5000, "seed": seed}, 60))


TABLES = {"bars": bars, "side": side, "growth": growth, "published": published, "alone": alone}

if __name__ == "__main__":
    if sys.argv[1:2] == ["one"]:
        one(sys.argv[2], sys.argv[3], float(sys.argv[4]))
    else:
        parser = argparse.ArgumentParser(description="Measure lot sizing beside whole models.")
        parser.add_argument("table", choices=TABLES)
        parser.add_argument("--seeds", type=int, default=2)
        given = parser.parse_args()
        TABLES[given.table](given.seeds)
