"""Gives sheets out: empty ones that explain their columns, and filled ones in the very same columns."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Mapping, Sequence
from typing import Any, Final

from django.http import HttpResponse

from register.exporting import as_file, cell
from register.imports.cells import Choice, Figure, day, yes_or_no
from register.imports.columns import Column
from register.imports.kinds import Kind

XLSX: Final = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"
#: Rows of an empty sheet in which a cell offers the words that it takes.
OFFERED_ROWS: Final = 2000
#: No cell is a formula or a link, whatever it begins with.
PLAIN: Final = {
    "strings_to_formulas": False,
    "strings_to_urls": False,
    "strings_to_numbers": False,
    "constant_memory": True,
}


def csv_file(kind: Kind, *, decimal_comma: bool = False) -> HttpResponse:
    """An empty sheet: headings, a line that explains, a line as an example; both lines are left out when it is read."""
    explained = _as_note([column.explain for column in kind.columns])
    example = _as_note([_typed(column, column.example, decimal_comma) for column in kind.columns])
    return csv_of(f"{kind.name}-empty.csv", kind.columns, [explained, example], decimal_comma=decimal_comma)


def csv_of(
    name: str, columns: Sequence[Column], rows: Iterable[Sequence[str]], *, decimal_comma: bool = False
) -> HttpResponse:
    """A CSV file (UTF-8 with byte order mark); where commas are decimal, columns are separated by semicolons."""
    held = io.StringIO()
    writer = csv.writer(held, delimiter=";" if decimal_comma else ",")
    writer.writerow([column.label for column in columns])
    writer.writerows([cell(text) for text in row] for row in rows)
    return _download(name, "text/csv; charset=utf-8", held.getvalue().encode("utf-8-sig"))


def filled_csv(
    name: str, columns: Sequence[Column], rows: Iterable[Mapping[str, str]], *, decimal_comma: bool = False
) -> HttpResponse:
    """A CSV file of rows by column key, in the marks of the plant."""
    lines = ([_typed(column, row.get(column.key, ""), decimal_comma) for column in columns] for row in rows)
    return csv_of(name, columns, lines, decimal_comma=decimal_comma)


def workbook_file(kind: Kind) -> HttpResponse:
    """An empty workbook: headings and an example, and a second sheet that explains each column."""
    import xlsxwriter

    held = io.BytesIO()
    with xlsxwriter.Workbook(held, {**PLAIN, "constant_memory": False}) as book:
        head, faint = _formats(book)
        sheet = _headed(book, kind.title, kind.columns, head)
        sheet.write_row(1, 0, _as_note([column.example for column in kind.columns]), faint)
        for place, column in enumerate(kind.columns):
            if offered := _offered(column):
                sheet.data_validation(
                    2, place, OFFERED_ROWS, place, {"validate": "list", "source": offered, "error_type": "warning"}
                )
        _explain(book, kind, head)
    return _download(f"{kind.name}-empty.xlsx", XLSX, held.getvalue())


def filled_workbook(
    name: str, title: str, columns: Sequence[Column], rows: Iterable[Mapping[str, str]]
) -> HttpResponse:
    """A workbook of rows by column key: numbers as numbers with their decimals, days as days."""
    import xlsxwriter

    held = io.BytesIO()
    with xlsxwriter.Workbook(held, PLAIN) as book:
        head, _ = _formats(book)
        sheet = _headed(book, title, columns, head)
        write = _Writer(book, sheet)
        for line, row in enumerate(rows, start=1):
            for place, column in enumerate(columns):
                if text := row.get(column.key, ""):
                    write.cell(line, place, column, text)
    return _download(name, XLSX, held.getvalue())


class _Writer:
    """Writes cells by what their column holds; number formats are made once."""

    def __init__(self, book: Any, sheet: Any) -> None:
        self._sheet = sheet
        self._book = book
        self._day = book.add_format({"num_format": "yyyy-mm-dd"})
        self._decimals: dict[int, Any] = {}

    def cell(self, line: int, place: int, column: Column, text: str) -> None:
        from register.engineering.typed import decimals_of, parse_number

        if isinstance(column.read, Figure):
            decimals = min(decimals_of(text), 12)
            if decimals not in self._decimals:
                shown = "0." + "0" * decimals if decimals else "0"
                self._decimals[decimals] = self._book.add_format({"num_format": shown})
            self._sheet.write_number(line, place, parse_number(text), self._decimals[decimals])
        elif column.read is day:
            self._sheet.write_datetime(line, place, day(text, False), self._day)
        else:
            self._sheet.write_string(line, place, text)


def _formats(book: Any) -> tuple[Any, Any]:
    head = book.add_format({"bold": True, "text_wrap": True, "valign": "top", "bottom": 1})
    return head, book.add_format({"italic": True, "font_color": "#666666"})


def _headed(book: Any, title: str, columns: Sequence[Column], head: Any) -> Any:
    sheet = book.add_worksheet(title[:31])
    sheet.freeze_panes(1, 1)
    for place, column in enumerate(columns):
        sheet.set_column(place, place, max(11, min(28, len(column.label) + 2)))
    sheet.write_row(0, 0, [column.label for column in columns], head)
    return sheet


def _explain(book: Any, kind: Kind, head: Any) -> None:
    wrapped = book.add_format({"text_wrap": True, "valign": "top"})
    sheet = book.add_worksheet("Columns")
    sheet.set_column(0, 1, 30, wrapped)
    sheet.set_column(2, 2, 90, wrapped)
    sheet.set_column(3, 3, 24, wrapped)
    sheet.freeze_panes(1, 0)
    sheet.write_row(0, 0, ["Column", "Group", "What it holds", "Example"], head)
    for line, column in enumerate(kind.columns, start=1):
        sheet.write_row(line, 0, [column.label, column.group, column.explain, column.example])
    for line, sentence in enumerate([*kind.says, NOTES], start=len(kind.columns) + 2):
        sheet.write_string(line, 2, sentence)


NOTES: Final = (
    "A row whose first filled cell begins with # and a space is a note, such as the example, and is left out."
)


def _offered(column: Column) -> list[str]:
    if column.read is yes_or_no:
        return ["yes", "no"]
    return [value for value, _ in column.read.words] if isinstance(column.read, Choice) else []


def _as_note(texts: Sequence[str]) -> list[str]:
    return [f"# {texts[0]}", *texts[1:]]


def _typed(column: Column, text: str, decimal_comma: bool) -> str:
    """A number in the marks of the file; anything else as it is."""
    return text.replace(".", ",") if decimal_comma and isinstance(column.read, Figure) else text


def _download(name: str, content_type: str, content: bytes) -> HttpResponse:
    response = HttpResponse(content, content_type=content_type)
    response["Content-Disposition"] = as_file(name)
    return response
