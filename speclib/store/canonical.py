"""Canonical JSON for hashed records, version 1: sorted keys, no blanks, UTF-8, floats as their shortest round-trip
text.

The version stands inside every hashed event, so that a later form can live beside this one.
"""

from __future__ import annotations

import hashlib
import json
from typing import Any

CANONICAL_VERSION = 1
_ENCODER = json.JSONEncoder(sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)


def canonical_json(value: Any) -> str:
    """The one text of a JSON value.

    Raises:
        ValueError: NaN or an infinity, which JSON does not know.
    """
    return _ENCODER.encode(value)


def sha256_hex(data: str | bytes) -> str:
    """SHA-256 of text (UTF-8) or bytes, as 64 hexadecimal digits."""
    return hashlib.sha256(data.encode() if isinstance(data, str) else data).hexdigest()
