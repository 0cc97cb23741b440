"""The pieces every chart is put together from: ruler, words, rules, composition.

All charts are one view, laid out downwards in pixels: words on lines of their own, marks in
tracks under them, so that neither can run into the other at any width.
"""

import math
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import altair as alt

from app.charts.style import AXIS, HAIRLINE, INK, SMALL_WORDS, SOFT_INK, WORDS, config
from evalcore.wording import decimal, percent

NARROW = "width<520"
INSET = 8  # px kept free on both sides, so that a mark at 100 % is drawn whole
CHARACTER = 7.0  # px of an average character at 13 px, on the wide side
STEPS = (1, 2, 5, 10, 20, 25, 50)
MOST_TICKS = 6
LEAST_SPAN = 10  # points: less would blow up differences nobody can act on

Datum = Mapping[str, Any]

# the library leaves these two untyped
X_VALUE: Any = alt.XValue
X2_VALUE: Any = alt.X2Value


@dataclass(frozen=True)
class Ruler:
    """The score axis all rows of a chart share.

    Attributes
    ----------
    low, high : float
        Ends of the axis.
    ticks : tuple of float
    write : callable
        How a tick is written.
    """

    low: float
    high: float
    ticks: tuple[float, ...]
    write: Callable[[float], str]

    def x(self, field: str = "x") -> alt.X:
        """Encoding of a position on this axis; the axis itself is drawn as words."""
        return alt.X(f"{field}:Q", axis=None, scale=self._scale())

    def _scale(self) -> alt.Scale:
        # the scale's range keeps the inset; the tracks themselves go from edge to edge
        ends: list[Any] = [INSET, alt.expr(f"width - {INSET}")]
        return alt.Scale(domain=[self.low, self.high], range=ends, nice=False, zero=False)

    def place(self, value: float) -> float:
        """Where a value lies, 0 at the left end and 1 at the right one."""
        return (value - self.low) / (self.high - self.low)


def written_percent(value: float) -> str:
    """A tick in percent; ticks are whole points."""
    return percent(value, 1)


def ruler(values: Iterable[float], *, measure: str = "accuracy", reach: float = 0) -> Ruler:
    """A score axis that starts where the data need it, with at most six ticks.

    Parameters
    ----------
    values : iterable of float
        What has to fit; nan is passed over.
    measure : str
        AUC is written as a decimal, all else in percent.
    reach : float
        How far marks reach beyond their positions, in units of the axis.
    """
    known = [v for v in values if not math.isnan(v)] or [0.0, 1.0]
    low, high = max(0.0, min(known)) * 100, min(1.0, max(known)) * 100
    if high - low < LEAST_SPAN:
        high = min(100.0, max(high, low + LEAST_SPAN))
        low = min(low, high - LEAST_SPAN)
    for step in STEPS:
        first, last = math.floor(low / step + 1e-9), math.ceil(high / step - 1e-9)
        if last - first < MOST_TICKS:
            break
    last = min(last, 100 // step)
    ticks = tuple(k * step / 100 for k in range(first, last + 1))
    return Ruler(
        min(ticks[0], min(known) - reach),
        max(ticks[-1], max(known) + reach),
        ticks,
        decimal if measure == "auc" else written_percent,
    )


def down(height: float, field: str = "y") -> alt.Y:
    """Encoding of a position in pixels from the top."""
    scale = alt.Scale(domain=[0, height], range=[0, height], nice=False, zero=False)
    return alt.Y(f"{field}:Q", axis=None, scale=scale)


def data(rows: Iterable[Datum]) -> alt.InlineData:
    """Rows as they are, without a detour through a frame."""
    return alt.InlineData(values=[dict(row) for row in rows])


def line_of_words(
    rows: Sequence[Datum],
    height: float,
    *,
    side: str,
    bold: bool = False,
    colour: str = INK,
    size: int = WORDS,
    limit: Any = alt.Undefined,
) -> alt.Chart:
    """Words at the left or right edge; rows hold `y`, `long` and `short`.

    Which of the two is shown is worked out from the width there is: a hidden twin would still
    take room.
    """
    mark: dict[str, Any] = {
        "align": side,
        "fontWeight": 600 if bold else 400,
        "color": colour,
        "fontSize": size,
        "limit": limit,
    }
    drawn: alt.Chart = (
        alt.Chart(data(rows))
        .transform_calculate(shown=f"{NARROW} ? datum.short : datum.long")
        .mark_text(**mark)
        .encode(
            x=X_VALUE(0 if side == "left" else "width"), y=down(height), text=alt.Text("shown:N")
        )
    )
    return drawn


@dataclass(frozen=True)
class Header:
    """A line with a name on the left and figures on the right, each with a narrow form."""

    y: float
    name: str
    short_name: str
    figures: str
    short_figures: str


def headers(rows: Sequence[Header], height: float, *, colour: str = INK) -> list[alt.Chart]:
    """Lines of name and figures; `colour` is that of the figures.

    A name gets the room its figures leave and ends in an ellipsis where that is too little.
    """
    wide, narrow = (
        f"width - {CHARACTER * max(map(len, figures)) + 10:.0f}"
        for figures in ([row.figures for row in rows], [row.short_figures for row in rows])
    )
    limit = alt.expr(f"{NARROW} ? {narrow} : {wide}")
    names = [{"y": row.y, "long": row.name, "short": row.short_name} for row in rows]
    figures = [{"y": row.y, "long": row.figures, "short": row.short_figures} for row in rows]
    return [
        line_of_words(names, height, side="left", bold=True, limit=limit),
        line_of_words(figures, height, side="right", colour=colour),
    ]


def words_at(
    rows: Sequence[Datum], rule: Ruler, height: float, *, size: int = SMALL_WORDS
) -> alt.Chart:
    """Words beside a position; rows hold `x`, `y`, `long`, `short`, `align` and `colour`."""
    away = "datum.align == 'left' ? {0} : datum.align == 'right' ? -{0} : 0"
    drawn: alt.Chart = (
        alt.Chart(data(rows))
        .transform_calculate(shown=f"{NARROW} ? datum.short : datum.long")
        .mark_text(
            align=alt.expr("datum.align"),
            dx=alt.expr(away.format("(datum.away || 0)")),
            fontSize=size,
        )
        .encode(
            x=rule.x(),
            y=down(height),
            text=alt.Text("shown:N"),
            color=alt.Color("colour:N", scale=None, legend=None),
        )
    )
    return drawn


def upright(rows: Sequence[Datum], rule: Ruler, height: float, **mark: Any) -> alt.Chart:
    """Upright rules from `y` to `y2` at `x`."""
    drawn: alt.Chart = (
        alt.Chart(data(rows))
        .mark_rule(**mark)
        .encode(x=rule.x(), y=down(height), y2=alt.Y2("y2:Q"))
    )
    return drawn


def axis(rule: Ruler, y: float, height: float, *, title: str, short: str = "") -> list[alt.Chart]:
    """A line with ticks, the ticks' words under it and the title under those."""
    words = [
        {
            "x": tick,
            "y": y + 17,
            "long": rule.write(tick),
            "short": rule.write(tick),
            "align": _side(rule.place(tick)),
            "away": -INSET,
            "colour": SOFT_INK,
        }
        for tick in rule.ticks
    ]
    ticks = [{"x": tick, "y": y, "y2": y + 4} for tick in rule.ticks]
    name = [{"y": y + 34, "long": title, "short": short or title}]
    limit = alt.expr("width")
    return [
        level_line([y], height, color=AXIS),
        upright(ticks, rule, height, color=AXIS),
        words_at(words, rule, height),
        line_of_words(name, height, side="left", colour=SOFT_INK, size=SMALL_WORDS, limit=limit),
    ]


AXIS_ROOM = 40  # px under the axis line


def _side(place: float) -> str:
    """Alignment of a tick's words: the outermost keep inside the chart."""
    if place < 0.03:
        return "left"
    return "right" if place > 0.97 else "center"


def level_line(ys: Sequence[float], height: float, *, color: str = HAIRLINE) -> alt.Chart:
    """Lines from edge to edge at the given heights."""
    drawn: alt.Chart = (
        alt.Chart(data([{"y": y} for y in ys]))
        .mark_rule(color=color)
        .encode(x=X_VALUE(0), x2=X2_VALUE("width"), y=down(height))
    )
    return drawn


def grid(rule: Ruler, bands: Sequence[tuple[float, float]], height: float) -> alt.Chart:
    """Upright rules at the ticks, in bands without words only."""
    rows = [{"x": tick, "y": top, "y2": bottom} for top, bottom in bands for tick in rule.ticks]
    return upright(rows, rule, height, color=HAIRLINE)


def composed(layers: Sequence[alt.Chart], height: float) -> alt.LayerChart:
    """Layers as one chart that takes the width of its container."""
    drawn: alt.LayerChart = (
        alt.layer(*layers)
        .properties(
            width="container",
            height=height,
            autosize=alt.AutoSizeParams(type="fit-x", contains="padding"),
        )
        .configure(**config())
    )
    return drawn
