"""What the pages of an import need to know of it: its columns, what it would do, and the act that does it."""

from __future__ import annotations

import datetime
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, Final, Protocol

from register.auditing import Actor
from register.imports.columns import Column, Complaint, Matching
from register.imports.drafts import Change
from register.imports.tables import Table
from register.models import Plant, User


@dataclass(frozen=True, slots=True)
class Told:
    """What a check found, as the page shows it; cells of `new` go with `new_head`."""

    counts: Sequence[tuple[int, str]]
    sentences: Sequence[str]
    new_head: Sequence[str]
    new: Sequence[Sequence[str]]
    changes: Sequence[Change]
    complaints: Sequence[Complaint]
    bad_rows: int
    touched: int
    digest: str


class Proposes(Protocol):
    """Reads a file against what is there; what `by` may not do by hand he may not do by a file either."""

    def __call__(
        self, *, plant: Plant, table: Table, matching: Matching, today: datetime.date, by: User | None = None
    ) -> Any: ...


class Imports(Protocol):
    """Does what a file proposes; raises ChangedMeanwhileError where that is not what was looked at."""

    def __call__(self, *, by: Actor, reason: str, plant: Plant, table: Table, matching: Matching, seen: str) -> Any: ...


@dataclass(frozen=True, slots=True)
class Kind:
    """One import.

    `needed` holds sets of columns of which one must be matched whole. `then` names an import that may take other
    columns of the same file, `done` the page on which to go on, `takes_out` the one that gives out the same columns.
    """

    name: str
    title: str
    brings: str
    columns: Sequence[Column]
    needed: Sequence[tuple[str, ...]]
    propose: Proposes
    act: Imports
    tell: Callable[[Any], Told]
    done: str
    says: Sequence[str] = ()
    then: str = ""
    takes_out: str = ""

    def lacking(self, matching: Matching) -> str:
        """What must be matched before the file can be checked, in a sentence; empty where nothing lacks."""
        if any(all(key in matching for key in keys) for keys in self.needed):
            return ""
        labels = {column.key: column.label for column in self.columns}
        ways = [" and ".join(f"“{labels[key]}”" for key in keys) for keys in self.needed]
        return f"Say which column holds {', or '.join(ways)}: without that no row can be told from another."


#: Every import of the site by its name; filled where their urls are made.
KINDS: Final[dict[str, Kind]] = {}
