"""The error, due and drift marks as template tags, with the arguments of `calibration.drawing.marks`."""

from __future__ import annotations

from django import template

from calibration.drawing import marks

register = template.Library()
register.simple_tag(marks.error_mark)
register.simple_tag(marks.error_bar)
register.simple_tag(marks.due_mark)
register.simple_tag(marks.drift_mark)
