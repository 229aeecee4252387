"""Writes a backup while the site is in use: one consistent moment of the database, and the uploaded files."""

from __future__ import annotations

import datetime
import sqlite3
import tempfile
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path
from typing import Any

from django.conf import settings
from django.db import connection
from django.db.backends.base.base import BaseDatabaseWrapper
from django.db.migrations.recorder import MigrationRecorder

from register.archive import DATABASE, DamagedError, Manifest, Writer, file_chunks, verified
from register.imports.uploads import FOLDER as PASSING


def back_up(path: Path) -> Manifest:
    """Write a backup to a new file and read it once more before it gets its name.

    Only its owner may read it, as it holds password hashes.

    Returns
    -------
    Manifest
        What the file holds.

    Raises
    ------
    FileExistsError
        There is such a file already; backups are never overwritten.
    DamagedError
        The database is damaged, or the file cannot be read back.
    """
    if path.exists():
        raise FileExistsError(path)
    with tempfile.TemporaryDirectory(dir=path.parent, prefix=".backup-") as scratch:
        unfinished = Path(scratch) / "unfinished.zip"
        writer = Writer(unfinished)
        unfinished.chmod(0o600)
        manifest = _sqlite(writer, Path(scratch)) if connection.vendor == "sqlite" else _postgresql(writer)
        _add_files(writer, manifest)
        writer.finish(manifest)
        written = verified(unfinished)
        _name(unfinished, path)
    return written


def _name(unfinished: Path, path: Path) -> None:
    """Give a file its name; a hard link refuses one that a backup made meanwhile has, where renaming overwrites it."""
    try:
        path.hardlink_to(unfinished)
    except FileExistsError:
        raise
    except OSError:  # a file system without hard links
        unfinished.rename(path)


def table_names(database: BaseDatabaseWrapper) -> list[str]:
    """Tables of the site in a database, with Django's own."""
    names = database.introspection.django_table_names(only_existing=True, include_views=False)
    return sorted({*names, MigrationRecorder.Migration._meta.db_table})


def _sqlite(writer: Writer, scratch: Path) -> Manifest:
    """SQLite's own online copy: other connections read and write on, the copy is of one moment."""
    connection.ensure_connection()
    copy = scratch / DATABASE
    with closing(sqlite3.connect(copy)) as target:
        connection.connection.backup(target)
        target.execute("PRAGMA journal_mode=DELETE")
        if (said := target.execute("PRAGMA integrity_check").fetchone()[0]) != "ok":
            raise DamagedError(f"The database is damaged: {said}.")
        rows = {
            name: target.execute(f'SELECT count(*) FROM "{name}"').fetchone()[0] for name in table_names(connection)
        }
        applied = target.execute("SELECT app, name FROM django_migrations ORDER BY id").fetchall()
    manifest = Manifest("sqlite", _now(), applied, rows)
    manifest.members[DATABASE] = writer.add(DATABASE, file_chunks(copy))
    copy.unlink()
    return manifest


def _postgresql(writer: Writer) -> Manifest:
    """COPY of every table within one read-only snapshot, on a connection of its own."""
    import psycopg

    own = connection.copy()
    own.ensure_connection()
    raw = own.connection
    try:
        raw.autocommit = False
        raw.isolation_level = psycopg.IsolationLevel.REPEATABLE_READ
        raw.read_only = True
        with raw.cursor() as cursor:
            cursor.execute("SELECT app, name FROM django_migrations ORDER BY id")
            manifest = Manifest("postgresql", _now(), [(app, name) for app, name in cursor.fetchall()], {})
            for table in table_names(connection):
                if table == MigrationRecorder.Migration._meta.db_table:
                    continue
                manifest.columns[table] = stored_columns(cursor, table)
                listed = ", ".join(f'"{name}"' for name in manifest.columns[table])
                member = f"tables/{table}.copy"
                with cursor.copy(f'COPY "{table}" ({listed}) TO STDOUT') as out:
                    manifest.members[member] = writer.add(member, out)
                manifest.rows[table] = cursor.execute(f'SELECT count(*) FROM "{table}"').fetchone()[0]
            cursor.execute(
                "SELECT sequencename, last_value FROM pg_sequences"
                " WHERE schemaname = current_schema() AND last_value IS NOT NULL"
            )
            manifest.sequences = dict(cursor.fetchall())
        raw.rollback()
    finally:
        own.close()
    return manifest


def stored_columns(cursor: Any, table: str) -> list[str]:
    """Columns of a table that are stored, not worked out by the database, in their order."""
    cursor.execute(
        "SELECT column_name FROM information_schema.columns WHERE table_schema = current_schema()"
        " AND table_name = %s AND is_generated = 'NEVER' ORDER BY ordinal_position",
        [table],
    )
    return [name for (name,) in cursor.fetchall()]


def _add_files(writer: Writer, manifest: Manifest) -> None:
    """Uploaded files, after the database, so that no row of it names a file that came later."""
    for path, name in uploaded():
        manifest.members[name] = writer.add(name, file_chunks(path))


def uploaded() -> Iterator[tuple[Path, str]]:
    """Uploaded files with their names in the backup, without those that are only passing through an import.

    These are written anew at each step and thrown away at the end, or within a day: no row names them.
    """
    folder = Path(settings.MEDIA_ROOT)
    passing = folder / PASSING
    for path in sorted(folder.rglob("*")):
        if path.is_file() and passing not in path.parents:
            yield path, f"files/{path.relative_to(folder).as_posix()}"


def _now() -> str:
    return datetime.datetime.now(datetime.UTC).isoformat(timespec="seconds")
