"""Peak tables of JCAMP-DX: pairs of numbers in any mix of separators, scaled and counted.

Forms are those of McDonald & Wilks 1988 (4.24) and of its extension to mass spectra (Lampen et al., Appl. Spectrosc.
1994, 48, 1545). A form that is added later is one more entry in `_FORMS`.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from decimal import Decimal

from speclib.formats.assembling import PeakRows, too_many_peaks
from speclib.formats.jcamp_records import Block, Record
from speclib.formats.number_text import NumberTextError, is_number_text, parse_number
from speclib.formats.text_document import TextDocument, shown
from speclib.model.spectrum import MAX_PEAKS

TABLE_LABELS = ("PEAKTABLE", "XYPOINTS", "XYDATA")
"""`XYDATA= (XY..XY)` is against the protocol, but instruments write it."""
_SEPARATORS = re.compile(r"[ \t,;]+")
_MISSING_FIELD = re.compile(r"[,;][ \t]*,|,[ \t]*;")
_FORM = re.compile(r"\(([^()]{1,60}(?:\([^()]{1,40}\)[^()]{0,20})?)\)(.*)")
_PEAKS_SUFFIX = re.compile(r",[ \t]*PEAKS\b", re.IGNORECASE)
_CURED = "get the file again, or export it as (XY..XY)"

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


def read_table(document: TextDocument, block: Block, table: Record) -> tuple[PeakRows, list[str]]:
    """The peaks of a table, scaled by XFACTOR and YFACTOR, and remarks.

    Raises:
        InputFileError: a form that is not read, anything that is not a number, half a pair, a wrong NPOINTS.
    """
    form, rest = _split_form(document, table)
    reader = next((read for pattern, read in _FORMS if pattern.fullmatch(form)), None)
    if reader is None:
        raise document.error(
            f"this holds a table of the form {_shown_form(form)}: that is not read here",
            line=table.line,
            advice="export the spectrum as a PEAK TABLE of the form (XY..XY)",
        )
    return reader(document, block, [(table.line, rest), *table.body[1:]])


def form_of(table: Record) -> str:
    """The form of a table as written, for keeping: `(XY..XY)`, or "" when it has none."""
    match = _FORM.match(table.body[0][1].strip())
    return f"({match[1]})" if match else ""


def _split_form(document: TextDocument, table: Record) -> tuple[str, str]:
    match = _FORM.match(table.body[0][1].strip())
    if match is None:
        raise document.error(
            f"{table.heading} does not say the form of its table",
            line=table.line,
            advice="the form of a peak table is (XY..XY)",
        )
    rest = match[2]
    suffix = _PEAKS_SUFFIX.match(rest.strip())
    return "".join(match[1].split()).upper(), rest.strip()[suffix.end() :] if suffix else rest


def _shown_form(form: str) -> str:
    kinds = {
        "XYW..XYW": "peaks with widths",
        "XYA": "peaks with assignments",
        "XYMA": "peaks with assignments",
        "X++(Y..Y)": "equally spaced points, as of a profile or a chromatogram",
    }
    return shown(f"({form})") + (f" ({kinds[form]})" if form in kinds else "")


def _read_pairs(document: TextDocument, block: Block, body: list[tuple[int, str]]) -> tuple[PeakRows, list[str]]:
    tokens = _tokens(document, body, counted=block.find("NPOINTS") is not None)
    if len(tokens) % 2:
        raise document.error(
            f"{shown(tokens[-1][0])} is half a pair: the table holds {len(tokens)} numbers",
            line=tokens[-1][1],
            advice=_CURED,
        )
    notes = _check_count(document, block, tokens)
    factors = (_factor(document, block, "XFACTOR"), _factor(document, block, "YFACTOR"))
    peaks = PeakRows()
    for (x, line), (y, y_line) in zip(tokens[::2], tokens[1::2], strict=True):
        mz, intensity = _number(document, x, line, factors[0]), _number(document, y, y_line, factors[1])
        if mz == 0 and intensity == 0:
            notes.append(f"the point 0, 0 (line {line}), an anchor for plotting, was left out: it is no peak")
            continue
        peaks.add(mz, intensity, line)
    return peaks, notes


_FORMS: tuple[
    tuple[re.Pattern[str], Callable[[TextDocument, Block, list[tuple[int, str]]], tuple[PeakRows, list[str]]]], ...
] = ((re.compile(r"XY\.{2,3}XY"), _read_pairs),)


def _tokens(document: TextDocument, body: list[tuple[int, str]], *, counted: bool) -> list[Token]:
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
        if len(tokens) > 2 * MAX_PEAKS:
            raise too_many_peaks(document, line)
    filled = [size for size in groups if size]
    # Where no NPOINTS tells: semicolons part pairs, or every number; anything between may be a pair that lost a number.
    if not counted and any(size % 2 for size in filled) and any(size > 1 for size in filled):
        raise document.error(
            "between semicolons stands half a pair", line=body[0][0], advice="each m/z needs its intensity; " + _CURED
        )
    return tokens


def _check_count(document: TextDocument, block: Block, tokens: list[Token]) -> list[str]:
    pairs = len(tokens) // 2
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


def _factor(document: TextDocument, block: Block, label: str) -> Decimal:
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
