"""Backup and restore: a whole, checked, consistent copy, and all of it back or nothing changed."""

from __future__ import annotations

import io
import json
import os
import sqlite3
import stat
import subprocess
import sys
import zipfile
from collections.abc import Callable
from contextlib import closing
from pathlib import Path
from typing import Any

import pytest
from django.core.management import CommandError, call_command
from django.db import IntegrityError, connection, transaction
from django.test import Client

from register import archive, backing_up, guards, restoring
from register.models import AuditEntry, Plant, Tag, User
from tests.cast import Cast, make_area, make_cast, make_entry, make_plant, make_ready_tag, make_record, make_sheet

TOP = Path(__file__).resolve().parents[2]
#: Tables that a restore itself writes to, or that say when a migration ran.
OWN = {"django_migrations", "django_session", "register_auditentry"}

pytestmark = pytest.mark.django_db(transaction=True)
Row = tuple[Any, ...]


@pytest.fixture
def filled(settings: Any, tmp_path: Path) -> Cast:
    """People, a tag, a signed record, a sheet with an entry, a session and an uploaded file."""
    settings.DATA_DIR = tmp_path
    settings.MEDIA_ROOT = tmp_path / "files"
    (tmp_path / "files" / "2026").mkdir(parents=True)
    (tmp_path / "files" / "2026" / "certificate ü.pdf").write_bytes(b"%PDF " + bytes(range(256)) * 9000)
    cast = make_cast()
    tag = make_ready_tag(make_area(cast.plant), "FT-2041", service='tab\t, "quotes", back\\slash, new\nline, \\N, °C')
    make_record(tag, cast.technician)
    make_entry(make_sheet(tag, cast.technician), cast.technician, "remarks", "")
    Client().force_login(cast.planner, backend="django.contrib.auth.backends.ModelBackend")
    return cast


def content() -> dict[str, list[Row]]:
    """Every row of every table, as the database gives them."""
    found = {}
    with connection.cursor() as cursor:
        for table in backing_up.table_names(connection):
            cursor.execute(f'SELECT * FROM "{table}"')
            found[table] = sorted(tuple(map(repr, row)) for row in cursor.fetchall())
    return found


def back_up(folder: Path) -> Path:
    path = folder / "kept.zip"
    call_command("backup", str(path), stdout=io.StringIO())
    return path


def restore(path: Path, **options: Any) -> str:
    out = io.StringIO()
    call_command("restore", str(path), stdout=out, **options)
    return out.getvalue()


def rewritten(path: Path, change: Callable[[dict[str, bytes]], None]) -> Path:
    """A copy of a backup in which something was tampered with."""
    with zipfile.ZipFile(path) as source:
        members = {name: source.read(name) for name in source.namelist()}
    change(members)
    other = path.with_name("tampered.zip")
    with zipfile.ZipFile(other, "w") as out:
        for name, data in members.items():
            out.writestr(name, data)
    return other


def test_what_was_backed_up_comes_back_and_what_came_after_is_gone(filled: Cast, tmp_path: Path) -> None:
    before = content()
    assert before["calibration_reading"]
    assert before["calibration_entry"]
    path = back_up(tmp_path)
    make_plant("later")
    User.objects.filter(username="planner").update(printed_name="Changed")
    (tmp_path / "files" / "later.pdf").write_bytes(b"later")
    (tmp_path / "files" / "2026" / "certificate ü.pdf").unlink()

    said = restore(path, replace=True, reason="the disk failed")

    after = content()
    assert {name: rows for name, rows in after.items() if name not in OWN} == {
        name: rows for name, rows in before.items() if name not in OWN
    }
    assert set(before["register_auditentry"]) <= set(after["register_auditentry"])
    assert Tag.objects.get().service == 'tab\t, "quotes", back\\slash, new\nline, \\N, °C'
    files = sorted(path.name for path in (tmp_path / "files").rglob("*") if path.is_file())
    assert files == ["certificate ü.pdf"]
    assert (tmp_path / "files" / "2026" / "certificate ü.pdf").stat().st_size == 5 + 256 * 9000
    assert "Everyone signs in again" in said
    assert after["django_session"] == []
    assert not [left for left in tmp_path.iterdir() if left.name.startswith(".")], "nothing is left lying about"


def test_the_trail_of_every_plant_tells_of_the_restore(filled: Cast, tmp_path: Path) -> None:
    path = back_up(tmp_path)
    restore(path, replace=True, reason="the disk failed")
    told = AuditEntry.objects.filter(field="database")
    assert {entry.plant.code for entry in told if entry.plant} == {"north", "south"}
    assert {entry.reason for entry in told} == {"the disk failed"}


def test_frozen_rows_are_guarded_again_and_new_rows_get_new_numbers(filled: Cast, tmp_path: Path) -> None:
    restore(back_up(tmp_path), replace=True)
    assert guards.missing(connection) == []
    for sql in ("UPDATE calibration_record SET content = ''", "DELETE FROM calibration_reading"):
        with pytest.raises(IntegrityError, match="is frozen"), transaction.atomic(), connection.cursor() as cursor:
            cursor.execute(sql)
    highest = max(Plant.objects.values_list("pk", flat=True))
    assert make_plant("new").pk > highest


def test_a_site_in_use_is_not_overwritten_unasked(filled: Cast, tmp_path: Path) -> None:
    path = back_up(tmp_path)
    before = content()
    with pytest.raises(CommandError, match=r"Nothing was changed.*--replace"):
        restore(path)
    assert content() == before


def test_an_empty_database_needs_no_leave(filled: Cast, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = back_up(tmp_path)
    monkeypatch.setattr(restoring, "_is_empty", lambda: True)
    restore(path)
    assert Plant.objects.count() == 2


def test_a_backup_is_never_overwritten_and_is_its_owners_alone(filled: Cast, tmp_path: Path) -> None:
    path = back_up(tmp_path)
    assert stat.S_IMODE(path.stat().st_mode) == 0o600
    with pytest.raises(CommandError, match="exists already"):
        back_up(tmp_path)
    with pytest.raises(CommandError, match="no folder"):
        call_command("backup", str(tmp_path / "nowhere" / "kept.zip"))
    assert not [left for left in tmp_path.iterdir() if left.name.startswith(".")]


def test_the_manifest_names_engine_schema_rows_and_hashes(filled: Cast, tmp_path: Path) -> None:
    manifest = archive.verified(back_up(tmp_path))
    assert manifest.engine == connection.vendor
    assert ("register", "0001_plants_tags_and_transmitters") in manifest.migrations
    assert manifest.rows["register_tag"] == 1
    assert "files/2026/certificate ü.pdf" in manifest.members


def test_a_file_on_its_way_through_an_import_is_left_out(filled: Cast, tmp_path: Path) -> None:
    """It is rewritten and thrown away meanwhile: a backup that came to it just then would fail."""
    passing = tmp_path / "files" / "imports" / str(filled.engineer.pk)
    passing.mkdir(parents=True)
    (passing / "a.file").write_bytes(b"tag;service")
    manifest = archive.verified(back_up(tmp_path))
    assert [name for name in manifest.members if name.startswith("files/")] == ["files/2026/certificate ü.pdf"]


def flip(members: dict[str, bytes]) -> None:
    name = next(name for name in sorted(members) if name.startswith(("database", "tables/register_plant")))
    data = bytearray(members[name])
    data[len(data) // 2] ^= 1
    members[name] = bytes(data)


def change_manifest(**values: Any) -> Callable[[dict[str, bytes]], None]:
    def change(members: dict[str, bytes]) -> None:
        members["manifest.json"] = json.dumps(json.loads(members["manifest.json"]) | values).encode()

    return change


def lead_out(members: dict[str, bytes]) -> None:
    manifest = json.loads(members["manifest.json"])
    name = "files/2026/certificate ü.pdf"
    members["files/../../escaped"] = members.pop(name)
    manifest["members"]["files/../../escaped"] = manifest["members"].pop(name)
    members["manifest.json"] = json.dumps(manifest).encode()


@pytest.mark.parametrize(
    ("change", "said"),
    [
        (flip, "is not what was written"),
        (lambda members: members.pop("files/2026/certificate ü.pdf"), "not hold just what"),
        (lambda members: members.update({"files/more": b"x"}), "not hold just what"),
        (lambda members: members.pop("manifest.json"), "has no manifest"),
        (lambda members: members.update({"manifest.json": b"{}"}), "cannot be read"),
        (change_manifest(format="another"), "not a backup made by"),
        (change_manifest(version=99), "later version"),
        (change_manifest(engine="oracle"), "a backup of oracle"),
        (change_manifest(migrations=[["register", "9999_later"]]), "register.9999_later is not known"),
        (change_manifest(rows={"register_plant": 77}), r"that (its|the) manifest counts"),
        (lead_out, "outside its folder"),
    ],
)
def test_a_damaged_or_foreign_file_changes_nothing(
    filled: Cast, tmp_path: Path, change: Callable[[dict[str, bytes]], None], said: str
) -> None:
    path = rewritten(back_up(tmp_path), change)
    before = content()
    with pytest.raises(CommandError, match=said):
        restore(path, replace=True)
    assert content() == before
    assert (tmp_path / "files" / "2026" / "certificate ü.pdf").exists()
    assert not (tmp_path.parent / "escaped").exists()


@pytest.mark.parametrize("text", [b"", b"PK", b"not a zip at all"])
def test_a_file_that_is_no_backup_is_said_to_be_none(filled: Cast, tmp_path: Path, text: bytes) -> None:
    path = tmp_path / "other.zip"
    path.write_bytes(text)
    with pytest.raises(CommandError, match="cannot be read"):
        restore(path, replace=True)
    with pytest.raises(CommandError, match="There is no file"):
        restore(tmp_path / "missing.zip")


def test_a_cut_off_file_is_refused(filled: Cast, tmp_path: Path) -> None:
    path = back_up(tmp_path)
    path.write_bytes(path.read_bytes()[:-200])
    with pytest.raises(CommandError, match="cannot be read"):
        restore(path, replace=True)


def test_a_restore_that_fails_half_way_leaves_database_and_files_as_they_were(
    filled: Cast, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = back_up(tmp_path)
    make_plant("later")
    (tmp_path / "files" / "later.pdf").write_bytes(b"later")
    before = content()

    def fail(*args: Any, **options: Any) -> None:
        raise RuntimeError("the power went")

    monkeypatch.setattr(restoring, "call_command", fail)
    with pytest.raises(RuntimeError, match="the power went"):
        restore(path, replace=True)
    assert content() == before
    assert (tmp_path / "files" / "later.pdf").read_bytes() == b"later"
    assert guards.missing(connection) == []


@pytest.mark.postgresql
def test_what_is_not_yet_committed_is_not_in_the_backup(filled: Cast, tmp_path: Path) -> None:
    other = connection.copy()  # type: ignore[no-untyped-call]
    other.ensure_connection()
    other.set_autocommit(False)
    with other.cursor() as cursor:
        cursor.execute("UPDATE register_plant SET name = 'Half done'")
    try:
        path = back_up(tmp_path)
    finally:
        other.rollback()
        other.close()
    with zipfile.ZipFile(path) as kept:
        assert b"Half done" not in kept.read("tables/register_plant.copy")
        assert b"North works" in kept.read("tables/register_plant.copy")


WRITER = """
import sqlite3, sys
database = sqlite3.connect(sys.argv[1], timeout=20, isolation_level=None)
print("writing", flush=True)
for number in range(10**9):
    database.execute("BEGIN IMMEDIATE")
    database.execute("UPDATE register_plant SET local_gravity = ? WHERE code = 'north'", (number,))
    database.execute("UPDATE register_plant SET local_gravity = ? WHERE code = 'south'", (number,))
    database.execute("COMMIT")
"""


def manage(data: Path, *arguments: str) -> subprocess.CompletedProcess[str]:
    kept = {name: value for name, value in os.environ.items() if name in {"PATH", "SYSTEMROOT", "LANG"}}
    return subprocess.run(
        [sys.executable, "manage.py", *arguments],
        cwd=TOP,
        env=kept | {"FOUNDLEFT_DATA": str(data)},
        capture_output=True,
        text=True,
        timeout=300,
        check=False,
    )


def test_a_backup_taken_while_others_write_is_of_one_moment(tmp_path: Path) -> None:
    """On a SQLite file, with commands as they are typed; two rows that always change together stay together."""
    here, there = tmp_path / "here", tmp_path / "there"
    assert manage(here, "migrate", "--verbosity", "0").returncode == 0
    with closing(sqlite3.connect(here / "foundleft.sqlite3")) as database:
        for code in ("north", "south"):
            database.execute(
                "INSERT INTO register_plant (code, name, time_zone, barometric_pressure, barometric_unit,"
                " decimal_comma) VALUES (?, ?, 'UTC', '', 'kPa', 0)",
                (code, code),
            )
        database.commit()
    with subprocess.Popen(
        [sys.executable, "-c", WRITER, str(here / "foundleft.sqlite3")], stdout=subprocess.PIPE, text=True
    ) as writer:
        assert writer.stdout is not None
        assert writer.stdout.readline() == "writing\n"
        try:
            made = manage(here, "backup", str(tmp_path / "kept.zip"))
        finally:
            writer.kill()
    assert made.returncode == 0, made.stderr
    assert "found whole" in made.stdout

    restored = manage(there, "restore", str(tmp_path / "kept.zip"))
    assert restored.returncode == 0, restored.stderr
    with closing(sqlite3.connect(there / "foundleft.sqlite3")) as database:
        north, south = (
            value for (value,) in database.execute("SELECT local_gravity FROM register_plant ORDER BY code")
        )
        assert north == south
        assert north is not None
        assert database.execute("PRAGMA journal_mode").fetchone() == ("wal",)
    assert "in place" in manage(there, "guards").stdout
    refused = manage(there, "restore", str(tmp_path / "kept.zip"))
    assert "--replace" in refused.stderr
    assert manage(there, "restore", str(tmp_path / "kept.zip"), "--replace").returncode == 0
