"""How many cases it takes: to show a limit, or for an interval of a wanted width."""

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from evalcore.errors import EvalError
from evalcore.intervals import hanley_mcneil_variance, normal_quantile, wilson
from evalcore.measures import Floats
from evalcore.one_sided import OneSided, confidence_shown, lower_bound, upper_bound

__all__ = [
    "LEAST_UNITS",
    "CasesForAuc",
    "CasesForWidth",
    "allowed_misses",
    "auc_standard_error",
    "cases_for_auc",
    "cases_for_width",
    "cases_to_show",
    "confidence_shown",
    "inside",
    "lower_bound",
    "upper_bound",
]

LEAST_UNITS = 10  # below this nothing is called shown: 9 of 10 right may mean 60 % (exact, 95 %)
SLACK = 1e-12  # a confidence reached exactly must not be missed by rounding


def cases_to_show(
    least: float, *, misses: int = 0, confidence: float = 0.95, method: OneSided = "clopper_pearson"
) -> int:
    """Smallest number of cases that shows a share of at least `least` with some misses.

    Parameters
    ----------
    least : float
        Limit, strictly between 0 and 1.
    misses : int
        Wrong answers allowed, from 0.
    confidence : float
        One-sided, above 0.5.
    method : {"clopper_pearson", "wilson"}
        The exact bound, which a verdict rests on, or the score bound. They disagree near the limit,
        so the choice must be made before looking.

    Raises
    ------
    EvalError
        A setting out of range.

    Examples
    --------
    >>> [cases_to_show(0.9, misses=misses) for misses in (0, 1, 2, 3, 5)]
    [29, 46, 61, 76, 103]
    >>> cases_to_show(0.9, method="wilson")
    25
    """
    _check_limit(least, confidence)
    if misses < 0:
        raise EvalError(f"`misses` must be 0 or more; got {misses}.")

    def enough(n: int) -> bool:
        if method == "wilson":
            return lower_bound(n - misses, n, confidence=confidence, method=method) >= least
        return confidence_shown(n - misses, n, least=least) >= confidence - SLACK

    return _smallest(enough, misses + 1)


def allowed_misses(
    n: Sequence[int] | NDArray[np.intp],
    *,
    least: float,
    confidence: float = 0.95,
    method: OneSided = "clopper_pearson",
    n_effective: Floats | None = None,
) -> NDArray[np.intp]:
    """Most misses among n cases with which they still show a limit.

    Parameters
    ----------
    n : sequence of int, length N
        Numbers of cases, from 0.
    least, confidence, method
        As in `cases_to_show`.
    n_effective : ndarray, shape (N,), optional
        Independent cases that Wilson's bound counts in place of n.

    Returns
    -------
    ndarray of int, shape (N,)
        -1 where even no miss shows the limit.

    Examples
    --------
    >>> allowed_misses([28, 29, 45, 46, 61], least=0.9).tolist()
    [-1, 0, 0, 1, 2]
    """
    from scipy.special import bdtr, bdtrik

    _check_limit(least, confidence)
    sizes = np.asarray(n, dtype=np.intp)
    if method == "wilson":
        # Wilson's lower bound is `least` where share - least = z sqrt(least (1 - least) / n)
        z = normal_quantile(2 * confidence - 1)
        counted = np.maximum(sizes if n_effective is None else n_effective, np.finfo(float).tiny)
        margin = z * np.sqrt(least * (1 - least) / counted)
        found = np.floor(sizes * (1 - least - margin) + 1e-9)
    else:
        risk, counted = 1 - confidence + SLACK, np.maximum(sizes, 1)
        found = np.floor(bdtrik(risk, counted, 1 - least))
        # the inverse cannot say -1, and may be off by one where it is nearly whole
        found -= bdtr(found, counted, 1 - least) > risk
        found += bdtr(np.minimum(found + 1, counted), counted, 1 - least) <= risk
    return np.where(sizes > 0, np.maximum(found, -1), -1).astype(np.intp)


@dataclass(frozen=True)
class CasesForWidth:
    """Cases for an interval of a wanted width.

    Attributes
    ----------
    n : int
        Smallest number for Wilson's interval.
    width : float
        What that number gives, end to end.
    n_wald : int
        The same by the simple interval p +- z sqrt(p(1 - p)/n), for comparison only.
    """

    n: int
    width: float
    n_wald: int


def cases_for_width(share: float, *, width: float, level: float = 0.95) -> CasesForWidth:
    """Smallest number of cases that gives an interval no wider than wanted, at a share.

    The share of right answers is taken as it is: n times the share is not rounded to whole cases,
    which would move n by a few. Wilson 1927.

    Parameters
    ----------
    share : float
        Expected share right, 0 to 1.
    width : float
        From end to end, strictly between 0 and 1.
    level : float
        Two-sided confidence.

    Raises
    ------
    EvalError
        A setting out of range.

    Examples
    --------
    >>> needed = cases_for_width(0.9, width=0.1)
    >>> needed.n, needed.n_wald, round(needed.width, 6)
    (141, 139, 0.09999)
    """
    inside("width", width)
    inside("level", level)
    if not 0 <= share <= 1:
        raise EvalError(f"`share` must be between 0 and 1; got {share:g}.")
    n = _smallest(lambda size: wilson(share, size, level=level).width <= width, 1)
    simple = math.ceil(share * (1 - share) * (2 * normal_quantile(level) / width) ** 2)
    return CasesForWidth(n, wilson(share, n, level=level).width, max(1, simple))


def auc_standard_error(value: float, *, n_positive: float, n_negative: float) -> float:
    """Standard error of an AUC under negative-exponential scores (Hanley & McNeil 1982).

    nan where a class is empty; 0 at an AUC of 0 or 1.

    >>> round(auc_standard_error(0.9, n_positive=50, n_negative=50), 6)
    0.032124
    """
    if min(n_positive, n_negative) <= 0:
        return math.nan
    # at 0 and 1 rounding may leave a variance a hair below 0
    return math.sqrt(max(0.0, hanley_mcneil_variance(value, n_positive, n_negative)))


@dataclass(frozen=True)
class CasesForAuc:
    """Cases of both classes for an AUC of a wanted half-width, and the standard error they give."""

    n_positive: int
    n_negative: int
    standard_error: float


def cases_for_auc(
    value: float, *, half_width: float, ratio: float = 1.0, level: float = 0.95
) -> CasesForAuc:
    """Smallest number of positive cases for an AUC no less sure than wanted.

    z times the standard error of Hanley & McNeil (1982) must not exceed the half-width; the
    number of negative cases is `ratio` times the positive ones, rounded up.

    Parameters
    ----------
    value : float
        Expected AUC, strictly between 0 and 1: at the ends the formula's variance is 0.
    half_width, level : float
        Strictly between 0 and 1; the level is two-sided.
    ratio : float
        Negative cases for each positive one, > 0.

    Raises
    ------
    EvalError
        A setting out of range.

    Examples
    --------
    >>> needed = cases_for_auc(0.75, half_width=0.05, ratio=2)
    >>> needed.n_positive, needed.n_negative, round(needed.standard_error, 6)
    (153, 306, 0.02548)
    """
    for name, given in (("value", value), ("half_width", half_width), ("level", level)):
        inside(name, given)
    if not 0 < ratio < math.inf:
        raise EvalError(f"`ratio` must be above 0; got {ratio:g}.")
    z = normal_quantile(level)

    def error_with(n: int) -> float:
        return auc_standard_error(value, n_positive=n, n_negative=_negatives(n, ratio))

    n = _smallest(lambda size: z * error_with(size) <= half_width, 1)
    return CasesForAuc(n, _negatives(n, ratio), error_with(n))


def _negatives(n_positive: int, ratio: float) -> int:
    return math.ceil(ratio * n_positive - 1e-9)  # 1.1 * 10 is 11, though not in binary


def inside(name: str, value: float, *, low: float = 0.0, high: float = 1.0) -> None:
    """Raise an EvalError unless a setting lies between two bounds, both excluded."""
    if not low < value < high:
        raise EvalError(
            f"`{name}` must be between {low:g} and {high:g}, both excluded; got {value:g}."
        )


def _check_limit(least: float, confidence: float) -> None:
    inside("least", least)
    inside("confidence", confidence, low=0.5)  # a bound at 0.5 or less bounds nothing


def _smallest(enough: Callable[[int], bool], start: int) -> int:
    """Smallest whole number from `start` that is enough, where all above it are enough too."""
    low, high = start, start
    while not enough(high):
        low, high = high + 1, 2 * high
    while low < high:
        middle = (low + high) // 2
        low, high = (low, middle) if enough(middle) else (middle + 1, high)
    return low
