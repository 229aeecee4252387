"""Named units with their basis, and conversion to and from SI.

Keys are ASCII and stand in the database and in files; labels are for people. A water column always
names the temperature of its water: a bare "inH2O" is refused, since 4 °C and 68 °F differ by 0.18 %.
Loading this module is cheap: pint is imported, and the table of factors made, on first conversion.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cache
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, overload

if TYPE_CHECKING:
    from numpy.typing import NDArray

PRESSURE = "pressure"
TEMPERATURE = "temperature"
CURRENT = "current"
VOLTAGE = "voltage"
RESISTANCE = "resistance"
RATIO = "ratio"
LENGTH = "length"
DENSITY = "density"

SI_UNIT: Mapping[str, str] = MappingProxyType(
    {
        PRESSURE: "Pa",
        TEMPERATURE: "K",
        CURRENT: "A",
        VOLTAGE: "V",
        RESISTANCE: "ohm",
        RATIO: "fraction",
        LENGTH: "m",
        DENSITY: "kg/m3",
    }
)


class UnitError(ValueError):
    """A unit cannot be used; the message is fit for the person who typed it."""


class UnknownUnitError(UnitError):
    """The text names no unit of the table."""


class AmbiguousUnitError(UnitError):
    """The text fits several units; `choices` holds their keys."""

    def __init__(self, message: str, choices: tuple[str, ...]) -> None:
        super().__init__(message)
        self.choices = choices


class KindMismatchError(UnitError):
    """The unit is known but measures another kind of quantity."""


@dataclass(frozen=True, slots=True)
class Unit:
    """One row of the table; `definition` is read by pint on first conversion."""

    key: str
    label: str
    kind: str
    definition: str
    aliases: tuple[str, ...] = ()


# Water density per named basis [kg/m³]. Conventional, 4 °C and 60 °F are those behind the factors of
# NIST SP 811 (and of pint); 68 °F (20 °C) is in neither and is the IAPWS-95 value at 101.325 kPa.
WATER_BASES: Mapping[str, tuple[str, str, str]] = MappingProxyType(
    {
        "4C": ("4 °C", "4 °C", "999.972"),
        "60F": ("60 °F", "15.56 °C", "999.001"),
        "68F": ("68 °F", "20 °C", "998.2071"),
        "conv": ("conventional", "conventional", "1000"),
    }
)


def _water_units() -> Iterator[Unit]:
    for key, length, metric in (
        ("inH2O", "inch", False),
        ("mmH2O", "millimeter", True),
        ("ftH2O", "foot", False),
    ):
        for basis, (imperial_label, metric_label, density) in WATER_BASES.items():
            yield Unit(
                f"{key}_{basis}",
                f"{key} ({metric_label if metric else imperial_label})",
                PRESSURE,
                f"{length} * {density} * kilogram / meter**3 * standard_gravity",
            )


def _table() -> Mapping[str, Unit]:
    units = (
        Unit("Pa", "Pa", PRESSURE, "pascal", ("pascal", "n/m2")),
        Unit("kPa", "kPa", PRESSURE, "kilopascal", ("kilopascal",)),
        Unit("MPa", "MPa", PRESSURE, "megapascal", ("megapascal", "n/mm2")),
        Unit("bar", "bar", PRESSURE, "bar", ("bars",)),
        Unit("mbar", "mbar", PRESSURE, "millibar", ("millibar", "hpa")),
        Unit("psi", "psi", PRESSURE, "psi", ("lb/in2", "lbf/in2", "lbs/in2")),
        Unit(
            "kgf/cm2",
            "kgf/cm²",
            PRESSURE,
            "kilogram_force / centimeter**2",
            ("kg/cm2", "kp/cm2", "kgf/cm^2", "kg/cm^2", "at"),
        ),
        Unit("mmHg", "mmHg", PRESSURE, "millimeter_Hg", ("mmhg@0c", "mmhg(0c)")),
        Unit("inHg", "inHg", PRESSURE, "inch_Hg", ('"hg', "inhg@0c", "inhg(0c)", "inhg@32f", "inhg(32f)")),
        Unit("torr", "torr", PRESSURE, "torr"),
        Unit("atm", "atm", PRESSURE, "standard_atmosphere", ("atmosphere",)),
        *_water_units(),
        Unit("degC", "°C", TEMPERATURE, "degC", ("°c", "c", "oc", "celsius", "degreec")),
        Unit("degF", "°F", TEMPERATURE, "degF", ("°f", "f", "of", "fahrenheit", "degreef")),
        Unit("K", "K", TEMPERATURE, "kelvin", ("kelvin",)),
        Unit("mA", "mA", CURRENT, "milliampere", ("madc", "milliampere", "milliamp")),
        Unit("A", "A", CURRENT, "ampere", ("ampere", "amp")),
        Unit("V", "V", VOLTAGE, "volt", ("vdc", "volt", "volts")),
        Unit("mV", "mV", VOLTAGE, "millivolt", ("mvdc", "millivolt")),
        Unit("ohm", "Ω", RESISTANCE, "ohm", ("ω", "ohms")),
        Unit("kohm", "kΩ", RESISTANCE, "kiloohm", ("kω", "kohms", "kiloohm")),
        Unit("percent", "%", RATIO, "percent", ("%", "pct")),
        Unit("fraction", "fraction", RATIO, "dimensionless", ("1",)),
        Unit("mm", "mm", LENGTH, "millimeter", ("millimetre", "millimeter")),
        Unit("cm", "cm", LENGTH, "centimeter", ("centimetre", "centimeter")),
        Unit("m", "m", LENGTH, "meter", ("metre", "meter")),
        Unit("in", "in", LENGTH, "inch", ("inch", "inches", '"')),
        Unit("ft", "ft", LENGTH, "foot", ("foot", "feet", "'")),
        Unit("kg/m3", "kg/m³", DENSITY, "kilogram / meter**3", ("kg/m^3",)),
    )
    return MappingProxyType({unit.key: unit for unit in units})


UNITS: Mapping[str, Unit] = _table()

_UNIT_OF_SPELLING: Mapping[str, str] = MappingProxyType(
    {spelling.casefold(): unit.key for unit in UNITS.values() for spelling in (unit.key, unit.label, *unit.aliases)}
    | {unit.label.replace(" ", "").casefold(): unit.key for unit in UNITS.values()}
)

_WATER = re.compile(
    r"""(?P<length>inches|inch|in|i|"|mm|feet|foot|ft|')\.?(?:of)?(?:h2o|water|w\.?[cg]\.?|aq)
        (?P<basis>.*)""",
    re.VERBOSE,
)
_WATER_LENGTHS = {"mm": "mmH2O"} | dict.fromkeys(("feet", "foot", "ft", "'"), "ftH2O")
_BASIS = re.compile(r"(?:at)?[@_(\[,/-]*(?:at)?(?P<number>\d+(?:\.\d+)?)(?:°|deg)?(?P<scale>[cf]?)[)\]]?")
_BASIS_OF_TEMPERATURE = {
    ("4", "c"): "4C",
    ("39", "f"): "4C",
    ("39.2", "f"): "4C",
    ("60", "f"): "60F",
    ("15.56", "c"): "60F",
    ("15.6", "c"): "60F",
    ("68", "f"): "68F",
    ("20", "c"): "68F",
}
_REFERENCE_SUFFIX = re.compile(
    r"(?P<unit>.+?)[(\[_-]?(?P<word>gauge|absolute|abs|differential|diff|g|a|d)\.?[)\]]?", re.DOTALL | re.IGNORECASE
)
_REFERENCES = {"g": "gauge", "a": "absolute", "d": "differential"}


def label(key: str) -> str:
    """Give the unit's name for people, e.g. "inH2O (68 °F)"."""
    return _unit(key).label


def kind_of(key: str) -> str:
    """Give the kind of quantity that the unit measures."""
    return _unit(key).kind


def choices(*kinds: str) -> list[tuple[str, str]]:
    """List (key, label) of the units of these kinds, in the order of the table; no kind gives all."""
    return [(unit.key, unit.label) for unit in UNITS.values() if not kinds or unit.kind in kinds]


def resolve_unit(text: str, kind: str | None = None) -> str:
    """Find the key of a unit from what a person or a file wrote.

    Parameters
    ----------
    text : str
        A key, a label or a usual spelling: "in H2O @ 68 °F", "kgf/cm²", "°C".
    kind : str, optional
        The kind of quantity wanted; a unit of another kind is refused.

    Raises
    ------
    AmbiguousUnitError
        The spelling fits several units (a water column without its temperature).
    KindMismatchError
        The unit measures something else.
    UnitError
        The unit carries a pressure reference ("psig"), which is kept apart.
    UnknownUnitError
        No unit is spelt so.
    """
    key, reference = _resolve(text, kind)
    if reference is not None:
        raise UnitError(
            f"“{text.strip()}” is {label(key)} with a reference: give the unit as {label(key)} "
            f"and say “{reference}” in its own place."
        )
    if kind is not None and UNITS[key].kind != kind:
        raise KindMismatchError(f"“{text.strip()}” is a unit of {UNITS[key].kind}; a unit of {kind} is wanted here.")
    return key


def resolve_pressure_unit(text: str) -> tuple[str, str | None]:
    """Find the unit and, where it is written into the unit ("psig", "bar(a)"), the pressure reference.

    Returns
    -------
    tuple
        Key of the unit; "gauge", "absolute", "differential" or None where no reference is written.

    Raises
    ------
    AmbiguousUnitError, UnknownUnitError
        As `resolve_unit`.
    """
    return _resolve(text, PRESSURE)


def _resolve(text: str, kind: str | None) -> tuple[str, str | None]:
    if text in UNITS:
        return text, None
    plain = _plain(text)
    if not plain:
        raise UnknownUnitError("No unit is given.")
    found = _lookup(text, plain)
    if found is not None:
        return found, None
    split = _REFERENCE_SUFFIX.fullmatch(plain)
    if split is not None:
        found = _lookup(text, split["unit"])
        if found is not None and UNITS[found].kind == PRESSURE:
            return found, _REFERENCES[split["word"][0].casefold()]
    raise UnknownUnitError(f"“{text.strip()}” is not a unit known here. Known are: {_known(kind)}.")


@overload
def to_si(value: float, unit: str) -> float: ...
@overload
def to_si(value: NDArray[Any], unit: str) -> NDArray[Any]: ...
def to_si(value: Any, unit: str) -> Any:
    """Convert from the unit to the coherent SI unit of its kind (`SI_UNIT`); floats or arrays."""
    scale, shift = _factors()[_unit(unit).key]
    return value * scale + shift


@overload
def from_si(value: float, unit: str) -> float: ...
@overload
def from_si(value: NDArray[Any], unit: str) -> NDArray[Any]: ...
def from_si(value: Any, unit: str) -> Any:
    """Convert from the coherent SI unit of the kind to the unit; floats or arrays."""
    scale, shift = _factors()[_unit(unit).key]
    return (value - shift) / scale


@overload
def convert(value: float, unit: str, to_unit: str) -> float: ...
@overload
def convert(value: NDArray[Any], unit: str, to_unit: str) -> NDArray[Any]: ...
def convert(value: Any, unit: str, to_unit: str) -> Any:
    """Convert between two units of one kind; floats or arrays.

    Raises
    ------
    KindMismatchError
        The units measure different kinds of quantity.
    """
    _same_kind(unit, to_unit)
    return value if unit == to_unit else from_si(to_si(value, unit), to_unit)


@overload
def difference_to_si(value: float, unit: str) -> float: ...
@overload
def difference_to_si(value: NDArray[Any], unit: str) -> NDArray[Any]: ...
def difference_to_si(value: Any, unit: str) -> Any:
    """Convert a difference (span, margin, tolerance) to SI: the zero of °C or °F plays no part."""
    return value * factor(unit)


@overload
def difference_from_si(value: float, unit: str) -> float: ...
@overload
def difference_from_si(value: NDArray[Any], unit: str) -> NDArray[Any]: ...
def difference_from_si(value: Any, unit: str) -> Any:
    """Convert a difference (span, margin, tolerance) from SI to the unit."""
    return value / factor(unit)


@overload
def convert_difference(value: float, unit: str, to_unit: str) -> float: ...
@overload
def convert_difference(value: NDArray[Any], unit: str, to_unit: str) -> NDArray[Any]: ...
def convert_difference(value: Any, unit: str, to_unit: str) -> Any:
    """Convert a difference between two units of one kind; 9 °F of difference are 5 °C."""
    _same_kind(unit, to_unit)
    return value if unit == to_unit else difference_from_si(difference_to_si(value, unit), to_unit)


def factor(unit: str) -> float:
    """Give the slope of the conversion: si = value · factor + offset."""
    return _factors()[_unit(unit).key][0]


def offset(unit: str) -> float:
    """Give the offset of the conversion in SI; zero but for °C and °F."""
    return _factors()[_unit(unit).key][1]


def prepare() -> None:
    """Make the table of factors now, so that the first request does not wait for pint."""
    _factors()


@cache
def _factors() -> Mapping[str, tuple[float, float]]:
    import pint

    registry: pint.UnitRegistry[float] = pint.UnitRegistry(cache_folder=None)
    table = {}
    for unit in UNITS.values():
        si = "dimensionless" if unit.kind == RATIO else UNITS[SI_UNIT[unit.kind]].definition
        if unit.kind == TEMPERATURE:
            shift = float(registry.Quantity(0.0, unit.definition).to(si).magnitude)
            step = "kelvin" if unit.definition == "kelvin" else f"delta_{unit.definition}"
            table[unit.key] = (float(registry.Quantity(1.0, step).to(si).magnitude), shift)
        else:
            one = registry.Quantity(1.0, registry.dimensionless) * registry.parse_expression(unit.definition)
            # Fifteen digits: a chain of products leaves 0.30479999999999996 for a foot of 0.3048 m.
            table[unit.key] = (float(f"{one.to(si).magnitude:.15g}"), 0.0)
    return MappingProxyType(table)


def _unit(key: str) -> Unit:
    try:
        return UNITS[key]
    except KeyError:
        raise UnknownUnitError(f"“{key}” is not a unit known here. Known are: {_known()}.") from None


def _same_kind(unit: str, to_unit: str) -> None:
    if _unit(unit).kind != _unit(to_unit).kind:
        raise KindMismatchError(
            f"{label(unit)} ({kind_of(unit)}) cannot be given in {label(to_unit)} ({kind_of(to_unit)})."
        )


def _plain(text: str) -> str:
    for ring in "º˚":
        text = text.replace(ring, "°")
    text = "".join(unicodedata.normalize("NFKC", text).split())
    return text.replace("″", '"').replace("”", '"').replace("′", "'").replace("’", "'")


def _lookup(text: str, plain: str) -> str | None:
    if plain.startswith("mP") or plain == "mpa":
        raise AmbiguousUnitError(
            f"“{text.strip()}” reads as millipascal or as megapascal: write MPa, kPa or Pa.",
            ("MPa", "kPa", "Pa"),
        )
    folded = plain.casefold()
    spelt = _UNIT_OF_SPELLING.get(folded) or _UNIT_OF_SPELLING.get(folded.replace("deg.", "deg").replace("°", "deg"))
    if spelt is not None:
        return spelt
    water = _WATER.fullmatch(folded)
    return None if water is None else _water(text, _WATER_LENGTHS.get(water["length"], "inH2O"), water["basis"])


def _water(text: str, column: str, basis: str) -> str | None:
    keys = tuple(f"{column}_{name}" for name in WATER_BASES)
    named = ", ".join(UNITS[key].label for key in keys)
    if not basis:
        raise AmbiguousUnitError(
            f"“{text.strip()}” does not say at which water temperature: write one of {named}. "
            "Digital transmitters mostly mean 68 °F (20 °C).",
            keys,
        )
    if basis.strip("_-@([])., ") in ("conv", "conventional"):
        return f"{column}_conv"
    temperature = _BASIS.fullmatch(basis)
    if temperature is None:
        return None
    number, scale = temperature["number"], temperature["scale"]
    found = {name for (t, s), name in _BASIS_OF_TEMPERATURE.items() if t == number and scale in ("", s)}
    if len(found) != 1:
        raise UnknownUnitError(
            f"“{text.strip()}”: no water column at that temperature is known here. Known are {named}."
        )
    return f"{column}_{found.pop()}"


def _known(kind: str | None = None) -> str:
    return ", ".join(unit.label for unit in UNITS.values() if kind is None or unit.kind == kind)
