"""What a change would mean at a tag, asked of the limit checks before it is made."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

from django.utils.safestring import SafeString

from register.checking import findings, inputs_of, with_inputs
from register.models import MeasuringHead, Range, ReferenceKind, Tag, Transmitter

if TYPE_CHECKING:
    from register.engineering.findings import Finding
    from register.engineering.limits import TagInputs

#: Checks whose outcome a range decides.
OF_THE_RANGE: Final = (
    "range_lower",
    "range_upper",
    "least_span",
    "greatest_span",
    "square_root",
    "square_root_place",
)
#: Heads offered, and serial numbers shown of each.
CARRIERS: Final = 6
SERIALS: Final = 4
#: Severity → class of its list item, and of the word before it.
CLASSES: Final = {
    "violation": ("violation", "out"),
    "caution": ("caution", "near"),
    "cannot check": ("unknown", "unknown"),
}


@dataclass(frozen=True, slots=True)
class Line:
    """One finding, ready for the page."""

    item: str
    state: str
    word: str
    sentence: str
    arithmetic: str
    demanded_source: str
    limit_source: str
    advice: str


@dataclass(frozen=True, slots=True)
class Verdict:
    """What the checks say: the lines that are not clear, worst first, how many are clear, and the strip."""

    lines: list[Line]
    clear: int
    strip: SafeString
    broken: int


def of_range(tag: Tag, setting: Range) -> Verdict:
    """What the limit checks would say with another range."""
    made = [finding for finding in findings(tag, setting=setting) if finding.check in OF_THE_RANGE]
    return _verdict(made, inputs_of(tag, setting=setting))


def of_transmitter(tag: Tag, transmitter: Transmitter) -> Verdict:
    """What the limit checks would say with another transmitter."""
    return _verdict(findings(tag, transmitter=transmitter), inputs_of(tag, transmitter=transmitter))


@dataclass(frozen=True, slots=True)
class Carrier:
    """A head that could carry what a tag asks, and the transmitters in stores that have it."""

    head: MeasuringHead
    serials: list[str]
    doubts: int


def carriers(tag: Tag, *, setting: Range | None = None) -> list[Carrier]:
    """Heads with which no check would be violated: those with one in stores first, then the tightest fit.

    Every head of the catalogue that measures the same kind of pressure is tried with the limits of its type.
    """
    from register.engineering.findings import Severity

    wanted = setting or tag.current_range
    if wanted is None:
        return []
    differential = ReferenceKind.DIFFERENTIAL
    heads = MeasuringHead.objects.select_related("type__maker")
    if wanted.reference == differential:
        heads = heads.filter(type__measures=differential)
    else:
        heads = heads.exclude(type__measures=differential)
    stored: dict[int, list[str]] = {}
    in_stores = Transmitter.objects.filter(plant=tag.plant_id, whereabouts=Transmitter.Whereabouts.STORES)
    for head_id, serial in in_stores.filter(head__in=heads).order_by("serial").values_list("head_id", "serial"):
        stored.setdefault(head_id, []).append(serial)
    found = []
    for head in heads:
        stand_in = Transmitter(plant_id=tag.plant_id, maker=head.type.maker, type=head.type, head=head)
        made = findings(tag, setting=setting, transmitter=stand_in)
        if all(one.severity is not Severity.VIOLATION for one in made):
            doubts = sum(one.severity is not Severity.CLEAR for one in made)
            found.append(Carrier(head, stored.get(head.pk, [])[:SERIALS], doubts))
    found.sort(key=lambda one: (not one.serials, one.doubts, one.head.url_si - one.head.lrl_si))
    return found[:CARRIERS]


def tag_with_inputs(tag: Tag) -> Tag:
    """The tag again, with everything that its checks read."""
    return next(with_inputs([tag.pk]))


def strip_of(inputs: TagInputs) -> SafeString:
    """The range drawn inside the head, and the static pressure against the body rating."""
    from register.engineering.limits import body_rating_at
    from register.engineering.pressure import PressureReferenceError, restate, to_gauge
    from register.engineering.ranges import known, range_strip, static_strip
    from register.marks import range_strip as draw

    head, setting, process = inputs.head, inputs.range, inputs.process
    barometric = inputs.surroundings.barometric_pa
    lrv = urv = None
    if setting is not None:
        lrv, urv = setting.lrv_si, setting.urv_si
        if head is not None:
            try:
                lrv = restate(lrv, setting.reference, head.reference, barometric)
                urv = restate(urv, setting.reference, head.reference, barometric)
            except PressureReferenceError:
                head = None
    strip = range_strip(
        lrv,
        urv,
        head.lrl_si if head else None,
        head.url_si if head else None,
        head.least_span_si if head else None,
    )
    rating = body_rating_at(inputs.type, process) if inputs.type else None

    def gauge(pressure: float | None) -> float | None:
        try:
            return None if pressure is None else to_gauge(pressure, process.reference, barometric)
        except PressureReferenceError:
            return None

    static = static_strip(rating, gauge(process.operating_pressure_pa), gauge(process.design_pressure_pa))
    return draw(
        known(strip.lrv),
        known(strip.urv),
        known(strip.least_span),
        known(static.operating),
        known(static.design),
        "The range inside the measuring head; below it the static pressure against the body rating.",
        head=head is not None,
        rated=rating is not None,
    )


def _verdict(made: Iterable[Finding], inputs: TagInputs) -> Verdict:
    from register.engineering.findings import Severity

    made = list(made)
    order: Mapping[Severity, int] = {Severity.VIOLATION: 0, Severity.CAUTION: 1, Severity.CANNOT_CHECK: 2}
    told = sorted((finding for finding in made if finding.severity in order), key=lambda one: order[one.severity])
    lines = [
        Line(
            *CLASSES[str(one.severity)],
            word=str(one.severity),
            sentence=one.sentence,
            arithmetic=one.arithmetic,
            demanded_source=one.demanded_source,
            limit_source=one.limit_source,
            advice=one.advice,
        )
        for one in told
    ]
    broken = sum(one.severity is Severity.VIOLATION for one in made)
    return Verdict(lines=lines, clear=len(made) - len(lines), strip=strip_of(inputs), broken=broken)
