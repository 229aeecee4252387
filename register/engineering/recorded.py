"""What a check needs of the record; whatever is missing is named, never guessed."""

from __future__ import annotations

from collections.abc import Callable
from functools import partial

from register.engineering.comparing import shared_decimals, short_label, tidy
from register.engineering.demands import HeadLimits, RangeSetting, TagInputs, TypeLimits
from register.engineering.pressure import BarometricMissingError, PressureReferenceError, Reference, restate
from register.engineering.units import from_si


class LackingError(Exception):
    """A check cannot be made; `missing` names what it lacks, `why` says it for the sentence."""

    def __init__(self, missing: tuple[str, ...], why: str = "") -> None:
        super().__init__(why or ", ".join(missing))
        self.missing = missing
        self.why = why


def recorded(*numbers: tuple[str, float | None]) -> tuple[float, ...]:
    """Give the numbers if all are recorded; each comes with the words that name it.

    Raises
    ------
    LackingError
        Names every number that is not recorded.
    """
    missing = tuple(name for name, number in numbers if number is None)
    if missing:
        raise LackingError(missing)
    return tuple(number for _, number in numbers if number is not None)


def fitted_type(inputs: TagInputs) -> TypeLimits:
    """Give the limits of the fitted transmitter's type; raises LackingError where none is fitted."""
    if inputs.type is None:
        raise LackingError(("a fitted transmitter",), "no transmitter is fitted")
    return inputs.type


def fitted_head(inputs: TagInputs) -> HeadLimits:
    """Give the limits of the fitted transmitter's head; raises LackingError where none is fitted."""
    if inputs.head is None:
        raise LackingError(("a fitted transmitter",), "no transmitter is fitted")
    return inputs.head


def range_in_force(inputs: TagInputs) -> RangeSetting:
    """Give the range in force; raises LackingError where there is none."""
    if inputs.range is None:
        raise LackingError(("a range in force",), "no range is in force")
    return inputs.range


def head_and_range(inputs: TagInputs) -> tuple[HeadLimits, RangeSetting]:
    """Give head and range; raises LackingError that names both where both are missing."""
    if inputs.head is None and inputs.range is None:
        raise LackingError(
            ("a fitted transmitter", "a range in force"), "no transmitter is fitted and no range is in force"
        )
    return fitted_head(inputs), range_in_force(inputs)


def restated(
    name: str, pressure_pa: float, reference: str, wanted: str, barometric_pa: float | None, unit: str
) -> tuple[float, tuple[Callable[[], str], ...]]:
    """Bring a pressure to another reference and show the sum.

    Parameters
    ----------
    name : str
        What the pressure is, for the reason given where this cannot be done.
    pressure_pa, barometric_pa : float
        Pressures [Pa].
    reference, wanted : str
        "gauge", "absolute" or "differential".
    unit : str
        Unit in which the sum is shown.

    Returns
    -------
    tuple
        Pressure [Pa] against `wanted`; what says the sum, nothing where nothing had to be done.

    Raises
    ------
    LackingError
        The barometric pressure is missing, or a differential pressure meets another.
    """
    try:
        found = restate(pressure_pa, reference, wanted, barometric_pa)
    except BarometricMissingError:
        raise LackingError(
            ("the barometric pressure of the plant",),
            f"{name} is {reference}, it is compared with {wanted}, and the barometric pressure of the plant "
            "is not recorded",
        ) from None
    except PressureReferenceError:
        raise LackingError(
            (f"a {wanted} value of {name}",),
            f"{name} is {reference} and is compared with {wanted}; a differential pressure says nothing about "
            "either of its sides",
        ) from None
    if reference == wanted or barometric_pa is None:
        return found, ()
    return found, (partial(_sum, name, (pressure_pa, barometric_pa, found), wanted, unit),)


def _sum(name: str, pressures_pa: tuple[float, float, float], wanted: str, unit: str) -> str:
    shown = [from_si(si, unit) for si in pressures_pa]
    decimals = shared_decimals(*shown)
    first, barometric, result = (tidy(value, decimals) for value in shown)
    sign = "+" if wanted == Reference.ABSOLUTE else "−"
    return f"{name}: {first} {sign} {barometric} = {result} {short_label(unit)} {wanted}"
