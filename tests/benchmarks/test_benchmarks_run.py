"""The benchmarks run from end to end on a small scale; what they measure there means nothing and is not looked at."""

from __future__ import annotations

import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

from tests.benchmarks.processes import TOP
from tests.benchmarks.report import Aim, Table

SMALL = ("--tags", "300", "--tests", "1500", "--share", "1", "--rounds", "1")
SECTIONS = ("pages", "flags", "import", "evaluation", "start")


def test_every_section_prints_its_ratios_with_their_aims_and_leaves_nothing_behind(tmp_path: Path) -> None:
    # Where the tests run on PostgreSQL, so do the benchmarks.
    database = os.environ.get("DATABASE_URL", "")
    ended = subprocess.run(
        [sys.executable, "-m", "tests.benchmarks", *SMALL, "--database-url", database, "--only", *SECTIONS],
        cwd=TOP,
        env=os.environ | {"TMPDIR": str(tmp_path), "TEMP": str(tmp_path)},
        capture_output=True,
        text=True,
        check=False,
    )
    assert ended.returncode == 0, ended.stderr
    printed = ended.stdout
    for title in (
        "Database of 300 tags and 1,500 tests",
        "Register list: 300 tags",
        "Due list: 300 tags",
        "Flags of 30 tags",
        "Import of 30 rows",
        "Evaluation of 1,500 runs",
        "Start",
        "Aims",
    ):
        assert re.search(rf"^{re.escape(title)}", printed, re.MULTILINE), title
    closing = printed.partition("\nAims\n")[2]
    assert len(re.findall(r": \d+\.\d\d × \(aim: at most [\d.]+ ×\) (?:met|MISSED)$", closing, re.MULTILINE)) == 8
    first_page = re.search(r"^ +/register/ all +(\d+) ", printed, re.MULTILINE)
    assert first_page and first_page[1] == "50"
    assert "load average" in closing
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(("ratio", "said"), [(1.2, "met"), (1.3, "met"), (1.31, "MISSED")])
def test_a_ratio_is_met_at_its_aim_and_missed_beyond(ratio: float, said: str) -> None:
    assert str(Aim("lists", ratio, 1.3)).endswith(said)


def test_a_table_survives_the_way_from_process_to_process() -> None:
    table = Table("Title", ["a", "b"], [["1", "2"]], ["remark"], [Aim("x", 2.0, 4.0)])
    assert Table.read(table.written()) == table
