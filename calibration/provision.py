"""What every new plant begins with: point lists, cautions and a return-to-service checklist, all editable."""

from __future__ import annotations

from typing import Final

from django.db import transaction

from calibration.models import ChainHead, GuidanceLine, PointList
from register.auditing import Act, Actor
from register.models import Plant

POINT_LISTS: Final = (
    ("Five points, up and down", "0 25 50 75 100 75 50 25 0", False),
    (
        "Five points, up and down, three cycles",
        "0 25 50 75 100 75 50 25 0 | 0 25 50 75 100 75 50 25 0 | 0 25 50 75 100 75 50 25 0",
        False,
    ),
    ("Five points, up only", "0 25 50 75 100", False),
    ("Square root, up and down from 10 %", "10 25 50 75 100 75 50 25 10", True),
    (
        "Square root, three cycles from 10 %",
        "10 25 50 75 100 75 50 25 10 | 10 25 50 75 100 75 50 25 10 | 10 25 50 75 100 75 50 25 10",
        True,
    ),
)

Part = GuidanceLine.Part
Applies = GuidanceLine.Applies
Answer = GuidanceLine.Answer

#: What becomes of a line in hot condensing service, where that is another thing than elsewhere.
CONDENSING: Final = {
    "equaliser": GuidanceLine.Condensing.LEFT_OUT,
    "zero-at-line": GuidanceLine.Condensing.MAY_STAY_EMPTY,
}
#: Part, key, text, when it applies, kind of answer.
GUIDANCE: Final = (
    (
        Part.CAUTION,
        "permit",
        "Permit to work in hand; the control room has agreed to this instrument being taken out.",
        Applies.ALWAYS,
        Answer.TICK,
    ),
    (
        Part.CAUTION,
        "control-room",
        "Name of the person in the control room, and the time.",
        Applies.ALWAYS,
        Answer.TEXT,
    ),
    (
        Part.CAUTION,
        "bypass",
        "Trip bypassed with a compensating measure: who allowed it, what watches instead, from when.",
        Applies.TRIP,
        Answer.TEXT,
    ),
    (
        Part.CAUTION,
        "equaliser",
        "Open the equaliser before either block valve is closed, so that no side can trap pressure.",
        Applies.DIFFERENTIAL,
        Answer.TICK,
    ),
    (
        Part.CAUTION,
        "condensate",
        "Hot condensing service: the equaliser stays shut to keep the condensate legs; follow this tag's own sequence.",
        Applies.CONDENSING,
        Answer.TICK,
    ),
    (
        Part.CAUTION,
        "vent",
        "Vent slowly, away from people; what comes out may be hot, toxic or under pressure.",
        Applies.ALWAYS,
        Answer.TICK,
    ),
    (
        Part.CAUTION,
        "hazardous",
        "Only test equipment that is permitted in this hazardous area; a hot-work permit where it is not.",
        Applies.HAZARDOUS,
        Answer.TICK,
    ),
    (
        Part.CAUTION,
        "oxygen",
        "Oxygen service: only equipment and fluids cleaned for oxygen touch the wetted parts.",
        Applies.OXYGEN,
        Answer.TICK,
    ),
    (
        Part.CAUTION,
        "toxic",
        "Toxic service: breathing protection and a second person as the site's procedure demands.",
        Applies.TOXIC,
        Answer.TICK,
    ),
    (
        Part.CAUTION,
        "tracing",
        "Heat tracing can destroy the capsule for good: make sure that it cannot overheat the blocked-in transmitter.",
        Applies.TRACED,
        Answer.TICK,
    ),
    (
        Part.CAUTION,
        "overrange",
        "Apply no more than the test needs: overrange up to the body rating is survivable, not good practice.",
        Applies.ALWAYS,
        Answer.TICK,
    ),
    (
        Part.CAUTION,
        "seals",
        "Filling fluid and seals are factory work: do not open the measuring head.",
        Applies.ALWAYS,
        Answer.TICK,
    ),
    (
        Part.CHECKLIST,
        "manifold",
        "Manifold back in its operating state: equaliser shut, blocks open, vents shut and plugged.",
        Applies.ALWAYS,
        Answer.TICK,
    ),
    (
        Part.CHECKLIST,
        "zero-at-line",
        "Zero read at line pressure with the equaliser open, before it is shut (mA).",
        Applies.DIFFERENTIAL,
        Answer.READING,
    ),
    (
        Part.CHECKLIST,
        "square-root",
        "Square root is taken in one place only, as the register says.",
        Applies.SQUARE_ROOT,
        Answer.TICK,
    ),
    (Part.CHECKLIST, "damping", "Damping is set back as it was found.", Applies.ALWAYS, Answer.TICK),
    (
        Part.CHECKLIST,
        "simulation",
        "Simulation and fixed-current modes are off; the output follows the process.",
        Applies.ALWAYS,
        Answer.TICK,
    ),
    (Part.CHECKLIST, "leaks", "No leak at fittings, plugs and vents under line pressure.", Applies.ALWAYS, Answer.TICK),
    (Part.CHECKLIST, "bypass-off", "Trip bypass removed, and who was told.", Applies.TRIP, Answer.TEXT),
    (
        Part.CHECKLIST,
        "told",
        "The control room sees a sensible value and has the instrument back: name and time.",
        Applies.ALWAYS,
        Answer.TEXT,
    ),
)


@transaction.atomic
def provide_defaults(*, by: Actor, plant: Plant) -> None:
    """Give a new plant its point lists, guidance lines and the start of its chain; does nothing a second time."""
    if ChainHead.objects.filter(plant=plant).exists():
        return
    ChainHead.objects.create(plant=plant)
    lists = [
        PointList(plant=plant, name=name, points=points, for_square_root=root) for name, points, root in POINT_LISTS
    ]
    orders = dict.fromkeys(Part, 0)
    lines = []
    for part, key, text, applies, answer in GUIDANCE:
        orders[part] += 10
        lines.append(
            GuidanceLine(
                plant=plant,
                part=part,
                key=key,
                text=text,
                applies=applies,
                condensing=CONDENSING.get(key, GuidanceLine.Condensing.AS_ELSEWHERE),
                answer=answer,
                order=orders[part],
            )
        )
    PointList.objects.bulk_create(lists)
    GuidanceLine.objects.bulk_create(lines)
    act = Act(by=by, reason="Every new plant begins with these.")
    for thing in [*lists, *lines]:
        act.created(thing, plant=plant)
    act.write()
