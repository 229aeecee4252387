"""Tests by the million: transcribed ones without readings in bulk, whole signed ones by the act that signs them."""

from __future__ import annotations

import datetime
import itertools
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from django.db import transaction
from numpy.typing import NDArray

from calibration.models import ChainHead, Record, Run, RunFigures, Test
from calibration.recording import write_records
from calibration.records.basis import Basis
from calibration.records.canonical import canonical, chain_hash
from calibration.records.content import ReadingContent, RecordContent, RunContent, SignatureContent, record_object
from calibration.records.judging import METHOD_VERSION
from register.auditing import Act, Actor
from register.models import Plant, Tag, User
from tests.benchmarks.invented import INTERVAL, SEED, Built, Plan
from tests.benchmarks.loading import load
from tests.benchmarks.register_rows import KEY

LOADED: Final = (Test, Record, Run, RunFigures)
#: Tags whose tests are loaded, and whole tests that are written, at a time.
AT_ONCE: Final = 1000
#: Tolerance that the requirement of every tag states [% of span].
LIMIT: Final = 0.5
NINE: Final = (0, 25, 50, 75, 100, 75, 50, 25, 0)
#: Values that stand, in the canonical content of a pattern, for what differs from test to test.
POSITION, TEST, TAG, DAY = 7770001, 7770002, 7770003, datetime.date(7770, 1, 1)
FOUND, LEFT = "7770005", "7770006"


@dataclass(frozen=True, slots=True)
class Visits:
    """Tests of some tags in the order of tags and days; one value a test. Errors in % of span."""

    tag: NDArray[np.int64]
    day: NDArray[np.datetime64]
    found: NDArray[np.float64]
    left: NDArray[np.float64]
    incomplete: NDArray[np.bool_]

    @classmethod
    def of(cls, plan: Plan, chosen: NDArray[np.int64], counts: NDArray[np.int64], today: datetime.date) -> Visits:
        rng = np.random.default_rng([SEED, int(chosen[0])])
        row = np.repeat(np.arange(len(chosen)), counts)
        before_last = np.repeat(np.cumsum(counts), counts) - 1 - np.arange(len(row))
        last, end = before_last == 0, plan.end[chosen][row]
        jitter = np.where(last, 0, rng.integers(-10, 11, size=len(row)))
        day = plan.last_test(today)[chosen][row] - (INTERVAL * before_last + jitter).astype("timedelta64[D]")
        found = rng.normal(0.0, 0.25, size=len(row))
        found[last] = np.clip(found[last], -LIMIT, LIMIT)
        failed = last & (end == "fail")
        found[failed] = LIMIT * rng.uniform(1.5, 4.0, size=int(failed.sum()))
        left = np.where(np.abs(found) > 0.7 * LIMIT, rng.normal(0.0, 0.05, size=len(row)), np.nan)
        left[failed] = LIMIT * rng.uniform(1.05, 1.4, size=int(failed.sum()))
        return cls(chosen[row] + KEY, day, found, left, last & (end == "incomplete"))

    @property
    def adjusted(self) -> NDArray[np.bool_]:
        return ~np.isnan(self.left)


def load_tests(plant: Plant, kinds: list[Built], plan: Plan, counts: NDArray[np.int64]) -> None:
    """Load transcribed tests, so many a tag as `counts` says, with records, runs and figures but without readings."""
    chain = ChainHead.objects.get(plant=plant)
    runs = itertools.count(1)
    for number, built in enumerate(kinds):
        patterns = [_pattern(plant, built, adjusted=adjusted) for adjusted in (False, True)]
        of_kind = np.flatnonzero((plan.kind == number) & (counts > 0))
        for start in range(0, len(of_kind), AT_ONCE):
            chosen = of_kind[start : start + AT_ONCE]
            visits = Visits.of(plan, chosen, counts[chosen], plant.today())
            with transaction.atomic():
                _load(plant, built, visits, patterns, chain, runs)
    chain.save()


def _load(
    plant: Plant, built: Built, visits: Visits, patterns: list[str], chain: ChainHead, runs: Iterator[int]
) -> None:
    count = len(visits.tag)
    tags, days = visits.tag.tolist(), visits.day.astype(str).tolist()
    keys = list(range(chain.position + 1, chain.position + 1 + count))
    adjusted, found, left = visits.adjusted.tolist(), _known(visits.found), _known(visits.left)
    found_verdicts = _verdicts(visits.found, visits.incomplete & ~visits.adjusted).tolist()
    left_array = np.where(visits.adjusted, _verdicts(visits.left, visits.incomplete), "")
    left_verdicts = left_array.tolist()
    ends = np.where(visits.adjusted, left_array, found_verdicts)
    load(
        Test(plant=plant, state=Test.State.TRANSCRIBED),
        count,
        id=keys,
        tag_id=tags,
        transmitter_id=tags,
        fitting_id=tags,
        current_record_id=keys,
        tested_on=days,
        adjusted=adjusted,
        accepted=(ends == "pass").tolist(),
        as_found_verdict=found_verdicts,
        as_left_verdict=left_verdicts,
        as_found_worst=found,
        as_left_worst=left,
        as_found_ratio=_known(visits.found / LIMIT),
        as_left_ratio=_known(visits.left / LIMIT),
    )
    contents, hashes, previous = [], [], []
    link = chain.hash
    for key, tag, day, turned, before, after in zip(
        keys, tags, days, adjusted, found_verdicts, left_verdicts, strict=True
    ):
        content = patterns[turned] % {"key": key, "tag": tag, "day": day, "found": before, "left": after}
        previous.append(link)
        link = chain_hash(link, content)
        contents.append(content)
        hashes.append(link)
    basis = _basis(built)
    load(
        Record(
            plant=plant,
            made_at=datetime.datetime(2026, 3, 9, 12, tzinfo=datetime.UTC),
            head=built.transmitter.head,
            transcribed=True,
            **basis.columns(),
        ),
        count,
        id=keys,
        test_id=keys,
        position=keys,
        content=contents,
        previous_hash=previous,
        hash=hashes,
    )
    chain.position, chain.hash = keys[-1], link
    _load_runs(plant, visits, keys, runs, Run.Kind.AS_FOUND, np.arange(count), visits.found, found_verdicts)
    turned = np.flatnonzero(visits.adjusted)
    _load_runs(plant, visits, keys, runs, Run.Kind.AS_LEFT, turned, visits.left, left_verdicts)


def _load_runs(
    plant: Plant,
    visits: Visits,
    tests: list[int],
    numbers: Iterator[int],
    kind: str,
    chosen: NDArray[np.int64],
    errors: NDArray[np.float64],
    verdicts: list[str],
) -> None:
    count = len(chosen)
    keys = list(itertools.islice(numbers, count))
    days, tags = visits.day[chosen].astype(str).tolist(), visits.tag[chosen].tolist()
    of = [tests[place] for place in chosen.tolist()]
    worst = errors[chosen]
    load(Run(kind=kind), count, id=keys, record_id=of, tested_on=days)
    load(
        RunFigures(method_version=METHOD_VERSION, plant=plant, kind=kind, why="Transcribed without its readings."),
        count,
        run_id=keys,
        transmitter_id=tags,
        tag_id=tags,
        test_id=of,
        tested_on=days,
        verdict=[verdicts[place] for place in chosen.tolist()],
        complete=[verdicts[place] != "incomplete" for place in chosen.tolist()],
        worst=_known(worst),
        worst_ratio=_known(worst / LIMIT),
        zero_error=_known(0.6 * worst),
        span_error=_known(0.4 * worst),
        zero_shift=_known(0.6 * worst),
        span_shift=_known(0.4 * worst),
        hysteresis=_known(0.1 * np.abs(worst)),
        non_linearity=_known(0.1 * np.abs(worst)),
    )


def _verdicts(errors: NDArray[np.float64], incomplete: NDArray[np.bool_]) -> NDArray[np.str_]:
    return np.where(incomplete, "incomplete", np.where(np.abs(errors) <= LIMIT, "pass", "fail"))


def _known(values: NDArray[np.float64]) -> list[float | None]:
    return [None if value != value else value for value in np.round(values, 6).tolist()]


def _basis(built: Built) -> Basis:
    return Basis.of(used=built.range, requirement=built.requirement, head=built.transmitter.head)


def _pattern(plant: Plant, built: Built, *, adjusted: bool) -> str:
    """The canonical content of a test, as it is hashed, with places for what differs from test to test."""
    kinds = [Run.Kind.AS_FOUND, Run.Kind.AS_LEFT] if adjusted else [Run.Kind.AS_FOUND]
    content = RecordContent(
        plant_id=plant.pk,
        tag_id=TAG,
        transmitter_id=TAG,
        fitting_id=TAG,
        tested_on=DAY,
        adjusted=adjusted,
        basis=_basis(built),
        runs=tuple(RunContent(kind=kind, tested_on=DAY, readings=()) for kind in kinds),
        made_at=datetime.datetime(2026, 3, 9, 12, tzinfo=datetime.UTC),
        made_by_id=None,
        transcribed=True,
    )
    why = "Transcribed without its readings."
    verdicts = {Run.Kind.AS_FOUND: {"verdict": FOUND, "why": why}, Run.Kind.AS_LEFT: {"verdict": LEFT, "why": why}}
    text = canonical(
        record_object(
            content,
            plant=plant.code,
            position=POSITION,
            test_id=TEST,
            version=1,
            supersedes="",
            verdicts={kind: verdicts[kind] for kind in kinds},
        )
    ).replace("%", "%%")
    for mark, place in ((POSITION, "key"), (TEST, "key"), (TAG, "tag"), (DAY, "day"), (FOUND, "found"), (LEFT, "left")):
        text = text.replace(str(mark), f"%({place})s")
    return text


def write_whole_tests(plant: Plant, plan: Plan, counts: NDArray[np.int64]) -> int:
    """Write signed tests of nine readings a run, so many a tag as `counts` says; returns how many readings."""
    signer = User.objects.get(username="technician")
    chosen = np.flatnonzero(counts)
    if not len(chosen):
        return 0
    visits = Visits.of(plan, chosen, counts[chosen], plant.today())
    described = _described(plant, visits, signer)
    act, readings = Act(by=Actor(None), reason="benchmark"), 0
    while batch := list(itertools.islice(described, AT_ONCE)):
        with transaction.atomic():
            write_records(batch, act=act)
            act.write()
        readings += sum(len(run.readings) for content in batch for run in content.runs)
    return readings


def _described(plant: Plant, visits: Visits, signer: User) -> Iterator[RecordContent]:
    wanted = np.unique(visits.tag).tolist()
    tags: dict[int, Tag] = {}
    for start in range(0, len(wanted), 500):
        found = Tag.objects.filter(pk__in=wanted[start : start + 500]).prefetch_related("requirements__point_list")
        related = found.select_related("current_range", "current_fitting__transmitter__head")
        tags |= {tag.pk: tag for tag in related}
    bases: dict[int, Basis] = {}
    for place, key in enumerate(visits.tag.tolist()):
        tag, day = tags[key], visits.day[place].astype(object)
        fitting = tag.current_fitting
        assert fitting is not None and tag.current_range is not None
        if key not in bases:
            requirement = next(iter(tag.requirements.all()), None)
            assert requirement is not None
            bases[key] = Basis.of(used=tag.current_range, requirement=requirement, head=fitting.transmitter.head)
        at = datetime.datetime.combine(day, datetime.time(12), tzinfo=datetime.UTC)
        errors = {Run.Kind.AS_FOUND: visits.found[place], Run.Kind.AS_LEFT: visits.left[place]}
        runs = tuple(
            RunContent(kind=kind, tested_on=day, readings=_readings(bases[key], error, visits.incomplete[place]))
            for kind, error in errors.items()
            if error == error
        )
        yield RecordContent(
            plant_id=plant.pk,
            tag_id=key,
            transmitter_id=fitting.transmitter_id,
            fitting_id=fitting.pk,
            tested_on=day,
            adjusted=bool(visits.adjusted[place]),
            basis=bases[key],
            runs=runs,
            made_at=at,
            made_by_id=signer.pk,
            signatures=(SignatureContent("performed", signer.pk, signer.printed_name, at, plant.time_zone),),
        )


def _readings(basis: Basis, error: float, incomplete: bool) -> tuple[ReadingContent, ...]:
    """Readings of a unit whose zero has moved; the last is missing where the run is incomplete."""
    signal = basis.signal()
    made: list[Any] = []
    for place, percent in enumerate(NINE[:-1] if incomplete else NINE):
        applied = float(signal.input_of_percent(percent))
        measured = float(signal.ideal_current(applied)) + 0.16 * float(error)
        made.append(
            ReadingContent(
                applied=f"{applied:.3f}",
                measured=f"{measured:.3f}",
                direction="up" if place <= 4 else "down",
                nominal_percent=float(percent),
            )
        )
    return tuple(made)
