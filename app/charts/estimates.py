"""Who is how good, and how sure that is: estimates with their intervals (form b)."""

import math
from collections.abc import Sequence
from itertools import combinations

import altair as alt

from app.charts import drawing, saying
from app.charts.placing import Reference
from app.charts.style import (
    Figure,
    Row,
    candidate_look,
    caption,
    learned_names,
    scheme_so_far,
    short_title,
    shorten,
    text_alternative,
)
from app.charts.tracks import TrackRow, track_chart
from evalcore.answer import by_highest
from evalcore.evaluation import Evaluation
from evalcore.figures import Estimate
from evalcore.profile import majority
from evalcore.wording import (
    capitalised,
    decimal,
    level,
    listed,
    n_equals,
    percent,
    quoted,
)


def estimates_with_intervals(evaluation: Evaluation, measure: str) -> Figure:
    """Chart of each candidate's estimate under the headline's scheme, with its interval.

    Parameters
    ----------
    evaluation : Evaluation
    measure : {"accuracy", "balanced_accuracy", "auc"}

    Returns
    -------
    Figure
        One row a candidate that learns, in the order of the plan. Always answering the majority
        (or guessing) is a line, as is the strictest limit on the measure, if there is one.

    Raises
    ------
    KeyError
        The scheme has no answers yet.
    """
    found = estimates_of(evaluation, measure)
    reference, limit = reference_line(evaluation, measure), _limit(evaluation, measure)
    titles = [evaluation.plan.title(e.candidate) for e in found]
    noun = evaluation.table.noun_for(evaluation.counted_by)
    title = title_of(titles, found, reference)
    said = [
        f"{name}: {saying.spoken(e)}, {n_equals(e.n, noun)}"
        for name, e in zip(titles, found, strict=True)
    ]
    lines, scheme = [reference, *limit], scheme_so_far(evaluation, evaluation.scheme)
    return Figure(
        title=title,
        caption=caption(
            evaluation,
            evaluation.scheme,
            by_highest(evaluation),
            _how(evaluation, found, limit),
        ),
        chart=_chart(evaluation, found, lines, measure),
        alt=text_alternative(title, said, [line.long for line in lines], scheme),
        rows=tuple(_row(evaluation, e) for e in found),
    )


def _how(evaluation: Evaluation, found: Sequence[Estimate], limit: list[Reference]) -> str:
    parts = []
    if any(e.interval is not None and e.interval.defined for e in found):
        parts.append(f"block: {level(evaluation.plan.level)} interval")
    if limit:
        parts.append("straw: below the limit")
    return "; ".join(parts)


def _chart(
    evaluation: Evaluation, found: Sequence[Estimate], lines: list[Reference], measure: str
) -> alt.LayerChart:
    ends = [end for e in found if e.interval for end in (e.interval.low, e.interval.high)]
    needed = [*(line.value for line in lines), *(e.value for e in found), *ends]
    noun = evaluation.table.noun_for(evaluation.counted_by)
    return track_chart(
        [_track(evaluation, e) for e in found],
        lines,
        rule=drawing.ruler(needed, measure=measure),
        title=saying.axis_title(measure, noun),
    )


def estimates_of(evaluation: Evaluation, measure: str) -> list[Estimate]:
    """The estimates that are drawn: the headline scheme's, of candidates that have answers."""
    estimator = "mean_of_rounds" if measure == "auc" else "held_out_by_case"
    have = {j.candidate for j in evaluation.judged if j.scheme == evaluation.scheme}
    names = [name for name in learned_names(evaluation) if name in have]
    if not names:
        raise KeyError(f"The scheme {evaluation.scheme!r} has no answers yet.")
    return [evaluation.estimate(measure, name, estimator=estimator) for name in names]


def reference_line(evaluation: Evaluation, measure: str) -> Reference:
    """What looking at no feature reaches: always answering the majority, or guessing."""
    table = evaluation.table
    if measure == "accuracy":
        at, share = majority(table, evaluation.counted_by)
        n = int(table.class_counts(evaluation.counted_by).sum())
        name = table.classes[at]
        return Reference(
            share,
            f"always answering {quoted(shorten(name, 30))}",
            percent(share, n),
            short_name=f"always {quoted(shorten(name, 14))}",
        )
    if measure == "auc":
        return Reference(0.5, "guessing", decimal(0.5))
    share = 1 / table.n_classes
    return Reference(share, "guessing", percent(share, 1))


def _limit(evaluation: Evaluation, measure: str) -> list[Reference]:
    """The strictest limit on the measure; limits are written as they were set, not rounded."""
    least = [x.least for x in evaluation.plan.limits if x.measure == measure and not x.of_class]
    if not least:
        return []
    return [Reference(max(least), "limit", level(max(least)), is_limit=True)]


def _track(evaluation: Evaluation, estimate: Estimate) -> TrackRow:
    look = candidate_look(evaluation.plan, estimate.candidate)
    noun = evaluation.table.noun_for(estimate.counted_by)
    figure = saying.figure(estimate)
    return TrackRow(
        name=shorten(evaluation.plan.title(estimate.candidate), 80),
        short_name=short_title(evaluation.plan, estimate.candidate),
        long=f"{figure}, {n_equals(estimate.n, noun)}",
        short=f"{figure}, {n_equals(estimate.n)}",
        value=estimate.value,
        interval=estimate.interval,
        colour=look.colour,
        shape=look.shape,
        tip={
            "candidate": evaluation.plan.title(estimate.candidate),
            "figure": f"{figure}, {n_equals(estimate.n, noun)}",
            "interval": saying.method(estimate.interval),
        },
    )


def _row(evaluation: Evaluation, estimate: Estimate) -> Row:
    return {
        "candidate": evaluation.plan.title(estimate.candidate),
        saying.axis_title(
            estimate.measure, evaluation.table.noun_for(estimate.counted_by)
        ): saying.value(estimate.measure, estimate.value, estimate.n),
        f"{level(evaluation.plan.level)} interval": saying.bounds(
            estimate.measure, estimate.interval, estimate.n
        )
        or saying.method(estimate.interval),
        "n": estimate.n,
    }


def title_of(titles: Sequence[str], found: Sequence[Estimate], reference: Reference) -> str:
    """The sentence: whose intervals overlap, and who beats looking at no feature.

    An interval says whether a candidate lies above the line; it never names one candidate as the
    best, which is a question for the comparison.
    """
    line = reference.name
    if all(math.isnan(e.value) for e in found):
        return "Undefined: no held-out set holds cases of all classes"
    if not all(e.interval is not None and e.interval.defined for e in found):
        return _without_intervals(titles, found)
    if len(found) == 1:
        words = _standing(found[0], reference.value).format(line)
        figure = f"{saying.figure(found[0])} against {reference.figure}"
        return f"{capitalised(words)}: {titles[0]}, {figure}"
    return capitalised(f"{_overlap(titles, found)}; {_beating(titles, found, reference)}")


def _without_intervals(titles: Sequence[str], found: Sequence[Estimate]) -> str:
    if len(found) == 1:
        figure = saying.figure(found[0])
        return f"{capitalised(titles[0])}: {figure}, for which no interval is offered"
    which = "these" if all(e.interval is None for e in found) else "some of these"
    return f"No interval is offered for {which} figures, so they cannot say who is better"


BETTER, UNSHOWN, WORSE = "better than {}", "not shown to be better than {}", "worse than {}"


def _standing(estimate: Estimate, against: float) -> str:
    """Where the whole interval lies; a sentence with room for what it is held against."""
    ends = estimate.interval
    assert ends is not None
    if ends.low > against:
        return BETTER
    return WORSE if ends.high < against else UNSHOWN


def _overlap(titles: Sequence[str], found: Sequence[Estimate]) -> str:
    pairs = list(combinations(range(len(found)), 2))
    apart = [(a, b) for a, b in pairs if not _touch(found[a], found[b])]
    if not apart:
        if len(found) == 2:
            return f"{titles[0]} and {titles[1]} overlap"
        return f"the {saying.in_words(len(found))} candidates overlap"
    if len(apart) == 1:
        a, b = apart[0]
        rest = "" if len(pairs) == 1 else ", all others do"
        return f"{titles[a]} and {titles[b]} do not overlap{rest}"
    if len(apart) == len(pairs):
        return "no two intervals overlap"
    together = saying.in_words(len(pairs) - len(apart))
    return f"{together} of {saying.in_words(len(pairs))} pairs of intervals overlap"


def _touch(a: Estimate, b: Estimate) -> bool:
    assert a.interval is not None
    assert b.interval is not None
    return a.interval.low <= b.interval.high and b.interval.low <= a.interval.high


def _beating(titles: Sequence[str], found: Sequence[Estimate], reference: Reference) -> str:
    line = reference.name
    groups: dict[str, list[str]] = {}
    for title, estimate in zip(titles, found, strict=True):
        groups.setdefault(_standing(estimate, reference.value), []).append(title)
    if len(groups) == 1:
        if UNSHOWN in groups:
            return f"{'neither' if len(found) == 2 else 'none'} is shown to beat {line}"
        who = "both" if len(found) == 2 else f"all {saying.in_words(len(found))}"
        return f"{who} {'beat' if BETTER in groups else 'do worse than'} {line}"
    # a list after a colon, since candidates' names can be singular or plural
    parts: list[str] = []
    for standing in (BETTER, UNSHOWN, WORSE):
        if names := groups.get(standing):
            who = listed(names) if len(names) < 3 else f"{saying.in_words(len(names))} candidates"
            parts.append(f"{standing.format('it' if parts else line)}: {who}")
    return "; ".join(parts)
