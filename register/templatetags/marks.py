"""`{% range_strip lrv urv least_span operating design words %}`."""

from __future__ import annotations

from django import template

from register.marks import range_strip

register = template.Library()
register.simple_tag(range_strip)
