"""The large plots: safe to stand in a page, the same bytes twice, and telling apart what must be told apart."""

from __future__ import annotations

import math
import re
import subprocess
import sys
from datetime import date
from pathlib import Path
from typing import Any

import pytest
from django.conf import settings

from calibration.drawing.charts import BandPoint, DriftEvent, DriftPoint, ErrorPoint, LimitPoint, drift_plot, error_plot
from calibration.drawing.inline_svg import ROLES
from tests.drawing import fits_the_policy, parsed, tagged

POINTS = (0.0, 62.5, 125.0, 187.5, 250.0, 187.5, 125.0, 62.5, 0.0)


def errors(**changes: Any) -> str:
    given: dict[str, Any] = {
        "title": "Errors of FT-2041 & more",
        "description": "As-found up to +0.30 % of span at 250 inH2O.",
        "found": [ErrorPoint(p, 0.1 + p / 1250, place < 5, 0.05, outside=p == 250.0) for place, p in enumerate(POINTS)],
        "left": [ErrorPoint(p, 0.02, place < 5) for place, p in enumerate(POINTS)],
        "limits": [LimitPoint(0.0, -0.25, 0.25), LimitPoint(250.0, -0.25, 0.25)],
        "input_unit": "inH2O",
    }
    return error_plot(**{**given, **changes})


def stretch(*points: tuple[date, float], outside: bool = False) -> list[DriftPoint]:
    return [DriftPoint(on, value, outside) for on, value in points]


def drift(**changes: Any) -> str:
    given: dict[str, Any] = {
        "title": "Drift of FT-2041",
        "description": "Zero drifts by −0.05 % of span a year.",
        "stretches": [
            stretch((date(2019, 3, 1), 0.0), (date(2020, 3, 3), 0.08)),
            stretch((date(2021, 6, 1), 0.0), (date(2022, 5, 20), -0.08), (date(2023, 6, 3), -0.12)),
        ],
        "limits": (-0.25, 0.25),
        "events": [
            DriftEvent(date(2021, 6, 1), "swap", "K7-1 to K7-2"),
            DriftEvent(date(2020, 3, 3), "adjustment", ""),
        ],
        "band": [BandPoint(date(2023, 6, 3), -0.12, -0.12, -0.12), BandPoint(date(2024, 6, 3), -0.17, -0.26, -0.08)],
        "due": date(2024, 6, 3),
        "meets": date(2024, 4, 19),
    }
    return drift_plot(**{**given, **changes})


def words(svg: str) -> list[str]:
    return ["".join(element.itertext()).strip() for element in tagged(parsed(svg), "text")]


def pieces(svg: str) -> list[int]:
    """Number of straight pieces of each line drawn inside the plot in the width of the drift curve."""
    paths = [path for path in tagged(parsed(svg), "path") if path.get("clip-path")]
    return [path.get("d", "").count("L") for path in paths if path.get("stroke-width") == "1.3"]


def heights(svg: str, *, width: str) -> list[list[float]]:
    """Heights of the corners of each line drawn inside the plot in a width; they grow downwards."""
    paths = [path for path in tagged(parsed(svg), "path") if path.get("clip-path")]
    lines = [path.get("d", "") for path in paths if path.get("stroke-width") == width]
    return [[float(y) for y in re.findall(r"[ML] \S+ (\S+)", line)] for line in lines]


def shapes(svg: str) -> int:
    """How many different marker outlines the picture defines."""
    return len({path.get("d") for defs in tagged(parsed(svg), "defs") for path in tagged(defs, "path")})


@pytest.mark.parametrize("draw", [errors, drift])
def test_chart_fits_the_content_policy_and_says_its_name(draw: Any) -> None:
    root = parsed(draw())
    assert fits_the_policy(root)
    assert root.get("role") == "img"
    named = [tagged(root, name)[0] for name in ("title", "desc")]
    assert root.get("aria-labelledby") == " ".join(element.get("id", "") for element in named)
    assert all(element.text for element in named)
    assert not tagged(root, "metadata")


@pytest.mark.parametrize("draw", [errors, drift])
def test_chart_draws_the_same_bytes_twice(draw: Any) -> None:
    assert draw() == draw()


@pytest.mark.parametrize("draw", [errors, drift])
def test_every_drawn_colour_belongs_to_a_role_that_themes_redraw(draw: Any) -> None:
    for element in parsed(draw()).iter():
        for name in ("fill", "stroke"):
            value = element.get(name, "none")
            if value == "none" or value.startswith("url("):
                continue
            assert value in ROLES, f"{element.tag} {name} {value}"
            assert f"plot-{name}-{ROLES[value]}" in element.get("class", "").split()


def test_colours_outside_a_page_are_those_of_the_light_theme() -> None:
    tokens = (Path(settings.BASE_DIR) / "static" / "css" / "tokens.css").read_text()
    raw = {"outside": "vermilion", "near": "ochre-fill", "action": "accent"}
    for value, role in ROLES.items():
        assert f"--raw-{raw.get(role, role)}-day: {value};" in tokens


def test_two_charts_on_a_page_share_no_id_and_every_reference_is_met() -> None:
    page = parsed(f"<div>{errors()}{drift()}</div>")
    ids = [element.get("id") for element in page.iter() if element.get("id")]
    assert len(ids) == len(set(ids))
    referred = {
        match
        for element in page.iter()
        for name in ("href", "clip-path")
        for match in re.findall(r"#([\w-]+)", element.get(name, ""))
    }
    assert referred <= set(ids)


def test_text_stays_text_in_the_face_of_the_page() -> None:
    svg = errors()
    assert "Applied input, inH2O" in words(svg)
    assert "Error, % of span" in words(svg)
    assert "font-family" not in svg
    assert "font:" not in svg


def test_errors_on_the_scale_carry_their_sign() -> None:
    scale = [word for word in words(errors()) if re.fullmatch(r"[+−-]?\d\.\d+", word)]
    assert any(word.startswith("+") for word in scale)
    assert any(word.startswith("−") for word in scale)
    assert not any(word.startswith("-") for word in scale)


def test_legend_names_up_down_found_and_left() -> None:
    said = words(errors())
    assert {"as-found, up", "as-found, down", "as-left, up", "as-left, down", "MPE", "outside"} <= set(said)
    assert "as-left, up" not in words(errors(left=()))


@pytest.mark.parametrize("outside", [False, True])
def test_what_is_outside_is_said_by_the_judgement_alone(outside: bool) -> None:
    """The picture compares nothing: it crosses what it is told to cross, wherever its limits run."""
    svg = errors(found=[ErrorPoint(125.0, 0.2501 if not outside else 0.2, True, outside=outside)], left=())
    assert ("outside" in words(svg)) is outside
    assert ("plot-stroke-outside" in svg) is outside
    curve = [stretch((date(2019, 3, 1), 0.1), (date(2020, 3, 3), 0.1 if outside else 0.3), outside=outside)]
    assert ("plot-stroke-outside" in drift(stretches=curve, meets=None)) is outside


def test_limits_are_drawn_as_the_curves_they_are() -> None:
    """Upper and lower limit have their own course; where there is none on a side, nothing is drawn there."""
    nodes = [LimitPoint(0.0, -math.inf, 0.9), LimitPoint(125.0, -0.5, 0.4), LimitPoint(250.0, -0.3, 0.2)]
    drawn = heights(errors(found=[ErrorPoint(125.0, 0.0, True)], left=(), limits=nodes), width="1.8")
    assert [len(line) for line in drawn] == [2, 3]
    zero = heights(errors(found=(), left=(), limits=nodes), width="0.8")[0][0]
    lower, upper = ([round(zero - y, 3) for y in line] for line in drawn)
    assert lower[0] / upper[1] == pytest.approx(-0.5 / 0.4, abs=1e-3)
    assert upper[0] / upper[2] == pytest.approx(0.9 / 0.2, rel=1e-3)


def test_drift_stands_between_two_limits_of_their_own() -> None:
    low, high = (line[0] for line in heights(drift(limits=(-0.3, 0.2)), width="1.8"))
    zero = heights(drift(limits=(-0.3, 0.2)), width="0.8")[0][0]
    assert (low - zero) / (zero - high) == pytest.approx(0.3 / 0.2, rel=1e-3)


@pytest.mark.parametrize(("limits", "lines"), [((-0.25, 0.25), 2), ((-math.inf, 0.25), 1), (None, 0)])
def test_where_there_is_no_limit_no_line_is_drawn(limits: tuple[float, float] | None, lines: int) -> None:
    svg = drift(limits=limits, meets=None)
    assert len(heights(svg, width="1.8")) == lines
    assert ("MPE" in words(svg)) is bool(lines)


def test_clipped_reading_gets_an_arrow_of_its_own() -> None:
    plain = [ErrorPoint(250.0, 0.2, True)]
    clipped = [ErrorPoint(250.0, 0.2, True, clipped=True)]
    few, more = (len(tagged(parsed(errors(found=found, left=())), "path")) for found in (plain, clipped))
    assert more > few


def test_chart_of_no_reading_is_still_a_chart() -> None:
    assert parsed(errors(found=(), left=(), limits=())).get("class") == "plot"
    assert parsed(drift(stretches=(), events=(), band=(), due=None, meets=None)).get("class") == "plot"


def test_drift_names_the_due_day_and_the_day_the_band_meets_the_limit() -> None:
    said = words(drift())
    assert "due 2024-06-03" in said
    assert "band meets MPE 2024-04-19" in said
    assert not any("meets" in word for word in words(drift(meets=None)))


def test_each_kind_of_event_has_its_own_shape_and_word() -> None:
    kinds = ["swap", "adjustment", "re-range", "other"]
    all_four = drift(events=[DriftEvent(date(2022, 1, 1 + place), kind, "") for place, kind in enumerate(kinds)])
    assert {"swapped", "adjusted", "re-ranged", "other"} <= set(words(all_four))
    assert shapes(all_four) - shapes(drift(events=())) == 4


@pytest.mark.parametrize("limits", [(-0.25, 0.25), (-0.02, 0.02), None])
def test_words_of_two_days_stand_clear_of_each_other_and_of_the_limit(limits: tuple[float, float] | None) -> None:
    """A line of words is nine points high."""
    svg = drift(limits=limits, due=date(2024, 4, 20))
    at = {
        "".join(word.itertext()).split()[0]: float(word.get("y", "nan"))
        for word in tagged(parsed(svg), "text")
        if re.search("due|meets", "".join(word.itertext()))
    }
    assert abs(at["due"] - at["band"]) > 9.0
    for height, *_ in heights(svg, width="1.8"):
        assert min(abs(height - y) for y in at.values()) > 9.0


def test_unknown_kind_of_event_is_shown_as_other() -> None:
    assert "other" in words(drift(events=[DriftEvent(date(2022, 1, 1), "lightning", "")]))


def test_drift_curve_is_not_joined_across_a_break() -> None:
    first, last = stretch((date(2019, 3, 1), 0.0), (date(2020, 3, 3), 0.08)), stretch((date(2021, 6, 1), 0.0))
    joined, broken = drift(stretches=[[*first, *last]]), drift(stretches=[first, last])
    assert 2 in pieces(joined)
    assert 2 not in pieces(broken)


def test_importing_the_charts_does_not_import_matplotlib() -> None:
    code = "import sys, calibration.drawing.charts; sys.exit('matplotlib' in sys.modules or 'numpy' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
