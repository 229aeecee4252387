"""What a file would do to the register, row by row, before anything is written."""

from __future__ import annotations

import datetime
from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Any

from register.auditing import as_text
from register.imports.columns import Cells
from register.imports.known import Known
from register.models import Area, Fitting, Range, Tag, Transmitter


@dataclass(frozen=True, slots=True)
class Change:
    """One field of a thing that is there already, before and after."""

    line: int
    thing: str
    field: str
    before: str
    after: str


@dataclass(slots=True)
class Row:
    """One row of a file as it would be stored; rows that are new have no key yet."""

    place: int
    line: int
    tag: Tag | None = None
    tag_is_new: bool = False
    tag_fields: list[str] = field(default_factory=list)
    tag_before: dict[str, Any] = field(default_factory=dict)
    device: Transmitter | None = None
    device_is_new: bool = False
    device_fields: list[str] = field(default_factory=list)
    device_before: dict[str, Any] = field(default_factory=dict)
    ended: Fitting | None = None
    fitting: Fitting | None = None
    range: Range | None = None
    changes: list[Change] = field(default_factory=list)

    @property
    def state(self) -> str:
        """“new” where the tag, or the transmitter of a row without tag, is added; else “changed” or “unchanged”."""
        if self.tag_is_new or (self.tag is None and self.device_is_new):
            return "new"
        touched = self.tag_fields or self.device_fields or self.device_is_new or self.fitting or self.range
        return "changed" if touched else "unchanged"

    def change(self, thing: Any, name: str, before: Any, after: Any) -> None:
        """Note what the dry run shows."""
        self.changes.append(Change(self.line, str(thing), name, as_text(before), as_text(after)))


@dataclass(slots=True)
class Draft:
    """A file on its way into the register: its cells, what is there already, and the rows found so far."""

    cells: Cells
    known: Known
    today: datetime.date
    may_rerange: bool = True
    may_fit: bool = True
    rows: list[Row] = field(default_factory=list)
    new_areas: dict[str, Area] = field(default_factory=dict)
    blank_tag: Tag = field(init=False)
    blank_device: Transmitter = field(init=False)
    blank_fitting: Fitting = field(init=False)
    blank_range: Range = field(init=False)

    def __post_init__(self) -> None:
        plant = self.known.plant
        self.blank_tag, self.blank_device = Tag(plant=plant), Transmitter(plant=plant)
        self.blank_fitting, self.blank_range = Fitting(), Range()

    def complain(self, row: Row, key: str, words: str) -> None:
        self.cells.complain(row.place, key, words)

    def is_bad(self, row: Row) -> bool:
        return row.place in self.cells.bad

    def given(self, row: Row, keys: Iterable[str]) -> dict[str, Any]:
        """What stands in the cells of a row, without those that are blank."""
        values = self.cells.values
        return {key: value for key in keys if (value := values[key][row.place]) is not None}
