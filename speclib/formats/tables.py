"""Tables that people make in a spreadsheet: CSV with a header row, as manifests and assignment lists."""

from __future__ import annotations

import csv
import difflib
import io
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from speclib.errors import InputFileError, InvalidValueError

MAX_BYTES = 64 * 1024 * 1024
MAX_CELL = 20_000


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
    text = _read_text(path)
    header_line = text.split("\n", 1)[0]
    delimiter = max(",;\t", key=header_line.count)
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, strict=True)
    try:
        csv.field_size_limit(MAX_CELL)
        header = [name.strip().lower() for name in next(reader, [])]
        _check_header(path, header, columns, required)
        rows = []
        for cells in reader:
            if not any(cell.strip() for cell in cells):
                continue
            if len(cells) > len(header) and any(cell.strip() for cell in cells[len(header) :]):
                raise InputFileError(
                    path.name,
                    f"{len(cells)} cells under {len(header)} columns",
                    place=f"line {reader.line_num}",
                    advice="put cells that hold the separator in double quotes",
                )
            values = dict(zip(header, (cell.strip() for cell in cells), strict=False))
            rows.append(TableRow(reader.line_num, values))
    except csv.Error as error:
        raise InputFileError(
            path.name,
            f"is not a readable CSV table ({error})",
            place=f"line {reader.line_num}",
            advice="save it anew as CSV",
        ) from error
    return rows


def _read_text(path: Path) -> str:
    if path.is_dir():
        raise InputFileError(str(path), "is a folder, not a table", advice="name the CSV file")
    try:
        if path.stat().st_size > MAX_BYTES:
            raise InputFileError(path.name, "is larger than 64 MB", advice="split the table")
        data = path.read_bytes()
    except FileNotFoundError as error:
        raise InputFileError(str(path), "does not exist", advice="check the name") from error
    except OSError as error:
        raise InputFileError(str(path), f"cannot be read ({error.strerror})", advice="check the permissions") from error
    if not data.strip():
        raise InputFileError(path.name, "is empty", advice="the first line must name the columns")
    if b"\0" in data and data[:2] not in (b"\xff\xfe", b"\xfe\xff"):
        raise InputFileError(path.name, "is not text", advice="save the table as CSV")
    encoding = "utf-16" if data[:2] in (b"\xff\xfe", b"\xfe\xff") else "utf-8-sig"
    try:
        return data.decode(encoding)
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise InputFileError(
            path.name, "is not UTF-8 text", place=f"line {line}", advice="save the table as 'CSV UTF-8'"
        ) from error


def _check_header(path: Path, header: list[str], columns: Sequence[str], required: Sequence[str]) -> None:
    for name in header:
        if name and name not in columns:
            near = difflib.get_close_matches(name, columns, n=1)
            hint = f"did you mean {near[0]!r}?" if near else f"known columns are {', '.join(columns)}"
            raise InputFileError(path.name, f"the column {name!r} is not known", place="line 1", advice=hint)
    doubled = [name for name in header if name and header.count(name) > 1]
    if doubled:
        raise InputFileError(path.name, f"the column {doubled[0]!r} stands twice", place="line 1", advice="rename one")
    missing = [name for name in required if name not in header]
    if missing:
        raise InputFileError(
            path.name,
            f"the column {missing[0]!r} is missing",
            place="line 1",
            advice=f"add it; read were {', '.join(header)}",
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
        value = float(plain)
    except ValueError:
        value = float("nan")
    if value != value or value in (float("inf"), float("-inf")) or "_" in plain:
        raise InvalidValueError(f"{what} {text!r} is not a number", "write it like 12.34")
    return value


def whole_number_in_cell(text: str, what: str) -> int | None:
    """A whole number of 1 or more from a cell; None for an empty cell.

    Raises:
        InvalidValueError: anything else.
    """
    value = number_in_cell(text, what)
    if value is None:
        return None
    if not value.is_integer() or value < 1:
        raise InvalidValueError(f"{what} {text!r} is not a whole number of 1 or more", "count from 1")
    return int(value)
