"""`manage.py verify_records` recomputes every hash and verdict and names what was altered."""

from __future__ import annotations

import io
from collections.abc import Iterator

import pytest
from django.core.management import CommandError, call_command
from django.db import connection

from calibration.models import ChainHead, Reading, Record, RunFigures, Signature, StandardUse, Test
from register import guards
from register.auditing import Actor
from tests import cast as people
from tests.calibration.at_work import Device, opened, signed


@pytest.fixture
def three(tag: people.Tag, cast: people.Cast) -> list[Record]:
    """Three signed records of one tag: links 1 to 6."""
    devices = [opened(tag, cast.technician, f"tablet-{n}") for n in range(3)]
    return [signed(device, (0.1 * n,) * 9, (0.05,) * 9 if n else None) for n, device in enumerate(devices)]


@pytest.fixture
def unguarded(db: None) -> Iterator[None]:
    """Somebody with the keys of the database, who first takes the triggers off."""
    guards.remove(connection)
    yield
    guards.install(connection)


def verified() -> tuple[str, str, str]:
    """Standard output, standard error and the failure, if any."""
    out, err = io.StringIO(), io.StringIO()
    try:
        call_command("verify_records", stdout=out, stderr=err)
    except CommandError as error:
        return out.getvalue(), err.getvalue(), str(error)
    return out.getvalue(), err.getvalue(), ""


def test_an_untouched_chain_agrees(three: list[Record]) -> None:
    out, err, failure = verified()
    assert (err, failure) == ("", "")
    assert "north: 3 records and 3 signatures read" in out
    assert "Every hash and every verdict agrees." in out


def test_an_altered_reading_is_named(three: list[Record], unguarded: None) -> None:
    Reading.objects.filter(run__record=three[1], run__kind="as-found", order=3).update(measured="12.0001")
    _, err, failure = verified()
    assert f"FIRST BREAK: north, link {three[1].position}" in err
    assert "as-found reading 3 measured" in err
    assert failure == "1 breaks in the chain, 0 differences in verdicts and figures."


def test_an_altered_figure_beside_a_reading_is_named(three: list[Record], unguarded: None) -> None:
    Reading.objects.filter(run__record=three[0], order=5).update(measured_ma=20.5)
    _, err, failure = verified()
    assert "reading 5: the figure kept beside “10 → 20.0000” is another" in err
    assert failure.startswith("1 breaks")


def test_altered_content_breaks_its_own_hash_and_every_other_part_is_still_read(
    three: list[Record], unguarded: None
) -> None:
    content = three[1].content.replace('"measured":"4.0160"', '"measured":"4.0000"')
    assert content != three[1].content
    Record.objects.filter(pk=three[1].pk).update(content=content)
    out, err, _ = verified()
    assert f"FIRST BREAK: north, link {three[1].position}: its hash is not that of its content" in err
    assert "3 records" in out


def test_a_record_forged_with_a_fitting_hash_breaks_the_link_after_it(three: list[Record], unguarded: None) -> None:
    from calibration.records.canonical import chain_hash

    content = three[0].content.replace('"measured":"4.0000"', '"measured":"4.0001"')
    forged = chain_hash(three[0].previous_hash, content)
    Record.objects.filter(pk=three[0].pk).update(content=content, hash=forged)
    _, err, _ = verified()
    assert f"link {three[0].position + 1}: it does not hang on the link before it" in err


def test_a_removed_link_is_missed(three: list[Record], unguarded: None) -> None:
    Signature.objects.filter(record=three[1])._raw_delete("default")
    _, err, _ = verified()
    assert f"link {three[2].position}: links are missing" in err


def test_a_chain_cut_at_its_end_is_missed(three: list[Record], unguarded: None) -> None:
    Signature.objects.filter(record=three[2])._raw_delete("default")
    _, err, _ = verified()
    assert "the chain ends here, but its end is kept as number 6" in err


def test_a_signature_in_another_name_is_named(three: list[Record], unguarded: None) -> None:
    Signature.objects.filter(record=three[0]).update(printed_name="Somebody Else")
    _, err, failure = verified()
    assert f"link {three[0].position + 1}: the signature “Somebody Else" in err
    assert failure.startswith("1 breaks")


def test_another_standard_put_under_a_record_is_named(three: list[Record], unguarded: None) -> None:
    other = people.make_standard(three[0].plant)
    StandardUse.objects.filter(run__record=three[0], part="applied").update(standard=other)
    assert "as-found standards" in verified()[1]


def test_an_altered_basis_is_named(three: list[Record], unguarded: None) -> None:
    basis = three[0].basis | {"mpe": three[0].basis["mpe"] | {"percent": "5"}}
    Record.objects.filter(pk=three[0].pk).update(basis=basis)
    assert "basis.mpe.percent" in verified()[1]


def test_a_moved_test_date_is_named(three: list[Record]) -> None:
    test = three[0].test
    Test.objects.filter(pk=test.pk).update(tested_on=test.tested_on.replace(year=2001))
    assert "tested_on" in verified()[1]


def test_a_changed_summary_is_a_difference_and_no_break(three: list[Record]) -> None:
    Test.objects.filter(pk=three[2].test_id).update(accepted=False, as_found_verdict="fail")
    _, err, failure = verified()
    assert f"difference: north, link {three[2].position}: the summary kept on the test differs" in err
    assert failure == "0 breaks in the chain, 1 differences in verdicts and figures."


def test_changed_figures_are_a_difference(three: list[Record]) -> None:
    RunFigures.objects.filter(run__record=three[0]).update(zero_error=0.2)
    assert "the figures kept of the as-found run differ" in verified()[1]


def test_a_state_that_no_signature_gives_is_a_difference(three: list[Record]) -> None:
    Test.objects.filter(pk=three[0].test_id).update(state="reviewed")
    assert "the test is kept as “reviewed”, its signatures say “signed”" in verified()[1]


def test_reviews_and_corrections_keep_the_chain_whole(three: list[Record], cast: people.Cast) -> None:
    from calibration import reviewing, sheets, signing
    from calibration.models import Sheet
    from calibration.opening import open_correction

    by = Actor(person=cast.reviewer)
    reviewing.review(by=by, test=three[0].test, record_id=three[0].pk)
    reviewing.send_back(by=by, test=three[1].test, record_id=three[1].pk, remarks="Reading 3 looks misread.")
    import uuid

    number = uuid.uuid4()
    technician = Actor(person=cast.technician)
    open_correction(by=technician, reason="Reading 3 was misread.", test=three[1].test, sheet_id=number)
    device = Device(cast.technician, Sheet.objects.get(pk=number), "tablet-z")
    device.type({"as-found.3.measured": "12.0190"})
    sheets.finish_correction(by=technician, sheet_id=number)
    signing.sign(by=technician, sheet_id=number)
    assert ChainHead.objects.get(plant=cast.plant).position == 10
    assert verified()[1:] == ("", "")


def test_one_plant_can_be_checked_alone(three: list[Record]) -> None:
    with pytest.raises(CommandError, match="no plant “east”"):
        call_command("verify_records", plant="east")
