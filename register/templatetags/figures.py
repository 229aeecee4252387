"""Filters and tags of `register.figures` for templates."""

from __future__ import annotations

from django import template

from register import figures

register = template.Library()
register.filter(figures.figure)
register.filter(figures.signed)
register.filter(figures.aligned)
register.filter(figures.typed)
register.filter(figures.iso)
register.filter(figures.ago)
register.simple_tag(figures.with_unit)
