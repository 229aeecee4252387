"""Two-wire loops: what a supply can drive at the high failure current."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from register.engineering.loop import (
    DEFAULT_HIGH_FAILURE_CURRENT_MA,
    available_resistance,
    least_supply,
    resistance_margin,
)
from tests.published import read_json

volts = st.floats(0.0, 60.0)
ohms = st.floats(0.0, 2000.0)
currents = st.floats(20.0, 24.0)


def test_24_volts_drive_what_ohm_s_law_says_at_the_failure_current() -> None:
    # 24 V DC two-wire supply (common practice, no source), 10.5 V lift-off: 13.5 V / 22.5 mA = 600 Ω by Ohm's law.
    assert available_resistance(24.0, 10.5) == pytest.approx(600.0)
    assert resistance_margin(24.0, 10.5, 650.0) == pytest.approx(-50.0)
    assert least_supply(650.0, 10.5) == pytest.approx(10.5 + 650.0 * 0.0225)


def test_the_usual_failure_current_is_failure_information_in_the_sense_of_namur_ne_43() -> None:
    assert read_json("ne43_limits.json")["fault_high_min_mA"] <= DEFAULT_HIGH_FAILURE_CURRENT_MA


def test_a_supply_below_the_lift_off_voltage_drives_nothing() -> None:
    assert available_resistance(10.0, 12.0) < 0


def test_missing_numbers_give_no_answer() -> None:
    assert math.isnan(available_resistance(None, 12.0))
    assert math.isnan(resistance_margin(24.0, 12.0, None))
    assert math.isnan(available_resistance(24.0, 12.0, 0.0))


@given(volts, volts, ohms, currents)
def test_the_margin_is_zero_at_the_least_supply(_: float, least: float, resistance: float, current: float) -> None:
    needed = least_supply(resistance, least, current)
    assert resistance_margin(needed, least, resistance, current) == pytest.approx(0.0, abs=1e-9)


@given(volts, volts, ohms, currents)
def test_a_failure_current_above_20_ma_leaves_less_than_20_ma_would(
    supply: float, least: float, resistance: float, current: float
) -> None:
    failing = resistance_margin(supply, least, resistance, current)
    measuring = resistance_margin(supply, least, resistance, 20.0)
    assert failing <= measuring + 1e-9 if supply >= least else failing >= measuring - 1e-9


@given(st.lists(st.tuples(volts, volts, ohms, currents), min_size=1, max_size=10))
def test_a_fleet_of_loops_is_checked_as_its_loops_are(rows: list[tuple[float, float, float, float]]) -> None:
    together = resistance_margin(*np.array(rows).T)
    assert together == pytest.approx([resistance_margin(*row) for row in rows])
