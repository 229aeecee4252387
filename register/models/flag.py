"""Findings of the limit checks; one row per tag and check, opened, closed and opened again."""

from __future__ import annotations

from django.db import models

from register.models.tag import Tag


class Flag(models.Model):
    """What a limit check found at a tag, with its margin in numbers."""

    class Severity(models.IntegerChoices):
        CLEAR = 0, "clear"
        CANNOT_CHECK = 1, "cannot check"
        CAUTION = 2, "caution"
        VIOLATION = 3, "violation"

    tag = models.ForeignKey(Tag, on_delete=models.PROTECT, related_name="flags")
    check_key = models.CharField(max_length=40)
    severity = models.SmallIntegerField(choices=Severity.choices)
    opened_at = models.DateTimeField()
    closed_at = models.DateTimeField(null=True, blank=True)
    sentence = models.CharField(max_length=400)
    arithmetic = models.CharField(max_length=400, blank=True)
    demanded = models.FloatField(null=True, help_text="SI")
    limit = models.FloatField(null=True, help_text="SI")
    demanded_source = models.CharField(max_length=120, blank=True)
    limit_source = models.CharField(max_length=120, blank=True)
    margin = models.FloatField(null=True, help_text="In the unit beside it; negative: beyond the limit.")
    margin_unit = models.CharField(max_length=20, blank=True)
    margin_percent = models.FloatField(null=True)
    percent_of = models.CharField(max_length=60, blank=True)
    accepted_by = models.ForeignKey("register.User", on_delete=models.PROTECT, null=True, related_name="+")
    accepted_at = models.DateTimeField(null=True)
    accepted_reason = models.CharField(max_length=300, blank=True)
    accepted_until = models.DateField(null=True)
    accepted_severity = models.SmallIntegerField(
        choices=Severity.choices, null=True, help_text="What was accepted: severity …"
    )
    accepted_margin = models.FloatField(null=True, help_text="… and margin [SI], negative beyond the limit.")

    class Meta:
        ordering = ["tag", "-severity", "check_key"]
        constraints = [
            models.UniqueConstraint(fields=["tag", "check_key"], name="flag_once_per_tag_and_check"),
            models.CheckConstraint(
                condition=models.Q(accepted_until__isnull=True) | ~models.Q(accepted_reason=""),
                name="flag_acceptance_has_reason",
            ),
        ]

    def __str__(self) -> str:
        return f"{self.tag}: {self.sentence}"
