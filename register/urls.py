"""Root urls: the register's pages, then those of calibration, named as a string so that the arrow stays one-way."""

from __future__ import annotations

from django.urls import include, path

urlpatterns = [
    path("", include("calibration.urls")),
]
