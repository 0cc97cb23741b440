"""Statistics of columns as functions of values and of how often each case counts.

Every formula takes the columns, shape (n,), and counts, shape (R, n), and gives one value for
each row of counts, shape (R,): nan where a row has none. A case that counts twice equals two
cases. What a formula does not need it ignores.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np

from evalcore.measures import Floats

Reads = Literal["numbers", "yes_no", "two_numbers", "numbers_by_class"]
Formula = Callable[[Floats, Floats, Floats, float], Floats]


@dataclass(frozen=True)
class Statistic:
    """A statistic that is offered.

    Attributes
    ----------
    key, title : str
    reads : {"numbers", "yes_no", "two_numbers", "numbers_by_class"}
        One column of numbers or of 0 and 1; two columns of numbers; or numbers and a class, 0 or 1.
    least : int
        Fewest cases with a value (of each class, where there are two), so that leaving one out
        still says something.
    formula : callable
        (first, second, counts, share) to one value for each row of counts.
    """

    key: str
    title: str
    reads: Reads
    least: int
    formula: Formula


def mean(first: Floats, second: Floats, counts: Floats, share: float) -> Floats:
    """Mean; nan without a case.

    >>> mean(np.array([1.0, 4.0]), np.zeros(2), np.array([[1.0, 1.0], [2.0, 1.0]]), 0).tolist()
    [2.5, 2.0]
    """
    # from the first value on, so that a column that never changes gives exactly that value
    beyond = _ratio(counts @ (first - first[0]), counts.sum(axis=1))
    return np.asarray(first[0] + beyond, dtype=np.float64)


def standard_deviation(first: Floats, second: Floats, counts: Floats, share: float) -> Floats:
    """Standard deviation with divisor n - 1; nan with fewer than two cases."""
    squares = _distances(first, counts) ** 2
    variance = _ratio((counts * squares).sum(axis=1), counts.sum(axis=1) - 1)
    return np.asarray(np.sqrt(variance), dtype=np.float64)


def quantile(first: Floats, second: Floats, counts: Floats, share: float) -> Floats:
    """Quantile at `share`, interpolated between neighbours (Hyndman & Fan 1996, type 7).

    At rank (n - 1) `share` from the lowest, which has rank 0; nan without a case.
    """
    order = np.argsort(first, kind="stable")
    ordered, reached = first[order], counts[:, order].cumsum(axis=1)
    n = reached[:, -1]
    rank = np.maximum(n - 1, 0) * share
    below = np.floor(rank)
    above = np.minimum(below + 1, np.maximum(n - 1, 0))

    def at(whole: Floats) -> Floats:
        place = (reached <= whole[:, None]).sum(axis=1)
        return np.asarray(ordered[np.minimum(place, len(ordered) - 1)])

    low = at(below)
    value = low + (rank - below) * (at(above) - low)
    return np.asarray(np.where(n > 0, value, np.nan), dtype=np.float64)


def median(first: Floats, second: Floats, counts: Floats, share: float) -> Floats:
    """The middle value, or halfway between the two middle ones; nan without a case."""
    return quantile(first, second, counts, 0.5)


def correlation(first: Floats, second: Floats, counts: Floats, share: float) -> Floats:
    """Pearson's correlation; nan where either column never changes among the cases counted."""
    one, two = _distances(first, counts), _distances(second, counts)
    product = (counts * one * two).sum(axis=1)
    squares = (counts * one**2).sum(axis=1) * (counts * two**2).sum(axis=1)
    flat = _never_changes(first, counts) | _never_changes(second, counts)
    value = _ratio(product, np.where(flat, 0.0, np.sqrt(squares)))
    return np.clip(value, -1.0, 1.0)


def difference_of_means(first: Floats, second: Floats, counts: Floats, share: float) -> Floats:
    """Mean where `second` is 0 minus mean where it is 1; nan where either has no case."""
    means = (mean(first, second, counts * (second == code), share) for code in (0, 1))
    return next(means) - next(means)


def _distances(values: Floats, counts: Floats) -> Floats:
    """Each value minus the mean of its row, shape (R, n)."""
    return np.asarray(values - mean(values, values, counts, 0.0)[:, None])


def _never_changes(values: Floats, counts: Floats) -> np.ndarray[tuple[int], np.dtype[np.bool_]]:
    lowest = np.where(counts > 0, values, np.inf).min(axis=1)
    highest = np.where(counts > 0, values, -np.inf).max(axis=1)
    return np.asarray(lowest >= highest)


def _ratio(above: Floats, below: Floats) -> Floats:
    """Quotient, nan where the divisor is not positive."""
    return np.asarray(np.where(below > 0, above, np.nan) / np.where(below > 0, below, 1.0))


STATISTICS: dict[str, Statistic] = {
    statistic.key: statistic
    for statistic in (
        Statistic("mean", "Mean", "numbers", 2, mean),
        Statistic("median", "Median", "numbers", 2, median),
        Statistic("sd", "Standard deviation", "numbers", 3, standard_deviation),
        Statistic("quantile", "Quantile", "numbers", 2, quantile),
        Statistic("proportion", "Proportion", "yes_no", 2, mean),
        Statistic("correlation", "Correlation", "two_numbers", 4, correlation),
        Statistic(
            "mean_difference", "Difference of means", "numbers_by_class", 2, difference_of_means
        ),
    )
}
