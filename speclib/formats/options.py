"""What a user may say about a file that the file itself leaves open."""

from __future__ import annotations

import codecs
import math
import re
from dataclasses import dataclass
from typing import Literal, get_args

from speclib.errors import InvalidValueError
from speclib.model.spectrum import MassAccuracy

DecimalMark = Literal["point", "comma"]
Separator = Literal["tab", "semicolon", "comma", "blank"]

_ENCODING_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9_-]{0,29}")
_TEXT_CODECS = (
    "ascii", "utf-8", "utf-16", "utf-32", "cp", "iso8859", "latin", "mac", "koi8",
    "gb", "big5", "hz", "euc", "shift", "johab", "tis",
)  # fmt: skip
"""Beginnings of codec names that turn bytes into text and nothing else (no escapes, no punycode, no compression)."""


@dataclass(frozen=True, kw_only=True)
class ReadOptions:
    """Answers to what a file leaves open; None means: not said, recognise it or ask.

    `decimal`, `separator` concern delimited text; `encoding` is a codec name; `mz_from`, `mz_to` (m/z) state the
    scanned range and win over what the file says.

    Raises:
        InvalidValueError: a value that cannot be used.
    """

    mass_accuracy: MassAccuracy | None = None
    decimal: DecimalMark | None = None
    separator: Separator | None = None
    encoding: str | None = None
    mz_from: float | None = None
    mz_to: float | None = None

    def __post_init__(self) -> None:
        _require_one_of("--mass-accuracy", self.mass_accuracy, tuple(MassAccuracy))
        _require_one_of("--decimal", self.decimal, get_args(DecimalMark))
        _require_one_of("--separator", self.separator, get_args(Separator))
        if self.mass_accuracy is not None:
            object.__setattr__(self, "mass_accuracy", MassAccuracy(self.mass_accuracy))
        if self.encoding is not None:
            codec_name(self.encoding)
        for name, value in (("mz_from", self.mz_from), ("mz_to", self.mz_to)):
            if value is not None and not (math.isfinite(value) and value >= 0):
                raise InvalidValueError(f"{name} cannot be {value}", "give a finite m/z of 0 or more")
        if self.mz_from is not None and self.mz_to is not None and self.mz_from >= self.mz_to:
            raise InvalidValueError(
                f"a scanned range from {self.mz_from:g} to {self.mz_to:g} is empty",
                "give mz_from below mz_to",
            )


def _require_one_of(option: str, value: str | None, allowed: tuple[str, ...]) -> None:
    if value is not None and value not in allowed:
        raise InvalidValueError(f"{option} cannot be {value!r}", f"give one of: {', '.join(allowed)}")


def codec_name(encoding: str) -> str:
    """The standard library's name of a text encoding.

    Raises:
        InvalidValueError: unknown, or not an encoding of text.
    """
    advice = "give a name such as utf-8, cp1252 or utf-16-le"
    if not _ENCODING_NAME.fullmatch(encoding):
        raise InvalidValueError(f"{encoding[:40]!r} is not the name of an encoding", advice)
    try:
        name = codecs.lookup(encoding).name
    except LookupError:
        raise InvalidValueError(f"{encoding!r} is not an encoding that speclib knows", advice) from None
    if not name.startswith(_TEXT_CODECS):
        raise InvalidValueError(f"{encoding!r} is not an encoding of plain text", advice)
    return name
