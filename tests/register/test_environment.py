"""The environment is read strictly: what cannot be meant is said at once, by name and with what would be right."""

from __future__ import annotations

import os
import stat
import subprocess
import sys
from pathlib import Path

import pytest
from django.core.exceptions import ImproperlyConfigured

from register import environment

TOP = Path(__file__).resolve().parents[2]
HEAVY = ("numpy", "scipy", "pandas", "matplotlib", "pint", "reportlab")


def run(code: str, data: Path, **variables: str) -> subprocess.CompletedProcess[str]:
    """Run Python in a process of its own with nothing of this environment but what is needed to find Python."""
    kept = {name: value for name, value in os.environ.items() if name in {"PATH", "SYSTEMROOT", "LANG"}}
    given = {"DJANGO_SETTINGS_MODULE": "register.settings", "FOUNDLEFT_DATA": str(data)} | variables
    return subprocess.run(
        [sys.executable, "-W", "error", "-c", code],
        cwd=TOP,
        env=kept | given,
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )


@pytest.mark.parametrize(
    ("value", "meant"), [("yes", True), ("TRUE", True), ("1", True), ("no", False), (" 0 ", False)]
)
def test_yes_and_no_are_read(monkeypatch: pytest.MonkeyPatch, value: str, meant: bool) -> None:
    monkeypatch.setenv("FOUNDLEFT_HTTPS", value)
    assert environment.flag("FOUNDLEFT_HTTPS", not meant) is meant


@pytest.mark.parametrize(
    ("name", "value", "reader"),
    [
        ("FOUNDLEFT_HTTPS", "on", lambda: environment.flag("FOUNDLEFT_HTTPS", False)),
        ("FOUNDLEFT_HSTS_SECONDS", "a year", lambda: environment.whole_number("FOUNDLEFT_HSTS_SECONDS", 1)),
        ("FOUNDLEFT_HSTS_SECONDS", "-1", lambda: environment.whole_number("FOUNDLEFT_HSTS_SECONDS", 1)),
        ("FOUNDLEFT_WORKERS", "0", lambda: environment.whole_number("FOUNDLEFT_WORKERS", 1, least=1)),
        ("FOUNDLEFT_HOSTS", "*", lambda: environment.hosts("FOUNDLEFT_HOSTS", [])),
        ("FOUNDLEFT_HOSTS", "https://a.example", lambda: environment.hosts("FOUNDLEFT_HOSTS", [])),
        ("FOUNDLEFT_ORIGINS", "a.example", lambda: environment.origins("FOUNDLEFT_ORIGINS")),
        ("FOUNDLEFT_PROXIES", "proxy.example", lambda: environment.networks("FOUNDLEFT_PROXIES")),
        ("FOUNDLEFT_PROXIES", "10.0.0.1/8", lambda: environment.networks("FOUNDLEFT_PROXIES")),
        ("FOUNDLEFT_LOG_LEVEL", "LOUD", lambda: environment.one_of("FOUNDLEFT_LOG_LEVEL", ("INFO",), "INFO")),
        ("DATABASE_URL", "mysql://root@host/name", lambda: environment.database(Path("x"))),
        ("DATABASE_URL", "postgres://host:port/name", lambda: environment.database(Path("x"))),
        ("DATABASE_URL", "nonsense", lambda: environment.database(Path("x"))),
    ],
)
def test_what_cannot_be_meant_is_refused_by_name(
    monkeypatch: pytest.MonkeyPatch, name: str, value: str, reader: object
) -> None:
    monkeypatch.setenv(name, value)
    with pytest.raises(ImproperlyConfigured, match=name):
        reader()  # type: ignore[operator]


def test_a_data_folder_with_odd_signs_holds_the_database_itself(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv("DATABASE_URL", raising=False)
    assert environment.database(Path("/a b/50%/ü/x.sqlite3"))["NAME"] == str(Path("/a b/50%/ü/x.sqlite3"))


def test_a_data_folder_that_is_a_file_is_said(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    taken = tmp_path / "taken"
    taken.write_text("")
    monkeypatch.setenv("FOUNDLEFT_DATA", str(taken))
    with pytest.raises(ImproperlyConfigured, match=r"FOUNDLEFT_DATA is .*taken, which cannot be made"):
        environment.data_folder(tmp_path)


def test_a_data_folder_that_cannot_be_written_into_is_said(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.setenv("FOUNDLEFT_DATA", str(tmp_path))
    monkeypatch.setattr(environment.os, "access", lambda *_: False)  # root may write anywhere, so it is asked
    with pytest.raises(ImproperlyConfigured, match="may not write into"):
        environment.data_folder(tmp_path)


def test_the_secret_key_is_made_once_for_its_owner_only(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.delenv("FOUNDLEFT_SECRET_KEY", raising=False)
    key = environment.secret_key(tmp_path)
    assert len(key) > 60
    assert environment.secret_key(tmp_path) == key
    assert stat.S_IMODE((tmp_path / "secret_key").stat().st_mode) == 0o600
    given = "drawn by chance somewhere else " * 2
    monkeypatch.setenv("FOUNDLEFT_SECRET_KEY", given)
    assert environment.secret_key(tmp_path) == given.strip()


@pytest.mark.parametrize("key", ["x", "n" * 49, "ab" * 40])
def test_a_secret_key_that_can_be_guessed_is_refused(monkeypatch: pytest.MonkeyPatch, tmp_path: Path, key: str) -> None:
    monkeypatch.setenv("FOUNDLEFT_SECRET_KEY", key)
    with pytest.raises(ImproperlyConfigured, match="FOUNDLEFT_SECRET_KEY can be guessed: use 50 characters or more"):
        environment.secret_key(tmp_path)


def test_an_empty_secret_key_is_no_key(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.delenv("FOUNDLEFT_SECRET_KEY", raising=False)
    monkeypatch.setattr(environment.time, "sleep", lambda _: None)
    (tmp_path / "secret_key").write_text("\n")
    with pytest.raises(ImproperlyConfigured, match="is empty"):
        environment.secret_key(tmp_path)


def test_the_checklist_of_django_finds_nothing_under_production_settings(tmp_path: Path) -> None:
    found = run(
        "from django.core.management import execute_from_command_line as run;"
        "run(['manage.py', 'check', '--deploy', '--fail-level', 'INFO'])",
        tmp_path,
        FOUNDLEFT_HTTPS="yes",
        FOUNDLEFT_HOSTS="instruments.example",
        FOUNDLEFT_PROXIES="127.0.0.1",
    )
    assert (found.returncode, found.stderr) == (0, "")
    assert "no issues" in found.stdout


def test_loading_every_url_imports_nothing_heavy(tmp_path: Path) -> None:
    found = run(
        "import sys, django; django.setup();"
        "from django.urls import get_resolver; print(len(get_resolver().reverse_dict));"
        f"print([name for name in {HEAVY} if name in sys.modules])",
        tmp_path,
    )
    assert found.returncode == 0, found.stderr
    count, heavy = found.stdout.split("\n", 1)
    assert int(count) > 20
    assert heavy.strip() == "[]"


def test_the_server_entry_loads_the_heavy_modules_before_the_first_page(tmp_path: Path) -> None:
    (tmp_path / "static").mkdir()
    found = run(
        "import sys, register.wsgi; print({'numpy', 'scipy', 'matplotlib', 'pint'} - set(sys.modules))", tmp_path
    )
    assert found.stdout.strip() == "set()", found.stderr


@pytest.mark.parametrize(
    ("variables", "said"),
    [
        ({"FOUNDLEFT_HTPS": "yes"}, "Is FOUNDLEFT_HTTPS meant?"),
        ({"FOUNDLEFT_QQQQQQQ": "1"}, "It reads FOUNDLEFT_DATA"),
    ],
)
def test_a_mistyped_variable_is_said_by_the_system_check(tmp_path: Path, variables: dict[str, str], said: str) -> None:
    found = run(
        "from django.core.management import execute_from_command_line as run; run(['manage.py', 'check'])",
        tmp_path,
        **variables,
    )
    assert "register.W001" in found.stderr
    assert said in found.stderr
