"""The plants that a command of `manage.py` is about: all, or the one named by `--plant`."""

from __future__ import annotations

import argparse

from django.core.management.base import CommandError
from django.db.models import QuerySet

from register.models import Plant


def add_option(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--plant", default="", help="code of one plant; all without it")


def chosen(code: str) -> QuerySet[Plant]:
    """By code.

    Raises
    ------
    CommandError
        There is no such plant.
    """
    plants = Plant.objects.order_by("code")
    if not code:
        return plants
    if not (one := plants.filter(code=code)):
        raise CommandError(f"There is no plant “{code}”.")
    return one
