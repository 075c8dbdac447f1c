"""CAS Registry Numbers: form and check digit.

N...N-NN-R: 2 to 7 digits, 2 digits, check digit R = (sum of i times digit i, counted from the right before R) mod 10.
Passing proves neither that the number exists nor that it belongs to the compound.
"""

from __future__ import annotations

import re

_FORM = re.compile(r"([1-9][0-9]{1,6})-([0-9]{2})-([0-9])")


def is_valid_cas(text: str) -> bool:
    """Whether `text` has the form of a CAS Registry Number and the right check digit."""
    match = _FORM.fullmatch(text)
    if match is None:
        return False
    digits = match[1] + match[2]
    return sum(i * int(d) for i, d in enumerate(reversed(digits), start=1)) % 10 == int(match[3])
