"""Typed values in templates: `{{ head.lrl|minus }} {{ head.unit|unit }}` gives −250 inH2O (68 °F)."""

from __future__ import annotations

from django import template

from register.models.typed import as_shown, in_words

register = template.Library()


register.filter("unit", in_words)
register.filter("minus", as_shown)
