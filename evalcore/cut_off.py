"""From which score on the class of concern is called: rules, cut-offs learned in each round, worth.

A case, or a unit, is called the class if its score for it is at least the cut-off. A cut-off is
learned from scores that a model gave to cases it had not seen. That of several equally cheap
ones the middle is taken is our own choice.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.cut_off_rule import CutOffRule, check_floor
from evalcore.decisions import mid_point, within
from evalcore.errors import EvalError
from evalcore.shares import Floats, by_group, group_means, group_sums


def cost_per_case(
    sensitivity: ArrayLike, specificity: ArrayLike, *, rule: CutOffRule, share: float
) -> Floats:
    """Expected cost of a case: share x miss x (1 - sensitivity) + what false alarms cost.

    The latter is (1 - share) x alarm x (1 - specificity). Sensitivity and specificity broadcast;
    nan where one of them is. Raises `EvalError` unless the share lies within 0 to 1.

    Examples
    --------
    >>> rule = CutOffRule("failing", "cost", miss=10)
    >>> round(float(cost_per_case(0.75, 0.5, rule=rule, share=0.2)), 12)
    0.9
    """
    p = within("share", share)
    missed = p * rule.miss * (1 - np.asarray(sensitivity, dtype=np.float64))
    return missed + (1 - p) * rule.alarm * (1 - np.asarray(specificity, dtype=np.float64))


def learned(positive: ArrayLike, scores: ArrayLike, *, rule: CutOffRule, share: float) -> float:
    """The cut-off that a rule takes from scores of cases whose class is known.

    By cost: the least `cost_per_case` among the mid-points between neighbouring scores and both
    ends; of several equally cheap ones the middle, the lower of two: it moves less from sample to
    sample than the lowest, and cost less on further cases where we simulated both. By floor: the
    j-th smallest of the class's m scores, j = (m + 1)(1 - floor), between two of them where j is
    no whole number. A further score, exchangeable with them, falls below the j-th with a chance of
    j / (m + 1) (Wilks 1941; Vovk, Gammerman & Shafer 2005), and between two with one in between:
    so bags and the whole table cut at one level, whatever m (our own choice). That holds on
    average over samples, and only as far as the model to be used scores like those that gave the
    scores.

    Parameters
    ----------
    positive : array_like of bool, shape (m,)
        Each distinct case, or unit, once.
    scores : array_like, shape (m,)
        By models that had not seen the case; nan, left out, where there is none.
    rule : CutOffRule
    share : float
        What costs are weighed by, 0 to 1: `rule.share_used` of the table's share.

    Returns
    -------
    float
        -infinity to call all, +infinity none; by floor, -infinity where the class has fewer than
        `least_units`. nan where a class has no case, unless it is fixed.

    Raises
    ------
    EvalError
        A score is infinite: there is no middle between it and another. Or, by cost, the share is
        not within 0 to 1.

    Examples
    --------
    >>> seen = [True, True, False, True, False], [0.9, 0.8, 0.5, 0.3, 0.1]
    >>> learned(*seen, rule=CutOffRule("failing", "cost"), share=0.5)
    0.65
    >>> learned(*seen, rule=CutOffRule("failing", "cost", miss=10), share=0.5)
    0.2
    >>> learned(*seen, rule=CutOffRule("failing", "floor", floor=0.5), share=0.5)
    0.8
    """
    if rule.by == "fixed":
        return rule.at
    score = np.asarray(scores, dtype=np.float64)
    if np.isinf(score).any():
        raise EvalError("A cut-off is learned from finite scores; got an infinite one.")
    known = ~np.isnan(score)
    is_positive, score = np.asarray(positive, dtype=bool)[known], score[known]
    if is_positive.all() or not is_positive.any():
        return math.nan
    if rule.by == "floor":
        return _at_floor(np.sort(score[is_positive]), rule.floor)
    return _cheapest(is_positive, score, rule=rule, share=share)


def _at_floor(ranked: Floats, floor: float) -> float:
    """The score at rank (m + 1)(1 - floor), counted from 1; -infinity below the first."""
    # 10 (1 - 0.9) is 1, but not in binary fractions; next to a floor of 0 it must not pass m
    rank = min(float(len(ranked)), round((len(ranked) + 1) * (1 - floor), 9))
    if rank < 1:
        return -math.inf
    return float(np.interp(rank, np.arange(1, len(ranked) + 1), ranked))


def _cheapest(
    is_positive: NDArray[np.bool_], score: Floats, *, rule: CutOffRule, share: float
) -> float:
    values, place = np.unique(score, return_inverse=True)
    # below each cut-off, from -infinity to infinity
    missed, cleared = (
        np.concatenate([[0.0], np.cumsum(group_sums(side, place))])
        for side in (is_positive, ~is_positive)
    )
    cost = cost_per_case(1 - missed / missed[-1], cleared / cleared[-1], rule=rule, share=share)
    # ties but for rounding, on the scale of missing all and calling all
    slack = 1e-12 * (share * rule.miss + (1 - share) * rule.alarm)
    tied = np.flatnonzero(cost <= cost.min() + slack)
    return mid_point(values, int(tied[(len(tied) - 1) // 2]))


def least_units(floor: float) -> int:
    """How many scores of the class it takes to learn a cut-off by floor that calls not all.

    The smallest m with (m + 1)(1 - floor) >= 1 (Wilks 1941); raises `PlanError` unless the floor
    lies strictly between 0 and 1.

    Examples
    --------
    >>> least_units(0.9), least_units(0.95)
    (9, 19)
    """
    check_floor(floor)
    return max(1, math.ceil((1 - 1e-9) / (1 - floor)) - 1)


def learned_by_round(
    positive: ArrayLike, inner: ArrayLike, *, rule: CutOffRule, share: float
) -> Floats:
    """`learned` in each round, shape (R,).

    Parameters
    ----------
    positive : array_like of bool, shape (N,)
    inner : array_like, shape (R, N)
        Scores within each bag, of cases held out there; nan for cases not in the bag.
    rule : CutOffRule
    share : float
        As for `learned`.

    Examples
    --------
    >>> inner = [[0.8, 0.4, np.nan], [0.8, np.nan, 0.2], [np.nan, 0.4, 0.2]]
    >>> rule = CutOffRule("failing", "cost")
    >>> learned_by_round([True, False, False], inner, rule=rule, share=0.5).round(3).tolist()
    [0.6, 0.5, nan]
    """
    rounds = np.asarray(inner, dtype=np.float64)
    return np.array([learned(positive, each, rule=rule, share=share) for each in rounds], float)


def calls(scores: ArrayLike, cut_offs: ArrayLike) -> Floats:
    """1 where the class is called, 0 where not, nan where score or cut-off is; they broadcast.

    Numbers, not truth values, so that an answer that could not be given can still be counted.

    Examples
    --------
    >>> calls([[0.2, 0.5, np.nan], [0.2, 0.5, 0.9]], [[0.5], [np.nan]]).tolist()
    [[0.0, 1.0, nan], [nan, nan, nan]]
    """
    score, cut_off = np.asarray(scores, dtype=np.float64), np.asarray(cut_offs, dtype=np.float64)
    return np.where(np.isnan(score) | np.isnan(cut_off), np.nan, score >= cut_off)


@dataclass(frozen=True)
class WithUndecided:
    """How often answers are right if some cases are left to a person.

    Attributes
    ----------
    sent : float
        Share left undecided.
    right_of_decided : float
        Share right among the others; nan if there is none.
    right_counting_undecided_wrong, right_counting_undecided_right : float
        Share right of all, if the person is never right, and if always.
    """

    sent: float
    right_of_decided: float
    right_counting_undecided_wrong: float
    right_counting_undecided_right: float


def with_undecided(
    right: ArrayLike, top: ArrayLike, *, below: float, weights: ArrayLike | None = None
) -> WithUndecided:
    """How often answers are right if those with a low probability are left to a person.

    Parameters
    ----------
    right : array_like of bool, shape (T,)
    top : array_like, shape (T,)
        Probability of the class that was answered.
    below : float
        Undecided if it is below this; 0 for no case.
    weights : array_like, shape (T,), optional
        How often each case counts; once if left out.

    Returns
    -------
    WithUndecided
        nan throughout without a case, or if a probability is nan: whether that case would have
        been decided is not known.

    Examples
    --------
    >>> found = with_undecided([True, True, False, False], [0.9, 0.6, 0.8, 0.5], below=0.7)
    >>> found.sent, found.right_of_decided
    (0.5, 0.5)
    >>> found.right_counting_undecided_wrong, found.right_counting_undecided_right
    (0.25, 0.75)
    """
    probability = np.asarray(top, dtype=np.float64)
    _, weight = by_group(len(probability), groups=None, weights=weights)
    # a case that does not count must not make anything undefined
    counts = weight > 0
    weight, probability = weight[counts], probability[counts]
    is_right = np.asarray(right, dtype=np.float64)[counts]
    decided = calls(probability, below)

    def mean(values: Floats, over: Floats) -> float:
        return float(group_means(values, weights=over)[0])

    return WithUndecided(
        sent=mean(1 - decided, weight),
        right_of_decided=mean(is_right, weight * decided),
        right_counting_undecided_wrong=mean(is_right * decided, weight),
        right_counting_undecided_right=mean(np.maximum(is_right, 1 - decided), weight),
    )
