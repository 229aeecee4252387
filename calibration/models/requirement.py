"""What a tag asks of its tests, the point lists they follow, and deferrals of their dates."""

from __future__ import annotations

from typing import ClassVar

from django.db import models

from register.models import Plant, Tag


class PointList(models.Model):
    """The inputs of a run and their order, in percent of input span."""

    SENTENCES: ClassVar = {
        "point_list_once_per_plant": ("name", "“{name}” is the name of another point list of this plant."),
    }

    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="point_lists")
    name = models.CharField(max_length=80)
    points = models.CharField(
        max_length=400,
        help_text="Percent of input span in the order applied, e.g. 0 25 50 75 100 75 50 25 0; a | starts a new cycle.",
    )
    for_square_root = models.BooleanField("meant for square root", default=False)
    withdrawn_at = models.DateTimeField(null=True, editable=False)

    class Meta:
        ordering = ["name"]
        constraints = [models.UniqueConstraint(fields=["plant", "name"], name="point_list_once_per_plant")]

    def __str__(self) -> str:
        return self.name


class ToleranceForm(models.TextChoices):
    """How a tolerance is stated; see `calibration.metrology.tolerance`."""

    SPAN = "percent of span", "% of output span"
    READING = "percent of reading", "% of reading, not less than a floor in input units"
    ABSOLUTE = "absolute", "in input units"
    LARGER = "larger", "the larger of % of span and input units"
    SUM = "sum", "the sum of % of span and input units"


class Requirement(models.Model):
    """Tolerance, decision rule and interval of a tag from a date on; changed only by adding a row."""

    class Rule(models.TextChoices):
        SIMPLE = "simple acceptance", "simple acceptance"

    class Anchor(models.TextChoices):
        LAST_TEST = "last test", "the last accepted test"
        CALENDAR = "calendar", "a fixed calendar"

    tag = models.ForeignKey(Tag, on_delete=models.PROTECT, related_name="requirements")
    mpe_form = models.CharField("tolerance stated as", max_length=20, choices=ToleranceForm.choices)
    mpe_percent = models.CharField("tolerance, %", max_length=20, blank=True)
    mpe_input = models.CharField("tolerance, input units", max_length=20, blank=True)
    as_left_percent = models.CharField("as-left tolerance, %", max_length=20, blank=True)
    as_left_input = models.CharField("as-left tolerance, input units", max_length=20, blank=True)
    input_unit = models.CharField("unit of the input figures", max_length=20, blank=True)
    decision_rule = models.CharField(max_length=24, choices=Rule.choices, default=Rule.SIMPLE)
    interval_months = models.PositiveSmallIntegerField("interval (months)")
    anchor = models.CharField("counted from", max_length=12, choices=Anchor.choices, default=Anchor.LAST_TEST)
    anchor_on = models.DateField("calendar begins", null=True, blank=True)
    grace_days = models.PositiveSmallIntegerField(
        "grace (days)", null=True, blank=True, help_text="Empty: a quarter of the interval."
    )
    lead_days = models.PositiveSmallIntegerField("window opens before due (days)", default=42)
    point_list = models.ForeignKey(PointList, on_delete=models.PROTECT, related_name="requirements")
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
            models.CheckConstraint(
                condition=models.Q(interval_months__gte=1) & models.Q(interval_months__lte=240),
                name="requirement_interval_sensible",
            ),
            models.CheckConstraint(
                condition=~models.Q(anchor="calendar") | models.Q(anchor_on__isnull=False),
                name="requirement_calendar_has_a_start",
            ),
            models.UniqueConstraint(
                fields=["tag", "effective_from"],
                condition=models.Q(withdrawn_at__isnull=True),
                name="requirement_one_per_tag_and_day",
            ),
        ]

    def __str__(self) -> str:
        return f"{self.tag} from {self.effective_from}: every {self.interval_months} months"


class Deferral(models.Model):
    """An authorised later date for one tag, with what was weighed."""

    tag = models.ForeignKey(Tag, on_delete=models.PROTECT, related_name="deferrals")
    until = models.DateField("deferred until")
    risk_statement = models.TextField()
    mitigation = models.TextField()
    requested_by = models.ForeignKey("register.User", on_delete=models.PROTECT, related_name="+")
    requested_at = models.DateTimeField(auto_now_add=True)
    approved_by = models.ForeignKey("register.User", on_delete=models.PROTECT, null=True, related_name="+")
    approved_at = models.DateTimeField(null=True)
    withdrawn_at = models.DateTimeField(null=True)
    withdrawn_reason = models.CharField(max_length=300, blank=True)

    class Meta:
        ordering = ["tag", "-until"]

    def __str__(self) -> str:
        return f"{self.tag} deferred until {self.until}"
