"""The stylesheet against WCAG 2.2: contrast of every tone in every theme; and whether all it names is there."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from django.conf import settings

CSS = Path(settings.BASE_DIR) / "static" / "css"
TOKENS = (CSS / "tokens.css").read_text()


def raw_tokens(block: str) -> dict[str, str]:
    return dict(re.findall(r"--raw-([\w-]+):\s*(#[0-9a-f]{3,6});", block))


def theme(name: str) -> dict[str, str]:
    """Tones of one theme by role: ink, faint, accent, vermilion, ochre, paper, sunk, wash."""
    base = raw_tokens(TOKENS.split("/* roles: colour */")[0])
    if name == "outdoor":
        block = re.search(r'\[data-theme="outdoor"\] \{(.*?)\n\}', TOKENS, re.S)
        assert block
        base |= raw_tokens(block[1])
    ending = "-night" if name == "dark" else "-day"
    return {key.removesuffix(ending): value for key, value in base.items() if key.endswith(ending)}


def luminance(colour: str) -> float:
    """Relative luminance as WCAG 2.2 defines it."""
    digits = colour[1:] if len(colour) == 7 else "".join(2 * c for c in colour[1:])
    channels = (int(digits[place : place + 2], 16) / 255 for place in (0, 2, 4))
    red, green, blue = (c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels)
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue


def contrast(one: str, other: str) -> float:
    low, high = sorted((luminance(one), luminance(other)))
    return (high + 0.05) / (low + 0.05)


def test_contrast_formula_gives_the_published_ends() -> None:
    # WCAG 2.2: 21:1 for black on white, 1:1 for a colour on itself. #767676 on white is the well-known 4.54:1.
    assert contrast("#000", "#fff") == pytest.approx(21)
    assert contrast("#123456", "#123456") == 1
    assert contrast("#767676", "#ffffff") == pytest.approx(4.54, abs=0.005)


@pytest.mark.parametrize("name, least", [("light", 4.5), ("dark", 4.5), ("outdoor", 7.0)])
@pytest.mark.parametrize("ground", ["paper", "sunk", "wash"])
@pytest.mark.parametrize("tone", ["ink", "faint", "accent", "accent-deep", "vermilion", "ochre"])
def test_text_is_legible_on_every_ground(name: str, least: float, ground: str, tone: str) -> None:
    tones = theme(name)
    assert contrast(tones[tone], tones[ground]) >= least


@pytest.mark.parametrize("name", ["light", "dark", "outdoor"])
@pytest.mark.parametrize("tone", ["rule", "ochre-fill"])
def test_lines_that_carry_meaning_stand_out_three_to_one(name: str, tone: str) -> None:
    # WCAG 2.2, 1.4.11: graphical objects and the edges of controls.
    tones = theme(name)
    least = 7.0 if name == "outdoor" else 3.0
    assert contrast(tones[tone], tones["paper"]) >= least


def test_every_imported_sheet_exists_and_every_sheet_is_imported() -> None:
    imported = set(re.findall(r'@import "([^"]+)"', (CSS / "app.css").read_text()))
    present = {path.relative_to(CSS).as_posix() for path in CSS.rglob("*.css")} - {"app.css"}
    assert imported == present


def test_every_token_that_is_used_is_defined() -> None:
    sheets = "\n".join(path.read_text() for path in CSS.rglob("*.css"))
    assert set(re.findall(r"var\((--[\w-]+)", sheets)) <= set(re.findall(r"(--[\w-]+):", sheets))


def test_fonts_named_by_the_sheet_are_shipped_with_their_licence() -> None:
    named = set(re.findall(r'url\("\.\./fonts/([^"]+)"\)', (CSS / "fonts.css").read_text()))
    fonts = CSS.parent / "fonts"
    assert named == {path.name for path in fonts.glob("*.woff2")}
    licences = [path.read_text() for path in fonts.glob("OFL-*.txt")]
    assert len(licences) == 2
    assert all("SIL Open Font License, Version 1.1" in text for text in licences)
