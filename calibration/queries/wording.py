"""Words by which tags are found: those kept of them, and the letters that their numbers begin with.

Tags whose numbers begin with a word lie together in the order of numbers, so that a list is walked there; for all other
words the kept ones are looked up. Nothing here asks the database: the statements are text for `listing`.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Final

from django.db import connection

from calibration.models import SearchWord
from calibration.queries.standings import WORD_LENGTH, sort_key
from register.models import Plant, Tag
from register.searching import LAST, key

Statement = tuple[str, list[Any]]
_WORDS: Final = SearchWord._meta.db_table
_TAGS: Final = Tag._meta.db_table
_LAST_DIGITS: Final = re.compile(r"\d+$")


@dataclass(frozen=True, slots=True)
class Word:
    """A beginning of a word: whether any is kept that begins so, and whether the number of any tag does."""

    text: str
    kept: bool = True
    numbers: bool = False


def typed(text: str) -> list[str]:
    """The words that a person typed."""
    return [word[:WORD_LENGTH] for word in text.casefold().split()]


def where(plant: Plant, words: Sequence[str]) -> Statement:
    """A statement that tells of each word, in turn, whether it is kept and whether numbers begin so."""
    looks, values = [], []
    for word in words:
        for text, more in (_kept(plant, word), _numbers(plant, word)):
            looks.append(f"EXISTS ({text})")
            values += more
    return f"SELECT {', '.join(looks)}", values


def known(words: Sequence[str], found: Sequence[Any]) -> list[Word]:
    """The words with what the statement of `where` answered.

    Of words that only numbers begin with the longest tells all; another that it does not begin with is found nowhere.
    """
    told = []
    for place, text in enumerate(words):
        kept, numbers = map(bool, found[2 * place : 2 * place + 2])
        numbers &= _may_begin(text)
        told.append(Word(text, kept or not numbers, numbers))
    longest = max((word.text for word in told if not word.kept), key=len, default="")
    others = [word for word in told if word.kept or not longest.startswith(word.text)]
    return [
        *([Word(longest, kept=False, numbers=True)] if longest else []),
        *(word if word.kept else Word(word.text) for word in others),
    ]


def tags_with(plant: Plant, word: Word) -> Statement:
    """A SELECT of the tags that have the word; one of them may come several times."""
    parts = [_kept(plant, word.text)] if word.kept else []
    parts += [_numbers(plant, word.text)] if word.numbers else []
    values = [value for _, more in parts for value in more]
    if len(parts) == 1:
        return parts[0][0], values
    return f"SELECT e.tag_id FROM ({' UNION ALL '.join(text for text, _ in parts)}) e", values


def stretch(word: Word) -> tuple[str, str] | None:
    """Sort keys from and up to which all tags lie that have the word; None where others may have it too."""
    if word.kept or connection.vendor == "postgresql":
        # PostgreSQL may sort by a language in which tags that begin alike do not lie together.
        return None
    first = sort_key(_LAST_DIGITS.sub("", word.text))
    return first, first + LAST


def look(word: Word) -> tuple[str, tuple[str, ...]]:
    """A comparison of a row with the word; `{column}` stands for a column of the standing."""
    texts: list[str] = []
    values: list[str] = []
    if word.numbers:
        # Digits are widened in a sort key: where the word ends in digits only the number itself tells.
        ends_in_digits = bool(_LAST_DIGITS.search(word.text))
        begins, ends = _begins("LOWER({number})" if ends_in_digits else "{sort_key}", _as_kept(word.text))
        texts.append(begins)
        values += ends
    if word.kept:
        begins, ends = _begins("w.word", word.text)
        # Not EXISTS: PostgreSQL would gather every tag with such a word before it looks at the first row.
        texts.append(f"(SELECT 1 FROM {_WORDS} w WHERE w.tag_id = {{tag_id}} AND {begins} LIMIT 1) IS NOT NULL")
        values += ends
    return f"({' OR '.join(texts)})", tuple(values)


def _may_begin(word: str) -> bool:
    """Whether a number that begins so is looked up as such; of all other numbers the beginnings are kept as words."""
    return word.isascii() and word[0].isalpha()


def _as_kept(word: str) -> str:
    ends_in_digits = _LAST_DIGITS.search(word)
    return word if ends_in_digits else sort_key(word)


def _kept(plant: Plant, word: str) -> Statement:
    begins, values = _begins("w.word", word)
    return f"SELECT w.tag_id FROM {_WORDS} w WHERE w.plant_id = %s AND {begins}", [plant.pk, *values]


def _numbers(plant: Plant, word: str) -> Statement:
    number = 'UPPER(t.number COLLATE "C")' if connection.vendor == "postgresql" else "UPPER(t.number)"
    first = key(word)
    text = f"SELECT t.id AS tag_id FROM {_TAGS} t WHERE t.plant_id = %s AND {number} >= %s AND {number} < %s"
    return text, [plant.pk, first, first + LAST]


def _begins(column: str, word: str) -> tuple[str, tuple[str, ...]]:
    """A comparison by which an index is entered, on either database."""
    if connection.vendor == "postgresql":
        escaped = word.replace("\\", "\\\\").replace("%", "\\%").replace("_", "\\_")
        return f"{column} LIKE %s", (f"{escaped}%",)
    return f"{column} >= %s AND {column} < %s", (word, word + LAST)
