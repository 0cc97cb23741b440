"""Bytes to a table: encoding, delimiter, decimal mark, widths and kinds; a notice for each choice.

Everything is read as text first and turned into numbers afterwards, so that a class called "NA"
or a code with leading zeros is not eaten on the way.
"""

import csv
import io
import math
import re
import unicodedata
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from evalcore.errors import TableError
from evalcore.table import Column, Roles, SetAside, Table
from evalcore.wording import CASE, Noun, count, listed, quoted

DELIMITERS = {",": "comma", ";": "semicolon", "\t": "tab"}
MISSING = frozenset({"", "NA", "N/A", "n/a", "NaN", "nan", "NULL", "null", "#N/A"})
# a label may well be called "null" or "None": only these count as not given
MISSING_LABEL = frozenset({"", "NA", "N/A", "NaN"})
MOST_NUMBERS = 50  # different numbers from which a label is taken for a measurement
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?$")
_INFINITE = re.compile(r"[+-]?inf(inity)?$", re.IGNORECASE)
_FORBIDDEN = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ufffe\uffff]")


@dataclass(frozen=True)
class Sheet:
    """A file as read, before anything is known about the purpose of its columns.

    Attributes
    ----------
    name : str
    header : tuple of str
    rows : tuple of tuple of str
        Every row as wide as the header, blanks at both ends removed.
    lines : tuple of int
        Line in the file on which each row starts; the header stands on line 1.
    decimal : str
        "." or ",".
    notices : tuple of str
    """

    name: str
    header: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    lines: tuple[int, ...]
    decimal: str
    notices: tuple[str, ...]

    def column(self, name: str, rows: Sequence[int] | None = None) -> list[str]:
        """The entries of one column, of some rows if given.

        Raises `TableError` if there is no such column.
        """
        if name not in self.header:
            raise TableError(
                f"There is no column {quoted(name)} in {quoted(self.name)}; it has "
                f"{listed([quoted(h) for h in self.header])}."
            )
        at = self.header.index(name)
        chosen = range(len(self.rows)) if rows is None else rows
        return [self.rows[i][at] for i in chosen]


def read_sheet(data: bytes, name: str) -> Sheet:
    """Read a delimited text file.

    Parameters
    ----------
    data : bytes
        The whole file.
    name : str
        Its name, for messages.

    Raises
    ------
    TableError
        Empty file, not a text table, one column only, no rows, uneven rows (with their lines).
    """
    text, notices = _decode(data, name)
    delimiter = _delimiter(text)
    records, lines = _records(text, delimiter)
    if not records:
        raise TableError(f"{quoted(name)} is empty; a header line and one line a case are needed.")
    header, renamed = _header(records[0])
    if len(header) < 2:
        raise TableError(
            f"{quoted(name)} has one column ({quoted(header[0])}); at least a label and one "
            "feature are needed, separated by comma, semicolon or tab."
        )
    if len(records) == 1:
        raise TableError(f"No cases: {quoted(name)} has a header and no rows.")
    _refuse_uneven(records, lines, name)
    notices += renamed + _looks_headless(header)
    decimal = "," if delimiter != "," and _decimal_comma(records[1:]) else "."
    if decimal == ",":
        notices.append(f"Columns are separated by {DELIMITERS[delimiter]}, decimals by comma.")
    return Sheet(
        name=name,
        header=header,
        rows=tuple(tuple(cell.strip() for cell in record) for record in records[1:]),
        lines=tuple(lines[1:]),
        decimal=decimal,
        notices=tuple(notices),
    )


def _decode(data: bytes, name: str) -> tuple[str, list[str]]:
    if not data.strip():
        raise TableError(f"{quoted(name)} is empty; a header line and one line a case are needed.")
    try:
        text, notices = data.decode("utf-8-sig"), []
    except UnicodeDecodeError:
        # some bytes (0x81 ...) have no meaning there: then it was no text at all
        text = data.decode("cp1252", errors="replace")
        odd = next((w for w in re.findall(r"[^\s,;]+", text) if not w.isascii()), "")
        notices = [f"Not UTF-8; read as Windows-1252, so that e.g. {quoted(odd)} is one entry."]
    bad = _FORBIDDEN.search(text)
    if bad or "\ufffd" in text:
        line = text[: bad.start() if bad else text.index("\ufffd")].count("\n") + 1
        raise TableError(
            f"{quoted(name)} is not a text table: line {line} holds bytes that no text has. "
            "Save it as CSV (UTF-8) and try again."
        )
    return text, notices


def _delimiter(text: str) -> str:
    """The delimiter on which the widths of the first lines agree best; comma if none does."""

    def agreement(delimiter: str) -> tuple[float, int]:
        rows = [r for r in _reader(text[:20_000], delimiter) if r][:30]
        widths = Counter(len(row) for row in rows)
        width, times = widths.most_common(1)[0] if widths else (1, 0)
        return (times / max(1, len(rows)) if width > 1 else 0.0, width)

    return max(DELIMITERS, key=agreement)


def _reader(text: str, delimiter: str) -> list[list[str]]:
    try:
        return list(csv.reader(io.StringIO(text, newline=""), delimiter=delimiter))
    except csv.Error as error:
        raise TableError(f"The file cannot be read as a table: {error}.") from error


def _records(text: str, delimiter: str) -> tuple[list[list[str]], list[int]]:
    """Records that are not blank, and the line each starts on (a quoted cell may hold newlines)."""
    csv.field_size_limit(1_000_000)
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, strict=True)
    records, lines, start = [], [], 1
    try:
        for record in reader:
            if any(cell.strip() for cell in record):
                records.append(record)
                lines.append(start)
            start = reader.line_num + 1
    except csv.Error as error:
        raise TableError(f"Line {start} cannot be read: {error}.") from error
    return records, lines


def _header(record: Sequence[str]) -> tuple[tuple[str, ...], list[str]]:
    """Column names, made unique; unnamed columns are named by their place."""
    names: list[str] = []
    notices = []
    for place, cell in enumerate(record, start=1):
        wanted = " ".join(cell.split()) or f"column {place}"
        name, again = wanted, 2
        while name in names:
            name, again = f"{wanted} ({again})", again + 1
        if name != wanted:
            notices.append(
                f"The column name {quoted(wanted)} came twice; one is now {quoted(name)}."
            )
        elif not cell.strip():
            notices.append(f"Column {place} has no name; it is called {quoted(name)}.")
        names.append(name)
    return tuple(names), notices


def _looks_headless(header: Sequence[str]) -> list[str]:
    numbers = [name for name in header if _NUMBER.match(name)]
    if not numbers:
        return []
    return [
        f"The first line is taken as the header, but {quoted(numbers[0])} looks like a reading. "
        "If the file has no header, add one; else its first case is lost."
    ]


def _refuse_uneven(records: Sequence[Sequence[str]], lines: Sequence[int], name: str) -> None:
    width = len(records[0])
    uneven = [
        f"line {line} has {len(record)}"
        for record, line in zip(records, lines, strict=True)
        if len(record) != width
    ]
    if uneven:
        more = f" and {count(len(uneven) - 5)} more" if len(uneven) > 5 else ""
        raise TableError(
            f"Rows of {quoted(name)} differ in width: the header has {width} values, "
            f"{', '.join(uneven[:5])}{more}. Nothing was read."
        )


def _decimal_comma(records: Sequence[Sequence[str]]) -> bool:
    cells = [cell.strip() for record in records[:200] for cell in record]
    with_comma = sum(bool(re.match(r"[+-]?\d+,\d+$", cell)) for cell in cells)
    with_point = sum(bool(re.match(r"[+-]?\d+\.\d+$", cell)) for cell in cells)
    return with_comma > with_point


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
    numbers = [c for c in classes if _NUMBER.match(c)]
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
    return float(plain) if _NUMBER.match(plain) else None


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
        if any(_NUMBER.match(entry) and not entry.isdigit() for entry in distinct):
            continue  # a reading, not a name
        classes: dict[str, set[str]] = {}
        for entry, of_class in zip(entries, labels, strict=True):
            classes.setdefault(entry, set()).add(of_class)
        if all(len(seen) == 1 for entry, seen in classes.items() if entry not in MISSING):
            spelled = any(not entry.isdigit() for entry in distinct - MISSING)
            found.append((name, len(distinct), spelled))
    return tuple(found)
