"""Reads the first visible sheet of an .xlsx workbook, after a look at how large it will become.

A spreadsheet file of a few kilobytes can ask for gigabytes: it is unpacked here first, up to a limit, and the reach
of its cells is found before the reader of spreadsheets makes room for them.
"""

from __future__ import annotations

import datetime
import io
import re
import struct
import zipfile
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, Final
from xml.etree import ElementTree

from register.engineering.typed import NumberError, shortest
from register.imports.tables import MOST_COLUMNS, MOST_ROWS, Table, TableError, assembled

MOST_UNPACKED: Final = 120 * 1024 * 1024
MOST_CELLS: Final = 20_000_000
MOST_TEXT: Final = 1024 * 1024 * 1024
_PLACE: Final = re.compile(rb"\br\s*=\s*[\"']([A-Za-z]*)([0-9]+)[\"']")
_ROW: Final = re.compile(rb"<(?:\w+:)?row[\s/>]")
_CELL: Final = re.compile(rb"<(?:\w+:)?c[\s/>]")
_SHARED: Final = re.compile(rb"\bt\s*=\s*[\"']s[\"']")
_STRING: Final = re.compile(rb"<(?:\w+:)?si[\s/>]")
_WRONG: Final = re.compile(rb"<(?:\w+:)?c\b([^>]*\bt=\"e\"[^>]*)>")
_ENCODING: Final = re.compile(rb"<\?xml[^>]*\bencoding\s*=\s*[\"']([^\"']*)")
_WORKBOOK: Final = "xl/workbook.xml"


def read_workbook(data: bytes, name: str) -> Table:
    """Read the first visible sheet.

    Raises
    ------
    TableError
        No workbook, protected, damaged, or too large once unpacked.
    """
    parts = _unpacked(data, name)
    for part in parts.values():
        _look_through(part, name)
    if sum(len(_SHARED.findall(part)) for part in parts.values()) * _longest_string(parts) > MOST_TEXT:
        raise _too_large(name)
    sheet, others = _first_sheet(parts, name)
    from python_calamine import CalamineError, load_workbook

    try:
        with load_workbook(io.BytesIO(data)) as workbook:
            rows = workbook.get_sheet_by_name(sheet.name).to_python(skip_empty_area=False)
    except CalamineError as error:
        raise TableError(
            f"“{name}” is a damaged workbook, or none: open it, save it anew and bring it again."
        ) from error
    notes = [f"Sheet “{sheet.name}” was read." + (f" Left out: {', '.join(others)}." if others else "")]
    return assembled(
        ((line, [_text(cell) for cell in row]) for line, row in enumerate(rows, start=1)),
        name,
        counted_in="row",
        notes=notes,
        wrong_cells=_wrong_cells(sheet.content),
    )


@dataclass(frozen=True, slots=True)
class _Sheet:
    name: str
    content: bytes


def _text(cell: Any) -> str:
    """A cell as it would be typed."""
    if isinstance(cell, str):
        return cell
    if isinstance(cell, bool):
        return "yes" if cell else "no"
    if isinstance(cell, (int, float)):
        try:
            return shortest(cell)
        except NumberError:
            return str(cell)
    if isinstance(cell, datetime.datetime):
        return cell.date().isoformat() if cell.time() == datetime.time() else cell.isoformat(" ", "minutes")
    if isinstance(cell, datetime.time):
        return cell.isoformat("minutes")
    return str(cell)


def _unpacked(data: bytes, name: str) -> dict[str, bytes]:
    """Every part of the workbook; unpacked by what is in it, whatever it says of its size."""
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            listed = archive.infolist()
    except (zipfile.BadZipFile, ValueError, NotImplementedError) as error:
        raise TableError(f"“{name}” is a damaged .xlsx workbook, or none.") from error
    parts: dict[str, bytes] = {}
    room = MOST_UNPACKED
    for entry in listed:
        part = entry.filename.replace("\\", "/").casefold()
        if (
            part in parts
            or entry.flag_bits & 1
            or entry.compress_type not in (zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED)
        ):
            raise TableError(f"“{name}” is protected or packed in an unusual way: save it anew as a plain .xlsx.")
        parts[part] = _inflated(data, entry, room, name)
        room -= len(parts[part])
    if _WORKBOOK not in parts:
        raise TableError(f"“{name}” is no .xlsx workbook, although it is packed like one.")
    return parts


def _inflated(data: bytes, entry: zipfile.ZipInfo, room: int, name: str) -> bytes:
    try:
        lengths = struct.unpack_from("<HH", data, entry.header_offset + 26)
        start = entry.header_offset + 30 + sum(lengths)
        packed = data[start : start + entry.compress_size]
        if entry.compress_type == zipfile.ZIP_STORED:
            content, whole = packed, True
        else:
            inflating = zlib.decompressobj(-zlib.MAX_WBITS)
            content = inflating.decompress(packed, room + 1)
            whole = inflating.eof
    except (struct.error, zlib.error) as error:
        raise TableError(f"“{name}” is a damaged .xlsx workbook.") from error
    if len(content) > room:
        raise _too_large(name)
    if not whole:
        raise TableError(f"“{name}” is a damaged .xlsx workbook.")
    return content


def _too_large(name: str) -> TableError:
    return TableError(
        f"“{name}” becomes too large when it is unpacked: copy the cells you need into a new workbook, or bring CSV."
    )


def _look_through(part: bytes, name: str) -> None:
    """Refuse what would make the reader of spreadsheets reserve more room than a register can need."""
    if b"<!DOCTYPE" in part or b"<!ENTITY" in part:
        raise TableError(f"“{name}” is no plain workbook: save it anew as .xlsx.")
    if not _CELL.search(part):
        return
    encoding = _ENCODING.match(part.removeprefix(b"\xef\xbb\xbf"))
    if b"\0" in part or (encoding and encoding[1].lower() not in (b"utf-8", b"us-ascii")):
        raise TableError(f"“{name}” is written in an unusual encoding: save it anew as .xlsx.")
    columns, rows = {b""}, {b"1"}
    for place in _PLACE.finditer(part):
        columns.add(place[1])
        rows.add(place[2])
    # A cell that does not say where it is follows the one before it: both ways of counting are added up.
    lines = _ROW.split(part)
    widest = max(map(_number, columns)) + max(len(_CELL.findall(line)) for line in lines)
    longest = max(int(row) if len(row) < 10 else 10**10 for row in rows) + len(lines)
    if widest > 2 * MOST_COLUMNS:
        raise TableError(f"“{name}” has a sheet of more than {MOST_COLUMNS} columns: bring the ones you need.")
    if longest > 4 * MOST_ROWS or widest * longest > MOST_CELLS:
        raise TableError(
            f"“{name}” has a sheet that reaches further down than {MOST_ROWS:,} rows, which is the most that is read. "
            "Delete what stands far below the table, or bring it in parts."
        )


def _number(letters: bytes) -> int:
    number = 0
    for one in letters.upper():
        number = number * 26 + one - ord("A") + 1
    return number


def _longest_string(parts: dict[str, bytes]) -> int:
    shared = [part for name, part in parts.items() if "sharedstrings" in name or _STRING.search(part)]
    return max((len(one) for part in shared for one in _STRING.split(part)[1:]), default=0)


def _first_sheet(parts: dict[str, bytes], name: str) -> tuple[_Sheet, list[str]]:
    """The first sheet that is not hidden, and the names of the others."""
    try:
        workbook = ElementTree.fromstring(parts[_WORKBOOK])
        relations = ElementTree.fromstring(parts.get("xl/_rels/workbook.xml.rels", b"<none/>"))
    except ElementTree.ParseError as error:
        raise TableError(f"“{name}” is a damaged .xlsx workbook.") from error
    targets = {relation.get("Id"): relation.get("Target", "") for relation in relations}
    sheets = [element for element in workbook.iter() if element.tag.rpartition("}")[2] == "sheet"]
    shown = [sheet for sheet in sheets if sheet.get("state", "visible") == "visible"]
    if not shown:
        raise TableError(f"“{name}” has no sheet that can be read.")
    first = shown[0]
    key = next((value for attribute, value in first.attrib.items() if attribute.endswith("}id")), "")
    target = targets.get(key, "").casefold()
    path = target.removeprefix("/") if target.startswith("/") else f"xl/{target}"
    others = [f"“{sheet.get('name', '')}”" for sheet in shown[1:]]
    return _Sheet(first.get("name", ""), parts.get(path, b"")), others


def _wrong_cells(sheet: bytes) -> Iterator[tuple[int, str]]:
    """Cells whose formula came to an error: the reader gives them as blank, and blank would mean “unchanged”."""
    for found in _WRONG.finditer(sheet):
        place = _PLACE.search(found[1])
        if place:
            where = f"{place[1].decode().upper()}{place[2].decode()}"
            yield int(place[2]), f"Cell {where} shows an error of its formula, such as #N/A, instead of a value."
