"""How each tag stands: one row a tag, everything that lists, filters and counts need.

Written by `calibration.scheduling` in the transaction of the act that changes it;
`manage.py recompute --check` proves that it agrees with the full history. Only dates are kept:
a schedule state is a condition on the plant's local today.
"""

from __future__ import annotations

from django.db import models

from register.models import Area, Plant, Tag


class Standing(models.Model):
    class Phase(models.IntegerChoices):
        """The part of the schedule state that does not depend on today."""

        NOT_IN_SERVICE = 0, "not in service"
        NEVER_TESTED = 1, "never tested"
        SCHEDULED = 2, "scheduled"

    tag = models.OneToOneField(Tag, on_delete=models.PROTECT, primary_key=True, related_name="standing")
    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="+")
    area = models.ForeignKey(Area, on_delete=models.PROTECT, related_name="+")
    number = models.CharField(max_length=40)
    service = models.CharField(max_length=160, blank=True)
    area_code = models.CharField(max_length=20)
    criticality = models.CharField(max_length=16)
    craft = models.CharField(max_length=40, blank=True)
    outage_only = models.BooleanField(default=False)

    transmitter_id = models.BigIntegerField(null=True)
    serial = models.CharField(max_length=200, blank=True, help_text="Maker and serial number.")
    fitted_on = models.DateField(null=True)
    range_text = models.CharField(max_length=80, blank=True)
    range_unit = models.CharField(max_length=20, blank=True)
    square_root = models.BooleanField(default=False)
    strip = models.JSONField(default=list, help_text="Fractions that the range strip is drawn from.")
    flag_severity = models.SmallIntegerField(default=0, help_text="Worst open flag that is not accepted.")
    open_flags = models.PositiveSmallIntegerField(default=0)
    accepted_flags = models.PositiveSmallIntegerField(default=0)

    phase = models.SmallIntegerField(choices=Phase.choices, default=Phase.NOT_IN_SERVICE)
    interval_months = models.PositiveSmallIntegerField(null=True)
    window_opens_on = models.DateField(null=True)
    due_on = models.DateField(null=True)
    grace_until = models.DateField(null=True)
    deferred_until = models.DateField(null=True)
    last_tested_on = models.DateField(null=True)
    last_accepted_on = models.DateField(null=True)
    last_test_id = models.BigIntegerField(null=True)
    last_verdict = models.CharField(max_length=20, blank=True, help_text="Of the last run of the last test.")
    as_found_verdict = models.CharField(max_length=20, blank=True)
    as_found_ratio = models.FloatField(null=True)
    as_left_ratio = models.FloatField(null=True)

    class Meta:
        indexes = [
            models.Index(fields=["plant", "number", "tag"], name="standing_by_number"),
            models.Index(fields=["plant", "area", "number"], name="standing_by_area"),
            models.Index(fields=["plant", "phase", "due_on", "tag"], name="standing_by_due"),
            models.Index(fields=["plant", "phase", "grace_until"], name="standing_by_grace"),
            models.Index(fields=["plant", "flag_severity", "number"], name="standing_by_flag"),
            models.Index(fields=["plant", "last_verdict", "number"], name="standing_by_verdict"),
        ]

    def __str__(self) -> str:
        return f"standing of {self.number}"


class SearchWord(models.Model):
    """A word by which a tag is found; keeps text search on an index on both databases."""

    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="+")
    word = models.CharField(max_length=60)
    tag = models.ForeignKey(Tag, on_delete=models.PROTECT, related_name="+")

    class Meta:
        constraints = [models.UniqueConstraint(fields=["plant", "word", "tag"], name="search_word_once")]
        indexes = [models.Index(fields=["tag"], name="search_word_by_tag")]

    def __str__(self) -> str:
        return self.word
