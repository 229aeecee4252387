"""Columns that an import knows, how the headings of a file are matched to them, and what the cells below hold."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from itertools import groupby
from typing import Any, Final

from register.imports.cells import Reader
from register.imports.tables import Table

#: Column key → place of the column in the file.
Matching = Mapping[str, int]
_BRACKETS: Final = re.compile(r"[(\[].*?[)\]]")
_SPELLING: Final = re.compile(r"[^\w%]+|_")


@dataclass(frozen=True, slots=True)
class Column:
    """What a column is called, what it holds, and how a cell of it is read."""

    key: str
    label: str
    read: Reader
    explain: str
    example: str = ""
    group: str = ""
    aliases: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Complaint:
    """What is wrong with one row of a file, in words."""

    line: int
    column: str
    typed: str
    words: str


@dataclass(slots=True)
class Cells:
    """What the cells of a table hold, column by column: None where a cell is blank or the column is not in the file."""

    table: Table
    matching: Matching
    columns: Mapping[str, Column]
    values: dict[str, list[Any]]
    complaints: list[Complaint]
    bad: set[int] = field(default_factory=set)
    blamed: set[tuple[int, str]] = field(default_factory=set)

    def complain(self, row: int, key: str, words: str) -> None:
        """Refuse a row; `key` names the column that is to blame, or nothing where it is the row as a whole.

        A cell that was blamed already is not blamed again: what follows from it would only be noise.
        """
        if (row, key) in self.blamed:
            return
        self.blamed.add((row, key))
        place = self.matching.get(key) if key else None
        column = "" if not key else self.columns[key].label if place is None else self.table.called(place)
        typed = "" if place is None else self.table.rows[row][place]
        self.complaints.append(Complaint(self.table.lines[row], column, typed, words))
        self.bad.add(row)

    def rows(self, keys: Sequence[str]) -> Iterable[tuple[Any, ...]]:
        """The values of some columns, row by row."""
        return zip(*(self.values[key] for key in keys), strict=True)


def guessed(head: Sequence[str], columns: Iterable[Column]) -> dict[str, int]:
    """Match headings to columns by their names: each column once, to the first heading that is called so."""
    names: dict[str, str] = {}
    for column in columns:
        for name in (column.label, column.key, *column.aliases):
            names.setdefault(_plain(name), column.key)
    found: dict[str, int] = {}
    for bare in (False, True):
        for place, heading in enumerate(head):
            key = names.get(_plain(_BRACKETS.sub(" ", heading) if bare else heading))
            if key is not None and key not in found and place not in found.values():
                found[key] = place
    return found


def read_cells(table: Table, matching: Matching, columns: Sequence[Column]) -> Cells:
    """Read every cell of the columns that are matched; each different text of a column is read once."""
    cells = Cells(table, matching, {column.key: column for column in columns}, {}, [])
    for row, fault in table.faults.items():
        cells.complain(row, "", fault)
    for column in columns:
        place = matching.get(column.key)
        if place is None:
            cells.values[column.key] = [None] * len(table.rows)
            continue
        texts = table.column(place)
        known, wrong = _read(set(texts), column.read, table.decimal_comma)
        cells.values[column.key] = list(map(known.__getitem__, texts))
        if wrong:
            for row, text in enumerate(texts):
                if text in wrong and row not in table.faults:
                    cells.complain(row, column.key, wrong[text])
    return cells


def grouped(columns: Iterable[Column]) -> list[tuple[str, list[Column]]]:
    """Columns under the headings of their groups, in order."""
    return [(group, list(members)) for group, members in groupby(columns, key=lambda column: column.group)]


def _read(
    texts: set[str], read: Callable[[str, bool], Any], decimal_comma: bool
) -> tuple[dict[str, Any], dict[str, str]]:
    known: dict[str, Any] = {"": None}
    wrong: dict[str, str] = {}
    for text in texts - {""}:
        try:
            known[text] = read(text, decimal_comma)
        except ValueError as error:
            known[text], wrong[text] = None, str(error)
    return known, wrong


def _plain(name: str) -> str:
    return _SPELLING.sub("", name.casefold())
