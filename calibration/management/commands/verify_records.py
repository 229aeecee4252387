"""Recompute every hash and every verdict of all records; name the first break."""

from __future__ import annotations

import argparse
from typing import Any

from django.core.management.base import BaseCommand, CommandError

from calibration.management import plants
from calibration.queries.verifying import Checked, verify


class Command(BaseCommand):
    help = (
        "Recompute the hash and the verdict of every record and compare them with what is stored. Breaks (something is "
        "not what was signed) and differences (today's arithmetic or a kept figure says otherwise) are told apart; "
        "either makes the command fail."
    )

    def add_arguments(self, parser: argparse.ArgumentParser) -> None:
        plants.add_option(parser)
        parser.add_argument("--most", type=int, default=20, help="findings printed of each kind (default 20)")

    def handle(self, *args: Any, **options: Any) -> None:
        breaks = differences = 0
        for plant in plants.chosen(options["plant"]):
            checked = Checked()
            for finding in verify(plant, checked):
                if finding.is_break:
                    breaks += 1
                    word = "FIRST BREAK" if breaks == 1 else "break"
                    shown = breaks
                else:
                    differences += 1
                    word, shown = "difference", differences
                if shown <= options["most"]:
                    self.stderr.write(f"{word}: {finding}")
            self.stdout.write(f"{plant.code}: {checked.records} records and {checked.signatures} signatures read")
        if breaks or differences:
            raise CommandError(f"{breaks} breaks in the chain, {differences} differences in verdicts and figures.")
        self.stdout.write("Every hash and every verdict agrees.")
