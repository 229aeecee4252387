"""A second person stands for a record, or sends it back; each is a new link of the chain."""

from __future__ import annotations

from django.core.exceptions import ValidationError
from django.db import transaction
from django.utils import timezone

from calibration import scheduling
from calibration.models import Entry, Record, Signature, Test
from calibration.recording import write_signature
from calibration.records.content import SignatureContent
from calibration.sheet_fields import PRESENT
from register.auditing import Act, Actor, snapshot
from register.models import Tag, User

_FIELDS = ("state", "accepted")


def review(*, by: Actor, test: Test, record_id: int, remarks: str = "") -> Signature:
    """Sign that a record was reviewed.

    Parameters
    ----------
    record_id : int
        The version that the reviewer has read; a newer one is not signed unseen.

    Raises
    ------
    ValidationError
        He took part in the test, another version counts by now, or the state does not allow it.
    """
    return _signed(by, test, record_id, Signature.Meaning.REVIEWED, remarks)


def send_back(*, by: Actor, test: Test, record_id: int, remarks: str) -> Signature:
    """Send a record back to be corrected; until then the test does not count as accepted.

    Raises
    ------
    ValidationError
        No remarks are given, or as for `review`.
    """
    if not remarks.strip():
        raise ValidationError({"remarks": "Say what must be corrected."})
    return _signed(by, test, record_id, Signature.Meaning.SENT_BACK, remarks)


def took_part(person: User, test: Test) -> bool:
    """Whether a person signed any version of a test or entered any of its fields."""
    if Signature.objects.filter(record__test=test, meaning=Signature.Meaning.PERFORMED, person=person).exists():
        return True
    return (
        (Entry.objects.filter(sheet=test.sheet_id) | Entry.objects.filter(sheet__corrects=test))
        .filter(person=person)
        .exclude(field=PRESENT)
        .exclude(field__startswith="exception.")
        .exists()
    )


@transaction.atomic
def _signed(by: Actor, test: Test, record_id: int, meaning: Signature.Meaning, remarks: str) -> Signature:
    person = by.person
    if person is None:
        raise ValidationError("A record is reviewed by a person.")
    if test.tag_id is not None:
        Tag.objects.select_for_update().get(pk=test.tag_id)
    held = Test.objects.select_for_update(of=("self",)).select_related("plant").get(pk=test.pk)
    record = Record.objects.select_related("plant").filter(pk=record_id, test=held).first()
    if record is None or record.pk != held.current_record_id:
        raise ValidationError("A newer version has been signed meanwhile: read it first.")
    if held.state == Test.State.TRANSCRIBED:
        raise ValidationError("A transcribed test was signed by nobody; there is nothing to review.")
    if held.state == Test.State.SENT_BACK:
        raise ValidationError("This version was sent back; the correction comes first.")
    if meaning == Signature.Meaning.REVIEWED and held.state == Test.State.REVIEWED:
        raise ValidationError("This version is reviewed already.")
    if took_part(person, held):
        raise ValidationError("You took part in this test: somebody else must review it.")
    before = snapshot(held, _FIELDS)
    signature = write_signature(
        record,
        SignatureContent(
            meaning=meaning,
            person_id=person.pk,
            printed_name=str(person),
            signed_at=timezone.now(),
            time_zone=held.plant.time_zone,
            remarks=remarks.strip()[:300],
        ),
    )
    if meaning == Signature.Meaning.REVIEWED:
        held.state = Test.State.REVIEWED
    else:
        held.state = Test.State.SENT_BACK
        held.accepted = False
    held.save(update_fields=list(_FIELDS))
    act = Act(by=by, reason=remarks)
    act.created(signature, plant=held.plant_id)
    act.changed(held, plant=held.plant_id, before=before, after=snapshot(held, _FIELDS))
    act.write()
    if held.tag_id is not None:
        scheduling.refresh([held.tag_id])
    return signature
