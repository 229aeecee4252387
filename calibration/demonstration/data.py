"""Reads the generated demonstration data, with every date moved so that they end today."""

from __future__ import annotations

import datetime
import json
import re
from pathlib import Path
from typing import Any, Final

from django.conf import settings

_DATE: Final = re.compile(r"\d{4}-\d{2}-\d{2}")


def read(today: datetime.date) -> tuple[dict[str, Any], list[dict[str, Any]]]:
    """The site and its tests; dates come out as dates, moved by whole days."""
    folder = Path(settings.BASE_DIR) / "fixtures" / "demonstration" / "data"
    site = json.loads((folder / "site.json").read_text(encoding="utf-8"))
    by = today - datetime.date.fromisoformat(site["as_of"])
    lines = (folder / "tests.jsonl").read_text(encoding="utf-8").splitlines()
    return moved(site, by), [moved(json.loads(line), by) for line in lines]


def moved(value: Any, by: datetime.timedelta) -> Any:
    """The value with every text that is a date (and nothing else) made a date so many days later."""
    if isinstance(value, str):
        return datetime.date.fromisoformat(value) + by if _DATE.fullmatch(value) else value
    if isinstance(value, list):
        return [moved(inner, by) for inner in value]
    if isinstance(value, dict):
        return {name: moved(inner, by) for name, inner in value.items()}
    return value
