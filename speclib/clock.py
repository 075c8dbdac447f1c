"""Time as the library writes it: UTC, ISO 8601, whole milliseconds. Clocks are passed in, so that tests can set
them.
"""

from __future__ import annotations

from collections.abc import Callable
from datetime import UTC, datetime

Clock = Callable[[], datetime]


def system_clock() -> datetime:
    """Now, in UTC."""
    return datetime.now(UTC)


def utc_text(moment: datetime) -> str:
    """Write a moment as `2026-01-31T14:05:09.123Z`.

    Raises:
        ValueError: the moment has no time zone.
    """
    if moment.tzinfo is None:
        raise ValueError("a moment without a time zone cannot be recorded")
    return moment.astimezone(UTC).isoformat(timespec="milliseconds").replace("+00:00", "Z")
