"""How often each class is found, and its own limit (form h)."""

import math
from collections.abc import Mapping

from app.charts import drawing, saying
from app.charts.style import (
    INK,
    LIMIT,
    Figure,
    Row,
    caption,
    class_colour,
    scheme_so_far,
    shorten,
    text_alternative,
)
from app.charts.tracks import Bound, TrackRow, track_chart
from evalcore.answer import WITH_CUT_OFF, class_rate
from evalcore.evaluation import HIGHEST, Evaluation
from evalcore.figures import Estimate
from evalcore.wording import capitalised, class_name, level, listed, n_equals, percent, percent_down

MOST_IN_TITLE = 3


def per_class(
    evaluation: Evaluation, candidate: str, *, bounds: Mapping[str, float] | None = None
) -> Figure:
    """Chart of the share of each class that one candidate finds when it is held out.

    Parameters
    ----------
    evaluation : Evaluation
    candidate : str
        Name in the plan.
    bounds : mapping of class name to float, optional
        The cautious bound that must reach the class's limit: a black stroke with words.

    Returns
    -------
    Figure
        One row a class, in the order of the table.
    """
    classes, plan = evaluation.table.classes, evaluation.plan
    by = evaluation.in_use if candidate == evaluation.about else HIGHEST
    found = [
        evaluation.estimate("sensitivity", candidate, estimator=by, of_class=k) for k in classes
    ]
    at = "" if by == HIGHEST else WITH_CUT_OFF
    least = _limits(evaluation)
    cautious = {k: end for k, end in (bounds or {}).items() if not math.isnan(end)}
    title = _title(evaluation, found, least, cautious)
    said = [_spoken(evaluation, e, least, cautious) for e in found]
    offered = any(e.interval for e in found)
    block = f"block: {level(plan.level)} interval" if offered else "no interval is offered"
    at_least = "‘at least’: the cautious bound that must reach the limit" if cautious else ""
    ends = [end for e in found if e.interval for end in (e.interval.low, e.interval.high)]
    needed = [*(e.value for e in found), *ends, *least.values(), *cautious.values()]
    return Figure(
        title=title,
        caption=caption(evaluation, evaluation.scheme, plan.title(candidate) + at, block, at_least),
        chart=track_chart(
            [_track(evaluation, e, least, cautious) for e in found],
            [],
            rule=drawing.ruler(needed),
            title="share of the class answered right",
        ),
        alt=text_alternative(title, said, [], scheme_so_far(evaluation, evaluation.scheme)),
        rows=tuple(_row(evaluation, e, least, cautious) for e in found),
    )


def _limits(evaluation: Evaluation) -> dict[str, float]:
    """The strictest limit of each class that has one."""
    least: dict[str, float] = {}
    for limit in evaluation.plan.limits:
        if limit.of_class:
            least[limit.of_class] = max(limit.least, least.get(limit.of_class, 0.0))
    return least


def _called(evaluation: Evaluation, estimate: Estimate, *, length: int = 60) -> str:
    name = class_rate(evaluation.table, evaluation.plan, estimate.of_class, trade=False)
    return shorten(name, length)


def _track(
    evaluation: Evaluation,
    estimate: Estimate,
    least: Mapping[str, float],
    cautious: Mapping[str, float],
) -> TrackRow:
    name, noun = estimate.of_class, evaluation.table.noun_for(estimate.counted_by)
    figure = saying.figure(estimate)
    marks = []
    if name in least:
        marks.append(Bound(least[name], f"limit {level(least[name])}", LIMIT))
    if name in cautious:
        words = f"at least {percent_down(cautious[name], estimate.n)}"
        marks.append(Bound(cautious[name], words, INK))
    return TrackRow(
        name=_called(evaluation, estimate),
        long=f"{figure}, {n_equals(estimate.n, noun)}",
        short=f"{figure}, {n_equals(estimate.n)}",
        value=estimate.value,
        interval=estimate.interval,
        colour=class_colour(name, evaluation.plan.concern_of(evaluation.table)),
        shape="circle",
        tip={
            "class": name,
            "figure": f"{figure}, {n_equals(estimate.n, noun)}",
            "interval": saying.method(estimate.interval),
        },
        bounds=tuple(marks),
    )


def _title(
    evaluation: Evaluation,
    found: list[Estimate],
    least: Mapping[str, float],
    cautious: Mapping[str, float],
) -> str:
    """Bounds against limits where both are known, else the figures; verdicts are not made here."""
    decided = [e for e in found if e.of_class in least and e.of_class in cautious]
    parts = [
        f"{capitalised(_called(evaluation, e, length=30))}: at least "
        f"{percent_down(cautious[e.of_class], e.n)}, limit {level(least[e.of_class])}"
        for e in decided
    ]
    if parts:
        return "; ".join(parts[:MOST_IN_TITLE])
    defined = [e for e in found if not math.isnan(e.value)]
    if not defined:
        return "No class has been held out yet"
    by = f"Found by {evaluation.plan.title(found[0].candidate)}"
    noun = evaluation.table.noun_for(found[0].counted_by).plural
    if len(defined) > MOST_IN_TITLE:
        ordered = sorted(defined, key=lambda e: e.value)
        low, high = ordered[0], ordered[-1]
        return (
            f"{by}: from {percent(low.value, low.n)} of {_name(low)} to "
            f"{percent(high.value, high.n)} of {_name(high)} {noun}"
        )
    said = [f"{percent(e.value, e.n)} of {_name(e)}" for e in defined]
    return f"{by}: {listed(said)} {noun}"


def _name(estimate: Estimate) -> str:
    return class_name(shorten(estimate.of_class, 30))


def _spoken(
    evaluation: Evaluation,
    estimate: Estimate,
    least: Mapping[str, float],
    cautious: Mapping[str, float],
) -> str:
    name, noun = estimate.of_class, evaluation.table.noun_for(estimate.counted_by)
    text = f"{name}: {saying.spoken(estimate)}, {n_equals(estimate.n, noun)}"
    if name in cautious:
        text += f", at least {percent_down(cautious[name], estimate.n)}"
    return text + (f", limit {level(least[name])}" if name in least else "")


def _row(
    evaluation: Evaluation,
    estimate: Estimate,
    least: Mapping[str, float],
    cautious: Mapping[str, float],
) -> Row:
    name = estimate.of_class
    row: Row = {
        "class": name,
        "share found (sensitivity)": percent(estimate.value, estimate.n),
        f"{level(evaluation.plan.level)} interval": saying.bounds(
            "sensitivity", estimate.interval, estimate.n
        ),
        "n": estimate.n,
    }
    if cautious:
        row["at least"] = percent_down(cautious[name], estimate.n) if name in cautious else ""
    if least:
        row["limit"] = level(least[name]) if name in least else ""
    return row
