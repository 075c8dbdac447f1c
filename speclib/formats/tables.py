"""Tables that people make in a spreadsheet: CSV with a header row, as manifests and assignment lists."""

from __future__ import annotations

import csv
import difflib
import io
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from speclib.errors import InputFileError, InvalidValueError
from speclib.formats.number_text import NumberTextError, parse_number
from speclib.formats.text_document import shown, shown_name

MAX_BYTES = 64 * 1024 * 1024
MAX_CELL = 20_000
MAX_ROWS = 1_000_000
MAX_WHOLE = 10**15
"""Whole numbers up to here are exact in float64."""


@dataclass(frozen=True)
class TableRow:
    """One row: its line number in the file (from 1) and its cells by column, stripped; empty cells are ""."""

    line: int
    cells: dict[str, str]

    def __getitem__(self, column: str) -> str:
        return self.cells.get(column, "")


def read_table(path: Path, columns: Sequence[str], required: Sequence[str]) -> list[TableRow]:
    """Read a CSV table whose header names some of `columns`; comma, semicolon or tab, UTF-8 (with or without BOM).

    Raises:
        InputFileError: missing, unreadable, empty, unknown or missing columns, rows of the wrong length.
    """
    text = read_text(path)
    header_line = next((line for line in text.splitlines() if line.strip()), "")
    delimiter = max(",;\t", key=header_line.count)
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, strict=True)
    rows: list[TableRow] = []
    header: list[str] = []
    try:
        csv.field_size_limit(MAX_CELL)
        last = 0
        for cells in reader:
            # A quoted cell may run over several lines: a row is named by the one it begins in.
            line, last = last + 1, reader.line_num
            if not any(cell.strip() for cell in cells):
                continue
            if not header:
                header = [name.strip().lower() for name in cells]
                _check_header(path, header, columns, required, line)
                continue
            if len(rows) >= MAX_ROWS:
                raise _refusal(path, f"more than {MAX_ROWS} rows", line, "split the table")
            rows.append(_row(path, header, cells, line))
    except csv.Error as error:
        reason = f"is not a readable CSV table ({shown_name(str(error))})"
        raise _refusal(path, reason, max(reader.line_num, 1), "save it anew as CSV") from error
    if not header:
        raise InputFileError(shown_name(path.name), "is empty", advice="the first line must name the columns")
    return rows


def _refusal(path: Path, reason: str, line: int, advice: str) -> InputFileError:
    return InputFileError(shown_name(path.name), reason, place=f"line {line}", advice=advice)


def _row(path: Path, header: list[str], cells: list[str], line: int) -> TableRow:
    beyond = any(cell.strip() for cell in cells[len(header) :])
    unnamed = any(cell.strip() for name, cell in zip(header, cells, strict=False) if not name)
    if beyond or unnamed:
        what = f"{len(cells)} cells under {len(header)} columns" if beyond else "a cell under a column without a name"
        raise _refusal(path, what, line, "put cells that hold the separator in double quotes, and name every column")
    return TableRow(line, {name: cell.strip() for name, cell in zip(header, cells, strict=False) if name})


def read_text(path: Path) -> str:
    """The text of a table or structure file: UTF-8 with or without BOM, or UTF-16.

    Raises:
        InputFileError: missing, a folder, unreadable, too large, empty, or no text.
    """
    if path.is_dir():
        raise InputFileError(shown_name(str(path)), "is a folder, not a table", advice="name the CSV file")
    try:
        if path.stat().st_size > MAX_BYTES:
            raise InputFileError(shown_name(path.name), "is larger than 64 MB", advice="split the table")
        data = path.read_bytes()
    except FileNotFoundError as error:
        raise InputFileError(shown_name(str(path)), "does not exist", advice="check the name") from error
    except OSError as error:
        raise InputFileError(
            shown_name(str(path)), f"cannot be read ({error.strerror})", advice="check the permissions"
        ) from error
    if not data.strip():
        raise InputFileError(shown_name(path.name), "is empty", advice="the first line must name the columns")
    encoding = "utf-16" if data[:2] in (b"\xff\xfe", b"\xfe\xff") else "utf-8-sig"
    try:
        text = data.decode(encoding)
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise InputFileError(
            shown_name(path.name),
            f"is not {'UTF-16' if encoding == 'utf-16' else 'UTF-8'} text",
            place=f"line {line}",
            advice="save the table as 'CSV UTF-8'",
        ) from error
    if "\0" in text:
        raise InputFileError(shown_name(path.name), "is not text", advice="save the table as CSV")
    return text


def _check_header(path: Path, header: list[str], columns: Sequence[str], required: Sequence[str], line: int) -> None:
    for name in header:
        if name and name not in columns:
            near = difflib.get_close_matches(name, columns, n=1)
            hint = f"did you mean {near[0]!r}?" if near else f"known columns are {', '.join(columns)}"
            raise InputFileError(
                shown_name(path.name), f"the column {shown(name)} is not known", place=f"line {line}", advice=hint
            )
    doubled = [name for name in header if name and header.count(name) > 1]
    if doubled:
        raise InputFileError(
            shown_name(path.name), f"the column {doubled[0]!r} stands twice", place=f"line {line}", advice="rename one"
        )
    missing = [name for name in required if name not in header]
    if missing:
        raise InputFileError(
            shown_name(path.name),
            f"the column {missing[0]!r} is missing",
            place=f"line {line}",
            advice=f"add it; read were {shown_name(', '.join(header)[:200])}",
        )


def number_in_cell(text: str, what: str) -> float | None:
    """A number from a cell; decimal point or comma; None for an empty cell.

    Raises:
        InvalidValueError: something else, or not finite.
    """
    if not text:
        return None
    plain = text.replace(",", ".") if text.count(",") == 1 and "." not in text else text
    try:
        return parse_number(plain)
    except NumberTextError as error:
        raise InvalidValueError(f"{what} {shown(text)} is not a number", "write it like 12.34") from error


def whole_number_in_cell(text: str, what: str) -> int | None:
    """A whole number of 1 or more from a cell; None for an empty cell.

    Raises:
        InvalidValueError: anything else.
    """
    value = number_in_cell(text, what)
    if value is None:
        return None
    if not value.is_integer() or not 1 <= value <= MAX_WHOLE:
        raise InvalidValueError(f"{what} {shown(text)} is not a whole number of 1 or more", "count from 1")
    return int(value)
