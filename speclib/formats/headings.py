"""The row of column headings: whether a line is one, and which columns hold m/z and intensity."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Literal

from speclib.formats.columns import MAX_COLUMNS, Layout, Row, Table
from speclib.formats.number_text import is_number_text
from speclib.formats.text_document import TextDocument, shown

Kind = Literal["mz", "intensity", "relative", "foreign", "unknown"]

_MZ = ("m/z", "mz", "m/e", "m/q", "mass", "masse", "masses", "mass/charge")
_INTENSITY = ("intensity", "intensities", "int", "abundance", "abund", "counts", "count", "height", "area", "signal",
              "intensit\u00e4t", "h\u00e4ufigkeit", "intensit\u00e9", "intensidad")  # fmt: skip
_RELATIVE = ("relative", "rel", "%", "norm", "normalised", "normalized", "relint")
_FOREIGN = ("time", "rt", "min", "minutes", "sec", "seconds", "retention", "wavelength", "wavenumber", "nm", "ppm")
_WORD = re.compile(r"m/[zeq]|mass/charge|[^\W\d_]+|%", re.IGNORECASE)
_SEPARATOR_LINE = re.compile(r"sep=([,;\t])", re.IGNORECASE)
MAX_HEADING = 500


@dataclass(frozen=True)
class Columns:
    """Positions of m/z and intensity in a row, and a remark ("" when there is none)."""

    mz: int
    intensity: int
    note: str = ""


def separator_line(text: str) -> Literal["tab", "semicolon", "comma"] | None:
    """The separator that a spreadsheet announces in a first line such as `sep=;`, or None."""
    match = _SEPARATOR_LINE.fullmatch(text)
    names: dict[str, Literal["tab", "semicolon", "comma"]] = {",": "comma", ";": "semicolon", "\t": "tab"}
    return names[match[1]] if match else None


def is_heading(text: str) -> bool:
    """Whether a line consists of words: at least one letter, and no number except beside words that name columns."""
    if len(text) > MAX_HEADING or not _WORD.search(text):
        return False
    tokens = [token.strip("\"'()[]") for token in re.split(r"[ \t;,]+", text)]
    numbers = sum(is_number_text(token) for token in tokens)
    if numbers:
        return numbers == 1 and _names_both(text)
    if any(token.lower().lstrip("+-") in ("nan", "inf", "infinity") for token in tokens):
        return False
    return _names_both(text) or not any(c.isdigit() for c in text)


def heading_in_comment(comment: str) -> str | None:
    """A comment such as `m/z intensity`, headings behind a `#`, or None: every word must name a column."""
    words = _WORD.findall(comment[:MAX_HEADING])
    plain = len(comment) <= MAX_HEADING and not any(c.isdigit() for c in comment)
    return comment if plain and _names_both(comment) and "unknown" not in map(_kind_of_word, words) else None


def _names_both(text: str) -> bool:
    kinds = [_kind_of_word(word) for word in _WORD.findall(text)]
    return "mz" in kinds and ("intensity" in kinds or "relative" in kinds)


def _kind_of_word(word: str) -> Kind:
    lower = word.lower()
    groups: tuple[tuple[tuple[str, ...], Kind], ...] = (
        (_MZ, "mz"), (_INTENSITY, "intensity"), (_RELATIVE, "relative"), (_FOREIGN, "foreign"),
    )  # fmt: skip
    return next((kind for words, kind in groups if lower in words), "unknown")


def _kind_of_heading(heading: str) -> Kind:
    kinds = {_kind_of_word(word) for word in _WORD.findall(heading)}
    strongest_first: tuple[Kind, ...] = ("foreign", "relative", "intensity", "mz")
    return next((kind for kind in strongest_first if kind in kinds), "unknown")


def find_columns(document: TextDocument, heading: Row | None, table: Table) -> Columns:
    """Find the columns of m/z and intensity, by their headings where there are any, else the first two.

    Raises:
        InputFileError: headings that name something else, or a third column that nothing explains.
    """
    if heading is None:
        return _without_headings(document, table)
    heads = _split_heading(heading.text, table.layout, table.width)
    if heads is None:
        return _by_order_of_words(document, heading, table)
    kinds = [_kind_of_heading(head) for head in heads]
    foreign = next((head for head, kind in zip(heads, kinds, strict=True) if kind == "foreign"), None)
    if foreign is not None and (kinds[0] == "foreign" or "mz" not in kinds):
        raise document.error(
            f"the heading {shown(foreign)} says that this is not a mass spectrum",
            line=heading.line,
            advice="export the mass spectrum, not the chromatogram",
        )
    intensities = [i for i, kind in enumerate(kinds) if kind == "intensity"] or [
        i for i, kind in enumerate(kinds) if kind == "relative"
    ]
    if kinds.count("mz") == 1 and len(intensities) == 1:
        mz, intensity = kinds.index("mz"), intensities[0]
        unread = [shown(head) for i, head in enumerate(heads) if i not in (mz, intensity)]
        return Columns(mz, intensity, f"the column {unread[0]} was not read" if unread else "")
    if table.width == 2 and kinds == ["unknown", "unknown"]:
        return Columns(0, 1, f"the headings {shown(heading.text)} are not known: the first column was taken as m/z")
    if table.width == 2 and (kinds[0] == "mz" or kinds[1] in ("intensity", "relative")) and "unknown" in kinds:
        return Columns(0, 1)
    raise document.error(
        f"the headings {shown(heading.text)} do not say which column is m/z and which intensity",
        line=heading.line,
        advice="name them m/z and intensity, and keep only these two",
    )


def _split_heading(text: str, layout: Layout, width: int) -> list[str] | None:
    plain = text.replace('"', "")
    if layout.separator != "blank":
        heads = Layout(layout.separator, "point").split(plain)
        return heads if len(heads) == width else None
    for parts in (re.split(r"\t| {2,}", plain), plain.split()):
        heads = [part.strip() for part in parts if part.strip()]
        if len(heads) == width:
            return heads
    return None


def _by_order_of_words(document: TextDocument, heading: Row, table: Table) -> Columns:
    kinds = [_kind_of_word(word) for word in _WORD.findall(heading.text)]
    if table.width == 2 and _names_both(heading.text) and "foreign" not in kinds:
        first_intensity = min(kinds.index(kind) for kind in ("intensity", "relative") if kind in kinds)
        if kinds.count("mz") == 1 and kinds.index("mz") < first_intensity:
            return Columns(0, 1)
    raise document.error(
        f"{shown(heading.text)} is neither two numbers nor headings of {table.width} columns",
        line=heading.line,
        advice="name the columns m/z and intensity, and begin other lines with #",
    )


def _without_headings(document: TextDocument, table: Table) -> Columns:
    if table.width < MAX_COLUMNS:
        return Columns(0, 1)
    second, third = ([float(fields[i].replace(",", ".")) for fields in table.fields] for i in (1, 2))
    if len(set(second)) >= MAX_COLUMNS and _proportional(second, third):
        return Columns(0, 1, "the third column repeats the intensity on another scale and was not read")
    raise document.error(
        f"three columns in {shown(table.rows[0].text)}, and no headings that say what they are",
        line=table.rows[0].line,
        advice="keep two columns, m/z and intensity, or add a line of headings",
    )


def _proportional(a: list[float], b: list[float]) -> bool:
    """Whether two columns hold the same intensities on two scales, rounded to 1% of the base peak at worst."""
    top_a, top_b = max(a), max(b)
    if not 0 < top_a < float("inf") or not 0 < top_b < float("inf"):
        return False
    # Half a step of whole per cents: the coarsest rounding that relative intensities are printed with.
    return all(abs(x / top_a - y / top_b) <= 0.0051 for x, y in zip(a, b, strict=True))
