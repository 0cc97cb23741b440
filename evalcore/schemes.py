"""The resampling schemes: their settings, what each costs, and when each suits a table.

All keep groups together: a table's units (one case each where rows do not repeat), or coarser
groups that a column names.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from evalcore import draws
from evalcore.errors import PlanError
from evalcore.groups import Groups, groups_of, noun_of
from evalcore.profile import smallest_class
from evalcore.rounds import Rounds
from evalcore.settings import Setting, Settings
from evalcore.table import Table
from evalcore.wording import count, quoted

LEAST_BLOCKS = 5  # no interval is offered over fewer blocks


class DrawFunction(Protocol):
    """Draws rounds over groups."""

    def __call__(
        self, table: Table, groups: Groups, settings: Settings, /, *, rng: np.random.Generator
    ) -> Rounds: ...


@dataclass(frozen=True)
class Scheme:
    """One way of holding cases out.

    Attributes
    ----------
    key, title : str
    what : str
        One plain sentence: what it does and what it costs.
    settings : tuple of Setting
    n_rounds : callable
        Table and settings to the number of rounds.
    fit : callable
        Table and settings; raises `PlanError` with the reason when it does not suit.
    draw : callable
        See `draws`.
    keeps : str
        The setting that names what is kept together; empty for units alone.
    repeats_cases : bool
        Whether bags hold cases more than once.
    drawn : bool
        Whether chance decides who is held out, so that a redraw could move the estimate.
    """

    key: str
    title: str
    what: str
    settings: tuple[Setting, ...]
    n_rounds: Callable[[Table, Settings], int]
    fit: Callable[[Table, Settings], None]
    draw: DrawFunction
    keeps: str = "keep"
    repeats_cases: bool = False
    drawn: bool = True

    def groups(self, table: Table, settings: Settings) -> Groups:
        """What this scheme keeps together."""
        return groups_of(table, str(settings.get(self.keeps, "")))


def draw(scheme: Scheme, table: Table, settings: Settings, rng: np.random.Generator) -> Rounds:
    """Draw a scheme's rounds for a table.

    Parameters
    ----------
    scheme : Scheme
    table : Table
    settings : mapping
        A value for each of the scheme's settings.
    rng : numpy.random.Generator

    Returns
    -------
    Rounds
        Over the cases of the table; the cases of a group always together.

    Raises
    ------
    PlanError
        The scheme does not suit the table.
    """
    scheme.fit(table, settings)
    groups = scheme.groups(table, settings)
    return scheme.draw(table, groups, settings, rng=rng).of_cases(groups.of_case)


def _need_two_each(table: Table, settings: Settings) -> None:
    k, units = smallest_class(table)
    if units < 2:
        raise PlanError(
            f"Class {quoted(table.classes[k])} has {table.noun.counted(units)}; at least 2 are "
            "needed, so that one can be learned from while another is held out. Leave the class "
            "out, join it to another, or add to it."
        )
    keep = str(settings.get("keep", ""))
    if not keep:
        return
    groups = groups_of(table, keep)
    holding = (groups.counts > 0).sum(axis=0)
    if holding.min() < 2:
        name = table.classes[int(holding.argmin())]
        raise PlanError(
            f"Class {quoted(name)} is found in {int(holding.min())} of {groups.number} entries of "
            f"{quoted(keep)}; at least 2 are needed where these are kept together."
        )


def _folds_fit(table: Table, settings: Settings) -> None:
    _need_two_each(table, settings)
    folds, keep = int(settings["folds"]), str(settings.get("keep", ""))
    groups = groups_of(table, keep)
    noun = f"entries of {quoted(keep)}" if keep else table.noun.plural
    if folds > groups.number:
        raise PlanError(
            f"`folds` must be between 2 and {count(groups.number)}, the number of {noun}; got "
            f"{folds}."
        )
    if not settings["stratified"]:
        return
    holding = (groups.counts > 0).sum(axis=0)
    smallest = int(holding.min())
    if folds > smallest:
        k = int(np.flatnonzero(holding == smallest)[0])
        has = f"is found in {smallest} {noun}" if keep else f"has {table.noun.counted(smallest)}"
        raise PlanError(
            f"`folds` must be between 2 and {smallest}, because class "
            f"{quoted(table.classes[k])} {has}; got {folds}."
        )


def _named(table: Table, settings: Settings, purpose: str) -> str:
    """The column of a scheme that cannot do without one."""
    column = str(settings["column"])
    if not column:
        raise PlanError(f"`column` must name {purpose}; it is empty.")
    table.entries_of(column)
    return column


def _blocks_fit(table: Table, settings: Settings) -> None:
    column = _named(
        table, settings, "the column whose blocks are left out (year, site, instrument)"
    )
    groups = groups_of(table, column)
    if not 2 <= groups.number <= 100:
        raise PlanError(
            f"{quoted(column)} has {count(groups.number)} different entries; between 2 and 100 "
            "blocks can be left out one after the other."
        )
    for at, name in enumerate(groups.names):
        lacking = np.flatnonzero(groups.counts.sum(axis=0) - groups.counts[at] == 0)
        if len(lacking):
            raise PlanError(
                f"Without block {quoted(name)} of {quoted(column)} no "
                f"{quoted(table.classes[lacking[0]])} is left to learn from."
            )


def _forward_fit(table: Table, settings: Settings) -> None:
    column = _named(table, settings, "the column that orders units in time")
    stretch = draws.time_stretches(table, settings)
    if stretch.max() < 1:
        raise PlanError(f"All {table.noun.plural} share one time in {quoted(column)}.")
    first = stretch == 0
    lacking = np.flatnonzero(~table.units_with_class[first].any(axis=0))
    if len(lacking):
        raise PlanError(
            f"The earliest {table.noun.plural} by {quoted(column)} ({count(int(first.sum()))} of "
            f"them) hold no {quoted(table.classes[lacking[0]])} to learn from; take fewer `parts`."
        )


def _curve_fit(table: Table, settings: Settings) -> None:
    keep = str(settings.get("keep", ""))
    groups, noun = groups_of(table, keep), noun_of(table, keep)
    number = np.bincount(groups.labels, minlength=table.n_classes)
    k, least = int(number.argmin()), draws.CURVE_FOLDS
    if number[k] < least or len(draws.nested_sizes(groups, int(settings["sizes"]))) < (
        draws.LEAST_SIZES
    ):
        raise PlanError(
            f"Class {quoted(table.classes[k])} has {noun.counted(int(number[k]))} of "
            f"{count(groups.number)}. A learning curve takes {draws.LEAST_SIZES} sizes, the "
            f"largest about twice the smallest or more, each with 2 {noun.plural} of every class; "
            f"7 of each always do, and fewer than {least} never."
        )


STRATIFIED = Setting("stratified", "Keep every class's share in each round", "yes_no", True)
_TEST_SHARE = Setting("test_share", "Share held out", "number", 0.3, 0.05, 0.9)
_KEEP = Setting(
    "keep", "Keep together what shares an entry in (coarser than the unit)", "column", ""
)

SCHEMES: dict[str, Scheme] = {
    scheme.key: scheme
    for scheme in (
        Scheme(
            "cross_validation",
            "Cross-validation, repeated",
            "Each {unit} is held out once per repeat; {folds} parts, {repeats} times.",
            (
                Setting("folds", "Parts (folds)", "whole", 5, 2, 100),
                Setting("repeats", "Repeats", "whole", 20, 1, 1000),
                STRATIFIED,
                _KEEP,
            ),
            lambda _, settings: int(settings["folds"]) * int(settings["repeats"]),
            _folds_fit,
            draws.folds,
        ),
        Scheme(
            "bootstrap",
            "Bootstrap",
            "Draws {n} {units} with repeats; about a third are left unseen each time.",
            (Setting("rounds", "Rounds", "whole", 200, 1, 10_000), STRATIFIED, _KEEP),
            lambda _, settings: int(settings["rounds"]),
            _need_two_each,
            draws.bootstrap,
            repeats_cases=True,
        ),
        Scheme(
            "random_subsampling",
            "Random subsampling",
            "Holds out a fresh random part each time.",
            (Setting("rounds", "Rounds", "whole", 100, 1, 10_000), _TEST_SHARE, STRATIFIED, _KEEP),
            lambda _, settings: int(settings["rounds"]),
            _need_two_each,
            draws.subsample,
        ),
        Scheme(
            "holdout",
            "Hold-out, once",
            "One part, held out once. With few {units} the answer moves by many points from one "
            "draw to the next.",
            (_TEST_SHARE, STRATIFIED, _KEEP),
            lambda _, __: 1,
            _need_two_each,
            draws.subsample,
        ),
        Scheme(
            "leave_one_out",
            "Leave one out",
            "Each {unit} alone. No repeats are possible, so how much the model itself varies "
            "stays unknown.",
            (),
            lambda table, _: table.n_units,
            _need_two_each,
            draws.leave_one_out,
            drawn=False,
        ),
        Scheme(
            "leave_block_out",
            "Leave one block out",
            "Each year, site or instrument alone: does it carry over to one never seen?",
            (Setting("column", "Column that names the block", "column", ""),),
            lambda table, settings: groups_of(table, str(settings["column"])).number,
            _blocks_fit,
            draws.leave_one_out,
            keeps="column",
            drawn=False,
        ),
        Scheme(
            "forward_in_time",
            "Forward in time",
            "Learns from earlier {units} and judges later ones, stretch by stretch.",
            (
                Setting("column", "Column of the date or order", "column", ""),
                Setting("parts", "Stretches judged", "whole", 4, 1, 50),
            ),
            lambda table, settings: int(draws.time_stretches(table, settings).max()),
            _forward_fit,
            draws.forward_in_time,
            keeps="",
            drawn=False,
        ),
    )
}

LEARNING_CURVE = Scheme(  # never a headline: most of its bags are smaller than need be
    "learning_curve",
    "Learning curve",
    "Learns from more and more {units}, and judges the same others at every size.",
    (
        Setting("sizes", "Sizes (fewer where two would be equal)", "whole", 6, 5, 12),
        Setting("subsets", "Random subsets of each size, at least", "whole", 20, 20, 1000),
        _KEEP,
    ),
    lambda table, settings: draws.n_nested(
        groups_of(table, str(settings.get("keep", ""))), settings
    ),
    _curve_fit,
    draws.nested_bags,
)

ALL_SCHEMES: dict[str, Scheme] = SCHEMES | {LEARNING_CURVE.key: LEARNING_CURVE}
