"""Which fields a sheet has, and in which stage each may be entered."""

from __future__ import annotations

import re
from typing import Final

from calibration.models import Run, Sheet
from calibration.models.guidance import KEY

Stage = Sheet.Stage
ORDER: Final = (
    Stage.CONFIRM,
    Stage.CAUTIONS,
    Stage.STANDARDS,
    Stage.AS_FOUND,
    Stage.ADJUST,
    Stage.AS_LEFT,
    Stage.RETURN,
    Stage.SIGN,
)
ENDED: Final = frozenset({Stage.SIGNED, Stage.ABANDONED})
KINDS: Final = tuple(Run.Kind.values)
#: The stage in which a run is entered.
RUN_STAGE: Final = {Run.Kind.AS_FOUND.value: Stage.AS_FOUND, Run.Kind.AS_LEFT.value: Stage.AS_LEFT}
PARTS: Final = ("applied", "measured")
CONDITIONS: Final = (
    "unit", "ambient", "ambient-unit", "height", "height-unit", "static", "static-unit", "digital-unit",
)  # fmt: skip
COULD_NOT_TEST: Final = "could-not-test"
PRESENT: Final = "present"
REMARKS: Final = "remarks"
CORRECTION_REASON: Final = "correct.reason"
ADJUSTED: Final = "adjusted"
NOT_ADJUSTED: Final = "not adjusted"

_READING = re.compile(r"(as-found|as-left)\.([1-9][0-9]{0,2})(?:-([1-9]))?\.(applied|measured|digital)")
_CONDITION = re.compile(rf"(as-found|as-left)\.({'|'.join(CONDITIONS)})")
_STANDARD = re.compile(r"(as-found|as-left)\.(applied|measured)-with")
_CERTIFICATE = re.compile(r"(as-found|as-left)\.(applied|measured)-certificate")
_ANSWER = re.compile(rf"(caution|checklist)\.({KEY})")
_PLAIN: Final = {
    "confirm-tag": (Stage.CONFIRM,),
    "confirm-serial": (Stage.CONFIRM,),
    "adjust.choice": (Stage.ADJUST,),
    "adjust.log": (Stage.ADJUST, Stage.AS_LEFT),
    REMARKS: (*ORDER[3:], Stage.CORRECT),
    CORRECTION_REASON: (Stage.CORRECT, Stage.SIGN),
    PRESENT: (*ORDER, Stage.CORRECT),
}


def reading(kind: str, key: str, what: str) -> str:
    """Name of a field of a reading; `key` is the place in the point list, with "-1" … for a repeat."""
    return f"{kind}.{key}.{what}"


def reading_of(name: str) -> tuple[str, str] | None:
    """Kind of run and key of the reading that a field belongs to, if it belongs to one."""
    match = _READING.fullmatch(name)
    if match is None:
        return None
    return match[1], match[2] if match[3] is None else f"{match[2]}-{match[3]}"


def refusal(sheet: Sheet, name: str, *, points: int) -> str:
    """Why an entry for a field is not taken now; empty where it is.

    Parameters
    ----------
    sheet : Sheet
        As it stands, locked.
    name : str
        Name of the field.
    points : int
        How many inputs the point list asks for.
    """
    if sheet.stage in ENDED:
        return f"This sheet is {sheet.get_stage_display()}; nothing can be added to it."
    stages = _stages(sheet, name, points)
    if stages is None:
        return f"A sheet has no field “{name[:80]}”."
    if sheet.corrects_id is not None and name.partition(".")[0] in {*KINDS, "adjust", "checklist"}:
        stages = (Stage.CORRECT,)
    if sheet.stage in stages:
        return ""
    return _too_early_or_late(sheet, name, stages)


def _stages(sheet: Sheet, name: str, points: int) -> tuple[Sheet.Stage, ...] | None:
    if name in _PLAIN:
        return _PLAIN[name]
    if match := _READING.fullmatch(name):
        return (RUN_STAGE[match[1]],) if int(match[2]) <= points else None
    if match := _CONDITION.fullmatch(name):
        return (RUN_STAGE[match[1]],)
    if match := _STANDARD.fullmatch(name):
        before = Stage.STANDARDS if match[1] == Run.Kind.AS_FOUND else Stage.ADJUST
        return (before, RUN_STAGE[match[1]])
    if match := _ANSWER.fullmatch(name):
        part = "cautions" if match[1] == "caution" else "checklist"
        keys = {line["key"] for line in sheet.basis.get(part, ())}
        if match[2] not in keys:
            return None
        return (Stage.CAUTIONS,) if match[1] == "caution" else (Stage.RETURN,)
    return None


def _too_early_or_late(sheet: Sheet, name: str, stages: tuple[Sheet.Stage, ...]) -> str:
    what = label(name)
    if sheet.stage in ORDER and all(ORDER.index(s) > ORDER.index(Stage(sheet.stage)) for s in stages if s in ORDER):
        if name.startswith(Run.Kind.AS_LEFT):
            return f"{what}: the as-left run opens after the as-found run is closed and the adjustment is recorded."
        return f"{what}: this part of the sheet is not open yet."
    if name.startswith(Run.Kind.AS_FOUND) and sheet.as_found_closed_at:
        return f"{what}: the as-found run is closed and can no longer be changed."
    if name.startswith(Run.Kind.AS_LEFT) and sheet.as_left_closed_at:
        return f"{what}: the as-left run is closed and can no longer be changed."
    return f"{what}: this part of the sheet is closed."


def label(name: str) -> str:
    """What a person calls a field."""
    if match := _READING.fullmatch(name):
        again = f", repeat {match[3]}" if match[3] else ""
        return f"{match[1]}, reading {match[2]}{again}, {match[4]}"
    if match := _CONDITION.fullmatch(name):
        return f"{match[1]}, {_CONDITION_WORDS[match[2]]}"
    if match := _STANDARD.fullmatch(name):
        return f"{match[1]}, standard that {_PART_WORDS[match[2]]}"
    if match := _CERTIFICATE.fullmatch(name):
        return f"{match[1]}, certificate of the standard that {_PART_WORDS[match[2]]}"
    if match := _ANSWER.fullmatch(name):
        return f"{'caution' if match[1] == 'caution' else 'return to service'}, {match[2].replace('-', ' ')}"
    return _WORDS.get(name, name)


_PART_WORDS: Final = {"applied": "applied the input", "measured": "measured the output"}
_CONDITION_WORDS: Final = {
    "unit": "unit of the applied input",
    "ambient": "ambient temperature",
    "ambient-unit": "unit of the ambient temperature",
    "height": "height difference",
    "height-unit": "unit of the height difference",
    "static": "static pressure",
    "static-unit": "unit of the static pressure",
    "digital-unit": "unit of the digital value",
}
_WORDS: Final = {
    "confirm-tag": "tag read at the instrument",
    "confirm-serial": "serial number on the nameplate",
    "adjust.choice": "adjusted or not",
    "adjust.log": "what was adjusted",
    COULD_NOT_TEST: "why it could not be tested",
    REMARKS: "remarks",
    CORRECTION_REASON: "reason for the correction",
    PRESENT: "sheet open",
}
