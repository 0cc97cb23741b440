"""Lines that all rows are held against, and where their words go so that none collide."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Protocol

from app.charts import drawing
from app.charts.style import LIMIT, REFERENCE

WIDE, SLIM = 640, 352  # px in which words must not collide


class Named(Protocol):
    """A place on the ruler with words."""

    @property
    def value(self) -> float:
        """Where."""

    @property
    def long(self) -> str:
        """Its words."""

    @property
    def short(self) -> str:
        """Its words where it is narrow."""


@dataclass(frozen=True)
class Reference:
    """A line all rows are held against, named once on top.

    Attributes
    ----------
    value : float
    name, figure : str
        What its words say: who or what it is, then how much.
    short_name : str
        The name where it is narrow; empty for the same.
    is_limit : bool
        Limits are solid with straw below them; others are dashed.
    """

    value: float
    name: str
    figure: str
    short_name: str = ""
    is_limit: bool = False

    @property
    def long(self) -> str:
        """Its words."""
        return f"{self.name} {self.figure}"

    @property
    def short(self) -> str:
        """Its words where it is narrow."""
        return f"{self.short_name or self.name} {self.figure}"

    @property
    def colour(self) -> str:
        """Colour of its stroke and words."""
        return LIMIT if self.is_limit else REFERENCE


def placed(references: Sequence[Named], rule: drawing.Ruler) -> tuple[list[tuple[str, int]], int]:
    """Side ("left" or "right" aligned) and line of the words of each, and the lines needed.

    The words of two lines go away from each other; where they would still touch at a width that
    is met, or leave the chart, they stand on two lines.
    """
    order = sorted(range(len(references)), key=lambda at: references[at].value)
    sides = [""] * len(references)
    for rank, at in enumerate(order):
        place = rule.place(references[at].value)
        outwards = "right" if rank == 0 and len(order) > 1 else "left"
        if len(order) == 1:
            outwards = "left" if place < 0.5 else "right"
        sides[at] = side_that_fits(references[at].short, place, outwards)
    spans = [
        [_span(references[at], rule, sides[at], width) for at in order] for width in (WIDE, SLIM)
    ]
    collide = any(a[1] + 6 > b[0] for each in spans for a, b in pairwise(each))
    rank_of = {at: rank for rank, at in enumerate(order)}
    lines = [rank_of[at] if collide else 0 for at in range(len(references))]
    return list(zip(sides, lines, strict=True)), max(lines, default=0) + 1


def side_that_fits(words: str, place: float, wanted: str) -> str:
    """The wanted side, unless the words would leave the chart there and not on the other side."""
    room = {"left": 1 - place, "right": place}
    other = "left" if wanted == "right" else "right"
    need = drawing.CHARACTER * len(words) / SLIM
    return wanted if room[wanted] >= need or room[wanted] >= room[other] else other


def _span(reference: Named, rule: drawing.Ruler, side: str, width: int) -> tuple[float, float]:
    words = reference.long if width == WIDE else reference.short
    x, length = width * rule.place(reference.value), drawing.CHARACTER * len(words)
    return (x, x + length) if side == "left" else (x - length, x)
