"""Rows of the register list and the due list as ready strings, so that a template only sets them in place."""

from __future__ import annotations

import datetime
from collections.abc import Mapping
from dataclasses import dataclass
from html import escape
from typing import Any, Final

from django.utils.safestring import SafeString

from calibration.drawing.marks import due_mark, error_mark
from calibration.models import ScheduleState, Verdict
from calibration.models.standing import schedule_state
from register.marks import range_strip
from register.models import Criticality

#: What the rows below are made from; names of columns of `Standing`.
COLUMNS: Final = (
    "tag_id",
    "number",
    "service",
    "area_code",
    "criticality",
    "craft",
    "outage_only",
    "transmitter_id",
    "serial",
    "range_text",
    "range_unit",
    "square_root",
    "strip",
    "flag_rank",
    "open_flags",
    "accepted_flags",
    "phase",
    "interval_months",
    "due_on",
    "window_opens_on",
    "grace_until",
    "deferred_until",
    "last_accepted_on",
    "last_tested_on",
    "last_verdict",
    "as_found_verdict",
    "as_found_ratio",
    "as_left_ratio",
)

STATE_TONES: Final[dict[str, str]] = {
    ScheduleState.NOT_IN_SERVICE: "quiet",
    ScheduleState.NEVER_TESTED: "unknown",
    ScheduleState.NO_REQUIREMENT: "unknown",
    ScheduleState.DEFERRED: "quiet",
    ScheduleState.OVERDUE: "out",
    ScheduleState.IN_GRACE: "near",
    ScheduleState.DUE: "near",
    ScheduleState.NOT_DUE: "ok",
}
VERDICT_TONES: Final[dict[str, str]] = {
    Verdict.PASS: "ok",
    Verdict.CONDITIONAL_PASS: "near",
    Verdict.CONDITIONAL_FAIL: "out",
    Verdict.FAIL: "out",
    Verdict.NOT_DECIDABLE: "unknown",
    Verdict.INCOMPLETE: "unknown",
}
#: By rank: word, tone.
FLAG_WORDS: Final = (("violation", "out"), ("caution", "near"), ("cannot check", "unknown"))
NOTHING: Final = SafeString('<span class="quiet">–</span>')
CRITICALITIES: Final[dict[str, str]] = dict(Criticality.choices)


@dataclass(frozen=True, slots=True)
class Row:
    """One tag in a list; every part is HTML as it stands in its cell."""

    url: str
    number: str
    service: str
    area: str
    range: str
    strip: str
    flag: str
    verdict: str
    error: str
    state: str
    due: str
    due_mark: str
    window: str
    interval: str
    criticality: str
    craft: str


def row_of(stored: Mapping[str, Any], today: datetime.date, tag_url: str) -> Row:
    """Make the cells of one row from the columns named in `COLUMNS`; `tag_url` leads to a tag but for its key."""
    state = schedule_state(
        today,
        stored["phase"],
        stored["due_on"],
        stored["grace_until"],
        stored["window_opens_on"],
        stored["deferred_until"],
    )
    due = "" if state is ScheduleState.NOT_IN_SERVICE or stored["due_on"] is None else stored["due_on"].isoformat()
    return Row(
        url=f"{tag_url}{stored['tag_id']}/",
        number=escape(stored["number"]),
        service=escape(stored["service"]),
        area=escape(stored["area_code"]),
        range=range_cell(stored),
        strip=strip_cell(stored["strip"], stored["range_text"]),
        flag=flag_cell(stored),
        verdict=verdict_cell(stored),
        error=error_cell(stored),
        state=state_word(state),
        due=due,
        due_mark=due_cell(stored, state, today),
        window=_window(stored),
        interval="–" if stored["interval_months"] is None else f"{stored['interval_months']} mo",
        criticality=escape(CRITICALITIES.get(stored["criticality"], stored["criticality"])),
        craft=escape(stored["craft"]) + (", outage only" if stored["outage_only"] else ""),
    )


def state_word(state: ScheduleState) -> SafeString:
    return SafeString(f'<span class="state {STATE_TONES[state]}">{state.value}</span>')


def range_cell(stored: Mapping[str, Any]) -> SafeString:
    """The range with its unit; a square root is marked."""
    if not stored["range_text"]:
        return NOTHING
    root = " √" if stored["square_root"] else ""
    text, unit = escape(stored["range_text"]).replace("-", "−"), escape(stored["range_unit"])
    return SafeString(f'{text} <span class="unit">{unit}{root}</span>')


def strip_cell(strip: list[float | None], range_text: str) -> SafeString:
    """The range strip, with the same said in words."""
    if not strip:
        return range_strip(None, None, None, None, None, "nothing fitted", head=False, rated=False)
    lrv, urv, least, operating, design, rated = strip
    words = []
    if lrv is not None and urv is not None:
        words.append(f"{range_text} takes {lrv * 100:.0f} % to {urv * 100:.0f} % of the measuring head")
    for name, share in (("operating", operating), ("design", design)):
        if share is not None:
            words.append(f"{name} pressure {share * 100:.0f} % of the body rating")
    return range_strip(lrv, urv, least, operating, design, "; ".join(words), rated=rated is not None)


def flag_cell(stored: Mapping[str, Any]) -> SafeString:
    """The worst open flag, and how many stand open; accepted ones stay visible."""
    open_flags, accepted, rank = stored["open_flags"], stored["accepted_flags"], stored["flag_rank"]
    if rank < len(FLAG_WORDS):
        word, tone = FLAG_WORDS[rank]
        more = f" <small>+{open_flags - 1}</small>" if open_flags > 1 else ""
        return SafeString(f'<span class="state {tone}">{word}</span>{more}')
    if accepted:
        return SafeString(f'<span class="state quiet">{accepted} accepted</span>')
    return NOTHING


def verdict_cell(stored: Mapping[str, Any]) -> SafeString:
    """The verdict of the last run of the last test; what was found before it where that differs."""
    last, found = stored["last_verdict"], stored["as_found_verdict"]
    if not last:
        return NOTHING
    before = f"<small>found {found},</small> " if found and found != last else ""
    return SafeString(f'{before}<span class="state {VERDICT_TONES.get(last, "unknown")}">{last}</span>')


def error_cell(stored: Mapping[str, Any]) -> SafeString:
    found, left = stored["as_found_ratio"], stored["as_left_ratio"]
    if found is None and left is None:
        return SafeString("")
    said = [
        f"{name} {abs(ratio) * 100:.0f} % of the MPE"
        for name, ratio in (("as-found", found), ("as-left", left))
        if ratio is not None
    ]
    return error_mark(found, left, f"worst error {', '.join(said)}")


def due_cell(stored: Mapping[str, Any], state: ScheduleState, today: datetime.date) -> SafeString:
    if state is ScheduleState.NOT_IN_SERVICE:
        return SafeString("")
    due, limit, deferred = stored["due_on"], stored["grace_until"], stored["deferred_until"]
    said = [state.value]
    if due is not None:
        said.append(f"due {due}")
    if limit is not None:
        said.append(f"grace ends {limit}")
    if deferred is not None:
        said.append(f"deferred until {deferred}")
    return due_mark(
        today, last=stored["last_accepted_on"], due=due, limit=limit, deferred=deferred, words=", ".join(said)
    )


def _window(stored: Mapping[str, Any]) -> str:
    """From the opening of the window to the end of grace."""
    opens, limit = stored["window_opens_on"], stored["grace_until"]
    return "" if opens is None or limit is None else f"{opens} to {limit}"
