"""Reads the published check values in `fixtures/values`; each file names its own source."""

from __future__ import annotations

import csv
import json
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parent.parent
VALUES = ROOT / "fixtures" / "values"


def read_json(name: str) -> Any:
    return json.loads((VALUES / name).read_text(encoding="utf-8"))


def read_csv(name: str) -> list[dict[str, str]]:
    with (VALUES / name).open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def case(name: str, title: str) -> dict[str, Any]:
    """One case of a file that holds a list of named cases."""
    (found,) = [one for one in read_json(name)["cases"] if one["name"] == title]
    return dict(found)
