"""Lot-sizing cases for benches and tests: a seeded generator, and the readers of the published sets."""

import csv
import os
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from ledgersolve.lot_sizing.case import Case, plain_case
from ledgersolve.lot_sizing.wagner_whitin import WagnerWhitin

# Pochet & Wolsey (2006), section 1.2: 12 items, 15 weeks, published optimum 5730 (sum of end stocks).
CONSUMER_DEMAND = """
0 95 110 96 86 124 83 108 114 121 110 124 104 86 87
98 96 96 98 103 104 122 101 89 108 101 109 106 108 76
106 0 89 123 96 105 83 82 112 109 119 85 99 80 123
98 121 0 105 98 96 101 81 117 76 103 81 95 105 102
0 124 113 123 123 79 111 98 97 80 98 124 78 108 109
103 102 0 95 107 105 107 105 75 93 115 113 111 105 85
110 93 0 112 84 124 98 101 83 87 105 118 115 106 78
85 92 101 110 93 96 120 109 121 87 92 85 91 93 109
122 116 109 0 105 108 88 98 77 90 110 102 107 99 96
120 124 94 105 92 86 101 106 75 109 83 95 79 108 100
117 96 78 0 108 87 114 107 110 94 104 101 108 110 80
125 112 75 0 116 103 122 88 85 84 76 102 84 88 82
"""
CONSUMER_OPENING = [83, 31, 11, 93, 82, 72, 23, 91, 83, 34, 61, 82]
CONSUMER_CLEANING = [30, 20, 30, 40, 40, 10, 30, 20, 10, 50, 30, 20]


@dataclass(frozen=True)
class Recipe:
    """What a generated case holds.

    ``use`` is the load of the best plan without capacities (setups included) as a share of the capacity.
    ``families`` is the number of items a family, ``least_lots`` the share of items with a least lot of one to
    two mean demands, ``overtime`` the overtime limit as a share of the capacity, ``use_cost`` money for
    each period in which a resource runs. ``stocked`` chooses how the first periods are made possible:
    opening stock of up to three periods, or no demand in up to three periods.
    """

    items: int
    periods: int
    resources: int = 1
    use: float = 0.95
    setup_times: bool = True
    families: int = 0
    overtime: float = 0.0
    least_lots: float = 0.0
    use_cost: float = 0.0
    stocked: bool = True


def generated(recipe: Recipe, seed: int) -> Case:
    """Give the case of a recipe and a seed; the same on every machine."""
    rng = np.random.default_rng(seed)
    n, t, r = recipe.items, recipe.periods, recipe.resources
    level = rng.integers(20, 200, (n, 1))
    demand = np.round(level * rng.uniform(0.4, 1.6, (n, t)))
    demand *= rng.random((n, t)) < rng.uniform(0.7, 1.0, (n, 1))
    cover = rng.integers(0, 4, n)
    first = demand * (np.arange(t) < cover[:, None])
    holding = rng.uniform(0.5, 2.0, (n, 1))
    between = rng.uniform(1.0, 6.0, (n, 1))
    setup = np.round(0.5 * holding * level * between**2)
    case = plain_case(demand if recipe.stocked else demand - first, setup, holding)
    resource = rng.permutation(n) % r if r else np.full(n, -1)
    time = np.round(rng.uniform(0.5, 1.5, n), 2)
    setup_time = np.round(rng.uniform(0.2, 1.0, n) * level[:, 0] * time)
    changes: dict[str, object] = {
        "opening_stock": first.sum(axis=1) if recipe.stocked else np.zeros(n), "item_resource": resource,
        "time_per_unit": time, "setup_time": setup_time if recipe.setup_times else np.zeros(n),
    }
    if recipe.least_lots:
        has = rng.random(n) < recipe.least_lots
        changes["least_lot"] = np.where(has, np.round(level[:, 0] * rng.uniform(1.0, 2.0, n)), 0.0)
    case = replace(case, **changes)
    if recipe.families:
        case = _with_families(case, recipe.families, rng)
    return _with_resources(case, recipe) if r else case


def _with_families(case: Case, size: int, rng: np.random.Generator) -> Case:
    """Put the items of each resource into families of ``size``; part of their setups is the family's."""
    family = np.full(case.n, -1, dtype=np.int64)
    resources: list[int] = []
    for r in range(max(int(case.item_resource.max()) + 1, 1)):
        members = np.flatnonzero(case.item_resource == r)
        for start in range(0, members.size, size):
            family[members[start : start + size]] = len(resources)
            resources.append(r)
    count = len(resources)
    mean = np.array([case.setup_cost[family == f].mean() for f in range(count)])
    return replace(
        case, families=tuple(f"F{f + 1}" for f in range(count)), item_family=family,
        family_cost=np.round(mean * rng.uniform(0.3, 1.0, count)), setup_cost=case.setup_cost * 0.7,
        family_time=np.array([case.setup_time[family == f].mean() for f in range(count)]).round(),
        family_resource=np.array(resources), setup_time=np.round(case.setup_time * 0.7),
    )


def _with_resources(case: Case, recipe: Recipe) -> Case:
    free = WagnerWhitin(case, np.arange(case.n)).schedule(case.setup_cost, case.unit_cost)
    load = case.time_per_unit[:, None] * free.made + case.setup_time[:, None] * (free.made > 0)
    r = recipe.resources
    need = np.array([load[case.item_resource == k].sum() for k in range(r)])
    for f in range(len(case.families)):
        runs = (free.made[case.item_family == f] > 0).any(axis=0).sum()
        need[case.family_resource[f]] += case.family_time[f] * runs
    capacity = np.ceil(need / case.t / recipe.use)
    dear = 2 * case.setup_cost.mean() / max(float(case.setup_time.mean()), 1.0)
    return replace(
        case, resources=tuple(f"R{k + 1}" for k in range(r)),
        capacity=np.repeat(capacity[:, None], case.t, axis=1),
        overtime_limit=np.round(capacity * recipe.overtime), overtime_cost=np.full(r, np.round(dear, 2)),
        use_cost=np.full(r, recipe.use_cost),
    )


def consumer_goods() -> Case:
    """Give the published case of 12 items over 15 weeks on its mixing machine, packing machines left out.

    The contract knows one resource an item; without the packing machines the published optimum of 5730 can
    only fall.
    """
    demand = np.array([line.split() for line in CONSUMER_DEMAND.split("\n") if line], dtype=float)
    safety = np.array([10.0] * 6 + [20.0] * 6)
    return replace(
        plain_case(demand, 0.0, 1.0), opening_stock=np.array(CONSUMER_OPENING, dtype=float),
        safety_stock=safety, closing_stock=safety, item_resource=np.zeros(12, dtype=np.int64),
        time_per_unit=np.ones(12), setup_time=np.array(CONSUMER_CLEANING, dtype=float), resources=("mixing",),
        capacity=np.full((1, 15), 1400.0), overtime_limit=np.zeros(1), overtime_cost=np.zeros(1),
        use_cost=np.zeros(1),
    )


@dataclass(frozen=True)
class Published:
    """A published case, with the bounds known for its optimum (equal where it is proven)."""

    name: str
    case: Case
    lower: float
    upper: float


def data_folder() -> Path:
    """Give the folder of the benchmark data: LEDGERSOLVE_BENCH_DATA, else beside the project."""
    given = os.environ.get("LEDGERSOLVE_BENCH_DATA")
    return Path(given) if given else Path(__file__).resolve().parents[3] / "shared" / "data"


def trigeiro_set() -> list[Published]:
    """Give the cases of Trigeiro, Thomas & McClain (1989) with their published or recomputed values."""
    folder = data_folder() / "lot_sizing_setup_times"
    with (folder / "index.csv").open(newline="") as file:
        rows = list(csv.DictReader(file))
    found = []
    for row in rows:
        lower, _, upper = row["published_value"].partition("..")
        case = read_trigeiro((folder / row["file"]).read_text())
        found.append(Published(row["instance"], case, float(lower), float(upper or lower)))
    return found


def read_trigeiro(text: str) -> Case:
    """Read one case: sizes, capacity, production time, holding, setup time and cost an item, demand."""
    numbers = np.array(text.split(), dtype=float)
    n, t = int(numbers[0]), int(numbers[1])
    items = numbers[3 : 3 + 4 * n].reshape(n, 4)
    demand = numbers[3 + 4 * n : 3 + 4 * n + n * t].reshape(t, n).T
    return replace(
        plain_case(demand, items[:, 3:4], items[:, 1:2]), item_resource=np.zeros(n, dtype=np.int64),
        time_per_unit=items[:, 0], setup_time=items[:, 2], resources=("machine",),
        capacity=np.full((1, t), numbers[2]), overtime_limit=np.zeros(1), overtime_cost=np.zeros(1),
        use_cost=np.zeros(1),
    )
