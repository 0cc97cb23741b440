"""What is kept together in rounds: units, or coarser groups that a column names."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from evalcore.errors import PlanError
from evalcore.table import Table
from evalcore.wording import quoted


@dataclass(frozen=True, eq=False)
class Groups:
    """Groups of cases that are always on the same side of a round.

    Attributes
    ----------
    of_case : ndarray of int, shape (n,)
        Group of each case, 0 to G - 1.
    names : tuple of str, length G
    counts : ndarray of int, shape (G, K)
        Units of each class in each group.
    """

    of_case: NDArray[np.intp]
    names: tuple[str, ...]
    counts: NDArray[np.intp]

    @property
    def number(self) -> int:
        """Number of groups G."""
        return len(self.names)

    @property
    def labels(self) -> NDArray[np.intp]:
        """Most frequent class of each group, the first on ties, shape (G,)."""
        return np.asarray(self.counts.argmax(axis=1))

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
        counts = np.zeros((table.n_units, table.n_classes), dtype=np.intp)
        counts[np.arange(table.n_units), table.unit_labels] = 1
        return Groups(table.units, table.unit_names, counts)
    entries = table.entries_of(column)
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
    np.add.at(counts, (of_unit, table.unit_labels), 1)
    return Groups(of_case, names, counts)


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
    if not all(_is_time(name) for name in groups.names):
        odd = next(name for name in groups.names if not _is_time(name))
        raise PlanError(
            f"The column {quoted(column)} cannot be put in order of time: it holds "
            f"{quoted(odd)}. Numbers are allowed, and dates written year-month-day."
        )
    first_case = np.unique(table.units, return_index=True)[1]
    return groups.of_case[first_case].astype(np.float64)


def _is_time(entry: str) -> bool:
    if _number(entry) is not None:
        return True
    digits = entry.replace("-", "").replace(":", "").replace("T", "").replace(" ", "")
    return len(entry) >= 7 and entry[:4].isdigit() and entry[4] == "-" and digits.isdigit()


def _number(entry: str) -> float | None:
    try:
        return float(entry)
    except ValueError:
        return None


def _in_order(entry: str) -> tuple[float, str]:
    """Numbers by size, then everything else as text."""
    number = _number(entry)
    return (float("inf"), entry) if number is None else (number, "")
