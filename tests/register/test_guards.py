"""The database itself refuses to change, delete, replace or empty what is frozen; lost guards are noticed."""

from __future__ import annotations

from collections.abc import Iterator
from io import StringIO
from pathlib import Path

import pytest
from django.apps import apps
from django.core.management import CommandError, call_command
from django.db import IntegrityError, connection, models, transaction
from django.db.backends.sqlite3.base import DatabaseWrapper

from register import environment, guards
from register.auditing import Act, Actor
from register.checks import guards_are_in_place
from register.models import AuditEntry
from register.settings import SQLITE_OPTIONS
from tests.cast import Cast, make_area, make_entry, make_ready_tag, make_record, make_sheet

TABLES = (
    "calibration_entry",
    "calibration_reading",
    "calibration_record",
    "calibration_run",
    "calibration_signature",
    "calibration_standarduse",
    "register_auditentry",
)


@pytest.fixture
def frozen(cast: Cast) -> Cast:
    """At least one row in every frozen table."""
    tag = make_ready_tag(make_area(cast.plant))
    make_record(tag, cast.technician)
    make_entry(make_sheet(tag, cast.technician), cast.technician, "remarks", "typed")
    act = Act(Actor(cast.engineer))
    act.created(tag, plant=cast.plant)
    act.write()
    connection.check_constraints()  # leaves no deferred check behind that would hinder TRUNCATE before the guards do
    return cast


def run(sql: str, *values: object) -> None:
    with transaction.atomic(), connection.cursor() as cursor:
        cursor.execute(sql, values)


def content(table: str) -> list[tuple[object, ...]]:
    with connection.cursor() as cursor:
        cursor.execute(f'SELECT * FROM "{table}" ORDER BY id')
        return [tuple(map(str, row)) for row in cursor.fetchall()]


def test_these_tables_are_frozen() -> None:
    assert tuple(guards.frozen_tables()) == TABLES


@pytest.mark.parametrize("table", TABLES)
def test_no_sql_changes_a_frozen_row(frozen: Cast, table: str) -> None:
    before = content(table)
    assert before
    column = {"register_auditentry": "reason", "calibration_entry": "text"}.get(table, "id")
    with connection.cursor() as cursor:
        names = [column.name for column in connection.introspection.get_table_description(cursor, table)]
    listed = ", ".join(f'"{name}"' for name in names)
    attacks = [
        f'UPDATE "{table}" SET "{column}" = "{column}"',
        f'DELETE FROM "{table}"',
        f'INSERT INTO "{table}" ({listed}) SELECT {listed} FROM "{table}" WHERE true '
        f'ON CONFLICT (id) DO UPDATE SET "{column}" = excluded."{column}"',
    ]
    if connection.vendor == "sqlite":
        attacks += [
            f'INSERT OR REPLACE INTO "{table}" SELECT * FROM "{table}"',
            f'REPLACE INTO "{table}" SELECT * FROM "{table}"',
            f'UPDATE OR REPLACE "{table}" SET id = id + 1000',
        ]
    else:
        attacks += [f'TRUNCATE "{table}" CASCADE', f'TRUNCATE ONLY "{table}" RESTART IDENTITY CASCADE']
    for attack in attacks:
        with pytest.raises(IntegrityError, match="is frozen"):
            run(attack)
    assert content(table) == before


def test_no_queryset_changes_a_frozen_row(frozen: Cast) -> None:
    for attack in (
        lambda: AuditEntry.objects.update(reason="another"),
        lambda: AuditEntry.objects.all().delete(),
        lambda: AuditEntry.objects.bulk_update([AuditEntry(pk=AuditEntry.objects.get().pk, reason="x")], ["reason"]),
    ):
        with pytest.raises(IntegrityError, match="frozen"), transaction.atomic():
            attack()


def test_the_row_itself_refuses_early_in_words(frozen: Cast) -> None:
    entry = AuditEntry.objects.get()
    with pytest.raises(TypeError, match=r"audit entry .* is frozen and cannot be changed"):
        entry.save()
    with pytest.raises(TypeError, match="is frozen and cannot be deleted"):
        entry.delete()


def test_what_is_not_frozen_is_not_hindered(frozen: Cast) -> None:
    frozen.plant.name = "Renamed"
    frozen.plant.save()
    run('UPDATE "register_plant" SET name = %s', "Again")
    assert content("register_plant")[0][2] == "Again"


@pytest.fixture
def dropped(frozen: Cast) -> Iterator[str]:
    """One guard is taken off, as somebody with access to the database could."""
    name = "calibration_record_no_update"
    place = ' ON "calibration_record"' if connection.vendor == "postgresql" else ""
    run(f'DROP TRIGGER "{name}"{place}')
    yield name


def test_a_dropped_guard_is_noticed_by_the_system_check(dropped: str) -> None:
    assert guards.missing(connection) == [dropped]
    (error,) = guards_are_in_place(databases=["default"])
    assert error.id == "register.E003"
    assert "calibration_record" in error.msg
    assert error.hint is not None
    with pytest.raises(CommandError, match="calibration_record"):
        call_command("guards")


def test_a_guard_that_does_nothing_any_more_is_noticed(frozen: Cast) -> None:
    if connection.vendor == "sqlite":
        run('DROP TRIGGER "calibration_run_no_delete"')
        run('CREATE TRIGGER "calibration_run_no_delete" BEFORE DELETE ON "calibration_run" BEGIN SELECT 1; END')
        assert guards.missing(connection) == ["calibration_run_no_delete"]
    else:
        run('ALTER TABLE "calibration_run" DISABLE TRIGGER "calibration_run_no_delete"')
        assert guards.missing(connection) == ["calibration_run_no_delete"]
        run(
            "CREATE OR REPLACE FUNCTION foundleft_refuse() RETURNS trigger LANGUAGE plpgsql"
            " AS $$ BEGIN RETURN OLD; END $$"
        )
        assert len(guards.missing(connection)) == 3 * len(TABLES)


def test_a_guard_put_back_holds_again_and_the_trail_keeps_that_it_was_gone(dropped: str, cast: Cast) -> None:
    call_command("guards", put_back="a repair script had dropped it", stdout=StringIO())
    assert guards.missing(connection) == []
    with pytest.raises(IntegrityError, match="is frozen"):
        run('UPDATE "calibration_record" SET content = %s', "{}")
    entries = AuditEntry.objects.filter(field="guards of frozen tables")
    assert {entry.plant for entry in entries} == {cast.plant, cast.other_plant}
    assert all(dropped in entry.before and entry.reason == "a repair script had dropped it" for entry in entries)


def test_missing_guards_of_empty_tables_alarm_nobody(db: None) -> None:
    guards.remove(connection)
    assert len(guards.missing(connection)) == len(guards.statements(connection.vendor, list(TABLES))) // 2
    assert guards.weakened(connection) == []
    assert guards_are_in_place(databases=["default"]) == []


def test_every_migrate_puts_the_guards_back(db: None) -> None:
    guards.remove(connection)
    call_command("migrate", verbosity=0)
    assert guards.missing(connection) == []


def test_no_foreign_key_cascades(db: None) -> None:
    """A cascade would be the way round: everything that points at something protects it."""
    for model in apps.get_models():
        if model._meta.app_label not in {"register", "calibration"}:
            continue
        for field in model._meta.get_fields():
            if isinstance(field, models.ForeignKey):
                assert field.remote_field.on_delete is models.PROTECT, f"{model.__name__}.{field.name}"


PRAGMAS = {
    "journal_mode": "wal",
    "synchronous": 2,
    "foreign_keys": 1,
    "recursive_triggers": 1,
    "cache_size": -64000,
    "mmap_size": 268435456,
    "temp_store": 2,
}


def test_every_sqlite_connection_to_a_file_has_its_pragmas(tmp_path: Path) -> None:
    wrapper = DatabaseWrapper(
        {
            "ENGINE": environment.SQLITE,
            "NAME": str(tmp_path / "own.sqlite3"),
            "OPTIONS": SQLITE_OPTIONS,
            "TIME_ZONE": None,
            "CONN_MAX_AGE": 0,
            "CONN_HEALTH_CHECKS": False,
            "AUTOCOMMIT": True,
            "ATOMIC_REQUESTS": False,
        }
    )
    for _ in range(2):
        connection_ = wrapper.get_new_connection(wrapper.get_connection_params())
        found = {name: connection_.execute(f"PRAGMA {name}").fetchone()[0] for name in PRAGMAS}
        assert found == PRAGMAS
        connection_.close()
    assert wrapper.transaction_mode == "IMMEDIATE"
