"""The place in the plant that needs a measurement, and what the process asks of it."""

from __future__ import annotations

from typing import ClassVar

from django.db import models

from register.models.plant import Area, Plant
from register.models.typed import ReferenceKind, Typed, TypedQuantities, as_shown, in_words
from register.searching import SearchKey


class Criticality(models.TextChoices):
    SAFETY = "safety", "safety function"
    ENVIRONMENT = "environment", "environmental"
    CUSTODY = "custody", "custody or fiscal"
    QUALITY = "quality", "product quality"
    PRODUCTION = "production", "production"
    GENERAL = "general", "general"


class Measurand(models.TextChoices):
    PRESSURE = "pressure", "pressure"
    DIFFERENTIAL = "differential pressure", "differential pressure"
    FLOW = "flow", "flow"
    LEVEL = "level", "level"


class RootExtraction(models.TextChoices):
    """Where the square root is taken; empty where nobody said."""

    NOT_RECORDED = "", "not recorded"
    NONE = "none", "nowhere"
    TRANSMITTER = "transmitter", "in the transmitter"
    CONTROL_SYSTEM = "control system", "in the control system"


class Tag(TypedQuantities):
    """A measuring point, known by its ISA-5.1 number."""

    QUANTITIES: ClassVar = (
        Typed("operating_pressure", "pressure_unit", "operating_pressure_pa"),
        Typed("design_pressure", "pressure_unit", "design_pressure_pa"),
        Typed("lowest_pressure", "pressure_unit", "lowest_pressure_pa"),
        Typed("one_side_pressure", "pressure_unit", "one_side_pressure_pa"),
        Typed("process_min", "temperature_unit", "process_min_k"),
        Typed("process_max", "temperature_unit", "process_max_k"),
        Typed("ambient_min", "temperature_unit", "ambient_min_k"),
        Typed("ambient_max", "temperature_unit", "ambient_max_k"),
        Typed("tracing_temperature", "temperature_unit", "tracing_temperature_k"),
    )

    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="tags")
    area = models.ForeignKey(Area, on_delete=models.PROTECT, related_name="tags")
    number = models.CharField("tag", max_length=40)
    service = models.CharField(max_length=160, blank=True)
    measurand = models.CharField("measures", max_length=24, choices=Measurand.choices)
    criticality = models.CharField(max_length=16, choices=Criticality.choices, default=Criticality.GENERAL)
    craft = models.CharField(max_length=40, blank=True, default="instrument")
    location = models.CharField(max_length=160, blank=True)
    out_of_service_on = models.DateField("out of service since", null=True, blank=True)
    outage_only = models.BooleanField("can be tested only in an outage", default=False)

    medium = models.CharField(max_length=80, blank=True)
    pressure_unit = models.CharField(max_length=20, default="bar")
    pressure_reference = models.CharField(
        max_length=12,
        choices=[(k.value, k.label) for k in (ReferenceKind.GAUGE, ReferenceKind.ABSOLUTE)],
        default=ReferenceKind.GAUGE,
    )
    operating_pressure = models.CharField(max_length=40, blank=True)
    design_pressure = models.CharField(max_length=40, blank=True)
    lowest_pressure = models.CharField("lowest pressure", max_length=40, blank=True)
    one_side_pressure = models.CharField(
        "greatest pressure on one side",
        max_length=40,
        blank=True,
        help_text="What one side can see while the other is open.",
    )
    operating_pressure_pa = models.FloatField(null=True, editable=False)
    design_pressure_pa = models.FloatField(null=True, editable=False)
    lowest_pressure_pa = models.FloatField(null=True, editable=False)
    one_side_pressure_pa = models.FloatField(null=True, editable=False)
    temperature_unit = models.CharField(max_length=20, default="degC")
    process_min = models.CharField("lowest process temperature", max_length=40, blank=True)
    process_max = models.CharField("highest process temperature", max_length=40, blank=True)
    ambient_min = models.CharField("lowest ambient", max_length=40, blank=True, help_text="Empty: as the area.")
    ambient_max = models.CharField("highest ambient", max_length=40, blank=True, help_text="Empty: as the area.")
    tracing_temperature = models.CharField("heat tracing up to", max_length=40, blank=True)
    process_min_k = models.FloatField(null=True, editable=False)
    process_max_k = models.FloatField(null=True, editable=False)
    ambient_min_k = models.FloatField(null=True, editable=False)
    ambient_max_k = models.FloatField(null=True, editable=False)
    tracing_temperature_k = models.FloatField(null=True, editable=False)

    supply_v = models.FloatField("loop supply (V)", null=True, blank=True)
    loop_ohm = models.FloatField("loop resistance (Ω)", null=True, blank=True)
    scale_low = models.CharField("control-system scale, low", max_length=40, blank=True)
    scale_high = models.CharField("control-system scale, high", max_length=40, blank=True)
    scale_unit = models.CharField("control-system unit", max_length=20, blank=True)
    root_extraction = models.CharField(
        "square root taken",
        max_length=16,
        choices=RootExtraction.choices,
        blank=True,
        default=RootExtraction.NOT_RECORDED,
    )

    isolation_sequence = models.TextField(blank=True)
    vent_direction = models.CharField(max_length=160, blank=True)
    oxygen_service = models.BooleanField(default=False)
    toxic_service = models.BooleanField(default=False)
    condensing_service = models.BooleanField("hot condensing service", default=False)
    hazardous_area = models.CharField(max_length=80, blank=True)
    trip_function = models.CharField("trips", max_length=160, blank=True, help_text="What this measurement can trip.")

    current_fitting = models.ForeignKey(
        "register.Fitting", on_delete=models.PROTECT, null=True, editable=False, related_name="+"
    )
    current_range = models.ForeignKey(
        "register.Range", on_delete=models.PROTECT, null=True, editable=False, related_name="+"
    )
    created_at = models.DateTimeField(auto_now_add=True)

    class Meta:
        ordering = ["number"]
        constraints = [
            models.UniqueConstraint(fields=["plant", "number"], name="tag_once_per_plant"),
            models.UniqueConstraint("plant", SearchKey("number"), name="tag_once_per_plant_in_any_case"),
            models.CheckConstraint(condition=~models.Q(number=""), name="tag_number_given"),
            models.CheckConstraint(
                condition=models.Q(pressure_reference__in=["gauge", "absolute"]), name="tag_static_gauge_or_absolute"
            ),
            models.CheckConstraint(
                condition=models.Q(process_min_k__isnull=True)
                | models.Q(process_max_k__isnull=True)
                | models.Q(process_min_k__lte=models.F("process_max_k")),
                name="tag_process_ordered",
            ),
            models.CheckConstraint(
                condition=models.Q(ambient_min_k__isnull=True)
                | models.Q(ambient_max_k__isnull=True)
                | models.Q(ambient_min_k__lte=models.F("ambient_max_k")),
                name="tag_ambient_ordered",
            ),
        ]

    def __str__(self) -> str:
        return self.number


class Range(TypedQuantities):
    """LRV to URV of a tag from a date on; changed only by adding a row."""

    QUANTITIES: ClassVar = (Typed("lrv", "unit", "lrv_si"), Typed("urv", "unit", "urv_si"))

    class Transfer(models.TextChoices):
        LINEAR = "linear", "linear"
        SQUARE_ROOT = "square root", "square root"

    class BelowCut(models.TextChoices):
        LINEAR = "linear", "linear through the cut point"
        ZERO = "zero", "held at zero"

    tag = models.ForeignKey(Tag, on_delete=models.PROTECT, related_name="ranges")
    lrv = models.CharField("LRV", max_length=40)
    urv = models.CharField("URV", max_length=40)
    unit = models.CharField(max_length=20)
    reference = models.CharField(max_length=12, choices=ReferenceKind.choices)
    lrv_si = models.FloatField(editable=False)
    urv_si = models.FloatField(editable=False)
    transfer = models.CharField(max_length=12, choices=Transfer.choices, default=Transfer.LINEAR)
    low_cut_percent = models.FloatField(
        "low cut (% of input span)", default=0.0, help_text="Square root only; 0 where none is set."
    )
    below_cut = models.CharField(max_length=8, choices=BelowCut.choices, default=BelowCut.LINEAR)
    effective_from = models.DateField()
    reason = models.CharField(max_length=300)
    person = models.ForeignKey("register.User", on_delete=models.PROTECT, null=True, related_name="+")
    created_at = models.DateTimeField(auto_now_add=True)
    applied_at = models.DateTimeField(null=True, editable=False, help_text="Empty: planned.")
    withdrawn_at = models.DateTimeField(null=True, editable=False)
    withdrawn_reason = models.CharField(max_length=300, blank=True, editable=False)

    class Meta:
        ordering = ["tag", "-effective_from", "-id"]
        constraints = [
            models.CheckConstraint(condition=~models.Q(lrv_si=models.F("urv_si")), name="range_lrv_not_urv"),
            models.CheckConstraint(
                condition=models.Q(low_cut_percent__gte=0) & models.Q(low_cut_percent__lt=100),
                name="range_low_cut_share",
            ),
            models.UniqueConstraint(
                fields=["tag", "effective_from"],
                condition=models.Q(withdrawn_at__isnull=True),
                name="range_one_per_tag_and_day",
            ),
        ]

    def __str__(self) -> str:
        lrv, urv = as_shown(self.lrv), as_shown(self.urv)
        return f"{lrv} to {urv} {in_words(self.unit)} {self.reference}, {self.transfer}"
