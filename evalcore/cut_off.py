"""From which score on the class of concern is called: rules, cut-offs learned in each round, worth.

A case, or a unit, is called the class if its score for it is at least the cut-off. A cut-off is
learned from scores that a model gave to cases it had not seen. That of several equally cheap
ones the middle is taken is our own choice.
"""

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date
from typing import Any, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.decisions import _threshold, predictive_values
from evalcore.errors import EvalError, PlanError
from evalcore.settings import Setting
from evalcore.shares import Floats, by_group, group_means, group_sums
from evalcore.wording import listed

By = Literal["cost", "floor", "fixed"]

_GOES_WITH: dict[str, By] = {
    "miss": "cost",
    "alarm": "cost",
    "floor": "floor",
    "at": "fixed",
    "set_on": "fixed",
}
_WRITTEN = (*_GOES_WITH, "share", "undecided")


@dataclass(frozen=True)
class CutOffRule:
    """How the cut-off of a class is found; `dataclasses.asdict` gives its arguments back.

    Attributes
    ----------
    of_class : str
        The class that is called from the cut-off up.
    by : {"cost", "floor", "fixed"}
        The least expected cost; the highest that still finds a share of the class; or stated.
    miss, alarm : float
        By cost: what a missed case of the class costs, and a false alarm; above 0.
    share_low, share_high : float
        Share of the class where the answers will be used, strictly between 0 and 1; equal unless
        a range is all that is known. Both 0 if not stated, and then the table's share holds.
    floor : float
        By floor: least share of the class to be found, strictly between 0 and 1.
    at : float
        By fixed: the cut-off.
    set_on : str
        By fixed: the date, YYYY-MM-DD, on which it was set, before these cases were seen; empty
        if it was chosen on them. Nothing here can check it.
    undecided_below : float
        A case whose larger class probability is below this is left to a person; above 0.5 and
        below 1, or 0 for no case.

    Raises
    ------
    PlanError
        A value is out of range, or does not go with `by`.
    """

    of_class: str
    by: By
    miss: float = 1.0
    alarm: float = 1.0
    share_low: float = 0.0
    share_high: float = 0.0
    floor: float = 0.0
    at: float = 0.0
    set_on: str = ""
    undecided_below: float = 0.0

    def __post_init__(self) -> None:
        if not self.of_class:
            raise PlanError("A cut-off needs the class that is called from it up; got none.")
        if self.by not in _GOES_WITH.values():
            raise PlanError(f"A cut-off is by cost, floor or fixed; got {self.by!r}.")
        for name, by in _GOES_WITH.items():
            if by != self.by and getattr(self, name) != getattr(CutOffRule, name):
                raise PlanError(
                    f"`{name}` goes with a cut-off by {by}; got it with one by {self.by}."
                )
        for name in ("miss", "alarm"):
            if not 0 < getattr(self, name) < math.inf:
                raise PlanError(f"`{name}` must be above 0 and finite; got {getattr(self, name)}.")
        if self.by == "floor":
            _check_floor(self.floor)
        if not math.isfinite(self.at):
            raise PlanError(f"`at` must be finite; got {self.at}.")
        if self.set_on:
            _check_date(self.set_on)
        if (self.share_low, self.share_high) != (0, 0):
            _check_share(self.share_low, self.share_high)
        if self.undecided_below != 0 and not 0.5 < self.undecided_below < 1:
            raise PlanError(
                "`undecided` must be above 0.5 and below 1, or 0 for no case; got "
                f"{self.undecided_below}."
            )

    @property
    def chosen_on_these_cases(self) -> bool:
        """Whether it was picked with these cases in view, which flatters it."""
        return self.by == "fixed" and not self.set_on

    @classmethod
    def read(cls, text: str) -> "CutOffRule":
        """A rule as written on the command line: ``CLASS:name=value,name=value``.

        Costs (``miss``, ``alarm``), a ``floor`` or a fixed cut-off (``at``, ``set_on``), exactly
        one of the three; ``share`` is a number or a range, ``undecided`` stands for
        `undecided_below`. The class is what stands before the last colon.

        Raises
        ------
        PlanError
            It cannot be read, or a value is out of range.

        Examples
        --------
        >>> CutOffRule.read("failing:miss=10,share=0.05-0.2").written()
        'failing:miss=10,alarm=1,share=0.05-0.2'
        """
        of_class, _, rest = text.rpartition(":")
        if not of_class:
            raise PlanError(f"A cut-off is written CLASS:name=value,...; got {text!r}.")
        items = _items(rest, text)
        asked = [name for name in items if name in _GOES_WITH and name != "set_on"]
        by = {_GOES_WITH[name] for name in asked}
        if len(by) != 1:
            raise PlanError(
                "A cut-off takes costs (`miss`, `alarm`), a `floor` or a fixed `at`, exactly one "
                f"of the three; got {listed([f'`{n}`' for n in asked]) or 'none'} in {text!r}."
            )
        values: dict[str, Any] = {name: _number(name, items[name]) for name in asked}
        values["set_on"] = items.get("set_on", "")
        if "share" in items:
            values["share_low"], values["share_high"] = _read_share(items["share"])
        if "undecided" in items:
            values["undecided_below"] = _number("undecided", items["undecided"])
        return cls(of_class, by.pop(), **values)

    def written(self) -> str:
        """As on the command line; `read` gives back an equal rule."""
        names = [name for name, by in _GOES_WITH.items() if by == self.by and name != "set_on"]
        items = [f"{name}={_text(getattr(self, name))}" for name in names]
        if self.set_on:
            items.append(f"set_on={self.set_on}")
        if self.share_low:
            ends = dict.fromkeys((_text(self.share_low), _text(self.share_high)))
            items.append(f"share={'-'.join(ends)}")
        if self.undecided_below:
            items.append(f"undecided={_text(self.undecided_below)}")
        return f"{self.of_class}:{','.join(items)}"

    def share_used(self, table_share: float) -> float:
        """The share that costs are weighed by: the middle of what was stated, else the table's.

        Expected cost is linear in the share, so at the middle of a range it is its mean over it.
        """
        return (self.share_low + self.share_high) / 2 if self.share_low else table_share


def _text(value: float) -> str:
    return repr(float(value)).removesuffix(".0")


def _items(rest: str, text: str) -> Mapping[str, str]:
    items: dict[str, str] = {}
    for item in filter(None, rest.split(",")):
        name, equals, value = item.partition("=")
        if not equals:
            raise PlanError(f"{item!r} in {text!r} must be written name=value.")
        if name not in _WRITTEN:
            allowed = listed([f"`{known}`" for known in _WRITTEN], last="or")
            raise PlanError(f"A cut-off has no setting {name!r}; it takes {allowed}.")
        if name in items:
            raise PlanError(f"`{name}` stands twice in {text!r}; once is enough.")
        items[name] = value
    return items


def _number(name: str, text: str) -> float:
    return float(Setting(name, name, "number", 0.0).read(text))


def _read_share(text: str) -> tuple[float, float]:
    # the hyphen of a range, not that of -0.1 or 1e-05
    ends = re.split(r"(?<=[^eE])-(?=.)", text, maxsplit=1)
    low, high = _number("share", ends[0]), _number("share", ends[-1])
    _check_share(low, high)
    return low, high


def _check_share(low: float, high: float) -> None:
    if not 0 < low <= high < 1:
        shown = _text(low) if low == high else f"{_text(low)} to {_text(high)}"
        raise PlanError(
            "`share` must lie strictly between 0 and 1, the lower end of a range first; got "
            f"{shown}."
        )


def _check_floor(floor: float) -> None:
    if not 0 < floor < 1:
        raise PlanError(f"`floor` must lie strictly between 0 and 1; got {_text(floor)}.")


def _check_date(text: str) -> None:
    try:
        known = date.fromisoformat(text).isoformat() == text
    except ValueError:
        known = False
    if not known:
        raise PlanError(f"`set_on` must be a date as YYYY-MM-DD; got {text!r}.")


def cost_per_case(
    sensitivity: ArrayLike, specificity: ArrayLike, *, rule: CutOffRule, share: float
) -> Floats:
    """Expected cost of a case: share x miss x (1 - sensitivity) + what false alarms cost.

    The latter is (1 - share) x alarm x (1 - specificity). Sensitivity and specificity broadcast;
    nan where one of them is.

    Examples
    --------
    >>> rule = CutOffRule("failing", "cost", miss=10)
    >>> round(float(cost_per_case(0.75, 0.5, rule=rule, share=0.2)), 12)
    0.9
    """
    missed = share * rule.miss * (1 - np.asarray(sensitivity, dtype=np.float64))
    return missed + (1 - share) * rule.alarm * (1 - np.asarray(specificity, dtype=np.float64))


def learned(positive: ArrayLike, scores: ArrayLike, *, rule: CutOffRule, share: float) -> float:
    """The cut-off that a rule takes from scores of cases whose class is known.

    By cost: the least `cost_per_case` among the mid-points between neighbouring scores and both
    ends; of several equally cheap ones the middle, the lower of two: in our simulations it moved
    least from sample to sample and cost least on further cases. By floor: the j-th smallest of
    the class's m scores, j = floor((m + 1)(1 - floor)). A further score, exchangeable with them,
    falls below it with a chance of at most j / (m + 1) (Wilks 1941; Vovk, Gammerman & Shafer
    2005). That holds on average over samples, and only as far as the model to be used scores like
    those that gave the scores.

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
        A score is infinite: there is no middle between it and another.

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
        ranked = np.sort(score[is_positive])
        j = _rank(len(ranked), rule.floor)
        return float(ranked[j - 1]) if j else -math.inf
    return _cheapest(is_positive, score, rule=rule, share=share)


def _rank(m: int, floor: float) -> int:
    # 10 (1 - 0.9) is 1, but not in binary fractions; next to a floor of 0 it must not pass m
    return min(m, math.floor((m + 1) * (1 - floor) + 1e-9))


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
    return _threshold(values, int(tied[(len(tied) - 1) // 2]))


def least_units(floor: float) -> int:
    """How many scores of the class it takes to learn a cut-off by floor that calls not all.

    The smallest m with (m + 1)(1 - floor) >= 1 (Wilks 1941); raises `PlanError` unless the floor
    lies strictly between 0 and 1.

    Examples
    --------
    >>> least_units(0.9), least_units(0.95)
    (9, 19)
    """
    _check_floor(floor)
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
class AtShare:
    """What a cut-off gives where the class has a share.

    Attributes
    ----------
    share : float
    right_when_called, right_when_not_called : float
        Positive and negative predictive value; nan where that answer never comes.
    cost : float
        Expected cost of a case; the share wrong where no costs were stated.
    called : float
        Share of all cases that is called the class.
    """

    share: float
    right_when_called: float
    right_when_not_called: float
    cost: float
    called: float


def at_share(sensitivity: float, specificity: float, *, rule: CutOffRule, share: float) -> AtShare:
    """Predictive values, cost and calls of a sensitivity and specificity at a share.

    Called: share x sensitivity + (1 - share)(1 - specificity). nan where a rate is nan; raises
    `EvalError` unless the share lies within 0 to 1.

    Examples
    --------
    >>> found = at_share(0.75, 0.5, rule=CutOffRule("failing", "cost", miss=9), share=0.25)
    >>> round(found.right_when_called, 4), round(found.right_when_not_called, 4)
    (0.3333, 0.8571)
    >>> found.cost, found.called
    (0.9375, 0.5625)
    """
    called_right, left_right = predictive_values(sensitivity, specificity, share=share)
    return AtShare(
        share=share,
        right_when_called=float(called_right),
        right_when_not_called=float(left_right),
        cost=float(cost_per_case(sensitivity, specificity, rule=rule, share=share)),
        called=share * sensitivity + (1 - share) * (1 - specificity),
    )


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
        The larger class probability.
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
