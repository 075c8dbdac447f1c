"""Moments as the library writes them."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta, timezone

import pytest

from speclib.clock import system_clock, utc_text


def test_a_moment_is_written_in_utc_with_milliseconds() -> None:
    moment = datetime(2026, 1, 31, 15, 5, 9, 123_999, tzinfo=timezone(timedelta(hours=1)))
    assert utc_text(moment) == "2026-01-31T14:05:09.123Z"


def test_whole_seconds_keep_their_milliseconds_so_that_texts_sort_by_time() -> None:
    earlier = datetime(2026, 1, 31, 14, 5, 9, tzinfo=UTC)
    assert utc_text(earlier) == "2026-01-31T14:05:09.000Z"
    assert utc_text(earlier) < utc_text(earlier + timedelta(milliseconds=1))


def test_a_moment_without_time_zone_is_refused() -> None:
    with pytest.raises(ValueError, match="time zone"):
        utc_text(datetime(2026, 1, 31))  # noqa: DTZ001 (the point of the test)


def test_the_system_clock_knows_its_zone() -> None:
    assert system_clock().utcoffset() == timedelta(0)
