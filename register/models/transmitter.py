"""The physical device, where it is fitted, and what was done to it between tests."""

from __future__ import annotations

from django.db import models

from register.models.plant import Plant
from register.models.tag import Tag
from register.models.types import Maker, MeasuringHead, TransmitterType
from register.searching import SearchKey


class Transmitter(models.Model):
    """A device known by maker and serial number; its drift history follows it from tag to tag."""

    class Whereabouts(models.TextChoices):
        FITTED = "fitted", "fitted"
        STORES = "stores", "in stores"
        REPAIR = "repair", "away for repair"
        SCRAPPED = "scrapped", "scrapped"

    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="transmitters")
    maker = models.ForeignKey(Maker, on_delete=models.PROTECT, related_name="transmitters")
    type = models.ForeignKey(TransmitterType, on_delete=models.PROTECT, related_name="transmitters")
    head = models.ForeignKey(MeasuringHead, on_delete=models.PROTECT, related_name="transmitters")
    serial = models.CharField("serial number", max_length=60)
    whereabouts = models.CharField(
        max_length=10, choices=Whereabouts.choices, default=Whereabouts.STORES, editable=False
    )
    fill_fluid = models.CharField(max_length=60, blank=True)
    seals = models.CharField(max_length=120, blank=True)
    wetted_material = models.CharField(max_length=80, blank=True)
    made_on = models.DateField("made on", null=True, blank=True)
    remarks = models.TextField(blank=True)
    created_at = models.DateTimeField(auto_now_add=True)

    class Meta:
        ordering = ["serial"]
        constraints = [
            models.UniqueConstraint(fields=["maker", "serial"], name="transmitter_serial_once_per_maker"),
            models.UniqueConstraint("maker", SearchKey("serial"), name="transmitter_serial_once_in_any_case"),
            models.CheckConstraint(condition=~models.Q(serial=""), name="transmitter_serial_given"),
        ]
        indexes = [
            # Each filter of the list has the order of the list behind it, which a typed beginning is a stretch of.
            models.Index("plant", SearchKey("serial"), name="transmitter_by_serial"),
            models.Index("plant", "whereabouts", SearchKey("serial"), name="transmitter_by_whereabouts"),
            models.Index("plant", "type", SearchKey("serial"), name="transmitter_by_type"),
            models.Index("plant", "head", SearchKey("serial"), name="transmitter_by_head"),
        ]

    def __str__(self) -> str:
        return f"{self.maker} {self.serial}"


class Fitting(models.Model):
    """The period in which a transmitter is fitted at a tag."""

    tag = models.ForeignKey(Tag, on_delete=models.PROTECT, related_name="fittings")
    transmitter = models.ForeignKey(Transmitter, on_delete=models.PROTECT, related_name="fittings")
    fitted_on = models.DateField()
    removed_on = models.DateField(null=True, blank=True)
    fitted_reason = models.CharField(max_length=300)
    removed_reason = models.CharField(max_length=300, blank=True)
    fitted_by = models.ForeignKey("register.User", on_delete=models.PROTECT, null=True, related_name="+")
    removed_by = models.ForeignKey("register.User", on_delete=models.PROTECT, null=True, related_name="+")

    class Meta:
        ordering = ["tag", "-fitted_on", "-id"]
        constraints = [
            models.UniqueConstraint(
                fields=["tag"], condition=models.Q(removed_on__isnull=True), name="fitting_one_open_per_tag"
            ),
            models.UniqueConstraint(
                fields=["transmitter"],
                condition=models.Q(removed_on__isnull=True),
                name="fitting_one_open_per_transmitter",
            ),
            models.CheckConstraint(
                condition=models.Q(removed_on__isnull=True) | models.Q(removed_on__gte=models.F("fitted_on")),
                name="fitting_ends_after_it_begins",
            ),
        ]

    def __str__(self) -> str:
        return f"{self.transmitter} at {self.tag} from {self.fitted_on}"


class Intervention(models.Model):
    """Anything done to a transmitter between tests that breaks, or may break, its history."""

    class Kind(models.TextChoices):
        REPAIR = "repair", "repair"
        NEW_HEAD = "new head", "new measuring head"
        FLUSH = "flush", "flush or clearing of impulse lines"
        OVERRANGE = "overrange", "overrange or pressure shock"
        OVERHEAT = "overheat", "overheating"
        ADJUSTMENT = "adjustment", "adjustment outside a test"
        OTHER = "other", "other"

    transmitter = models.ForeignKey(Transmitter, on_delete=models.PROTECT, related_name="interventions")
    tag = models.ForeignKey(Tag, on_delete=models.PROTECT, null=True, blank=True, related_name="interventions")
    done_on = models.DateField()
    kind = models.CharField(max_length=12, choices=Kind.choices)
    head_before = models.ForeignKey(MeasuringHead, on_delete=models.PROTECT, null=True, blank=True, related_name="+")
    head_after = models.ForeignKey(MeasuringHead, on_delete=models.PROTECT, null=True, blank=True, related_name="+")
    breaks_history = models.BooleanField("breaks the drift history", default=True)
    reason = models.CharField("what was done and why", max_length=300)
    person = models.ForeignKey("register.User", on_delete=models.PROTECT, null=True, related_name="+")
    created_at = models.DateTimeField(auto_now_add=True)
    withdrawn_at = models.DateTimeField(null=True, editable=False)
    withdrawn_reason = models.CharField(max_length=300, blank=True, editable=False)

    class Meta:
        ordering = ["transmitter", "-done_on", "-id"]

    def __str__(self) -> str:
        return f"{self.get_kind_display()} of {self.transmitter} on {self.done_on}"
