"""Numbers as files write them: a strict grammar, so that nothing is taken for a number that a person would not.

The grammar is AFFN of JCAMP-DX 4.24 (McDonald & Wilks, Appl. Spectrosc. 1988, 42, 151): sign, digits, one decimal mark,
exponent. No `nan`, no hexadecimal, no underscores, no thousands marks, ASCII digits only.
"""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from decimal import Context, Decimal
from typing import cast

import numpy as np

from speclib.formats.options import DecimalMark

MAX_NUMBER_LENGTH = 64
_EXPONENT = r"(?:[eE][+-]?[0-9]{1,3})?"
_WITH_POINT = re.compile(rf"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+){_EXPONENT}")
# A comma needs digits on both sides: `43,` and `,5` are more likely a separator that stands beside a number.
_WITH_COMMA = re.compile(rf"[+-]?[0-9]+(?:,[0-9]+)?{_EXPONENT}")
_THOUSANDS = re.compile(r"[+-]?[0-9]{1,3}(?:[.,' \u00a0\u2009\u202f\u2019][0-9]{3})+(?:[.,][0-9]+)?")
_NOT_FINITE = re.compile(r"[+-]?(?:nan|inf|infinity)", re.IGNORECASE)
_WIDE = Context(prec=200)


class NumberTextError(ValueError):
    """A text that is not a number this program reads; the text of the error is the reason."""


def number_form(decimal: DecimalMark) -> str:
    """The regular expression of a number with this decimal mark, without groups; its length is not bounded."""
    return (_WITH_POINT if decimal == "point" else _WITH_COMMA).pattern


def is_number_text(text: str, decimal: DecimalMark = "point") -> bool:
    """Whether `text` has the form of a number with this decimal mark."""
    form = _WITH_POINT if decimal == "point" else _WITH_COMMA
    return len(text) <= MAX_NUMBER_LENGTH and form.fullmatch(text) is not None


def parse_number(text: str, decimal: DecimalMark = "point", *, factor: Decimal = Decimal(1)) -> float:
    """Read a number; a `factor` is applied in decimal arithmetic, so that 3 times 0.1 is 0.3.

    Raises:
        NumberTextError: not a number, or not one that a float64 holds.
    """
    if not is_number_text(text, decimal):
        raise NumberTextError(why_not_a_number(text, decimal))
    plain = text.replace(",", ".") if decimal == "comma" else text
    value = float(plain)
    if factor != 1 and math.isfinite(value):
        value = float(_WIDE.multiply(Decimal(plain), factor))
    if not math.isfinite(value):
        raise NumberTextError(f"{text!r} is too large for a number")
    if value == 0.0 and any(c in "123456789" for c in plain.lower().partition("e")[0]) and factor != 0:
        raise NumberTextError(f"{text!r} is too close to 0 to be held")
    return value + 0.0  # turns -0.0 into 0.0


def parse_numbers(texts: Sequence[str], decimal: DecimalMark = "point") -> list[float] | None:
    """What `parse_number` gives for each text, or None when one of them is no number (ask one by one for the reason).

    The same checks, made on all at once.
    """
    form = _WITH_POINT if decimal == "point" else _WITH_COMMA
    if not texts:
        return []
    if max(map(len, texts)) > MAX_NUMBER_LENGTH or not all(map(form.fullmatch, texts)):
        return None
    plain = [text.replace(",", ".") for text in texts] if decimal == "comma" else texts
    values = np.array(list(map(float, plain))) + 0.0  # turns -0.0 into 0.0
    if not np.isfinite(values).all():
        return None
    for position in np.flatnonzero(values == 0.0):
        try:
            parse_number(texts[int(position)], decimal)
        except NumberTextError:
            return None
    return cast(list[float], values.tolist())


def why_not_a_number(text: str, decimal: DecimalMark) -> str:
    """The reason, in words, for which `text` is not read as a number with this decimal mark."""
    if not text:
        return "a field is empty"
    if len(text) > MAX_NUMBER_LENGTH:
        return f"a field of {len(text)} characters is not a number"
    if _NOT_FINITE.fullmatch(text):
        return f"{text!r} is not a finite number"
    if has_thousands_marks(text, decimal):
        return f"{text!r} seems to carry thousands marks, which are not read"
    other: DecimalMark = "comma" if decimal == "point" else "point"
    if is_number_text(text, other):
        return f"{text!r} has a decimal {other} where the other numbers have none or a decimal {decimal}"
    return f"{text!r} is not a number"


def has_thousands_marks(text: str, decimal: DecimalMark) -> bool:
    """Whether `text` reads as a number only with thousands marks, given the decimal mark."""
    return _THOUSANDS.fullmatch(text) is not None and not is_number_text(text, decimal)
