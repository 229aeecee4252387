"""The one way a record is written down before it is hashed: RFC 8785 with strings and whole numbers only.

Fractions are kept as the text they were typed as, so that no float formatting can ever change a hash.
"""

from __future__ import annotations

import datetime
import hashlib
import json
import uuid
from collections.abc import Mapping, Sequence
from typing import Any

FIRST_HASH = "0" * 64
_GREATEST = 2**53 - 1


class CanonicalError(ValueError):
    """A value has no place in a canonical record."""


def canonical(value: Any) -> str:
    """Write strings, whole numbers, lists and objects in the form of RFC 8785 (JSON Canonicalization Scheme).

    Raises
    ------
    CanonicalError
        A value is neither, a whole number is beyond 2**53 − 1, a name is not a string, or a text holds half a
        surrogate pair.

    Notes
    -----
    RFC 8785 also allows fractions, true, false and null; they are refused here on purpose.
    """
    text = json.dumps(_ordered(value), ensure_ascii=False, separators=(",", ":"), allow_nan=False)
    try:
        text.encode()
    except UnicodeEncodeError as error:
        raise CanonicalError("A text holds half a surrogate pair.") from error
    return text


def chain_hash(previous: str, content: str) -> str:
    """SHA-256 (hexadecimal) of the previous hash followed by the canonical content, both as UTF-8."""
    return hashlib.sha256(previous.encode() + content.encode()).hexdigest()


def plain(value: Any) -> Any:
    """Turn what Python keeps into what `canonical` takes: dates and times as ISO 8601 in UTC, yes and no as words,
    fractions by their shortest text, nothing as an empty text."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, str | int):
        return value if type(value) in (str, int) else (str(value) if isinstance(value, str) else int(value))
    if isinstance(value, float):
        return repr(value)
    if isinstance(value, datetime.datetime):
        return moment(value)
    if isinstance(value, datetime.date):
        return value.isoformat()
    if isinstance(value, uuid.UUID):
        return str(value)
    if isinstance(value, Mapping):
        return {str(name): plain(inner) for name, inner in value.items()}
    if isinstance(value, Sequence):
        return [plain(inner) for inner in value]
    raise CanonicalError(f"{type(value).__name__} has no canonical form.")


def moment(value: datetime.datetime) -> str:
    """A time in UTC with microseconds, as in 2026-03-09T14:02:11.000000Z."""
    return value.astimezone(datetime.UTC).strftime("%Y-%m-%dT%H:%M:%S.%fZ")


def _ordered(value: Any) -> Any:
    if type(value) is str:
        return value
    if type(value) is int:
        if abs(value) > _GREATEST:
            raise CanonicalError(f"{value} is too great for a whole number in a record.")
        return value
    if type(value) is dict:
        if any(type(name) is not str for name in value):
            raise CanonicalError("Names in a record are texts.")
        # RFC 8785 orders names by their UTF-16 code units, which differs from Python's order beyond U+FFFF.
        return {name: _ordered(value[name]) for name in sorted(value, key=_utf16)}
    if type(value) is list:
        return [_ordered(inner) for inner in value]
    raise CanonicalError(f"{type(value).__name__} has no place in a record: only texts and whole numbers.")


def _utf16(name: str) -> bytes:
    return name.encode("utf-16-be", "surrogatepass")
