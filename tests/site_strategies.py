"""Random small site-selection cases with the features a test asks for; whole figures, so that ties occur."""

import numpy as np
from hypothesis import strategies as st

from ledgersolve.site_selection.case import Case, plain_case

FEATURES = (
    "capacity", "least volume", "single source", "single source for some", "groups", "counts", "rules",
    "today", "handling", "distances", "share within", "lane most", "unmet", "missing lanes", "whole demand",
    "zero demand", "zero fixed cost",
)
VOLUME_FEATURES = ("capacity", "least volume", "lane most")
"""Features that make volumes matter."""


@st.composite
def cases(
    draw: st.DrawFn, features: tuple[str, ...] = FEATURES, most_sites: int = 4, most_customers: int = 4
) -> Case:
    """Draw a case; each of ``features`` is on or off at random."""
    m = draw(st.integers(1, most_sites))
    n = draw(st.integers(1, most_customers))
    chosen = {name for name in features if draw(st.booleans())}
    random = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    return random_case(random, m, n, chosen)


def random_case(random: np.random.Generator, m: int, n: int, chosen: set[str]) -> Case:
    """Give a case of this size with exactly these features."""
    changes: dict[str, object] = {}
    demand = random.integers(1, 10, n).astype(float)
    if "zero demand" in chosen:
        demand[random.random(n) < 0.3] = 0.0
    fixed = random.integers(0, 40, m).astype(float)
    if "zero fixed cost" in chosen:
        fixed[random.random(m) < 0.5] = 0.0
    cost = random.integers(0, 12, (m, n)).astype(float)
    if "whole demand" in chosen:
        changes["cost_is_whole"] = True
        cost *= 4
    if "missing lanes" in chosen:
        cost[random.random((m, n)) < 0.25] = np.inf
    _volume_features(random, m, n, chosen, demand, changes)
    _site_features(random, m, chosen, changes)
    _distance_features(random, m, n, chosen, changes)
    if "single source" in chosen:
        changes["single_source"] = np.ones(n, dtype=bool)
    elif "single source for some" in chosen:
        changes["single_source"] = random.random(n) < 0.5
    if "handling" in chosen:
        changes["handling_cost"] = random.integers(0, 4, m).astype(float)
    if "unmet" in chosen:
        changes["unmet_cost"] = float(random.integers(1, 20))
    return plain_case(fixed, cost, demand, **changes)


def _volume_features(
    random: np.random.Generator, m: int, n: int, chosen: set[str], demand: np.ndarray,
    changes: dict[str, object],
) -> None:
    total = max(1.0, float(demand.sum()))
    if "capacity" in chosen:
        capacity = np.round(random.uniform(0.3, 1.1, m) * total)
        capacity[random.random(m) < 0.2] = np.inf
        changes["capacity"] = capacity
    if "least volume" in chosen:
        least = np.round(random.uniform(0, 0.6, m) * total)
        changes["least_volume"] = np.where(random.random(m) < 0.6, least, 0.0)
    if "lane most" in chosen:
        most = random.integers(0, 10, (m, n)).astype(float)
        most[random.random((m, n)) < 0.5] = np.inf
        changes["lane_most"] = most


def _site_features(random: np.random.Generator, m: int, chosen: set[str], changes: dict[str, object]) -> None:
    if "groups" in chosen:
        changes["group"] = random.integers(-1, 2, m).astype(np.int64)
        changes["group_names"] = ("north", "south")
    if "counts" in chosen:
        low, high = sorted(random.integers(0, m + 1, 2).tolist())
        changes["fewest_sites"] = int(low) if random.random() < 0.7 else None
        changes["most_sites"] = int(high) if random.random() < 0.7 else None
    if "rules" in chosen:
        changes["rule"] = random.choice([0, 0, 0, 1, -1], m).astype(np.int64)
    if "today" in chosen:
        changes["today"] = random.random(m) < 0.5
        changes["opening_cost"] = random.integers(0, 15, m).astype(float)
        changes["closing_cost"] = random.integers(0, 30, m).astype(float)


def _distance_features(
    random: np.random.Generator, m: int, n: int, chosen: set[str], changes: dict[str, object]
) -> None:
    if not {"distances", "share within"} & chosen:
        return
    changes["distance"] = random.integers(0, 20, (m, n)).astype(float)
    if "distances" in chosen:
        changes["longest_distance"] = float(random.integers(8, 20))
        changes["customer_longest"] = np.where(random.random(n) < 0.3, random.integers(5, 25, n), np.nan)
    if "share within" in chosen:
        changes["share_within"] = float(random.choice([0.3, 0.5, 0.8, 1.0]))
        changes["share_distance"] = float(random.integers(5, 20))
