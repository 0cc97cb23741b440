"""The table to be judged on: features, labels, units, and what was set aside and why."""

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from evalcore.errors import PlanError, TableError
from evalcore.figures import CountedBy
from evalcore.wording import CASE, Noun, listed, quoted

Kind = Literal["number", "text"]
Copies = Literal["set_aside", "keep"]


@dataclass(frozen=True)
class Roles:
    """What each column of a file is for.

    Attributes
    ----------
    label : str
        The column that holds the class.
    unit : str
        The column that names what is independent (the lot, the person); empty if every row is.
    leave_out : tuple of str
        Columns that no candidate may see.
    noun : Noun
        What one unit is called.
    copies : {"set_aside", "keep"}
        What happens to rows entered twice and units submitted twice.
    """

    label: str
    unit: str = ""
    leave_out: tuple[str, ...] = ()
    noun: Noun = CASE
    copies: Copies = "keep"


@dataclass(frozen=True, eq=False)
class Column:
    """One feature.

    Attributes
    ----------
    name : str
    kind : {"number", "text"}
    values : ndarray of float, shape (n,)
        Numbers, or codes into `categories` for text; nan where missing.
    categories : tuple of str
        Sorted; empty for numbers.
    """

    name: str
    kind: Kind
    values: NDArray[np.float64]
    categories: tuple[str, ...] = ()

    @property
    def missing(self) -> int:
        """Number of cases without a value."""
        return int(np.isnan(self.values).sum())


@dataclass(frozen=True)
class SetAside:
    """Rows that are not judged on, and why."""

    reason: str
    rows: int
    units: int = 0


@dataclass(frozen=True, eq=False)
class Table:
    """The cases a classifier is judged on.

    Attributes
    ----------
    name : str
        File name as it came.
    columns : tuple of Column
        The features that candidates may see.
    labels : ndarray of int, shape (n,)
        Codes into `classes`.
    classes : tuple of str
        Sorted as text; at least two.
    units : ndarray of int, shape (n,)
        Which unit each case belongs to, 0 to `n_units` - 1, in order of first appearance.
    unit_names : tuple of str, length n_units
    roles : Roles
    lines : ndarray of int, shape (n,)
        Line of each case in the file, the first line being 1.
    rows_read : int
    set_aside : tuple of SetAside
    left_out : tuple of str
        Columns no candidate sees: those named in `roles` and those that cannot be used.
    notices : tuple of str
        What was decided while reading.
    repeating : tuple of (str, int, bool)
        Columns that look like names of units: name, different entries, whether spelled out.
    entries : mapping of str to tuple of str
        Every column of the file as it was written, for the cases that are judged on.
    features : ndarray of float, shape (n, p)
        The columns' values side by side.
    """

    name: str
    columns: tuple[Column, ...]
    labels: NDArray[np.intp]
    classes: tuple[str, ...]
    units: NDArray[np.intp]
    unit_names: tuple[str, ...]
    roles: Roles
    lines: NDArray[np.intp]
    rows_read: int
    set_aside: tuple[SetAside, ...] = ()
    left_out: tuple[str, ...] = ()
    notices: tuple[str, ...] = ()
    repeating: tuple[tuple[str, int, bool], ...] = ()
    entries: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    features: NDArray[np.float64] = field(init=False)

    def __post_init__(self) -> None:
        if len(self.classes) < 2:
            found = f"one class only (‘{self.classes[0]}’)" if self.classes else "no class"
            raise TableError(
                f"The column ‘{self.roles.label}’ holds {found}; at least two are needed."
            )
        if not self.columns:
            raise TableError(
                "No column is left for the candidates to learn from; keep at least one besides "
                f"the label ‘{self.roles.label}’."
            )
        features = np.column_stack([column.values for column in self.columns])
        object.__setattr__(self, "features", features)
        for array in (self.features, self.labels, self.units, self.lines):
            array.setflags(write=False)

    @property
    def n_cases(self) -> int:
        """Number of cases (rows that are judged on)."""
        return len(self.labels)

    @property
    def n_units(self) -> int:
        """Number of independent units."""
        return len(self.unit_names)

    @property
    def n_classes(self) -> int:
        """Number of classes."""
        return len(self.classes)

    @property
    def has_units(self) -> bool:
        """Whether at least one unit has more than one case."""
        return self.n_units < self.n_cases

    @property
    def noun(self) -> Noun:
        """What one unit is called."""
        return self.roles.noun

    def noun_for(self, counted_by: CountedBy) -> Noun:
        """What is counted: units under their own noun, rows as cases."""
        return self.noun if counted_by == "unit" or not self.has_units else Noun("row", "rows")

    @cached_property
    def unit_labels(self) -> NDArray[np.intp]:
        """Class of each unit, shape (n_units,); the most frequent one (first on ties) if mixed."""
        return np.asarray(self._class_counts_per_unit.argmax(axis=1), dtype=np.intp)

    @cached_property
    def mixed_units(self) -> NDArray[np.intp]:
        """Units whose cases carry more than one class."""
        return np.flatnonzero((self._class_counts_per_unit > 0).sum(axis=1) > 1)

    @cached_property
    def _class_counts_per_unit(self) -> NDArray[np.intp]:
        counts = np.zeros((self.n_units, self.n_classes), dtype=np.intp)
        np.add.at(counts, (self.units, self.labels), 1)
        return counts

    @property
    def units_with_class(self) -> NDArray[np.bool_]:
        """Whether each unit holds a case of each class, shape (n_units, n_classes)."""
        return np.asarray(self._class_counts_per_unit > 0)

    @cached_property
    def units_holding(self) -> NDArray[np.intp]:
        """Units that hold at least one case of each class, shape (n_classes,)."""
        return np.asarray(self.units_with_class.sum(axis=0))

    def entries_of(self, column: str) -> tuple[str, ...]:
        """A column as written, feature or not; raises `PlanError` if there is none of the name."""
        if column not in self.entries:
            raise PlanError(
                f"There is no column {quoted(column)}; the file has "
                f"{listed([quoted(name) for name in self.entries])}."
            )
        return self.entries[column]

    def labels_by(self, counted_by: CountedBy) -> NDArray[np.intp]:
        """Labels per unit or per case."""
        return self.unit_labels if counted_by == "unit" else self.labels

    def class_counts(self, counted_by: CountedBy) -> NDArray[np.intp]:
        """Units or cases of each class, shape (n_classes,)."""
        return np.bincount(self.labels_by(counted_by), minlength=self.n_classes)

    @cached_property
    def fingerprint(self) -> str:
        """sha256 over everything a figure can depend on, as 64 hexadecimal digits."""
        head = [
            [(c.name, c.kind, c.categories) for c in self.columns],
            self.classes,
            self.unit_names,
            self.roles.label,
            self.roles.unit,
            {name: self.entries[name] for name in self.left_out if name in self.entries},
        ]
        digest = hashlib.sha256(json.dumps(head, ensure_ascii=False).encode())
        for array in (self.features, self.labels, self.units):
            digest.update(np.ascontiguousarray(array).astype(array.dtype.newbyteorder("<")).data)
        return digest.hexdigest()
