"""Equally spaced ordinates of JCAMP-DX, `(X++(Y..Y))`: free numbers and the compressed forms PAC, SQZ, DIF and DUP.

Rules and pseudo-digits: McDonald & Wilks, Appl. Spectrosc. 1988, 42, 151, section 5 and table VII. Every line begins
with an abscissa (X-check); a line that ended with a difference is followed by a line whose first ordinate repeats the
last one (Y-check). Both are held, because a lost character would otherwise shift all that follows.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from decimal import Decimal
from typing import Any

import numpy as np
from numpy.typing import NDArray

from speclib.errors import InputFileError
from speclib.formats.jcamp_records import Block, Record
from speclib.formats.jcamp_tables import read_factor
from speclib.formats.number_text import NumberTextError, is_number_text, parse_number
from speclib.formats.text_document import TextDocument, shown

MAX_POINTS = 2_000_000
_DAMAGED = "the table is damaged: get the file again from its source"
_AFFN = r"[+-]?(?:[0-9]{1,40}(?:\.[0-9]{0,40})?|\.[0-9]{1,40})"
_WHOLE = r"(?![0-9.])"
"""Behind a number: a longer one must not be read as two."""
_FREE = re.compile(rf"[ \t,;]*(?:({_AFFN}(?:[eE][+-]?[0-9]{{1,3}})?){_WHOLE}|(\?))")
_PACKED = re.compile(rf"[ \t,;]*(?:({_AFFN}){_WHOLE}|(\?)|([@A-Ia-i%J-Rj-rS-Zs])([0-9]{{0,40}}){_WHOLE})")
_END = re.compile(r"[ \t,;]*")
_COMPRESSED = re.compile(r"[@%A-DF-Za-df-z]|[Ee](?![+-])")
_SQZ = {c: str(i - 9) for i, c in enumerate("ihgfedcba@ABCDEFGHI")} | {"@": "0"}
_DIF = {c: str(i - 9) for i, c in enumerate("rqponmlkj%JKLMNOPQR")} | {"%": "0"}
_DUP = {c: str(i + 1) for i, c in enumerate("STUVWXYZs")}


@dataclass(frozen=True)
class EquallySpaced:
    """Decoded points in the order of the file: `x` and `y`, shape `(n_points,)`, float64, scaled; a missing y is NaN.

    `line` holds the line of each point; `notes` are remarks.
    """

    x: NDArray[np.float64]
    y: NDArray[np.float64]
    line: list[int]
    notes: tuple[str, ...]


@dataclass
class _Decoder:
    """Ordinates decoded so far, not yet scaled, and what the next item refers to."""

    error: Callable[[str], InputFileError]
    limit: int
    values: list[Any] = field(default_factory=list)
    lines: list[int] = field(default_factory=list)
    checks: list[tuple[int, str, int]] = field(default_factory=list)
    step: Any = None
    """The difference that a DUP would repeat; None after a value in another form."""
    ended_in_difference: bool = False
    may_repeat: bool = False

    def push(self, value: Any, line: int, times: int = 1) -> None:
        """Append a value; refuses more points than NPOINTS allows before any memory is taken for them."""
        if len(self.values) + times > self.limit:
            raise self.error(f"the table holds more than the {self.limit} points that NPOINTS says")
        self.values.extend([value] * times)
        self.lines.extend([line] * times)

    def add_difference(self, step: Any, line: int, times: int = 1) -> None:
        """Append values that differ by `step` from the one before."""
        if not self.values or self.values[-1] is None:
            raise self.error("a difference follows no value")
        if len(self.values) + times > self.limit:
            raise self.error(f"the table holds more than the {self.limit} points that NPOINTS says")
        for _ in range(times):
            self.push(self.values[-1] + step, line)


def decode_equally_spaced(document: TextDocument, block: Block, body: list[tuple[int, str]]) -> EquallySpaced:
    """Decode the lines of a table; the block gives NPOINTS, FIRSTX, LASTX, XFACTOR, YFACTOR and FIRSTY.

    Raises:
        InputFileError: a missing or impossible label, text that is no ordinate, a failed check, a wrong count.
    """
    count, count_record = _point_count(document, block)
    first, last = (_required_number(document, block, label) for label in ("FIRSTX", "LASTX"))
    x_factor, y_factor = (read_factor(document, block, label) for label in ("XFACTOR", "YFACTOR"))
    where = [body[0][0] if body else block.line]
    decoder = _Decoder(lambda reason: document.error(reason, line=where[0], advice=_DAMAGED), count)
    pattern = _PACKED if any(_COMPRESSED.search(text) for _, text in body) else _FREE
    for line, text in body:
        where[0] = line
        if text.strip(" \t,;"):
            _decode_line(decoder, pattern, line, text)
    if len(decoder.values) != count:
        raise document.error(
            f"NPOINTS says {count} points but the table holds {len(decoder.values)}",
            line=count_record.line,
            advice=_DAMAGED,
        )
    step = (last - first) / (count - 1) if count > 1 else 0.0
    _check_abscissae(document, decoder, first, step, x_factor)
    missing = float("nan")
    y = np.array(
        [missing if v is None else _scaled(document, v, y_factor, block.line) for v in decoder.values], dtype=np.float64
    )
    notes = _first_ordinate(block, float(y[0]), float(y_factor))
    return EquallySpaced(first + step * np.arange(count, dtype=np.float64), y, decoder.lines, notes)


def _decode_line(decoder: _Decoder, pattern: re.Pattern[str], line: int, text: str) -> None:
    tokens = _tokens(decoder, pattern, text)
    abscissa = next(tokens)
    if not re.fullmatch(_AFFN + r"(?:[eE][+-]?[0-9]{1,3})?", abscissa[0]):
        raise decoder.error(f"the line begins with {shown(text.strip())} and not with its abscissa")
    position = len(decoder.values)
    check = decoder.ended_in_difference
    decoder.may_repeat = False
    for number, (plain, kind, digits) in enumerate(tokens):
        if number == 0 and check:
            _check_ordinate(decoder, plain, kind, digits)
            position -= 1
            continue
        _decode_item(decoder, plain, kind, digits, line)
    decoder.checks.append((line, abscissa[0], position))


def _tokens(decoder: _Decoder, pattern: re.Pattern[str], text: str) -> Iterator[tuple[str, str, str]]:
    """Items of a line as (free number or `?`, pseudo-digit, further digits)."""
    at = 0
    end = len(text.rstrip(" \t,;"))
    while at < end:
        match = pattern.match(text, at)
        if match is None:
            begin = _END.match(text, at)
            raise decoder.error(f"{shown(text[begin.end() if begin else at :])} is no ordinate of JCAMP-DX")
        groups = match.groups()
        packed = len(groups) > 2 and groups[2] is not None
        yield groups[0] or groups[1] or "", groups[2] if packed else "", groups[3] if packed else ""
        at = match.end()


def _check_ordinate(decoder: _Decoder, plain: str, kind: str, digits: str) -> None:
    if not (plain or kind in _SQZ) or plain == "?":
        raise decoder.error("the line before ended with a difference, and this one does not repeat its last ordinate")
    value = _value(decoder, plain or _SQZ[kind] + digits)
    if value != decoder.values[-1]:
        raise decoder.error(
            f"the check ordinate {value} is not the {decoder.values[-1]} that the line before ended with"
        )
    decoder.ended_in_difference = False
    decoder.may_repeat = True


def _decode_item(decoder: _Decoder, plain: str, kind: str, digits: str, line: int) -> None:
    if kind in _DUP:
        times = int(_DUP[kind] + digits)
        if not decoder.may_repeat:
            raise decoder.error("a repetition follows no value")
        if decoder.ended_in_difference:
            decoder.add_difference(decoder.step, line, times - 1)
        else:
            decoder.push(decoder.values[-1], line, times - 1)
        decoder.may_repeat = False
        return
    decoder.ended_in_difference = kind in _DIF
    if kind in _DIF:
        decoder.step = _value(decoder, _DIF[kind] + digits)
        decoder.add_difference(decoder.step, line)
    elif plain == "?":
        decoder.push(None, line)
    else:
        decoder.push(_value(decoder, plain or _SQZ[kind] + digits), line)
    decoder.may_repeat = True


def _value(decoder: _Decoder, text: str) -> Any:
    """A whole number as int, so that sums of differences stay exact; anything else as float."""
    try:
        return int(text) if text.lstrip("+-").isdigit() else parse_number(text)
    except NumberTextError as error:
        raise decoder.error(str(error)) from error


def _scaled(document: TextDocument, value: Any, factor: Decimal, line: int) -> float:
    try:
        return parse_number(str(value), factor=factor)
    except NumberTextError as error:
        raise document.error(f"{error}, in the table", line=line, advice=_DAMAGED) from error


def _check_abscissae(document: TextDocument, decoder: _Decoder, first: float, step: float, factor: Decimal) -> None:
    for line, text, position in decoder.checks:
        try:
            stated = parse_number(text, factor=factor)
        except NumberTextError as error:
            raise document.error(f"{error}, as abscissa", line=line, advice=_DAMAGED) from error
        expected = first + step * position
        # The abscissa is rounded to its last written digit; one lost point would shift it by a whole step.
        exponent = Decimal(text).as_tuple().exponent
        digit = float(factor) * 10.0 ** min(exponent, 300) if isinstance(exponent, int) else 0.0
        if not abs(stated - expected) <= (0.5 * abs(step) if digit <= abs(step) else digit) + 1e-9 * abs(expected):
            raise document.error(
                f"the line says that it begins at {stated:g}, but by FIRSTX, LASTX and NPOINTS it is {expected:g}",
                line=line,
                advice=_DAMAGED,
            )


def _first_ordinate(block: Block, first: float, factor: float) -> tuple[str, ...]:
    record = block.find("FIRSTY")
    if record is None or not is_number_text(record.value) or not np.isfinite(first):
        return ()
    stated = float(record.value)
    if abs(stated - first) <= abs(factor) + 1e-5 * abs(first):
        return ()
    return (f"FIRSTY says {stated:g} (line {record.line}), but the first ordinate is {first:g}",)


def _point_count(document: TextDocument, block: Block) -> tuple[int, Record]:
    record = block.find("NPOINTS")
    if record is None or not re.fullmatch(r"[0-9]{1,12}", record.value):
        raise document.error(
            "equally spaced data need NPOINTS, a whole number",
            line=record.line if record else block.line,
            advice="get the file again, or export single spectra as PEAK TABLE blocks",
        )
    count = int(record.value)
    if not 1 <= count <= MAX_POINTS:
        raise document.error(
            f"NPOINTS is {count}: from 1 to {MAX_POINTS} points are read", line=record.line, advice="give a single scan"
        )
    return count, record


def _required_number(document: TextDocument, block: Block, label: str) -> float:
    record = block.find(label)
    try:
        if record is None:
            raise NumberTextError("it is missing")
        return parse_number(record.value)
    except NumberTextError as error:
        raise document.error(
            f"equally spaced data need {label}, a number: {error}",
            line=record.line if record else block.line,
            advice="get the file again, or export single spectra as PEAK TABLE blocks",
        ) from error
