"""Reference standards and their certificates."""

from __future__ import annotations

import datetime
from typing import ClassVar

from django.db import models

from register.models import Plant, Typed, TypedQuantities


class StandardQuerySet(models.QuerySet["Standard"]):
    def with_until(self) -> list[tuple[Standard, datetime.date | None]]:
        """Each standard with the last day that a certificate which still counts is relied on, or None."""
        until = models.Max("certificates__valid_until", filter=models.Q(certificates__withdrawn_at__isnull=True))
        return [(standard, vars(standard)["until"]) for standard in self.annotate(until=until)]


class Standard(TypedQuantities):
    """Equipment a test is made against."""

    objects = StandardQuerySet.as_manager()

    QUANTITIES: ClassVar = (Typed("low", "unit", "low_si"), Typed("high", "unit", "high_si"))
    SENTENCES: ClassVar = {
        "standard_once_per_plant": ("name", "{plant} has a standard {name} already."),
        "standard_range_ordered": ("high", "The upper end {high} is not above the lower end {low}."),
    }

    class Kind(models.TextChoices):
        PRESSURE = "pressure", "pressure"
        CURRENT = "current", "current (mA)"
        DEAD_WEIGHT = "dead weight", "dead-weight tester"
        TEMPERATURE = "temperature", "temperature"

    class State(models.TextChoices):
        IN_USE = "in use", "in use"
        LABORATORY = "at the laboratory", "at the laboratory"
        WITHDRAWN = "withdrawn", "withdrawn"
        LOST = "lost", "lost"

    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="standards")
    name = models.CharField("number", max_length=40)
    kind = models.CharField(max_length=16, choices=Kind.choices)
    maker = models.CharField(max_length=120, blank=True)
    designation = models.CharField(max_length=80, blank=True)
    serial = models.CharField("serial number", max_length=60)
    unit = models.CharField(max_length=20)
    reference = models.CharField(max_length=12, blank=True, help_text="Gauge, absolute or differential, for pressure.")
    low = models.CharField("lower end of range", max_length=40)
    high = models.CharField("upper end of range", max_length=40)
    low_si = models.FloatField(editable=False)
    high_si = models.FloatField(editable=False)
    spec_reading_percent = models.FloatField("specification, % of reading", null=True, blank=True)
    spec_scale_percent = models.FloatField("specification, % of full scale", null=True, blank=True)
    spec_absolute = models.FloatField("specification, in its unit", null=True, blank=True)
    resolution = models.FloatField("resolution, in its unit", null=True, blank=True)
    state = models.CharField(max_length=20, choices=State.choices, default=State.IN_USE)
    location = models.CharField(max_length=120, blank=True)

    class Meta:
        ordering = ["name"]
        constraints = [
            models.UniqueConstraint(fields=["plant", "name"], name="standard_once_per_plant"),
            models.CheckConstraint(condition=models.Q(low_si__lt=models.F("high_si")), name="standard_range_ordered"),
        ]

    def __str__(self) -> str:
        return f"{self.name} ({self.get_kind_display()})"

    @property
    def unit_label(self) -> str:
        from register.engineering.units import label

        return label(self.unit)

    @property
    def specification(self) -> str:
        """The specification in words, its parts added; empty where none is known."""
        parts = (
            (self.spec_reading_percent, "% of reading"),
            (self.spec_scale_percent, "% of full scale"),
            (self.spec_absolute, self.unit_label),
        )
        said = [f"{value:g} {of}" for value, of in parts if value is not None]
        return "±(" + " + ".join(said) + ")" if said else ""


class Certificate(models.Model):
    """What a laboratory certified of a standard, and until when the plant relies on it."""

    SENTENCES: ClassVar = {
        "certificate_once_per_standard": ("number", "Certificate {number} of this standard is here already."),
        "certificate_ends_after_it_begins": (
            "valid_until",
            "{valid_until} is not after the calibration on {calibrated_on}.",
        ),
    }

    standard = models.ForeignKey(Standard, on_delete=models.PROTECT, related_name="certificates")
    number = models.CharField("certificate number", max_length=80)
    laboratory = models.CharField(max_length=120)
    calibrated_on = models.DateField()
    valid_until = models.DateField("relied on until")
    remarks = models.TextField(blank=True)
    withdrawn_at = models.DateTimeField(null=True, editable=False)
    withdrawn_reason = models.CharField(max_length=300, blank=True, editable=False)

    class Meta:
        ordering = ["standard", "-calibrated_on", "-id"]
        constraints = [
            models.UniqueConstraint(fields=["standard", "number"], name="certificate_once_per_standard"),
            models.CheckConstraint(
                condition=models.Q(valid_until__gt=models.F("calibrated_on")), name="certificate_ends_after_it_begins"
            ),
        ]

    def __str__(self) -> str:
        return f"{self.number}, {self.laboratory}"
