"""Records are written down by RFC 8785, JSON Canonicalization Scheme, with strings and whole numbers only."""

from __future__ import annotations

import datetime
import hashlib
import uuid
from typing import Any

import pytest
import rfc8785
from hypothesis import given
from hypothesis import strategies as st

from calibration.records.canonical import CanonicalError, canonical, chain_hash, moment, plain

# RFC 8785 section 3.2.3, the example of sorting by UTF-16 code units: properties in the order expected there.
SORTED = [
    ("\r", "Carriage Return"),
    ("1", "One"),
    ("\u0080", "Control"),
    ("\u00f6", "Latin Small Letter O With Diaeresis"),
    ("\u20ac", "Euro Sign"),
    ("\U0001f600", "Emoji: Grinning Face"),
    ("\ufb33", "Hebrew Letter Dalet With Dagesh"),
]
TEXTS = st.text(st.characters(exclude_categories=["Cs"]))
CONTENTS = st.recursive(
    TEXTS | st.integers(-(2**53) + 1, 2**53 - 1),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(TEXTS, inner, max_size=4),
    max_leaves=20,
)


def test_names_are_ordered_as_in_the_example_of_the_standard() -> None:
    written = canonical(dict(reversed(SORTED)))
    places = [written.index(text) for _, text in SORTED]
    assert places == sorted(places)


def test_texts_are_escaped_as_in_the_example_of_the_standard() -> None:
    # RFC 8785 section 3.2.2, member "string" of the sample and section 3.2.4, its canonical bytes.
    text = "\u20ac$\u000f\u000aA'\u0042\u0022\u005c\\\"/"
    assert canonical(text) == '"€$\\u000f\\nA\'B\\"\\\\\\\\\\"/"'


@given(CONTENTS)
def test_it_writes_what_another_implementation_writes(content: Any) -> None:
    assert canonical(content).encode() == rfc8785.dumps(content)


@pytest.mark.parametrize("value", [1.5, True, None, {"a": 0.1}, [False], {1: "a"}, 2**53, -(2**53), ("a",), "\ud800"])
def test_anything_else_than_texts_and_whole_numbers_is_refused(value: Any) -> None:
    with pytest.raises(CanonicalError):
        canonical(value)


def test_the_hash_is_sha_256_over_the_previous_hash_and_the_content() -> None:
    content = '{"a":"€"}'
    assert chain_hash("0" * 64, content) == hashlib.sha256(b"0" * 64 + content.encode()).hexdigest()


def test_python_values_have_one_plain_form() -> None:
    number = uuid.UUID("6f9619ff-8b86-d011-b42d-00cf4fc964ff")
    at = datetime.datetime(2026, 3, 9, 15, 2, 11, 5, tzinfo=datetime.timezone(datetime.timedelta(hours=1)))
    assert plain({"a": [0.1, True, None, number], "b": (at, at.date())}) == {
        "a": ["0.1", "yes", "", "6f9619ff-8b86-d011-b42d-00cf4fc964ff"],
        "b": ["2026-03-09T14:02:11.000005Z", "2026-03-09"],
    }
    assert moment(at) == "2026-03-09T14:02:11.000005Z"
