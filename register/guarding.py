"""The act of putting guards back on frozen tables; that they were missing stays in the audit trail."""

from __future__ import annotations

from django.db import connection, transaction

from register import guards
from register.auditing import Act, Actor
from register.models import Plant


@transaction.atomic
def put_back(*, by: Actor, reason: str) -> list[str]:
    """Put the guards back and note in every plant's trail which ones were missing.

    Returns
    -------
    list of str
        Names of the triggers that were missing, or did something else.
    """
    lacking = guards.missing(connection)
    guards.install(connection)
    if lacking:
        act = Act(by, reason)
        for plant in Plant.objects.order_by("pk"):
            act.changed(
                plant,
                plant=plant,
                before={"guards of frozen tables": f"missing: {', '.join(lacking)}"},
                after={"guards of frozen tables": "put back"},
            )
        act.write()
    return lacking
