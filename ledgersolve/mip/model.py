"""Linear and mixed-integer models built from arrays, to be run by OR-Tools' wrapper.

Everything is checked for finiteness before it reaches a solver: a NaN coefficient crashes SCIP and a NaN
right-hand side is called optimal.
"""

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

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
        self._lower.append(vector(lower, count))
        self._upper.append(vector(upper, count))
        self._cost.append(vector(cost, count))
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
        self._blocks.append((vector(lower, count), vector(upper, count), rows, columns, values))
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
        from ledgersolve.mip.wrapper import Run  # here, because many cases are settled without the wrapper

        return Run(self, seconds, gap, hint, cancelled, parameters, log).result()

    def bounded(self, variables: ArrayLike, lower: ArrayLike, upper: ArrayLike) -> "LinearModel":
        """Give the same model with other bounds for these variables; this one stays as it is."""
        low, high, cost, whole = self.columns()
        which = np.asarray(variables, dtype=np.int64).ravel()
        low[which], high[which] = vector(lower, which.size), vector(upper, which.size)
        return LinearModel(
            self.offset, [low], [high], [cost], [whole], list(self._blocks), self.variables, self.rows
        )

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

    def sorted_blocks(self) -> list[tuple[Floats, Floats, Ints, Ints, Floats]]:
        """Blocks of rows: lower and upper sides, where each row starts, its variables and their coefficients.

        Raises
        ------
        ValueError
            A coefficient is not finite, or the sides of a row exclude each other.
        """
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


def vector(value: ArrayLike, count: int) -> Floats:
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
