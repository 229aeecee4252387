"""Reads a table out of a file that somebody brings: CSV in its usual kinds, or a spreadsheet.

Every cell becomes text, as it would be typed: a spreadsheet's numbers in their shortest form, its dates as 2026-03-09.
A row whose first cell begins with "# " is a note to the reader and is left out.
"""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from typing import Final

from register.addresses import is_storable, storable
from register.exporting import unguarded

LARGEST_FILE: Final = 10 * 1024 * 1024
MOST_ROWS: Final = 100_000
MOST_COLUMNS: Final = 200
LONGEST_CELL: Final = 20_000
NOTE: Final = re.compile(r"#(\s|$)")
SEPARATORS: Final = {";": "semicolons", ",": "commas", "\t": "tabs"}
_MARK: Final = re.compile(r"sep=(.)\r?\n")


class TableError(ValueError):
    """A file cannot be read as a table; the message is fit for the person who brought it."""


@dataclass(frozen=True, slots=True)
class Table:
    """The rows of a file below its headings, all cells as text and all rows of one width.

    `lines` says where in the file each row stands: a line of the text, or a row of the sheet (`counted_in`). `faults`
    holds, by place in `rows`, what is wrong with a row as a whole. `decimal_comma` is true where commas can only be
    decimal marks; `notes` says how the file was read.
    """

    head: tuple[str, ...]
    rows: list[tuple[str, ...]]
    lines: list[int]
    counted_in: str = "line"
    decimal_comma: bool = False
    faults: dict[int, str] = field(default_factory=dict)
    notes: tuple[str, ...] = ()
    left_out: int = 0

    def column(self, place: int) -> list[str]:
        """All cells below a heading."""
        return [row[place] for row in self.rows]

    def called(self, place: int) -> str:
        """What a column is called in a message."""
        return f"{letter(place)} “{self.head[place]}”" if self.head[place] else letter(place)

    def samples(self, place: int, most: int = 3) -> list[str]:
        """The first different texts in a column."""
        found: dict[str, None] = {}
        for row in self.rows[:500]:
            if row[place]:
                found[row[place]] = None
            if len(found) == most:
                break
        return list(found)


def read_table(data: bytes, name: str, *, decimal_comma: bool = False) -> Table:
    """Read a file.

    Parameters
    ----------
    data : bytes
        The whole file.
    name : str
        Its name; only what is in the file decides how it is read.
    decimal_comma : bool
        The plant's habit, for a file of tabs; a file of semicolons always has decimal commas.

    Raises
    ------
    TableError
        Too large, empty, no table, or not what it says it is.
    """
    if not data.strip():
        raise TableError(f"“{name}” is empty.")
    if len(data) > LARGEST_FILE:
        raise TableError(f"“{name}” is larger than {LARGEST_FILE // 1024 // 1024} MB: bring it in parts.")
    if data.startswith(b"PK\x03\x04"):
        from register.imports.workbooks import read_workbook

        return read_workbook(data, name)
    if data.startswith(b"\xd0\xcf\x11\xe0"):
        raise TableError(
            f"“{name}” is a workbook of the old kind, or one protected by a password: save it as .xlsx without a "
            "password, or as CSV."
        )
    return _read_text(data, name, decimal_comma=decimal_comma)


def letter(place: int) -> str:
    """A column as spreadsheets call it: 0 is A, 26 is AA."""
    text, rest = "", place + 1
    while rest:
        rest, digit = divmod(rest - 1, 26)
        text = chr(ord("A") + digit) + text
    return text


def assembled(
    cells: Iterable[tuple[int, Sequence[str]]],
    name: str,
    *,
    counted_in: str,
    notes: Sequence[str] = (),
    decimal_comma: bool = False,
    wrong_cells: Iterable[tuple[int, str]] = (),
) -> Table:
    """Make a table of numbered rows of cells: the first that is neither blank nor a note holds the headings.

    `wrong_cells` gives lines and sentences of what could not be read there.
    """
    numbered = ((line, [cell.replace("\N{NO-BREAK SPACE}", " ").strip() for cell in row]) for line, row in cells)
    given = ((line, row) for line, row in numbered if any(row))
    left_out, head = 0, None
    rows: list[tuple[str, ...]] = []
    lines: list[int] = []
    faults: dict[int, str] = {}
    wrong = dict(wrong_cells)
    for line, row in given:
        if NOTE.match(next(cell for cell in row if cell)):
            left_out += 1
        elif head is None:
            head = _headings(row, name)
        elif len(rows) == MOST_ROWS:
            raise TableError(f"“{name}” has more than {MOST_ROWS:,} rows: bring it in parts.")
        else:
            if line in wrong:
                faults[len(rows)] = wrong[line]
            elif any(row[len(head) :]):
                faults[len(rows)] = (
                    f"{len(row)} cells stand here under {len(head)} headings: is a mark that separates columns part of "
                    "a value, such as a decimal comma?"
                )
            elif too_long := next((cell for cell in row if len(cell) > LONGEST_CELL), None):
                faults[len(rows)] = f"A cell holds {len(too_long):,} characters; that fits nowhere here."
            elif not is_storable("".join(row)):
                odd = next(place for place, cell in enumerate(row) if not is_storable(cell))
                faults[len(rows)] = f"The cell in column {letter(odd)} holds a sign that is no text: type it anew."
                # What remains is looked up all the same, where no such sign is taken.
                row = [storable(cell) for cell in row]
            rows.append(tuple(row[: len(head)]) + ("",) * (len(head) - len(row)))
            lines.append(line)
    if head is None:
        raise TableError(f"“{name}” holds no headings: the first row names the columns.")
    if not rows:
        raise TableError(f"“{name}” holds headings, but no row below them.")
    return Table(
        head=tuple(head),
        rows=rows,
        lines=lines,
        counted_in=counted_in,
        decimal_comma=decimal_comma,
        faults=faults,
        notes=tuple(notes),
        left_out=left_out,
    )


def _headings(row: list[str], name: str) -> list[str]:
    while row and not row[-1]:
        row.pop()
    if len(row) > MOST_COLUMNS:
        raise TableError(f"“{name}” has {len(row):,} columns; more than {MOST_COLUMNS} are not read.")
    return [" ".join(storable(cell).split()) for cell in row]


def _read_text(data: bytes, name: str, *, decimal_comma: bool) -> Table:
    wide = data.startswith((b"\xff\xfe", b"\xfe\xff"))
    text, notes = ("", []) if b"\0" in data and not wide else _decoded(data, name)
    if not text or "\0" in text:
        raise TableError(f"“{name}” is no text and no .xlsx workbook: save the table as .xlsx or CSV.")
    separator, text = _separator(text)
    notes.append(f"Columns are separated by {SEPARATORS[separator]}.")
    commas = separator == ";" or (separator == "\t" and decimal_comma)
    return assembled(_lines(text, separator, name), name, counted_in="line", notes=notes, decimal_comma=commas)


def _decoded(data: bytes, name: str) -> tuple[str, list[str]]:
    for mark, encoding in ((b"\xef\xbb\xbf", "utf-8-sig"), (b"\xff\xfe", "utf-16"), (b"\xfe\xff", "utf-16")):
        if data.startswith(mark):
            try:
                return data.decode(encoding), []
            except UnicodeDecodeError as error:
                raise TableError(f"“{name}” says that it is {encoding[:6].upper()}, but it is not.") from error
    try:
        return data.decode("utf-8"), []
    except UnicodeDecodeError:
        pass
    try:
        said = "The file is not UTF-8: it was read as Windows text (cp1252). Look at letters such as ä, ° and Ω below."
        return data.decode("cp1252"), [said]
    except UnicodeDecodeError as error:
        raise TableError(
            f"“{name}” is neither UTF-8 nor Windows text (cp1252): save it as “CSV UTF-8” or as .xlsx."
        ) from error


def _separator(text: str) -> tuple[str, str]:
    """The mark between columns, as the first line that is no note shows it; the text without a line that names it."""
    named = _MARK.match(text)
    if named and named[1] in SEPARATORS:
        return named[1], text[named.end() :]
    first = next((line for line in text[:100_000].splitlines() if line.strip() and not NOTE.match(line)), "")
    unquoted = re.sub(r'"[^"]*"', "", first)
    counts = {mark: unquoted.count(mark) for mark in SEPARATORS}
    return max(counts, key=lambda mark: counts[mark]), text


def _lines(text: str, separator: str, name: str) -> Iterator[tuple[int, list[str]]]:
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=separator, strict=True)
    begins = 1
    try:
        for row in reader:
            if len(row) > 50 * MOST_COLUMNS:
                raise TableError(
                    f"Line {begins} of “{name}” has {len(row):,} columns; at most {MOST_COLUMNS} are read."
                )
            yield begins, [unguarded(cell) for cell in row]
            begins = reader.line_num + 1
    except csv.Error as error:
        raise TableError(
            f"Line {begins} of “{name}” cannot be split into columns: a quotation mark in it is not closed, or stands "
            "inside a value without being doubled."
        ) from error
