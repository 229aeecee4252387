"""Gauge, absolute and differential pressure, kept apart.

Nothing is guessed: gauge and absolute are turned into each other with a stated barometric pressure
only, and a difference of two pressures is neither of them.
"""

from __future__ import annotations

from enum import StrEnum
from typing import TYPE_CHECKING, Any, overload

from register.engineering.units import PRESSURE, KindMismatchError, from_si, kind_of, label, to_si

if TYPE_CHECKING:
    from numpy.typing import NDArray


class Reference(StrEnum):
    """What a pressure is measured against."""

    GAUGE = "gauge"
    ABSOLUTE = "absolute"
    DIFFERENTIAL = "differential"


class PressureReferenceError(ValueError):
    """Two pressures cannot be brought to one reference."""


class BarometricMissingError(PressureReferenceError):
    """Gauge and absolute meet, and the barometric pressure is not recorded."""


class DifferentialMixedError(PressureReferenceError):
    """A differential pressure meets a gauge or absolute one."""


@overload
def restate(pressure_pa: float, reference: str, to_reference: str, barometric_pa: float | None) -> float: ...
@overload
def restate(
    pressure_pa: NDArray[Any], reference: str, to_reference: str, barometric_pa: float | NDArray[Any] | None
) -> NDArray[Any]: ...
def restate(pressure_pa: Any, reference: str, to_reference: str, barometric_pa: Any) -> Any:
    """Restate a pressure against another reference.

    Parameters
    ----------
    pressure_pa : float or array
        Pressure [Pa].
    reference, to_reference : str
        "gauge", "absolute" or "differential".
    barometric_pa : float, array or None
        Barometric pressure of the place [Pa]; needed between gauge and absolute only.

    Raises
    ------
    BarometricMissingError
        Gauge and absolute meet without a barometric pressure.
    DifferentialMixedError
        Only one of the two references is differential.
    """
    given, asked = Reference(reference), Reference(to_reference)
    if given == asked:
        return pressure_pa
    if Reference.DIFFERENTIAL in (given, asked):
        raise DifferentialMixedError(
            f"A {given} pressure cannot be given as {asked}: a differential pressure is the difference of two "
            "pressures and says nothing about either."
        )
    if barometric_pa is None:
        raise BarometricMissingError(
            f"A {given} pressure can be given as {asked} only with the barometric pressure of the plant, "
            "which is not recorded."
        )
    return pressure_pa + barometric_pa if asked == Reference.ABSOLUTE else pressure_pa - barometric_pa


@overload
def to_absolute(pressure_pa: float, reference: str, barometric_pa: float | None) -> float: ...
@overload
def to_absolute(
    pressure_pa: NDArray[Any], reference: str, barometric_pa: float | NDArray[Any] | None
) -> NDArray[Any]: ...
def to_absolute(pressure_pa: Any, reference: str, barometric_pa: Any) -> Any:
    """Restate a gauge or absolute pressure [Pa] as absolute [Pa]; raises as `restate`."""
    return restate(pressure_pa, reference, Reference.ABSOLUTE, barometric_pa)


@overload
def to_gauge(pressure_pa: float, reference: str, barometric_pa: float | None) -> float: ...
@overload
def to_gauge(pressure_pa: NDArray[Any], reference: str, barometric_pa: float | NDArray[Any] | None) -> NDArray[Any]: ...
def to_gauge(pressure_pa: Any, reference: str, barometric_pa: Any) -> Any:
    """Restate a gauge or absolute pressure [Pa] as gauge [Pa]; raises as `restate`."""
    return restate(pressure_pa, reference, Reference.GAUGE, barometric_pa)


@overload
def convert_pressure(
    value: float,
    unit: str,
    reference: str,
    to_unit: str,
    to_reference: str,
    barometric_pa: float | None = None,
) -> float: ...
@overload
def convert_pressure(
    value: NDArray[Any],
    unit: str,
    reference: str,
    to_unit: str,
    to_reference: str,
    barometric_pa: float | NDArray[Any] | None = None,
) -> NDArray[Any]: ...
def convert_pressure(
    value: Any, unit: str, reference: str, to_unit: str, to_reference: str, barometric_pa: Any = None
) -> Any:
    """Convert a pressure to another unit and reference, e.g. psi gauge to kPa absolute.

    Parameters
    ----------
    value : float or array
        Pressure in `unit`, against `reference`.
    unit, to_unit : str
        Keys of pressure units.
    reference, to_reference : str
        "gauge", "absolute" or "differential".
    barometric_pa : float, array or None
        Barometric pressure [Pa].

    Raises
    ------
    KindMismatchError
        A unit is not one of pressure.
    BarometricMissingError, DifferentialMixedError
        As `restate`.
    """
    for key in (unit, to_unit):
        if kind_of(key) != PRESSURE:
            raise KindMismatchError(f"{label(key)} is a unit of {kind_of(key)}; a unit of pressure is wanted here.")
    if unit == to_unit and reference == to_reference:
        return value
    return from_si(restate(to_si(value, unit), reference, to_reference, barometric_pa), to_unit)
