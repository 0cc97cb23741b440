"""Published tests of two candidates on one fixed set of answers: McNemar for right and wrong,
DeLong for AUC.

Both take the answers as they are and know nothing of the variance of the models behind them; for
candidates judged by repeated rounds, `comparison.py` is the place.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from evalcore.figures import Interval
from evalcore.intervals import normal_quantile
from evalcore.measures import Floats, auc

LEAST_FOR_CHI2 = 25  # discordant pairs from which the chi-square approximation is used
NO_SPREAD = 1e-12  # a standard error below this is rounding


@dataclass(frozen=True)
class McNemar:
    """McNemar's test of two candidates that answered the same cases.

    Attributes
    ----------
    p : float
        The one to report: `p_exact` under 25 discordant pairs, `p_corrected` from there.
    p_exact : float
        Two-sided binomial: twice the smaller tail, at most 1.
    p_mid : float
        The exact one less the chance of the observed split; nan without a discordant pair.
    chi2, p_chi2 : float
        (b - c)^2 / (b + c) on one degree of freedom.
    corrected, p_corrected : float
        (|b - c| - 1)^2 / (b + c), the continuity correction, which never goes past 0.
    """

    p: float
    p_exact: float
    p_mid: float
    chi2: float
    p_chi2: float
    corrected: float
    p_corrected: float


def mcnemar(only_first: int, only_second: int) -> McNemar:
    """Whether two candidates are right equally often, from the cases only one of them got right.

    McNemar 1947 (chi-square), Edwards 1948 (continuity correction), Fagerland, Lydersen & Laake
    2013 (mid-p). One answer per case and candidate: never counts summed over repeats.

    Parameters
    ----------
    only_first, only_second : int
        Cases that only the first, only the second got right (b and c), from 0. With b = c = 0
        there is nothing to tell them apart: statistics 0, every p 1 but `p_mid`, which is nan.

    Raises
    ------
    ValueError
        A count is negative.

    Examples
    --------
    >>> found = mcnemar(6, 16)
    >>> round(found.p_exact, 4), round(found.p_mid, 4), round(found.p_chi2, 4)
    (0.0525, 0.0347, 0.033)
    """
    from scipy.special import bdtr

    b, c = only_first, only_second
    if min(b, c) < 0:
        raise ValueError(f"Counts of cases cannot be negative; got {b} and {c}.")
    n, fewer = b + c, min(b, c)
    if n == 0:
        return McNemar(1.0, 1.0, math.nan, 0.0, 1.0, 0.0, 1.0)
    up_to = float(bdtr(fewer, n, 0.5))
    below = float(bdtr(fewer - 1, n, 0.5)) if fewer else 0.0
    exact = min(1.0, 2 * up_to)
    plain, corrected = (b - c) ** 2 / n, max(0, abs(b - c) - 1) ** 2 / n
    # a chi-square on one degree of freedom is a squared normal
    p_plain, p_corrected = (math.erfc(math.sqrt(x / 2)) for x in (plain, corrected))
    reported = exact if n < LEAST_FOR_CHI2 else p_corrected
    return McNemar(reported, exact, up_to + below, plain, p_plain, corrected, p_corrected)


@dataclass(frozen=True)
class DeLong:
    """Two AUCs on the same cases, and their difference.

    Attributes
    ----------
    auc : tuple of float
        Of the first and the second.
    standard_error : tuple of float
        nan where a class has fewer than two cases.
    covariance : float
    intervals : tuple of Interval
        Of each AUC, cut to 0..1. No width at an AUC of 0 or 1, where this variance is 0: not an
        interval to report there.
    difference : float
        First less second.
    interval : Interval
        Of the difference, not cut.
    z, p : float
        Difference over its standard error; two-sided. Scores that rank all pairs alike have z = 0
        and p = 1; nan where the AUCs differ and the variance is 0.
    """

    auc: tuple[float, float]
    standard_error: tuple[float, float]
    covariance: float
    intervals: tuple[Interval, Interval]
    difference: float
    interval: Interval
    z: float
    p: float


def delong(
    positive: ArrayLike, scores_first: ArrayLike, scores_second: ArrayLike, *, level: float = 0.95
) -> DeLong:
    """Compare two AUCs measured on the same cases (DeLong, DeLong & Clarke-Pearson 1988).

    For scores of two fixed models on one set of cases. Not for cross-validated scores pooled over
    folds: those come from different models, on different scales, and the intervals fall short.

    With V10 a positive's share of negatives it outranks (ties one half) and V01 a negative's
    share of positives that outrank it: variance = s^2(V10)/n1 + s^2(V01)/n0.

    Parameters
    ----------
    positive : array_like of bool, shape (n,)
        Without positives or without negatives all is nan.
    scores_first, scores_second : array_like, shape (n,)
        Higher means more likely positive.
    level : float
        Two-sided.

    Raises
    ------
    ValueError
        Lengths differ, or a score is missing.

    Examples
    --------
    >>> found = delong([0, 0, 0, 1, 1, 1], [1, 2, 4, 3, 5, 6], [1, 4, 5, 2, 3, 6])
    >>> round(found.difference, 4), round(found.z, 3), round(found.p, 3)
    (0.3333, 1.225, 0.221)
    """
    up = np.asarray(positive, dtype=bool)
    first, second = (np.asarray(s, dtype=np.float64) for s in (scores_first, scores_second))
    if not up.shape == first.shape == second.shape:
        raise ValueError(
            f"Classes and scores must have one length; got {up.shape}, {first.shape} and "
            f"{second.shape}."
        )
    if np.isnan(first).any() or np.isnan(second).any():
        raise ValueError("A score is missing; every case needs a score of both candidates.")
    areas = float(auc(up, first)[0]), float(auc(up, second)[0])
    parts = [(_wins(s[up], s[~up]), 1 - _wins(s[~up], s[up])) for s in (first, second)]
    (v10, v01), (w10, w01) = parts
    errors = math.sqrt(_variance(v10, v01)), math.sqrt(_variance(w10, w01))
    # the variance of the components' difference is exactly 0 for equal rankings
    spread = math.sqrt(_variance(v10 - w10, v01 - w01))
    covariance = (errors[0] ** 2 + errors[1] ** 2 - spread**2) / 2
    difference = areas[0] - areas[1]
    if spread < NO_SPREAD:
        spread, z = 0.0, (0.0 if abs(difference) < NO_SPREAD else math.nan)
    else:
        z = difference / spread
    half = normal_quantile(level) * (math.nan if math.isnan(z) else spread)
    return DeLong(
        areas,
        errors,
        covariance,
        (_wald(areas[0], errors[0], level), _wald(areas[1], errors[1], level)),
        difference,
        Interval(difference - half, difference + half, level, "delong"),
        z,
        math.erfc(abs(z) / math.sqrt(2)),
    )


def _wins(scores: Floats, others: Floats) -> Floats:
    """Share of the others that each score outranks, ties one half."""
    ranked = np.sort(others)
    below = np.searchsorted(ranked, scores, "left") + np.searchsorted(ranked, scores, "right")
    return np.asarray(below / (2 * len(others)) if len(others) else np.full(len(scores), np.nan))


def _variance(v10: Floats, v01: Floats) -> float:
    if min(len(v10), len(v01)) < 2:
        return math.nan
    return float(v10.var(ddof=1) / len(v10) + v01.var(ddof=1) / len(v01))


def _wald(value: float, error: float, level: float) -> Interval:
    half = normal_quantile(level) * error
    if math.isnan(half):
        return Interval(math.nan, math.nan, level, "delong")
    return Interval(max(0.0, value - half), min(1.0, value + half), level, "delong")
