"""The arithmetic imports without Django, and nothing beyond numpy, scipy and the standard library."""

from __future__ import annotations

import ast
import subprocess
import sys

import pytest

from tests.published import ROOT

MODULES = sorted(p.stem for p in (ROOT / "calibration" / "metrology").glob("*.py"))
ALLOWED = {"numpy", "scipy", "pint", "calibration", "register"} | set(sys.stdlib_module_names)


def test_no_module_needs_django() -> None:
    names = ", ".join("calibration.metrology" if m == "__init__" else f"calibration.metrology.{m}" for m in MODULES)
    found = subprocess.run(
        [sys.executable, "-c", f"import sys; sys.modules['django'] = None\nimport {names}"],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=False,
    )
    assert found.returncode == 0, found.stderr


@pytest.mark.parametrize("module", MODULES)
def test_a_module_imports_arithmetic_only(module: str) -> None:
    source = (ROOT / "calibration" / "metrology" / f"{module}.py").read_text(encoding="utf-8")
    for node in ast.walk(ast.parse(source)):
        names = []
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            names = [node.module or ""]
        for name in names:
            assert name.split(".")[0] in ALLOWED, name
            if name.split(".")[0] in {"calibration", "register"}:
                assert name.startswith(("calibration.metrology", "register.engineering")), name


@pytest.mark.parametrize("module", MODULES)
def test_no_module_hides_a_loop_in_vectorize_or_asks_the_clock(module: str) -> None:
    source = (ROOT / "calibration" / "metrology" / f"{module}.py").read_text(encoding="utf-8")
    for forbidden in ("vectorize", "apply_along_axis", ".today()", ".now("):
        assert forbidden not in source
