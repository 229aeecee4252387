"""Site-editable words shown with a test: cautions before it, the return-to-service checklist after it."""

from __future__ import annotations

from django.db import models

from register.models import Plant


class GuidanceLine(models.Model):
    """One caution or one checklist line of a plant."""

    class Part(models.TextChoices):
        CAUTION = "caution", "caution before the test"
        CHECKLIST = "checklist", "return to service"

    class Applies(models.TextChoices):
        ALWAYS = "always", "always"
        DIFFERENTIAL = "differential", "differential-pressure bodies"
        CONDENSING = "condensing", "hot condensing service"
        OXYGEN = "oxygen", "oxygen service"
        TOXIC = "toxic", "toxic service"
        TRIP = "trip", "tags that trip"
        HAZARDOUS = "hazardous", "hazardous areas"
        TRACED = "traced", "heat-traced tags"
        SQUARE_ROOT = "square root", "square-root output"

    class Answer(models.TextChoices):
        TICK = "tick", "a tick"
        TEXT = "text", "words"
        READING = "reading", "a reading in mA"

    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="guidance")
    part = models.CharField(max_length=10, choices=Part.choices)
    order = models.PositiveSmallIntegerField()
    key = models.SlugField(max_length=40)
    text = models.CharField(max_length=400)
    applies = models.CharField(max_length=12, choices=Applies.choices, default=Applies.ALWAYS)
    answer = models.CharField(max_length=8, choices=Answer.choices, default=Answer.TICK)
    required = models.BooleanField(default=True)
    withdrawn_at = models.DateTimeField(null=True, editable=False)

    class Meta:
        ordering = ["part", "order", "id"]
        constraints = [
            models.UniqueConstraint(
                fields=["plant", "part", "key"],
                condition=models.Q(withdrawn_at__isnull=True),
                name="guidance_key_once_per_plant",
            )
        ]

    def __str__(self) -> str:
        return self.text
