"""The file of a backup: a zip of database content and uploaded files, with a manifest that names and hashes each.

Members
-------
manifest.json
    What the file is: engine, time, schema state, rows per table, SHA-256 and size of every other member.
database.sqlite3
    A whole SQLite database, or on PostgreSQL instead `tables/NAME.copy`: rows in the text format of COPY.
files/…
    Uploaded files under their own names.
"""

from __future__ import annotations

import hashlib
import json
import zipfile
from collections.abc import Iterable, Iterator
from dataclasses import asdict, dataclass, field
from pathlib import Path, PurePosixPath
from typing import Any, BinaryIO, Final

FORMAT: Final = "foundleft backup"
VERSION: Final = 1
MANIFEST: Final = "manifest.json"
DATABASE: Final = "database.sqlite3"
CHUNK: Final = 1 << 20


class DamagedError(Exception):
    """The file is no backup of this program, or not the one that was written."""


@dataclass(frozen=True, slots=True)
class Member:
    """Size [bytes] and SHA-256 of one member."""

    size: int
    sha256: str


@dataclass(slots=True)
class Manifest:
    """What a backup holds.

    Parameters
    ----------
    engine : str
        "sqlite" or "postgresql".
    made_at : str
        Time of the snapshot, ISO 8601, UTC.
    migrations : list of (app, name)
        Schema state.
    rows : dict
        Table → number of rows.
    columns : dict
        Table → columns in the order of the rows; PostgreSQL only.
    sequences : dict
        Sequence → last value given; PostgreSQL only.
    members : dict
        Name → size and hash of every member but the manifest.
    """

    engine: str
    made_at: str
    migrations: list[tuple[str, str]]
    rows: dict[str, int]
    columns: dict[str, list[str]] = field(default_factory=dict)
    sequences: dict[str, int] = field(default_factory=dict)
    members: dict[str, Member] = field(default_factory=dict)

    def as_json(self) -> bytes:
        return json.dumps({"format": FORMAT, "version": VERSION} | asdict(self), indent=1).encode()

    @classmethod
    def of(cls, text: bytes) -> Manifest:
        """Read a manifest.

        Raises
        ------
        DamagedError
            It is none, or of a later program.
        """
        try:
            values: dict[str, Any] = json.loads(text)
            if values.pop("format") != FORMAT:
                raise DamagedError("This is not a backup made by `manage.py backup`.")
            if values.pop("version") != VERSION:
                raise DamagedError("This backup was made by a later version of the program: restore it with that one.")
            values["members"] = {name: Member(**member) for name, member in values["members"].items()}
            values["migrations"] = [(app, name) for app, name in values["migrations"]]
            return cls(**values)
        except (ValueError, KeyError, TypeError, AttributeError) as error:
            raise DamagedError("The manifest of this backup cannot be read.") from error


class Writer:
    """Adds members to a new backup and hashes them on the way."""

    def __init__(self, path: Path) -> None:
        self.zip = zipfile.ZipFile(path, "x", zipfile.ZIP_DEFLATED, compresslevel=1)

    def add(self, name: str, chunks: Iterable[bytes | memoryview]) -> Member:
        digest, size = hashlib.sha256(), 0
        with self.zip.open(name, "w", force_zip64=True) as out:
            for chunk in chunks:
                out.write(chunk)
                digest.update(chunk)
                size += len(chunk)
        return Member(size, digest.hexdigest())

    def finish(self, manifest: Manifest) -> None:
        self.zip.writestr(MANIFEST, manifest.as_json())
        self.zip.close()


def verified(path: Path) -> Manifest:
    """Read every member of a backup and compare it with the manifest.

    Raises
    ------
    DamagedError
        A member is missing, is not listed, has another content, or a name that leads out of its folder.
    FileNotFoundError
        There is no such file.
    """
    try:
        with zipfile.ZipFile(path) as archive:
            manifest = Manifest.of(archive.read(MANIFEST))
            names = [name for name in archive.namelist() if name != MANIFEST]
            if sorted(names) != sorted(manifest.members):
                raise DamagedError("The backup does not hold just what its manifest names.")
            for name, member in manifest.members.items():
                _refuse_way_out(name)
                with archive.open(name) as content:
                    digest, size = hashlib.sha256(), 0
                    for chunk in chunks_of(content):
                        digest.update(chunk)
                        size += len(chunk)
                if (size, digest.hexdigest()) != (member.size, member.sha256):
                    raise DamagedError(f"{name} in the backup is not what was written.")
            return manifest
    except KeyError as error:
        raise DamagedError("The backup has no manifest.") from error
    except (zipfile.BadZipFile, EOFError, OverflowError, zipfile.zlib.error) as error:  # type: ignore[attr-defined]
        raise DamagedError(f"The backup cannot be read: {error}.") from error


def chunks_of(source: BinaryIO | Any) -> Iterator[bytes]:
    """The content of a file, piece by piece."""
    while chunk := source.read(CHUNK):
        yield chunk


def file_chunks(path: Path) -> Iterator[bytes]:
    """The content of a file on disk, piece by piece."""
    with path.open("rb") as source:
        yield from chunks_of(source)


def _refuse_way_out(name: str) -> None:
    parts = PurePosixPath(name).parts
    if name.startswith("/") or "\\" in name or ":" in name or ".." in parts or not parts:
        raise DamagedError(f"The backup names a file outside its folder: {name}.")
