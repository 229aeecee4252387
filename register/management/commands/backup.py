"""`manage.py backup FILE`: a backup while the site is in use."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser

from register import archive, backing_up


class Command(BaseCommand):
    help = "Writes database and uploaded files to a new file, consistent and checked, while the site is in use."

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("file", type=Path, metavar="FILE", help="a new file; an existing one is never overwritten")

    def handle(self, *args: Any, **options: Any) -> None:
        path: Path = options["file"].expanduser().resolve()
        if not path.parent.is_dir():
            raise CommandError(f"There is no folder {path.parent}.")
        try:
            manifest = backing_up.back_up(path)
        except FileExistsError as error:
            raise CommandError(f"{path} exists already: name a new file.") from error
        except archive.DamagedError as error:
            raise CommandError(f"No backup was written. {error}") from error
        except OSError as error:
            raise CommandError(f"{path} cannot be written: {error.strerror or error}.") from error
        files = sum(name.startswith("files/") for name in manifest.members)
        self.stdout.write(
            f"{path}: {sum(manifest.rows.values()):,} rows of {len(manifest.rows)} tables and {files:,} uploaded files "
            f"as of {manifest.made_at}; read back and found whole. It holds password hashes: keep it safe."
        )
