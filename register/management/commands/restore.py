"""`manage.py restore FILE`: put a backup in the place of the database."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser

from register import archive, restoring


class Command(BaseCommand):
    help = "Restores database and uploaded files from a backup, all of it or nothing. Stop the site first."
    requires_system_checks: list[str] = []

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("file", type=Path, metavar="FILE", help="a file written by `manage.py backup`")
        parser.add_argument("--replace", action="store_true", help="put it in the place of what is there")
        parser.add_argument("--reason", default="restored from a backup", help="for the audit trail")

    def handle(self, *args: Any, **options: Any) -> None:
        path: Path = options["file"].expanduser().resolve()
        if not path.is_file():
            raise CommandError(f"There is no file {path}.")
        try:
            manifest = restoring.restore(path, replace=options["replace"], reason=options["reason"])
        except (archive.DamagedError, restoring.UnfitError, restoring.NotEmptyError) as error:
            raise CommandError(f"Nothing was changed. {error}") from error
        self.stdout.write(
            f"Restored {sum(manifest.rows.values()):,} rows as of {manifest.made_at}. Everyone signs in again."
        )
