"""Reads the text of one cell as what its column holds; what cannot be read is refused in the words of the table."""

from __future__ import annotations

import datetime
import difflib
import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import Any, Final, NamedTuple

from register.days import beyond
from register.engineering.typed import parse_number, shortest

YES: Final = frozenset({"yes", "y", "true", "1", "x"})
NO: Final = frozenset({"no", "n", "false", "0"})
_DAY: Final = re.compile(r"(\d{4})-(\d{1,2})-(\d{1,2})(?:[T ]00:00(?::00)?)?")
_DOTTED: Final = re.compile(r"(\d{1,2})\.(\d{1,2})\.(\d{4})")
_SLASHED: Final = re.compile(r"(\d{1,2})/(\d{1,2})/(\d{4})")
_CLOCK: Final = re.compile(r"(\d{1,2}):(\d{2})(?::\d{2})?")


class CellError(ValueError):
    """A cell does not hold what its column asks for; the message is fit for the person who typed it."""


class Number(NamedTuple):
    """A number as it stands in the cell, so that 12.00 stays 12.00, and its value."""

    text: str
    value: float


class Pressure(NamedTuple):
    """A unit of pressure, and the reference where the cell names it too (“psig”)."""

    unit: str
    reference: str


#: Reads the text of a cell that is not blank; the flag says that commas can only be decimal marks.
Reader = Callable[[str, bool], Any]


@dataclass(frozen=True, slots=True)
class Text:
    """Words, no more than fit."""

    most: int
    lines: bool = False

    def __call__(self, text: str, decimal_comma: bool) -> str:
        said = text if self.lines else " ".join(text.split())
        if len(said) > self.most:
            raise CellError(f"{len(said)} characters stand here; at most {self.most} fit.")
        return said


@dataclass(frozen=True, slots=True)
class Figure:
    """A number kept as typed; `least` and `most` are what makes sense here."""

    least: float | None = None
    most: float | None = None
    whole: bool = False
    longest: int = 40

    def __call__(self, text: str, decimal_comma: bool) -> Number:
        number = parse_number(text, decimal_comma=decimal_comma)
        if self.least is not None and number < self.least:
            raise CellError(f"{text} is below {shortest(self.least)}, the least that makes sense here.")
        if self.most is not None and number > self.most:
            raise CellError(f"{text} is above {shortest(self.most)}, the most that makes sense here.")
        if self.whole and number != int(number):
            raise CellError(f"{text} is not a whole number: write 3 or 24.")
        if len(text) > self.longest:
            raise CellError(f"{len(text)} characters are too many for a number.")
        # A text that only the file's decimal commas settle is kept with a point, so that it reads the same anywhere.
        try:
            parse_number(text)
        except ValueError:
            text = shortest(number)
        return Number(text, number)


@dataclass(frozen=True, slots=True)
class Choice:
    """One of several words: pairs of value and label, and in `others` pairs of value and another spelling."""

    words: tuple[tuple[str, str], ...]
    others: tuple[tuple[str, str], ...] = ()

    def __call__(self, text: str, decimal_comma: bool) -> str:
        wanted = _folded(text)
        for value, spelling in (*self.words, *self.others):
            if wanted in (_folded(value), _folded(spelling)):
                return value
        offered = ", ".join(f"“{value}”" for value, _ in self.words)
        raise CellError(f"“{text}” is none of {offered}.")


def yes_or_no(text: str, decimal_comma: bool) -> bool:
    """Read yes or no."""
    said = text.casefold()
    if said in YES:
        return True
    if said in NO:
        return False
    raise CellError(f"“{text}” is neither yes nor no.")


def day(text: str, decimal_comma: bool) -> datetime.date:
    """Read a day: 2026-03-09, or 09.03.2026, which is understood as well."""
    found = _DAY.fullmatch(text)
    year, month, number = found.groups() if found else ("", "", "")
    if dotted := _DOTTED.fullmatch(text):
        number, month, year = dotted.groups()
    if slashed := _SLASHED.fullmatch(text):
        first, second, year = slashed.groups()
        raise CellError(
            f"“{text}” can be read as {year}-{first.zfill(2)}-{second.zfill(2)} or as "
            f"{year}-{second.zfill(2)}-{first.zfill(2)}: write year, month, day as in 2026-03-09."
        )
    try:
        read = datetime.date(int(year), int(month), int(number))
    except ValueError:
        raise CellError(f"“{text}” is no day of the calendar written as 2026-03-09.") from None
    if words := beyond(read):
        raise CellError(words)
    return read


def clock(text: str, decimal_comma: bool) -> datetime.time:
    """Read a time of day: 14:30."""
    found = _CLOCK.fullmatch(text)
    try:
        if found is None:
            raise ValueError
        return datetime.time(int(found[1]), int(found[2]))
    except ValueError:
        raise CellError(f"“{text}” is no time of day written as 14:30.") from None


def pressure_unit(text: str, decimal_comma: bool) -> Pressure:
    """Read a unit of pressure, with its reference where it is written with it."""
    from register.engineering.units import PRESSURE, resolve_pressure_unit, resolve_unit

    unit, reference = resolve_pressure_unit(text)
    return Pressure(resolve_unit(unit, PRESSURE), reference or "")


@dataclass(frozen=True, slots=True)
class UnitOf:
    """A unit of one of some kinds, as its key."""

    kinds: tuple[str, ...]

    def __call__(self, text: str, decimal_comma: bool) -> str:
        from register.engineering.units import UnitError, kind_of, resolve_unit

        unit = resolve_unit(text)
        if kind_of(unit) not in self.kinds:
            raise UnitError(f"“{text}” is a unit of {kind_of(unit)}; one of {' or '.join(self.kinds)} is wanted here.")
        return unit


def nearest(text: str, names: Iterable[str], most: int = 3) -> list[str]:
    """Names that are spelt much like a text."""
    by_fold = {name.casefold(): name for name in names}
    return [by_fold[close] for close in difflib.get_close_matches(text.casefold(), by_fold, most, 0.5)]


def unknown(what: str, text: str, names: Sequence[str], where: str = "") -> str:
    """Say that nothing is called so, and what is called much like it."""
    said = f"There is no {what} “{text}”{f' {where}' if where else ''}."
    if names and len(names) <= 8:
        return f"{said} Known are: {', '.join(sorted(names))}."
    close = nearest(text, names)
    return f"{said} Spelt much like it: {', '.join(close)}." if close else said


def _folded(text: str) -> str:
    return " ".join(text.casefold().replace("_", " ").replace("-", " ").split())
