"""What is kept together in rounds: units, or coarser groups that a column names."""

import datetime
import math
import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from evalcore.errors import PlanError
from evalcore.intake import MISSING
from evalcore.table import Table
from evalcore.wording import Noun, quoted

_DATE = re.compile(
    r"(\d{4})-(\d{1,2})(?:-(\d{1,2})(?:[T ](\d{1,2}):(\d{2})(?::(\d{2}))?)?)?", re.ASCII
)


@dataclass(frozen=True, eq=False)
class Groups:
    """Groups of cases that are always on the same side of a round.

    Attributes
    ----------
    of_case : ndarray of int, shape (n,)
        Group of each case, 0 to G - 1.
    names : tuple of str, length G
    counts : ndarray of int, shape (G, K)
        Units of each group that hold a case of each class; one of several classes counts in each.
    labels : ndarray of int, shape (G,)
        Most frequent class of each group's units, the first on ties.
    """

    of_case: NDArray[np.intp]
    names: tuple[str, ...]
    counts: NDArray[np.intp]
    labels: NDArray[np.intp]

    @property
    def number(self) -> int:
        """Number of groups G."""
        return len(self.names)

    @property
    def alike(self) -> bool:
        """Whether every group is one unit of one class, so that dealing them out is even."""
        return bool((self.counts.sum(axis=1) == 1).all())


def groups_of(table: Table, column: str = "") -> Groups:
    """The table's units, or the groups that share an entry in a column.

    Raises
    ------
    PlanError
        No such column, a missing entry, or a unit that is in two groups.
    """
    if not column:
        return Groups(
            table.units, table.unit_names, table.units_with_class.astype(np.intp), table.unit_labels
        )
    entries = table.entries_of(column)
    for entry, line in zip(entries, table.lines, strict=True):
        if entry in MISSING:
            raise PlanError(
                f"The column {quoted(column)} has no entry on line {line}; every row needs one."
            )
    names = tuple(sorted(set(entries), key=_in_order))
    place = {name: at for at, name in enumerate(names)}
    of_case = np.array([place[entry] for entry in entries], dtype=np.intp)
    first_case = np.unique(table.units, return_index=True)[1]
    of_unit = of_case[first_case]
    split = np.flatnonzero(of_unit[table.units] != of_case)
    if len(split):
        unit = table.unit_names[table.units[split[0]]]
        raise PlanError(
            f"The column {quoted(column)} splits {table.noun.singular} {quoted(unit)}: its rows "
            "carry different entries. What is kept together must hold whole "
            f"{table.noun.plural}."
        )
    counts = np.zeros((len(names), table.n_classes), dtype=np.intp)
    np.add.at(counts, of_unit, table.units_with_class)
    units = np.zeros_like(counts)
    np.add.at(units, (of_unit, table.unit_labels), 1)
    return Groups(of_case, names, counts, np.asarray(units.argmax(axis=1)))


def noun_of(table: Table, column: str = "") -> Noun:
    """What groups are called: entries of the column that names them, or as units are.

    >>> from types import SimpleNamespace
    >>> lots = SimpleNamespace(noun=Noun("lot", "lots"))
    >>> noun_of(lots).plural, noun_of(lots, "site").plural
    ('lots', 'entries of ‘site’')
    """
    if not column:
        return table.noun
    return Noun(f"entry of {quoted(column)}", f"entries of {quoted(column)}")


def order_of(table: Table, column: str) -> NDArray[np.float64]:
    """Place of each unit in time by a column of numbers or of dates written year first.

    Returns
    -------
    ndarray, shape (n_units,)
        Ranks from 0; units of one time share a rank.

    Raises
    ------
    PlanError
        No such column, an entry that is neither, or a unit with two times.
    """
    groups = groups_of(table, column)
    time = _times(column, groups.names)
    rank = {moment: at for at, moment in enumerate(sorted(set(time)))}
    first_case = np.unique(table.units, return_index=True)[1]
    return np.array([rank[time[g]] for g in groups.of_case[first_case]], dtype=np.float64)


def _times(column: str, names: Sequence[str]) -> list[float]:
    """Numbers, or seconds of dates; one kind throughout."""
    numbers, dates = [_number(name) for name in names], [_date(name) for name in names]
    found = dates if None in numbers else numbers
    times = [time for time in found if time is not None]
    if len(times) == len(names):
        return times
    pairs = list(zip(names, numbers, dates, strict=True))
    odd = [name for name, number, date in pairs if number is None and date is None]
    if odd:
        raise PlanError(
            f"The column {quoted(column)} cannot be put in order of time: it holds "
            f"{quoted(odd[0])}. Numbers are allowed, and dates written year-month-day."
        )
    a_number = next(name for name, number, _ in pairs if number is not None)
    a_date = next(name for name, _, date in pairs if date is not None)
    raise PlanError(
        f"The column {quoted(column)} cannot be put in order of time: it holds both numbers, as "
        f"{quoted(a_number)}, and dates, as {quoted(a_date)}."
    )


def _date(entry: str) -> float | None:
    """Seconds since the year 1 of a date, with the time of day or without the day."""
    found = _DATE.fullmatch(entry)
    if not found:
        return None
    filled = (int(part or least) for part, least in zip(found.groups(), "111000", strict=True))
    year, month, day, hour, minute, second = filled
    try:
        moment = datetime.datetime(year, month, day, hour, minute, second)
    except ValueError:
        return None
    return (moment - datetime.datetime.min).total_seconds()


def _number(entry: str) -> float | None:
    try:
        value = float(entry)
    except ValueError:
        return None
    return value if math.isfinite(value) else None


def _in_order(entry: str) -> tuple[float, str]:
    """Numbers by size, then everything else as text; spellings of one number as text."""
    number = _number(entry)
    return (math.inf if number is None else number, entry)
