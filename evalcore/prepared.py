"""What preparation learns inside each bag, for many rounds at once, from the counts alone.

Idea: a column is sorted once; running sums of the counts then give every round's median, and
products with the counts every round's most frequent entry, mean and spread. No row is repeated.
The result is what `preparation` gives fold by fold with scikit-learn's classes.
"""

from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np
from numpy.typing import NDArray

from evalcore.rounds import Counts
from evalcore.shares import Floats
from evalcore.table import Column, Table

_MOST = 40_000  # numbers prepared together: what a processor keeps close at hand


@dataclass(frozen=True, eq=False)
class Prepared:
    """The features of all cases as each round's model would see them.

    Attributes
    ----------
    columns : ndarray, shape (R, q, n)
        Numbers first, then one column a category; a category the bag lacks is 0 for every case.
        Read-only; one and the same (q, n) behind every round if `shared`.
    present : ndarray of bool, shape (R, q)
        Columns the bag's own preparation would have: all but the categories it lacks.
    shared : bool
        Whether all rounds see the same features.
    """

    columns: Floats
    present: NDArray[np.bool_]
    shared: bool

    def __post_init__(self) -> None:
        self.columns.setflags(write=False)
        self.present.setflags(write=False)

    @cached_property
    def centred(self) -> Floats:
        """Columns less their means over all cases, (R, q, n), or (1, q, n) if shared."""
        given = self.columns[:1] if self.shared else self.columns
        return np.asarray(given - given.mean(axis=2, keepdims=True), dtype=np.float64)

    @cached_property
    def extent(self) -> Floats:
        """Largest distance of a case from that mean in each column, shape (R or 1, q)."""
        largest: Floats = np.maximum(self.centred.max(axis=2), -self.centred.min(axis=2))
        return largest

    @property
    def features(self) -> Floats:
        """The same with a row for each case, shape (R, n, q)."""
        return self.columns.swapaxes(1, 2)


def blocks(n_rounds: int, table: Table) -> list[slice]:
    """Parts of some rounds small enough to be prepared and fitted together.

    They depend on the table and the number of rounds alone, so that digits do too. At least one
    round a part, or as many as stay close to the processor (a third of a megabyte of features).

    Examples
    --------
    >>> from types import SimpleNamespace
    >>> column = SimpleNamespace(kind="number", categories=())
    >>> blocks(10, SimpleNamespace(n_cases=1000, columns=(column,) * 10))[:2]
    [slice(0, 4, None), slice(4, 8, None)]
    """
    wide = sum(_width(column) for column in table.columns)
    step = max(1, _MOST // (table.n_cases * wide))
    return [slice(start, min(start + step, n_rounds)) for start in range(0, n_rounds, step)]


def prepare(table: Table, counts: Counts, *, scaled: bool) -> Prepared:
    """Impute, scale and encode the columns of a table inside each bag.

    A missing number becomes the median of the bag's rows, each as often as it was drawn; a
    missing text entry the most frequent one (the first in order on ties); 0, or the first entry,
    if the bag has no value at all. Numbers are then, if asked for, centred on the bag's mean and
    divided by its standard deviation with divisor N; a column that is constant in the bag (within
    rounding, by scikit-learn's bound) is only centred.

    Parameters
    ----------
    table : Table
    counts : ndarray of uint8, shape (R, n)
        How often each case is in each bag; no bag is empty.
    scaled : bool
        Whether numbers are standardised.

    Examples
    --------
    A bag that holds the values 1, 4 and 4 puts 4 where a value is missing:

    >>> from types import SimpleNamespace
    >>> values = np.array([1.0, np.nan, 4.0, 9.0])
    >>> column = Column("x", "number", values)
    >>> table = SimpleNamespace(columns=(column,), n_cases=4, features=values[:, None])
    >>> bags = np.array([[1, 1, 2, 0]], dtype=np.uint8)
    >>> prepare(table, bags, scaled=False).features[0, :, 0].tolist()
    [1.0, 4.0, 4.0, 9.0]
    """
    bags = counts.astype(np.float64)
    numbers = tuple(column for column in table.columns if column.kind == "number")
    parts = []
    if numbers:
        filled = _filled(numbers, counts)
        parts.append(_standardised(filled, bags) if scaled else filled)
    texts = [_encoded(column, bags) for column in table.columns if column.kind == "text"]
    parts += [columns for columns, _ in texts]
    there = np.ones((len(bags), len(numbers)), dtype=bool)
    present = np.concatenate([there, *(found for _, found in texts)], axis=1)
    columns, shared = _stacked(parts, len(bags))
    return Prepared(columns, present, shared)


def nothing_varies(prepared: Prepared, counts: Counts) -> NDArray[np.bool_]:
    """Whether all cases of a bag look alike once prepared, so that nothing can be learned.

    Parameters
    ----------
    prepared : Prepared
    counts : ndarray of uint8, shape (R, n)

    Returns
    -------
    ndarray of bool, shape (R,)
    """
    inside = counts > 0
    first = inside.argmax(axis=1)
    alike = np.ones(len(counts), dtype=bool)
    for column in range(prepared.columns.shape[1]):
        values = prepared.columns[:, column]
        of_first = values[np.arange(len(counts)), first]
        alike &= ~((values != of_first[:, None]) & inside).any(axis=1)
        if not alike.any():
            break  # as a rule after the first column
    return alike


def _width(column: Column) -> int:
    return 1 if column.kind == "number" else max(1, len(column.categories))


def _stacked(parts: list[Floats], n_rounds: int) -> tuple[Floats, bool]:
    """Columns put together; parts of shape (., n) are the same in every round."""
    shared = all(part.ndim == 2 for part in parts)
    if shared:
        together = np.concatenate(parts) if len(parts) > 1 else parts[0]
        return np.broadcast_to(together, (n_rounds, *together.shape)), True
    if len(parts) == 1:
        return parts[0], False
    shapes = [(n_rounds, *part.shape[-2:]) for part in parts]
    spread = [np.broadcast_to(part, shape) for part, shape in zip(parts, shapes, strict=True)]
    return np.concatenate(spread, axis=1), False


def _filled(numbers: tuple[Column, ...], counts: Counts) -> Floats:
    """Numbers with each bag's medians in place of missing ones; (p, n) if none is missing."""
    values = _values(numbers)
    missing = np.isnan(values)
    if not missing.any():
        return values
    filled = np.repeat(values[None], len(counts), axis=0)
    for at in np.flatnonzero(missing.any(axis=1)):
        filled[:, at, missing[at]] = _medians(numbers[at], counts)[:, None]
    return filled


@lru_cache(maxsize=4)
def _values(numbers: tuple[Column, ...]) -> Floats:
    """A row for each column; kept, because every block of rounds needs it."""
    values = np.stack([column.values for column in numbers])
    values.setflags(write=False)
    return values


@lru_cache(maxsize=256)
def _ascending(column: Column) -> NDArray[np.intp]:
    """Cases that have a value, lowest first; kept, because every block of rounds needs it."""
    return np.argsort(column.values)[: len(column.values) - column.missing]


def _medians(column: Column, counts: Counts) -> Floats:
    """Median of each bag's values, missing ones aside, shape (R,); 0 for a bag that has none."""
    order = _ascending(column)
    if not len(order):
        return np.zeros(len(counts))
    upto = np.cumsum(counts.take(order, axis=1), axis=1, dtype=np.int32)
    total = upto[:, -1]
    # the first value whose running count passes a place stands in that place
    places = ((total - 1) // 2, total // 2)
    low, high = (column.values[order[(upto > place[:, None]).argmax(axis=1)]] for place in places)
    return np.where(total > 0, (low + high) / 2, 0.0)


def _standardised(values: Floats, bags: Floats) -> Floats:
    """Values centred and divided by each bag's standard deviation, shape (R, p, n)."""
    size = bags.sum(axis=1)[:, None]
    weights = bags[:, :, None]
    anchor = values.mean(axis=-1, keepdims=True)
    near = values - anchor
    mean = near @ weights / size[:, :, None]
    centred = near - mean
    # the second term takes out what rounding left in the mean (Chan, Golub & LeVeque 1983)
    sum_left = (centred @ weights)[:, :, 0]
    variance = ((np.square(centred) @ weights)[:, :, 0] - sum_left**2 / size) / size
    rounding = np.finfo(np.float64).eps * size
    constant = variance <= rounding * variance + (rounding * (anchor + mean)[:, :, 0]) ** 2
    centred *= (1 / np.sqrt(np.where(constant, 1.0, variance)))[:, :, None]
    return np.asarray(centred, dtype=np.float64)


def _encoded(column: Column, bags: Floats) -> tuple[Floats, NDArray[np.bool_]]:
    """One column a category, and which categories each bag has, shape (R, categories)."""
    codes = np.arange(_width(column))
    entries = (column.values == codes[:, None]).astype(np.float64)
    times = bags @ entries.T
    missing = np.isnan(column.values)
    columns = entries
    if missing.any():
        chosen = (times.argmax(axis=1)[:, None] == codes).astype(np.float64)
        columns = np.repeat(entries[None], len(bags), axis=0)
        columns[:, :, missing] = chosen[:, :, None]
        times += bags[:, missing].sum(axis=1)[:, None] * chosen
    present = times > 0
    # zeros for a category the bag lacks, also for cases outside the bag that have it
    return (columns if present.all() else columns * present[:, :, None]), present
