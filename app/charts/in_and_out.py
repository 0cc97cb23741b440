"""Does a candidate memorise: training scores against held-out scores, back to back (form d)."""

import math
from typing import Any

import altair as alt
import numpy as np

from app.charts import drawing, saying
from app.charts.bins import Bins, bins_of, usual_size
from app.charts.round_scores import AXIS_TITLES, LONE_STEP, header, undefined_words
from app.charts.sides import Pair, Sides, pairs_of, sides_of
from app.charts.style import (
    INK,
    PAPER,
    SOFT_INK,
    Figure,
    Row,
    candidate_look,
    caption,
    scheme_so_far,
    text_alternative,
)
from evalcore.answer import by_highest
from evalcore.evaluation import Evaluation
from evalcore.wording import capitalised

TOP = 20  # px of the words that name the two sides
HEADER = 24
UP, DOWN = 36, 24
PITCH = 96
UNDER = 18  # px more where .632+ is written under a row
LEAST_HEIGHT = 1.5
SMALL_GAP = 0.015  # below it sentences call the two sides alike


def in_and_out(
    evaluation: Evaluation,
    scheme: str,
    measure: str = "accuracy",
    *,
    plus_632: frozenset[str] = frozenset(),
) -> Figure:
    """Two histograms a candidate, back to back, and the gap between their means.

    Parameters
    ----------
    evaluation : Evaluation
    scheme : str
        Name in the plan.
    measure : {"accuracy", "balanced_accuracy", "auc"}
    plus_632 : frozenset of str
        Candidates whose .632+ may be shown; only bootstrap schemes have it.

    Returns
    -------
    Figure
        Up and filled: held out (out-of-bag). Down and open: training (in-bag), repeats counted.
    """
    pairs = pairs_of(evaluation, scheme, measure, plus_632)
    sides = sides_of(evaluation, scheme)
    sizes = evaluation.part(pairs[0].candidate, scheme).held.rounds.test_sizes
    scores = np.concatenate([side for p in pairs for side in (p.held, p.trained)])
    # training scores move in finer steps, so bars stand even where all sizes are alike
    bins = Bins(min(LONE_STEP, bins_of(scores, sizes, measure=measure).width), False)
    title = _title(pairs, sides, measure)
    said = [f"{p.title}: {_figures(p, sides, measure)}{_plus_said(p, measure)}" for p in pairs]
    undefined = undefined_words([p.held for p in pairs])
    return Figure(
        title=title,
        caption=caption(evaluation, scheme, by_highest(evaluation), _how(sides), undefined),
        chart=_chart(evaluation, pairs, sides, bins, measure=measure, m=usual_size(sizes)),
        alt=text_alternative(title, said, [], scheme_so_far(evaluation, scheme)),
        rows=tuple(_row(p, sides, measure) for p in pairs),
    )


def _how(sides: Sides) -> str:
    return (
        f"up, filled: {sides.out}; down, open: {sides.inside}, each side with its own height; "
        "black bar: gap between the means"
    )


def _title(pairs: list[Pair], sides: Sides, measure: str) -> str:
    """About the widest gap, since it asks for a second look; or that there is none to speak of."""
    known = [p for p in pairs if not math.isnan(p.gap)]
    if not known:
        return f"Undefined: no round has a {sides.out} and a {sides.inside} score"
    widest = max(known, key=lambda p: p.gap)
    if widest.gap < SMALL_GAP:
        who = f"{capitalised(widest.title)}:" if len(known) == 1 else "All candidates score"
        return f"{who} nearly alike {sides.inside} and {sides.out}"
    inside = saying.value(measure, widest.mean_in, widest.n)
    out = saying.value(measure, widest.mean_out, widest.n)
    if measure == "accuracy":
        trained = "all" if widest.mean_in == 1 else f"{inside} of what"
        figures = f"right on {trained} it was trained on and on {out} of the rest"
    else:
        figures = f"{inside} {sides.inside} and {out} {sides.out}"
    gap = saying.gap(measure, widest.gap)
    most = f"the widest gap here ({gap})" if len(known) > 1 else f"a gap of {gap}"
    return f"{capitalised(widest.title)}: {figures}, {most}"


def _figures(pair: Pair, sides: Sides, measure: str) -> str:
    out = saying.value(measure, pair.mean_out, pair.n)
    inside = saying.value(measure, pair.mean_in, pair.n)
    gap = saying.gap(measure, pair.gap)
    return f"{out} {sides.out}, {inside} {sides.inside}: gap {gap}"


def _headers(
    evaluation: Evaluation, pairs: list[Pair], bases: list[int], sides: Sides, measure: str
) -> list[drawing.Header]:
    return [
        header(evaluation.plan, pair.candidate, base - UP - 9, _both_forms(pair, sides, measure))
        for base, pair in zip(bases, pairs, strict=True)
    ]


def _both_forms(pair: Pair, sides: Sides, measure: str) -> tuple[str, str]:
    return _figures(pair, sides, measure), f"gap {saying.gap(measure, pair.gap)}"


def _plus_said(pair: Pair, measure: str) -> str:
    return "" if math.isnan(pair.plus) else f", {_plus_words(pair, measure)}"


def _plus_words(pair: Pair, measure: str) -> str:
    return f".632+ {saying.value(measure, pair.plus, pair.n)}"


def _row(pair: Pair, sides: Sides, measure: str) -> Row:
    row: Row = {
        "candidate": pair.title,
        f"{sides.out}, mean": saying.value(measure, pair.mean_out, pair.n),
        f"{sides.inside}, mean": saying.value(measure, pair.mean_in, pair.n),
        "gap": saying.gap(measure, pair.gap),
        "rounds": len(pair.held),
    }
    if not math.isnan(pair.plus):
        row[".632+"] = saying.value(measure, pair.plus, pair.n)
    return row


def _chart(
    evaluation: Evaluation,
    pairs: list[Pair],
    sides: Sides,
    bins: Bins,
    *,
    measure: str,
    m: int,
) -> alt.LayerChart:
    pitch = PITCH + (0 if all(math.isnan(p.plus) for p in pairs) else UNDER)
    bases = [TOP + pitch * at + HEADER + UP for at in range(len(pairs))]
    bottom = TOP + pitch * len(pairs)
    height = bottom + drawing.AXIS_ROOM
    centres = [x for p in pairs for v in (p.held, p.trained) for x, _ in bins.counted(v)]
    needed = [*centres, *(p.plus for p in pairs)]
    rule = drawing.ruler(needed, measure=measure, reach=bins.width / 2)
    histograms = []
    for base, pair in zip(bases, pairs, strict=True):
        colour = candidate_look(evaluation.plan, pair.candidate).colour
        for values, side, tall in ((pair.held, sides.out, -UP), (pair.trained, sides.inside, DOWN)):
            counted = bins.counted(values)
            rows = bar_rows(counted, bins, base=base, tall=tall, measure=measure, m=m)
            fill = colour if side == sides.out else PAPER
            histograms.append(_bars(rows, side, rule, height, fill=fill, stroke=colour))
    title = f"{AXIS_TITLES.get(measure, measure)} in one round"
    return drawing.composed(
        [
            drawing.grid(rule, [(base - UP, base + DOWN) for base in bases], height),
            drawing.level_line(bases, height),
            *histograms,
            *_gaps(pairs, bases, rule, height),
            *_plus_marks(pairs, bases, rule, height=height, measure=measure),
            _side_names(sides, height),
            *drawing.headers(_headers(evaluation, pairs, bases, sides, measure), height),
            *drawing.axis(rule, bottom, height, title=title),
        ],
        height,
    )


def bar_rows(
    bars: list[tuple[float, int]],
    bins: Bins,
    *,
    base: float,
    tall: float,
    measure: str,
    m: int,
) -> list[dict[str, Any]]:
    """One row a bar from its base line; `tall` is the height of the tallest, negative upwards."""
    most = max((number for _, number in bars), default=1)
    return [
        {
            "left": centre - 0.4 * bins.width,
            "right": centre + 0.4 * bins.width,
            "y": base,
            "y2": base + math.copysign(max(LEAST_HEIGHT, abs(tall) * number / most), tall),
            "score": saying.value(measure, centre, m),
            "rounds": number,
        }
        for centre, number in bars
    ]


def _bars(
    rows: list[dict[str, Any]],
    side: str,
    rule: drawing.Ruler,
    height: float,
    *,
    fill: str,
    stroke: str,
) -> alt.Chart:
    drawn: alt.Chart = (
        alt.Chart(drawing.data([{**row, "side": side} for row in rows]))
        .mark_rect(fill=fill, stroke=stroke, strokeWidth=1.2)
        .encode(
            x=rule.x("left"),
            x2=alt.X2("right:Q"),
            y=drawing.down(height),
            y2=alt.Y2("y2:Q"),
            tooltip=[alt.Tooltip("score:N"), alt.Tooltip("rounds:Q"), alt.Tooltip("side:N")],
        )
    )
    return drawn


def _gaps(
    pairs: list[Pair], bases: list[int], rule: drawing.Ruler, height: float
) -> list[alt.Chart]:
    """A black bar on the base line from mean to mean."""
    rows = [
        {"x": pair.mean_out, "x2": pair.mean_in, "y": base}
        for base, pair in zip(bases, pairs, strict=True)
        if not math.isnan(pair.gap)
    ]
    if not rows:
        return []
    return [
        alt.Chart(drawing.data(rows))
        .mark_rule(color=INK, strokeWidth=3)
        .encode(x=rule.x(), x2=alt.X2("x2:Q"), y=drawing.down(height))
    ]


def _plus_marks(
    pairs: list[Pair], bases: list[int], rule: drawing.Ruler, *, height: float, measure: str
) -> list[alt.Chart]:
    """A small upright tick through the base line, its words under the row."""
    shown = [(b, p) for b, p in zip(bases, pairs, strict=True) if not math.isnan(p.plus)]
    if not shown:
        return []
    ticks = [{"x": p.plus, "y": b - 6, "y2": b + DOWN + 4} for b, p in shown]
    words = [
        {
            "x": p.plus,
            "y": b + DOWN + 16,
            "long": _plus_words(p, measure),
            "short": _plus_words(p, measure),
            "align": "right" if rule.place(p.plus) > 0.5 else "left",
            "away": -4,
            "colour": INK,
        }
        for b, p in shown
    ]
    return [
        drawing.upright(ticks, rule, height, color=INK, strokeWidth=1.5),
        drawing.words_at(words, rule, height),
    ]


def _side_names(sides: Sides, height: float) -> alt.Chart:
    words = f"up: {sides.out} · down: {sides.inside}"
    row = {"y": 12, "long": words, "short": words}
    return drawing.line_of_words([row], height, side="left", colour=SOFT_INK, size=12)
