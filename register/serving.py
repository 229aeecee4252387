"""What must hold before the site is served at an address, and the server itself."""

from __future__ import annotations

import ipaddress
import logging
import multiprocessing
import os
import socket
import ssl
import sys
import threading
import time
from collections.abc import Callable, MutableMapping
from dataclasses import dataclass
from pathlib import Path

from register import environment

DEFAULT_PORT = 8000
HOUR = 3600.0
logger = logging.getLogger(__name__)


class RefusedError(Exception):
    """The site cannot, or must not, be served so; the message says why and what would be right."""


@dataclass(frozen=True, slots=True)
class Place:
    """Where to serve: address and port, and with a certificate by https."""

    address: str = "127.0.0.1"
    port: int = DEFAULT_PORT
    certificate: Path | None = None
    key: Path | None = None

    @property
    def https(self) -> bool:
        return self.certificate is not None

    @property
    def everywhere(self) -> bool:
        """Whether it answers at all addresses of the machine."""
        return self.address in {"0.0.0.0", "::"}

    @property
    def bound(self) -> str:
        """The address in figures."""
        return "127.0.0.1" if self.address == "localhost" else self.address

    @property
    def url(self) -> str:
        shown = "localhost" if self.everywhere else f"[{self.address}]" if ":" in self.address else self.address
        return f"{'https' if self.https else 'http'}://{shown}:{self.port}/"


def is_loopback(address: str) -> bool:
    """Whether only this machine reaches an address."""
    if address == "localhost":
        return True
    try:
        return ipaddress.ip_address(address).is_loopback
    except ValueError:
        return False


def ways_in(place: Place) -> str:
    """How others could reach the site, as the subject and verb of a sentence; empty where only this machine does."""
    if not is_loopback(place.address):
        return f"{place.address} can be reached from other machines"
    beyond = [name for name in environment.hosts("FOUNDLEFT_HOSTS", []) if not is_loopback(name.strip("[]"))]
    if beyond:
        return f"FOUNDLEFT_HOSTS names {', '.join(beyond)}, by which others reach the site"
    if environment.networks("FOUNDLEFT_PROXIES"):
        return "FOUNDLEFT_PROXIES names a reverse proxy, through which others reach the site"
    return ""


def check(place: Place, *, demonstration_people: bool) -> None:
    """Refuse what cannot be served.

    Raises
    ------
    RefusedError
        No such address, a port out of range or taken, a certificate without its key or unreadable, or others
        could reach a site whose demonstration passwords are public.
    """
    if not 1 <= place.port <= 65535:
        raise RefusedError(f"There is no port {place.port}: choose one from 1 to 65535.")
    if demonstration_people and (way := ways_in(place)):
        raise RefusedError(
            f"{way}, and the passwords of the demonstration people are public. Deactivate them on the page of people, "
            "or start a site of its own with --empty and another FOUNDLEFT_DATA."
        )
    if (place.certificate is None) != (place.key is None):
        raise RefusedError("--certificate and --key go together: the certificate chain and its private key, as PEM.")
    if place.certificate is not None and place.key is not None:
        try:
            ssl.SSLContext(ssl.PROTOCOL_TLS_SERVER).load_cert_chain(place.certificate, place.key)
        except (OSError, ssl.SSLError) as error:
            raise RefusedError(f"Certificate and key cannot be used together: {error}.") from error
    _take(place)


def variables(place: Place, environ: MutableMapping[str, str]) -> None:
    """Tell the processes that serve pages how they are reached.

    Raises
    ------
    RefusedError
        All addresses of the machine are served, and nobody said by which names people reach it.
    """
    hosts = environment.hosts("FOUNDLEFT_HOSTS", [])
    if place.everywhere and not hosts:
        raise RefusedError(
            f"{place.address} serves at every address of this machine: say in FOUNDLEFT_HOSTS by which names people "
            "reach it, such as instruments.example,192.0.2.7."
        )
    if not hosts:
        name = f"[{place.address}]" if ":" in place.address else place.address
        local = ["localhost", "127.0.0.1", "[::1]"]
        environ["FOUNDLEFT_HOSTS"] = ",".join(dict.fromkeys([*local, name]))
    if place.https:
        environ["FOUNDLEFT_HTTPS"] = "yes"
        # A browser that was told to insist on https for a year cannot be told otherwise by a lost certificate.
        environ.setdefault("FOUNDLEFT_HSTS_SECONDS", "0")


def serve(place: Place, *, workers: int, ready: Callable[[], None], hourly: Callable[[], None] | None = None) -> None:
    """Serve until interrupted; Ctrl-C and SIGTERM let running requests end.

    Parameters
    ----------
    workers : int
        Processes that answer.
    ready : callable
        Called once the first of them listens.
    hourly : callable
        Called then, and every hour after, in a thread of this process; what it raises is logged.
    """
    from granian import Granian
    from granian.constants import Interfaces, SSLProtocols
    from granian.log import LogLevels

    # Fresh processes on every system: a forked one would keep settings read before `variables` had its say.
    multiprocessing.set_start_method("spawn", force=True)
    threading.Thread(target=_wait, args=(place, ready, hourly), daemon=True).start()
    Granian(
        "register.wsgi:application",
        address=place.bound,
        port=place.port,
        interface=Interfaces.WSGI,
        workers=workers,
        blocking_threads=1,
        workers_kill_timeout=10,
        respawn_failed_workers=True,
        websockets=False,
        log_level=LogLevels.warning,
        ssl_cert=place.certificate,
        ssl_key=place.key,
        ssl_protocol_min=SSLProtocols.tls12,
    ).serve()


def default_workers(vendor: str) -> int:
    """Processes that serve pages: FOUNDLEFT_WORKERS, else two; with PostgreSQL as many as processors, four at most."""
    many = min(4, os.cpu_count() or 2) if vendor == "postgresql" else 2
    return environment.whole_number("FOUNDLEFT_WORKERS", max(2, many), least=1)


def _wait(place: Place, ready: Callable[[], None], hourly: Callable[[], None] | None) -> None:
    address = {"0.0.0.0": "127.0.0.1", "::": "::1"}.get(place.bound, place.bound)
    while True:
        try:
            socket.create_connection((address, place.port), timeout=1).close()
        except OSError:
            time.sleep(0.1)
        else:
            break
    ready()
    while hourly is not None:
        try:
            hourly()
        except Exception:
            # A locked database now is no reason to miss midnight.
            logger.exception("What is due each day was not done; it is tried again in an hour.")
        time.sleep(HOUR)


def _take(place: Place) -> None:
    """Bind once and let go, so that a port in use is said in words before the server starts."""
    family = socket.AF_INET6 if ":" in place.bound else socket.AF_INET
    with socket.socket(family, socket.SOCK_STREAM) as probe:
        if sys.platform != "win32":
            probe.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        try:
            probe.bind((place.bound, place.port))
            probe.listen(1)
        except PermissionError as error:
            raise RefusedError(f"This user may not serve at port {place.port}: choose one from 1024 on.") from error
        except (OSError, UnicodeError) as error:
            if isinstance(error, socket.gaierror) or "assign" in str(error) or "not valid" in str(error):
                raise RefusedError(f"This machine has no address {place.address}.") from error
            raise RefusedError(
                f"Port {place.port} of {place.address} is taken, perhaps by this site started before: stop that, or "
                f"choose another with --port {place.port % 65535 + 1}."
            ) from error
