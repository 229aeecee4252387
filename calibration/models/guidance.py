"""Site-editable words shown with a test: cautions before it, the return-to-service checklist after it."""

from __future__ import annotations

from typing import ClassVar, Final

from django.core.validators import RegexValidator
from django.db import models

from register.models import Plant

#: A short name: the answers on a sheet are kept under it, so it stands in the names of fields.
KEY: Final = "[a-z0-9_-]{1,40}"
#: The steps of a tag's own isolation sequence stand among its cautions under names that begin so.
ISOLATION: Final = "isolation-"
GOOD_KEY = RegexValidator(
    rf"\A(?!{ISOLATION}){KEY}\Z",
    f"Small letters, digits and hyphens only, and not “{ISOLATION}” at the beginning: "
    "the steps of a tag's own isolation sequence are named so.",
)


class GuidanceLine(models.Model):
    """One caution or one checklist line of a plant."""

    SENTENCES: ClassVar = {
        "guidance_key_once_per_plant": ("key", "“{key}” is the short name of another line of this part."),
    }

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

    class Condensing(models.TextChoices):
        """What becomes of a line in hot condensing service, where the equaliser stays shut to keep the legs."""

        AS_ELSEWHERE = "as elsewhere", "as elsewhere"
        MAY_STAY_EMPTY = "may stay empty", "need not be answered"
        LEFT_OUT = "left out", "not shown"

    class Answer(models.TextChoices):
        TICK = "tick", "a tick"
        TEXT = "text", "words"
        READING = "reading", "a reading in mA"

    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="guidance")
    part = models.CharField(max_length=10, choices=Part.choices)
    order = models.PositiveSmallIntegerField()
    key = models.CharField(max_length=40, validators=[GOOD_KEY])
    text = models.CharField(max_length=400)
    applies = models.CharField(max_length=12, choices=Applies.choices, default=Applies.ALWAYS)
    condensing = models.CharField(
        "in hot condensing service", max_length=14, choices=Condensing.choices, default=Condensing.AS_ELSEWHERE
    )
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
