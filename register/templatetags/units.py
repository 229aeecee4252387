"""Units in templates: `{{ head.unit|unit }}` gives the label of a key."""

from __future__ import annotations

from django import template

from register.engineering.units import UNITS

register = template.Library()


@register.filter
def unit(key: str) -> str:
    """The label of a unit, such as "inH2O (68 °F)"; a key that is not known is shown as it is."""
    return UNITS[key].label if key in UNITS else key
