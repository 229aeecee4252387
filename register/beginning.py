"""The one-time code that lets the first administrator in: whoever can read the data folder has it."""

from __future__ import annotations

import contextlib
import os
import secrets
from pathlib import Path

from django.conf import settings

LEGIBLE = "abcdefghjkmnpqrstuvwxyz23456789"


def legible_secret() -> str:
    """Four groups of four signs that cannot be taken for one another: about 79 bits."""
    return "-".join("".join(secrets.choice(LEGIBLE) for _ in range(4)) for _ in range(4))


def code() -> str:
    """The code of this site; made, and kept readable by its owner only, where there is none."""
    path = _path()
    try:
        handle = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
    except FileExistsError:
        if kept := path.read_text().strip():
            return kept
        handle = os.open(path, os.O_WRONLY, 0o600)
    made = legible_secret()
    with os.fdopen(handle, "w") as out:
        out.write(made)
    return made


def matches(typed: str) -> bool:
    """Whether the code was typed; never where none was made."""
    try:
        kept = _path().read_text().strip()
    except FileNotFoundError:
        return False
    return bool(kept) and secrets.compare_digest(typed.strip().lower().encode(), kept.encode())


def forget() -> None:
    """The code has done its work."""
    with contextlib.suppress(FileNotFoundError):
        _path().unlink()


def _path() -> Path:
    return Path(settings.DATA_DIR) / "first_administrator_code"
