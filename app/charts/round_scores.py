"""How far one small held-out set can swing: the scores of the rounds (form c)."""

import math
from typing import Any

import altair as alt
import numpy as np
from numpy.typing import NDArray

from app.charts import drawing, saying
from app.charts.bins import Bins, bins_of, usual_size
from app.charts.style import (
    INK,
    SOFT_INK,
    Figure,
    Look,
    Row,
    candidate_look,
    caption,
    learned_names,
    scheme_so_far,
    short_title,
    shorten,
    text_alternative,
)
from evalcore.answer import by_highest
from evalcore.evaluation import Evaluation
from evalcore.figures import Estimate
from evalcore.judged import Judged
from evalcore.measures import Floats
from evalcore.plan import Plan
from evalcore.wording import Noun, count

PITCH = 80
HEADER = 24
TALLEST = 44
LEAST_HEIGHT = 1.5  # px, so that a single round among thousands is still seen
STROKE = 8
AXIS_TITLES = {"accuracy": "share right", "auc": "AUC", "balanced_accuracy": "balanced accuracy"}
LONE_STEP = 0.1  # width of the two bars where a round holds out a single case


def round_scores(evaluation: Evaluation, scheme: str, measure: str = "accuracy") -> Figure:
    """Histogram of the rounds' held-out scores of each candidate.

    How much the score of so small a set moves; no interval, since rounds share their cases.

    Parameters
    ----------
    evaluation : Evaluation
    scheme : str
        Name in the plan.
    measure : str
        Any measure that has one value a round.

    Returns
    -------
    Figure

    Raises
    ------
    KeyError
        The scheme has no answers yet.
    """
    parts = parts_of(evaluation, scheme)
    sizes = parts[0].held.rounds.test_sizes
    values = [p.held_values(measure) for p in parts]
    lone = measure == "accuracy" and bool((sizes == 1).all())
    bins = bins_of(np.concatenate(values), sizes, measure=measure)
    bins = Bins(LONE_STEP, False) if lone else bins
    title = _title(sizes, evaluation.table.noun_for(evaluation.counted_by), lone=lone)
    how = _how(bins, sizes, lone=lone, stepped=measure == "accuracy")
    rows = tuple(_row(evaluation, p, measure, lone=lone) for p in parts)
    said = [f"{r['candidate']}: mean {r['mean of the rounds']}, {r['range']}" for r in rows]
    return Figure(
        title=title,
        caption=caption(evaluation, scheme, by_highest(evaluation), how, undefined_words(values)),
        chart=_chart(evaluation, parts, measure, bins=bins, lone=lone),
        alt=text_alternative(title, said, [], scheme_so_far(evaluation, scheme)),
        rows=rows,
    )


def parts_of(evaluation: Evaluation, scheme: str) -> list[Judged]:
    """The candidates that are drawn under a scheme, as far as they have answers."""
    have = {j.candidate for j in evaluation.judged if j.scheme == scheme}
    names = [n for n in learned_names(evaluation) if n in have]
    if not names:
        raise KeyError(f"The scheme {scheme!r} has no answers yet.")
    return [evaluation.part(name, scheme) for name in names]


def undefined_words(values: list[Floats]) -> str:
    """How many rounds had no value, for the caption; empty if all had one."""
    missing = int(np.isnan(values[0]).sum()) if values else 0
    if not missing:
        return ""
    rounds = "round has" if missing == 1 else "rounds have"
    return f"{count(missing)} of {count(len(values[0]))} {rounds} no value, for want of a class"


def _title(sizes: NDArray[np.intp], noun: Noun, *, lone: bool) -> str:
    rounds, m = len(sizes), usual_size(sizes)
    alike = len(set(sizes.tolist())) == 1
    if lone:
        return (
            f"Each round holds out one {noun.singular} and is right or wrong, so its scores "
            "show no spread (and this is not the interval)"
        )
    about = noun.counted(m) if alike else f"about {noun.counted(m)}"
    if rounds == 1:
        return f"One round of {about} cannot show how far its score can swing"
    return (
        f"How far one small held-out set can swing: {count(rounds)} rounds of {about} (this is not "
        "the interval)"
    )


def _how(bins: Bins, sizes: NDArray[np.intp], *, lone: bool, stepped: bool) -> str:
    rounds, m = len(sizes), usual_size(sizes)
    if lone:
        return "bar on the left: rounds that were wrong, on the right: right; triangle: mean"
    if rounds == 1:
        return "stroke or bar: the round's score"
    marks = "strokes" if bins.exact else "bars"
    stand = f"{marks} stand 1/{count(m)} apart, " if stepped and bins.width * m < 1.5 else ""
    taller = "taller means" if stand else f"taller {marks} mean"
    return f"{stand}{taller} more rounds; triangle: mean of the rounds"


def _range(values: Floats, measure: str, m: int, *, lone: bool) -> tuple[str, str]:
    """The range in words, long and short."""
    known = values[~np.isnan(values)]
    if not len(known):
        return "undefined", "undefined"
    if lone:
        right = int((known > 0.5).sum())
        words = f"{count(right)} right, {count(len(known) - right)} wrong"
        return words, words
    low, high = (saying.value(measure, float(v), m) for v in (known.min(), known.max()))
    if len(known) == 1:
        return f"one round: {low}", low
    if low == high:
        return f"all rounds {low}", f"all {low}"
    return f"rounds from {low} to {high}", f"from {low} to {high}"


def _mean(evaluation: Evaluation, part: Judged, measure: str) -> Estimate:
    return evaluation.estimate(
        measure, part.candidate, scheme=part.scheme, estimator="mean_of_rounds"
    )


def _row(evaluation: Evaluation, part: Judged, measure: str, *, lone: bool) -> Row:
    values, mean = part.held_values(measure), _mean(evaluation, part, measure)
    m = usual_size(part.held.rounds.test_sizes)
    return {
        "candidate": evaluation.plan.title(part.candidate),
        "mean of the rounds": saying.value(measure, mean.value, mean.n),
        "range": _range(values, measure, m, lone=lone)[0],
        "rounds": int((~np.isnan(values)).sum()),
    }


def _chart(
    evaluation: Evaluation, parts: list[Judged], measure: str, *, bins: Bins, lone: bool
) -> alt.LayerChart:
    m = usual_size(parts[0].held.rounds.test_sizes)
    counted = [bins.counted(part.held_values(measure)) for part in parts]
    centres = [centre for bars in counted for centre, _ in bars]
    reach = 0 if bins.exact else bins.width / 2
    rule = drawing.ruler([0.0, 1.0] if lone else centres, measure=measure, reach=reach)
    bases = [PITCH * at + HEADER + TALLEST for at in range(len(parts))]
    bottom = PITCH * len(parts) + 2
    height = bottom + drawing.AXIS_ROOM
    tallest = max((c for bars in counted for _, c in bars), default=1)
    heads, strokes = [], []
    for base, part, bars in zip(bases, parts, counted, strict=True):
        words = _range(part.held_values(measure), measure, m, lone=lone)
        heads.append(header(evaluation.plan, part.candidate, base - TALLEST - 9, words))
        look = candidate_look(evaluation.plan, part.candidate)
        rows = stroke_rows(bars, base, tallest, bins, measure=measure, m=m)
        strokes.append(_strokes(rows, look, rule, height=height, bins=bins))
    means = [_mean(evaluation, part, measure).value for part in parts]
    noun = evaluation.table.noun_for(evaluation.counted_by)
    return drawing.composed(
        [
            drawing.grid(rule, [(base - TALLEST, base) for base in bases], height),
            drawing.level_line(bases, height),
            *strokes,
            _triangles(means, bases, rule, height),
            *drawing.headers(heads, height, colour=SOFT_INK),
            *drawing.axis(rule, bottom, height, title=_axis_title(measure, m, noun)),
        ],
        height,
    )


def header(plan: Plan, name: str, y: float, figures: tuple[str, str]) -> drawing.Header:
    """The line above a candidate's strokes; figures long and short."""
    return drawing.Header(y, shorten(plan.title(name), 80), short_title(plan, name), *figures)


def _axis_title(measure: str, m: int, noun: Noun) -> str:
    size = f"one held-out set of {noun.counted(m)}" if m > 1 else f"one held-out {noun.singular}"
    return f"{AXIS_TITLES.get(measure, measure)} in {size}"


def stroke_rows(
    bars: list[tuple[float, int]],
    base: float,
    tallest: int,
    bins: Bins,
    *,
    measure: str,
    m: int,
) -> list[dict[str, Any]]:
    """One row a bar: centre, sides, heights in pixels and what the tooltip says."""
    return [
        {
            "x": centre,
            "left": centre - 0.4 * bins.width,
            "right": centre + 0.4 * bins.width,
            "y": base,
            "y2": base - max(LEAST_HEIGHT, TALLEST * number / tallest),
            "score": saying.value(measure, centre, m),
            "rounds": number,
        }
        for centre, number in bars
    ]


def _strokes(
    rows: list[dict[str, Any]], look: Look, rule: drawing.Ruler, *, height: float, bins: Bins
) -> alt.Chart:
    tips = [alt.Tooltip("score:N"), alt.Tooltip("rounds:Q")]
    if bins.exact:
        # never so wide that neighbouring scores touch
        spacing = bins.width / (rule.high - rule.low)
        wide = alt.expr(f"max(2, min({STROKE}, {0.55 * spacing:.6f} * width))")
        layer = drawing.upright(rows, rule, height, color=look.colour, strokeWidth=wide)
        stroked: alt.Chart = layer.encode(tooltip=tips)
        return stroked
    drawn: alt.Chart = (
        alt.Chart(drawing.data(rows))
        .mark_rect(color=look.colour)
        .encode(
            x=rule.x("left"),
            x2=alt.X2("right:Q"),
            y=drawing.down(height),
            y2=alt.Y2("y2:Q"),
            tooltip=tips,
        )
    )
    return drawn


def _triangles(
    means: list[float], bases: list[int], rule: drawing.Ruler, height: float
) -> alt.Chart:
    rows = [
        {"x": mean, "y": base + 5}
        for base, mean in zip(bases, means, strict=True)
        if not math.isnan(mean)
    ]
    drawn: alt.Chart = (
        alt.Chart(drawing.data(rows))
        .mark_point(shape="triangle-up", filled=True, color=INK, opacity=1, size=40)
        .encode(x=rule.x(), y=drawing.down(height))
    )
    return drawn
