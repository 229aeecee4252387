"""`{% here "register" area=area.code %}`: the address of a page in the plant of this one."""

from __future__ import annotations

from typing import Any

from django import template
from django.urls import reverse
from django.utils.http import urlencode

register = template.Library()


@register.simple_tag(takes_context=True)
def here(context: template.Context, name: str, *args: Any, **query: Any) -> str:
    """A page that depends on the chosen plant, in that of the page which leads there.

    Without that it would show whatever plant was last looked at, perhaps in another window.
    """
    plant = context.get("plant")
    plant = plant() if callable(plant) else plant
    parts = ({"plant": plant.code} if plant else {}) | query
    return f"{reverse(name, args=args)}?{urlencode(parts)}" if parts else reverse(name, args=args)
