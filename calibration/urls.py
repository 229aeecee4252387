"""Pages of tests, standards, schedule and drift, and pages that mix them with the register."""

from __future__ import annotations

from django.urls import URLPattern, URLResolver

urlpatterns: list[URLPattern | URLResolver] = []
