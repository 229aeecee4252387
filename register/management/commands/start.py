"""`manage.py start`: everything between a fresh clone and a page in the browser."""

from __future__ import annotations

import os
from io import StringIO
from pathlib import Path
from typing import Any

from django.core.management import call_command
from django.core.management.base import BaseCommand, CommandError, CommandParser
from django.db import connection, connections

from register import beginning, serving
from register.models import Plant, User
from register.queries import demonstration_people


class Command(BaseCommand):
    help = "Prepares the database, loads the demonstration where there is nothing yet, and serves the site."
    requires_system_checks: list[str] = []

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("--port", type=int, default=serving.DEFAULT_PORT, help="default: 8000")
        parser.add_argument("--address", default="127.0.0.1", help="default: 127.0.0.1, this machine only")
        parser.add_argument("--empty", action="store_true", help="do not load the demonstration into an empty database")
        parser.add_argument("--certificate", type=Path, help="serve https with this certificate chain (PEM)")
        parser.add_argument("--key", type=Path, help="private key of the certificate (PEM)")

    def handle(self, *args: Any, **options: Any) -> None:
        place = serving.Place(options["address"], options["port"], options["certificate"], options["key"])
        try:
            # Before anything is made or loaded: a port that is taken should cost no minute of loading.
            serving.check(place, demonstration_people=False)
            serving.variables(place, os.environ)
        except serving.RefusedError as refusal:
            raise CommandError(str(refusal)) from refusal
        self._prepare(place, empty=options["empty"])
        try:
            known = User.objects.filter(is_demonstration=True, is_active=True).exists()
            serving.check(place, demonstration_people=known)
        except serving.RefusedError as refusal:
            raise CommandError(str(refusal)) from refusal
        words = self._words(place)
        workers = serving.default_workers(connection.vendor)
        connections.close_all()
        self.stdout.write("Starting …")
        self.stdout.flush()
        serving.serve(place, workers=workers, ready=lambda: self._say(words), hourly=self._do_what_the_day_brings)

    def _do_what_the_day_brings(self) -> None:
        """Put planned changes in force after midnight at the plants, without a timer of the machine's own."""
        try:
            call_command("apply_planned", stdout=StringIO())
        finally:
            connections.close_all()

    def _words(self, place: serving.Place) -> list[str]:
        """What a person needs to know to begin."""
        words = [f"\nFoundleft is at {place.url}  (stop it with Ctrl-C)"]
        people = demonstration_people()
        if people:
            words.append(f"Demonstration people, password of all: {people[0].password}")
            words += [f"  {person.name:<14} {person.role}" for person in people]
        if not User.objects.exists():
            words.append(f"Nobody can sign in yet: open {place.url}first-administrator/")
            words.append(f"and type this one-time code: {beginning.code()}")
        return words

    def _say(self, words: list[str]) -> None:
        self.stdout.write("\n".join(words))
        self.stdout.flush()

    def _prepare(self, place: serving.Place, *, empty: bool) -> None:
        """Check, migrate, collect static files, load the demonstration."""
        self.check(databases=["default"])
        call_command("migrate", interactive=False, verbosity=0)
        call_command("collectstatic", interactive=False, verbosity=0)
        call_command("clearsessions", verbosity=0)
        if not empty and not Plant.objects.exists() and not User.objects.exists():
            if way := serving.ways_in(place):
                raise CommandError(
                    f"{way}, and the passwords of the demonstration people are public: start it with --empty."
                )
            self.stdout.write("Loading the demonstration plants, which takes a moment …")
            self.stdout.flush()
            call_command("demonstration", stdout=self.stdout, verbosity=0)
