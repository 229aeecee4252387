"""Keeps what lists need about every tag; in the transaction of the act that changed it."""

from __future__ import annotations

from collections.abc import Collection, Iterator

from django.db import transaction

from calibration import standings
from calibration.models import SearchWord, Standing

CHUNK = 1000
_COLUMNS = [field.name for field in Standing._meta.concrete_fields if not field.primary_key]


@transaction.atomic
def refresh(tag_ids: Collection[int]) -> None:
    """Work out the standings and search words of some tags from their full history, and store them."""
    for chunk in _chunks(tag_ids):
        history = standings.read(chunk)
        Standing.objects.bulk_create(
            standings.work_out(history), update_conflicts=True, unique_fields=["tag"], update_fields=_COLUMNS
        )
        _store_words(standings.search_words(history), {tag.pk: tag.plant_id for tag in history.tags})


def _store_words(wanted: dict[int, set[str]], plants: dict[int, int]) -> None:
    stale, missing = [], {tag_id: set(words) for tag_id, words in wanted.items()}
    for pk, tag_id, word in SearchWord.objects.filter(tag_id__in=wanted).values_list("pk", "tag_id", "word"):
        if word in missing[tag_id]:
            missing[tag_id].discard(word)
        else:
            stale.append(pk)
    for chunk in _chunks(stale):
        SearchWord.objects.filter(pk__in=chunk).delete()
    SearchWord.objects.bulk_create(
        [
            SearchWord(plant_id=plants[tag_id], tag_id=tag_id, word=word)
            for tag_id, words in missing.items()
            for word in sorted(words)
        ]
    )


def _chunks(ids: Collection[int]) -> Iterator[list[int]]:
    listed = sorted(set(ids))
    for start in range(0, len(listed), CHUNK):
        yield listed[start : start + CHUNK]
