"""An open test being entered: the sheet fixes its basis, the entries are only ever added."""

from __future__ import annotations

import uuid

from django.db import models

from register.models import Fitting, Frozen, Plant, Tag, Transmitter


class Sheet(models.Model):
    """One visit being entered; its id is made by the client, on line or off."""

    class Stage(models.TextChoices):
        CONFIRM = "confirm", "confirm the instrument"
        CAUTIONS = "cautions", "cautions"
        STANDARDS = "standards", "reference standards"
        AS_FOUND = "as-found", "as-found"
        ADJUST = "adjust", "adjustment"
        AS_LEFT = "as-left", "as-left"
        RETURN = "return", "return to service"
        CORRECT = "correct", "correction"
        SIGN = "sign", "sign"
        SIGNED = "signed", "signed"
        ABANDONED = "abandoned", "abandoned"

    id = models.UUIDField(primary_key=True, default=uuid.uuid4)
    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="sheets")
    tag = models.ForeignKey(Tag, on_delete=models.PROTECT, null=True, related_name="sheets")
    transmitter = models.ForeignKey(Transmitter, on_delete=models.PROTECT, related_name="sheets")
    fitting = models.ForeignKey(Fitting, on_delete=models.PROTECT, null=True, related_name="sheets")
    stage = models.CharField(max_length=10, choices=Stage.choices, default=Stage.CONFIRM)
    opened_by = models.ForeignKey("register.User", on_delete=models.PROTECT, related_name="sheets")
    opened_at = models.DateTimeField()
    as_found_closed_at = models.DateTimeField(null=True)
    as_left_closed_at = models.DateTimeField(null=True)
    ended_at = models.DateTimeField(null=True)
    corrects = models.ForeignKey(
        "calibration.Test", on_delete=models.PROTECT, null=True, related_name="correcting_sheets"
    )

    lrv = models.CharField(max_length=40)
    urv = models.CharField(max_length=40)
    unit = models.CharField(max_length=20)
    reference = models.CharField(max_length=12)
    lrv_si = models.FloatField()
    urv_si = models.FloatField()
    transfer = models.CharField(max_length=12)
    low_cut_percent = models.FloatField(default=0.0)
    below_cut = models.CharField(max_length=8, default="linear")
    basis = models.JSONField(
        help_text="Tolerances, decision rule, point list, head, cautions and checklist as they stood."
    )

    class Meta:
        ordering = ["-opened_at"]
        indexes = [models.Index(fields=["plant", "stage", "-opened_at"], name="sheet_by_plant_and_stage")]

    def __str__(self) -> str:
        return f"sheet of {self.tag or self.transmitter} opened {self.opened_at:%Y-%m-%d}"


class Entry(Frozen):
    """One field of a sheet as somebody left it; the newest entry of a field counts."""

    id = models.UUIDField(primary_key=True, default=uuid.uuid4)
    sheet = models.ForeignKey(Sheet, on_delete=models.PROTECT, related_name="entries")
    field = models.CharField(max_length=80)
    text = models.TextField(blank=True)
    device = models.CharField(max_length=60)
    sequence = models.PositiveBigIntegerField()
    base = models.UUIDField(null=True, help_text="The entry that was seen as current when this one was typed.")
    typed_at = models.DateTimeField()
    received_at = models.DateTimeField()
    person = models.ForeignKey("register.User", on_delete=models.PROTECT, related_name="+")
    schema_version = models.PositiveSmallIntegerField(default=1)
    settles = models.BooleanField(default=False, help_text="Decides between two versions of a field.")

    class Meta:
        verbose_name_plural = "entries"
        ordering = ["received_at", "device", "sequence"]
        constraints = [
            models.UniqueConstraint(fields=["sheet", "device", "sequence"], name="entry_sequence_once_per_device"),
        ]
        indexes = [models.Index(fields=["sheet", "field", "received_at"], name="entry_by_field")]

    def __str__(self) -> str:
        return f"{self.field} = {self.text}"
