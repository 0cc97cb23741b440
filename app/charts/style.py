"""How charts look: tokens, the looks of candidates and classes, the chart's configuration.

A chart comes as a `Figure`: the drawing with its sentence, its caption, its text alternative and
its figures as a table, so that no page can show one without the others.
"""

from dataclasses import dataclass
from typing import Any

import altair as alt

from evalcore.answer import scheme_in_words
from evalcore.candidates import CANDIDATES
from evalcore.evaluation import Evaluation
from evalcore.plan import Plan
from evalcore.wording import capitalised, count

INK = "#12181B"
SOFT_INK = "#4F5960"
PAPER = "#FFFFFF"
TRACK = "#F4F3EF"
AXIS = "#868C90"
HAIRLINE = "#D9D6CE"
REFERENCE = "#6F767B"
STRAW = "#EFE4C6"
LIMIT = "#7A5B00"
CONCERN = "#4F3917"
OTHER_CLASS = "#6F767B"

SCREEN_FONT = '"Source Sans", "Source Sans 3", sans-serif'
WORDS = 13  # px
SMALL_WORDS = 12

Row = dict[str, str | float]


@dataclass(frozen=True)
class Look:
    """What tells one candidate from another: a colour, doubled by a shape and a dash."""

    colour: str
    shape: str
    dash: tuple[int, ...]


LOOKS = (
    Look("#2D5ED2", "circle", (1, 0)),
    Look("#A88E24", "square", (6, 3)),
    Look("#4F3917", "triangle-up", (2, 2)),
    Look("#2E9E93", "diamond", (8, 3, 2, 3)),
    Look("#493181", "triangle-down", (1, 0)),
    Look("#678F56", "cross", (6, 3)),
    Look("#9275BD", "triangle-right", (2, 2)),
    Look("#A8431C", "triangle-left", (8, 3, 2, 3)),
)
BASELINE_LOOK = Look(REFERENCE, "circle", (4, 3))


@dataclass(frozen=True)
class Figure:
    """A chart with everything that belongs to it.

    Attributes
    ----------
    title : str
        A sentence that answers the question. Plain text: it may hold names from the user's file,
        so a page that sets it as Markdown has to escape it. The same holds for `caption`.
    caption : str
        The scheme, then how to read the chart.
    chart : alt.LayerChart
        As wide as its container, with its whole configuration.
    alt : str
        Text alternative: title, rows, reference lines, scheme.
    rows : tuple of dict
        The figures as a small table, one dict a row, column name to text or number.
    """

    title: str
    caption: str
    chart: alt.Chart | alt.LayerChart
    alt: str
    rows: tuple[Row, ...]


def config(font: str = SCREEN_FONT) -> dict[str, Any]:
    """The whole configuration of a chart, since no theme is applied to it.

    `aria` is off because each mark would read out pixel numbers; the text alternative of the
    figure says what the chart shows.
    """
    return {
        "aria": False,
        "background": PAPER,
        "font": font,
        "padding": {"left": 1, "right": 1, "top": 2, "bottom": 2},
        "view": {"stroke": None},
        "text": {"font": font, "fontSize": WORDS, "color": INK, "baseline": "alphabetic"},
        "title": {"font": font, "anchor": "start", "color": INK, "subtitleColor": SOFT_INK},
    }


def learned_names(evaluation: Evaluation) -> tuple[str, ...]:
    """Candidates that learn from the features, in the plan's order.

    Baselines are reference lines, not rows; where nothing else was chosen they are all there is.
    """
    plan = evaluation.plan
    learned = tuple(n for n in evaluation.candidates if not is_baseline(plan, n))
    return learned or evaluation.candidates


def is_baseline(plan: Plan, name: str) -> bool:
    """Whether a candidate looks at no feature."""
    return CANDIDATES[plan.candidate(name).key].baseline


def candidate_look(plan: Plan, name: str) -> Look:
    """The look of a candidate: by its place among those that learn, so it is the same everywhere.

    It stands for who it is, not for how good; from the ninth on looks come again.
    """
    if is_baseline(plan, name):
        return BASELINE_LOOK
    learned = [n for n in plan.candidate_names if not is_baseline(plan, n)]
    return LOOKS[learned.index(name) % len(LOOKS)]


def short_title(plan: Plan, name: str, length: int = 22) -> str:
    """A candidate's title for a narrow line, keeping what sets it apart from its like.

    Where several settings of one kind were chosen, only those that differ are named, and the
    kind itself is cut to make room for them.
    """
    kind, _, told_all = plan.title(name).partition(" (")
    if not told_all:
        return shorten(kind, length)
    same_kind = [n for n in plan.candidate_names if plan.title(n).startswith(f"{kind} (")]
    told_by_all = [plan.title(n).partition(" (")[2] for n in same_kind]
    settings = [_settings(told) for told in told_by_all]
    apart = [s for s in _settings(told_all) if any(s not in others for others in settings)]
    told = f" ({', '.join(apart)})" if apart else ""
    return shorten(kind, max(6, length - len(told))) + told


def _settings(told: str) -> list[str]:
    """What stands in a title's brackets: what is tuned, then what sets it apart."""
    return told.removesuffix(")").replace("; ", ", ").split(", ")


def class_colour(name: str, concern: str) -> str:
    """Brown for the class of concern, grey for every other: rows carry names, not a legend."""
    return CONCERN if name == concern else OTHER_CLASS


def shorten(text: str, length: int) -> str:
    """A name cut to a length with an ellipsis, characters that cannot be drawn replaced.

    >>> shorten("a name that is far too long", 10)
    'a name th…'
    """
    shown = "".join(c if c.isprintable() else " " for c in text)
    return shown if len(shown) <= length else shown[: length - 1].rstrip() + "…"


def scheme_so_far(evaluation: Evaluation, scheme: str) -> str:
    """The scheme in words, with how far it has come while rounds are still missing."""
    words = scheme_in_words(evaluation.plan, evaluation.table, scheme)
    done = evaluation.rounds[scheme].n_rounds
    planned = evaluation.planned.get(scheme, done)
    return words if done >= planned else f"{words}; so far {count(done)} of {count(planned)} rounds"


def caption(evaluation: Evaluation, scheme: str, *how_to_read: str) -> str:
    """The scheme, then how to read the chart, as sentences."""
    parts = (scheme_so_far(evaluation, scheme), *how_to_read)
    return " ".join(f"{capitalised(part)}." for part in parts if part)


def text_alternative(
    title: str, items: list[str], references: list[str], scheme: str, *, most: int = 12
) -> str:
    """Title, rows, reference lines and scheme as sentences.

    Of more than `most` rows the first and last three are given, and how many stand between; so
    such rows have to come in an order that means something.
    """
    shown = items
    if len(items) > most:
        between = f"{count(len(items) - 6)} more between"
        shown = [*items[:3], between, *items[-3:]]
    parts = [title, *shown, *references, f"Scheme: {scheme}" if scheme else ""]
    return " ".join(f"{part.rstrip('.')}." for part in parts if part)
