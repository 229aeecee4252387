"""What makers sell: transmitter types and the measuring heads that go with them.

The catalogue belongs to the owner of the site and is shared by all of his plants.
"""

from __future__ import annotations

from typing import ClassVar

from django.db import models

from register.models.typed import ReferenceKind, Typed, TypedQuantities, as_shown, in_words


class Maker(models.Model):
    name = models.CharField(max_length=120, unique=True)

    class Meta:
        ordering = ["name"]

    def __str__(self) -> str:
        return self.name


class TransmitterType(TypedQuantities):
    """What a maker sells under one designation: body rating, ambient limits, supply."""

    QUANTITIES: ClassVar = (
        Typed("one_side_limit", "pressure_unit", "one_side_limit_pa"),
        Typed("vacuum_limit", "pressure_unit", "vacuum_limit_pa"),
        Typed("ambient_min", "temperature_unit", "ambient_min_k"),
        Typed("ambient_max", "temperature_unit", "ambient_max_k"),
        Typed("process_min", "temperature_unit", "process_min_k"),
        Typed("process_max", "temperature_unit", "process_max_k"),
        Typed("capsule_max", "temperature_unit", "capsule_max_k"),
    )

    maker = models.ForeignKey(Maker, on_delete=models.PROTECT, related_name="types")
    designation = models.CharField(max_length=80)
    measures = models.CharField(max_length=12, choices=ReferenceKind.choices)
    pressure_unit = models.CharField(max_length=20, default="bar")
    temperature_unit = models.CharField(max_length=20, default="degC")
    body_rating = models.JSONField(
        default=list,
        blank=True,
        help_text="Pairs of temperature and gauge pressure as typed, in the type's units, lowest temperature first.",
    )
    one_side_limit = models.CharField("one-side limit", max_length=40, blank=True)
    vacuum_limit = models.CharField("lowest absolute pressure", max_length=40, blank=True)
    ambient_min = models.CharField("lowest ambient", max_length=40, blank=True)
    ambient_max = models.CharField("highest ambient", max_length=40, blank=True)
    process_min = models.CharField("lowest process temperature", max_length=40, blank=True)
    process_max = models.CharField("highest process temperature", max_length=40, blank=True)
    capsule_max = models.CharField("highest temperature at the capsule", max_length=40, blank=True)
    one_side_limit_pa = models.FloatField(null=True, editable=False)
    vacuum_limit_pa = models.FloatField(null=True, editable=False)
    ambient_min_k = models.FloatField(null=True, editable=False)
    ambient_max_k = models.FloatField(null=True, editable=False)
    process_min_k = models.FloatField(null=True, editable=False)
    process_max_k = models.FloatField(null=True, editable=False)
    capsule_max_k = models.FloatField(null=True, editable=False)
    least_supply_v = models.FloatField("least supply voltage (V)", null=True, blank=True)
    high_failure_ma = models.FloatField("high failure current (mA)", default=22.5)
    digital = models.BooleanField(
        "digital unit", default=False, help_text="Has a digital value besides the loop current."
    )

    class Meta:
        ordering = ["maker__name", "designation"]
        constraints = [
            models.UniqueConstraint(fields=["maker", "designation"], name="type_once_per_maker"),
            models.CheckConstraint(condition=models.Q(measures__in=ReferenceKind.values), name="type_measures_known"),
            models.CheckConstraint(
                condition=models.Q(ambient_min_k__isnull=True)
                | models.Q(ambient_max_k__isnull=True)
                | models.Q(ambient_min_k__lt=models.F("ambient_max_k")),
                name="type_ambient_ordered",
            ),
            models.CheckConstraint(
                condition=models.Q(process_min_k__isnull=True)
                | models.Q(process_max_k__isnull=True)
                | models.Q(process_min_k__lt=models.F("process_max_k")),
                name="type_process_ordered",
            ),
        ]

    def __str__(self) -> str:
        return f"{self.maker} {self.designation}"


class MeasuringHead(TypedQuantities):
    """The sensing capsule: lower and upper range limit, least and greatest span, accuracy, stability."""

    QUANTITIES: ClassVar = (
        Typed("lrl", "unit", "lrl_si"),
        Typed("url", "unit", "url_si"),
        Typed("least_span", "unit", "least_span_si"),
        Typed("greatest_span", "unit", "greatest_span_si"),
    )

    type = models.ForeignKey(TransmitterType, on_delete=models.PROTECT, related_name="heads")
    code = models.CharField(max_length=40)
    unit = models.CharField(max_length=20)
    lrl = models.CharField("LRL", max_length=40)
    url = models.CharField("URL", max_length=40)
    least_span = models.CharField("least span", max_length=40)
    greatest_span = models.CharField("greatest span", max_length=40, blank=True, help_text="Empty: URL − LRL.")
    lrl_si = models.FloatField(editable=False)
    url_si = models.FloatField(editable=False)
    least_span_si = models.FloatField(editable=False)
    greatest_span_si = models.FloatField(null=True, editable=False)
    accuracy_percent = models.FloatField("reference accuracy (% of span)", null=True, blank=True)
    accuracy_turndown = models.FloatField(
        "turndown to which it holds", null=True, blank=True, help_text="Beyond it the figure grows in proportion."
    )
    stability_percent = models.FloatField("stability (% of URL)", null=True, blank=True)
    stability_months = models.PositiveSmallIntegerField("stability over (months)", null=True, blank=True)

    class Meta:
        ordering = ["type", "url_si", "code"]
        constraints = [
            models.UniqueConstraint(fields=["type", "code"], name="head_once_per_type"),
            models.CheckConstraint(condition=models.Q(lrl_si__lt=models.F("url_si")), name="head_lrl_below_url"),
            models.CheckConstraint(condition=models.Q(least_span_si__gt=0), name="head_least_span_positive"),
            models.CheckConstraint(
                condition=models.Q(greatest_span_si__isnull=True)
                | models.Q(least_span_si__lte=models.F("greatest_span_si")),
                name="head_least_span_not_above_greatest",
            ),
        ]

    def __str__(self) -> str:
        return f"{self.code}: {as_shown(self.lrl)} to {as_shown(self.url)} {in_words(self.unit)}"
