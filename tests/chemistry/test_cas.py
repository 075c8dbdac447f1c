"""CAS Registry Numbers."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from speclib.chemistry.cas import is_valid_cas

VALUES: list[dict[str, Any]] = json.loads(
    (Path(__file__).parents[1] / "golden" / "cas_numbers.json").read_text(encoding="utf-8")
)["values"]


@pytest.mark.parametrize("row", VALUES, ids=lambda row: row["cas"] or "empty")
def test_check_values(row: dict[str, Any]) -> None:
    assert is_valid_cas(row["cas"]) is row["valid"], row["note"]


@pytest.mark.parametrize("text", ["66-25-1\n", " 66-25-1", "66\u201325\u20131", "\u0666\u0666-25-1", "CAS 66-25-1"])
def test_lookalikes_are_not_valid(text: str) -> None:
    assert not is_valid_cas(text)


@settings(deadline=None)
@given(st.integers(10, 9_999_999), st.integers(0, 99))
def test_exactly_one_check_digit_fits(first: int, second: int) -> None:
    assert sum(is_valid_cas(f"{first}-{second:02}-{digit}") for digit in range(10)) == 1


@settings(deadline=None)
@given(st.integers(10, 9_999_999), st.integers(0, 99), st.data())
def test_a_swap_of_neighbouring_digits_is_found(first: int, second: int, data: st.DataObject) -> None:
    digits = f"{first}{second:02}"
    check = next(d for d in range(10) if is_valid_cas(f"{first}-{second:02}-{d}"))
    i = data.draw(st.integers(0, len(digits) - 2))
    swapped = digits[:i] + digits[i + 1] + digits[i] + digits[i + 2 :]
    if swapped != digits:
        assert not is_valid_cas(f"{swapped[:-2]}-{swapped[-2:]}-{check}")
