"""Keeps a file that somebody brings between the steps of an import, for him alone and for a day.

The file lies in the site's file storage under a random name below the id of the person. Beside it lies what was found
so far: how its columns are matched, and what the check said. Nothing of that is asked back from the browser.
"""

from __future__ import annotations

import datetime
import json
import uuid
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any, Final

from django.core.files.base import ContentFile
from django.core.files.storage import default_storage
from django.core.files.uploadhandler import FileUploadHandler, SkipFile
from django.http import HttpRequest
from django.utils import timezone

from register.imports.tables import LARGEST_FILE, Table, read_table
from register.models import Plant, User

FOLDER: Final = "imports"
KEPT_FOR: Final = datetime.timedelta(days=1)


class GoneError(FileNotFoundError):
    """The file was brought in, thrown away or swept meanwhile."""


@dataclass(slots=True)
class Kept:
    """A file between the steps of an import."""

    token: str
    user_id: int
    kind: str
    plant_id: int
    name: str
    matching: dict[str, int] = field(default_factory=dict)
    check: dict[str, Any] = field(default_factory=dict)

    def table(self, plant: Plant) -> Table:
        """Read the file again; raises TableError where it cannot be read, GoneError where it is gone."""
        return read_table(self._data(), self.name, decimal_comma=plant.decimal_comma)

    def store(self) -> None:
        """Keep what was found; raises GoneError where the file is gone, so that nothing is kept without it."""
        if not default_storage.exists(path_of(self.user_id, self.token, "file")):
            raise GoneError(self.token)
        _put(path_of(self.user_id, self.token, "json"), json.dumps(asdict(self)).encode())

    def hand_on(self, kind: str) -> Kept:
        """The same file for another kind of import, instead of this one."""
        data = self._data()
        other = Kept(str(uuid.uuid4()), self.user_id, kind, self.plant_id, self.name)
        default_storage.save(path_of(other.user_id, other.token, "file"), ContentFile(data))
        other.store()
        self.discard()
        return other

    def discard(self) -> None:
        """Forget the file."""
        for what in ("file", "json"):
            default_storage.delete(path_of(self.user_id, self.token, what))

    def _data(self) -> bytes:
        try:
            with default_storage.open(path_of(self.user_id, self.token, "file")) as held:
                return bytes(held.read())
        except FileNotFoundError as error:
            raise GoneError(self.token) from error


def keep(person: User, kind: str, plant: Plant, name: str, data: bytes) -> Kept:
    """Keep a file; those that were left lying for more than a day are thrown away."""
    sweep()
    kept = Kept(token=str(uuid.uuid4()), user_id=person.pk, kind=kind, plant_id=plant.pk, name=name[:120])
    default_storage.save(path_of(person.pk, kept.token, "file"), ContentFile(data))
    kept.store()
    return kept


def kept_by(person: User, kind: str, token: uuid.UUID) -> Kept | None:
    """A file that this person brought for this kind of import, or nothing."""
    if not default_storage.exists(path_of(person.pk, str(token), "file")):
        return None
    try:
        with default_storage.open(path_of(person.pk, str(token), "json")) as held:
            kept = Kept(**json.loads(held.read()))
    except FileNotFoundError:
        return None
    return kept if kept.kind == kind else None


def sweep() -> None:
    """Throw away what lies here untouched for more than a day: a file together with what was found in it."""
    oldest = timezone.now() - KEPT_FOR
    if not default_storage.exists(FOLDER):
        return
    for folder in default_storage.listdir(FOLDER)[0]:
        kept: dict[str, list[str]] = {}
        for name in default_storage.listdir(f"{FOLDER}/{folder}")[1]:
            kept.setdefault(name.partition(".")[0], []).append(f"{FOLDER}/{folder}/{name}")
        for paths in kept.values():
            if all(_is_older(path, oldest) for path in paths):
                for path in paths:
                    default_storage.delete(path)


def _is_older(path: str, than: datetime.datetime) -> bool:
    """Whether a file was last touched before; one that another sweep has thrown away is as old as can be."""
    try:
        return default_storage.get_modified_time(path) < than
    except FileNotFoundError:
        return True


def _put(path: str, data: bytes) -> None:
    """Write a file in the place of the one before it: whoever reads meanwhile finds one of both, and whole."""
    new = default_storage.save(f"{path}.{uuid.uuid4()}.new", ContentFile(data))
    Path(default_storage.path(new)).replace(default_storage.path(path))


class BoundedUpload(FileUploadHandler):
    """Stops taking in a file once it is larger than any that is read here; the form is told by `was_too_large`."""

    def __init__(self, request: HttpRequest | None = None) -> None:
        super().__init__(request)
        self._taken = 0

    def new_file(self, *args: Any, **kwargs: Any) -> None:
        self._taken = 0
        super().new_file(*args, **kwargs)

    def receive_data_chunk(self, raw_data: bytes, start: int) -> bytes:
        self._taken += len(raw_data)
        if self._taken > LARGEST_FILE:
            if self.request is not None:
                self.request.upload_was_too_large = True  # type: ignore[attr-defined]
            raise SkipFile
        return raw_data

    def file_complete(self, file_size: int) -> None:
        return None


def was_too_large(request: HttpRequest) -> bool:
    """Whether a file sent with the request was cut off because of its size."""
    request.FILES  # noqa: B018 - reading what was sent is what finds it out
    return getattr(request, "upload_was_too_large", False)


def path_of(user_id: int, token: str, what: str) -> str:
    """Where the `file` of a person lies, and the `json` beside it."""
    return f"{FOLDER}/{user_id}/{token}.{what}"
