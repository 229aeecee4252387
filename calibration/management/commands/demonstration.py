"""`manage.py demonstration`: load the demonstration plants into an empty database."""

from __future__ import annotations

from typing import Any

from django.core.management.base import BaseCommand, CommandError

from calibration.demonstrating import NotEmptyError, load
from fixtures.demonstration.people import PASSWORD, PEOPLE


class Command(BaseCommand):
    help = "Load two invented plants with eight years of tests into an empty database, all of it or nothing."

    def handle(self, *args: Any, **options: Any) -> None:
        try:
            loaded = load()
        except NotEmptyError as error:
            raise CommandError(str(error)) from error
        self.stdout.write(
            f"{len(loaded.plants)} plants, {len(loaded.tags)} tags, {len(loaded.transmitters)} transmitters, "
            f"{loaded.tests:,} tests."
        )
        if options["verbosity"] == 0:
            return
        self.stdout.write(f"Sign in as one of these; the password of all is: {PASSWORD}")
        for person in PEOPLE:
            self.stdout.write(f"  {person.username:<14} {person.printed_name}, {person.does}")
