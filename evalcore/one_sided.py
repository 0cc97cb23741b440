"""Bounds of a share on one side only: at least this large, at most this large.

A claim such as "at least 90 % right" needs one side, which costs fewer cases than two.
"""

import math
from statistics import NormalDist
from typing import Literal

from evalcore.binomial import exact_high, exact_low, usable, wilson_ends

OneSided = Literal["clopper_pearson", "wilson"]


def lower_bound(
    right: float, n: float, *, confidence: float = 0.95, method: OneSided = "clopper_pearson"
) -> float:
    """One-sided lower bound of a share: it is at least this large, with that confidence.

    Parameters
    ----------
    right, n
        As in `clopper_pearson`; the bound is 0 where nothing was right, nan without a trial.
    confidence : float
        One-sided, 0.5 to below 1.
    method : {"clopper_pearson", "wilson"}
        Exact (Clopper & Pearson 1934) or score (Wilson 1927).

    Examples
    --------
    >>> round(lower_bound(59, 59), 4)
    0.9505
    """
    if method == "clopper_pearson":
        return exact_low(right, n, _tail(confidence))
    return _score_ends(right, n, confidence)[0]


def upper_bound(
    right: float, n: float, *, confidence: float = 0.95, method: OneSided = "clopper_pearson"
) -> float:
    """One-sided upper bound of a share: it is at most this large, with that confidence.

    Parameters are those of `lower_bound`; the bound is 1 where all was right.

    >>> round(upper_bound(0, 20), 4)
    0.1391
    """
    if method == "clopper_pearson":
        return exact_high(right, n, _tail(confidence))
    return _score_ends(right, n, confidence)[1]


def confidence_shown(right: float, n: float, *, least: float) -> float:
    """Confidence with which right answers show a share of at least `least`.

    The level at which the exact lower bound is `least`: the chance of fewer right answers if the
    share were `least` (Clopper & Pearson 1934). 0 where nothing was right, nan without a trial.

    >>> round(confidence_shown(48, 50, least=0.9), 4)
    0.8883
    """
    from scipy.special import betaincc

    if not 0 < least < 1:
        raise ValueError(f"`least` must be between 0 and 1, both excluded; got {least}.")
    if not usable(right, n):
        return math.nan
    return 0.0 if right == 0 else float(betaincc(right, n - right + 1, least))


def rule_of_three(n: float) -> float:
    """Rough 95 % upper bound of a share that was never seen in n trials: 3/n.

    Hanley & Lippman-Hand 1983. Slightly above the exact 1 - 0.05^(1/n), close from 30 trials on;
    it says nothing below 3 trials, where it exceeds 1. nan without a trial.

    >>> rule_of_three(100)
    0.03
    """
    return 3 / n if n > 0 else math.nan


def _tail(confidence: float) -> float:
    if not 0.5 <= confidence < 1:
        raise ValueError(f"`confidence` must be at least 0.5 and below 1; got {confidence}.")
    return 1 - confidence


def _score_ends(right: float, n: float, confidence: float) -> tuple[float, float]:
    z = -NormalDist().inv_cdf(_tail(confidence))
    return wilson_ends(right / n, n, z) if usable(right, n) else (math.nan, math.nan)
