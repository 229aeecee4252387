"""Units against NIST SP 811 and public conversion tables; spellings; conversion of floats and arrays."""

from __future__ import annotations

import subprocess
import sys

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from register.engineering.units import (
    CURRENT,
    PRESSURE,
    SI_UNIT,
    TEMPERATURE,
    UNITS,
    AmbiguousUnitError,
    KindMismatchError,
    UnitError,
    UnknownUnitError,
    choices,
    convert,
    convert_difference,
    difference_from_si,
    factor,
    from_si,
    kind_of,
    label,
    resolve_pressure_unit,
    resolve_unit,
    to_si,
)
from tests.published import ROOT, case, read_csv, read_json

# NIST SP 811 Appendix B names, as in fixtures/values/pressure_units_nist_pint.csv.
KEY_OF_NIST_NAME = {
    "atmosphere, standard (atm)": "atm",
    "atmosphere, technical (at) / kgf/cm2": "kgf/cm2",
    "bar": "bar",
    "millibar": "mbar",
    "psi": "psi",
    "torr": "torr",
    "mmHg, conventional": "mmHg",
    "inHg, conventional": "inHg",
    "mmH2O, conventional": "mmH2O_conv",
    "inH2O, conventional": "inH2O_conv",
    "inH2O (39.2 degF)": "inH2O_4C",
    "inH2O (60 degF)": "inH2O_60F",
    "ftH2O, conventional": "ftH2O_conv",
    "ftH2O (39.2 degF)": "ftH2O_4C",
}
NIST_ROWS = [row for row in read_csv("pressure_units_nist_pint.csv") if row["unit"] in KEY_OF_NIST_NAME]
TWENTY_DEGREES = read_json("pressure_units_20C.json")

pressure_units = st.sampled_from([key for key, _ in choices(PRESSURE)])
all_units = st.sampled_from(list(UNITS))
pressures = st.floats(min_value=-1e9, max_value=1e9, allow_nan=False)


def test_every_named_row_of_nist_sp_811_is_checked() -> None:
    assert {row["unit"] for row in NIST_ROWS} == set(KEY_OF_NIST_NAME)


@pytest.mark.parametrize("row", NIST_ROWS, ids=lambda row: KEY_OF_NIST_NAME[row["unit"]])
def test_pressure_factors_agree_with_nist_sp_811_to_its_last_digit(row: dict[str, str]) -> None:
    printed, half_last_digit = float(row["NIST_SP811_Pa"]), float(row["half_last_digit_Pa"])
    assert factor(KEY_OF_NIST_NAME[row["unit"]]) == pytest.approx(printed, rel=1e-14, abs=half_last_digit)


@pytest.mark.parametrize(
    ("printed", "key"),
    [
        ("inHg_0C", "inHg"),
        ("inH2O_4C", "inH2O_4C"),
        ("inH2O_60F", "inH2O_60F"),
        ("inH2O_20C", "inH2O_68F"),
        ("ftH2O_4C", "ftH2O_4C"),
        ("ftH2O_60F", "ftH2O_60F"),
        ("ftH2O_20C", "ftH2O_68F"),
    ],
)
def test_units_per_psi_agree_with_a_public_conversion_table(printed: str, key: str) -> None:
    # pressure_units_20C.json, psi_table; tolerance stated there.
    assert convert(1.0, "psi", key) == pytest.approx(TWENTY_DEGREES["psi_table"][printed], rel=1e-5)


@pytest.mark.parametrize("row", TWENTY_DEGREES["values"], ids=lambda row: row["label"])
def test_the_water_column_at_68_degrees_agrees_with_every_published_value(row: dict[str, float]) -> None:
    # pressure_units_20C.json: IAPWS-95, Kell and three public tables; they differ by up to 1e-5.
    assert factor("inH2O_68F") == pytest.approx(row["Pa"], rel=1e-5)


def test_columns_of_one_basis_stand_in_the_ratio_of_their_lengths() -> None:
    # One inch is 25.4 mm and one foot 12 in by definition (NIST SP 811).
    for basis in ("4C", "60F", "68F", "conv"):
        assert factor(f"inH2O_{basis}") == pytest.approx(25.4 * factor(f"mmH2O_{basis}"), rel=1e-14)
        assert factor(f"ftH2O_{basis}") == pytest.approx(12 * factor(f"inH2O_{basis}"), rel=1e-14)


@pytest.mark.parametrize("printed", [284, 474, 663])
def test_inches_of_water_in_psi_agree_with_an_open_textbook(printed: int) -> None:
    # Lessons In Industrial Instrumentation, level chapter; the book counts 27.68 inches of water per psi.
    found = case("liii_scaling_and_level.json", f"ethanol {printed} inWC in psi")
    assert convert(float(printed), "inH2O_4C", "psi") == pytest.approx(found["expected"], abs=found["tol"])


@pytest.mark.parametrize(
    ("celsius", "fahrenheit", "kelvin"), [(0, 32, 273.15), (100, 212, 373.15), (-40, -40, 233.15), (37.78, 100, 310.93)]
)
def test_temperatures_agree_at_the_fixed_points(celsius: float, fahrenheit: float, kelvin: float) -> None:
    # NIST SP 811 B.8: t/°C = (t/°F − 32)/1.8, T/K = t/°C + 273.15.
    assert to_si(float(celsius), "degC") == pytest.approx(kelvin, abs=1e-9)
    assert to_si(float(fahrenheit), "degF") == pytest.approx(kelvin, abs=0.005)
    assert convert(float(fahrenheit), "degF", "degC") == pytest.approx(celsius, abs=0.005)


def test_a_difference_of_temperatures_ignores_where_the_scale_begins() -> None:
    assert convert_difference(9.0, "degF", "degC") == pytest.approx(5.0)  # NIST SP 811 B.8
    assert difference_from_si(10.0, "degC") == 10.0


def test_electrical_and_length_units_have_their_prefixes() -> None:
    assert to_si(4.0, "mA") == pytest.approx(0.004)
    assert to_si(1.5, "kohm") == 1500.0
    assert to_si(1.0, "ft") == 0.3048  # NIST SP 811
    assert to_si(25.0, "percent") == 0.25


@pytest.mark.parametrize(
    ("text", "key"),
    [
        ("inH2O@68F", "inH2O_68F"),
        ("in H2O @ 68 °F", "inH2O_68F"),
        ("inH₂O (20 °C)", "inH2O_68F"),
        ("inches of water at 4 °C", "inH2O_4C"),
        ("inWC 60F", "inH2O_60F"),
        ("in. w.c. @ 39.2 °F", "inH2O_4C"),
        ("INH2O_CONV", "inH2O_conv"),
        ("mm H2O (conventional)", "mmH2O_conv"),
        ("mmH2O@15.56C", "mmH2O_60F"),
        ("ft H2O 4°C", "ftH2O_4C"),
        ("kgf/cm²", "kgf/cm2"),
        ("kg/cm2", "kgf/cm2"),
        ("°C", "degC"),
        ("℃", "degC"),
        ("º F", "degF"),
        ("deg C", "degC"),
        ("PSI", "psi"),
        ("KPA", "kPa"),
        ("mBar", "mbar"),
        ("Ω", "ohm"),
        ("kΩ", "kohm"),
        ("%", "percent"),
        ("kg/m³", "kg/m3"),
        (" bar ", "bar"),
    ],
)
def test_usual_spellings_find_their_unit(text: str, key: str) -> None:
    assert resolve_unit(text) == key


@given(all_units)
def test_keys_and_labels_find_themselves(key: str) -> None:
    assert resolve_unit(key) == key
    assert resolve_unit(label(key)) == key
    assert resolve_unit(f" {label(key)} ", kind_of(key)) == key


@pytest.mark.parametrize("text", ["inH2O", "in H2O", "inWC", "inches of water", '"WC', "mmH2O", "ftH2O", "inH2Og"])
def test_a_water_column_without_its_temperature_is_not_guessed(text: str) -> None:
    with pytest.raises(AmbiguousUnitError) as caught:
        resolve_pressure_unit(text)
    assert len(caught.value.choices) == 4
    for key in caught.value.choices:
        assert label(key) in str(caught.value)


def test_megapascal_and_millipascal_are_not_confused() -> None:
    assert resolve_unit("MPa") == "MPa"
    assert resolve_unit("MPA") == "MPa"
    with pytest.raises(AmbiguousUnitError, match="MPa, kPa or Pa"):
        resolve_unit("mPa")


@pytest.mark.parametrize("text", ["", "furlong", "inH2O@30C", "P", "bar(x)", "in H2O maybe"])
def test_an_unknown_spelling_is_refused_with_what_is_known(text: str) -> None:
    with pytest.raises(UnknownUnitError) as caught:
        resolve_unit(text)
    assert text == "" or f"“{text}”" in str(caught.value)


@pytest.mark.parametrize(
    ("text", "key", "reference"),
    [
        ("psig", "psi", "gauge"),
        ("psi(a)", "psi", "absolute"),
        ("PSID", "psi", "differential"),
        ("BAR (ABS)", "bar", "absolute"),
        ("bar(g)", "bar", "gauge"),
        ("bara", "bar", "absolute"),
        ("kPa abs", "kPa", "absolute"),
        ("mbar diff.", "mbar", "differential"),
        ("kg/cm2g", "kgf/cm2", "gauge"),
        ("inH2O@68F gauge", "inH2O_68F", "gauge"),
        ("Pa", "Pa", None),
    ],
)
def test_a_reference_written_into_the_unit_is_told_apart(text: str, key: str, reference: str | None) -> None:
    assert resolve_pressure_unit(text) == (key, reference)


def test_where_only_a_unit_is_wanted_a_reference_in_it_is_refused_in_words() -> None:
    with pytest.raises(UnitError, match="give the unit as psi and say “gauge” in its own place"):
        resolve_unit("psig")


def test_a_unit_of_another_kind_is_refused() -> None:
    with pytest.raises(KindMismatchError, match="a unit of pressure is wanted"):
        resolve_unit("°C", PRESSURE)
    with pytest.raises(KindMismatchError):
        convert(1.0, "bar", "mA")
    with pytest.raises(UnknownUnitError):
        to_si(1.0, "furlong")


def test_choices_are_listed_by_kind_with_labels_for_people() -> None:
    assert ("inH2O_68F", "inH2O (68 °F)") in choices(PRESSURE)
    assert [key for key, _ in choices(TEMPERATURE)] == ["degC", "degF", "K"]
    assert {kind_of(key) for key, _ in choices(PRESSURE, CURRENT)} == {PRESSURE, CURRENT}
    assert len(choices()) == len(UNITS)


def test_the_si_unit_of_every_kind_is_the_unit_itself() -> None:
    for unit in SI_UNIT.values():
        assert to_si(1.0, unit) == 1.0


@given(pressures, all_units)
def test_to_si_and_back_gives_the_same_value(value: float, unit: str) -> None:
    assert from_si(to_si(value, unit), unit) == pytest.approx(value, rel=1e-12, abs=1e-9)


@given(st.lists(pressures, min_size=1, max_size=20), pressure_units, pressure_units)
def test_arrays_convert_as_their_elements_do(values: list[float], unit: str, to_unit: str) -> None:
    together = convert(np.array(values), unit, to_unit)
    assert together.tolist() == [convert(value, unit, to_unit) for value in values]


@given(pressures, pressure_units, pressure_units, pressure_units)
def test_converting_by_a_detour_changes_nothing(value: float, unit: str, detour: str, to_unit: str) -> None:
    direct = convert(value, unit, to_unit)
    assert convert(convert(value, unit, detour), detour, to_unit) == pytest.approx(direct, rel=1e-12, abs=1e-300)


def test_listing_units_loads_neither_pint_nor_numpy() -> None:
    code = (
        "import sys; from register.engineering.units import choices, resolve_unit; choices(); resolve_unit('psi'); "
        "assert not {'pint', 'numpy'} & set(sys.modules), sorted(sys.modules)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False, cwd=ROOT)
    assert done.returncode == 0, done.stderr
