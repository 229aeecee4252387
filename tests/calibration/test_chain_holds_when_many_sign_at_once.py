"""However many sign at the same moment, the plant has one chain without gap or fork."""

from __future__ import annotations

import os
import sqlite3
import subprocess
import sys
import threading
from pathlib import Path

import pytest
from django.db import connections

from calibration.models import ChainHead, Record
from calibration.queries.verifying import Checked, verify
from tests import cast as people
from tests.calibration.signing_at_once import work

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
