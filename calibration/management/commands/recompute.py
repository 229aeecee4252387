"""Work out anew what lists read, from the full history; with --check only compare."""

from __future__ import annotations

import argparse
from typing import Any

from django.core.management.base import BaseCommand, CommandError

from calibration.management import plants
from calibration.recomputing import Looked, differences, recompute


class Command(BaseCommand):
    help = (
        "Store standings, search words and figures of runs as the full history says. With --check nothing is stored: "
        "every difference is named, and any of them makes the command fail."
    )

    def add_arguments(self, parser: argparse.ArgumentParser) -> None:
        parser.add_argument("--check", action="store_true", help="compare only")
        plants.add_option(parser)
        parser.add_argument(
            "--figures", action="store_true", help="judge every run anew, not only those of an older method"
        )
        parser.add_argument("--most", type=int, default=50, help="differences printed (default 50)")

    def handle(self, *args: Any, **options: Any) -> None:
        found = 0
        for plant in plants.chosen(options["plant"]):
            looked = Looked()
            if not options["check"]:
                looked = recompute(plant, figures=options["figures"])
            else:
                for difference in differences(plant, looked, figures=options["figures"]):
                    found += 1
                    if found <= options["most"]:
                        self.stderr.write(difference)
            self.stdout.write(f"{plant.code}: {looked.tags} tags, {looked.runs} runs")
        if found:
            raise CommandError(f"{found} differences between what is kept and what the history says.")
        self.stdout.write("What is kept agrees with the history." if options["check"] else "Stored.")
