"""People who sign in, and what they may do in which plant."""

from __future__ import annotations

from django.contrib.auth.models import AbstractUser
from django.db import models


class User(AbstractUser):
    """A person; deactivated when he leaves, never deleted, because signatures point here."""

    printed_name = models.CharField("printed name", max_length=120)
    is_demonstration = models.BooleanField(default=False, editable=False)

    class Meta:
        verbose_name = "person"
        verbose_name_plural = "people"
        ordering = ["username"]

    def __str__(self) -> str:
        return self.printed_name or self.username


class Role(models.TextChoices):
    PLANNER = "planner", "maintenance planner"
    TECHNICIAN = "technician", "technician"
    ENGINEER = "engineer", "instrument engineer"
    REVIEWER = "reviewer", "reviewer"
    AUDITOR = "auditor", "auditor (reads only)"
    ADMINISTRATOR = "administrator", "administrator"


class Membership(models.Model):
    """One role of one person in one plant."""

    user = models.ForeignKey(User, on_delete=models.PROTECT, related_name="memberships")
    plant = models.ForeignKey("register.Plant", on_delete=models.PROTECT, related_name="memberships")
    role = models.CharField(max_length=20, choices=Role.choices)

    class Meta:
        constraints = [
            models.UniqueConstraint(fields=["user", "plant", "role"], name="membership_once"),
            models.CheckConstraint(condition=models.Q(role__in=Role.values), name="membership_role_known"),
        ]

    def __str__(self) -> str:
        return f"{self.user} · {self.get_role_display()} · {self.plant}"
