"""README names every variable that the site reads, and no other."""

from __future__ import annotations

import re
from pathlib import Path

from register.environment import VARIABLES

README = Path(__file__).resolve().parents[2] / "README.md"


def test_readme_names_just_the_variables_that_are_read() -> None:
    named = set(re.findall(r"\b(?:FOUNDLEFT_[A-Z_]+|DATABASE_URL)\b", README.read_text()))
    assert named == set(VARIABLES)
