"""What answers are worth for a decision: at other class shares, at other cut-offs, against acting
on all or on none.

A case is called positive if its score is at least the cut-off. Values that cannot be computed are
nan. Sensitivity and specificity of confusion counts are `measures.recalls` and
`measures.specificities`, for every class at once.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.errors import EvalError
from evalcore.shares import Floats, by_group, group_sums, quotient


def within(name: str, value: ArrayLike, *, below_one: bool = False) -> Floats:
    given = np.asarray(value, dtype=np.float64)
    fits = (given >= 0) & ((given < 1) if below_one else (given <= 1))
    if not fits.all():
        allowed = "from 0 to below 1" if below_one else "from 0 to 1"
        raise EvalError(f"`{name}` must be {allowed}; got {given[~fits].flat[0]}.")
    return given


def likelihood_ratios(sensitivity: ArrayLike, specificity: ArrayLike) -> tuple[Floats, Floats]:
    """How many times likelier an answer is for the class than for the others.

    Positive: sensitivity / (1 - specificity); negative: (1 - sensitivity) / specificity (Deeks &
    Altman 2004). They do not depend on the class shares; the odds of the class before an answer
    times the ratio are the odds after it.

    Parameters
    ----------
    sensitivity, specificity : array_like
        Of shapes that broadcast.

    Returns
    -------
    tuple of ndarray
        Positive and negative ratio. nan, not infinity, where no answer was wrong in that way:
        the cases then set no upper bound to it.

    Examples
    --------
    >>> [round(float(ratio), 4) for ratio in likelihood_ratios(231 / 258, 54 / 86)]
    [2.4062, 0.1667]
    """
    found = np.asarray(sensitivity, dtype=np.float64)
    passed = np.asarray(specificity, dtype=np.float64)
    return quotient(found, 1 - passed), quotient(1 - found, passed)


def predictive_values(
    sensitivity: ArrayLike, specificity: ArrayLike, *, share: ArrayLike
) -> tuple[Floats, Floats]:
    """How often an answer is right where the class has a stated share (Bayes' rule).

    Positive: s p / (s p + (1 - c)(1 - p)); negative: c (1 - p) / (c (1 - p) + (1 - s) p), with
    sensitivity s, specificity c and share p (Altman & Bland 1994). At the share of the counted
    cases they are the precision and its counterpart.

    Parameters
    ----------
    sensitivity, specificity : array_like
    share : array_like
        Share of the class where the answers will be used, 0 to 1. All broadcast.

    Returns
    -------
    tuple of ndarray
        Right when it names the class, right when it does not. nan where that answer never comes.

    Raises
    ------
    EvalError
        A share is not within 0 to 1.

    Examples
    --------
    >>> positive, negative = predictive_values(0.8, 1 - 0.096, share=0.01)
    >>> round(float(positive), 3), round(float(negative), 3)
    (0.078, 0.998)
    """
    p = within("share", share)
    found = np.asarray(sensitivity, dtype=np.float64)
    passed = np.asarray(specificity, dtype=np.float64)
    right, wrong = found * p, (1 - passed) * (1 - p)
    cleared, missed = passed * (1 - p), (1 - found) * p
    return quotient(right, right + wrong), quotient(cleared, cleared + missed)


def youden(sensitivity: ArrayLike, specificity: ArrayLike) -> Floats:
    """Youden's index: sensitivity + specificity - 1 (Youden 1950); 0 for guessing, 1 at best.

    Examples
    --------
    >>> youden([0.9, 1.0], [0.6, 0.0]).tolist()
    [0.5, 0.0]
    """
    found = np.asarray(sensitivity, dtype=np.float64)
    return found + np.asarray(specificity, dtype=np.float64) - 1


@dataclass(frozen=True)
class CutOff:
    """A cut-off and what it does on the cases it was chosen on, which flatters it.

    Attributes
    ----------
    threshold : float
        Positive from here up; -infinity calls every case positive.
    youden, sensitivity, specificity : float
    """

    threshold: float
    youden: float
    sensitivity: float
    specificity: float


def best_cut_off(
    positive: ArrayLike, scores: ArrayLike, *, weights: ArrayLike | None = None
) -> CutOff:
    """The cut-off with the highest Youden index.

    Candidates are the mid-points between neighbouring values, and both ends: all positive, none
    positive. Of several equally good, the lowest is taken, so the one with the highest
    sensitivity; ties are found exactly for whole-number weights. The index is never below 0:
    scores that rank the wrong way, or are all equal, get -infinity.

    Parameters
    ----------
    positive : array_like of bool, shape (T,)
    scores : array_like, shape (T,)
        Higher means more likely positive.
    weights : array_like, shape (T,), optional
        How often each case counts; once if left out.

    Returns
    -------
    CutOff
        nan throughout where a class has no case.

    Examples
    --------
    >>> best_cut_off([0, 0, 1, 1], [0.1, 0.25, 0.75, 0.9])
    CutOff(threshold=0.5, youden=1.0, sensitivity=1.0, specificity=1.0)
    """
    is_positive: NDArray[np.bool_] = np.asarray(positive, dtype=bool)
    score = np.asarray(scores, dtype=np.float64)
    _, weight = by_group(len(score), groups=None, weights=weights)
    # a case that does not count must not move a mid-point
    counts = weight > 0
    is_positive, score, weight = is_positive[counts], score[counts], weight[counts]
    if is_positive.all() or not is_positive.any():
        return CutOff(math.nan, math.nan, math.nan, math.nan)
    values, place = np.unique(score, return_inverse=True)
    ups = group_sums(weight * is_positive, place)
    downs = group_sums(weight * ~is_positive, place)
    # below each cut-off, from -infinity to infinity
    missed, cleared = (np.concatenate([[0.0], np.cumsum(side)]) for side in (ups, downs))
    n1, n0 = missed[-1], cleared[-1]
    # the index times n1 n0, in whole numbers, so that ties are ties; the first is the lowest
    at = int(np.argmax(cleared * n1 - missed * n0))
    sensitivity, specificity = (n1 - missed[at]) / n1, cleared[at] / n0
    index = float(youden(sensitivity, specificity))
    return CutOff(mid_point(values, at), index, float(sensitivity), float(specificity))


def mid_point(values: Floats, below: int) -> float:
    """A cut-off with so many of the distinct values below it: half way, or the end."""
    if below in (0, len(values)):
        return -math.inf if below == 0 else math.inf
    low, high = float(values[below - 1]), float(values[below])
    middle = low / 2 + high / 2
    # neighbouring floats have nothing between them
    return middle if low < middle else high


def net_benefit(
    true_positives: ArrayLike, false_positives: ArrayLike, *, n: ArrayLike, threshold: ArrayLike
) -> Floats:
    """Net benefit of acting on positive answers, in true positives a case.

    TP / n - FP / n x t / (1 - t), t the probability from which acting is worth while, so that
    t / (1 - t) is what a false positive costs against what a true positive gains (Vickers & Elkin
    2006). Acting on all: all positives, all negatives; acting on none: 0.

    Parameters
    ----------
    true_positives, false_positives, n : array_like
        Counts, and the number of all cases.
    threshold : array_like
        From 0 to below 1. All broadcast.

    Returns
    -------
    ndarray
        At most the share of positives; nan where there is no case.

    Raises
    ------
    EvalError
        A threshold is out of range.

    Examples
    --------
    >>> round(float(net_benefit(6, 204, n=810, threshold=0.005)), 8)
    0.00614182
    """
    t = within("threshold", threshold, below_one=True)
    gain, harm = quotient(true_positives, n), quotient(false_positives, n)
    return np.asarray(gain - harm * t / (1 - t))


@dataclass(frozen=True, eq=False)
class DecisionCurve:
    """Net benefit at several thresholds.

    Attributes
    ----------
    thresholds, model, treat_all, treat_none : ndarray, shape (M,)
    """

    thresholds: Floats
    model: Floats
    treat_all: Floats
    treat_none: Floats


def decision_curve(
    positive: ArrayLike,
    forecasts: ArrayLike,
    *,
    thresholds: ArrayLike,
    weights: ArrayLike | None = None,
) -> DecisionCurve:
    """Net benefit of acting where the forecast is at least the threshold; on all; on none.

    Parameters
    ----------
    positive : array_like of bool, shape (T,)
    forecasts : array_like, shape (T,)
        Probability of the positive class.
    thresholds : array_like, shape (M,)
        From 0 to below 1.
    weights : array_like, shape (T,), optional
        How often each case counts; once if left out.

    Returns
    -------
    DecisionCurve
        nan where there is no case.

    Raises
    ------
    EvalError
        A threshold is out of range.

    Examples
    --------
    >>> curve = decision_curve([0, 0, 1, 1], [0.1, 0.6, 0.5, 0.9], thresholds=[0.2, 0.5])
    >>> curve.model.tolist(), curve.treat_all.tolist()
    ([0.4375, 0.25], [0.375, 0.0])
    """
    is_positive: NDArray[np.bool_] = np.asarray(positive, dtype=bool)
    forecast = np.asarray(forecasts, dtype=np.float64)
    threshold = np.asarray(thresholds, dtype=np.float64)
    _, weight = by_group(len(forecast), groups=None, weights=weights)
    up, down = weight * is_positive, weight * ~is_positive
    acted = (forecast >= threshold[:, None]).astype(np.float64)
    n = weight.sum()
    model = net_benefit(acted @ up, acted @ down, n=n, threshold=threshold)
    everyone = net_benefit(up.sum(), down.sum(), n=n, threshold=threshold)
    return DecisionCurve(threshold, model, everyone, np.where(n > 0, np.zeros_like(model), np.nan))
