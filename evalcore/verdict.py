"""An acceptance limit against what the cases show: shown, not shown yet, shown to fall short."""

import math
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from evalcore.evaluation import Evaluation
from evalcore.figures import Interval
from evalcore.judged import Judged
from evalcore.judged_intervals import at_rate, balanced_interval, offers_interval, share_interval
from evalcore.limit import Limit
from evalcore.sample_size import LEAST_UNITS, lower_bound, upper_bound
from evalcore.table import Table

Word = Literal["shown", "not shown yet", "shown to fall short"]


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
    rate : float
        What the lower bound starts from: where several candidates were tried, no more than the
        best is worth.
    at_cut_off : bool
        Whether it is about answers at a learned cut-off, not about the highest score.
    """

    limit: Limit
    word: Word
    value: float
    at_least: float
    at_most: float
    n: int
    rate: float
    at_cut_off: bool = False


def verdicts(evaluation: Evaluation, candidate: str) -> tuple[Verdict, ...]:
    """One verdict a limit for a candidate under the headline's scheme and counting."""
    part = evaluation.part(candidate, evaluation.scheme)
    return tuple(
        _verdict(evaluation.table, part, limit, corrected=_corrected(evaluation, limit))
        for limit in evaluation.plan.limits
    )


def verdicts_at_cut_off(evaluation: Evaluation, candidate: str) -> tuple[Verdict, ...]:
    """The same of answers at the cut-off learned inside each bag; none where none is learned.

    A cut-off that was chosen on these cases is never called *shown*: it was fitted to them.
    """
    found = evaluation.at_cut_off(candidate)
    if found is None:
        return ()
    given = []
    for limit in evaluation.plan.limits:
        corrected = _corrected(evaluation, limit, at_cut_off=True)
        verdict = _verdict(evaluation.table, found.part, limit, corrected=corrected)
        fitted = found.rule.chosen_on_these_cases and verdict.word == "shown"
        word: Word = "not shown yet" if fitted else verdict.word
        given.append(replace(verdict, word=word, at_cut_off=True))
    return tuple(given)


def verdicts_in_use(evaluation: Evaluation, candidate: str) -> tuple[Verdict, ...]:
    """Of the answers that go to work: at the cut-off where one is learned, else as they are."""
    return verdicts_at_cut_off(evaluation, candidate) or verdicts(evaluation, candidate)


def part_behind(evaluation: Evaluation, candidate: str, verdict: Verdict) -> Judged:
    """The answers that a verdict is about."""
    at = evaluation.at_cut_off(candidate) if verdict.at_cut_off else None
    return at.part if at else evaluation.part(candidate, evaluation.scheme)


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


def _verdict(table: Table, part: Judged, limit: Limit, *, corrected: float | None) -> Verdict:
    level = 2 * limit.confidence - 1
    k = table.classes.index(limit.of_class) if limit.of_class else None
    value = part.pooled_value(limit.measure, k or 0)
    rate, usable = _rate(value, corrected), offers_interval(part, k)
    at_least = at_most = math.nan
    if limit.measure == "balanced_accuracy":
        known = part.held.labels[~np.isnan(part.shares)]
        n = int(np.bincount(known, minlength=part.n_classes).min())
        if usable:
            bounds = balanced_interval(level, part)
            # moved down with the rate where that is corrected for the luck of being best
            at_least, at_most = bounds.low - (value - rate), bounds.high
    else:
        n = _units_behind(part, k)
        # exact bounds take whole units: rounded down for the lower, up for the upper
        if usable and not math.isnan(rate):
            whole = math.floor(rate * n + 1e-9)
            exact = lower_bound(whole, n, confidence=limit.confidence)
            at_least = min(_bounds(level, part, k, rate).low, exact)
        if usable and not math.isnan(value):
            whole = math.ceil(value * n - 1e-9)
            exact = upper_bound(whole, n, confidence=limit.confidence)
            at_most = max(share_interval(level, part, k, cautious=True).high, exact)
    word = judge(value, at_least, at_most, limit=limit.least, n=n)
    return Verdict(limit, word, value, at_least, at_most, n, rate)


def _rate(value: float, corrected: float | None) -> float:
    """The rate a verdict starts from: where several were tried, no more than the best is worth."""
    if corrected is None:
        return value
    if math.isnan(corrected):
        return math.nan  # luck that cannot be told apart shows nothing
    return min(value, corrected)


def _corrected(evaluation: Evaluation, limit: Limit, *, at_cut_off: bool = False) -> float | None:
    """What the best candidate is worth by a limit's measure; None if one was tried."""
    found = evaluation.corrected(limit.measure, limit.of_class, at_cut_off=at_cut_off)
    return None if found is None else found.value


def _bounds(level: float, part: Judged, of_class: int | None, rate: float) -> Interval:
    """The interval with cautious model variance at a rate that may have been corrected."""
    own = share_interval(level, part, of_class, cautious=True)
    shares = part.shares if of_class is None else part.shares[part.held.labels == of_class]
    value = float(np.nanmean(shares))
    if rate == value or not own.defined:
        return own
    if part.units is not None:
        return Interval(max(0.0, own.low - (value - rate)), own.high, level, own.method)
    tau2 = part.cautious_tau2(of_class)
    n = int((~np.isnan(shares)).sum())
    return at_rate(part, rate, n, tau2=tau2, level=level, of_class=of_class)


def _units_behind(part: Judged, of_class: int | None) -> int:
    known = ~np.isnan(part.shares)
    if of_class is not None:
        known &= part.held.labels == of_class
    return len(np.unique(part.units[known])) if part.units is not None else int(known.sum())
