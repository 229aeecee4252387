"""The import of past tests."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from typing import Final

from calibration.imports.past_tests import Proposal, propose
from calibration.imports.test_columns import COLUMNS
from calibration.imports.visits import KINDS
from calibration.transcribing import import_tests
from register.imports.kinds import Kind, Told


def tell(proposal: Proposal) -> Told:
    """What the check of past tests says."""
    return Told(
        counts=[(len(proposal.planned), "new"), (proposal.unchanged, "recorded already")],
        sentences=list(_sentences(proposal)),
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


def _sentences(proposal: Proposal) -> Iterator[str]:
    planned = proposal.planned
    new, recorded = sum(one.count for one in planned), proposal.unchanged_readings
    if planned or proposal.unchanged:
        yield f"{new:,} {_readings(new)} new, {recorded:,} {_readings(recorded)} recorded already."
    for kind in KINDS:
        verdicts = Counter(one.verdicts[kind] for one in planned if kind in one.verdicts)
        if verdicts:
            yield f"{kind.capitalize()}: {', '.join(f'{count:,} {verdict}' for verdict, count in verdicts.items())}."
    lacking = sum(bool(one.lacking) for one in planned)
    if lacking:
        yield (
            f"In {_tests(lacking)} readings are missing, so that {'it' if lacking == 1 else 'they'} cannot pass and "
            f"{'moves' if lacking == 1 else 'move'} no due date; the column “Verdict” says which."
        )
    unread = sum(not one.verdicts for one in planned)
    if unread:
        yield f"{unread:,} could not be tested."
    assumed = [one for one in planned if one.content.basis.notes.get("assumed")]
    if assumed:
        yield (
            f"Assumed for {_tests(len(assumed))}, which {'is' if len(assumed) == 1 else 'are'} older than what the "
            "register knows of the tag: its first range or requirement. The column “Judged by” says which. If that is "
            "not so, give range and tolerance in the file."
        )
    kept = sum(any(use.exception for run in one.content.runs for use in run.standards) for one in planned)
    if kept:
        yield (
            f"In {_tests(kept)} a standard has no certificate on record that held on the day; that is kept as a remark."
        )


def _readings(count: int) -> str:
    return "reading is" if count == 1 else "readings are"


def _tests(count: int) -> str:
    return f"{count:,} test{'' if count == 1 else 's'}"


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
        "and tolerance that stand in the file win, and are kept with the record. For a day before the first range or "
        "requirement of a tag that first one is assumed, and the check says so.",
        "A run must hold every point of the list that was required on its day. Where nothing was required yet, it must "
        "reach within 10 % of both ends of the range (of a square root: the upper end, and a level of at most 25 %) "
        "and hold at least three levels. A run that lacks any of these is incomplete: it does not pass and moves no "
        "due date.",
        "A visit on which it could not be tested is one row with the reason and without readings.",
        "The tests are judged as they would be today, marked as transcribed, and signed by nobody. A record is never "
        "changed afterwards: look at the check before you bring them in.",
        "A test whose readings are recorded already is recognised and left as it is.",
    ),
)
