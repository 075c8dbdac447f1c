"""Peak tables of JCAMP-DX: pairs of numbers in any mix of separators, scaled and counted.

Forms are those of McDonald & Wilks 1988 (4.24) and of its extension to mass spectra (Lampen et al., Appl. Spectrosc.
1994, 48, 1545). Equally spaced ordinates are the matter of `jcamp_asdf`.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from decimal import Decimal

from speclib.formats.assembling import PeakRows, too_many_peaks
from speclib.formats.jcamp_records import Block, Record
from speclib.formats.number_text import NumberTextError, is_number_text, parse_number, parse_numbers
from speclib.formats.text_document import TextDocument, shown
from speclib.model.spectrum import MAX_PEAKS

TABLE_LABELS = ("PEAKTABLE", "XYPOINTS", "XYDATA", "DATATABLE")
"""`XYDATA= (XY..XY)` is against the protocol, but instruments write it."""
_SEPARATORS = re.compile(r"[ \t,;]+")
_MISSING_FIELD = re.compile(r"[,;][ \t]*,|,[ \t]*;")
_FORM = re.compile(r"\(([^()]{1,60}(?:\([^()]{1,40}\)[^()]{0,20})?)\)(.*)")
_SUFFIX = re.compile(r",[ \t]*([A-Z]{1,20})\b", re.IGNORECASE)
EQUALLY_SPACED = "X++(Y..Y)"
_CURED = "get the file again, or export it as (XY..XY)"

PAIR, WITH_WIDTH = 2, 3
MAX_NOTES = 20
_GROUP = {PAIR: "pair", WITH_WIDTH: "group of m/z, intensity and width"}

Token = tuple[str, int]
"""A number's text and the line it stands in."""


def find_table(document: TextDocument, block: Block) -> Record:
    """The one record of a block that holds its peaks.

    Raises:
        InputFileError: none, or several.
    """
    tables = [record for record in block.records if record.label in TABLE_LABELS]
    if not tables:
        raise document.error(
            "the block holds no peak table (PEAK TABLE, XYPOINTS or XYDATA)",
            line=block.line,
            advice="export the spectrum with its peaks",
        )
    if len(tables) > 1:
        raise document.error(
            f"the block holds two tables, in lines {tables[0].line} and {tables[1].line}",
            line=tables[1].line,
            advice="keep one table a block",
        )
    return tables[0]


@dataclass(frozen=True)
class TableText:
    """A table before its numbers are read: form in capitals without blanks, the word behind it, and its lines."""

    form: str
    kind: str
    body: list[tuple[int, str]]


def split_table(document: TextDocument, table: Record) -> TableText:
    """Part a table into its form, such as `XY..XY`, the word that may follow (`PEAKS`, `PROFILE`), and its lines.

    Raises:
        InputFileError: the form is missing.
    """
    match = _FORM.match(table.body[0][1].strip())
    if match is None:
        raise document.error(
            f"{table.heading} does not say the form of its table",
            line=table.line,
            advice="the form of a peak table is (XY..XY)",
        )
    rest = match[2].strip()
    suffix = _SUFFIX.match(rest)
    return TableText(
        "".join(match[1].split()).upper(),
        suffix[1].upper() if suffix else "",
        [(table.line, rest[suffix.end() :] if suffix else rest), *table.body[1:]],
    )


def form_of(table: Record) -> str:
    """The form of a table as written, for keeping: `(XY..XY)`, or "" when it has none."""
    match = _FORM.match(table.body[0][1].strip())
    return f"({match[1]})" if match else ""


def read_peaks(document: TextDocument, block: Block, table: Record, text: TableText) -> tuple[PeakRows, list[str]]:
    """The peaks of a table, scaled by XFACTOR and YFACTOR, and remarks.

    Raises:
        InputFileError: a form that is not read, anything that is not a number, half a pair, a wrong NPOINTS.
    """
    if not re.fullmatch(r"XY\.{2,3}XY|XYW\.{2,3}XYW", text.form):
        raise document.error(
            f"this holds a table of the form {shown(f'({text.form})')}: that is not read here",
            line=table.line,
            advice="export the spectrum as a PEAK TABLE of the form (XY..XY)",
        )
    width = WITH_WIDTH if text.form.startswith("XYW") else PAIR
    tokens = _tokens(document, text.body, width, counted=block.find("NPOINTS") is not None)
    if len(tokens) % width:
        raise document.error(
            f"{shown(tokens[-1][0])} is half a {_GROUP[width]}: the table holds {len(tokens)} numbers",
            line=tokens[-1][1],
            advice=_CURED,
        )
    notes = _check_count(document, block, tokens, width)
    factors = (read_factor(document, block, "XFACTOR"), read_factor(document, block, "YFACTOR"))
    if factors == (Decimal(1), Decimal(1)) and width == PAIR:
        columns = [parse_numbers([token for token, _ in tokens[at::PAIR]]) for at in (0, 1)]
        if columns[0] is not None and columns[1] is not None and 0.0 not in columns[0]:
            return PeakRows(columns[0], columns[1], [line for _, line in tokens[::PAIR]]), notes
    peaks = PeakRows()
    for (x, line), (y, y_line) in zip(tokens[::width], tokens[1::width], strict=True):
        mz = _number(document, x, line, factors[0])
        if y == "?":
            notes.append(f"the intensity of m/z {mz:g} (line {y_line}) is missing: the peak was left out")
            continue
        intensity = _number(document, y, y_line, factors[1])
        if mz == 0 and intensity == 0:
            notes.append(f"the point 0, 0 (line {line}), an anchor for plotting, was left out: it is no peak")
            continue
        peaks.add(mz, intensity, line)
    if width == WITH_WIDTH:
        for x, line in tokens[2::width]:
            _ = x == "?" or _number(document, x, line, Decimal(1))
        notes.append("the widths of the peaks were not kept")
    return peaks, summed_up(notes)


def summed_up(notes: list[str]) -> list[str]:
    """At most `MAX_NOTES` remarks; the last then says how many more there were."""
    if len(notes) <= MAX_NOTES:
        return notes
    return [*notes[: MAX_NOTES - 1], f"{len(notes) - MAX_NOTES + 1} more remarks of this kind"]


def _tokens(document: TextDocument, body: list[tuple[int, str]], width: int, *, counted: bool) -> list[Token]:
    tokens: list[Token] = []
    groups: list[int] = [0]
    for line, text in body:
        missing = _MISSING_FIELD.search(text)
        if missing is not None:
            raise document.error(f"a number is missing in {shown(text.strip())}", line=line, advice=_CURED)
        for position, group in enumerate(text.split(";")):
            found = [token for token in _SEPARATORS.split(group) if token]
            if position:
                groups.append(0)
            groups[-1] += len(found)
            tokens += [(token, line) for token in found]
        if len(tokens) > width * MAX_PEAKS:
            raise too_many_peaks(document, line)
    filled = [size for size in groups if size]
    # Where no NPOINTS tells: semicolons part pairs, or every number; anything between may be a pair that lost a number.
    if not counted and any(size % width for size in filled) and any(size > 1 for size in filled):
        raise document.error(
            f"between semicolons stands half a {_GROUP[width]}",
            line=body[0][0],
            advice="each m/z needs its intensity; " + _CURED,
        )
    return tokens


def _check_count(document: TextDocument, block: Block, tokens: list[Token], width: int) -> list[str]:
    pairs = len(tokens) // width
    record = block.find("NPOINTS")
    whole = not any("." in token for token, _ in tokens)
    if record is None:
        padded = next(((token, line) for token, line in tokens if whole and re.fullmatch(r"0[0-9]+", token)), None)
        if padded is not None:
            raise document.error(
                f"{shown(padded[0])} looks like the decimals of a decimal comma, and no NPOINTS tells",
                line=padded[1],
                advice="write decimal points, as JCAMP-DX asks",
            )
        return ["NPOINTS is missing: the number of peaks could not be verified"]
    if not re.fullmatch(r"[0-9]{1,9}", record.value):
        raise document.error(
            f"NPOINTS {shown(record.value)} is not a whole number", line=record.line, advice="correct NPOINTS"
        )
    stated = int(record.value)
    if stated == pairs:
        return []
    if whole and pairs == 2 * stated:
        raise document.error(
            f"NPOINTS says {stated} peaks but the table holds {pairs} pairs: its commas seem to mark decimals",
            line=record.line,
            advice="write decimal points, as JCAMP-DX asks",
        )
    raise document.error(
        f"NPOINTS says {stated} peaks but the table holds {pairs}",
        line=record.line,
        advice="the table may be cut off: get the file again, or correct NPOINTS",
    )


def read_factor(document: TextDocument, block: Block, label: str) -> Decimal:
    """The value of XFACTOR or YFACTOR, 1 when it is not given.

    Raises:
        InputFileError: not a number above 0.
    """
    record = block.find(label)
    if record is None or not record.value:
        return Decimal(1)
    if not is_number_text(record.value) or not Decimal(record.value) > 0:
        raise document.error(
            f"{label} {shown(record.value)} is not a number above 0", line=record.line, advice=f"correct {label}"
        )
    return Decimal(record.value)


def _number(document: TextDocument, text: str, line: int, factor: Decimal) -> float:
    if text == "?":
        raise document.error("'?' says that a value is missing", line=line, advice="take the peak out or complete it")
    try:
        return parse_number(text, factor=factor)
    except NumberTextError as error:
        raise document.error(f"{error}, in the peak table", line=line, advice=_CURED) from error
