"""What is made of the files that people bring: CSV of every usual kind, workbooks, and files that are neither."""

from __future__ import annotations

import datetime
import io
import zipfile
from collections.abc import Callable, Sequence
from typing import Any

import pytest
import xlsxwriter
from hypothesis import given
from hypothesis import strategies as st

from register.exporting import cell, unguarded
from register.imports.tables import LARGEST_FILE, Table, TableError, letter, read_table

Row = Sequence[Any]


def csv(text: str, encoding: str = "utf-8", **how: Any) -> Table:
    return read_table(text.encode(encoding), "a.csv", **how)


def workbook(*rows: Row, formats: dict[str, str] | None = None) -> bytes:
    """A workbook of one sheet; a value may be a pair of value and number format."""
    held = io.BytesIO()
    with xlsxwriter.Workbook(held, {"in_memory": True, "strings_to_formulas": False}) as book:
        sheet = book.add_worksheet("Tags")
        for line, row in enumerate(rows):
            for place, value in enumerate(row):
                if isinstance(value, tuple):
                    sheet.write(line, place, value[0], book.add_format({"num_format": value[1]}))
                else:
                    sheet.write(line, place, value)
    return held.getvalue()


def repacked(data: bytes, change: Callable[[str, bytes], bytes | None], **more: bytes) -> bytes:
    """The same archive with some of its parts changed, left out or added."""
    held = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(data)) as old, zipfile.ZipFile(held, "w", zipfile.ZIP_DEFLATED) as new:
        for name in old.namelist():
            content = change(name, old.read(name))
            if content is not None:
                new.writestr(name, content)
        for name, content in more.items():
            new.writestr(name, content)
    return held.getvalue()


def sheet_replaced(content: bytes) -> bytes:
    """A workbook whose sheet has other rows."""
    plain = workbook(["Tag"], ["PT-1"])
    start, end = b"<sheetData>", b"</sheetData>"

    def change(name: str, old: bytes) -> bytes:
        if name != "xl/worksheets/sheet1.xml":
            return old
        return old[: old.index(start)] + start + content + old[old.index(end) :]

    return repacked(plain, change)


@pytest.mark.parametrize("mark", [",", ";", "\t"])
def test_the_mark_between_columns_is_found_in_the_headings(mark: str) -> None:
    table = csv(f'Tag{mark}Service{mark}"LRV{mark}low"\nPT-1{mark}Water{mark}0\n')
    assert table.head == ("Tag", "Service", f"LRV{mark}low".replace("\t", " "))
    assert table.rows == [("PT-1", "Water", "0")]
    assert table.decimal_comma == (mark == ";")


def test_a_file_of_tabs_follows_the_habit_of_the_plant() -> None:
    assert csv("Tag\tLRV\nPT-1\t0,5\n", decimal_comma=True).decimal_comma
    assert not csv("Tag,LRV\nPT-1,0\n", decimal_comma=True).decimal_comma


def test_a_first_line_that_names_the_mark_is_obeyed() -> None:
    assert csv("sep=;\r\nTag;A,B\r\nPT-1;2\r\n").head == ("Tag", "A,B")


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16"])
def test_letters_beyond_ascii_are_read(encoding: str) -> None:
    table = csv("Tag,Service\nPT-1,Kühlwasser 20 °C\n", encoding)
    assert table.rows == [("PT-1", "Kühlwasser 20 °C")]
    assert not any("cp1252" in note for note in table.notes)


def test_windows_text_is_read_and_said() -> None:
    table = csv("Tag,Service\nPT-1,Kühlwasser 20 °C\n", "cp1252")
    assert table.rows == [("PT-1", "Kühlwasser 20 °C")]
    assert any("Windows text (cp1252)" in note for note in table.notes)


def test_rows_are_counted_as_an_editor_counts_lines() -> None:
    table = csv('\n# explained\nTag,Service\n\nPT-1,"two\nlines"\n\nPT-2,Steam\n# PT-3,left out\n#PT-4,kept\n')
    assert table.lines == [5, 8, 10]
    assert [row[0] for row in table.rows] == ["PT-1", "PT-2", "#PT-4"]
    assert table.left_out == 2


def test_a_row_with_more_cells_than_headings_is_a_fault_of_that_row() -> None:
    table = csv("Tag,LRV\nPT-1,0\nPT-2,0,5\nPT-3\n")
    assert list(table.faults) == [1]
    assert "3 cells stand here under 2 headings" in table.faults[1]
    assert table.rows[2] == ("PT-3", "")


@given(st.text(st.characters(exclude_categories=("Cs",), exclude_characters="\0\r\n"), max_size=12))
def test_a_guarded_cell_is_read_as_it_was(text: str) -> None:
    assert unguarded(cell(text)) == text


@pytest.mark.parametrize("text", ["=1+1", "+cmd", "-x", "@SUM(A1)", "  =1", "'=1"])
def test_no_exported_cell_begins_a_formula(text: str) -> None:
    assert cell(text).startswith("'")


@pytest.mark.parametrize("text", ["-5", "-0,25", "+1.5", "-1e-3", "PT-1", "a=b"])
def test_numbers_and_words_are_exported_as_they_are(text: str) -> None:
    assert cell(text) == text


def test_a_spreadsheet_is_read_as_it_would_be_typed() -> None:
    day, moment = datetime.date(2024, 1, 5), datetime.datetime(2024, 1, 5, 13, 30)  # noqa: DTZ001
    table = read_table(
        workbook(
            ["Tag", "a", "b", "c", "d", "e", "f"],
            ["PT-1", 12.0, 0.1 + 0.2, -40, "0012", True, "=1+1"],
            ["PT-2", (day, "dd/mm/yyyy"), (moment, "yyyy-mm-dd hh:mm"), 1e-6, 1234567.5, " x ", "-5"],
        ),
        "a.xlsx",
    )
    assert table.rows == [
        ("PT-1", "12", "0.3", "-40", "0012", "yes", "=1+1"),
        ("PT-2", "2024-01-05", "2024-01-05 13:30", "0.000001", "1234567.5", "x", "-5"),
    ]
    assert table.counted_in == "row" and table.lines == [2, 3] and not table.decimal_comma


def test_a_cell_that_shows_an_error_is_not_taken_for_a_blank_one() -> None:
    held = io.BytesIO()
    with xlsxwriter.Workbook(held, {"in_memory": True}) as book:
        sheet = book.add_worksheet()
        sheet.write_row(0, 0, ["Tag", "LRV"])
        sheet.write_row(1, 0, ["PT-1", 0])
        sheet.write(2, 0, "PT-2")
        sheet.write_formula(2, 1, "=NA()", None, "#N/A")
    table = read_table(held.getvalue(), "a.xlsx")
    assert table.faults == {1: "Cell B3 shows an error of its formula, such as #N/A, instead of a value."}


def test_the_first_visible_sheet_is_read_and_the_others_are_named() -> None:
    held = io.BytesIO()
    with xlsxwriter.Workbook(held, {"in_memory": True}) as book:
        book.add_worksheet("Old").hide()
        book.add_worksheet("Tags").write_column(0, 0, ["Tag", "PT-1"])
        book.add_worksheet("Notes").write(0, 0, "nothing")
        book.worksheets()[1].activate()
    table = read_table(held.getvalue(), "a.xlsx")
    assert table.head == ("Tag",)
    assert table.notes == ("Sheet “Tags” was read. Left out: “Notes”.",)


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"", "is empty"),
        (b" \n \n", "is empty"),
        (b"Tag,Service\n", "no row below"),
        (b"# only a note\n", "no headings"),
        (b"Tag\0,Service\nPT-1,x\n", "is no text"),
        (bytes(range(256)) * 4, "is no text"),
        (b"Tag\nPT-1\n" + b"\x81\x8d\xff", "neither UTF-8 nor Windows text"),
        (b"\xff\xfeT", "says that it is UTF-16"),
        (b'Tag,Service\nPT-1,"open\nPT-2,x\n', "Line 2"),
        (b'Tag,Service\nPT-1,a"b"c\nPT-2,"x"y\n', "Line 3"),
        (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1", "old kind, or one protected"),
        (b"PK\x03\x04 and nothing more", "damaged"),
        (b"x," * 1_000_000 + b"\n1\n", "columns"),
        (b"Tag\n" + b"1\n" * 100_001, "more than 100,000 rows"),
        (b"x" * (LARGEST_FILE + 1), "larger than 10 MB"),
    ],
)
def test_a_file_that_holds_no_table_is_refused_in_words(data: bytes, words: str) -> None:
    with pytest.raises(TableError, match=words):
        read_table(data, "brought.csv")


def test_an_archive_that_is_no_workbook_is_refused() -> None:
    held = io.BytesIO()
    with zipfile.ZipFile(held, "w") as archive:
        archive.writestr("word/document.xml", "<a/>")
    with pytest.raises(TableError, match=r"is no \.xlsx workbook, although it is packed like one"):
        read_table(held.getvalue(), "letter.xlsx")


def test_a_workbook_that_unpacks_to_hundreds_of_megabytes_is_refused() -> None:
    bomb = repacked(workbook(["Tag"], ["PT-1"]), lambda _, old: old, **{"xl/media/x.bin": b"0" * 300_000_000})
    assert len(bomb) < 1_000_000
    with pytest.raises(TableError, match="too large when it is unpacked"):
        read_table(bomb, "bomb.xlsx")


def test_a_part_that_lies_about_its_size_is_unpacked_by_what_is_in_it() -> None:
    bomb = repacked(workbook(["Tag"], ["PT-1"]), lambda _, old: old, **{"xl/media/x.bin": b"0" * 300_000_000})
    truth, lie = (300_000_000).to_bytes(4, "little"), (3).to_bytes(4, "little")
    with pytest.raises(TableError, match="too large when it is unpacked"):
        read_table(bomb.replace(truth, lie), "bomb.xlsx")


@pytest.mark.parametrize(
    ("rows", "words"),
    [
        (b'<row r="1"><c r="A1"><v>1</v></c></row><row r="2"><c r="XFD2"><v>1</v></c></row>', "more than 200 columns"),
        (b'<row r="1"><c r="A1"><v>1</v></c></row><row r="2"><c r="A1048576"><v>1</v></c></row>', "100,000 rows"),
        (b'<row r="1"><c r="A1"><v>1</v></c></row><row r="1048576"><c><v>1</v></c></row>', "100,000 rows"),
        (b"<row>" + b"<c><v>1</v></c>" * 1_000_000 + b"</row>", "more than 200 columns"),
        (b"<row/>" * 1_000_000 + b"<row><c><v>1</v></c></row>", "100,000 rows"),
        (b'<row r="99999999999999999999"><c r="A99999999999999999999"/></row>', "100,000 rows"),
    ],
)
def test_a_small_sheet_that_reaches_far_is_refused_before_room_is_made(rows: bytes, words: str) -> None:
    with pytest.raises(TableError, match=words):
        read_table(sheet_replaced(rows), "far.xlsx")


def test_one_long_text_shown_in_a_million_cells_is_refused() -> None:
    shared = b"<sst><si><t>Tag</t></si><si><t>" + b"x" * 30_000 + b"</t></si></sst>"
    lines = b"".join(b"<row>" + b'<c t="s"><v>1</v></c>' * 100 + b"</row>" for _ in range(1_000))
    book = repacked(sheet_replaced(lines), lambda name, old: shared if name.endswith("sharedStrings.xml") else old)
    with pytest.raises(TableError, match="too large when it is unpacked"):
        read_table(book, "long.xlsx")


def test_a_workbook_with_an_entity_is_refused() -> None:
    entity = b'<!DOCTYPE x [<!ENTITY a "aaaa">]>'
    book = repacked(workbook(["Tag"], ["PT-1"]), lambda name, old: entity + old if "sheet1" in name else old)
    with pytest.raises(TableError, match="no plain workbook"):
        read_table(book, "entity.xlsx")


def test_a_workbook_without_its_sheet_is_refused() -> None:
    book = repacked(workbook(["Tag"], ["PT-1"]), lambda name, old: None if "sheet1" in name else old)
    with pytest.raises(TableError):
        read_table(book, "hollow.xlsx")


def test_a_cell_with_a_sign_that_no_database_takes_is_a_fault_of_its_row() -> None:
    """A workbook writes signs that XML cannot hold as _x0000_; its reader gives them back."""
    plain = workbook(["Tag", "Service"], ["PT-1", "ODD"], ["PT-2", "water"])
    table = read_table(repacked(plain, lambda _, old: old.replace(b"ODD", b"a_x0000_b")), "a.xlsx")
    assert table.faults == {0: "The cell in column B holds a sign that is no text: type it anew."}
    assert table.rows == [("PT-1", "ab"), ("PT-2", "water")]


def test_such_a_sign_in_a_heading_is_left_out() -> None:
    table = read_table(
        repacked(workbook(["Tag"], ["PT-1"]), lambda _, old: old.replace(b"Tag", b"T_x0000_ag")), "a.xlsx"
    )
    assert table.head == ("Tag",)


def test_columns_are_called_as_in_a_spreadsheet() -> None:
    assert [letter(place) for place in (0, 25, 26, 701, 702)] == ["A", "Z", "AA", "ZZ", "AAA"]
