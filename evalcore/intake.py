"""A sheet to a table: what is set aside, kinds of columns, units; a notice for each choice."""

import math
import re
import unicodedata
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from evalcore.errors import TableError
from evalcore.sheet import NUMBER, Sheet
from evalcore.table import Column, Roles, SetAside, Table
from evalcore.wording import CASE, Noun, count, listed, quoted

MISSING = frozenset({"", "NA", "N/A", "n/a", "NaN", "nan", "NULL", "null", "#N/A"})
# a label may well be called "null" or "None": only these count as not given
MISSING_LABEL = frozenset({"", "NA", "N/A", "NaN"})
MOST_NUMBERS = 50  # different numbers from which a label is taken for a measurement
_INFINITE = re.compile(r"[+-]?inf(inity)?$", re.IGNORECASE)


def make_table(sheet: Sheet, roles: Roles) -> Table:
    """Turn a sheet into the table that is judged on.

    Rows without a label or without a unit are set aside and counted, and so are copies if
    `roles.copies` is "set_aside". Columns without any value, with one value only, or with a
    different text in every row are left out, each with a notice.

    Raises
    ------
    TableError
        Unknown column, fewer than two classes, a label that looks like a measurement, no
        feature left.
    """
    if not roles.label:
        raise TableError("Choose the column that holds the class of each case.")
    for name in (roles.unit, *roles.leave_out):
        if name:
            sheet.column(name)
    if roles.unit == roles.label:
        raise TableError(f"{quoted(roles.label)} cannot be both the label and the unit.")
    keep, set_aside = _rows_kept(sheet, roles)
    label_entries = sheet.column(roles.label, keep)
    classes = tuple(sorted(set(label_entries)))
    _refuse_measurement(label_entries, classes, roles.label)
    unit_entries = (
        sheet.column(roles.unit, keep)
        if roles.unit
        else [f"row on line {sheet.lines[i]}" for i in keep]
    )
    unit_names = tuple(dict.fromkeys(unit_entries))
    columns, left_out, notices = _columns(sheet, roles, keep)
    return Table(
        name=sheet.name,
        columns=columns,
        labels=_codes(label_entries, classes),
        classes=classes,
        units=_codes(unit_entries, unit_names),
        unit_names=unit_names,
        roles=roles,
        lines=np.array([sheet.lines[i] for i in keep], dtype=np.intp),
        rows_read=len(sheet.rows),
        set_aside=set_aside,
        left_out=left_out,
        notices=sheet.notices + _look_alikes(classes) + notices,
        entries={name: tuple(sheet.column(name, keep)) for name in sheet.header},
        repeating=repeating_columns(sheet, roles.label, keep),
    )


def _look_alikes(classes: Sequence[str]) -> tuple[str, ...]:
    """Classes that differ in characters but not to the eye: a letter with its accent apart."""
    composed = [unicodedata.normalize("NFC", name) for name in classes]
    alike = sorted({name for name in composed if composed.count(name) > 1})
    return tuple(
        f"Two classes look alike, {quoted(name)}: they differ only in how accents are encoded. "
        "They are kept apart; make them one in the file if they are."
        for name in alike
    )


def _codes(entries: Sequence[str], names: Sequence[str]) -> NDArray[np.intp]:
    place = {name: at for at, name in enumerate(names)}
    return np.array([place[entry] for entry in entries], dtype=np.intp)


def _refuse_measurement(entries: Sequence[str], classes: Sequence[str], label: str) -> None:
    numbers = [c for c in classes if NUMBER.match(c)]
    many = len(classes) > MOST_NUMBERS or len(classes) > max(20, len(entries) / 2)
    if many and len(numbers) == len(classes):
        raise TableError(
            f"The column {quoted(label)} holds {count(len(classes))} different numbers in "
            f"{count(len(entries))} rows; that looks like a measurement, not a class. Choose "
            "another column, or write the classes into one."
        )


def _rows_kept(sheet: Sheet, roles: Roles) -> tuple[list[int], tuple[SetAside, ...]]:
    keep = list(range(len(sheet.rows)))
    set_aside = []

    def drop(rows: set[int], reason: str, units: int = 0) -> None:
        nonlocal keep
        if rows:
            keep = [i for i in keep if i not in rows]
            set_aside.append(SetAside(reason, len(rows), units))

    labels = sheet.column(roles.label)
    unlabelled = {i for i in keep if labels[i] in MISSING_LABEL}
    lines = ", ".join(str(sheet.lines[i]) for i in sorted(unlabelled)[:5])
    more = ", …" if len(unlabelled) > 5 else ""
    drop(unlabelled, f"no label (line{'s' if len(unlabelled) > 1 else ''} {lines}{more})")
    if roles.unit:
        units = sheet.column(roles.unit)
        drop({i for i in keep if units[i] in MISSING}, f"no {roles.noun.singular} named")
    if roles.copies == "set_aside":
        rows, copied = copies(sheet, roles, keep)
        drop(rows, "entered twice")
        members = {i for i in keep if roles.unit and units[i] in copied}
        drop(members, f"{roles.noun.plural} submitted twice", len(copied))
    return keep, tuple(set_aside)


def copies(
    sheet: Sheet, roles: Roles, rows: Sequence[int] | None = None
) -> tuple[set[int], set[str]]:
    """Rows that repeat an earlier row in every column, and units that repeat an earlier unit.

    A unit repeats another if the label and all entries of all its rows agree, in any order, in
    every column that is neither the unit nor left out.

    Returns
    -------
    rows : set of int
        Places in `sheet.rows` of the later copies.
    units : set of str
        Names of the later units.
    """
    rows = range(len(sheet.rows)) if rows is None else rows
    first: dict[tuple[str, ...], int] = {}
    repeated = {i for i in rows if first.setdefault(sheet.rows[i], i) != i}
    if not roles.unit:
        return repeated, set()
    unit_at = sheet.header.index(roles.unit)
    used = [
        at
        for at, name in enumerate(sheet.header)
        if name != roles.unit and name not in roles.leave_out
    ]
    members: dict[str, list[tuple[str, ...]]] = {}
    for i in rows:
        if i not in repeated:
            entry = tuple(sheet.rows[i][at] for at in used)
            members.setdefault(sheet.rows[i][unit_at], []).append(entry)
    seen: dict[tuple[tuple[str, ...], ...], str] = {}
    return repeated, {
        unit
        for unit, entries in members.items()
        if seen.setdefault(tuple(sorted(entries)), unit) != unit
    }


def _columns(
    sheet: Sheet, roles: Roles, keep: Sequence[int]
) -> tuple[tuple[Column, ...], tuple[str, ...], tuple[str, ...]]:
    columns, notices = [], []
    left_out = [name for name in sheet.header if name in roles.leave_out]
    for name in sheet.header:
        if name in (roles.label, roles.unit) or name in left_out:
            continue
        entries = sheet.column(name, keep)
        column, said = _column(name, entries, sheet.decimal)
        reason = _unusable(column, keep)
        if reason:
            left_out.append(name)
            said = [f"Left out {quoted(name)}: {reason}."]
        else:
            columns.append(column)
        notices += said
    return tuple(columns), tuple(left_out), tuple(notices)


def _column(name: str, entries: Sequence[str], decimal: str) -> tuple[Column, list[str]]:
    """One column as numbers if most of its entries are, else as text; with what was decided."""
    present = [entry for entry in entries if entry not in MISSING]
    numbers = {entry: _number(entry, decimal) for entry in set(present)}
    odd = sorted({entry for entry in present if numbers[entry] is None})
    infinite = sorted(
        {e for e in present if _INFINITE.match(e) or not math.isfinite(numbers[e] or 0.0)}
    )
    words = set(odd) - set(infinite)
    n_words = sum(entry in words for entry in present)
    if present and n_words <= len(present) / 2:
        values = np.array([_or_nan(numbers.get(entry)) for entry in entries], dtype=np.float64)
        notices = _number_notices(name, sorted(words), infinite, n_words)
        return Column(name, "number", values), notices
    categories = tuple(sorted(set(present)))
    place = {entry: float(at) for at, entry in enumerate(categories)}
    values = np.array([place.get(entry, np.nan) for entry in entries], dtype=np.float64)
    return Column(name, "text", values, categories), []


def _or_nan(value: float | None) -> float:
    return value if value is not None and math.isfinite(value) else math.nan


def _number(entry: str, decimal: str) -> float | None:
    plain = entry.replace(",", ".") if decimal == "," else entry
    return float(plain) if NUMBER.match(plain) else None


def _number_notices(
    name: str, words: Sequence[str], infinite: Sequence[str], n_words: int
) -> list[str]:
    notices = []
    if words:
        some = listed([quoted(word) for word in words[:6]])
        notices.append(
            f"{quoted(name)} is read as numbers; {count(n_words)} other entries ({some}) count "
            "as missing."
        )
    if infinite:
        notices.append(
            f"{quoted(name)} holds entries that are not finite "
            f"({listed([quoted(entry) for entry in infinite])}); they count as missing."
        )
    return notices


def _unusable(column: Column, rows: Sequence[int]) -> str:
    """Why nothing could be learned from a column; empty if something can."""
    present = column.values[~np.isnan(column.values)]
    if len(present) == 0:
        return "it has no values"
    distinct = len(np.unique(present))
    if distinct == 1:
        return "it has the same value everywhere"
    if column.kind == "text" and distinct == len(present) >= 10:
        return "it has a different text in every row, like an identifier or a remark"
    # row numbers keep step with the places in the file, whatever rows were set aside
    places = np.asarray(rows)[~np.isnan(column.values)]
    if distinct == len(present) >= 10 and np.all(np.diff(present) == np.diff(places)):
        return "it numbers the rows"
    return ""


def noun_from(column: str) -> Noun:
    """A noun for units from the name of their column, with a regular plural.

    >>> noun_from("lot"), noun_from("")
    (Noun(singular='lot', plural='lots'), Noun(singular='case', plural='cases'))
    """
    if not column:
        return CASE
    # an ending of its own: behind a gap ("lot_no") or a change to capitals ("lotNo")
    ending = r"[_\s.-]+(?i:id|no|nr|number|name|code)$|(?<=[a-z])(ID|Id|No|Nr)$"
    word = re.sub(ending, "", column.strip())
    word = (word or column).replace("_", " ").strip().lower()
    if re.search(r"[^aeiou]y$", word):
        return Noun(word, word[:-1] + "ies")
    return Noun(word, word + ("es" if re.search(r"(s|x|z|ch|sh)$", word) else "s"))


def repeating_columns(
    sheet: Sheet, label: str, rows: Sequence[int]
) -> tuple[tuple[str, int, bool], ...]:
    """Columns whose entries look like names of units: many, repeated, one class each.

    Returns
    -------
    tuple of (column name, number of different entries, whether any is more than a number)
    """
    labels = sheet.column(label, rows)
    found = []
    for name in sheet.header:
        entries = sheet.column(name, rows)
        distinct = set(entries)
        if name == label or not 10 <= len(distinct) <= 2 * len(rows) / 3:
            continue
        if any(NUMBER.match(entry) and not entry.isdigit() for entry in distinct):
            continue  # a reading, not a name
        classes: dict[str, set[str]] = {}
        for entry, of_class in zip(entries, labels, strict=True):
            classes.setdefault(entry, set()).add(of_class)
        if all(len(seen) == 1 for entry, seen in classes.items() if entry not in MISSING):
            spelled = any(not entry.isdigit() for entry in distinct - MISSING)
            found.append((name, len(distinct), spelled))
    return tuple(found)
