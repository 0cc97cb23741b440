"""How many units of each class there are: what can be judged at all (form a)."""

import math

import altair as alt

from app.charts import drawing
from app.charts.style import (
    CONCERN,
    INK,
    OTHER_CLASS,
    PAPER,
    Figure,
    Row,
    shorten,
    text_alternative,
)
from evalcore.profile import ClassShare, class_shares, smallest_class
from evalcore.table import Table
from evalcore.wording import count, percent, quoted

MOST_ROWS = 12
LARGE_CLASS = 400  # above it single tens can no longer be counted
MOST_CUTS = 40
FITS_NARROW = 34  # characters of figures that still stand beside a name at 368 px
BAR = 14
OPEN_BAR = 6


def class_balance(table: Table) -> Figure:
    """Chart of the classes: units as solid bars cut so that they can be counted, rows open.

    Parameters
    ----------
    table : Table

    Returns
    -------
    Figure
        One row a class, in the order of `Table.classes`; of more than 12 classes the 12 with the
        fewest units, since they bound what can be judged. Without a unit column there is one
        solid bar a class.
    """
    shares = class_shares(table)
    shown = shares
    if len(shares) > MOST_ROWS:
        shown = tuple(sorted(shares, key=lambda s: s.units)[:MOST_ROWS])
    cut = cut_every(max(share.units for share in shares))
    title = _title(table, shares)
    return Figure(
        title=title,
        caption=_caption(table, cut, len(shares) - len(shown)),
        chart=_chart(table, shown, cut),
        alt=text_alternative(
            title, [f"{share.name}: {_figures(table, share)}" for share in shares], [], ""
        ),
        rows=tuple(_row(table, share) for share in shares),
    )


def cut_every(largest: int) -> int:
    """Units between two cuts: ten, a hundred for large classes, and so on.

    >>> cut_every(142), cut_every(900)
    (10, 100)
    """
    every = 10 if largest <= LARGE_CLASS else 100
    while largest / every > MOST_CUTS:
        every *= 10
    return every


def _title(table: Table, shares: tuple[ClassShare, ...]) -> str:
    noun = table.noun_for("unit")
    sizes = {share.units for share in shares}
    if len(sizes) == 1 and len(shares) > 1:
        return f"Each of the {count(len(shares))} classes has {noun.counted(sizes.pop())}"
    small = shares[smallest_class(table)[0]]
    which = "" if len(shares) == 2 else f", the smallest of {count(len(shares))} classes"
    verb = "is" if small.units == 1 else "are"
    start = (
        f"{count(small.units)} of {noun.counted(table.n_units)} {verb} "
        f"{quoted(shorten(small.name, 40))}{which}"
    )
    rests = f"what can be judged about {'it' if small.units == 1 else 'them'} rests on"
    if not table.has_units:
        return f"{start}: {rests} {'this one' if small.units == 1 else f'these {small.units}'}"
    rows = table.noun_for("case").counted(small.cases)
    return f"{start}: {rests} {count(small.units)}, not on {rows}"


def _caption(table: Table, cut: int, left_out: int) -> str:
    noun = table.noun_for("unit")
    cuts = f"cut every {count(cut)} so that they can be counted"
    rows = table.noun_for("case").plural
    parts = [
        f"Solid: {noun.plural}, {cuts}; open: {rows}."
        if table.has_units
        else f"Counted by {noun.singular}. Bars are {cuts}."
    ]
    if len(table.mixed_units):
        parts.append(
            f"A {noun.singular} whose {rows} carry several classes counts for the most frequent."
        )
    if left_out:
        parts.append(f"Shown are the {count(MOST_ROWS)} smallest classes; {left_out} are larger.")
    return " ".join(parts)


def _figures(table: Table, share: ClassShare, *, short: bool = False) -> str:
    units = table.noun_for("unit").counted(share.units)
    by_unit = f"{units}, {percent(share.unit_share, table.n_units)}"
    if not table.has_units:
        return by_unit
    rows = table.noun_for("case").counted(share.cases)
    if short:
        return f"{units} · {rows}"
    return f"{by_unit} · {rows}, {percent(share.case_share, table.n_cases)}"


def _row(table: Table, share: ClassShare) -> Row:
    noun, rows = table.noun_for("unit"), table.noun_for("case")
    row: Row = {
        "class": share.name,
        noun.plural: share.units,
        f"share of {noun.plural}": percent(share.unit_share, table.n_units),
    }
    if table.has_units:
        row[rows.plural] = share.cases
        row[f"share of {rows.plural}"] = percent(share.case_share, table.n_cases)
    return row


def _chart(table: Table, shares: tuple[ClassShare, ...], cut: int) -> alt.LayerChart:
    pitch = 54 if table.has_units else 46
    bottom = pitch * len(shares) + 4
    height = bottom + drawing.AXIS_ROOM
    largest = max(max(s.unit_share, s.case_share) for s in shares)
    rule = _ruler(largest)
    tops = [pitch * at for at in range(len(shares))]
    short = max(len(_figures(table, share)) for share in shares) > FITS_NARROW
    heads = []
    for top, share in zip(tops, shares, strict=True):
        name, figures = shorten(share.name, 60), _figures(table, share)
        narrow = _figures(table, share, short=short)
        heads.append(drawing.Header(top + 14, name, name, figures, narrow))
    bands = [(top + 18, top + pitch) for top in tops]
    units = table.noun_for("unit").plural
    title = f"share of {units} and of {table.noun_for('case').plural}"
    return drawing.composed(
        [
            drawing.grid(rule, bands, height),
            *_bars(table, shares, rule, tops=tops, height=height, cut=cut),
            *drawing.headers(heads, height, colour=INK),
            *drawing.axis(
                rule, bottom, height, title=title if table.has_units else f"share of {units}"
            ),
        ],
        height,
    )


def _ruler(largest: float) -> drawing.Ruler:
    """From nothing up, in quarters unless all classes are smaller than one."""
    if largest <= 0.25:
        return drawing.ruler([0.0, largest])
    quarters = math.ceil(largest * 4 - 1e-9)
    ticks = tuple(k / 4 for k in range(quarters + 1))
    return drawing.Ruler(0.0, ticks[-1], ticks, drawing.written_percent)


def _bars(
    table: Table,
    shares: tuple[ClassShare, ...],
    rule: drawing.Ruler,
    *,
    tops: list[int],
    height: int,
    cut: int,
) -> list[alt.Chart]:
    small = smallest_class(table)[0] if table.n_classes == 2 else -1
    solid, hollow, cuts = [], [], []
    for top, share in zip(tops, shares, strict=True):
        concern = table.classes.index(share.name) == small
        y = top + 20
        bar = {
            "x": 0.0,
            "colour": CONCERN if concern else OTHER_CLASS,
            "class": shorten(share.name, 60),
            "counted": _figures(table, share),
        }
        solid.append({**bar, "x2": share.unit_share, "y": y, "y2": y + BAR})
        open_y = y + BAR + 3
        hollow.append({**bar, "x2": share.case_share, "y": open_y, "y2": open_y + OPEN_BAR})
        cuts += [
            {"x": at / table.n_units, "y": y, "y2": y + BAR} for at in range(cut, share.units, cut)
        ]
    layers = [_rects(solid, rule, height, hollow=False)]
    if table.has_units:
        layers.append(_rects(hollow, rule, height, hollow=True))
    if cuts:
        width = alt.expr(f"{drawing.NARROW} ? 1 : 1.5")
        layers.append(drawing.upright(cuts, rule, height, color=PAPER, strokeWidth=width))
    return layers


def _rects(
    rows: list[dict[str, object]], rule: drawing.Ruler, height: int, *, hollow: bool
) -> alt.Chart:
    colour = alt.Color("colour:N", scale=None, legend=None)
    chart = alt.Chart(drawing.data(rows))
    chart = chart.mark_rect(fill=PAPER, strokeWidth=1.2) if hollow else chart.mark_rect()
    shown: alt.Chart = chart.encode(
        x=rule.x(),
        x2=alt.X2("x2:Q"),
        y=drawing.down(height),
        y2=alt.Y2("y2:Q"),
        stroke=colour if hollow else alt.Undefined,
        fill=alt.Undefined if hollow else colour,
        tooltip=[alt.Tooltip("class:N"), alt.Tooltip("counted:N")],
    )
    return shown
