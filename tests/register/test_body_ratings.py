"""Ratings that fall with temperature: as typed, between the listed temperatures, never beyond them."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from register.engineering.rating import RatingError, Table, least_rating, rating_at, rating_table
from register.engineering.units import to_si
from tests.published import read_csv

REQUESTED = read_csv("asme_b16_5_requested.csv")


def flange(group: str, rating_class: str) -> Table:
    """ASME B16.5 ratings of one material group and class where it has any, asme_b16_5_ratings_bar.csv."""
    rows = [row for row in read_csv("asme_b16_5_ratings_bar.csv") if row["material_group"] == group]
    pairs = [(row["temp_C"], row[f"cl{rating_class}"]) for row in rows]
    return rating_table([pair for pair in pairs if pair[1]], "degC", "bar")


@st.composite
def tables(draw: st.DrawFn) -> Table:
    temperatures = sorted(draw(st.sets(st.integers(200, 900), min_size=1, max_size=8)))
    return tuple((float(kelvin), draw(st.floats(1e4, 1e8))) for kelvin in temperatures)


@pytest.mark.parametrize("row", REQUESTED, ids=lambda row: f"group {row['group']} class {row['class']}")
def test_listed_ratings_of_asme_b16_5_are_met_exactly(row: dict[str, str]) -> None:
    table = flange(row["group"], row["class"])
    for temperature in ("100", "200", "300", "400"):
        assert rating_at(to_si(float(temperature), "degC"), table) == pytest.approx(float(row[temperature]) * 1e5)
    for cold in (-29.0, 0.0, 38.0):
        assert rating_at(to_si(cold, "degC"), table) == pytest.approx(float(row["-29..38"]) * 1e5)


def test_halfway_between_two_listed_temperatures_the_rating_is_halfway() -> None:
    # ASME B16.5 2.1.1: linear interpolation between listed temperatures is permitted (clause from memory).
    # Group 1.1, class 300: 43.8 bar at 200 °C, 41.9 bar at 250 °C.
    assert rating_at(to_si(225.0, "degC"), flange("1.1", "300")) == pytest.approx(42.85e5)


def test_a_listed_temperature_is_met_in_any_unit_of_temperature() -> None:
    table = rating_table([("-20", "285"), ("100", "285"), ("212", "260")], "degF", "psi")
    assert rating_at(to_si(100.0, "degC"), table) == pytest.approx(to_si(260.0, "psi"))


def test_a_rating_is_never_extrapolated() -> None:
    table = flange("1.1", "300")
    for outside in (-30.0, 538.1, 700.0):
        assert math.isnan(rating_at(to_si(outside, "degC"), table))
    assert math.isnan(rating_at(300.0, ()))
    assert math.isnan(rating_at(None, table))
    assert math.isnan(least_rating(to_si(20.0, "degC"), to_si(600.0, "degC"), table))


def test_one_listed_pair_holds_at_its_temperature_only() -> None:
    table = rating_table([("20", "100")], "degC", "bar")
    assert rating_at(to_si(20.0, "degC"), table) == 1e7
    assert math.isnan(rating_at(to_si(21.0, "degC"), table))


@pytest.mark.parametrize(
    ("pairs", "words"),
    [
        ([("20", "100"), ("20", "90")], "Line 2 .* is not above the temperature of the line before"),
        ([("100", "90"), ("20", "100")], "the lowest first"),
        ([("20", "0")], "must be above zero"),
        ([("20", "-5")], "must be above zero"),
        ([("20", "1oo")], "“1oo” is not a number"),
        ([("", "100")], "Line 1 .* Nothing is typed"),
        ([("20",)], "needs a temperature and a pressure"),
    ],
)
def test_a_rating_typed_wrongly_is_refused_by_its_line(pairs: list[tuple[str, ...]], words: str) -> None:
    with pytest.raises(RatingError, match=words):
        rating_table(pairs, "degC", "bar")


def test_typed_commas_are_decimals_in_a_rating() -> None:
    ((_, pressure),) = rating_table([("-29", "19,6")], "degC", "bar")
    assert pressure == pytest.approx(19.6e5)


@given(tables(), st.floats(150.0, 950.0))
def test_a_rating_lies_between_its_listed_neighbours_or_is_unknown(table: Table, kelvin: float) -> None:
    found = rating_at(kelvin, table)
    below = [pressure for listed, pressure in table if listed <= kelvin][-1:]
    above = [pressure for listed, pressure in table if listed >= kelvin][:1]
    if below and above:
        assert min(below + above) * (1 - 1e-12) <= found <= max(below + above) * (1 + 1e-12)
    else:
        assert math.isnan(found)


@given(tables(), st.lists(st.floats(150.0, 950.0), min_size=1, max_size=12))
def test_a_fleet_is_rated_as_its_tags_are(table: Table, kelvins: list[float]) -> None:
    together = rating_at(np.array(kelvins), table)
    assert together == pytest.approx([rating_at(kelvin, table) for kelvin in kelvins], nan_ok=True)


@given(tables(), st.floats(150.0, 950.0), st.floats(150.0, 950.0), st.floats(0.0, 1.0))
def test_no_temperature_of_the_process_is_rated_lower_than_the_least(
    table: Table, one: float, other: float, share: float
) -> None:
    low, high = sorted((one, other))
    least = least_rating(low, high, table)
    between = rating_at(low + share * (high - low), table)
    if math.isnan(least):
        assert math.isnan(rating_at(low, table)) or math.isnan(rating_at(high, table))
    else:
        assert between >= least * (1 - 1e-9)
