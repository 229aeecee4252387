"""The limit checks of a tag, each against a case whose numbers can be done by hand."""

from __future__ import annotations

import subprocess
import sys

import pytest

from register.engineering.findings import CHECKS, Severity, worst
from register.engineering.limits import Process, Surroundings, TagInputs, body_rating_at, check_all
from register.engineering.rating import rating_table
from register.engineering.units import to_si
from tests.published import ROOT
from tests.register.limit_cases import LOOP, SOUND, TYPE, WATER, changed, finding


def test_a_sound_tag_is_clear_in_every_check() -> None:
    found = check_all(SOUND)
    assert [one.check for one in found] == list(CHECKS)
    assert {one.severity for one in found} == {Severity.CLEAR}
    assert worst(found) is Severity.CLEAR


def test_a_range_above_its_head_is_said_as_a_tradesman_would() -> None:
    found = finding("range_upper", changed(range={"urv_si": to_si(260.0, WATER)}))
    assert found.severity is Severity.VIOLATION
    assert found.sentence == "URV 260 inH2O is 10 inH2O (4.0 %) above the head's upper limit of 250."
    assert found.arithmetic == "250 − 260 = −10 inH2O (68 °F); −10 / 250 = −4.0 %"
    assert (found.demanded, found.limit, found.margin) == pytest.approx((260.0, 250.0, -10.0))
    assert found.margin_percent == pytest.approx(-4.0)
    assert (found.percent_of, found.unit_label) == ("the head's URL", "inH2O (68 °F)")
    assert found.demanded_source == "range: URV 260 inH2O (68 °F)"
    assert found.limit_source == "measuring head D3: URL 250 inH2O (68 °F) differential"


def test_the_end_that_leaves_the_head_is_named_in_a_reverse_range() -> None:
    reverse = changed(range={"lrv_si": to_si(260.0, WATER), "urv_si": to_si(-300.0, WATER)})
    assert finding("range_upper", reverse).sentence.startswith("LRV 260 inH2O is 10 inH2O (4.0 %) above")
    low = finding("range_lower", reverse)
    assert low.sentence == "URV −300 inH2O is 50 inH2O (20.0 %) below the head's lower limit of −250."
    assert low.arithmetic.startswith("−300 − (−250) = −50 inH2O")


def test_a_range_may_end_on_the_limits_of_its_head() -> None:
    full = changed(range={"lrv_si": to_si(-250.0, WATER), "urv_si": to_si(250.0, WATER)})
    for check in ("range_lower", "range_upper", "greatest_span"):
        assert finding(check, full).severity is Severity.CLEAR
    assert finding("range_upper", full).sentence == "URV 250 inH2O is exactly at the head's upper limit of 250."


def test_rounding_by_units_does_not_put_a_range_outside() -> None:
    # 250 inH2O at 68 °F typed in kPa with all its digits comes back a few units of the last place off.
    head_limit = to_si(250.0, WATER)
    assert finding("range_upper", changed(range={"urv_si": head_limit * (1 + 1e-12)})).severity is Severity.CLEAR
    assert finding("range_upper", changed(range={"urv_si": head_limit * (1 + 1e-6)})).severity is Severity.VIOLATION


def test_spans_are_held_between_the_least_and_the_greatest() -> None:
    short = finding("least_span", changed(range={"urv_si": to_si(20.0, WATER)}))
    assert short.severity is Severity.VIOLATION
    assert short.sentence == "Span 20 inH2O is 5 inH2O (20.0 %) below the head's least span of 25."
    assert short.arithmetic.startswith("|20 − 0| = 20; 20 − 25 = −5 inH2O")
    near = changed(range={"urv_si": to_si(26.0, WATER)})
    assert finding("least_span", near).severity is Severity.CAUTION
    long = changed(head={"greatest_span_si": to_si(100.0, WATER)})
    assert finding("greatest_span", long).sentence == (
        "Span 125 inH2O is 25 inH2O (25.0 %) above the head's greatest span of 100."
    )


def test_without_a_greatest_span_the_width_of_the_head_stands_for_it() -> None:
    found = finding("greatest_span", SOUND)
    assert found.limit == pytest.approx(500.0)
    assert "URL − LRL" in found.limit_source


def test_square_root_belongs_on_a_differential_pressure_only() -> None:
    on_gauge = finding("square_root", changed(range={"reference": "gauge"}))
    assert on_gauge.severity is Severity.VIOLATION
    assert "only a differential pressure rises with the square of the flow" in on_gauge.sentence
    assert finding("square_root", changed(head={"reference": "gauge"})).severity is Severity.VIOLATION
    assert (
        finding("square_root", changed(range={"reference": "gauge", "transfer": "linear"})).severity is Severity.CLEAR
    )


@pytest.mark.parametrize(
    ("transfer", "place", "severity"),
    [
        ("square root", "transmitter", Severity.CLEAR),
        ("square root", "control system", Severity.VIOLATION),
        ("square root", "none", Severity.CAUTION),
        ("linear", "transmitter", Severity.VIOLATION),
        ("linear", "control system", Severity.CLEAR),
        ("linear", "none", Severity.CLEAR),
        ("linear", "", Severity.CANNOT_CHECK),
        ("square root", "", Severity.CANNOT_CHECK),
    ],
)
def test_the_square_root_is_taken_in_exactly_one_place(transfer: str, place: str, severity: Severity) -> None:
    inputs = changed(range={"transfer": transfer, "root_extraction": place})
    assert finding("square_root_place", inputs).severity is severity


@pytest.mark.parametrize("range_", [{"of_flow": False}, {"reference": "gauge"}])
def test_nobody_needs_to_say_where_the_root_is_taken_of_what_has_none(range_: dict[str, object]) -> None:
    inputs = changed(range={"transfer": "linear", "root_extraction": "", **range_})
    assert finding("square_root_place", inputs).severity is Severity.CLEAR


def test_static_pressure_is_held_against_the_derated_body() -> None:
    # 1500 psi at 250 °F and 1200 psi at 400 °F are 1400 psi at 300 °F.
    hot = changed(process={"process_max_k": to_si(300.0, "degF"), "design_pressure_pa": to_si(1450.0, "psi")})
    found = finding("static_pressure", hot)
    assert found.severity is Severity.VIOLATION
    assert found.sentence == "Design pressure 1450 psi is 50 psi (3.6 %) above the body rating of 1400 at 300 °F."
    assert found.arithmetic == (
        "body rating at 300 °F: 1500 + (1200 − 1500) × (300 − 250) / (400 − 250) = 1400 psi; "
        "1400 − 1450 = −50 psi; −50 / 1400 = −3.6 %"
    )
    assert found.limit_source == "type M2: body rating at 300 °F 1400 psi gauge"
    rating = body_rating_at(hot.type, hot.process)
    assert rating == pytest.approx(to_si(1400.0, "psi"))


def test_the_weakest_temperature_between_coldest_and_hottest_process_counts() -> None:
    cold_weak = rating_table([("0", "100"), ("20", "200"), ("100", "150")], "degC", "bar")
    inputs = changed(
        type={"body_rating": cold_weak},
        process={
            "process_min_k": to_si(10.0, "degC"),
            "process_max_k": to_si(20.0, "degC"),
            "temperature_unit": "degC",
        },
    )
    assert finding("static_pressure", inputs).limit_si == pytest.approx(150e5)
    assert "at 10 °C" in finding("static_pressure", inputs).sentence


def test_a_design_pressure_at_the_body_rating_is_a_caution() -> None:
    found = finding("static_pressure", changed(process={"design_pressure_pa": to_si(1500.0, "psi")}))
    assert found.severity is Severity.CAUTION
    assert found.sentence == "Design pressure 1500 psi is exactly at the body rating of 1500 at 200 °F."


def test_without_a_design_pressure_the_operating_pressure_counts() -> None:
    found = finding("static_pressure", changed(process={"design_pressure_pa": None}))
    assert found.sentence.startswith("Operating pressure 900 psi is 600 psi (40.0 %) below the body rating")


def test_an_operating_pressure_above_the_design_pressure_counts_instead_of_it() -> None:
    inputs = changed(process={"design_pressure_pa": to_si(800.0, "psi")})
    assert finding("static_pressure", inputs).sentence.startswith("Operating pressure 900 psi")


def test_a_body_rating_is_not_extrapolated() -> None:
    found = finding("static_pressure", changed(process={"process_max_k": to_si(450.0, "degF")}))
    assert found.severity is Severity.CANNOT_CHECK
    assert found.sentence == (
        "Cannot be checked: the body rating is listed from −40 °F to 400 °F, the process is at 60 °F to 450 °F, "
        "and a rating is never extrapolated."
    )
    assert found.missing == ("the body rating at the process temperature",)


def test_an_absolute_process_pressure_meets_the_gauge_rating_by_the_barometric_pressure() -> None:
    absolute = changed(process={"reference": "absolute", "pressure_unit": "bar", "design_pressure_pa": 70e5})
    found = finding("static_pressure", absolute)
    assert found.demanded_si == pytest.approx(70e5 - 101325.0)
    assert found.arithmetic.startswith("the design pressure: 70 − 1.0133 = 68.9868 bar gauge; ")
    without = changed(process={"reference": "absolute"}, surroundings={"barometric_pa": None})
    refused = finding("static_pressure", without)
    assert refused.severity is Severity.CANNOT_CHECK
    assert refused.missing == ("the barometric pressure of the plant",)


def test_overrange_of_one_side_up_to_its_limit_is_a_caution() -> None:
    # Common practice, no source: survivable, not recommended.
    at_limit = finding("one_side", changed(process={"one_side_pressure_pa": to_si(1500.0, "psi")}))
    assert at_limit.severity is Severity.CAUTION
    assert at_limit.advice == "Overrange up to the body rating is survivable; it is not good practice."
    beyond = finding("one_side", changed(process={"one_side_pressure_pa": to_si(1600.0, "psi")}))
    assert beyond.severity is Severity.VIOLATION
    assert beyond.sentence == "Pressure on one side 1600 psi is 100 psi (6.7 %) above the one-side limit of 1500."


def test_one_side_sees_the_static_pressure_where_nothing_else_is_said() -> None:
    found = finding("one_side", SOUND)
    assert found.sentence == (
        "Pressure on one side 1000 psi (the design pressure) is 500 psi (33.3 %) below the one-side limit of 1500."
    )
    assert found.demanded_source == "tag: design pressure 1000 psi gauge, the other side vented"


def test_the_lowest_pressure_is_held_against_the_vacuum_limit_in_absolute() -> None:
    found = finding("lowest_pressure", changed(process={"lowest_pressure_pa": to_si(-14.5, "psi")}))
    assert found.severity is Severity.VIOLATION
    # 14.6959 − 14.5 = 0.1959 psi absolute.
    assert found.demanded == pytest.approx(0.1959, abs=1e-4)
    assert "above" not in found.sentence
    assert finding("lowest_pressure", changed(process={"lowest_pressure_pa": None})).missing == (
        "the lowest pressure at the tag",
    )


@pytest.mark.parametrize(
    ("check", "part", "field", "beyond", "inside"),
    [
        ("ambient_low", "surroundings", "ambient_min_k", -50.0, -40.0),
        ("ambient_high", "surroundings", "ambient_max_k", 260.0, 250.0),
        ("process_low", "process", "process_min_k", -50.0, -40.0),
        ("process_high", "process", "process_max_k", 310.0, 300.0),
        ("tracing", "process", "tracing_temperature_k", 260.0, 250.0),
    ],
)
def test_temperatures_are_held_between_the_limits_of_the_type(
    check: str, part: str, field: str, beyond: float, inside: float
) -> None:
    outside = finding(check, changed(**{part: {field: to_si(beyond, "degF")}}))
    assert outside.severity is Severity.VIOLATION
    assert outside.margin == pytest.approx(-10.0)
    at_limit = finding(check, changed(**{part: {field: to_si(inside, "degF")}}))
    assert at_limit.severity is Severity.CAUTION
    assert at_limit.margin == 0.0
    assert finding(check, changed(**{part: {field: to_si(100.0, "degF")}})).severity is Severity.CLEAR


def test_a_temperature_margin_is_a_difference_in_the_user_s_degrees() -> None:
    found = finding(
        "ambient_high", changed(surroundings={"ambient_max_k": to_si(45.0, "degC"), "temperature_unit": "degC"})
    )
    # 250 °F are 121.11 °C; −40 °F are −40 °C: the limits are 161.11 °C apart.
    assert found.margin == pytest.approx(76.11, abs=0.01)
    assert found.margin_percent == pytest.approx(76.11 / 161.11 * 100, abs=0.01)
    assert found.percent_of == "the width of the type's ambient limits"


def test_tracing_that_is_too_hot_says_what_it_can_do() -> None:
    found = finding("tracing", changed(process={"tracing_temperature_k": to_si(300.0, "degF")}))
    assert found.sentence.startswith("Heat tracing of 300 °F is 50 °F")
    assert found.advice == "Heat tracing above the capsule's limit can destroy the capsule for good."


def test_a_tag_without_tracing_says_so() -> None:
    assert finding("tracing", SOUND).sentence == "No heat tracing is recorded at the tag."
    traced = finding("tracing", changed(process={"traced": True}))
    assert traced.severity is Severity.CANNOT_CHECK
    assert traced.missing == ("the temperature of the heat tracing",)


def test_without_a_limit_of_the_capsule_its_process_limit_holds_for_tracing() -> None:
    inputs = changed(type={"capsule_max_k": None}, process={"tracing_temperature_k": to_si(310.0, "degF")})
    assert finding("tracing", inputs).margin == pytest.approx(-10.0)


def test_the_loop_is_held_to_the_failure_current_not_to_20_ma() -> None:
    # (24 − 12) V / 22.5 mA = 533.3 Ω, and / 20 mA = 600 Ω: 560 Ω pass at 20 mA only.
    found = finding("loop_resistance", changed(loop={"loop_ohm": 560.0}))
    assert found.severity is Severity.VIOLATION
    assert found.arithmetic.startswith("(24 − 12) / (22.5 / 1000) = 533.333 Ω; 533.333 − 560 = −26.667 Ω")
    assert found.sentence.endswith("above the limit of 533.333 Ω that 24 V can drive at 22.5 mA.")
    assert finding("loop_resistance", changed(loop={"loop_ohm": 530.0})).severity is Severity.CAUTION


def test_an_unstated_failure_current_is_taken_as_usual_and_said_to_be() -> None:
    found = finding("loop_resistance", changed(type={"high_failure_ma": None}))
    assert found.limit == pytest.approx(12.0 / 0.0225)
    assert "22.5 mA, the usual high failure current" in found.limit_source


def test_a_supply_below_lift_off_is_said_twice_over() -> None:
    inputs = changed(loop={"supply_v": 11.0})
    assert finding("supply_voltage", inputs).sentence == (
        "Supply 11 V is 1 V (8.3 %) below the transmitter's lift-off voltage of 12."
    )
    assert finding("loop_resistance", inputs).severity is Severity.VIOLATION


def test_gauge_and_absolute_meet_only_with_the_barometric_pressure() -> None:
    absolute_range = {"reference": "absolute", "urv_si": 2e5, "unit": "bar", "transfer": "linear"}
    gauge_head = {"reference": "gauge", "lrl_si": 0.0, "url_si": 1e5, "unit": "bar"}
    known = finding("range_upper", changed(range=absolute_range, head=gauge_head))
    assert known.limit_si == pytest.approx(1e5 + 101325.0)
    assert known.severity is Severity.CLEAR
    unknown = changed(range=absolute_range, head=gauge_head, surroundings={"barometric_pa": None})
    for check in ("range_lower", "range_upper"):
        refused = finding(check, unknown)
        assert refused.severity is Severity.CANNOT_CHECK
        assert refused.missing == ("the barometric pressure of the plant",)
    assert finding("least_span", unknown).severity is not Severity.CANNOT_CHECK


def test_a_differential_range_is_not_compared_with_a_gauge_head() -> None:
    refused = finding("range_upper", changed(head={"reference": "gauge"}))
    assert refused.severity is Severity.CANNOT_CHECK
    assert "says nothing about either of its sides" in refused.sentence


def test_a_bare_tag_is_told_everything_that_is_missing() -> None:
    bare = TagInputs(
        process=Process(reference="gauge", pressure_unit="bar", temperature_unit="degC"),
        surroundings=Surroundings(temperature_unit="degC"),
        loop=LOOP,
    )
    found = {one.check: one for one in check_all(bare)}
    assert list(found) == list(CHECKS)
    assert {one.severity for key, one in found.items() if key != "tracing"} == {Severity.CANNOT_CHECK}
    assert found["range_upper"].missing == ("a fitted transmitter", "a range in force")
    assert found["range_upper"].sentence == ("Cannot be checked: no transmitter is fitted and no range is in force.")


@pytest.mark.parametrize(
    ("check", "part", "field", "named"),
    [
        ("range_upper", "head", "url_si", "the head's URL"),
        ("range_lower", "head", "lrl_si", "the head's LRL"),
        ("least_span", "head", "least_span_si", "the head's least span"),
        ("greatest_span", "head", "url_si", "the head's URL"),
        ("static_pressure", "process", "process_max_k", "the highest process temperature"),
        ("one_side", "type", "one_side_limit_pa", "the one-side limit of the type"),
        ("lowest_pressure", "type", "vacuum_limit_pa", "the lowest absolute pressure of the type"),
        ("ambient_low", "surroundings", "ambient_min_k", "the lowest ambient temperature at the tag"),
        ("ambient_high", "type", "ambient_max_k", "the highest ambient temperature of the type"),
        ("process_low", "process", "process_min_k", "the lowest process temperature at the tag"),
        ("process_high", "type", "process_max_k", "the highest process temperature of the type"),
        ("supply_voltage", "loop", "supply_v", "the loop supply"),
        ("loop_resistance", "loop", "loop_ohm", "the loop resistance"),
        ("loop_resistance", "type", "least_supply_v", "the least supply voltage of the type"),
    ],
)
def test_a_missing_number_is_named(check: str, part: str, field: str, named: str) -> None:
    found = finding(check, changed(**{part: {field: None}}))
    assert found.severity is Severity.CANNOT_CHECK
    assert found.missing == (named,)
    assert found.sentence == f"Cannot be checked: {named} is not recorded."
    assert (found.demanded, found.limit, found.margin, found.margin_percent) == (None, None, None, None)


def test_missing_pressures_and_ratings_are_named() -> None:
    nothing = changed(process={"design_pressure_pa": None, "operating_pressure_pa": None})
    for check in ("static_pressure", "one_side"):
        assert finding(check, nothing).missing == ("the design or operating pressure at the tag",)
    assert finding("static_pressure", changed(type={"body_rating": ()})).missing == ("the body rating of the type",)
    assert body_rating_at(TYPE, Process(reference="gauge", pressure_unit="bar", temperature_unit="degC")) is None


def test_two_missing_numbers_are_both_named() -> None:
    found = finding("supply_voltage", changed(loop={"supply_v": None}, type={"least_supply_v": None}))
    assert found.sentence == (
        "Cannot be checked: the loop supply and the least supply voltage of the type are not recorded."
    )


def test_the_worst_finding_speaks_for_the_tag() -> None:
    inputs = changed(range={"urv_si": to_si(260.0, WATER)}, loop={"supply_v": None})
    assert worst(check_all(inputs)) is Severity.VIOLATION
    assert worst(check_all(changed(loop={"supply_v": None}))) is Severity.CANNOT_CHECK
    assert [severity.rank for severity in Severity] == [0, 1, 2, 3]


def test_the_checks_need_no_django() -> None:
    code = (
        "import sys; sys.modules['django'] = None; import register.engineering.limits, register.engineering.units, "
        "register.engineering.typed, register.engineering.pressure, register.engineering.ranges, "
        "register.engineering.loop, register.engineering.margins, register.engineering.rating"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False, cwd=ROOT)
    assert done.returncode == 0, done.stderr
