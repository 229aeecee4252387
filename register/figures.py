"""Numbers and dates as the pages show them: true minus, aligned points, ages in words."""

from __future__ import annotations

from datetime import date, datetime
from decimal import Decimal
from html import escape
from math import isnan

from django.utils.safestring import SafeString

MINUS = "−"
NOTHING = "–"
THIN_SPACE = "\u2009"

Number = float | int | Decimal


def figure(value: Number | None, decimals: int) -> str:
    """A number with fixed decimals and a true minus; "–" for None or NaN, and never a negative zero."""
    if value is None or isnan(value):
        return NOTHING
    text = f"{value:.{decimals}f}"
    if text.startswith("-"):
        text = text[1:] if float(text) == 0 else MINUS + text[1:]
    return text


def signed(value: Number | None, decimals: int) -> str:
    """As `figure`, with the sign always shown; a value that rounds to zero carries none."""
    text = figure(value, decimals)
    if value is None or isnan(value) or text.startswith(MINUS) or float(text) == 0:
        return text
    return "+" + text


def places_of(text: str) -> int:
    """How many digits stand behind the decimal point of a figure as it is shown."""
    return len(text.partition(".")[2])


def aligned(text: str | Number | None, decimals: int) -> SafeString:
    """Text as typed, filled up to `decimals` with unseen digits, so that decimal points stand in one line.

    Notes
    -----
    The digits added are hidden from eyes, from readers of the page and from copying: a value never shows
    more digits than it carries. Text that is no number is left as it is.
    """
    if text is None or text == "":
        return SafeString(NOTHING)
    typed = str(text).strip()
    shown = escape(typed.replace("-", MINUS, 1) if typed.startswith("-") else typed)
    whole, point, rest = typed.replace(",", ".").partition(".")
    if not whole.lstrip("+-−").isdigit() or (rest and not rest.isdigit()):
        return SafeString(shown)
    missing = decimals - len(rest)
    if missing <= 0:
        return SafeString(shown)
    fill = ("" if point else ".") + "0" * missing
    return SafeString(f'{shown}<span class="pad" aria-hidden="true">{fill}</span>')


def typed(text: str | None) -> str:
    """Text as typed, its leading hyphen shown as a true minus; nothing else is touched."""
    if not text:
        return NOTHING
    return MINUS + text[1:] if text.startswith("-") else text


def with_unit(value: Number | None, decimals: int, unit: str) -> SafeString:
    """A number, a thin space and its unit."""
    if value is None or isnan(value):
        return SafeString(NOTHING)
    return SafeString(
        f'<span class="nowrap">{figure(value, decimals)}{THIN_SPACE}<span class="unit">{escape(unit)}</span></span>'
    )


def iso(day: date | datetime | None) -> str:
    """A day as 2026-03-09."""
    return NOTHING if day is None else f"{day:%Y-%m-%d}"


def _months(days: int) -> int:
    return round(days / 30.4375)


def age(days: int) -> str:
    """A length of time in the largest unit that still says it well: "12 days", "3 weeks", "14 months", "6 years"."""
    days = abs(days)
    if days < 21:
        return "1 day" if days == 1 else f"{days} days"
    if days < 70:
        return f"{round(days / 7)} weeks"
    if days < 1096:
        return f"{_months(days)} months"
    return f"{round(days / 365.25)} years"


def ago(day: date | datetime | None, today: date) -> str:
    """How far a day lies from today, in words: "12 days ago", "today", "in 3 weeks"."""
    if day is None:
        return ""
    plain = day.date() if isinstance(day, datetime) else day
    days = (plain - today).days
    if days == 0:
        return "today"
    if abs(days) == 1:
        return "tomorrow" if days > 0 else "yesterday"
    return f"in {age(days)}" if days > 0 else f"{age(days)} ago"
