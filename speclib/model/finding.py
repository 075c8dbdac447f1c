"""What a check says about a spectrum."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from enum import StrEnum
from typing import Any


class Severity(StrEnum):
    """How grave a finding is: `fault` blocks sign-off until answered, `doubt` asks for a look, `note` informs."""

    NOTE = "note"
    DOUBT = "doubt"
    FAULT = "fault"


@dataclass(frozen=True)
class Finding:
    """One result of one check: severity, the m/z concerned, the reason in words and the source of the rule."""

    check: str
    severity: Severity
    reason: str
    source: str
    peaks: tuple[float, ...] = ()

    @property
    def fingerprint(self) -> str:
        """Identity of the finding within its check, so that the same one is recorded once."""
        text = "|".join([self.severity, self.reason, *(repr(p) for p in self.peaks)])
        return hashlib.sha256(text.encode()).hexdigest()[:16]

    def to_json(self) -> dict[str, Any]:
        """The finding as plain values."""
        return {
            "check": self.check,
            "severity": self.severity.value,
            "peaks": list(self.peaks),
            "reason": self.reason,
            "source": self.source,
        }
