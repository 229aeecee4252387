"""`manage.py start`: from an empty folder to a page, and what it refuses."""

from __future__ import annotations

import http.client
import os
import signal
import socket
import ssl
import subprocess
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from io import StringIO
from pathlib import Path
from typing import Any

import pytest
from django.core.management import CommandError, call_command
from django.core.management.base import SystemCheckError
from django.db import connection

from fixtures.demonstration.people import PASSWORD
from register import guards, serving
from register.auditing import Act, Actor
from register.models import Plant, User
from register.serving import Place, RefusedError
from tests.cast import Cast, make_area, make_plant, make_range, make_tag

HERE = Path(__file__).resolve().parent
TOP = HERE.parents[1]
CERTIFICATE, KEY = HERE / "localhost_certificate.pem", HERE / "localhost_key.pem"


def free_port() -> int:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


@contextmanager
def started(data: Path, *options: str) -> Iterator[tuple[int, subprocess.Popen[str]]]:
    """The site in a process of its own on a free port and an empty folder."""
    port = free_port()
    kept = {name: value for name, value in os.environ.items() if name in {"PATH", "SYSTEMROOT", "LANG"}}
    process = subprocess.Popen(
        [sys.executable, "manage.py", "start", "--port", str(port), "--empty", *options],
        cwd=TOP,
        env=kept | {"FOUNDLEFT_DATA": str(data), "FOUNDLEFT_WORKERS": "1"},
        stdout=subprocess.PIPE,
        stderr=subprocess.STDOUT,
        text=True,
        start_new_session=True,
    )
    try:
        yield port, process
    finally:
        if process.poll() is None:
            process.send_signal(signal.SIGINT)
        try:
            process.communicate(timeout=60)
        except subprocess.TimeoutExpired:
            os.killpg(process.pid, signal.SIGKILL)
            process.communicate()
            raise


def wait(process: subprocess.Popen[str]) -> str:
    """What is printed until the address is, and all that follows it for the person who starts the site."""
    assert process.stdout is not None
    said = ""
    while "one-time code" not in said:
        line = process.stdout.readline()
        assert line, said
        said += line
    return said


def ask(port: int, path: str, *, secure: bool = False) -> tuple[http.client.HTTPResponse, str]:
    context = ssl.create_default_context(cafile=str(CERTIFICATE))
    connection = (
        http.client.HTTPSConnection("127.0.0.1", port, timeout=60, context=context)
        if secure
        else http.client.HTTPConnection("127.0.0.1", port, timeout=60)
    )
    try:
        connection.request("GET", path)
        response = connection.getresponse()
        return response, response.read().decode()
    finally:
        connection.close()


def test_an_empty_folder_becomes_a_site_that_ends_on_interrupt(tmp_path: Path) -> None:
    with started(tmp_path) as (port, process):
        said = wait(process)
        response, _ = ask(port, "/")
        assert (response.status, response.headers["Location"]) == (302, "/sign-in/?next=/")
        page = ask(port, "/first-administrator/")[1]
        style = page.split('rel="stylesheet" href="')[1].split('"')[0]
        assert style != "/static/css/app.css", "static files are named by their content"
        sheet, content = ask(port, style)
        assert sheet.status == 200
        assert "immutable" in sheet.headers["Cache-Control"]
        assert "@layer" in content
        assert (tmp_path / "foundleft.sqlite3").stat().st_size > 0
        process.send_signal(signal.SIGINT)
        process.communicate(timeout=60)
        assert process.returncode == 0
    assert f"http://127.0.0.1:{port}/" in said
    assert (tmp_path / "first_administrator_code").read_text() in said


def test_with_a_certificate_it_serves_https_with_secure_cookies(tmp_path: Path) -> None:
    with started(tmp_path, "--certificate", str(CERTIFICATE), "--key", str(KEY)) as (port, process):
        wait(process)
        response, _page = ask(port, "/first-administrator/", secure=True)
        assert response.status == 200
        assert "Secure" in str(response.headers["Set-Cookie"])
        assert response.headers["Strict-Transport-Security"] is None, "no browser is bound to a certificate of today"


@pytest.fixture
def served(monkeypatch: pytest.MonkeyPatch, tmp_path: Path, settings: Any) -> list[Place]:
    places: list[Place] = []

    def serve(place: Place, *, workers: int, ready: Callable[[], None], hourly: Callable[[], None]) -> None:
        places.append(place)
        ready()

    monkeypatch.setattr(serving, "serve", serve)
    monkeypatch.setattr("register.management.commands.start.connections.close_all", lambda: None)
    monkeypatch.setattr(os, "environ", os.environ.copy())
    settings.DATA_DIR = tmp_path
    settings.STATIC_ROOT = tmp_path / "static"
    return places


def start(**options: Any) -> str:
    out = StringIO()
    call_command("start", stdout=out, port=free_port(), **options)
    return out.getvalue()


def test_a_site_with_people_starts_without_a_code_and_without_the_demonstration(
    cast: Cast, served: list[Place]
) -> None:
    said = start()
    assert served
    assert "code" not in said
    assert "Demonstration" not in said
    assert Plant.objects.count() == 2


def test_the_demonstration_is_loaded_into_an_empty_database_only(
    db: None, served: list[Place], monkeypatch: pytest.MonkeyPatch
) -> None:
    loaded: list[str] = []

    def call(name: str, *args: Any, **options: Any) -> Any:
        if name == "demonstration":
            loaded.append(name)
            return None
        return call_command(name, *args, **options)

    monkeypatch.setattr("register.management.commands.start.call_command", call)
    start()
    assert loaded == ["demonstration"]
    start(empty=True)
    make_plant()
    start()
    assert loaded == ["demonstration"]


def test_demonstration_people_are_printed_and_shown_at_the_door_of_this_machine(
    db: None, served: list[Place], client: Any
) -> None:
    User.objects.create(username="planner", printed_name="N. O.", is_demonstration=True)
    assert PASSWORD in start()
    assert PASSWORD in client.get("/sign-in/", HTTP_HOST="localhost:8000").content.decode()
    assert PASSWORD not in client.get("/sign-in/").content.decode()


def test_others_never_reach_a_site_whose_passwords_are_public(db: None, served: list[Place]) -> None:
    person = User.objects.create(username="planner", printed_name="N. O.", is_demonstration=True)
    os.environ["FOUNDLEFT_HOSTS"] = "instruments.example"
    with pytest.raises(CommandError, match=r"passwords of the demonstration people are public"):
        start(address="0.0.0.0")
    assert not served
    person.is_active = False
    person.save()
    start(address="0.0.0.0")
    assert served[0].address == "0.0.0.0"


@pytest.mark.parametrize(
    ("variable", "value", "said"),
    [
        ("FOUNDLEFT_HOSTS", "localhost,instruments.example", "FOUNDLEFT_HOSTS names instruments.example"),
        ("FOUNDLEFT_HOSTS", "192.0.2.7", "FOUNDLEFT_HOSTS names 192.0.2.7"),
        ("FOUNDLEFT_PROXIES", "127.0.0.1", "FOUNDLEFT_PROXIES names a reverse proxy"),
    ],
)
def test_a_proxy_does_not_open_a_site_whose_passwords_are_public(
    db: None, served: list[Place], variable: str, value: str, said: str
) -> None:
    """The server answers loopback only, but what stands in front of it answers everybody."""
    person = User.objects.create(username="planner", printed_name="N. O.", is_demonstration=True)
    os.environ[variable] = value
    with pytest.raises(CommandError, match=f"{said}.*passwords of the demonstration people are public"):
        start()
    assert not served
    person.is_active = False
    person.save()
    start()
    assert served


def test_names_of_this_machine_alone_open_nothing(db: None, served: list[Place]) -> None:
    User.objects.create(username="planner", printed_name="N. O.", is_demonstration=True)
    os.environ["FOUNDLEFT_HOSTS"] = "localhost,127.0.0.1,[::1]"
    start()
    assert served


def test_the_demonstration_is_not_loaded_where_its_people_could_not_stay(db: None, served: list[Place]) -> None:
    os.environ["FOUNDLEFT_HOSTS"] = "instruments.example"
    with pytest.raises(CommandError, match=r"start it with --empty"):
        start()
    assert not Plant.objects.exists()
    start(empty=True)
    assert served


def test_lost_guards_stop_the_start(cast: Cast, served: list[Place]) -> None:
    act = Act(Actor(cast.planner))
    act.created(cast.plant, plant=cast.plant)
    act.write()
    connection.check_constraints()
    guards.remove(connection)
    with pytest.raises(SystemCheckError, match=r"register.E003"):
        start()
    assert not served
    assert guards.missing(connection), "nothing puts them back unasked"


def test_a_port_that_is_taken_is_said_with_another_to_try() -> None:
    with socket.socket() as other:
        other.bind(("127.0.0.1", 0))
        other.listen()
        port = other.getsockname()[1]
        with pytest.raises(RefusedError, match=rf"Port {port} of 127.0.0.1 is taken.*--port {port % 65535 + 1}"):
            serving.check(Place(port=port), demonstration_people=False)


@pytest.mark.parametrize(
    ("place", "said"),
    [
        (Place(port=0), "There is no port 0"),
        (Place(port=70000), "There is no port 70000"),
        (Place(address="203.0.113.200", port=18999), "no address 203.0.113.200"),
        (Place(address="no such name", port=18999), "no address no such name"),
        (Place(port=18999, certificate=CERTIFICATE), "go together"),
        (Place(port=18999, key=KEY), "go together"),
        (Place(port=18999, certificate=KEY, key=KEY), "cannot be used together"),
        (Place(port=18999, certificate=CERTIFICATE, key=Path("no such file")), "cannot be used together"),
    ],
)
def test_what_cannot_be_served_is_said_in_words(place: Place, said: str) -> None:
    with pytest.raises(RefusedError, match=said):
        serving.check(place, demonstration_people=False)


@pytest.mark.parametrize(
    ("address", "loopback"),
    [
        ("127.0.0.1", True),
        ("127.8.8.8", True),
        ("::1", True),
        ("localhost", True),
        ("0.0.0.0", False),
        ("::", False),
        ("192.0.2.7", False),
        ("instruments.example", False),
        ("", False),
    ],
)
def test_only_addresses_of_this_machine_alone_are_loopback(address: str, loopback: bool) -> None:
    assert serving.is_loopback(address) is loopback


def test_the_serving_processes_learn_their_names_and_https(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv("FOUNDLEFT_HOSTS", raising=False)
    told: dict[str, str] = {}
    serving.variables(Place(address="192.0.2.7", certificate=CERTIFICATE, key=KEY), told)
    assert told == {
        "FOUNDLEFT_HOSTS": "localhost,127.0.0.1,[::1],192.0.2.7",
        "FOUNDLEFT_HTTPS": "yes",
        "FOUNDLEFT_HSTS_SECONDS": "0",
    }
    with pytest.raises(RefusedError, match="FOUNDLEFT_HOSTS"):
        serving.variables(Place(address="0.0.0.0"), {})
    monkeypatch.setenv("FOUNDLEFT_HOSTS", "instruments.example")
    given: dict[str, str] = {}
    serving.variables(Place(address="0.0.0.0"), given)
    assert given == {}


def test_the_address_is_printed_so_that_it_can_be_opened() -> None:
    assert Place(address="::1", port=8001).url == "http://[::1]:8001/"
    assert Place(address="0.0.0.0", certificate=CERTIFICATE, key=KEY).url == "https://localhost:8000/"


def test_what_the_day_brings_is_done_at_once_and_tried_again_after_a_failure(monkeypatch: pytest.MonkeyPatch) -> None:
    done: list[str] = []

    def hourly() -> None:
        done.append("tried")
        if len(done) == 1:
            raise OSError("the database is locked")
        if len(done) == 3:
            raise KeyboardInterrupt

    monkeypatch.setattr(serving, "HOUR", 0.0)
    with socket.create_server(("127.0.0.1", 0)) as listening, pytest.raises(KeyboardInterrupt):
        serving._wait(Place(port=listening.getsockname()[1]), lambda: done.clear(), hourly)
    assert done == ["tried"] * 3


def test_starting_names_the_command_that_puts_planned_changes_in_force(
    cast: Cast, served: list[Place], monkeypatch: pytest.MonkeyPatch
) -> None:
    called: list[str] = []
    monkeypatch.setattr("register.management.commands.start.connections.close_all", lambda: None)
    monkeypatch.setattr(serving, "serve", lambda place, *, workers, ready, hourly: (called.append("served"), hourly()))
    tag = make_tag(area=make_area(plant=cast.plant))
    planned = make_range(tag=tag, effective_from=cast.plant.today(), applied_at=None)
    start()
    planned.refresh_from_db()
    assert called == ["served"] and planned.applied_at is not None
