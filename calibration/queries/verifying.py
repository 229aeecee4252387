"""Checks the chain of a plant and the verdicts of its records; reads only.

Two kinds of findings are told apart. A *break* means that a record, a signature or a row belonging to one is not what
was signed. A *difference* means that today's arithmetic, or a summary kept beside the record, says otherwise.
"""

from __future__ import annotations

import heapq
import json
import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from calibration.models import ChainHead, Record, Run, RunFigures, Signature, Test
from calibration.queries.rereading import content_of, judged_run, reading_content, signature_content
from calibration.recording import FOLLOWS, state_of
from calibration.records.basis import Basis
from calibration.records.canonical import FIRST_HASH, canonical, chain_hash
from calibration.records.content import record_object, signature_object
from calibration.records.judging import METHOD_VERSION
from calibration.records.reckoning import figures_row, reading_row, summarise, verdicts_of
from register.models import Plant

_AT_ONCE = 500
_CLOSE = 1e-9


@dataclass(frozen=True, slots=True)
class Finding:
    """Something that is not as it was signed, or as it is worked out; `is_break` tells which."""

    plant: str
    position: int
    what: str
    is_break: bool

    def __str__(self) -> str:
        return f"{self.plant}, link {self.position}: {self.what}"


@dataclass(slots=True)
class Checked:
    """How many links were looked at."""

    records: int = 0
    signatures: int = 0


def verify(plant: Plant, checked: Checked) -> Iterator[Finding]:
    """Walk the chain of a plant from its first link; counts into `checked` and yields what is found, in order."""
    previous, position = FIRST_HASH, 0
    links: Iterator[Record | Signature] = heapq.merge(
        _records(plant), _signatures(plant), key=lambda link: link.position
    )
    for link in links:
        if link.position != position + 1:
            yield Finding(plant.code, link.position, f"links are missing: before it stands number {position}", True)
        if link.previous_hash != previous:
            yield Finding(plant.code, link.position, "it does not hang on the link before it", True)
        if link.hash != chain_hash(link.previous_hash, link.content):
            yield Finding(plant.code, link.position, "its hash is not that of its content", True)
        if isinstance(link, Record):
            checked.records += 1
            yield from _record(plant, link)
        else:
            checked.signatures += 1
            yield from _signature(plant, link)
        previous, position = link.hash, link.position
    head = ChainHead.objects.filter(plant=plant).first()
    if head is not None and (head.position, head.hash) != (position, previous):
        yield Finding(plant.code, position, f"the chain ends here, but its end is kept as number {head.position}", True)


def _records(plant: Plant) -> Iterator[Record | Signature]:
    return iter(
        Record.objects.filter(plant=plant)
        .select_related("test__tag", "test__transmitter__maker", "supersedes")
        .prefetch_related("runs__readings", "runs__standards", "runs__figures", "signatures")
        .order_by("position")
        .iterator(chunk_size=_AT_ONCE)
    )


def _signatures(plant: Plant) -> Iterator[Record | Signature]:
    return iter(
        Signature.objects.filter(plant=plant)
        .select_related("record")
        .order_by("position")
        .iterator(chunk_size=_AT_ONCE)
    )


def _record(plant: Plant, record: Record) -> Iterator[Finding]:
    name = f"record {record.pk} ({record.test})"
    try:
        kept = json.loads(record.content)
        current = record.test.current_record_id == record.pk
        head = _head(record.test, kept, current=current)
        content = content_of(record, head)
        rebuilt = record_object(
            content,
            plant=plant.code,
            position=record.position,
            test_id=record.test_id,
            version=record.version,
            supersedes=record.supersedes.hash if record.supersedes else "",
            verdicts={run["kind"]: {n: run[n] for n in ("verdict", "why") if n in run} for run in kept["runs"]},
        )
        same = canonical(rebuilt) == record.content
    except (ValueError, KeyError, TypeError) as error:
        yield Finding(plant.code, record.position, f"{name} cannot be read: {error}", True)
        return
    if not same:
        fields = ", ".join(_differing(kept, rebuilt)) or "its form"
        yield Finding(plant.code, record.position, f"{name} has rows that differ from what was signed: {fields}", True)
        return
    yield from _verdicts(plant, record, kept, current=current)


def _head(test: Test, kept: dict[str, Any], *, current: bool) -> dict[str, Any]:
    """What stands on the test for the version that counts, and only in the content for earlier ones."""
    if current:
        sheet = test.sheet_id if not kept["supersedes"] else kept["sheet"]
        return {"tested_on": test.tested_on, "adjusted": test.adjusted, "outcome": test.outcome, "sheet": sheet}
    return {
        "tested_on": kept["tested_on"],
        "adjusted": kept["adjusted"] == "yes",
        "outcome": kept["outcome"],
        "sheet": kept["sheet"],
    }


def _signature(plant: Plant, signature: Signature) -> Iterator[Finding]:
    rebuilt = signature_object(
        signature_content(signature), plant=plant.code, position=signature.position, record=signature.record.hash
    )
    if canonical(rebuilt) != signature.content:
        yield Finding(plant.code, signature.position, f"the signature “{signature}” is not what was signed", True)


def _verdicts(plant: Plant, record: Record, kept: dict[str, Any], *, current: bool) -> Iterator[Finding]:
    basis = Basis.read(record, record.head_id)
    done = kept["outcome"] == Test.Outcome.DONE
    judged = {}
    for run in record.runs.all():
        read = judged_run(run, basis, complete=done)
        if read.judged is not None:
            judged[run.kind] = read.judged
        yield from _readings(plant, record, run, basis)
    now = verdicts_of(judged)
    for run_kept in kept["runs"]:
        said, again = run_kept.get("verdict", ""), now.get(run_kept["kind"], {}).get("verdict", "")
        if said != again:
            words = f"{run_kept['kind']} was signed as “{said}”, worked out anew “{again}”"
            yield Finding(plant.code, record.position, words, False)
    for run in record.runs.all():
        figures = getattr(run, "figures", None)
        if run.kind in judged and (
            figures is None
            or figures.method_version != METHOD_VERSION
            or _differs(figures, figures_row(judged[run.kind], run, record.test, current=current))
        ):
            yield Finding(plant.code, record.position, f"the figures kept of the {run.kind} run differ", False)
    if current:
        fresh = Test(state=record.test.state)
        sent_back = record.test.state == Test.State.SENT_BACK
        summarise(fresh, outcome=record.test.outcome, adjusted=record.test.adjusted, runs=judged, counts=not sent_back)
        if any(not _close(getattr(fresh, name), getattr(record.test, name)) for name in FOLLOWS):
            yield Finding(plant.code, record.position, "the summary kept on the test differs", False)
        state = state_of({signature.meaning for signature in record.signatures.all()}, transcribed=record.transcribed)
        if state != record.test.state:
            words = f"the test is kept as “{record.test.state}”, its signatures say “{state}”"
            yield Finding(plant.code, record.position, words, False)


def _readings(plant: Plant, record: Record, run: Run, basis: Basis) -> Iterator[Finding]:
    """The SI figures beside the typed texts are not hashed: they follow from them."""
    for row in run.readings.all():
        again, _ = reading_row(reading_content(row), row.order, basis)
        if not all(
            _close(getattr(row, name), getattr(again, name)) for name in ("applied_si", "measured_ma", "digital_si")
        ):
            yield Finding(
                plant.code,
                record.position,
                f"{run.kind}, reading {row.order}: the figure kept beside “{row.applied} → {row.measured}” is another",
                True,
            )


def _differs(kept: RunFigures, again: RunFigures) -> bool:
    names = [field.attname for field in RunFigures._meta.concrete_fields if field.name != "method_version"]
    return any(not _close(getattr(kept, name), getattr(again, name)) for name in names)


def _close(one: Any, other: Any) -> bool:
    if isinstance(one, float) and isinstance(other, float):
        return math.isclose(one, other, rel_tol=_CLOSE, abs_tol=_CLOSE)
    if isinstance(one, list) and isinstance(other, list):
        return len(one) == len(other) and all(_close(a, b) for a, b in zip(one, other, strict=True))
    return bool(one == other)


def _differing(kept: dict[str, Any], rebuilt: dict[str, Any]) -> list[str]:
    """Names of the parts of a record that differ, as deep as they can be named."""
    names = []
    for name in sorted(set(kept) | set(rebuilt)):
        one, other = kept.get(name), rebuilt.get(name)
        if one == other:
            continue
        if isinstance(one, dict) and isinstance(other, dict):
            names += [f"{name}.{inner}" for inner in _differing(one, other)]
        elif name == "runs" and isinstance(one, list) and isinstance(other, list):
            names += _differing_runs(one, other)
        else:
            names.append(name)
    return names


def _differing_runs(kept: list[dict[str, Any]], rebuilt: list[dict[str, Any]]) -> list[str]:
    if [run["kind"] for run in kept] != [run["kind"] for run in rebuilt]:
        return ["runs"]
    names = []
    for one, other in zip(kept, rebuilt, strict=True):
        for name in _differing(one, other):
            if name == "readings" and len(one["readings"]) == len(other["readings"]):
                pairs = zip(one["readings"], other["readings"], strict=True)
                names += [
                    f"{one['kind']} reading {number} {inner}"
                    for number, (a, b) in enumerate(pairs, start=1)
                    for inner in _differing(a, b)
                ]
            else:
                names.append(f"{one['kind']} {name}")
    return names
