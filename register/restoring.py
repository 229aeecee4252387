"""The act of putting a backup in the place of the database: all of it or nothing."""

from __future__ import annotations

import shutil
import sqlite3
import tempfile
import zipfile
from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path
from typing import Final

from django.conf import settings
from django.contrib.sessions.models import Session
from django.core.management import call_command
from django.db import DEFAULT_DB_ALIAS, connection, connections, transaction
from django.db.migrations.executor import MigrationExecutor
from django.db.migrations.loader import MigrationLoader
from django.db.migrations.recorder import MigrationRecorder

from register.archive import DATABASE, DamagedError, Manifest, chunks_of, verified
from register.auditing import Act, Actor
from register.backing_up import stored_columns, table_names
from register.models import AuditEntry, Plant, User

#: Rows in these mean that somebody works with the database.
TELLING: Final = (User, Plant, AuditEntry)


class NotEmptyError(Exception):
    """There is something in the database, and nobody said that it shall go."""


class UnfitError(Exception):
    """The backup is sound but cannot be restored here."""


def restore(path: Path, *, replace: bool, reason: str) -> Manifest:
    """Restore database and uploaded files; open sessions end, and every plant's trail tells of it.

    Parameters
    ----------
    path : Path
        A backup made by `back_up`.
    replace : bool
        Whether what is there shall go.
    reason : str
        For the audit trail.

    Raises
    ------
    DamagedError
        The file is not what was written.
    UnfitError
        Another engine, or a schema state that this program does not know.
    NotEmptyError
        There is something in the database and `replace` is False.
    """
    manifest = verified(path)
    _check_fit(manifest)
    if not replace and not _is_empty():
        raise NotEmptyError("There are people or plants in the database; --replace puts the backup in their place.")
    with zipfile.ZipFile(path) as archive, _files(archive, manifest):
        if connection.vendor == "sqlite":
            _sqlite(archive, manifest, reason)
        else:
            _postgresql(archive, manifest, reason)
    return manifest


def _check_fit(manifest: Manifest) -> None:
    if manifest.engine != connection.vendor:
        raise UnfitError(f"This is a backup of {manifest.engine}, the database here is {connection.vendor}.")
    known = set(MigrationLoader(None).disk_migrations)
    later = [f"{app}.{name}" for app, name in manifest.migrations if (app, name) not in known]
    if later:
        raise UnfitError(f"The backup was made by another version of the program: {later[0]} is not known here.")


def _is_empty() -> bool:
    there = set(connection.introspection.table_names())
    return not any(model._meta.db_table in there and model._base_manager.exists() for model in TELLING)


@contextmanager
def _files(archive: zipfile.ZipFile, manifest: Manifest) -> Iterator[None]:
    """Put the uploaded files in place, and the earlier ones back where the database then fails."""
    folder = Path(settings.MEDIA_ROOT)
    folder.parent.mkdir(parents=True, exist_ok=True)
    scratch = Path(tempfile.mkdtemp(dir=folder.parent, prefix=".restore-"))
    try:
        (scratch / "new").mkdir()
        for name in manifest.members:
            if not name.startswith("files/"):
                continue
            target = scratch / "new" / name.removeprefix("files/")
            target.parent.mkdir(parents=True, exist_ok=True)
            with archive.open(name) as source, target.open("wb") as out:
                shutil.copyfileobj(source, out)
        if folder.exists():
            folder.rename(scratch / "old")
        (scratch / "new").rename(folder)
        try:
            yield
        except BaseException:
            folder.rename(scratch / "new")
            if (scratch / "old").exists():
                (scratch / "old").rename(folder)
            raise
    finally:
        shutil.rmtree(scratch)


def _sqlite(archive: zipfile.ZipFile, manifest: Manifest, reason: str) -> None:
    """Bring the copy to today's schema beside the database, then write it over it in one transaction of SQLite."""
    place = Path(settings.DATA_DIR)
    with tempfile.TemporaryDirectory(dir=place, prefix=".restore-") as scratch:
        copy = Path(scratch) / DATABASE
        with archive.open(DATABASE) as source, copy.open("wb") as out:
            shutil.copyfileobj(source, out)
        with closing(sqlite3.connect(copy)) as source_:
            if (said := source_.execute("PRAGMA integrity_check").fetchone()[0]) != "ok":
                raise DamagedError(f"The database in the backup is damaged: {said}.")
            counted = {name: source_.execute(f'SELECT count(*) FROM "{name}"').fetchone()[0] for name in manifest.rows}
        if counted != manifest.rows:
            raise DamagedError("The tables in the backup do not hold the rows that its manifest counts.")
        with _standing_in(copy):
            call_command("migrate", interactive=False, verbosity=0)
            _tell(manifest, reason)
        connection.close()
        connection.ensure_connection()
        with closing(sqlite3.connect(copy)) as source_:
            source_.backup(connection.connection)


@contextmanager
def _standing_in(copy: Path) -> Iterator[None]:
    """The copy takes the place of the database in this thread for as long as it is brought up to date."""
    real = connections[DEFAULT_DB_ALIAS]
    other = real.copy()
    other.settings_dict["NAME"] = str(copy)
    connections[DEFAULT_DB_ALIAS] = other
    try:
        yield
    finally:
        other.close()
        connections[DEFAULT_DB_ALIAS] = real


def _postgresql(archive: zipfile.ZipFile, manifest: Manifest, reason: str) -> None:
    """Drop, build the backup's schema, fill, bring up to date: one transaction, as PostgreSQL can."""
    with transaction.atomic():
        with connection.cursor() as cursor:
            tables = ", ".join(f'"{name}"' for name in table_names(connection))
            cursor.execute(f"DROP TABLE IF EXISTS {tables} CASCADE")
        executor = MigrationExecutor(connection)
        executor.migrate(_leaves(executor.loader, manifest))
        connection.check_constraints()
        filled = [name for name in table_names(connection) if name != MigrationRecorder.Migration._meta.db_table]
        if sorted(manifest.columns) != filled:
            raise DamagedError("The tables in the backup are not those of its schema state.")
        with connection.cursor() as cursor:
            names = ", ".join(f'"{name}"' for name in filled)
            cursor.execute(f"TRUNCATE {names}")
            for table in filled:
                columns = manifest.columns[table]
                if sorted(columns) != sorted(stored_columns(cursor, table)):
                    raise DamagedError(f"The columns of {table} in the backup are not those of its schema state.")
                listed = ", ".join(f'"{name}"' for name in columns)
                with (
                    archive.open(f"tables/{table}.copy") as source,
                    cursor.copy(f'COPY "{table}" ({listed}) FROM STDIN') as copy,
                ):
                    for chunk in chunks_of(source):
                        copy.write(chunk)
                cursor.execute(f'SELECT count(*) FROM "{table}"')
                if cursor.fetchone()[0] != manifest.rows.get(table):
                    raise DamagedError(f"{table} does not hold the rows that the manifest counts.")
            for sequence, last in manifest.sequences.items():
                cursor.execute(
                    "SELECT setval(format('%%I', s.sequencename)::regclass, %s) FROM pg_sequences s"
                    " WHERE s.schemaname = current_schema() AND s.sequencename = %s",
                    [last, sequence],
                )
        connection.check_constraints()
        call_command("migrate", interactive=False, verbosity=0)
        _tell(manifest, reason)


def _leaves(loader: MigrationLoader, manifest: Manifest) -> list[tuple[str, str]]:
    """The last migrations of the backup's schema state: those on which none of the others rests."""
    applied = set(manifest.migrations)
    return sorted(
        key for key in applied if not any(child.key in applied for child in loader.graph.node_map[key].children)
    )


@transaction.atomic
def _tell(manifest: Manifest, reason: str) -> None:
    """End open sessions, and leave an entry in every plant's trail."""
    Session.objects.all().delete()
    act = Act(Actor(None), reason)
    for plant in Plant.objects.order_by("pk"):
        act.changed(
            plant,
            plant=plant,
            before={"database": ""},
            after={"database": f"restored from the backup of {manifest.made_at}"},
        )
    act.write()
