"""Who changed what, when, from where, before, after and why."""

from __future__ import annotations

import uuid

from django.db import models

from register.models.typed import Frozen


class AuditEntry(Frozen):
    """One field changed, or one thing created; entries of one act share its id."""

    class Kind(models.TextChoices):
        CREATED = "created", "created"
        CHANGED = "changed", "changed"
        SIGNED_IN = "signed in", "signed in"
        SIGN_IN_FAILED = "sign-in failed", "sign-in failed"
        SIGNED_OUT = "signed out", "signed out"
        EXPORTED = "exported", "exported"

    act = models.UUIDField(default=uuid.uuid4)
    at = models.DateTimeField()
    kind = models.CharField(max_length=16, choices=Kind.choices)
    person = models.ForeignKey("register.User", on_delete=models.PROTECT, null=True, related_name="+")
    person_name = models.CharField(max_length=120, blank=True)
    remote_address = models.CharField(max_length=60, blank=True)
    plant = models.ForeignKey("register.Plant", on_delete=models.PROTECT, null=True, related_name="+")
    thing_type = models.CharField(max_length=60)
    thing_id = models.CharField(max_length=40)
    thing_label = models.CharField(max_length=200)
    field = models.CharField(max_length=60, blank=True)
    before = models.TextField(blank=True)
    after = models.TextField(blank=True)
    reason = models.CharField(max_length=300, blank=True)

    class Meta:
        verbose_name = "audit entry"
        verbose_name_plural = "audit entries"
        ordering = ["-id"]
        indexes = [
            models.Index(fields=["plant", "-id"], name="audit_by_plant"),
            models.Index(fields=["thing_type", "thing_id", "-id"], name="audit_by_thing"),
            models.Index(fields=["act"], name="audit_by_act"),
        ]

    def __str__(self) -> str:
        return f"{self.thing_label}: {self.kind} {self.field}".strip()
