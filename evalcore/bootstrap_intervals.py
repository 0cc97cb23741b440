"""Intervals from given bootstrap replicates: percentile, basic, BCa and normal.

Quantiles follow the (R + 1) rule of Davison & Hinkley 1997 (section 5.2): the p-quantile of R
replicates is the one that is (R + 1)p-th in order; between two of them it is read off on the scale
of normal quantiles, beyond the lowest or highest it is that one. Plain interpolation (numpy's
default, "type 7") gives slightly narrower intervals.

Replicates without a value (nan) are left out; whoever made them counts them. Fewer than two leave
an interval undefined. Ends are not clipped: a basic or normal interval may leave the statistic's
range, a percentile or BCa interval never does.
"""

import math
from statistics import NormalDist

import numpy as np
from numpy.typing import ArrayLike

from evalcore.binomial import normal_quantile
from evalcore.figures import Interval
from evalcore.measures import Floats

NORMAL = NormalDist()


def standard_error(replicates: ArrayLike) -> float:
    """Standard deviation of the replicates, divisor R - 1; nan with fewer than two."""
    values = _values(replicates)
    return float(values.std(ddof=1)) if len(values) > 1 else math.nan


def bias(replicates: ArrayLike, value: float) -> float:
    """Mean of the replicates minus the value on the data; nan without replicates."""
    values = _values(replicates)
    return float(values.mean()) - value if len(values) else math.nan


def quantile(replicates: ArrayLike, p: float) -> float:
    """The p-quantile of replicates by the (R + 1) rule; nan with fewer than two.

    Parameters
    ----------
    replicates : array_like, shape (R,)
    p : float
        0 to 1; below 1/(R + 1) it is the lowest replicate, above R/(R + 1) the highest.

    Examples
    --------
    The 5th and the 95th of 99:

    >>> quantile(range(1, 100), 0.05), quantile(range(1, 100), 0.95)
    (5.0, 95.0)
    """
    ordered = np.sort(_values(replicates))
    n = len(ordered)
    if n < 2 or math.isnan(p):
        return math.nan
    # (R + 1) x 0.07 may end in ...9999: a whole rank must not become one less
    rank = (n + 1) * p
    rank = float(round(rank)) if abs(rank - round(rank)) < 1e-9 else rank
    k = math.floor(rank)
    if k < 1 or k >= n:
        return float(ordered[0] if k < 1 else ordered[-1])
    if k == rank:
        return float(ordered[k - 1])
    here, there = (NORMAL.inv_cdf(rank / (n + 1)) for rank in (k, k + 1))
    share = (NORMAL.inv_cdf(p) - here) / (there - here)
    return float(ordered[k - 1] + share * (ordered[k] - ordered[k - 1]))


def percentile(replicates: ArrayLike, *, level: float = 0.95) -> Interval:
    """From quantile to quantile of the replicates (Efron & Tibshirani 1993, chapter 13).

    Parameters
    ----------
    replicates : array_like, shape (R,)
        At least 2/(1 - level) - 1 of them (39 at 0.95), or the ends are merely the lowest and
        highest.
    level : float
        Two-sided confidence.

    Examples
    --------
    >>> bounds = percentile(range(1, 100), level=0.9)
    >>> bounds.low, bounds.high
    (5.0, 95.0)
    """
    tail = (1 - level) / 2
    low, high = quantile(replicates, tail), quantile(replicates, 1 - tail)
    return Interval(low, high, level, "bootstrap_percentile")


def basic(replicates: ArrayLike, value: float, *, level: float = 0.95) -> Interval:
    """The percentile interval mirrored at the value (Davison & Hinkley 1997, section 5.2).

    From 2 value - upper quantile to 2 value - lower quantile.

    >>> bounds = basic(range(1, 100), 40.0, level=0.9)
    >>> bounds.low, bounds.high
    (-15.0, 75.0)
    """
    ends = percentile(replicates, level=level)
    return Interval(2 * value - ends.high, 2 * value - ends.low, level, "bootstrap_basic")


def normal(replicates: ArrayLike, value: float, *, level: float = 0.95) -> Interval:
    """value - bias +- z standard errors (Davison & Hinkley 1997, section 5.2).

    >>> bounds = normal([1.0, 2.0, 3.0], 2.0)
    >>> round(bounds.low, 4), round(bounds.high, 4)
    (0.04, 3.96)
    """
    centre = value - bias(replicates, value)
    half = normal_quantile(level) * standard_error(replicates)
    if math.isnan(centre + half):
        return Interval(math.nan, math.nan, level, "bootstrap_normal")
    return Interval(centre - half, centre + half, level, "bootstrap_normal")


def bca(
    replicates: ArrayLike, value: float, *, acceleration: float, level: float = 0.95
) -> Interval:
    """Bias-corrected and accelerated percentile interval (Efron 1987).

    Quantiles at the levels of `bca_levels`. Undefined where the value lies below or above all
    replicates, or where the acceleration is undefined.

    Parameters
    ----------
    replicates : array_like, shape (R,)
    value : float
        The statistic on the data themselves.
    acceleration : float
        From `jackknife_acceleration`.
    level : float
        Two-sided confidence.

    Examples
    --------
    >>> bounds = bca(range(1, 100), 50.0, acceleration=0.0, level=0.9)
    >>> round(bounds.low, 2), round(bounds.high, 2)
    (4.76, 94.72)
    """
    low, high = bca_levels(median_bias(replicates, value), acceleration, level=level)
    ends = quantile(replicates, low), quantile(replicates, high)
    return Interval(*ends, level, "bootstrap_bca")


def median_bias(replicates: ArrayLike, value: float) -> float:
    """z0: the normal quantile of the share of replicates below the value (Efron 1987).

    Replicates equal to the value do not count as below. nan where none or all are below.

    >>> round(median_bias([1.0, 2.0, 3.0, 4.0], 1.5), 4)
    -0.6745
    """
    values = _values(replicates)
    below = int((values < value).sum())
    if math.isnan(value) or below in (0, len(values)):
        return math.nan
    return NORMAL.inv_cdf(below / len(values))


def bca_levels(z0: float, acceleration: float, *, level: float = 0.95) -> tuple[float, float]:
    """Levels at which BCa reads the replicates' quantiles (Efron 1987).

    Phi(z0 + (z0 + z)/(1 - a(z0 + z))) for z the lower and upper normal quantile. nan where a
    denominator is not positive: the levels would then no longer be in order.

    >>> low, high = bca_levels(0.0, 0.0)
    >>> round(low, 12), round(high, 12)
    (0.025, 0.975)
    """
    half = normal_quantile(level)
    reach = (z0 - half, z0 + half)
    denominators = [1 - acceleration * z for z in reach]
    if math.isnan(sum(denominators)) or min(denominators) <= 0:
        return math.nan, math.nan
    low, high = (
        NORMAL.cdf(z0 + z / denominator) for z, denominator in zip(reach, denominators, strict=True)
    )
    return low, high


def jackknife_acceleration(left_out: ArrayLike, *, strata: ArrayLike | None = None) -> float:
    """How fast the standard error changes with the value: sum d^3 / (6 (sum d^2)^1.5).

    d is the mean of the leave-one-out values minus each of them (Efron & Tibshirani 1993, eq.
    14.15). Where bags are drawn class by class, d is taken within each stratum and weighted by
    (n_s - 1)/n_s (Davison & Hinkley 1997, section 5.3).

    Parameters
    ----------
    left_out : array_like, shape (n,)
        The statistic without each case in turn.
    strata : array_like, shape (n,), optional
        Stratum of each case.

    Returns
    -------
    float
        nan if a leave-one-out value is nan or all are the same.

    Examples
    --------
    >>> round(jackknife_acceleration([3.0, 3.2, 3.4, 2.4]), 6)
    0.05727
    """
    distances = _distances(left_out, strata)
    squares = float((distances**2).sum())
    if not squares > 0:
        return math.nan
    return float((distances**3).sum()) / (6 * squares * math.sqrt(squares))


def jackknife_standard_error(left_out: ArrayLike, *, strata: ArrayLike | None = None) -> float:
    """Standard error from leave-one-out values: sqrt(sum (n_s - 1)/n_s d^2), d as above.

    Efron & Tibshirani 1993, chapter 11.

    >>> round(jackknife_standard_error([3.0, 3.2, 3.4, 2.4]), 6)
    0.648074
    """
    shares = _shares(np.asarray(left_out, dtype=np.float64), strata)
    return float(np.sqrt((_distances(left_out, strata) ** 2 / shares).sum()))


def _shares(left_out: Floats, strata: ArrayLike | None) -> Floats:
    """(n_s - 1)/n_s for the stratum of each case."""
    of = np.zeros(len(left_out), dtype=np.intp) if strata is None else np.asarray(strata)
    _, which, sizes = np.unique(of, return_inverse=True, return_counts=True)
    return np.asarray(1 - 1 / sizes[which], dtype=np.float64)


def _distances(left_out: ArrayLike, strata: ArrayLike | None) -> Floats:
    """Stratum's mean of leave-one-out values minus each, weighted by (n_s - 1)/n_s."""
    values = np.asarray(left_out, dtype=np.float64)
    of = np.zeros(len(values), dtype=np.intp) if strata is None else np.asarray(strata)
    _, which, sizes = np.unique(of, return_inverse=True, return_counts=True)
    means = np.bincount(which, values) / sizes
    return np.asarray(_shares(values, strata) * (means[which] - values), dtype=np.float64)


def _values(replicates: ArrayLike) -> Floats:
    values = np.asarray(replicates, dtype=np.float64)
    return values[~np.isnan(values)]
