"""System checks of the site's own wiring: each has an id, says what is wrong and what would be right."""

from __future__ import annotations

import difflib
import os
from collections.abc import Sequence
from pathlib import Path
from typing import Any, Final

from django.conf import settings
from django.core.checks import CheckMessage, Error, Tags, Warning, register
from django.db import connections
from django.db.utils import Error as DatabaseError
from django.utils.module_loading import import_string

from register import environment, guards

HOOKS: Final = ("AFTER_REGISTER_CHANGE", "AFTER_PLANT_CREATED", "BEFORE_BACKDATING", "EVERY_DAY")


@register()
def hooks_can_be_called(**kwargs: Any) -> list[CheckMessage]:
    """register.E001: a function named in the settings is there."""
    found: list[CheckMessage] = []
    for setting in HOOKS:
        for name in getattr(settings, setting):
            try:
                is_function = callable(import_string(name))
            except ImportError:
                is_function = False
            if not is_function:
                found.append(
                    Error(
                        f"{setting} names {name}, which is no function.",
                        hint="Name a function by module and name, such as calibration.scheduling.refresh.",
                        id="register.E001",
                    )
                )
    return found


@register()
def data_folder_is_writable(**kwargs: Any) -> list[CheckMessage]:
    """register.E002: the folders that the site writes into let it."""
    found: list[CheckMessage] = []
    for folder in {Path(settings.DATA_DIR), Path(settings.MEDIA_ROOT), Path(settings.STATIC_ROOT)}:
        there = next(place for place in (folder, *folder.parents) if place.exists())
        if not there.is_dir() or not os.access(there, os.W_OK | os.X_OK):
            found.append(
                Error(
                    f"{folder} cannot be written into.",
                    hint="Set FOUNDLEFT_DATA to a folder that belongs to the user who runs the site.",
                    id="register.E002",
                )
            )
    return found


@register(Tags.database)
def guards_are_in_place(databases: Sequence[str] | None = None, **kwargs: Any) -> list[CheckMessage]:
    """register.E003: frozen rows are guarded; register.E004: here too; register.E005: the database can be asked."""
    found: list[CheckMessage] = []
    for name in databases or ():
        connection = connections[name]
        try:
            weakened = guards.weakened(connection)
        except DatabaseError as error:
            found.append(Error(f"The database cannot be asked: {error}", id="register.E005"))
            continue
        if weakened:
            found.append(
                Error(
                    f"The guards of frozen tables are missing: {', '.join(weakened)}.",
                    hint="Somebody took them off, and rows may have been changed. Look into it, "
                    "then put them back with `manage.py guards --put-back REASON`.",
                    id="register.E003",
                )
            )
        if connection.vendor == "sqlite":
            with connection.cursor() as cursor:
                (recursive,) = cursor.execute("PRAGMA recursive_triggers").fetchone()
            if not recursive:
                found.append(
                    Error(
                        "PRAGMA recursive_triggers is off: INSERT OR REPLACE would slip past the guards.",
                        hint="Keep the init_command of the settings.",
                        id="register.E004",
                    )
                )
    return found


@register()
def variables_are_known(**kwargs: Any) -> list[CheckMessage]:
    """register.W001: a FOUNDLEFT_ variable that nothing reads is most likely mistyped."""
    found: list[CheckMessage] = []
    for name in sorted(os.environ):
        if not name.startswith("FOUNDLEFT_") or name in environment.VARIABLES:
            continue
        near = difflib.get_close_matches(name, environment.VARIABLES, n=1, cutoff=0.8)
        found.append(
            Warning(
                f"The variable {name} means nothing to the site.",
                hint=f"Is {near[0]} meant?" if near else f"It reads {', '.join(environment.VARIABLES)}.",
                id="register.W001",
            )
        )
    return found
