"""What a table holds: class balance by unit and by case, columns, what is missing, copies."""

from dataclasses import dataclass

import numpy as np

from evalcore.figures import CountedBy
from evalcore.table import Kind, Table


@dataclass(frozen=True)
class ClassShare:
    """How much of a table one class is."""

    name: str
    units: int
    unit_share: float
    cases: int
    case_share: float


@dataclass(frozen=True)
class ColumnFacts:
    """One feature in figures.

    Attributes
    ----------
    name : str
    kind : {"number", "text"}
    missing : int
        Cases without a value.
    distinct : int
        Different values.
    low, median, high : float
        nan for text.
    categories : tuple of str
        Empty for numbers.
    """

    name: str
    kind: Kind
    missing: int
    distinct: int
    low: float
    median: float
    high: float
    categories: tuple[str, ...]


@dataclass(frozen=True)
class Profile:
    """A table in figures.

    Attributes
    ----------
    classes : tuple of ClassShare
        In the order of `Table.classes`.
    columns : tuple of ColumnFacts
    incomplete_cases : int
        Cases with at least one missing value.
    mixed_units : int
        Units whose cases carry more than one class.
    copied_cases : int
        Cases that equal an earlier case of another unit in every feature and the label.
    contradicting_cases : int
        Cases that equal a case of another class in every feature.
    """

    classes: tuple[ClassShare, ...]
    columns: tuple[ColumnFacts, ...]
    incomplete_cases: int
    mixed_units: int
    copied_cases: int
    contradicting_cases: int


def profile(table: Table) -> Profile:
    """Describe a table."""
    copied, contradicting = _copied(table)
    return Profile(
        classes=class_shares(table),
        columns=tuple(_facts(table, at) for at in range(len(table.columns))),
        incomplete_cases=int(np.isnan(table.features).any(axis=1).sum()),
        mixed_units=len(table.mixed_units),
        copied_cases=copied,
        contradicting_cases=contradicting,
    )


def class_shares(table: Table) -> tuple[ClassShare, ...]:
    """Units and cases of each class, in the order of `Table.classes`."""
    units, cases = table.class_counts("unit"), table.class_counts("case")
    return tuple(
        ClassShare(
            name,
            int(units[k]),
            float(units[k] / table.n_units),
            int(cases[k]),
            float(cases[k] / table.n_cases),
        )
        for k, name in enumerate(table.classes)
    )


def majority(table: Table, counted_by: CountedBy) -> tuple[int, float]:
    """The most frequent class (the first on ties) and its share."""
    counts = table.class_counts(counted_by)
    return int(counts.argmax()), float(counts.max() / counts.sum())


def smallest_class(table: Table) -> tuple[int, int]:
    """The class held by the fewest units (the first on ties) and their number."""
    counts = table.units_holding
    return int(counts.argmin()), int(counts.min())


def _facts(table: Table, at: int) -> ColumnFacts:
    column = table.columns[at]
    present = column.values[~np.isnan(column.values)]
    number = column.kind == "number"
    low, median, high = np.quantile(present, [0, 0.5, 1]) if number else [np.nan] * 3
    return ColumnFacts(
        column.name,
        column.kind,
        column.missing,
        len(np.unique(present)),
        float(low),
        float(median),
        float(high),
        column.categories,
    )


def _copied(table: Table) -> tuple[int, int]:
    alike: dict[bytes, list[int]] = {}
    for i, row in enumerate(table.features + 0.0):  # -0.0 becomes 0.0
        alike.setdefault(row.tobytes(), []).append(i)
    copied = contradicting = 0
    for rows in alike.values():
        first: dict[int, int] = {}
        for i in rows:
            of_class = first.setdefault(int(table.labels[i]), i)
            copied += bool(table.units[i] != table.units[of_class])
        contradicting += len(rows) if len(first) > 1 else 0
    return copied, contradicting
