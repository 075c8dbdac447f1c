"""Which separator and decimal mark a table of two columns uses: recognised when one reading fits, else asked about.

Every pair of separator and decimal mark is tried on every row. A reading fits when all rows give the same number of
columns and every field is a number. Thousands marks are never read. Three traps are asked about although one reading
fits:

* `43;1,234`: each marked number has exactly three digits after the mark, so the mark may part thousands;
* `43,100 57,200`: all numbers could also be pairs `m/z,intensity` with rising m/z;
* `43,05` alone: a comma-separated intensity that begins with 0 looks like the decimals of a single column.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from speclib.errors import InputFileError
from speclib.formats.number_text import (
    MAX_NUMBER_LENGTH,
    has_thousands_marks,
    is_number_text,
    number_form,
    why_not_a_number,
)
from speclib.formats.options import DecimalMark, ReadOptions, Separator
from speclib.formats.text_document import TextDocument, shown
from speclib.model.spectrum import MAX_MZ

_SIGNS: dict[Separator, str] = {"tab": "\t", "semicolon": ";", "comma": ","}
_BLANKS = re.compile(r"[ \t]+")
_EMPTY_COLUMN = re.compile(r"\t *\t")
_ASK = "say it with --separator tab|semicolon|comma|blank and --decimal comma|point"
MAX_COLUMNS = 3


@dataclass(frozen=True)
class Row:
    """One line of the table: its number in the file and its text without blanks at the ends."""

    line: int
    text: str


@dataclass(frozen=True)
class Layout:
    """Separator and decimal mark of a table."""

    separator: Separator
    decimal: DecimalMark

    def split(self, text: str) -> list[str]:
        """The fields of a row, stripped; separators at the end count for nothing."""
        if self.separator == "blank":
            # A run with two tabs hides an empty column; blanks inside a column between tabs part thousands or words.
            if _EMPTY_COLUMN.search(text) or ("\t" in text and any(" " in f.strip(" ") for f in text.split("\t"))):
                return [text]
            return _BLANKS.split(text.strip(" \t"))
        sign = _SIGNS[self.separator]
        fields = [field.strip(" \t") for field in text.rstrip(" \t" + sign).split(sign)]
        if self.decimal == "comma" and self.separator == "comma" and len(fields) != 2:
            # Three fields would leave open which of the two numbers has the decimals.
            return [f"{fields[0]},{fields[1]}", f"{fields[2]},{fields[3]}"] if len(fields) == 4 else [text]
        return fields


@dataclass(frozen=True)
class Table:
    """The fields of all rows under one layout; every row has `width` of them (2 or 3)."""

    layout: Layout
    rows: Sequence[Row]
    fields: list[list[str]]

    @property
    def width(self) -> int:
        """Number of columns."""
        return len(self.fields[0])


@dataclass(frozen=True)
class _Attempt:
    layout: Layout
    fields: list[list[str]]
    failed_at: int | None

    def numbers(self) -> list[list[str]]:
        return [[field.replace(",", ".") for field in row] for row in self.fields]


def find_table(document: TextDocument, rows: Sequence[Row], options: ReadOptions, named_columns: bool) -> Table:
    """Find the one layout that reads every row; `named_columns` says that headings may justify a third column.

    Raises:
        InputFileError: no layout reads all rows, or more than one meaning is possible.
    """
    attempts = [_attempt(rows, layout) for layout in _layouts(options)]
    fitting = [attempt for attempt in attempts if attempt.failed_at is None]
    if not fitting:
        best = max(attempts, key=lambda attempt: (attempt.failed_at or 0, _promise(rows[0].text, attempt.layout)))
        raise _no_layout_error(document, rows, best, options)
    chosen = fitting[0]
    for other in fitting[1:]:
        if other.fields != chosen.fields and other.numbers() != chosen.numbers():
            raise document.error(
                f"{shown(rows[0].text)} can be read with {_words(chosen.layout)} and with {_words(other.layout)}",
                line=rows[0].line,
                advice=_ASK,
            )
    table = Table(chosen.layout, rows, chosen.fields)
    if table.width == MAX_COLUMNS and table.layout.separator == "comma" and not (named_columns or options.separator):
        raise _commas_error(document, rows[0])
    _ask_about_thousands(document, table, options)
    _ask_about_pairs(document, table, options)
    _refuse_single_column(document, table, options)
    return table


def _layouts(options: ReadOptions) -> Iterator[Layout]:
    separators: tuple[Separator, ...] = ("tab", "semicolon", "comma", "blank")
    decimals: tuple[DecimalMark, ...] = ("point", "comma")
    for separator in (options.separator,) if options.separator else separators:
        for decimal in (options.decimal,) if options.decimal else decimals:
            # A comma that does both jobs is believed only when the user says so.
            if separator != "comma" or decimal != "comma" or (options.separator and options.decimal):
                yield Layout(separator, decimal)


def _attempt(rows: Sequence[Row], layout: Layout) -> _Attempt:
    fields: list[list[str]] = []
    width = 0
    plain = _plain_row(layout)
    for position, row in enumerate(rows):
        match = plain.fullmatch(row.text) if plain is not None and width != MAX_COLUMNS else None
        if match is not None and len(row.text) <= MAX_NUMBER_LENGTH:
            width = 2
            fields.append(list(match.groups()))
            continue
        found = layout.split(row.text)
        width = width or len(found)
        if (
            len(found) != width
            or not 2 <= width <= MAX_COLUMNS
            or not all(is_number_text(field, layout.decimal) for field in found)
        ):
            return _Attempt(layout, fields, position)
        fields.append(found)
    return _Attempt(layout, fields, None)


def _plain_row(layout: Layout) -> re.Pattern[str] | None:
    """The form of a row of two numbers that `Layout.split` would part in the same way, for speed; None for the rest."""
    if layout.separator == layout.decimal == "comma":
        return None
    number = number_form(layout.decimal)
    between = "(?: +|\t)" if layout.separator == "blank" else f" *{re.escape(_SIGNS[layout.separator])} *"
    return re.compile(f"({number}){between}({number})")


def _promise(text: str, layout: Layout) -> tuple[bool, bool]:
    """How well a layout suits the look of a row of which no layout makes sense."""
    present = [name for name, sign in _SIGNS.items() if sign in text]
    if " " in text.strip() and "comma" not in present[:1]:
        present.append("blank")
    wanted = next((name for name in (*present, "comma", "blank") if name in present), "blank")
    return layout.separator == wanted, (layout.decimal == "comma") == ("," in text and wanted != "comma")


def _words(layout: Layout) -> str:
    between = {"tab": "tabs", "semicolon": "semicolons", "comma": "commas", "blank": "blanks"}[layout.separator]
    return f"{between} between columns and a decimal {layout.decimal}"


def _commas_error(document: TextDocument, row: Row) -> InputFileError:
    return document.error(
        f"in {shown(row.text)} commas may part columns or mark decimals",
        line=row.line,
        advice=f"{_ASK} (both may be comma when both numbers have decimals), or save the table with semicolons or tabs",
    )


def _no_layout_error(
    document: TextDocument, rows: Sequence[Row], best: _Attempt, options: ReadOptions
) -> InputFileError:
    position = best.failed_at or 0
    row, layout = rows[position], best.layout
    if '"' in row.text:
        return document.error(
            f"quotation marks in {shown(row.text)}", line=row.line, advice="save the table without quotation marks"
        )
    fields = layout.split(row.text)
    only_commas = re.fullmatch(r"[0-9, ]+", row.text) is not None and row.text.count(",") >= 2
    if only_commas and position == 0 and not (options.separator and options.decimal):
        return _commas_error(document, row)
    bad = next((field for field in fields if not is_number_text(field, layout.decimal)), None)
    if bad is not None and len(fields) > 1:
        return _bad_field_error(document, row, layout, bad, fields.index(bad))
    if len(fields) == 1:
        return document.error(
            f"{shown(row.text)} is not two numbers, m/z and intensity",
            line=row.line,
            advice=f"correct the line, or {_ASK}",
        )
    expected = len(best.fields[0]) if best.fields else 2
    return document.error(
        f"{len(fields)} columns in {shown(row.text)}, where {expected} are expected",
        line=row.line,
        advice=f"keep two columns, m/z and intensity, or {_ASK}",
    )


def _bad_field_error(document: TextDocument, row: Row, layout: Layout, bad: str, column: int) -> InputFileError:
    if column >= 2:
        return document.error(
            f"{shown(bad)} stands after m/z and intensity",
            line=row.line,
            advice="keep two columns, m/z and intensity; text belongs in lines that begin with #",
        )
    if column == 0 and " " in bad:
        reason, advice = f"{shown(row.text)} mixes blanks with other separators", f"write one peak a line, or {_ASK}"
    elif has_thousands_marks(bad, layout.decimal):
        reason, advice = why_not_a_number(bad, layout.decimal), "save the table without thousands marks"
    elif re.search(r"[.,;\t]", bad):
        reason = f"{why_not_a_number(bad, layout.decimal)} (read with {_words(layout)})"
        advice = f"correct the line, or {_ASK}"
    else:
        reason, advice = why_not_a_number(bad, layout.decimal), "correct the line or take it out"
    return document.error(reason, line=row.line, advice=advice)


def _ask_about_thousands(document: TextDocument, table: Table, options: ReadOptions) -> None:
    """Ask when every marked number looks like `1,234` (or `1.234` beside unmarked ones) and nothing speaks against it.

    A file of decimal points in which every intensity carries its three decimals is let through: read either way its
    intensities keep their proportions, and fixed decimals are what programs write.
    """
    layout = table.layout
    if options.decimal or layout.separator == "comma":
        return
    mark = "," if layout.decimal == "comma" else "."
    grouped = re.compile(rf"\+?[1-9][0-9]{{0,2}}{re.escape(mark)}[0-9]{{3}}")
    example: tuple[int, str] | None = None
    marked_intensities = 0
    for row, fields in zip(table.rows, table.fields, strict=True):
        for column, field in enumerate(fields):
            if mark not in field:
                continue
            if not grouped.fullmatch(field) or (column == 0 and float(field.replace(mark, "")) > MAX_MZ):
                return
            example = example or (row.line, field)
            marked_intensities += column == 1
    if example is None or (mark == "." and marked_intensities in (0, len(table.fields))):
        return
    line, field = example
    raise document.error(
        f"{field!r} may be {field.replace(mark, '.')} or {field.replace(mark, '')}: nothing in the file tells "
        f"a decimal {layout.decimal} from a thousands mark",
        line=line,
        advice=f"say --decimal {layout.decimal} when it marks decimals, else save the table without thousands marks",
    )


def _ask_about_pairs(document: TextDocument, table: Table, options: ReadOptions) -> None:
    if options.decimal or options.separator or table.layout.decimal == "point" or table.width != 2:
        return
    last = -1
    for fields in table.fields:
        for field in fields:
            whole, comma, rest = field.partition(",")
            if not (comma and whole.isdigit() and rest.isdigit()) or (rest[0] == "0" and rest != "0"):
                return
            if int(whole) <= last:
                return
            last = int(whole)
    row = table.rows[0]
    raise document.error(
        f"{shown(row.text)} may be one peak with decimal commas or two peaks written m/z,intensity",
        line=row.line,
        advice="say --decimal comma when the commas mark decimals, else write one peak a line",
    )


def _refuse_single_column(document: TextDocument, table: Table, options: ReadOptions) -> None:
    if options.separator or table.layout.separator != "comma" or table.width != 2:
        return
    if any("." in field for fields in table.fields for field in fields):
        return
    for row, fields in zip(table.rows, table.fields, strict=True):
        if re.fullmatch(r"0[0-9]+", fields[1]):
            raise document.error(
                f"{shown(row.text)} looks like one number with a decimal comma, and two columns are needed",
                line=row.line,
                advice="give m/z and intensity; when the comma parts them, say --separator comma",
            )
