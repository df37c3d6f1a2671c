"""Published site-selection cases as this project's cases; the folder's own README describes every format."""

import csv
import gzip
import os
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

from ledgersolve.site_selection.case import Case, plain_case


@dataclass(frozen=True)
class Published:
    """An instance, what it is, its published value, and how that value came about."""

    name: str
    kind: str
    file: Path
    value: float
    value_is: str
    row: dict[str, str]

    def case(self) -> Case:
        """Read the instance."""
        return READERS[self.kind](self)


def data_folder() -> Path:
    """Give the folder of the benchmark data: LEDGERSOLVE_BENCH_DATA, else beside the project."""
    given = os.environ.get("LEDGERSOLVE_BENCH_DATA")
    return Path(given) if given else Path(__file__).resolve().parents[2] / "shared" / "data"


def published(folder: str) -> list[Published]:
    """All instances of a folder; an empty list where the data are absent."""
    index = data_folder() / folder / "index.csv"
    if not index.exists():
        return []
    with index.open(newline="") as file:
        rows = list(csv.DictReader(file))
    return [
        Published(
            row["instance"], row["kind"], index.parent / row["file"], float(row["published_value"]),
            row["value_is"], row,
        )
        for row in rows
    ]


def parameters(folder: str, *, slow: tuple[str, ...] = (), leave_out: tuple[str, ...] = ()) -> list[object]:
    """Instances as test parameters, some of them marked long; one skipped parameter where data are absent."""
    found = [entry for entry in published(folder) if not entry.name.startswith(leave_out or "\0")]
    if not found:
        return [pytest.param(None, marks=pytest.mark.skip(reason=f"no benchmark data in {folder}"))]
    return [
        pytest.param(entry, id=entry.name, marks=[pytest.mark.long] if entry.name.startswith(slow or "\0") else [])
        for entry in found
    ]


def _numbers(file: Path) -> Iterator[str]:
    with gzip.open(file, "rt") if file.suffix == ".gz" else file.open() as text:
        yield from text.read().split()


def _orlib(file: Path) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Fixed costs, whole costs (site x customer), demand of an OR-Library file."""
    words = list(_numbers(file))
    m, n = int(words[0]), int(words[1])
    fixed = np.array(words[3 : 2 + 2 * m : 2], dtype=float)
    table = np.array(words[2 + 2 * m : 2 + 2 * m + n * (m + 1)], dtype=float).reshape(n, m + 1)
    return fixed, np.ascontiguousarray(table[:, 1:].T), table[:, 0]


def _table(file: Path) -> tuple[np.ndarray, np.ndarray, int]:
    """Fixed costs, costs (site x customer) and the third figure of a file of the UflLib kind."""
    words = list(_numbers(file))
    m, n = int(words[2]), int(words[3])
    table = np.array(words[5 : 5 + m * (n + 2)], dtype=float).reshape(m, n + 2)
    return table[:, 1], np.ascontiguousarray(table[:, 2:]), int(words[4])


def _uncapacitated(entry: Published) -> Case:
    head = next(_numbers(entry.file))
    fixed, cost = _table(entry.file)[:2] if head == "FILE:" else _orlib(entry.file)[:2]
    return plain_case(fixed, cost, cost_is_whole=True)


def _capacitated(entry: Published) -> Case:
    fixed, cost, demand = _orlib(entry.file)
    capacity = np.full(fixed.size, float(entry.row["capacity"]))
    single = np.full(demand.size, entry.kind == "single-source")
    return plain_case(fixed, cost, demand, cost_is_whole=True, capacity=capacity, single_source=single)


def _single_source(entry: Published) -> Case:
    if entry.row.get("capacity"):
        return _capacitated(entry)
    words = list(_numbers(entry.file))
    m, n = int(words[0]), int(words[1])
    sites = np.array(words[2 : 2 + 2 * m], dtype=float).reshape(m, 2)
    demand = np.array(words[2 + 2 * m : 2 + 2 * m + n], dtype=float)
    cost = np.array(words[2 + 2 * m + n : 2 + 2 * m + n + m * n], dtype=float).reshape(m, n)
    return plain_case(
        sites[:, 1], cost, demand, cost_is_whole=True, capacity=sites[:, 0], single_source=np.ones(n, dtype=bool)
    )


def _p_median(entry: Published) -> Case:
    _, distance, p = _table(entry.file)
    return plain_case(
        np.zeros(distance.shape[0]), distance, cost_is_whole=True, fewest_sites=p, most_sites=p
    )


READERS = {
    "uncapacitated": _uncapacitated, "capacitated": _capacitated, "single-source": _single_source,
    "p-median": _p_median,
}


def from_coordinates(m: int, n: int, seed: int, level: float = 0.1, side: float = 1000.0) -> Case:
    """Give a case of random points in a square, costs per unit and distance 1.

    A site costs ``level`` hundredths of serving everybody from one ``side`` away, a fifth more or less.
    """
    random = np.random.default_rng(seed)
    sites, customers = random.random((m, 2)) * side, random.random((n, 2)) * side
    demand = random.integers(1, 100, n).astype(float)
    distance = np.empty((m, n))
    for j in range(m):
        distance[j] = np.hypot(*(sites[j] - customers).T)
    fixed = level * 0.01 * demand.sum() * side * random.uniform(0.8, 1.2, m)
    return plain_case(fixed, distance, demand)


def like_capc(seed: int = 1, m: int = 100, n: int = 1000) -> Case:
    """Give a case like the large OR-Library ones: random points, dear sites, costs of whole customers."""
    random = np.random.default_rng(seed)
    sites, customers = random.random((m, 2)) * 1000, random.random((n, 2)) * 1000
    demand = random.integers(1, 500, n).astype(float)
    cost = np.hypot(*(sites[:, None, :] - customers[None, :, :]).transpose(2, 0, 1)) * demand * 0.2
    fixed = random.uniform(500_000, 1_000_000, m)
    return plain_case(fixed, np.round(cost, 3), demand, cost_is_whole=True)
