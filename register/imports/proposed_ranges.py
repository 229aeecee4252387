"""The part of a row that is the range: the first of a tag, another one from a day on, or the one that is there."""

from __future__ import annotations

import datetime
from typing import Any

from django.core.exceptions import ValidationError

from register.bulk import another
from register.changes import object_to_backdating
from register.imports.drafts import Draft, Row
from register.imports.sheet import OF_RANGE
from register.models import Range, ReferenceKind, Transmitter
from register.reranging import BEFORE

NOT_BY_YOU = (
    "{} has the range {} already: none of your roles here lets you re-range. Leave the range out, or let an instrument "
    "engineer bring it in."
)
DIFFERENTIAL_ONLY = "A square root is taken of a differential pressure only; this range is {}."


def propose_range(draft: Draft, row: Row, given: dict[str, Any]) -> None:
    """Give the tag of a row a range, where the row holds one that is not there yet."""
    tag = row.tag
    assert tag is not None
    day, reason = given.get("range_from"), given.get("range_reason", "")
    if not any(name in given for name in OF_RANGE):
        return
    current = None if row.tag_is_new else tag.current_range
    new = _complete(draft, row, given, current)
    if new is None or draft.is_bad(row):
        return
    there = [] if row.tag_is_new else draft.known.ranges[tag.pk]
    if day is None and current is not None and _same(current, new):
        return
    if any(one.effective_from == day and _same(one, new) for one in there):
        return
    if current is not None and _same(current, new):
        draft.complain(
            row,
            "range_from",
            f"{tag} has this range since {current.effective_from}: another day alone changes nothing. "
            "Leave the day empty.",
        )
        return
    if there and not draft.may_rerange:
        first = next(name for name in OF_RANGE if name in given)
        draft.complain(row, first, NOT_BY_YOU.format(tag, current or there[-1]))
        return
    day = day or _first_day(row, there)
    if day is None:
        draft.complain(
            row,
            "range_from",
            f"Say from which day {tag} has this range{'' if not there else '; it has another one now'}.",
        )
        return
    if there and not reason:
        draft.complain(row, "range_reason", f"The range of {tag} would change from {there[-1]} to {new}: say why.")
    _check_day(draft, row, day, there, current)
    new.effective_from, new.reason = day, reason
    row.range = new
    if not row.tag_is_new:
        planned = " (planned)" if day > draft.today else ""
        row.change(tag, "Range", current or "", f"{new} from {day}{planned}")


def _complete(draft: Draft, row: Row, given: dict[str, Any], current: Range | None) -> Range | None:
    """The range that a row gives, completed by the one in force; None where something is missing."""
    from register.engineering.units import label, to_si

    tag = row.tag
    written = given.get("range_unit")
    unit = written.unit if written else current.unit if current else ""
    lrv, urv = (
        (given[name].text, given[name].value) if name in given else _held(current, name) for name in ("lrv", "urv")
    )
    missing = [label_of for label_of, value in (("LRV", lrv), ("URV", urv), ("the unit", unit)) if not value]
    if missing or lrv is None or urv is None:
        blamed = {"LRV": "lrv", "URV": "urv", "the unit": "range_unit"}[missing[0]]
        verb = "stands" if len(missing) == 1 else "stand"
        draft.complain(row, blamed, f"A range needs LRV, URV and their unit; {' and '.join(missing)} {verb} nowhere.")
        return None
    if current is not None and unit != current.unit and not ("lrv" in given and "urv" in given):
        draft.complain(
            row,
            "range_unit",
            f"The unit would change from {label(current.unit)} to {label(unit)}: give LRV and URV in it as well.",
        )
    reference = _reference(draft, row, given, current)
    transfer = given.get("transfer") or (current.transfer if current else Range.Transfer.LINEAR)
    root = transfer == Range.Transfer.SQUARE_ROOT
    if root and reference not in ("", ReferenceKind.DIFFERENTIAL):
        draft.complain(row, "transfer", DIFFERENTIAL_ONLY.format(reference))
    if not root and "low_cut_percent" in given and given["low_cut_percent"].value:
        draft.complain(row, "low_cut_percent", "A low cut goes with a square root; the output of this range is linear.")
    kept = current if current is not None and root else None
    cut = given["low_cut_percent"].value if "low_cut_percent" in given else kept.low_cut_percent if kept else 0.0
    below = given.get("below_cut") or (kept.below_cut if kept else Range.BelowCut.LINEAR)
    lrv_si, urv_si = to_si(lrv[1], unit), to_si(urv[1], unit)
    if lrv_si == urv_si:
        draft.complain(
            row, "urv", f"LRV and URV are both {lrv[0]} {label(unit)}: a range without a span cannot be measured."
        )
    new = another(
        draft.blank_range,
        lrv=lrv[0],
        urv=urv[0],
        unit=unit,
        reference=reference,
        lrv_si=lrv_si,
        urv_si=urv_si,
        transfer=transfer,
        low_cut_percent=cut if root else 0.0,
        below_cut=below if root else Range.BelowCut.LINEAR,
    )
    if tag is not None:
        new.tag = tag
    return new


def _held(current: Range | None, name: str) -> tuple[str, float] | None:
    from register.engineering.typed import parse_number

    if current is None:
        return None
    text = getattr(current, name)
    return text, parse_number(text)


def _reference(draft: Draft, row: Row, given: dict[str, Any], current: Range | None) -> str:
    written = given.get("range_unit")
    said, with_unit = given.get("range_reference", ""), written.reference if written else ""
    if said and with_unit and said != with_unit:
        draft.complain(row, "range_reference", f"The unit of the range says {with_unit}, this says {said}.")
    fitted = _fitted(row)
    reference: str = (
        said or with_unit or (current.reference if current else "") or (fitted.type.measures if fitted else "")
    )
    if not reference and not draft.is_bad(row):
        draft.complain(
            row, "range_reference", "Say whether the range is gauge, absolute or differential; no transmitter says it."
        )
    return reference


def _fitted(row: Row) -> Transmitter | None:
    if row.device is not None:
        return row.device
    held = None if row.tag_is_new or row.tag is None else row.tag.current_fitting
    return held.transmitter if held else None


def _same(one: Range, other: Range) -> bool:
    if (one.unit, one.reference, one.transfer) != (other.unit, other.reference, other.transfer):
        return False
    if (one.lrv_si, one.urv_si) != (other.lrv_si, other.urv_si):
        return False
    root = one.transfer == Range.Transfer.SQUARE_ROOT
    return not root or (one.low_cut_percent, one.below_cut) == (other.low_cut_percent, other.below_cut)


def _first_day(row: Row, there: list[Range]) -> datetime.date | None:
    if there:
        return None
    if row.fitting is not None:
        return row.fitting.fitted_on
    held = None if row.tag_is_new or row.tag is None else row.tag.current_fitting
    return held.fitted_on if held else None


def _check_day(draft: Draft, row: Row, day: datetime.date, there: list[Range], current: Range | None) -> None:
    if any(one.effective_from == day for one in there):
        draft.complain(
            row,
            "range_from",
            f"Another range of {row.tag} already begins on {day}: withdraw it first if it was a mistake.",
        )
    elif current is not None and row.tag is not None and day <= draft.today:
        if day < current.effective_from:
            draft.complain(row, "range_from", BEFORE.format(current, current.effective_from))
            return
        try:
            object_to_backdating(row.tag, day, field="range_from")
        except ValidationError as error:
            draft.complain(row, "range_from", " ".join(error.messages))
