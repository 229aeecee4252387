"""What the register list and the due list share: filters from the address, sort links, paging, files."""

from __future__ import annotations

import datetime
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from html import escape
from typing import Any, Final

from django.http import HttpRequest, QueryDict
from django.http.response import HttpResponseBase
from django.urls import reverse
from django.utils.safestring import SafeString

from calibration.contexts import rows
from calibration.models import ScheduleState, Verdict
from calibration.models.standing import schedule_state
from calibration.queries import listing
from calibration.queries.asking import NO_TEST, Asked
from calibration.queries.listing import Page
from register import exporting
from register.auditing import Actor
from register.models import Criticality, Plant

Choices = Sequence[tuple[str, str]]
SERVICES: Final[Choices] = (("in", "in service"), ("out", "out of service"), ("unfitted", "nothing fitted"))
FLAGS: Final[Choices] = (
    ("violation", "violation"),
    ("caution", "caution"),
    ("cannot check", "cannot check"),
    ("accepted", "accepted"),
    ("none", "none open"),
)
VERDICTS: Final[Choices] = (*Verdict.choices, (NO_TEST, "no test"))
FILE_HEAD: Final = (
    "tag",
    "service",
    "area",
    "criticality",
    "craft",
    "outage only",
    "transmitter",
    "range",
    "unit",
    "square root",
    "open flags",
    "accepted flags",
    "worst open flag",
    "last tested",
    "last verdict",
    "as-found verdict",
    "as-found worst error / MPE",
    "as-left worst error / MPE",
    "state",
    "interval (months)",
    "window opens",
    "due",
    "grace until",
    "deferred until",
)


@dataclass(frozen=True, slots=True)
class Select:
    """A filter as a form field."""

    name: str
    label: str
    options: SafeString
    is_set: bool


@dataclass(frozen=True, slots=True)
class Sort:
    """A heading by which the list can be sorted; `aria` says how it is sorted now."""

    label: str
    url: str
    aria: str


@dataclass(frozen=True, slots=True)
class Paging:
    total: str
    what: str
    earlier: str
    later: str


def areas_of(plant: Plant) -> list[tuple[str, str]]:
    return [(code, f"{code} {name}") for code, name in plant.areas.order_by("code").values_list("code", "name")]


def read_asked(given: QueryDict, areas: Choices, *, sort: str) -> Asked:
    known = {
        "area": [code for code, _ in areas],
        "service": [value for value, _ in SERVICES],
        "flag": [value for value, _ in FLAGS],
        "state": ScheduleState.values,
        "verdict": [value for value, _ in VERDICTS],
        "criticality": Criticality.values,
    }
    return Asked.read(given, known, sort=sort)


def selects(asked: Asked, areas: Choices, *names: str) -> list[Select]:
    """The named filters, each with what is chosen now."""
    offered: dict[str, tuple[str, str, Choices]] = {
        "area": ("Area", "all areas", areas),
        "service": ("Service", "any", SERVICES),
        "flag": ("Flags", "any", FLAGS),
        "state": ("Due state", "any", ScheduleState.choices),
        "verdict": ("Last verdict", "any", VERDICTS),
        "criticality": ("Criticality", "any", Criticality.choices),
    }
    made = []
    for name in names:
        label, nothing, choices = offered[name]
        now = getattr(asked, name)
        options = "".join(_option(value, words, value == now) for value, words in (("", nothing), *choices))
        made.append(Select(name, label, SafeString(options), is_set=now != ""))
    return made


def _option(value: str, words: str, chosen: bool) -> str:
    return f'<option value="{escape(value)}"{" selected" if chosen and value else ""}>{escape(words)}</option>'


def sorts(asked: Asked, heads: Mapping[str, str]) -> dict[str, Sort]:
    """Headings by the sort they stand for; the one in force turns the list round."""
    made = {}
    for name, label in heads.items():
        now = asked.sort.removeprefix("-") == name
        turned = f"-{name}" if asked.sort == name else name
        aria = "" if not now else "descending" if asked.descending else "ascending"
        made[name] = Sort(label, asked.address(sort=turned), aria)
    return made


def paging(page: Page, asked: Asked) -> Paging:
    return Paging(
        total=page.total,
        what="tag" if page.total == "1" else "tags",
        earlier=asked.address(before=page.earlier, after="") if page.earlier else "",
        later=asked.address(after=page.later, before="") if page.later else "",
    )


def tag_url() -> str:
    """The address of a tag's page up to its key, so that a list asks for it once."""
    return reverse("tag", args=[0]).removesuffix("0/")


def is_filtered(asked: Asked) -> bool:
    return any((asked.area, asked.service, asked.flag, asked.state, asked.verdict, asked.criticality, asked.text))


def export(request: HttpRequest, plant: Plant, asked: Asked, *, name: str) -> HttpResponseBase:
    """The whole filtered list as a CSV file; that it was taken is noted in the trail."""
    today = plant.today()
    remark = f"{name} as CSV ({asked.address(plant='', sort='').removeprefix('?') or 'all tags'})"
    exporting.note_export(by=Actor.of(request), thing=plant, plant=plant, remark=remark)
    return exporting.csv_response(
        f"{name.replace(' ', '-')}-{plant.code}-{today}.csv", FILE_HEAD, _lines(plant, asked, today)
    )


def _lines(plant: Plant, asked: Asked, today: datetime.date) -> Iterator[tuple[Any, ...]]:
    for row in listing.everything(plant, asked, today, rows.COLUMNS):
        state = schedule_state(
            today, row["phase"], row["due_on"], row["grace_until"], row["window_opens_on"], row["deferred_until"]
        )
        rank = row["flag_rank"]
        yield (
            row["number"],
            row["service"],
            row["area_code"],
            rows.CRITICALITIES.get(row["criticality"], row["criticality"]),
            row["craft"],
            "yes" if row["outage_only"] else "no",
            row["serial"],
            row["range_text"],
            row["range_unit"],
            "yes" if row["square_root"] else "no",
            row["open_flags"],
            row["accepted_flags"],
            rows.FLAG_WORDS[rank][0] if rank < len(rows.FLAG_WORDS) else "",
            row["last_tested_on"],
            row["last_verdict"],
            row["as_found_verdict"],
            _ratio(row["as_found_ratio"]),
            _ratio(row["as_left_ratio"]),
            state.value,
            row["interval_months"],
            row["window_opens_on"],
            row["due_on"],
            row["grace_until"],
            row["deferred_until"],
        )


def _ratio(value: float | None) -> str:
    return "" if value is None else f"{value:.3f}"
