"""Plants and the areas they are divided into."""

from __future__ import annotations

import datetime
from typing import ClassVar
from zoneinfo import ZoneInfo, available_timezones

from django.core.exceptions import ValidationError
from django.db import models
from django.utils import timezone

from register.models.typed import Typed, TypedQuantities


def known_time_zone(value: str) -> None:
    if value not in available_timezones():
        raise ValidationError(f"“{value}” is not a time zone name such as Europe/Paris or America/Chicago.")


class Plant(TypedQuantities):
    """A site with its own people, tags, local date and chain of records."""

    QUANTITIES: ClassVar = (Typed("barometric_pressure", "barometric_unit", "barometric_pa"),)

    code = models.SlugField(max_length=20, unique=True, help_text="Short, used in addresses and files.")
    name = models.CharField(max_length=120)
    time_zone = models.CharField(max_length=60, default="UTC", validators=[known_time_zone])
    barometric_pressure = models.CharField(
        max_length=40, blank=True, help_text="Usual barometric pressure; gauge and absolute are compared with it."
    )
    barometric_unit = models.CharField(max_length=20, default="kPa")
    barometric_pa = models.FloatField(null=True, editable=False)
    local_gravity = models.FloatField(
        null=True, blank=True, help_text="m/s²; used for dead-weight testers and liquid heads."
    )
    decimal_comma = models.BooleanField(default=False, help_text="Numbers are typed and shown with a comma.")

    class Meta:
        ordering = ["name"]
        constraints = [
            models.CheckConstraint(
                condition=models.Q(barometric_pa__isnull=True) | models.Q(barometric_pa__gt=0),
                name="plant_barometric_positive",
            ),
        ]

    def __str__(self) -> str:
        return self.name

    def today(self) -> datetime.date:
        """The date it is now at the plant."""
        return timezone.now().astimezone(ZoneInfo(self.time_zone)).date()


class Area(TypedQuantities):
    """Part of a plant with its own surroundings."""

    QUANTITIES: ClassVar = (
        Typed("ambient_min", "temperature_unit", "ambient_min_k"),
        Typed("ambient_max", "temperature_unit", "ambient_max_k"),
    )

    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="areas")
    code = models.CharField(max_length=20)
    name = models.CharField(max_length=120)
    temperature_unit = models.CharField(max_length=20, default="degC")
    ambient_min = models.CharField("lowest ambient", max_length=40, blank=True)
    ambient_max = models.CharField("highest ambient", max_length=40, blank=True)
    ambient_min_k = models.FloatField(null=True, editable=False)
    ambient_max_k = models.FloatField(null=True, editable=False)

    class Meta:
        ordering = ["code"]
        constraints = [
            models.UniqueConstraint(fields=["plant", "code"], name="area_code_once_per_plant"),
            models.CheckConstraint(
                condition=models.Q(ambient_min_k__isnull=True)
                | models.Q(ambient_max_k__isnull=True)
                | models.Q(ambient_min_k__lte=models.F("ambient_max_k")),
                name="area_ambient_ordered",
            ),
        ]

    def __str__(self) -> str:
        return f"{self.code} {self.name}"
