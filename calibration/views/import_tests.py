"""The import of past tests."""

from __future__ import annotations

from typing import Final

from calibration.imports.past_tests import Proposal, propose
from calibration.imports.test_columns import COLUMNS
from calibration.transcribing import import_tests
from register.imports.kinds import Kind, Told


def tell(proposal: Proposal) -> Told:
    """What the check of past tests says."""
    return Told(
        counts=[(len(proposal.planned), "new"), (proposal.unchanged, "recorded already")],
        sentences=(),
        new_head=("Tag", "Transmitter", "Tested on", "Readings", "Judged by", "Verdict"),
        new=[
            (
                str(one.line),
                one.tag,
                one.device,
                str(one.content.tested_on),
                one.readings,
                one.terms,
                one.verdict,
            )
            for one in proposal.planned
        ],
        changes=(),
        complaints=proposal.complaints,
        bad_rows=proposal.bad_rows,
        touched=len(proposal.planned),
        digest=proposal.digest(),
    )


TESTS: Final = Kind(
    name="tests",
    title="Past tests",
    brings="past tests",
    columns=COLUMNS,
    needed=(("tag", "tested_on", "applied", "measured"), ("serial", "tested_on", "applied", "measured")),
    propose=propose,
    act=import_tests,
    tell=tell,
    done="tests",
    says=(
        "One row is one reading. Rows of one tag or serial number and one day are one test, with an as-found run, an "
        "as-left run, or both.",
        "What was fitted on that day, and the range and requirement that held then, are found in the register. Range "
        "and tolerance that stand in the file win, and are kept with the record.",
        "The tests are judged as they would be today, marked as transcribed, and signed by nobody. A record is never "
        "changed afterwards: look at the check before you bring them in.",
        "A test whose readings are recorded already is recognised and left as it is.",
    ),
)
