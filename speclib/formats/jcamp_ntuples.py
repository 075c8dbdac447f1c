"""NTUPLES of JCAMP-DX for mass spectra: a series of spectra, one a page, under lists that describe the variables.

Layout: Lampen et al., Appl. Spectrosc. 1994, 48, 1545. The lists stand in the order of SYMBOL; empty items and commas
at the end occur. A page becomes a block of its own, with the labels of the series and those of the page, and with
XUNITS, XFACTOR and the like as they follow from the lists.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

from speclib.formats.jcamp_records import Block, Comment, Record, normalised_label
from speclib.formats.number_text import NumberTextError, parse_number
from speclib.formats.quantities import TIME
from speclib.formats.text_document import TextDocument, shown

MAX_PAGES = 20_000
MAX_COPIES = 1_000_000
"""Labels of the series times pages: a page is read with all of them."""
MAX_VARIABLES = 20
_LISTS = ("VARNAME", "SYMBOL", "VARTYPE", "VARFORM", "VARDIM", "UNITS", "FIRST", "LAST", "FACTOR", "MIN", "MAX")
_PAGE = re.compile(r"[ \t]*([A-Za-z][A-Za-z0-9_]{0,19})[ \t]*=[ \t]*([^=,;]{1,64})[ \t]*[,;]?")


@dataclass(frozen=True)
class _Variable:
    """One variable of the series: its items of the lists by label (none for empty ones), and the lines of the lists."""

    symbol: str
    items: dict[str, tuple[str, int]]

    def item(self, label: str) -> str:
        return self.items.get(label, ("", 0))[0]


def pages_of(document: TextDocument, block: Block) -> list[tuple[Block, list[str]]]:
    """The pages of a series as blocks that can be read like others, each with remarks.

    Raises:
        InputFileError: lists that contradict SYMBOL, no page, too many pages, `##END NTUPLES=` missing.
    """
    header, pages = _split(document, block)
    variables = _variables(document, header, block.line)
    result = []
    for records in pages:
        notes: list[str] = []
        derived = [*_page_values(records[0], variables, records, notes), *_derived(document, records, variables)]
        lines = range(records[0].line, _end_line(records) + 1)
        comments = [c for c in block.comments if c.line in lines or not _within_pages(c, pages)]
        result.append((Block(records[0].line, [*header.records, *records, *derived], comments), notes))
    return result


def _split(document: TextDocument, block: Block) -> tuple[Block, list[list[Record]]]:
    header = Block(block.line)
    pages: list[list[Record]] = []
    ended = False
    for record in block.records:
        if record.label == "ENDNTUPLES":
            ended = True
        elif record.label == "PAGE" and not ended:
            pages.append([record])
        elif pages and not ended:
            pages[-1].append(record)
        else:
            header.records.append(record)
    if not pages:
        raise document.error(
            "the series (NTUPLES) holds no page", line=block.line, advice="export single spectra as PEAK TABLE blocks"
        )
    if not ended:
        raise document.error(
            "the series (NTUPLES) has no ##END NTUPLES=",
            line=pages[-1][0].line,
            advice="the file may be cut off: get it again from its source",
        )
    if len(pages) > MAX_PAGES or len(pages) * (len(header.records) + len(block.comments)) > MAX_COPIES:
        raise document.error(f"a series of {len(pages)} pages is not read", line=block.line, advice="split the file")
    return header, pages


def _variables(document: TextDocument, header: Block, line: int) -> dict[str, _Variable]:
    symbols = header.find("SYMBOL")
    names = [name.strip().upper() for name in symbols.value.rstrip(" ,\n").split(",")] if symbols else []
    if not names or len(names) > MAX_VARIABLES or not all(names) or len(set(names)) != len(names):
        raise document.error(
            "the series (NTUPLES) does not name its variables in ##SYMBOL=",
            line=symbols.line if symbols else line,
            advice="export single spectra as PEAK TABLE blocks",
        )
    items: list[dict[str, tuple[str, int]]] = [{} for _ in names]
    for record in header.records:
        if record.label not in _LISTS:
            continue
        parts = [part.strip() for part in record.value.split(",")]
        if any(parts[len(names) :]):
            raise document.error(
                f"{record.heading} has more items than ##SYMBOL= names variables",
                line=record.line,
                advice="export single spectra as PEAK TABLE blocks",
            )
        for own, part in zip(items, parts, strict=False):
            if part:
                own[record.label] = (part, record.line)
    return {name: _Variable(name, own) for name, own in zip(names, items, strict=True)}


def _page_values(
    page: Record, variables: dict[str, _Variable], records: list[Record], notes: list[str]
) -> list[Record]:
    """The retention time of a page, where a variable of time with a unit gives one."""
    found: list[Record] = []
    text, at = page.value, 0
    while at < len(text):
        match = _PAGE.match(text, at)
        if match is None:
            notes.append(f"{page.heading} {shown(text)} (line {page.line}) was not understood")
            break
        at = match.end()
        variable = variables.get(match[1].upper())
        if variable is None:
            notes.append(f"##PAGE= names {shown(match[1])} (line {page.line}), which is no variable of the series")
            continue
        unit = variable.item("UNITS").lower()
        is_time = unit in TIME.factors or "TIME" in normalised_label(variable.item("VARNAME"))
        if not is_time or found or any(record.label == ".RETENTIONTIME" for record in records):
            continue
        seconds = _seconds(match[2].strip(), unit, variable.item("FACTOR"))
        if seconds is None:
            notes.append(
                f"the time {shown(match[2].strip())} of the page (line {page.line}) was not used: "
                + (f"the unit {shown(unit)} is not read" if unit else "its unit is not given")
            )
            continue
        found.append(Record(page.line, ".RETENTIONTIME", page.name, [(page.line, repr(seconds))], derived=True))
    return found


def _seconds(text: str, unit: str, factor: str) -> float | None:
    scale = TIME.factors.get(unit)
    try:
        own = parse_number(factor) if factor else 1.0
        if scale is None or own <= 0:
            return None
        value = parse_number(text, factor=scale)
    except NumberTextError:
        return None
    return value if own == 1.0 else value * own


def _derived(document: TextDocument, records: list[Record], variables: dict[str, _Variable]) -> list[Record]:
    """XUNITS, XFACTOR, FIRSTX and the like of one page, from the lists; labels of the page itself come first."""
    if not all(symbol in variables for symbol in ("X", "Y")):
        raise document.error(
            f"the variables of the series are {shown(', '.join(variables))}, where X and Y are expected",
            line=records[0].line,
            advice="export single spectra as PEAK TABLE blocks",
        )
    own = {record.label for record in records}
    found = []
    for symbol in ("X", "Y"):
        for item, (value, line) in variables[symbol].items.items():
            label = {"UNITS": f"{symbol}UNITS", "FACTOR": f"{symbol}FACTOR", "FIRST": f"FIRST{symbol}",
                     "LAST": f"LAST{symbol}"}.get(item)  # fmt: skip
            if label and label not in own:
                found.append(Record(line, label, label, [(line, value)], derived=True))
        dimension = variables[symbol].items.get("VARDIM")
        if symbol == "X" and dimension and "NPOINTS" not in own:
            found.append(Record(dimension[1], "NPOINTS", "NPOINTS", [(dimension[1], dimension[0])], derived=True))
    return found


def _end_line(records: list[Record]) -> int:
    return max([records[-1].line, *(line for line, _ in records[-1].body)])


def _within_pages(comment: Comment, pages: list[list[Record]]) -> bool:
    return pages[0][0].line <= comment.line <= _end_line(pages[-1])
