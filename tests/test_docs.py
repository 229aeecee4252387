"""What README.md and DEVELOPERS.md name is there."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from django.conf import settings
from django.core.management import get_commands
from django.urls import Resolver404, resolve

TOP = Path(__file__).resolve().parents[1]
DOCS = ("README.md", "DEVELOPERS.md")


def text_of(name: str) -> str:
    return (TOP / name).read_text(encoding="utf-8")


def first_block() -> list[str]:
    found = re.search(r"```\w*\n(.*?)```", text_of("README.md"), re.DOTALL)
    assert found
    return found.group(1).strip().splitlines()


def test_the_first_block_of_readme_starts_the_site_and_runs_the_tests() -> None:
    start, test = first_block()
    assert start.endswith("manage.py start")
    assert "pytest" in test and '-m "not browser"' in test
    assert all(line.startswith("python3 -m venv .venv && ") for line in (start, test))


def test_readme_opens_with_one_paragraph_that_states_the_job() -> None:
    title, paragraph, block = text_of("README.md").split("\n\n", 2)
    assert title == "# Foundleft"
    assert paragraph.startswith("Foundleft ") and block.startswith("```")


@pytest.mark.parametrize("doc", DOCS)
def test_every_command_is_there(doc: str) -> None:
    named = set(re.findall(r"manage\.py ([a-z_]+)", text_of(doc)))
    assert named and named <= set(get_commands())


@pytest.mark.parametrize("doc", DOCS)
def test_every_file_and_folder_in_code_marks_is_there(doc: str) -> None:
    rooms = "register|calibration|templates|static|fixtures|tests|\\.ci|\\.github"
    named = set(re.findall(rf"`((?:{rooms})/[\w./-]+?)/?`", text_of(doc)))
    named |= set(re.findall(r"\]\(((?!http)[^)#]+)\)", text_of(doc)))
    assert named
    assert [name for name in sorted(named) if not (TOP / name).exists()] == []


@pytest.mark.parametrize("doc", DOCS)
def test_every_address_of_a_page_is_there(doc: str) -> None:
    missing = []
    for address in set(re.findall(r"`(/[a-z0-9/-]+/)`", text_of(doc))):
        try:
            resolve(address)
        except Resolver404:
            missing.append(address)
    assert missing == []


def test_every_setting_that_developers_read_of_is_set() -> None:
    named = set(re.findall(r"`([A-Z][A-Z_]{5,})`", text_of("DEVELOPERS.md")))
    mentioned_as_absent = {"ATOMIC_REQUESTS", "DATABASE_URL"}
    assert [name for name in sorted(named - mentioned_as_absent) if not hasattr(settings, name)] == []
