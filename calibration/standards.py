"""Acts on reference standards and their certificates."""

from __future__ import annotations

from typing import Any

from django.core.exceptions import ValidationError
from django.db import transaction
from django.utils import timezone

from calibration.models import Certificate, Standard
from register.auditing import Act, Actor, snapshot
from register.models import Plant
from register.storing import fill, store

STANDARD_FIELDS = (
    "name", "kind", "maker", "designation", "serial", "unit", "reference", "low", "high", "spec_reading_percent",
    "spec_scale_percent", "spec_absolute", "resolution", "state", "location",
)  # fmt: skip
CERTIFICATE_FIELDS = (
    "number", "laboratory", "calibrated_on", "valid_until", "remarks", "withdrawn_at", "withdrawn_reason",
)  # fmt: skip


@transaction.atomic
def create_standard(*, by: Actor, plant: Plant, reason: str, **values: Any) -> Standard:
    """Register a reference standard; `values` are the columns named in STANDARD_FIELDS.

    Raises
    ------
    ValidationError
        By field, as for the other acts here: a value that cannot be read, or a rule of the data that is broken.
    """
    standard = Standard(plant=plant)
    fill(standard, values)
    store(standard)
    act = Act(by=by, reason=reason)
    act.created(standard, plant=plant)
    act.write()
    return standard


@transaction.atomic
def edit_standard(*, by: Actor, standard: Standard, reason: str, **values: Any) -> Standard:
    held = Standard.objects.select_for_update().get(pk=standard.pk)
    before = snapshot(held, STANDARD_FIELDS)
    fill(held, values)
    store(held)
    act = Act(by=by, reason=reason)
    act.changed(held, plant=held.plant_id, before=before, after=snapshot(held, STANDARD_FIELDS))
    act.write()
    return held


@transaction.atomic
def add_certificate(*, by: Actor, standard: Standard, reason: str, **values: Any) -> Certificate:
    """Add what a laboratory certified; certificates are never edited, a mistaken one is withdrawn."""
    certificate = Certificate(standard=standard)
    fill(certificate, values)
    store(certificate)
    act = Act(by=by, reason=reason)
    act.created(certificate, plant=standard.plant_id)
    act.write()
    return certificate


@transaction.atomic
def withdraw_certificate(*, by: Actor, certificate: Certificate, reason: str) -> Certificate:
    """Say that a certificate no longer counts; raises ValidationError where that was said already."""
    held = Certificate.objects.select_for_update(of=("self",)).select_related("standard").get(pk=certificate.pk)
    if held.withdrawn_at is not None:
        raise ValidationError(f"This certificate was withdrawn already: {held.withdrawn_reason}")
    before = snapshot(held, CERTIFICATE_FIELDS)
    held.withdrawn_at = timezone.now()
    held.withdrawn_reason = reason
    held.save()
    act = Act(by=by, reason=reason)
    act.changed(held, plant=held.standard.plant_id, before=before, after=snapshot(held, CERTIFICATE_FIELDS))
    act.write()
    return held
