"""Units and tolerances. Time is seconds inside, minutes where people read it; m/z tolerance is Da or ppm."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from speclib.errors import InvalidValueError

SECONDS_PER_MINUTE = 60.0


def minutes_from_seconds(time_s: float) -> float:
    """Return a time in minutes."""
    return time_s / SECONDS_PER_MINUTE


def seconds_from_minutes(time_min: float) -> float:
    """Return a time in seconds."""
    return time_min * SECONDS_PER_MINUTE


@dataclass(frozen=True)
class Tolerance:
    """How far two m/z may lie apart and still match: `value` in `unit` (da, or ppm of the query's m/z)."""

    value: float
    unit: Literal["da", "ppm"]

    def __post_init__(self) -> None:
        if self.unit not in ("da", "ppm"):
            raise InvalidValueError(f"a tolerance cannot be given in {self.unit!r}", "use da or ppm")
        if not 0.0 <= self.value < float("inf"):
            raise InvalidValueError(f"a tolerance of {self.value} {self.unit} is not possible", "give 0 or more")

    def at(self, mz: float) -> float:
        """Half width of the window in Da around `mz`."""
        return self.value if self.unit == "da" else self.value * 1e-6 * mz

    def __str__(self) -> str:
        return f"{self.value:g} {'Da' if self.unit == 'da' else 'ppm'}"


UNIT_MASS_TOLERANCE = Tolerance(0.0, "da")
"""Unit-mass spectra are compared on whole m/z, so only equal values match."""

ACCURATE_MASS_TOLERANCE = Tolerance(0.005, "da")
"""Default for accurate-mass spectra; common practice, no source."""
