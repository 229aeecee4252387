"""Does what the day brings: planned changes whose day has come, acceptances whose day has passed."""

from __future__ import annotations

from typing import Any

from django.conf import settings
from django.core.management.base import BaseCommand
from django.utils.module_loading import import_string

from register.auditing import Actor


class Command(BaseCommand):
    help = (
        "Put planned changes in force whose day has come, and end acceptances whose date has passed; "
        "run it once a day, soon after midnight at the plants. Running it again does nothing."
    )

    def handle(self, *args: Any, **options: Any) -> None:
        for name, words in settings.EVERY_DAY.items():
            count = import_string(name)(by=Actor(None))
            one, many = words
            self.stdout.write(f"{count} {one if count == 1 else many}")
