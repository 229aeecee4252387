"""Gauge, absolute and differential pressure are told apart and never guessed into each other."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from register.engineering.pressure import (
    BarometricMissingError,
    DifferentialMixedError,
    Reference,
    convert_pressure,
    restate,
    to_absolute,
    to_gauge,
)
from register.engineering.units import KindMismatchError

# ISO 2533 standard atmosphere at sea level; NIST SP 811 gives the same 101 325 Pa for one atm.
STANDARD = 101325.0


def test_zero_psi_gauge_is_14_696_psi_absolute_at_standard_barometric_pressure() -> None:
    # 101325 / 6894.757 (NIST SP 811) = 14.6959.
    assert convert_pressure(0.0, "psi", "gauge", "psi", "absolute", STANDARD) == pytest.approx(14.696, abs=5e-4)


def test_full_vacuum_is_minus_one_atmosphere_gauge() -> None:
    assert convert_pressure(0.0, "bar", "absolute", "atm", "gauge", STANDARD) == pytest.approx(-1.0)


def test_a_differential_pressure_converts_between_units_only() -> None:
    assert convert_pressure(1.0, "atm", "differential", "torr", "differential") == pytest.approx(760.0, rel=1e-12)


@pytest.mark.parametrize("other", ["gauge", "absolute"])
def test_a_differential_pressure_is_not_mixed_with_another(other: str) -> None:
    for first, second in ((other, "differential"), ("differential", other)):
        with pytest.raises(DifferentialMixedError, match="says nothing about either"):
            restate(1e5, first, second, STANDARD)


def test_gauge_and_absolute_are_not_mixed_without_the_barometric_pressure() -> None:
    with pytest.raises(BarometricMissingError, match="not recorded"):
        to_absolute(1e5, "gauge", None)
    with pytest.raises(BarometricMissingError):
        convert_pressure(1.0, "bar", "absolute", "psi", "gauge")
    assert to_gauge(1e5, Reference.GAUGE, None) == 1e5


def test_a_temperature_is_no_pressure() -> None:
    with pytest.raises(KindMismatchError, match="a unit of pressure is wanted"):
        convert_pressure(1.0, "degC", "gauge", "bar", "gauge")


@given(
    st.lists(st.floats(-1e5, 1e8), min_size=1, max_size=10),
    st.floats(5e4, 1.2e5),
    st.sampled_from(["gauge", "absolute"]),
    st.sampled_from(["gauge", "absolute"]),
)
def test_arrays_are_restated_as_their_elements_are_and_back(
    values: list[float], barometric: float, first: str, second: str
) -> None:
    there = restate(np.array(values), first, second, barometric)
    assert there.tolist() == [restate(value, first, second, barometric) for value in values]
    assert restate(there, second, first, barometric) == pytest.approx(np.array(values), rel=1e-12, abs=1e-6)
