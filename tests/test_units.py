"""Tolerances and times."""

from __future__ import annotations

from typing import Any, cast

import pytest

from speclib.errors import InvalidValueError
from speclib.units import Tolerance, minutes_from_seconds, seconds_from_minutes


def test_a_tolerance_in_da_is_the_same_everywhere() -> None:
    assert Tolerance(0.005, "da").at(50.0) == Tolerance(0.005, "da").at(500.0) == 0.005


def test_a_tolerance_in_ppm_grows_with_mz() -> None:
    assert Tolerance(10.0, "ppm").at(500.0) == pytest.approx(0.005)


@pytest.mark.parametrize("value", [-0.1, float("nan"), float("inf")])
def test_an_impossible_tolerance_is_refused(value: float) -> None:
    with pytest.raises(InvalidValueError):
        Tolerance(value, "da")


def test_an_unknown_unit_is_refused_and_not_taken_for_ppm() -> None:
    with pytest.raises(InvalidValueError, match="da or ppm"):
        Tolerance(5.0, cast(Any, "Da"))


def test_tolerance_as_text() -> None:
    assert str(Tolerance(0.005, "da")) == "0.005 Da"
    assert str(Tolerance(5.0, "ppm")) == "5 ppm"


def test_minutes_and_seconds() -> None:
    assert seconds_from_minutes(2.5) == 150.0
    assert minutes_from_seconds(seconds_from_minutes(7.13)) == pytest.approx(7.13)
