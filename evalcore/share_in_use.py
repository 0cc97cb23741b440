"""What a cut-off's two rates are worth where the class has a stated share."""

import math
from dataclasses import dataclass

from evalcore.cut_off import cost_per_case
from evalcore.cut_off_rule import CutOffRule
from evalcore.decisions import predictive_values


@dataclass(frozen=True)
class Rate:
    """A value and the ends of its interval, nan where none is offered."""

    value: float
    low: float = math.nan
    high: float = math.nan

    @property
    def missed(self) -> "Rate":
        """What a share leaves to one."""
        return Rate(1 - self.value, 1 - self.high, 1 - self.low)

    @property
    def bounded(self) -> bool:
        """Whether value and both ends are known."""
        return not any(map(math.isnan, (self.value, self.low, self.high)))


@dataclass(frozen=True)
class AtShare:
    """What a cut-off gives where the class has a share.

    Attributes
    ----------
    share : float
    right_when_called, right_when_not_called : Rate
        Positive and negative predictive value; nan where that answer never comes.
    cost : Rate
        Expected cost of a case; the share wrong where no costs were stated.
    called : float
        Share of all cases that is called the class.
    """

    share: float
    right_when_called: Rate
    right_when_not_called: Rate
    cost: Rate
    called: float


def at_share(sensitivity: Rate, specificity: Rate, *, rule: CutOffRule, share: float) -> AtShare:
    """Predictive values, cost and calls of a sensitivity and specificity at a share.

    Called: share x sensitivity + (1 - share)(1 - specificity). nan where a rate is nan, ends
    too where a rate has none; raises `EvalError` unless the share lies within 0 to 1.

    Examples
    --------
    >>> rule = CutOffRule("failing", "cost", miss=9)
    >>> found = at_share(Rate(0.75), Rate(0.5), rule=rule, share=0.25)
    >>> round(found.right_when_called.value, 4), round(found.right_when_not_called.value, 4)
    (0.3333, 0.8571)
    >>> found.cost.value, found.called
    (0.9375, 0.5625)
    """
    s, c = sensitivity.value, specificity.value
    right, left_right = (float(value) for value in predictive_values(s, c, share=share))
    missed, alarms = sensitivity.missed, specificity.missed
    weights = (share * rule.miss, (1 - share) * rule.alarm)
    return AtShare(
        share=share,
        right_when_called=_predictive(right, ratio_of_shares(alarms, sensitivity), share),
        right_when_not_called=_predictive(
            left_right, ratio_of_shares(missed, specificity), 1 - share
        ),
        cost=Rate(
            float(cost_per_case(s, c, rule=rule, share=share)),
            *sum_of_shares(missed, alarms, weights=weights),
        ),
        called=share * s + (1 - share) * (1 - c),
    )


def _predictive(value: float, wrong_to_right: tuple[float, float], share: float) -> Rate:
    """A predictive value: 1 / (1 + ratio (1 - share) / share), falling in the ratio."""
    if not 0 < share < 1 or math.isnan(value):
        return Rate(value)
    low, high = (1 / (1 + ratio * (1 - share) / share) for ratio in reversed(wrong_to_right))
    return Rate(value, low, high)


def ratio_of_shares(over: Rate, under: Rate) -> tuple[float, float]:
    """Ends of an interval for the ratio of two independent shares from an interval for each.

    They are where the square-and-add interval of over - ratio x under has an end at 0 (Donner &
    Zou 2012, equation 9), written so that nothing is divided by 0. What the model's variance has
    in common for both is left out: at a cut-off both go up together, so the interval is rather
    too wide.

    Returns
    -------
    tuple of float
        0 to inf; nan where an end of either is, and where both shares are 0.

    Examples
    --------
    >>> low, high = ratio_of_shares(Rate(0.1, 0.0435, 0.2136), Rate(0.8, 0.6524, 0.895))
    >>> round(low, 4), round(high, 4)
    (0.0541, 0.2758)
    """
    a, b = over.value, under.value
    if not (over.bounded and under.bounded) or a == b == 0:
        return math.nan, math.nan
    least, most = over.low * (2 * a - over.low), over.high * (2 * a - over.high)
    above, below = under.high * (2 * b - under.high), under.low * (2 * b - under.low)
    first = a * b + math.sqrt(max(0.0, (a * b) ** 2 - least * above))
    second = a * b + math.sqrt(max(0.0, (a * b) ** 2 - most * below))
    low = least / first if first else (math.inf if least else 0.0)
    return low, second / below if below else math.inf


def sum_of_shares(*rates: Rate, weights: tuple[float, ...]) -> tuple[float, float]:
    """Ends of an interval for a weighted sum of independent shares.

    Square-and-add (Zou & Donner 2008): root of the summed squares of the weighted distances. As
    for `ratio_of_shares`, misses and false alarms trade against each other, which is left out.
    nan where an end of any is.

    Examples
    --------
    >>> ends = sum_of_shares(Rate(0.5, 0.25, 0.75), Rate(0.5, 0.125, 0.875), weights=(4, 2))
    >>> ends
    (1.75, 4.25)
    """
    if not all(rate.bounded for rate in rates):
        return math.nan, math.nan
    value = sum(weight * rate.value for rate, weight in zip(rates, weights, strict=True))
    pairs = list(zip(rates, weights, strict=True))
    below = math.sqrt(sum((weight * (rate.value - rate.low)) ** 2 for rate, weight in pairs))
    above = math.sqrt(sum((weight * (rate.high - rate.value)) ** 2 for rate, weight in pairs))
    # no further than where every share is 0 or 1, but for rounding
    return max(0.0, value - below), min(sum(weights), value + above)
