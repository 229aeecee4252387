"""Tells the functions named in `AFTER_REGISTER_CHANGE` which tags a register act touched."""

from __future__ import annotations

from collections.abc import Collection

from django.conf import settings
from django.utils.module_loading import import_string


def announce(tag_ids: Collection[int]) -> None:
    """Call every named function with the ids; call it last, inside the transaction of the act."""
    if not tag_ids:
        return
    for name in settings.AFTER_REGISTER_CHANGE:
        import_string(name)(tag_ids)
