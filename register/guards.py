"""Database triggers that refuse to change, delete or empty the frozen tables, on SQLite and PostgreSQL.

They are put back after every migrate, because SQLite's table rebuilds drop them silently.
"""

from __future__ import annotations

from typing import Any

from django.apps import apps
from django.db import connections
from django.db.backends.base.base import BaseDatabaseWrapper


def frozen_tables() -> list[str]:
    """Tables of all models that derive from `Frozen`, in name order."""
    from register.models import Frozen

    return sorted(
        model._meta.db_table for model in apps.get_models() if issubclass(model, Frozen) and model._meta.managed
    )


def install(connection: BaseDatabaseWrapper) -> None:
    """Create the triggers for every frozen table that exists; existing ones are replaced."""
    existing = set(connection.introspection.table_names())
    with connection.cursor() as cursor:
        for statement in statements(connection.vendor, [t for t in frozen_tables() if t in existing]):
            cursor.execute(statement)


def remove(connection: BaseDatabaseWrapper) -> None:
    """Drop the triggers; for tests that must empty the database."""
    existing = set(connection.introspection.table_names())
    with connection.cursor() as cursor:
        for table in frozen_tables():
            if table not in existing:
                continue
            for event in ("update", "delete", "truncate"):
                if connection.vendor == "sqlite":
                    cursor.execute(f'DROP TRIGGER IF EXISTS "{table}_no_{event}"')
                else:
                    cursor.execute(f'DROP TRIGGER IF EXISTS "{table}_no_{event}" ON "{table}"')


def missing(connection: BaseDatabaseWrapper) -> list[str]:
    """Names of triggers that ought to be there and are not."""
    events = ("update", "delete") if connection.vendor == "sqlite" else ("update", "delete", "truncate")
    wanted = {f"{table}_no_{event}" for table in frozen_tables() for event in events}
    query = (
        "SELECT name FROM sqlite_master WHERE type = 'trigger'"
        if connection.vendor == "sqlite"
        else "SELECT tgname FROM pg_trigger WHERE NOT tgisinternal AND tgenabled <> 'D'"
    )
    with connection.cursor() as cursor:
        cursor.execute(query)
        return sorted(wanted - {row[0] for row in cursor.fetchall()})


def statements(vendor: str, tables: list[str]) -> list[str]:
    """SQL that puts the triggers on the given tables."""
    if vendor == "sqlite":
        return [
            sql
            for table in tables
            for event in ("update", "delete")
            for sql in (
                f'DROP TRIGGER IF EXISTS "{table}_no_{event}"',
                f'CREATE TRIGGER "{table}_no_{event}" BEFORE {event.upper()} ON "{table}" '
                f"BEGIN SELECT RAISE(ABORT, '{table} is frozen: {event} refused'); END",
            )
        ]
    if vendor == "postgresql":
        function = (
            "CREATE OR REPLACE FUNCTION foundleft_refuse() RETURNS trigger LANGUAGE plpgsql AS $$ "
            "BEGIN RAISE EXCEPTION '% is frozen: % refused', TG_TABLE_NAME, lower(TG_OP) "
            "USING ERRCODE = 'integrity_constraint_violation'; END $$"
        )
        rows = [function]
        for table in tables:
            for event in ("update", "delete"):
                rows.append(f'DROP TRIGGER IF EXISTS "{table}_no_{event}" ON "{table}"')
                rows.append(
                    f'CREATE TRIGGER "{table}_no_{event}" BEFORE {event.upper()} ON "{table}" '
                    "FOR EACH ROW EXECUTE FUNCTION foundleft_refuse()"
                )
            rows.append(f'DROP TRIGGER IF EXISTS "{table}_no_truncate" ON "{table}"')
            rows.append(
                f'CREATE TRIGGER "{table}_no_truncate" BEFORE TRUNCATE ON "{table}" '
                "FOR EACH STATEMENT EXECUTE FUNCTION foundleft_refuse()"
            )
        return rows
    raise ValueError(f"no triggers are known for the database {vendor}")


def install_after_migrate(sender: object, using: str = "default", **kwargs: Any) -> None:
    if getattr(sender, "name", "") in {"register", "calibration"}:
        install(connections[using])
