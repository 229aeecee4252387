"""Database triggers that refuse to change, delete or empty the frozen tables, on SQLite and PostgreSQL.

They are put back after every migrate, because SQLite's table rebuilds drop them silently.
"""

from __future__ import annotations

from typing import Any, Final

from django.apps import apps
from django.db import connections
from django.db.backends.base.base import BaseDatabaseWrapper

EVENTS: Final = {"sqlite": ("update", "delete"), "postgresql": ("update", "delete", "truncate")}
#: Body of the trigger function on PostgreSQL.
REFUSAL: Final = (
    "BEGIN RAISE EXCEPTION '% is frozen: % refused', TG_TABLE_NAME, lower(TG_OP) "
    "USING ERRCODE = 'integrity_constraint_violation'; END"
)


def frozen_tables() -> list[str]:
    """Tables of all models that derive from `Frozen`, in name order."""
    from register.models import Frozen

    return sorted(
        model._meta.db_table for model in apps.get_models() if issubclass(model, Frozen) and model._meta.managed
    )


def install(connection: BaseDatabaseWrapper) -> None:
    """Create the triggers for every frozen table that exists; existing ones are replaced."""
    with connection.cursor() as cursor:
        for statement in statements(connection.vendor, _existing(connection)):
            cursor.execute(statement)


def remove(connection: BaseDatabaseWrapper) -> None:
    """Drop the triggers; for tests that must empty the database and for a restore."""
    with connection.cursor() as cursor:
        for table in _existing(connection):
            for event in EVENTS[connection.vendor]:
                place = f' ON "{table}"' if connection.vendor == "postgresql" else ""
                cursor.execute(f'DROP TRIGGER IF EXISTS "{_name(table, event)}"{place}')


def missing(connection: BaseDatabaseWrapper) -> list[str]:
    """Names of triggers of existing tables that are not there, are switched off, or do something else."""
    with connection.cursor() as cursor:
        if connection.vendor == "sqlite":
            cursor.execute("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'")
            effective = {name for name, sql in cursor.fetchall() if sql in statements("sqlite", frozen_tables())}
        else:
            cursor.execute(
                "SELECT t.tgname FROM pg_trigger t"
                " JOIN pg_proc p ON p.oid = t.tgfoid JOIN pg_class c ON c.oid = t.tgrelid"
                " WHERE NOT t.tgisinternal AND t.tgenabled IN ('O', 'A') AND p.proname = 'foundleft_refuse'"
                " AND p.prosrc = %s AND c.relnamespace = current_schema()::regnamespace",
                [REFUSAL],
            )
            effective = {name for (name,) in cursor.fetchall()}
    wanted = (_name(table, event) for table in _existing(connection) for event in EVENTS[connection.vendor])
    return [name for name in wanted if name not in effective]


def weakened(connection: BaseDatabaseWrapper) -> list[str]:
    """Frozen tables that hold rows and lack a trigger: their rows may have been changed meanwhile."""
    lacking = {name.rpartition("_no_")[0] for name in missing(connection)}
    found = []
    with connection.cursor() as cursor:
        for table in sorted(lacking):
            cursor.execute(f'SELECT 1 FROM "{table}" LIMIT 1')
            if cursor.fetchone():
                found.append(table)
    return found


def statements(vendor: str, tables: list[str]) -> list[str]:
    """SQL that puts the triggers on the given tables."""
    rows = []
    if vendor == "postgresql":
        rows.append(f"CREATE OR REPLACE FUNCTION foundleft_refuse() RETURNS trigger LANGUAGE plpgsql AS $${REFUSAL}$$")
    for table in tables:
        for event in EVENTS[vendor]:
            name = _name(table, event)
            if vendor == "sqlite":
                rows.append(f'DROP TRIGGER IF EXISTS "{name}"')
                rows.append(
                    f'CREATE TRIGGER "{name}" BEFORE {event.upper()} ON "{table}" '
                    f"BEGIN SELECT RAISE(ABORT, '{table} is frozen: {event} refused'); END"
                )
            else:
                each = "STATEMENT" if event == "truncate" else "ROW"
                rows.append(f'DROP TRIGGER IF EXISTS "{name}" ON "{table}"')
                rows.append(
                    f'CREATE TRIGGER "{name}" BEFORE {event.upper()} ON "{table}" '
                    f"FOR EACH {each} EXECUTE FUNCTION foundleft_refuse()"
                )
    return rows


def install_after_migrate(sender: object, using: str = "default", **kwargs: Any) -> None:
    if getattr(sender, "name", "") in {"register", "calibration"}:
        install(connections[using])


def _existing(connection: BaseDatabaseWrapper) -> list[str]:
    there = set(connection.introspection.table_names())
    return [table for table in frozen_tables() if table in there]


def _name(table: str, event: str) -> str:
    return f"{table}_no_{event}"
