"""An acceptance limit against what the cases show: shown, not shown yet, shown to fall short."""

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np

from evalcore.evaluation import Evaluation
from evalcore.figures import Estimate, Interval
from evalcore.intervals import with_model_variance
from evalcore.judged import Judged, balanced_interval, offers_interval, share_interval
from evalcore.plan import Limit
from evalcore.sample_size import LEAST_UNITS, lower_bound, upper_bound

Word = Literal["shown", "not shown yet", "shown to fall short"]
_NOTHING = Interval(math.nan, math.nan, 0.9, "none")


@dataclass(frozen=True)
class Verdict:
    """What the cases say about one limit.

    Attributes
    ----------
    limit : Limit
    word : {"shown", "not shown yet", "shown to fall short"}
    value : float
        Held-out estimate.
    at_least, at_most : float
        One-sided bounds at the limit's confidence: the more cautious of the exact binomial bound
        on whole units (none for balanced accuracy) and the interval with model variance.
    n : int
        Units of the class, or all.
    """

    limit: Limit
    word: Word
    value: float
    at_least: float
    at_most: float
    n: int


def verdicts(evaluation: Evaluation, candidate: str) -> tuple[Verdict, ...]:
    """One verdict a limit for a candidate under the headline's scheme and counting."""
    part = evaluation.part(candidate, evaluation.scheme)
    return tuple(_verdict(evaluation, part, limit) for limit in evaluation.plan.limits)


def overall(given: tuple[Verdict, ...]) -> Word | None:
    """Shown only if all are, shown to fall short if any is; None without limits."""
    if not given:
        return None
    words = {verdict.word for verdict in given}
    if "shown to fall short" in words:
        return "shown to fall short"
    return "shown" if words == {"shown"} else "not shown yet"


def judge(value: float, at_least: float, at_most: float, *, limit: float, n: int) -> Word:
    """The word for bounds against a limit; fewer than ten units are never called shown."""
    if not math.isnan(value) and at_most < limit:
        return "shown to fall short"
    if at_least >= limit and n >= LEAST_UNITS:
        return "shown"
    return "not shown yet"


def _verdict(evaluation: Evaluation, part: Judged, limit: Limit) -> Verdict:
    level = 2 * limit.confidence - 1
    table = evaluation.table
    estimate = evaluation.estimate(
        limit.measure, part.candidate, of_class=limit.of_class, scheme=part.scheme
    )
    if limit.measure == "balanced_accuracy":
        bounds = balanced_interval(level, part) if offers_interval(part) else _NOTHING
        # moved down with the rate where that is corrected for the luck of being best
        at_least = bounds.low - (estimate.value - _rate(evaluation, estimate))
        at_most = bounds.high
        n = int(table.class_counts("unit").min())
    else:
        k = table.classes.index(limit.of_class) if limit.of_class else None
        n = _units_behind(evaluation, part, k)
        rate = _rate(evaluation, estimate)
        bounds = _bounds(level, part, k, rate) if offers_interval(part) else _NOTHING
        # exact bounds take whole units: rounded down for the lower, up for the upper
        right = rate * n
        at_least = min(
            bounds.low, lower_bound(math.floor(right + 1e-9), n, confidence=limit.confidence)
        )
        most_right = math.ceil(estimate.value * n - 1e-9)
        at_most = max(bounds.high, upper_bound(most_right, n, confidence=limit.confidence))
    word = judge(estimate.value, at_least, at_most, limit=limit.least, n=n)
    return Verdict(limit, word, estimate.value, at_least, at_most, n)


def _rate(evaluation: Evaluation, estimate: Estimate) -> float:
    """The rate a verdict starts from: corrected for luck if the candidate came out best."""
    corrected = evaluation.corrected(estimate.measure, estimate.of_class)
    if (
        corrected is None
        or math.isnan(corrected.value)
        or corrected.candidate != estimate.candidate
    ):
        return estimate.value
    return min(estimate.value, corrected.value)


def _bounds(level: float, part: Judged, of_class: int | None, rate: float) -> Interval:
    """The default interval at a rate that may have been corrected downwards."""
    own = share_interval(level, part, of_class, cautious=True)
    shares = part.shares if of_class is None else part.shares[part.held.labels == of_class]
    value = float(np.nanmean(shares))
    if rate == value or not own.defined:
        return own
    if part.units is not None:
        return Interval(max(0.0, own.low - (value - rate)), own.high, level, own.method)
    tau2 = part.cautious_tau2(of_class)
    at_rate = with_model_variance(rate, int((~np.isnan(shares)).sum()), tau2, level=level)
    # what falls short must do so by the figure as it is
    return Interval(at_rate.low, max(own.high, at_rate.high), level, at_rate.method)


def starting_rate(evaluation: Evaluation, candidate: str, limit: Limit) -> float:
    """The rate the verdict on a limit starts from."""
    estimate = evaluation.estimate(limit.measure, candidate, of_class=limit.of_class)
    return _rate(evaluation, estimate)


def _units_behind(evaluation: Evaluation, part: Judged, of_class: int | None) -> int:
    known = ~np.isnan(part.shares)
    if of_class is not None:
        known &= part.held.labels == of_class
    return len(np.unique(part.units[known])) if part.units is not None else int(known.sum())
