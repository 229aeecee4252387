"""What is asked of the audit trail."""

from __future__ import annotations

from typing import Any

from django import forms

from register.forms.fields import DateField, RegisterForm
from register.models import AuditEntry


class TrailForm(RegisterForm):
    """Filter of the audit trail; lives in the address."""

    person = forms.CharField(label="Person", max_length=120, required=False)
    thing = forms.CharField(label="Thing", max_length=120, required=False)
    field = forms.CharField(label="Field", max_length=60, required=False)
    kind = forms.ChoiceField(label="Kind", choices=[("", "any"), *AuditEntry.Kind.choices], required=False)
    since = DateField(label="From", required=False)
    until = DateField(label="To", required=False)

    def clean(self) -> dict[str, Any]:
        values = super().clean() or self.cleaned_data
        since, until = values.get("since"), values.get("until")
        if since and until and since > until:
            self.add_error("until", f"{until} is before {since}.")
        return values
