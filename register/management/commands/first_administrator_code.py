"""Prints the code that the first administrator types in."""

from __future__ import annotations

from typing import Any

from django.core.management.base import BaseCommand, CommandError

from register import beginning
from register.models import User


class Command(BaseCommand):
    help = "Prints the one-time code for /first-administrator/ of a site that has no people yet."

    def handle(self, *args: Any, **options: Any) -> None:
        if User.objects.exists():
            raise CommandError("There are people already: an administrator makes new ones on the page of people.")
        self.stdout.write(beginning.code())
