"""Bytes to a sheet of text: encoding, delimiter, decimal mark and widths; a notice for each choice.

Everything is read as text first and turned into numbers afterwards, so that a class called "NA"
or a code with leading zeros is not eaten on the way.
"""

import csv
import io
import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

from evalcore.errors import TableError
from evalcore.wording import count, listed, quoted

DELIMITERS = {",": "comma", ";": "semicolon", "\t": "tab"}
NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?$")
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
    numbers = [name for name in header if NUMBER.match(name)]
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
