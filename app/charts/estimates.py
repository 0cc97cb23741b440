"""Who is how good, and how sure that is: estimates with their intervals (form b)."""

from collections.abc import Sequence
from itertools import combinations

from app.charts import drawing, saying
from app.charts.style import (
    Figure,
    Row,
    candidate_look,
    caption,
    learned_names,
    scheme_so_far,
    shorten,
    text_alternative,
)
from app.charts.tracks import Reference, TrackRow, track_chart
from evalcore.evaluation import Evaluation
from evalcore.figures import Estimate
from evalcore.profile import majority
from evalcore.wording import (
    capitalised,
    count,
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
    """
    found = estimates_of(evaluation, measure)
    reference = reference_line(evaluation, measure)
    lines = [reference, *_limit(evaluation, measure)]
    titles = [evaluation.plan.title(e.candidate) for e in found]
    rows = [_track(evaluation, e) for e in found]
    ends = [r.interval for r in rows if r.interval is not None and r.interval.defined]
    rule = drawing.ruler(
        [
            *(line.value for line in lines),
            *(row.value for row in rows),
            *(end.low for end in ends),
            *(end.high for end in ends),
        ],
        measure=measure,
    )
    noun = evaluation.table.noun_for(evaluation.counted_by)
    title = title_of(titles, found, reference)
    block = f"block: {level(evaluation.plan.level)} interval" if ends else ""
    straw = "; straw: below the limit" if len(lines) > 1 else ""
    return Figure(
        title=title,
        caption=caption(evaluation, evaluation.scheme, f"{block}{straw}".lstrip("; ")),
        chart=track_chart(rows, lines, rule=rule, title=saying.axis_title(measure, noun)),
        alt=text_alternative(
            title,
            [
                f"{name}: {saying.spoken(e)}, {n_equals(e.n, noun)}"
                for name, e in zip(titles, found, strict=True)
            ],
            [line.long for line in lines],
            scheme_so_far(evaluation, evaluation.scheme),
        ),
        rows=tuple(_row(evaluation, e) for e in found),
    )


def estimates_of(evaluation: Evaluation, measure: str) -> list[Estimate]:
    """The estimates that are drawn: the headline scheme's, of candidates that have answers."""
    estimator = "mean_of_rounds" if measure == "auc" else "held_out_by_case"
    have = {j.candidate for j in evaluation.judged if j.scheme == evaluation.scheme}
    return [
        evaluation.estimate(measure, name, estimator=estimator)
        for name in learned_names(evaluation)
        if name in have
    ]


def reference_line(evaluation: Evaluation, measure: str) -> Reference:
    """What looking at no feature reaches: always answering the majority, or guessing."""
    table = evaluation.table
    if measure == "accuracy":
        at, share = majority(table, evaluation.counted_by)
        n = int(table.class_counts(evaluation.counted_by).sum())
        name, shown = table.classes[at], percent(share, n)
        return Reference(
            share,
            f"always answering {quoted(shorten(name, 30))} {shown}",
            f"always {quoted(shorten(name, 14))} {shown}",
        )
    if measure == "auc":
        return Reference(0.5, f"guessing {decimal(0.5)}", f"guessing {decimal(0.5)}")
    share = 1 / table.n_classes
    words = f"guessing {percent(share, 1)}"
    return Reference(share, words, words)


def _limit(evaluation: Evaluation, measure: str) -> list[Reference]:
    """The strictest limit on the measure; limits are written as they were set, not rounded."""
    least = [x.least for x in evaluation.plan.limits if x.measure == measure and not x.of_class]
    if not least:
        return []
    words = f"limit {level(max(least))}"
    return [Reference(max(least), words, words, is_limit=True)]


def _track(evaluation: Evaluation, estimate: Estimate) -> TrackRow:
    look = candidate_look(evaluation.plan, estimate.candidate)
    noun = evaluation.table.noun_for(estimate.counted_by)
    figure = saying.figure(estimate)
    return TrackRow(
        name=shorten(evaluation.plan.title(estimate.candidate), 80),
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
    line = _without_figure(reference.long)
    if not found:
        return "No figure yet"
    if not all(e.interval is not None and e.interval.defined for e in found):
        return (
            "No interval is offered for some of these figures, so they cannot say who is better"
            if len(found) > 1
            else f"{capitalised(titles[0])}: {saying.figure(found[0])}, for which no interval is "
            "offered"
        )
    if len(found) == 1:
        verb = _verdict(found[0], reference.value)
        return (
            f"{capitalised(titles[0])} {verb} {line}: {saying.figure(found[0])} against "
            f"{_figure_of(reference)}"
        )
    return capitalised(f"{_overlap(titles, found)}; {_beating(titles, found, reference)}")


def _without_figure(words: str) -> str:
    return words.rsplit(" ", 1)[0]


def _figure_of(reference: Reference) -> str:
    return reference.long.rsplit(" ", 1)[1]


def _verdict(estimate: Estimate, against: float) -> str:
    ends = estimate.interval
    assert ends is not None
    if ends.low > against:
        return "beats"
    return "does worse than" if ends.high < against else "is not shown to beat"


def _overlap(titles: Sequence[str], found: Sequence[Estimate]) -> str:
    pairs = list(combinations(range(len(found)), 2))
    apart = [(a, b) for a, b in pairs if not _touch(found[a], found[b])]
    if not apart:
        if len(found) == 2:
            return f"{titles[0]} and {titles[1]} overlap"
        return f"all {count(len(found))} candidates overlap"
    if len(apart) == 1:
        a, b = apart[0]
        rest = "" if len(pairs) == 1 else ", all others do"
        return f"{titles[a]} and {titles[b]} do not overlap{rest}"
    if len(apart) == len(pairs):
        return "no two intervals overlap"
    return f"{count(len(pairs) - len(apart))} of {count(len(pairs))} pairs of intervals overlap"


def _touch(a: Estimate, b: Estimate) -> bool:
    assert a.interval is not None and b.interval is not None
    return a.interval.low <= b.interval.high and b.interval.low <= a.interval.high


def _beating(titles: Sequence[str], found: Sequence[Estimate], reference: Reference) -> str:
    line = _without_figure(reference.long)
    groups: dict[str, list[str]] = {}
    for title, estimate in zip(titles, found, strict=True):
        groups.setdefault(_verdict(estimate, reference.value), []).append(title)
    if len(groups) == 1:
        verb = next(iter(groups))
        both = "both" if len(found) == 2 else f"all {count(len(found))}"
        if verb == "is not shown to beat":
            return f"{'neither' if len(found) == 2 else 'none'} is shown to beat {line}"
        return f"{both} {'beat' if verb == 'beats' else 'do worse than'} {line}"
    parts = [_group(verb, names) for verb, names in groups.items()]
    return f"{listed(parts)} {line}"


def _group(verb: str, names: list[str]) -> str:
    plural = {"beats": "beat", "does worse than": "do worse than"}
    who = listed(names) if len(names) < 3 else f"{count(len(names))} candidates"
    if len(names) == 1:
        return f"{who} {verb}"
    return f"{who} {plural.get(verb, 'are not shown to beat')}"
