"""Numbers as people type and read them."""

from __future__ import annotations

import math
import re
from decimal import ROUND_HALF_UP, Context, Decimal
from functools import cache
from typing import Final

MINUS = "\N{MINUS SIGN}"

_SPACES = " \t\N{NO-BREAK SPACE}\N{THIN SPACE}\N{NARROW NO-BREAK SPACE}\N{FIGURE SPACE}"
_SIGNS = str.maketrans({MINUS: "-", "\N{EN DASH}": "-", "\N{FIGURE DASH}": "-", "\N{FULLWIDTH PLUS SIGN}": "+"})
_NUMBER = re.compile(
    r"(?P<sign>[+-]?)(?P<body>(?:[0-9]+(?:[.,][0-9]*)*|[.,][0-9]+))(?:[eE](?P<exponent>[+-]?[0-9]{1,4}))?"
)
_GROUPED = re.compile(rf"[+-]?[0-9]{{1,3}}(?:[{_SPACES}][0-9]{{3}})+(?:[.,][0-9]*)?(?:[eE][+-]?[0-9]+)?")
_LOOKS_GROUPED = re.compile(r"[1-9][0-9]{0,2}[.,][0-9]{3}")


#: Nothing that is measured lies beyond these; between them no conversion, span or ratio runs out of the floats.
LARGEST: Final = 1e30
SMALLEST: Final = 1e-30


class NumberError(ValueError):
    """A typed text is not a number; the message says what was typed and what would be right."""


def parse_number(text: str, *, decimal_comma: bool = False, plausible: tuple[float, float] | None = None) -> float:
    """Read a number as people type it.

    Comma or point decimals, a true or a keyboard minus, spaces between groups of three digits and an exponent
    are understood. "1,234" may be 1.234 or 1234 and is read only where the place settles it.

    Parameters
    ----------
    text : str
        What was typed.
    decimal_comma : bool
        True where a comma can only be a decimal comma (a file with `;` between its columns, a plant that types so);
        then "1.234" is the text that may mean either.
    plausible : tuple of float, optional
        Least and greatest value that make sense here; settles "1,234" where only one reading lies between them.

    Raises
    ------
    NumberError
        Nothing, no number, one beyond `LARGEST` or closer to zero than `SMALLEST`, or a text that can be read in two
        ways.
    """
    sign, body, exponent = _parts(text)
    thousands = "." if decimal_comma else ","
    if thousands in body and _LOOKS_GROUPED.fullmatch(body):
        value = _settled(text, (sign, body, exponent), thousands, plausible)
    else:
        value = float(f"{sign}{body.replace(',', '.')}e{exponent}")
    if not abs(value) <= LARGEST:
        raise NumberError(f"“{text.strip()}” is too large to be a measured value.")
    if abs(value) < SMALLEST and body.strip("0.,"):
        raise NumberError(f"“{text.strip()}” is too small to be a measured value: for none at all type 0.")
    return value + 0.0  # minus zero becomes zero


def decimals_of(text: str) -> int:
    """Count the digits after the decimal mark as typed: "12.00" has 2, "1e-3" has 3.

    Raises
    ------
    NumberError
        The text is not a number.
    """
    _, body, exponent = _parts(text)
    fraction = body.replace(",", ".").partition(".")[2]
    return max(0, len(fraction) - int(exponent))


#: Digits enough for any float written out in full.
_AMPLE: Final = Context(prec=800)


def format_number(value: float, decimals: int, *, signed: bool = False) -> str:
    """Write a number with a fixed count of decimals and a true minus sign.

    Parameters
    ----------
    value : float
        Number; one without end is written ∞, and none at all "?".
    decimals : int
        Digits after the point.
    signed : bool
        True shows "+" before positive numbers; zero never carries a sign.

    Notes
    -----
    Halves of the last digit go away from zero (ISO 80000-1 Annex B, rule B; clause from memory), judged on the
    shortest decimal form of the float: 2.675 gives 2.68, as a reader of "2.675" expects.
    """
    if not math.isfinite(value):
        return _endless(value, signed=signed)
    rounded = Decimal(repr(float(value))).quantize(_step(decimals), rounding=ROUND_HALF_UP, context=_AMPLE)
    sign = MINUS if rounded < 0 else "+" if signed and rounded > 0 else ""
    return f"{sign}{abs(rounded):f}"


def format_significant(value: float, digits: int = 6) -> str:
    """Write a number to so many significant digits, without trailing zeros or exponent, with a true minus sign."""
    if not math.isfinite(value):
        return _endless(value)
    number = Decimal(repr(float(value)))
    if not number:
        return "0"
    decimals = digits - 1 - number.adjusted()
    rounded = number.quantize(_step(decimals), rounding=ROUND_HALF_UP, context=_AMPLE)
    return _bare(rounded).replace("-", MINUS)


def shortest(value: float) -> str:
    """Write a spreadsheet's number the way the sheet shows it: 12.0 as "12", 0.1 + 0.2 as "0.3".

    Spreadsheets keep binary floats and show at most 15 significant digits (from memory). The text has an ASCII
    minus and `parse_number` reads it back.

    Raises
    ------
    NumberError
        The value is a truth value, infinite or not a number.
    """
    if isinstance(value, bool) or not math.isfinite(value):
        raise NumberError(f"“{value}” is not a number.")
    return _bare(Decimal(f"{value:.15g}")) if value else "0"


def _endless(value: float, *, signed: bool = False) -> str:
    """What a page shows where a stored figure has run out of the floats, rather than failing."""
    if math.isnan(value):
        return "?"
    return f"{MINUS if value < 0 else '+' if signed else ''}∞"


@cache
def _step(decimals: int) -> Decimal:
    return Decimal(1).scaleb(-decimals)


def _bare(number: Decimal) -> str:
    text = f"{number:f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


def _parts(text: str) -> tuple[str, str, str]:
    """Split a typed number into sign, digits with their marks, and exponent."""
    typed = text.strip()
    if not typed:
        raise NumberError("Nothing is typed here; a number is wanted.")
    plain = typed.translate(_SIGNS)
    if plain[:1] in "+-":
        plain = plain[:1] + plain[1:].lstrip(_SPACES)
    close = plain.translate(dict.fromkeys(map(ord, _SPACES)))
    match = _NUMBER.fullmatch(close)
    if match is None:
        raise NumberError(f"“{typed}” is not a number: type digits only, such as 12.5 or −0.25, without the unit.")
    if close != plain and not _GROUPED.fullmatch(plain):
        raise NumberError(f"“{typed}” has a space in an odd place: type the number without spaces.")
    body = match["body"]
    marks = [mark for mark in body if mark in ".,"]
    if len(marks) > 1:
        raise NumberError(
            f"“{typed}” has {len(marks)} decimal marks or thousands marks: type one point or comma for the decimals "
            "and no mark between thousands."
        )
    return match["sign"], body, match["exponent"] or "0"


def _settled(text: str, parts: tuple[str, str, str], thousands: str, plausible: tuple[float, float] | None) -> float:
    sign, body, exponent = parts
    point, bare = body.replace(",", "."), body.replace(thousands, "")
    if plausible is not None:
        low, high = plausible
        fitting = [
            value for value in (float(f"{sign}{way}e{exponent}") for way in (point, bare)) if low <= value <= high
        ]
        if len(fitting) == 1:
            return fitting[0]
    decimal = "," if thousands == "." else "."
    raise NumberError(
        f"“{text.strip()}” can be read as {point.replace('.', decimal)} or as {bare}: "
        f"type it with a decimal {'comma' if decimal == ',' else 'point'}, or without the mark."
    )
