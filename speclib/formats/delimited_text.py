"""Delimited text: one spectrum in two columns, m/z and intensity, under leading `# key: value` lines.

The table may have one row of headings. Separator and decimal mark are recognised or asked about (`columns`); labelled
lines are read by `measurement_labels`; nothing about the measurement is assumed.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

from speclib.formats.assembling import PeakRows, assemble_spectrum, too_many_peaks
from speclib.formats.columns import Row, Table, find_table
from speclib.formats.headings import find_columns, heading_in_comment, is_heading, separator_line
from speclib.formats.measurement_labels import LabelLine, known_key, read_labels, split_label
from speclib.formats.number_text import NumberTextError, parse_number, parse_numbers
from speclib.formats.options import DecimalMark, ReadOptions
from speclib.formats.text_document import TextDocument, shown
from speclib.model.spectrum import MAX_PEAKS, SourceSpectrum


@dataclass
class _Parts:
    """The lines of a file by what they are.

    `named` is a comment that names the columns, `after_gap` are positions in `rows` that follow an empty line.
    """

    labels: list[LabelLine] = field(default_factory=list)
    heading: Row | None = None
    named: Row | None = None
    rows: list[Row] = field(default_factory=list)
    after_gap: list[int] = field(default_factory=list)
    options: ReadOptions = field(default_factory=ReadOptions)


def read_delimited_text(document: TextDocument, options: ReadOptions) -> tuple[SourceSpectrum, ...]:
    """Read the one spectrum of a text file.

    Raises:
        InputFileError: anything that is not two columns of numbers under labelled lines, or is ambiguous.
    """
    parts = _sort_lines(document, options)
    if not parts.rows:
        raise document.error(
            "no line holds two numbers, m/z and intensity",
            place="whole file",
            advice="give a JCAMP-DX file or a text file with two columns",
        )
    heading = parts.heading or parts.named
    table = find_table(document, parts.rows, parts.options, heading is not None)
    columns = find_columns(document, heading, table)
    peaks = _read_peaks(document, table, columns.mz, columns.intensity)
    _refuse_second_spectrum(document, peaks, parts.after_gap)
    labels = read_labels(document, parts.labels, _mark_of(table, options))
    if parts.heading is not None:
        labels.keep("column headings", parts.heading.text, parts.heading.line)
    labels.notes += [note for note in (_why_comma(table, options), columns.note) if note]
    return (assemble_spectrum(document, 1, peaks, labels, options, line=parts.rows[0].line),)


def _sort_lines(document: TextDocument, options: ReadOptions) -> _Parts:
    parts = _Parts(options=options)
    gap = False
    for number, line in enumerate(document.lines, start=1):
        text = line.strip(" \t")
        if not text.strip(" \t;,"):
            gap = True
            continue
        if text.startswith("#"):
            _add_label(document, parts, number, text)
            continue
        if not parts.rows and parts.heading is None:
            announced = separator_line(text)
            if announced is not None:
                parts.options = replace(options, separator=options.separator or announced)
                continue
            if is_heading(text):
                parts.heading = _checked_heading(document, number, text)
                continue
        if len(parts.rows) >= MAX_PEAKS:
            raise too_many_peaks(document, number)
        if gap and parts.rows:
            parts.after_gap.append(len(parts.rows))
        gap = False
        parts.rows.append(Row(number, text))
    return parts


def _add_label(document: TextDocument, parts: _Parts, number: int, text: str) -> None:
    label = split_label(number, text)
    if parts.rows and known_key(label.key) is not None:
        raise document.error(
            f"the labelled line {shown(text)} stands below peaks",
            line=number,
            advice="move it to the top; when a second spectrum begins here, give it its own file",
        )
    named = heading_in_comment(label.value) if not label.key and not parts.rows else None
    if named is not None:
        parts.named = Row(number, named)
    parts.labels.append(label)


def _checked_heading(document: TextDocument, number: int, text: str) -> Row:
    if ":" in text or "=" in text:
        raise document.error(
            f"{shown(text)} is neither two numbers nor column headings",
            line=number,
            advice="begin lines that hold a label and a value with #",
        )
    return Row(number, text)


def _read_peaks(document: TextDocument, table: Table, mz: int, intensity: int) -> PeakRows:
    peaks = PeakRows()
    decimal = table.layout.decimal
    columns = [parse_numbers([fields[at] for fields in table.fields], decimal) for at in (mz, intensity)]
    if columns[0] is not None and columns[1] is not None:
        return PeakRows(columns[0], columns[1], [row.line for row in table.rows])
    for row, fields in zip(table.rows, table.fields, strict=True):
        try:
            peaks.add(parse_number(fields[mz], decimal), parse_number(fields[intensity], decimal), row.line)
        except NumberTextError as error:
            raise document.error(str(error), line=row.line, advice="correct the line") from error
    return peaks


def _refuse_second_spectrum(document: TextDocument, peaks: PeakRows, after_gap: list[int]) -> None:
    """Refuse m/z that begin again below an empty line: two spectra in one file would be mixed into one."""
    for position in after_gap:
        if peaks.mz[position] <= max(peaks.mz[:position]) and len(peaks) > position:
            raise document.error(
                f"below an empty line m/z begin again at {peaks.mz[position]:g}, as if a second spectrum began",
                line=peaks.line[position],
                advice="give one spectrum a file, or take the empty line out",
            )


def _mark_of(table: Table, options: ReadOptions) -> DecimalMark | None:
    """The decimal mark by which labelled lines are read too; None when no number of the table shows one."""
    if options.decimal is not None:
        return options.decimal
    mark = "," if table.layout.decimal == "comma" else "."
    return table.layout.decimal if any(mark in text for row in table.fields for text in row) else None


def _why_comma(table: Table, options: ReadOptions) -> str:
    whole = all(text.isdigit() for row in table.fields for text in row)
    if table.layout.separator != "comma" or not whole or options.separator is not None:
        return ""
    return "the comma was taken to part m/z and intensity: as a decimal mark it would leave one number a line"
