"""Where the true value may lie: published intervals, and our own that add the model's variance.

Own constructions say so: `with_model_variance`, `rows_of_units`, and every `tau2`. Bounds are
clipped to 0..1.
"""

import math
from collections.abc import Callable, Sequence
from statistics import NormalDist

import numpy as np
from numpy.typing import NDArray

from evalcore.figures import Interval
from evalcore.measures import Floats
from evalcore.model_variance import cluster_variance

LEAST_SPREAD = 0.001  # p(1-p) is not let below this, or a perfect score would have no width


def normal_quantile(level: float) -> float:
    """Half-width of a two-sided normal interval in standard deviations (1.96 at 0.95)."""
    return NormalDist().inv_cdf(0.5 + level / 2)


def wilson(p: float, n: float, *, level: float = 0.95) -> Interval:
    """Wilson's score interval for a proportion (Wilson 1927).

    Parameters
    ----------
    p : float
        Observed share, 0 to 1.
    n : float
        Independent trials, > 0; need not be whole.
    level : float
        Two-sided confidence.

    Examples
    --------
    >>> bounds = wilson(0.8, 50)
    >>> round(bounds.low, 6), round(bounds.high, 6)
    (0.669629, 0.887562)
    """
    low, high = _wilson_ends(p, n, normal_quantile(level))
    return Interval(low, high, level, "wilson")


def _wilson_ends(p: float, n: float, z: float) -> tuple[float, float]:
    if math.isnan(p) or not n > 0:
        return math.nan, math.nan
    centre = (p + z * z / (2 * n)) / (1 + z * z / n)
    half = z / (1 + z * z / n) * math.sqrt(p * (1 - p) / n + z * z / (4 * n * n))
    # at p = 0 and p = 1 an end is 0 or 1 exactly, which rounding would miss
    low = 0.0 if p == 0 else max(0.0, centre - half)
    high = 1.0 if p == 1 else min(1.0, centre + half)
    return float(low), float(high)


def clopper_pearson(right: float, n: float, *, level: float = 0.95) -> Interval:
    """The exact binomial interval (Clopper & Pearson 1934).

    Parameters
    ----------
    right : float
        Number of right answers, 0 to n.
    n : float
        Independent trials.
    level : float
        Two-sided confidence; a one-sided bound at confidence c is an end at level 2c - 1.

    Examples
    --------
    >>> bounds = clopper_pearson(18, 20)
    >>> round(bounds.low, 6), round(bounds.high, 6)
    (0.683017, 0.987651)
    """
    from scipy.special import betaincinv

    tail = (1 - level) / 2
    low = 0.0 if right == 0 else float(betaincinv(right, n - right + 1, tail))
    high = 1.0 if right == n else float(betaincinv(right + 1, n - right, 1 - tail))
    return Interval(low, high, level, "clopper_pearson")


def effective_n(p: float, n: float, tau2: float) -> float:
    """Number of independent cases that would give the same variance: n b / (b + n tau2)."""
    spread = max(p * (1 - p), LEAST_SPREAD)
    return n * spread / (spread + n * tau2)


def with_model_variance(p: float, n: float, tau2: float, *, level: float = 0.95) -> Interval:
    """Wilson's interval at the effective n that includes the model's variance (own construction).

    Parameters
    ----------
    p, n
        As in `wilson`.
    tau2 : float
        From `model_variance`; nan leaves it out, and the method is then plain "wilson".

    Examples
    --------
    >>> bounds = with_model_variance(0.84, 60, 0.03**2)
    >>> round(bounds.low, 6), round(bounds.high, 6)
    (0.703128, 0.920869)
    """
    if math.isnan(tau2) or math.isnan(p):
        return wilson(p, n, level=level)
    bounds = wilson(p, effective_n(p, n, tau2), level=level)
    return Interval(bounds.low, bounds.high, level, "wilson_model_variance")


def rows_of_units(
    shares: Floats, units: NDArray[np.intp], tau2: float, *, level: float = 0.95
) -> Interval:
    """Interval for the rate of rows, where rows of a unit resemble each other (own construction).

    V = max(cluster variance + tau2, p(1-p)/n); Wilson at n = p(1-p)/V with Student's t on G - 1
    degrees of freedom in place of z. A rate so near 0 or 1 that the units' variance cannot be
    seen counts units, not rows.

    Parameters
    ----------
    shares : ndarray, shape (n,)
        Mean held-out correctness of each row, no nan.
    units : ndarray of int, shape (n,)
        G different ones, G >= 2.
    tau2 : float
        From `model_variance` with `units`; nan counts as 0.
    """
    from scipy.special import stdtrit

    n, groups = len(shares), len(np.unique(units))
    if groups < 2:
        return Interval(math.nan, math.nan, level, "rows_of_units")
    p = float(shares.mean())
    spread = max(p * (1 - p), LEAST_SPREAD)
    variance = cluster_variance(shares, units) + (0.0 if math.isnan(tau2) else tau2)
    n_equal = spread / max(variance, spread / n)
    if p * (1 - p) < LEAST_SPREAD:
        n_equal = min(n_equal, groups)
    t = float(stdtrit(groups - 1, 0.5 + level / 2))
    return Interval(*_wilson_ends(p, n_equal, t), level, "rows_of_units")


def square_and_add(
    shares: Sequence[float],
    parts: Sequence[Interval],
    tau2: float = math.nan,
) -> Interval:
    """Interval for the mean of independent shares from an interval for each.

    Square-and-add (MOVER: Newcombe 1998, Zou & Donner 2008): the distances from the mean to its
    ends are the root of the summed squares of the parts' distances, over K. `tau2` adds the
    variance of the model (own addition).

    Examples
    --------
    >>> bounds = square_and_add([0.9, 0.7], [wilson(0.9, 40), wilson(0.7, 20)])
    >>> round(bounds.low, 6), round(bounds.high, 6)
    (0.67254, 0.882958)
    """
    p = np.asarray(shares, dtype=np.float64)
    level = parts[0].level
    extra = normal_quantile(level) ** 2 * (0.0 if math.isnan(tau2) else tau2)
    below = sum((share - part.low) ** 2 for share, part in zip(p, parts, strict=True))
    above = sum((part.high - share) ** 2 for share, part in zip(p, parts, strict=True))
    mean, k2 = float(p.mean()), len(p) ** 2
    method = "square_and_add" if math.isnan(tau2) else "square_and_add_model_variance"
    if math.isnan(mean) or math.isnan(below) or math.isnan(above):
        return Interval(math.nan, math.nan, level, method)
    low = max(0.0, mean - math.sqrt(below / k2 + extra))
    high = min(1.0, mean + math.sqrt(above / k2 + extra))
    return Interval(low, high, level, method)


def hanley_mcneil_variance(value: float, n_positive: float, n_negative: float) -> float:
    """Variance of an AUC under negative-exponential scores (Hanley & McNeil 1982)."""
    q1, q2 = value / (2 - value), 2 * value**2 / (1 + value)
    return (
        value * (1 - value)
        + (n_positive - 1) * (q1 - value**2)
        + (n_negative - 1) * (q2 - value**2)
    ) / (n_positive * n_negative)


def auc_score_type(
    value: float, n_positive: int, n_negative: int, tau2: float = math.nan, *, level: float = 0.95
) -> Interval:
    """Score-type interval for an AUC (Newcombe 2006, part 2, method 5).

    The ends t solve |value - t| = z sqrt(V(t) + tau2), V(t) = t(1 - t) [1 + N (1 - t)/(2 - t) +
    N t/(1 + t)] / (n1 n0), N = (n1 + n0)/2 - 1. `tau2`, from `auc_model_variance`, is our own
    addition; nan counts as 0.

    Examples
    --------
    >>> bounds = auc_score_type(0.85, 30, 30)
    >>> round(bounds.low, 6), round(bounds.high, 6)
    (0.720625, 0.922177)
    """
    method = "auc_score_type" if math.isnan(tau2) else "auc_score_type_model_variance"
    if math.isnan(value) or min(n_positive, n_negative) < 1:
        return Interval(math.nan, math.nan, level, method)
    extra, z = (0.0 if math.isnan(tau2) else tau2), normal_quantile(level)
    spread_n = (n_positive + n_negative) / 2 - 1

    def excess(t: float) -> float:
        v = t * (1 - t) * (1 + spread_n * (1 - t) / (2 - t) + spread_n * t / (1 + t))
        return abs(value - t) - z * math.sqrt(v / (n_positive * n_negative) + extra)

    return Interval(_root(excess, 0.0, value), _root(excess, 1.0, value), level, method)


def _root(excess: Callable[[float], float], outer: float, inner: float) -> float:
    """Where `excess` changes sign between an outer and an inner point, by bisection."""
    if excess(outer) <= 0:
        return outer
    for _ in range(200):
        middle = (outer + inner) / 2
        if middle in (outer, inner):
            break
        outer, inner = (middle, inner) if excess(middle) > 0 else (outer, middle)
    return outer


METHODS: dict[str, str] = {
    "wilson": "Wilson",
    "wilson_model_variance": "Wilson with the model's variance (own)",
    "clopper_pearson": "exact (Clopper and Pearson)",
    "square_and_add": "square-and-add of Wilson intervals",
    "square_and_add_model_variance": "square-and-add with the model's variance (own)",
    "rows_of_units": "rows of units, with the model's variance (own)",
    "auc_score_type": "score type for AUC (Newcombe)",
    "auc_score_type_model_variance": "score type for AUC with the model's variance (own)",
}
