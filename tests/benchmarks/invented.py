"""The invented register: which tags there are, what they measure, how they stand today. Seeded, the same every time."""

from __future__ import annotations

import datetime
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from calibration.models import Requirement
from register.models import MeasuringHead, Range, ReferenceKind, Tag, Transmitter
from tests import cast

SEED: Final = 20
AREAS: Final = 10
INTERVAL: Final = 365
#: What tags come in: share of all [%], prefix of the number, tag, range, measuring head.
Kind = tuple[int, str, dict[str, Any], dict[str, Any], str]
KINDS: Final[tuple[Kind, ...]] = (
    (30, "PT", {}, {"lrv": "0", "urv": "10", "unit": "bar"}, "gauge"),
    (10, "PT", {"operating_pressure": "1.2"}, {"lrv": "0", "urv": "400", "unit": "kPa"}, "gauge"),
    (
        20,
        "FT",
        {"measurand": "flow", "root_extraction": "transmitter"},
        {"lrv": "0", "urv": "250", "unit": "mbar", "transfer": "square root", "reference": ReferenceKind.DIFFERENTIAL},
        "differential",
    ),
    (
        15,
        "LT",
        {"measurand": "level"},
        {"lrv": "120", "urv": "-380", "unit": "mbar", "reference": ReferenceKind.DIFFERENTIAL},
        "differential",
    ),
    # Beyond the measuring head: a violation. Close to the rating of the body: a caution. Not all known: no check.
    (8, "PT", {}, {"lrv": "0", "urv": "20", "unit": "bar"}, "gauge"),
    (9, "PT", {"design_pressure": "143", "operating_pressure": "8"}, {"lrv": "0", "urv": "12", "unit": "bar"}, "gauge"),
    (8, "PT", {"design_pressure": "", "process_max": ""}, {"lrv": "0", "urv": "6", "unit": "bar"}, "gauge"),
)
#: How tags stand: share of all [%], days since the last test (from, to); none where they have never been tested.
STATES: Final[dict[str, tuple[int, tuple[int, int] | None]]] = {
    "not due": (55, (1, 320)),
    "due": (8, (325, 364)),
    "in grace": (8, (368, 450)),
    "overdue": (8, (470, 900)),
    "deferred": (6, (380, 800)),
    "never tested": (6, None),
    "no requirement": (2, (1, 700)),
    "out of service": (5, (100, 1500)),
    "nothing fitted": (2, None),
}
#: How the last test of tags ended, and what tags matter for: share of all [%].
ENDS: Final = {"pass": 86, "fail": 8, "incomplete": 6}
CRITICALITIES: Final = {"general": 50, "production": 25, "quality": 10, "safety": 10, "environment": 5}
WHERE: Final = ("north", "south", "east", "west", "upper", "lower", "old", "new", "standby", "main", "first", "second")
WHAT: Final = (
    "cooling water", "boiler feed water", "steam", "condensate", "fuel gas", "instrument air", "nitrogen", "crude",
    "naphtha", "amine", "caustic", "brine", "flare", "lube oil", "seal oil", "hydrogen", "process water", "product",
)  # fmt: skip
ROLE: Final = (
    "to the pump", "from the pump", "to the exchanger", "drum", "column", "filter", "header", "to the furnace",
    "compressor suction", "compressor discharge", "tank", "separator", "reactor", "vent", "bypass", "manifold",
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class Built:
    """One tag of a kind with what belongs to it."""

    tag: Tag
    range: Range
    transmitter: Transmitter
    requirement: Requirement


@dataclass(frozen=True, slots=True)
class Plan:
    """Arrays with one value a tag: number of its kind, state, end of the last test, days since then, and so on."""

    kind: NDArray[np.int64]
    state: NDArray[np.str_]
    end: NDArray[np.str_]
    since: NDArray[np.int64]
    area: NDArray[np.int64]
    criticality: NDArray[np.str_]
    services: list[str]

    @classmethod
    def of(cls, tags: int) -> Plan:
        rng = np.random.default_rng(SEED)
        state = _shared(rng, tags, {name: share for name, (share, _) in STATES.items()})
        since = np.zeros(tags, dtype=np.int64)
        for name, (_, days) in STATES.items():
            if days:
                chosen = state == name
                since[chosen] = rng.integers(*days, size=int(chosen.sum()), endpoint=True)
        picks = [rng.integers(len(words), size=tags).tolist() for words in (WHERE, WHAT, ROLE)]
        return cls(
            kind=_shared(rng, tags, dict(enumerate(share for share, *_ in KINDS))),
            state=state,
            end=_shared(rng, tags, ENDS),
            since=since,
            area=rng.integers(AREAS, size=tags),
            criticality=_shared(rng, tags, CRITICALITIES),
            services=[f"{WHERE[a]} {WHAT[b]} {ROLE[c]}".capitalize() for a, b, c in zip(*picks, strict=True)],
        )

    @property
    def tested(self) -> NDArray[np.bool_]:
        """Tags with a history of tests."""
        return self.since > 0

    def last_test(self, today: datetime.date) -> NDArray[np.datetime64]:
        """Day of the last test of each tag."""
        return np.datetime64(today) - self.since.astype("timedelta64[D]")


def heads() -> dict[str, MeasuringHead]:
    """The measuring heads, stored where they are not there yet."""
    known = {head.type.measures: head for head in MeasuringHead.objects.select_related("type__maker")}
    if not known:
        differential = cast.make_type(designation="DP", measures=ReferenceKind.DIFFERENTIAL)
        known = {
            "gauge": cast.make_head(cast.make_type(designation="GP"), code="G"),
            "differential": cast.make_head(differential, code="D", unit="mbar", lrl="-620", url="620", least_span="6"),
        }
    return known


def kinds() -> list[Built]:
    """Rows that the tags of each kind are copied from; they belong to a plant of their own."""
    fitted = heads()
    area = cast.make_area(cast.make_plant("patterns", name="Patterns"))
    built = []
    for _, _, tag_values, range_values, head in KINDS:
        tag = cast.make_tag(area, **{"lowest_pressure": "0.5"} | tag_values)
        range_ = cast.make_range(tag, **range_values)
        built.append(Built(tag, range_, cast.make_transmitter(area.plant, fitted[head]), cast.make_requirement(tag)))
    return built


def _shared(rng: np.random.Generator, count: int, shares: dict[Any, int]) -> NDArray[Any]:
    """Each value as often as its share says, in random order."""
    total = sum(shares.values())
    ends = np.cumsum(list(shares.values())) * count // total
    values = np.array(list(shares))[np.searchsorted(ends, np.arange(count), side="right")]
    rng.shuffle(values)
    return values
