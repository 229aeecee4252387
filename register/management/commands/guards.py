"""Says whether the database still refuses to change frozen records, and puts missing guards back."""

from __future__ import annotations

from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser
from django.db import connection

from register import guarding, guards
from register.auditing import Actor


class Command(BaseCommand):
    help = "Says whether the triggers that keep frozen tables unchanged are all there."

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("--put-back", metavar="REASON", help="put missing ones back, and note why in the trail")

    def handle(self, *args: Any, **options: Any) -> None:
        if options["put_back"]:
            lacking = guarding.put_back(by=Actor(None), reason=options["put_back"])
            self.stdout.write(f"Put back: {', '.join(lacking)}." if lacking else "None was missing.")
            return
        if lacking := guards.missing(connection):
            raise CommandError(f"Missing, or not as they ought to be: {', '.join(lacking)}.")
        self.stdout.write(f"All guards of {len(guards.frozen_tables())} frozen tables are in place.")
