r"""Text for files that hold ASCII only: everyday signs of chemistry are spelt out, others are written by their number.

Greek letters become their names, accents are left out, and a letter without an ASCII form becomes `\u` and its code.
"""

from __future__ import annotations

import re
import unicodedata

_SIGNS = {
    "\u00b5": "u", "\u00b0": "deg ", "\u00b1": "+/-", "\u00d7": "x", "\u00b7": ".", "\u2022": ".", "\u2032": "'",
    "\u2033": "''", "\u2018": "'", "\u2019": "'", "\u201c": '"', "\u201d": '"', "\u2010": "-", "\u2011": "-",
    "\u2012": "-", "\u2013": "-", "\u2014": "-", "\u2212": "-", "\u2026": "...", "\u2192": "->", "\u00df": "ss",
    "\u00e6": "ae", "\u00f8": "o", "\u00d8": "O", "\u00c6": "AE", "\u2264": "<=", "\u2265": ">=",
}  # fmt: skip
_SPELT = str.maketrans(_SIGNS)
_GREEK = re.compile(r"GREEK (SMALL|CAPITAL) LETTER (?:FINAL )?([A-Z]+)")


def ascii_text(text: str) -> str:
    """One line of printable ASCII: blanks and line breaks as single blanks, no control characters, none at the ends."""
    spelt = unicodedata.normalize("NFKD", text.translate(_SPELT)).translate(_SPELT)
    plain = "".join(_ascii_sign(sign) for sign in spelt)
    return " ".join(plain.split())


def _ascii_sign(sign: str) -> str:
    if sign.isascii():
        return sign if sign.isprintable() else " " if sign.isspace() else ""
    if unicodedata.combining(sign):
        return ""
    if sign.isspace():
        return " "
    greek = _GREEK.fullmatch(unicodedata.name(sign, ""))
    if greek is not None:
        # Unicode spells it so.
        name = "lambda" if greek[2] == "LAMDA" else greek[2].lower()
        return name if greek[1] == "SMALL" else name.capitalize()
    category = unicodedata.category(sign)
    # Formats, controls and halves of surrogate pairs have no look that could be written down.
    return "" if category in ("Cc", "Cf", "Cs") else f"\\u{ord(sign):04x}"
