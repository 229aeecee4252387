"""How each tag stands: one row a tag, everything that lists, filters and counts need.

Written by `calibration.scheduling` in the transaction of the act that changes it;
`manage.py recompute --check` proves that it agrees with the full history. Only dates are kept:
a schedule state is a condition on the plant's local today.
"""

from __future__ import annotations

import datetime
from typing import Final

from django.db import models
from django.db.models import Q

from register.models import Area, Plant, Tag

#: Sorts a tag without a due date behind all that have one.
NO_DATE: Final = datetime.date(9999, 12, 31)
#: Sorts a tag whose last test has no worst error behind all that have one (they sort by minus its size).
NO_ERROR: Final = 1.0


class ScheduleState(models.TextChoices):
    """States of a tag on a day; the first that applies, in this order, is the one."""

    NOT_IN_SERVICE = "not in service", "not in service"
    NEVER_TESTED = "never tested", "never tested"
    NO_REQUIREMENT = "no requirement", "no requirement"
    DEFERRED = "deferred", "deferred"
    OVERDUE = "overdue", "overdue"
    IN_GRACE = "in grace", "in grace"
    DUE = "due", "due"
    NOT_DUE = "not due", "not due"


#: Every list walks one of these orders, and reads what it filters by from the same index.
_FILTERED = [
    "area_code",
    "phase",
    "flag_rank",
    "last_verdict",
    "criticality",
    "due_key",
    "grace_until",
    "window_opens_on",
    "deferred_until",
]


def _covering(name: str, *leading: str) -> models.Index:
    order = ["plant", *leading, "sort_key", "tag"]
    return models.Index(fields=[*order, *(column for column in _FILTERED if column not in leading)], name=name)


class Standing(models.Model):
    class Phase(models.IntegerChoices):
        """The part of the schedule state that does not depend on today."""

        NOTHING_FITTED = -1, "nothing fitted"
        NOT_IN_SERVICE = 0, "not in service"
        NEVER_TESTED = 1, "never tested"
        SCHEDULED = 2, "scheduled"
        NO_REQUIREMENT = 3, "no requirement"

    tag = models.OneToOneField(Tag, on_delete=models.PROTECT, primary_key=True, related_name="standing")
    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="+", db_index=False)
    area = models.ForeignKey(Area, on_delete=models.PROTECT, related_name="+", db_index=False)
    number = models.CharField(max_length=40)
    sort_key = models.CharField(
        max_length=120, help_text="The number with its digits widened, so that 9 sorts before 10."
    )
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
    flag_rank = models.SmallIntegerField(
        default=3, help_text="Worst open flag that is not accepted: 0 violation, 1 caution, 2 cannot check, 3 none."
    )
    open_flags = models.PositiveSmallIntegerField(default=0)
    accepted_flags = models.PositiveSmallIntegerField(default=0)

    phase = models.SmallIntegerField(choices=Phase.choices, default=Phase.NOTHING_FITTED)
    interval_months = models.PositiveSmallIntegerField(null=True)
    due_on = models.DateField(null=True)
    due_key = models.DateField(default=NO_DATE, help_text="The due date, or the last of all days.")
    window_opens_on = models.DateField(null=True, help_text="Only while scheduled, as the two dates below.")
    grace_until = models.DateField(null=True)
    deferred_until = models.DateField(null=True)
    lead_span = models.PositiveSmallIntegerField(default=0, help_text="Days from the opening of the window to due.")
    grace_span = models.PositiveSmallIntegerField(default=0, help_text="Days from due to the end of grace.")
    last_tested_on = models.DateField(null=True)
    last_accepted_on = models.DateField(null=True)
    last_test_id = models.BigIntegerField(null=True)
    last_verdict = models.CharField(max_length=20, blank=True, help_text="Of the last run of the last test.")
    as_found_verdict = models.CharField(max_length=20, blank=True)
    as_found_ratio = models.FloatField(null=True)
    as_left_ratio = models.FloatField(null=True)
    error_rank = models.FloatField(
        default=NO_ERROR, help_text="Minus the size of the worst error of the last run, in multiples of the MPE."
    )

    class Meta:
        indexes = [
            _covering("standing_by_tag"),
            _covering("standing_by_area", "area_code"),
            _covering("standing_by_due", "due_key"),
            _covering("standing_by_error", "error_rank"),
            _covering("standing_by_flag", "flag_rank"),
            _covering("standing_by_verdict", "last_verdict"),
            _covering("standing_by_criticality", "criticality"),
            _covering("standing_by_phase", "phase", "due_key"),
            models.Index(
                fields=["plant", "deferred_until"], condition=Q(deferred_until__isnull=False), name="standing_deferred"
            ),
            models.Index(fields=["plant", "accepted_flags"], name="standing_accepted"),
            models.Index(fields=["plant", "grace_span"], name="standing_grace_span"),
            models.Index(fields=["plant", "lead_span"], name="standing_lead_span"),
        ]

    def __str__(self) -> str:
        return f"standing of {self.number}"

    def state(self, today: datetime.date) -> ScheduleState:
        """The schedule state on a day of the plant."""
        return schedule_state(
            today, self.phase, self.due_on, self.grace_until, self.window_opens_on, self.deferred_until
        )


def schedule_state(
    today: datetime.date,
    phase: int,
    due: datetime.date | None,
    limit: datetime.date | None,
    opens: datetime.date | None,
    deferred: datetime.date | None,
) -> ScheduleState:
    """The state on a day from what is kept of a tag; the last day of a state still has it."""
    if phase <= Standing.Phase.NOT_IN_SERVICE:
        return ScheduleState.NOT_IN_SERVICE
    if phase == Standing.Phase.NEVER_TESTED:
        return ScheduleState.NEVER_TESTED
    if phase == Standing.Phase.NO_REQUIREMENT or due is None or limit is None or opens is None:
        return ScheduleState.NO_REQUIREMENT
    if deferred is not None and today <= deferred:
        return ScheduleState.DEFERRED
    if today > limit:
        return ScheduleState.OVERDUE
    if today > due:
        return ScheduleState.IN_GRACE
    return ScheduleState.DUE if today >= opens else ScheduleState.NOT_DUE


class SearchWord(models.Model):
    """A word by which a tag is found; keeps text search on an index on both databases."""

    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="+", db_index=False)
    word = models.CharField(max_length=60)
    tag = models.ForeignKey(Tag, on_delete=models.PROTECT, related_name="+", db_index=False)

    class Meta:
        constraints = [models.UniqueConstraint(fields=["tag", "word"], name="search_word_once")]
        indexes = [
            models.Index(
                fields=["plant", "word", "tag"],
                name="search_word_by_word",
                opclasses=["int8_ops", "varchar_pattern_ops", "int8_ops"],
            ),
        ]

    def __str__(self) -> str:
        return self.word
