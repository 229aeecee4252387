"""Tells other parts of the site, named in the settings as strings, what a register act has done.

The functions run inside the transaction of the act: what they refuse, the act has not done.
"""

from __future__ import annotations

from collections.abc import Collection

from django.conf import settings
from django.utils.module_loading import import_string

from register.auditing import Actor
from register.models import Plant


def announce(tag_ids: Collection[int]) -> None:
    """Call every function of `AFTER_REGISTER_CHANGE` with the ids of the tags touched; call it last."""
    if not tag_ids:
        return
    for name in settings.AFTER_REGISTER_CHANGE:
        import_string(name)(tag_ids)


def plant_created(plant: Plant, by: Actor) -> None:
    """Call every function of `AFTER_PLANT_CREATED` with the new plant and who made it."""
    for name in settings.AFTER_PLANT_CREATED:
        import_string(name)(plant, by)
