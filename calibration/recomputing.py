"""Works out anew what is kept beside the history: standings, search words, figures of runs.

`differences` only compares and says what it finds; `recompute` stores what the history says.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, Final

from django.db import transaction

from calibration import scheduling
from calibration.models import Record, RunFigures, SearchWord, Standing, Test
from calibration.queries import standings
from calibration.queries.rereading import judged_run
from calibration.records.basis import Basis
from calibration.records.judging import METHOD_VERSION
from calibration.records.reckoning import figures_row
from register.models import Plant, Tag

_COLUMNS: Final = [field.attname for field in Standing._meta.concrete_fields]
_FIGURES: Final = [
    field.attname for field in RunFigures._meta.concrete_fields if field.attname not in ("run_id", "plant_id")
]
_CLOSE: Final = 1e-9
_AT_ONCE: Final = 500


@dataclass(slots=True)
class Looked:
    """How much was looked at."""

    tags: int = 0
    runs: int = 0


def differences(plant: Plant, looked: Looked, *, figures: bool = False) -> Iterator[str]:
    """Compare what is kept with the full history, and name each difference in a sentence.

    Parameters
    ----------
    looked : Looked
        Counted into.
    figures : bool
        Also judge every run anew; without it only figures of an older method are named.
    """
    for ids in scheduling.chunks(_tag_ids(plant)):
        looked.tags += len(ids)
        yield from _standings(plant, ids)
    strays = Standing.objects.filter(plant=plant).exclude(tag__plant=plant).values_list("number", flat=True)
    for number in strays:
        yield f"{plant.code} {number}: a standing is kept under another plant"
    for kept, again in _judged(plant, all_runs=figures):
        looked.runs += 1
        for name in _FIGURES:
            if not _same(getattr(kept, name), getattr(again, name)):
                yield f"{plant.code} {_named(kept)}: {name} is {getattr(kept, name)}, worked out {getattr(again, name)}"


def recompute(plant: Plant, *, figures: bool = False) -> Looked:
    """Store standings, search words and figures of a plant as the history says."""
    looked = Looked()
    for ids in scheduling.chunks(_tag_ids(plant)):
        with transaction.atomic():
            list(Tag.objects.select_for_update().filter(pk__in=ids).order_by("pk").values_list("pk"))
            scheduling.refresh(ids)
        looked.tags += len(ids)
    changed: list[RunFigures] = []
    for kept, again in _judged(plant, all_runs=figures):
        looked.runs += 1
        if any(not _same(getattr(kept, name), getattr(again, name)) for name in _FIGURES):
            changed.append(again)
    for start in range(0, len(changed), _AT_ONCE):
        RunFigures.objects.bulk_update(changed[start : start + _AT_ONCE], _FIGURES)
    return looked


def _tag_ids(plant: Plant) -> list[int]:
    return list(Tag.objects.filter(plant=plant).order_by("pk").values_list("pk", flat=True))


def _standings(plant: Plant, ids: list[int]) -> Iterator[str]:
    history = standings.read(ids)
    kept = {row.tag_id: row for row in Standing.objects.filter(tag_id__in=ids)}
    words: dict[int, set[str]] = {tag_id: set() for tag_id in ids}
    for tag_id, word in SearchWord.objects.filter(tag_id__in=ids).values_list("tag_id", "word"):
        words[tag_id].add(word)
    for again in standings.work_out(history):
        row = kept.get(again.tag_id)
        if row is None:
            yield f"{plant.code} {again.number}: no standing is kept"
            continue
        for name in _COLUMNS:
            stored, told = getattr(row, name), getattr(again, name)
            if not _same(stored, told):
                yield f"{plant.code} {again.number}: {name} is {stored}, the history says {told}"
    for tag_id, wanted in standings.search_words(history).items():
        if words[tag_id] != wanted:
            odd = ", ".join(sorted(words[tag_id] ^ wanted))
            yield f"{plant.code} tag {tag_id}: the search words differ ({odd})"


def _judged(plant: Plant, *, all_runs: bool) -> Iterator[tuple[RunFigures, RunFigures]]:
    """Figures as kept and as worked out anew, record by record."""
    records = Record.objects.filter(plant=plant)
    if not all_runs:
        old = RunFigures.objects.filter(plant=plant).exclude(method_version=METHOD_VERSION)
        records = records.filter(runs__figures__in=old).distinct()
    for record in (
        records.select_related("test__tag", "test__transmitter__maker")
        .prefetch_related("runs__readings", "runs__figures")
        .order_by("pk")
        .iterator(chunk_size=_AT_ONCE)
    ):
        basis = Basis.read(record, record.head_id)
        for run in record.runs.all():
            kept: RunFigures | None = getattr(run, "figures", None)
            judged = judged_run(run, basis, complete=kept is not None).judged
            if kept is not None and judged is not None:
                yield kept, figures_row(judged, run, record.test, current=kept.current)


def _named(kept: RunFigures) -> str:
    test: Test = kept.test
    return f"{test}, {kept.kind}"


def _same(one: Any, other: Any) -> bool:
    if isinstance(one, float) and isinstance(other, (int, float)):
        return math.isclose(one, other, rel_tol=_CLOSE, abs_tol=_CLOSE)
    if isinstance(one, list) and isinstance(other, list):
        return len(one) == len(other) and all(_same(a, b) for a, b in zip(one, other, strict=True))
    return bool(one == other)
