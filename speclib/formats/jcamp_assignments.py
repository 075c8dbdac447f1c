"""Peak assignments of JCAMP-DX: `##PEAK ASSIGNMENTS= (XYA)` and `(XYMA)`, and the spectrum that they belong to.

Form: McDonald & Wilks, Appl. Spectrosc. 1988, 42, 151, and its extension to compound files: one group
`(x, y, <text>)` a peak, unused fields left empty, as in `(27.00, 1.0,, <7>)`. What is read is a claim of the file: the
text stays verbatim, its chemistry is checked by whoever uses it.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from decimal import Decimal

from speclib.formats.jcamp_records import Block, Record, normalised_label
from speclib.formats.jcamp_tables import read_factor, split_table
from speclib.formats.number_text import NumberTextError, parse_number
from speclib.formats.text_document import TextDocument, shown
from speclib.model.spectrum import MAX_MZ, ClaimedAssignment

LABEL = "PEAKASSIGNMENTS"
MAX_ASSIGNMENTS = 20_000
MAX_TEXT = 2_000
MAX_LINE = 100_000
MAX_GROUP = 10_000
"""Characters of one group: text that is folded over many lines still ends somewhere."""
_FORM = re.compile(r"XY?[WM]{0,2}A")
_REFERENCE = re.compile(r"BLOCK[ _-]?ID[ \t]*=[ \t]*([^ \t\n;,]{1,40})", re.IGNORECASE)
_ADVICE = "write one (m/z, intensity, <text>) a peak"


@dataclass
class _Group:
    """A group as far as it was read: the line where it begins, and its text behind the opening bracket."""

    line: int
    text: str = ""


def read_assignments(document: TextDocument, block: Block) -> tuple[ClaimedAssignment, ...]:
    """The assignments of a block in the order of the file.

    Raises:
        InputFileError: a form that is not known, a group that is malformed or not closed, a wrong NPOINTS, too many.
    """
    record = _only_record(document, block)
    table = split_table(document, record)
    if not _FORM.fullmatch(table.form):
        raise document.error(
            f"peak assignments of the form {shown(f'({table.form})')} are not read", line=record.line, advice=_ADVICE
        )
    factors = (read_factor(document, block, "XFACTOR"), read_factor(document, block, "YFACTOR"))
    found = [_read_group(document, table.form, group, factors) for group in _groups(document, table.body)]
    count = block.find("NPOINTS")
    # In a block with a spectrum NPOINTS counts the peaks of the spectrum.
    own = not any(record.label in ("PEAKTABLE", "XYPOINTS", "XYDATA") for record in block.records)
    if own and count is not None and count.value and count.value != str(len(found)):
        raise document.error(
            f"NPOINTS says {shown(count.value)} assignments but the table holds {len(found)}",
            line=count.line,
            advice="the table may be cut off: get the file again, or correct NPOINTS",
        )
    return tuple(found)


def referenced_blocks(block: Block) -> list[tuple[str, Record]]:
    """The BLOCK_ID values that the CROSS REFERENCE records of a block name, as written."""
    return [
        (match[1], record)
        for record in block.records
        if record.label == "CROSSREFERENCE"
        for match in _REFERENCE.finditer(record.value[:MAX_TEXT])
    ]


def block_id(block: Block) -> str:
    """The BLOCK_ID of a block, or ""."""
    return block.value("BLOCKID")


def holds_assignments(block: Block) -> bool:
    """Whether a block says that it holds peak assignments."""
    return block.find(LABEL) is not None or normalised_label(block.value("DATACLASS")) == "ASSIGNMENTS"


def _only_record(document: TextDocument, block: Block) -> Record:
    records = [record for record in block.records if record.label == LABEL]
    if len(records) != 1:
        what = "no PEAK ASSIGNMENTS" if not records else "PEAK ASSIGNMENTS twice"
        raise document.error(
            f"the block holds {what}", line=records[1].line if records else block.line, advice="give one table a block"
        )
    return records[0]


def _groups(document: TextDocument, body: list[tuple[int, str]]) -> list[_Group]:
    """Cut the lines into groups; a folded line, which ends with an equals sign, is continued by the next."""
    groups: list[_Group] = []
    open_group: _Group | None = None
    for line, raw in body:
        if len(raw) > MAX_LINE:
            raise document.error(f"a line of {len(raw)} characters is not read", line=line, advice=_ADVICE)
        rest = raw.strip()
        while rest:
            if open_group is None:
                if not rest.startswith("("):
                    if not rest.strip(" \t,;"):
                        break
                    raise document.error(f"{shown(rest)} is no peak assignment", line=line, advice=_ADVICE)
                if len(groups) >= MAX_ASSIGNMENTS:
                    raise document.error(f"more than {MAX_ASSIGNMENTS} peak assignments", line=line, advice=_ADVICE)
                open_group = _Group(line)
                groups.append(open_group)
                rest = rest[1:]
            joined = open_group.text.removesuffix("\n") + rest
            end = _end_of_group(joined)
            if end is None:
                # A folded line joins the next; another is parted from it by a blank.
                open_group.text = joined[:-1] + "\n" if joined.endswith("=") else joined + " "
                rest = ""
            else:
                open_group.text, rest = joined[:end], joined[end + 1 :].lstrip(" \t,;")
                open_group = None
            if open_group is not None and len(open_group.text) > MAX_GROUP:
                raise document.error("a peak assignment has no end", line=open_group.line, advice=_ADVICE)
    if open_group is not None:
        raise document.error("a peak assignment is not closed", line=open_group.line, advice=_ADVICE)
    return groups


def _end_of_group(text: str) -> int | None:
    """Position of the bracket that closes a group; brackets inside `<...>` are part of the text."""
    begin = text.find("<")
    closing = text.find(")")
    if begin < 0 or 0 <= closing < begin:
        return closing if closing >= 0 else None
    end = text.find(">", begin)
    closing = text.find(")", end) if end >= 0 else -1
    return closing if closing >= 0 else None


def _read_group(
    document: TextDocument, form: str, group: _Group, factors: tuple[Decimal, Decimal]
) -> ClaimedAssignment:
    text = group.text
    begin, end = text.find("<"), text.rfind(">")
    if begin < 0 or end < begin or text[end + 1 :].strip():
        raise document.error(f"the assignment in {shown(f'({text})')} is not written as <text>", line=group.line,
                             advice=_ADVICE)  # fmt: skip
    fields = [field.strip() for field in text[:begin].rstrip(" \t").removesuffix(",").split(",")]
    if len(fields) != len(form) - 1:
        raise document.error(f"{shown(f'({text})')} has not the fields of ({form})", line=group.line, advice=_ADVICE)
    claim = text[begin + 1 : end].strip()
    if not claim or len(claim) > MAX_TEXT:
        raise document.error(f"an assignment of {len(claim)} characters is not read", line=group.line, advice=_ADVICE)
    mz = _number(document, fields[0], group.line, factors[0])
    if mz is None or not 0 < mz <= MAX_MZ:
        raise document.error(
            f"an assignment of m/z {shown(fields[0])} is not possible", line=group.line, advice=_ADVICE
        )
    intensity = _number(document, fields[1], group.line, factors[1]) if form.startswith("XY") else None
    if intensity is not None and intensity < 0:
        raise document.error(f"the intensity {intensity!r} of m/z {mz:g} is negative", line=group.line, advice=_ADVICE)
    return ClaimedAssignment(mz, intensity, claim)


def _number(document: TextDocument, text: str, line: int, factor: Decimal) -> float | None:
    if text in ("", "?"):
        return None
    try:
        return parse_number(text, factor=factor)
    except NumberTextError as error:
        raise document.error(f"{error}, in the peak assignments", line=line, advice=_ADVICE) from error
