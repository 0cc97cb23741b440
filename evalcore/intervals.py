"""Where the true value may lie: shares with the model's variance, means of shares, and AUC.

Own constructions say so: `with_model_variance`, `rows_of_units`, and every `tau2`. Ends are
clipped to 0..1. The binomial family stands in `binomial` and is offered here too; `METHODS` names
every interval of the core.
"""

import math
from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from evalcore.binomial import (
    agresti_coull,
    clopper_pearson,
    jeffreys,
    newcombe_difference,
    normal_quantile,
    wald,
    wilson,
    wilson_corrected,
    wilson_ends,
)
from evalcore.figures import Interval
from evalcore.measures import Floats
from evalcore.model_variance import cluster_variance

__all__ = [
    "LEAST_SPREAD",
    "METHODS",
    "agresti_coull",
    "auc_score_type",
    "clopper_pearson",
    "effective_n",
    "exact_with_model_variance",
    "hanley_mcneil_variance",
    "jeffreys",
    "newcombe_difference",
    "normal_quantile",
    "rows_of_units",
    "square_and_add",
    "wald",
    "wilson",
    "wilson_corrected",
    "with_model_variance",
]

LEAST_SPREAD = 0.001  # p(1-p) is not let below this, or a perfect score would have no width


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


def exact_with_model_variance(p: float, n: float, tau2: float, *, level: float = 0.95) -> Interval:
    """Clopper and Pearson's interval at the effective n that includes the model's variance.

    Own construction, for the share of a class right at a cut-off that was learned on these cases:
    the estimate then hardly moves, and it is the truth that does. At a floor f it is Beta
    distributed with parameters (m + 1)f and (m + 1)(1 - f) (Wilks 1941), of which these bounds hold
    more than the level (96.5 to 98 % for 95 with 12 to 60 cases); Wilson's, drawn towards one half,
    lie too low (own simulation: 85 % of tables for 95 %). For costs, and for the other class, there
    is no such argument; there it was tried (own simulation: the other class in 99 % of tables).

    Parameters
    ----------
    p, n
        As in `wilson`.
    tau2 : float
        From `model_variance`; nan leaves it out, and the method is then plain "clopper_pearson".

    Examples
    --------
    >>> bounds = exact_with_model_variance(0.9, 20, 0.0)
    >>> round(bounds.low, 6), round(bounds.high, 6)
    (0.683017, 0.987651)
    """
    if math.isnan(p):
        return Interval(math.nan, math.nan, level, "clopper_pearson")
    if math.isnan(tau2):
        return clopper_pearson(p * n, n, level=level)
    n_equal = effective_n(p, n, tau2)
    bounds = clopper_pearson(p * n_equal, n_equal, level=level)
    return Interval(bounds.low, bounds.high, level, "exact_model_variance")


def rows_of_units(
    shares: Floats,
    units: NDArray[np.intp],
    tau2: float,
    *,
    level: float = 0.95,
    cluster: float = math.nan,
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
    cluster : float
        From `cluster_variance_by_repeat` where rows were answered more than once; nan takes the
        cluster variance of `shares`, right where each row was answered once.
    """
    from scipy.special import stdtrit

    n, groups = len(shares), len(np.unique(units))
    if groups < 2:
        return Interval(math.nan, math.nan, level, "rows_of_units")
    p = float(shares.mean())
    spread = max(p * (1 - p), LEAST_SPREAD)
    between = cluster_variance(shares, units) if math.isnan(cluster) else cluster
    variance = between + (0.0 if math.isnan(tau2) else tau2)
    n_equal = spread / max(variance, spread / n)
    if p * (1 - p) < LEAST_SPREAD:
        n_equal = min(n_equal, groups)
    t = float(stdtrit(groups - 1, 0.5 + level / 2))
    return Interval(*wilson_ends(p, n_equal, t), level, "rows_of_units")


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
    "paired_t": "paired t with the model's variance (own)",
    "unseen_share": "exact bound where no case differs (own)",
    "delong": "DeLong",
    "wilson": "Wilson",
    "wilson_model_variance": "Wilson with the model's variance (own)",
    "wilson_corrected": "Wilson with continuity correction",
    "clopper_pearson": "exact (Clopper and Pearson)",
    "exact_model_variance": "exact at an n that includes the model's variance (own)",
    "agresti_coull": "Agresti and Coull",
    "jeffreys": "Jeffreys",
    "wald": "Wald",
    "newcombe_difference": "hybrid score for a difference (Newcombe)",
    "sum_of_shares": "square-and-add of both classes' intervals",
    "ratio_of_shares": "ratio of both classes' intervals (Donner and Zou)",
    "square_and_add": "square-and-add of the classes' intervals (Zou and Donner)",
    "square_and_add_model_variance": "square-and-add with the model's variance (own)",
    "rows_of_units": "rows of units, with the model's variance (own)",
    "auc_score_type": "score type for AUC (Newcombe)",
    "auc_score_type_model_variance": "score type for AUC with the model's variance (own)",
    "corrected_t": "corrected resampled t (Nadeau and Bengio)",
    "uncorrected_t": "t over rounds, overlap ignored",
    "cv_normal": "normal approximation of cross-validation (Bayle and others)",
    "bootstrap_percentile": "bootstrap percentile",
    "bootstrap_basic": "basic bootstrap",
    "bootstrap_bca": "bootstrap BCa (Efron)",
    "bootstrap_normal": "normal with bootstrap bias and standard error",
}
