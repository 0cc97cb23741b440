"""Rows of words above a track: a block in the track is an interval, and nothing else is."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, field

import altair as alt

from app.charts import drawing
from app.charts.placing import Reference, placed
from app.charts.style import LIMIT, PAPER, STRAW, TRACK
from evalcore.figures import Interval

HEADER = 16  # px of the words above a track
TRACK_HEIGHT = 20
BLOCK = 12
SHAPE_SIZE = 62
UNDER = 16  # px of the words under a track


@dataclass(frozen=True)
class Bound:
    """A stroke across one track with words under it."""

    value: float
    words: str
    colour: str

    @property
    def long(self) -> str:
        """Its words."""
        return self.words

    @property
    def short(self) -> str:
        """The same where it is narrow."""
        return self.words


@dataclass(frozen=True)
class TrackRow:
    """One row: name, figures, interval block and mark.

    Attributes
    ----------
    name, long, short : str
        Left, right, and right where it is narrow.
    value : float
        nan where undefined: then there is no mark.
    interval : Interval or None
    colour, shape : str
    short_name : str
        The name where it is narrow; empty for the same.
    tip : dict of str to str
        What the tooltip says, by title.
    bounds : tuple of Bound
        At most two, each with its words under the track.
    """

    name: str
    long: str
    short: str
    value: float
    interval: Interval | None
    colour: str
    shape: str
    short_name: str = ""
    tip: dict[str, str] = field(default_factory=dict)
    bounds: tuple[Bound, ...] = ()


def track_chart(
    rows: Sequence[TrackRow],
    references: Sequence[Reference],
    *,
    rule: drawing.Ruler,
    title: str,
    short_title: str = "",
) -> alt.LayerChart:
    """Rows under each other on one ruler, reference lines named once on top."""
    sides, lines = placed(references, rule)
    top = 18 * lines + 8 if references else 0
    under = max((placed(row.bounds, rule)[1] for row in rows if row.bounds), default=0)
    pitch = 50 + UNDER * under
    tops = [top + pitch * at + HEADER + 4 for at in range(len(rows))]
    bottom = top + pitch * len(rows)
    height = bottom + drawing.AXIS_ROOM
    heads = [
        drawing.Header(y - 6, row.name, row.short_name or row.name, row.long, row.short)
        for y, row in zip(tops, rows, strict=True)
    ]
    layers = [
        *_ground(tops, references, rule, height),
        *_lines(references, rule, tops=tops, height=height, limits=False),
        *_blocks(rows, rule, tops=tops, height=height),
        *_lines(references, rule, tops=tops, height=height, limits=True),
        *_bounds(rows, rule, tops=tops, height=height),
        *_marks(rows, rule, tops=tops, height=height),
        *_names(references, sides, rule, height=height, top=top),
        *drawing.headers(heads, height),
        *drawing.axis(rule, bottom, height, title=title, short=short_title),
    ]
    return drawing.composed(layers, height)


def _ground(
    tops: Sequence[float], references: Sequence[Reference], rule: drawing.Ruler, height: float
) -> list[alt.Chart]:
    """The strips, straw below the limit, and white cuts at the ticks."""
    bands = [{"y": y, "y2": y + TRACK_HEIGHT} for y in tops]
    strip = (
        alt.Chart(drawing.data(bands))
        .mark_rect(color=TRACK)
        .encode(
            x=drawing.X_VALUE(0),
            x2=drawing.X2_VALUE("width"),
            y=drawing.down(height),
            y2=alt.Y2("y2:Q"),
        )
    )
    layers = [strip]
    limits = [r.value for r in references if r.is_limit]
    if limits:
        straw = [{**band, "x": max(limits)} for band in bands]
        layers.append(
            alt.Chart(drawing.data(straw))
            .mark_rect(color=STRAW)
            .encode(x=rule.x(), x2=drawing.X2_VALUE(0), y=drawing.down(height), y2=alt.Y2("y2:Q"))
        )
    inner = [t for t in rule.ticks if 0.02 < rule.place(t) < 0.98]
    cuts = [{"x": t, **band} for band in bands for t in inner]
    layers.append(drawing.upright(cuts, rule, height, color=PAPER, strokeWidth=2))
    return layers


def _lines(
    references: Sequence[Reference],
    rule: drawing.Ruler,
    *,
    tops: Sequence[float],
    height: float,
    limits: bool,
) -> list[alt.Chart]:
    """Strokes across the tracks and a stub under the words, never through words."""
    layers = []
    for reference in references:
        if reference.is_limit != limits:
            continue
        bands = [{"x": reference.value, "y": y, "y2": y + TRACK_HEIGHT} for y in tops]
        stub = tops[0] - HEADER - 10
        bands.append({"x": reference.value, "y": stub, "y2": stub + 6})
        dash = {} if limits else {"strokeDash": [4, 3]}
        layers.append(
            drawing.upright(bands, rule, height, color=reference.colour, strokeWidth=2, **dash)
        )
    return layers


def _names(
    references: Sequence[Reference],
    sides: Sequence[tuple[str, int]],
    rule: drawing.Ruler,
    *,
    height: float,
    top: float,
) -> list[alt.Chart]:
    if not references:
        return []
    rows = [
        {
            "x": reference.value,
            "y": top - 14 - 18 * line + 2,
            "long": reference.long,
            "short": reference.short,
            "align": side,
            "colour": reference.colour,
        }
        for reference, (side, line) in zip(references, sides, strict=True)
    ]
    return [drawing.words_at(rows, rule, height)]


def _blocks(
    rows: Sequence[TrackRow], rule: drawing.Ruler, *, tops: Sequence[float], height: float
) -> list[alt.Chart]:
    inset = (TRACK_HEIGHT - BLOCK) / 2
    blocks = [
        {
            "x": row.interval.low,
            "x2": row.interval.high,
            "y": y + inset,
            "y2": y + inset + BLOCK,
            "colour": row.colour,
            **row.tip,
        }
        for y, row in zip(tops, rows, strict=True)
        if row.interval is not None and row.interval.defined
    ]
    if not blocks:
        return []
    colour = alt.Color("colour:N", scale=None, legend=None)
    block = (
        alt.Chart(drawing.data(blocks))
        .mark_rect(opacity=0.4)
        .encode(
            x=rule.x(),
            x2=alt.X2("x2:Q"),
            y=drawing.down(height),
            y2=alt.Y2("y2:Q"),
            color=colour,
            tooltip=[alt.Tooltip(f"{key}:N") for key in rows[0].tip],
        )
    )
    ends = [
        {"x": row[end], "y": row["y"], "y2": row["y2"], "colour": row["colour"]}
        for row in blocks
        for end in ("x", "x2")
    ]
    strokes = drawing.upright(ends, rule, height, strokeWidth=2).encode(color=colour)
    return [block, strokes]


def _bounds(
    rows: Sequence[TrackRow], rule: drawing.Ruler, *, tops: Sequence[float], height: float
) -> list[alt.Chart]:
    """Strokes with words under the track, pointing away from each other."""
    strokes, words = [], []
    for y, row in zip(tops, rows, strict=True):
        for bound, (side, line) in zip(row.bounds, placed(row.bounds, rule)[0], strict=True):
            is_limit = bound.colour == LIMIT
            end = y + TRACK_HEIGHT + (0 if is_limit else 8)
            strokes.append({"x": bound.value, "y": y, "y2": end, "colour": bound.colour})
            words.append(
                {
                    "x": bound.value,
                    "y": y + TRACK_HEIGHT + 13 + UNDER * line,
                    "long": bound.words,
                    "short": bound.words,
                    "align": side,
                    "away": 0 if is_limit else 5,
                    "colour": bound.colour,
                }
            )
    if not strokes:
        return []
    colour = alt.Color("colour:N", scale=None, legend=None)
    return [
        drawing.upright(strokes, rule, height, strokeWidth=2).encode(color=colour),
        drawing.words_at(words, rule, height),
    ]


def _marks(
    rows: Sequence[TrackRow], rule: drawing.Ruler, *, tops: Sequence[float], height: float
) -> list[alt.Chart]:
    marks = [
        {
            "x": row.value,
            "y": y + TRACK_HEIGHT / 2,
            "colour": row.colour,
            "shape": row.shape,
            **row.tip,
        }
        for y, row in zip(tops, rows, strict=True)
        if not math.isnan(row.value)
    ]
    if not marks:
        return []
    return [
        alt.Chart(drawing.data(marks))
        .mark_point(filled=True, opacity=1, size=SHAPE_SIZE, stroke=PAPER, strokeWidth=1.2)
        .encode(
            x=rule.x(),
            y=drawing.down(height),
            fill=alt.Fill("colour:N", scale=None, legend=None),
            shape=alt.Shape("shape:N", scale=None, legend=None),
            tooltip=[alt.Tooltip(f"{key}:N") for key in rows[0].tip],
        )
    ]
