"""The part of a row that is the transmitter: which device it is, what is written about it, since when it is fitted."""

from __future__ import annotations

import datetime
from typing import Any

from django.core.exceptions import ValidationError

from register.bulk import another
from register.changes import object_to_backdating
from register.imports.cells import unknown
from register.imports.drafts import Draft, Row
from register.imports.known import folded
from register.imports.sheet import BY_KEY, OF_DEVICE
from register.models import Fitting, Maker, MeasuringHead, Transmitter, TransmitterType
from register.searching import key

Whereabouts = Transmitter.Whereabouts


def propose_device(draft: Draft, row: Row, given: dict[str, Any], seen: dict[tuple[int, str], int]) -> None:
    """Find or add the transmitter of a row; `seen` holds the lines in which transmitters stood so far."""
    if not given:
        return
    serial = given.get("serial")
    maker = _maker(draft, row, given)
    if serial is None:
        draft.complain(row, "serial", "Which transmitter is meant? Its serial number is missing.")
    if maker is None or serial is None:
        return
    name = (maker.pk, key(serial))
    if name in seen:
        draft.complain(
            row, "serial", f"{maker} {serial} stands in {draft.cells.table.counted_in} {seen[name]} already."
        )
        return
    seen[name] = row.line
    device = draft.known.devices.get(name)
    type_ = _type(draft, row, given, maker)
    head = _head(draft, row, given, type_ or (device.type if device else None))
    if device is not None:
        _compare(draft, row, device, given, type_, head)
        row.device = device
        return
    missing = [word for word, wanted in (("type", type_), ("head", head)) if wanted is None and word not in given]
    if missing:
        draft.complain(row, missing[0], f"{maker} {serial} is new: say its {' and its '.join(missing)}.")
    if type_ is None or head is None:
        return
    row.device_is_new = True
    row.device = another(
        draft.blank_device, serial=serial, **{name: given[name] for name in OF_DEVICE if name in given}
    )
    row.device.maker, row.device.type, row.device.head = maker, type_, head


def propose_fitting(draft: Draft, row: Row, day: datetime.date | None) -> None:
    """Fit the transmitter of a row at its tag, in place of another one where there is one."""
    tag, device = row.tag, row.device
    assert tag is not None and device is not None
    current = None if row.tag_is_new else tag.current_fitting
    if current is not None and current.transmitter_id == device.pk and not row.device_is_new:
        if day is not None and day != current.fitted_on:
            draft.complain(row, "fitted_on", f"{device} is fitted at {tag} since {current.fitted_on}, not {day}.")
        return
    if day is None:
        there = f" in place of {current.transmitter}" if current else ""
        draft.complain(row, "fitted_on", f"{device} would be fitted at {tag}{there}: say on which day.")
        return
    if current is not None and not draft.may_fit:
        draft.complain(
            row,
            "serial",
            f"{current.transmitter} is fitted at {tag}: none of your roles here lets you swap it. Leave the "
            "transmitter out, or let an instrument engineer bring it in.",
        )
        return
    _check_day(draft, row, day, current)
    if device.whereabouts == Whereabouts.SCRAPPED:
        draft.complain(row, "serial", f"{device} is scrapped: it cannot be fitted again.")
    row.fitting = another(draft.blank_fitting, fitted_on=day)
    row.fitting.tag, row.fitting.transmitter = tag, device
    if current is not None:
        row.ended = current
    if not row.tag_is_new:
        goes = f"; {current.transmitter} goes to stores" if current else ""
        row.change(tag, "Fitted transmitter", current.transmitter if current else "", f"{device} since {day}{goes}")


def check_moves(draft: Draft) -> None:
    """A transmitter fitted elsewhere must be given up there by a row of the file, no later than it is fitted here."""
    given_up = {row.ended.transmitter_id: row for row in draft.rows if row.ended is not None}
    for row in draft.rows:
        if row.fitting is None or row.device is None or row.device_is_new:
            continue
        held = draft.known.fittings_of_device[row.device.pk]
        opened = next((one for one in held if one.removed_on is None), None)
        if opened is None:
            continue
        other = given_up.get(row.device.pk)
        if other is None or draft.is_bad(other):
            draft.complain(
                row,
                "serial",
                f"{row.device} is fitted at {opened.tag} since {opened.fitted_on}: remove it there first.",
            )
        elif other.fitting is not None and other.fitting.fitted_on > row.fitting.fitted_on:
            by = f"{draft.cells.table.counted_in} {other.line}"
            draft.complain(
                row, "fitted_on", f"{row.device} stays at {opened.tag} until {other.fitting.fitted_on}, by {by}."
            )


def _maker(draft: Draft, row: Row, given: dict[str, Any]) -> Maker | None:
    if "maker" not in given:
        draft.complain(row, "maker", "Which transmitter is meant? Its maker is missing.")
        return None
    found = draft.known.makers.get(folded(given["maker"]))
    if found is None:
        names = [maker.name for maker in draft.known.makers.values()]
        draft.complain(row, "maker", unknown("maker", given["maker"], names, "under “Types and heads”"))
    return found


def _type(draft: Draft, row: Row, given: dict[str, Any], maker: Maker) -> TransmitterType | None:
    if "type" not in given:
        return None
    found = draft.known.types.get((maker.pk, folded(given["type"])))
    if found is None:
        names = [type_.designation for (maker_id, _), type_ in draft.known.types.items() if maker_id == maker.pk]
        draft.complain(row, "type", unknown("type", given["type"], names, f"of {maker}"))
    return found


def _head(draft: Draft, row: Row, given: dict[str, Any], type_: TransmitterType | None) -> MeasuringHead | None:
    if "head" not in given or type_ is None:
        return None
    found = draft.known.heads.get((type_.pk, folded(given["head"])))
    if found is None:
        codes = [head.code for (type_id, _), head in draft.known.heads.items() if type_id == type_.pk]
        draft.complain(row, "head", unknown("head", given["head"], codes, f"of the type {type_.designation}"))
    return found


def _compare(
    draft: Draft,
    row: Row,
    device: Transmitter,
    given: dict[str, Any],
    type_: TransmitterType | None,
    head: MeasuringHead | None,
) -> None:
    if device.plant_id != draft.known.plant.pk:
        draft.complain(row, "serial", f"{device} is registered in another plant.")
        return
    if type_ is not None and type_.pk != device.type_id:
        draft.complain(
            row,
            "type",
            f"{device} is registered as {device.type.designation}: if that is wrong, correct it on its page.",
        )
    elif head is not None and head.pk != device.head_id:
        draft.complain(
            row,
            "head",
            f"{device} has the head {device.head.code}: another head is an intervention or a correction, with its date "
            "and reason; note it on the page of the transmitter.",
        )
    for name in OF_DEVICE:
        if name not in given:
            continue
        before, value = getattr(device, name), given[name]
        if before == value or (isinstance(before, str) and before.split() == str(value).split()):
            continue
        row.device_fields.append(name)
        row.device_before[name] = before
        row.change(device, BY_KEY[name].label, before, value)
        setattr(device, name, value)


def _check_day(draft: Draft, row: Row, day: datetime.date, current: Fitting | None) -> None:
    tag, device = row.tag, row.device
    assert tag is not None and device is not None
    if day > draft.today:
        draft.complain(row, "fitted_on", f"{day} is still to come: note a fitting when it has happened.")
    if device.made_on is not None and day < device.made_on:
        draft.complain(row, "fitted_on", f"{device} was made on {device.made_on}, after {day}.")
    if current is not None and day < current.fitted_on:
        draft.complain(
            row, "fitted_on", f"{current.transmitter} was fitted at {tag} on {current.fitted_on}, after {day}."
        )
    earlier = [
        *([] if row.tag_is_new else draft.known.fittings_of_tag[tag.pk]),
        *([] if row.device_is_new else draft.known.fittings_of_device[device.pk]),
    ]
    late = next((one for one in earlier if one.removed_on is not None and one.removed_on > day), None)
    if late is not None:
        draft.complain(
            row,
            "fitted_on",
            f"A fitting at {late.tag} lasted from {late.fitted_on} to {late.removed_on}: begin on or after its end.",
        )
    if not row.tag_is_new:
        try:
            object_to_backdating(tag, day, field="fitted_on")
        except ValidationError as error:
            draft.complain(row, "fitted_on", " ".join(error.messages))
