"""However many sign at the same moment, the plant has one chain without gap or fork."""

from __future__ import annotations

import contextlib
import os
import sqlite3
import subprocess
import sys
import threading
import time
import uuid
from pathlib import Path
from typing import Any

import pytest
from django.db import connections, transaction

from calibration import opening, recording, reviewing, transcribing
from calibration.models import ChainHead, Record, Sheet, Test
from calibration.queries.verifying import Checked, verify
from calibration.recording import write_record
from register.auditing import Act, Actor
from register.importing import ChangedMeanwhileError
from tests import cast as people
from tests.at_once import AtTheSameTime
from tests.calibration.described import described
from tests.calibration.signing_at_once import work
from tests.calibration.telling import readings, transcribed

WORKERS, EACH = 4, 5
TOP = Path(__file__).parents[2]


def run(environment: dict[str, str], *arguments: str) -> subprocess.Popen[bytes]:
    return subprocess.Popen(
        [sys.executable, "-m", "tests.calibration.signing_at_once", *arguments],
        cwd=TOP,
        env=environment,
        stdout=subprocess.PIPE,
        stderr=subprocess.STDOUT,
    )


def test_processes_on_one_sqlite_file(tmp_path: Path) -> None:
    path = tmp_path / "chain.sqlite3"
    environment = os.environ | {
        "DJANGO_SETTINGS_MODULE": os.environ.get("DJANGO_SETTINGS_MODULE", "tests.settings"),
        "DATABASE_URL": f"sqlite:///{path}",
    }
    begun = run(environment, "prepare", str(WORKERS))
    out = begun.communicate(timeout=120)[0]
    assert begun.returncode == 0, out.decode()
    processes = [run(environment, "work", str(worker), str(EACH)) for worker in range(WORKERS)]
    for process in processes:
        out = process.communicate(timeout=240)[0]
        assert process.returncode == 0, out.decode()
    database = sqlite3.connect(path)
    links = database.execute(
        "SELECT position, previous_hash, hash FROM calibration_record"
        " UNION ALL SELECT position, previous_hash, hash FROM calibration_signature ORDER BY position"
    ).fetchall()
    head = database.execute("SELECT position, hash FROM calibration_chainhead").fetchone()
    database.close()
    assert [position for position, _, _ in links] == list(range(1, 2 * WORKERS * EACH + 1))
    assert [previous for _, previous, _ in links] == ["0" * 64, *(own for _, _, own in links[:-1])]
    assert head == (2 * WORKERS * EACH, links[-1][2])


@pytest.mark.postgresql
@pytest.mark.django_db(transaction=True)
def test_threads_on_postgresql() -> None:
    cast = people.make_cast()
    area = people.make_area(cast.plant)
    for number in range(WORKERS):
        people.make_ready_tag(area, f"PT-{number}")
    failures: list[BaseException] = []

    def worker(number: int) -> None:
        try:
            work(number, EACH)
        except BaseException as error:
            failures.append(error)
        finally:
            connections.close_all()

    threads = [threading.Thread(target=worker, args=(number,)) for number in range(WORKERS)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert not failures
    assert Record.objects.count() == WORKERS * EACH
    assert ChainHead.objects.get(plant=cast.plant).position == 2 * WORKERS * EACH
    assert list(verify(cast.plant, Checked())) == []


@pytest.mark.postgresql
@pytest.mark.django_db(transaction=True)
def test_a_review_and_a_correction_of_one_bench_test_do_not_lock_each_other(monkeypatch: pytest.MonkeyPatch) -> None:
    """Both take the test before the chain: no tag stands before them to be taken first."""
    cast = people.make_cast()
    tag = people.make_ready_tag(people.make_area(cast.plant), "PT-0")

    def recorded(**values: Any) -> Record:
        act = Act(by=Actor(person=cast.technician), reason="misread")
        with transaction.atomic():
            record = write_record(
                described(tag, signer=cast.technician, tag_id=None, fitting_id=None, **values), act=act
            )
            act.write()
        return record

    record = recorded()
    test_is_taken, chain_is_taken = threading.Event(), threading.Event()
    lock_chain, write_signature = recording.lock_chain, recording.write_signature

    def take_chain(plant: Any) -> ChainHead:
        chain = lock_chain(plant)
        if threading.current_thread().name == "correction":
            chain_is_taken.set()
        return chain

    def sign_late(*arguments: Any) -> Any:
        test_is_taken.set()
        chain_is_taken.wait(1)
        return write_signature(*arguments)

    monkeypatch.setattr(recording, "lock_chain", take_chain)
    monkeypatch.setattr(reviewing, "write_signature", sign_late)
    together = AtTheSameTime()
    by = Actor(person=cast.reviewer)
    together.do(lambda: reviewing.review(by=by, test=record.test, record_id=record.pk), "review")
    assert test_is_taken.wait(10)
    together.do(lambda: recorded(test_id=record.test_id, correction_reason="misread"), "correction")
    together.end()
    assert together.failures == []
    assert chain_is_taken.is_set()
    assert Record.objects.get(supersedes=record).version == 2
    assert list(verify(cast.plant, Checked())) == []


@pytest.mark.postgresql
@pytest.mark.django_db(transaction=True)
def test_a_review_and_the_opening_of_a_correction_do_not_lock_each_other(monkeypatch: pytest.MonkeyPatch) -> None:
    """Both take the tag before the test: a new sheet takes it too, as it names it."""
    cast = people.make_cast()
    tag = people.make_ready_tag(people.make_area(cast.plant), "PT-0")
    act = Act(by=Actor(person=cast.technician))
    record = write_record(described(tag, signer=cast.technician), act=act)
    together = AtTheSameTime()
    entries_of = opening.entries_of

    def meanwhile(*arguments: Any, **more: Any) -> Any:
        by = Actor(person=cast.reviewer)
        together.do(lambda: reviewing.review(by=by, test=record.test, record_id=record.pk), "review")
        time.sleep(0.5)
        return entries_of(*arguments, **more)

    monkeypatch.setattr(opening, "entries_of", meanwhile)
    number = uuid.uuid4()
    opening.open_correction(by=Actor(person=cast.technician), reason="misread", test=record.test, sheet_id=number)
    together.end()
    assert together.failures == []
    assert Sheet.objects.get(pk=number).corrects == record.test
    record.test.refresh_from_db()
    assert record.test.state == "reviewed"


@pytest.mark.postgresql
@pytest.mark.django_db(transaction=True)
def test_past_tests_of_a_spare_are_brought_in_once_however_often_at_once(monkeypatch: pytest.MonkeyPatch) -> None:
    """A test on the bench touches no tag that could be locked."""
    cast = people.make_cast()
    people.make_transmitter(cast.plant, serial="QG-100")
    terms = {"LRV": "0", "URV": "10", "Range unit": "bar", "Tolerance (%)": "0.5"}
    lines = [{"Serial number": "QG-100"} | terms | line for line in readings()]
    for line in lines:
        del line["Tag"]
    together, both = AtTheSameTime(), threading.Barrier(2)
    propose = transcribing.propose

    def slowly(**values: Any) -> Any:
        proposal = propose(**values)
        with contextlib.suppress(threading.BrokenBarrierError):
            both.wait(2)
        return proposal

    monkeypatch.setattr(transcribing, "propose", slowly)
    for name in ("one", "other"):
        together.do(lambda: transcribed(cast.plant, cast.engineer, *lines), name)
    together.end()
    assert [type(error) for error in together.failures] == [ChangedMeanwhileError]
    assert Test.objects.count() == 1
