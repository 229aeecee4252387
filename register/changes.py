"""Tells other parts of the site, named in the settings as strings, what a register act has done.

The functions run inside the transaction of the act: what they refuse, the act has not done.
"""

from __future__ import annotations

import datetime
from collections.abc import Collection

from django.conf import settings
from django.core.exceptions import ValidationError
from django.utils.module_loading import import_string

from register.auditing import Actor
from register.models import Plant, Tag, Transmitter


def announce(tag_ids: Collection[int]) -> None:
    """Call every function of `AFTER_REGISTER_CHANGE` with the ids of the tags touched; call it last."""
    if not tag_ids:
        return
    for name in settings.AFTER_REGISTER_CHANGE:
        import_string(name)(tag_ids)


def plant_created(plant: Plant, by: Actor) -> None:
    """Call every function of `AFTER_PLANT_CREATED` with the new plant and who made it."""
    for name in settings.AFTER_PLANT_CREATED:
        import_string(name)(by=by, plant=plant)


def object_to_backdating(thing: Tag | Transmitter, on: datetime.date, *, field: str) -> None:
    """Ask the functions named in `BEFORE_BACKDATING` whether something that stands forbids a change from a day on.

    Each is called with the tag or transmitter and the day and answers a sentence, or nothing where it has no objection.

    Raises
    ------
    ValidationError
        Beside `field`, with the sentence of the first that objects: a test after that day would say something
        else than it said when it was signed.
    """
    for name in settings.BEFORE_BACKDATING:
        if sentence := import_string(name)(thing, on):
            raise ValidationError({field: sentence})
