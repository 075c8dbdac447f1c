"""Numbers of files."""

from __future__ import annotations

import math
from decimal import Decimal

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from speclib.formats.mass_accuracy import MassAccuracyUnknownError, decide_mass_accuracy, written_decimals
from speclib.formats.number_text import NumberTextError, parse_number, parse_numbers
from speclib.formats.options import DecimalMark
from speclib.model.spectrum import MassAccuracy

FINITE = st.floats(allow_nan=False, allow_infinity=False)


@settings(deadline=None)
@given(FINITE)
def test_every_float_reads_back_from_its_shortest_text(value: float) -> None:
    assert parse_number(repr(value)) == value


@settings(deadline=None)
@given(FINITE)
def test_every_float_reads_back_with_a_decimal_comma(value: float) -> None:
    assert parse_number(repr(value).replace(".", ","), "comma") == value


@settings(deadline=None)
@given(st.text(max_size=12))
def test_any_text_is_a_finite_number_or_refused_with_a_reason(text: str) -> None:
    value: float | NumberTextError
    try:
        value = parse_number(text)
    except NumberTextError as error:
        value = error
    if isinstance(value, NumberTextError):
        assert str(value)
    else:
        assert value == float(text)
        assert text.isascii()
        assert "_" not in text


@pytest.mark.parametrize(
    "text", ["", " 1", "1 ", "1e", "e5", ".", "+", "1.2.3", "1,5", "0x10", "1_0", "inf", "NaN", "1e1000", "\u0661"]
)
def test_what_a_person_would_not_call_a_number_is_refused(text: str) -> None:
    with pytest.raises(NumberTextError):
        parse_number(text)


@pytest.mark.parametrize("text", ["5,", ",5", "1.5", "1,2,3"])
def test_a_decimal_comma_needs_digits_on_both_sides(text: str) -> None:
    with pytest.raises(NumberTextError):
        parse_number(text, "comma")


def test_a_factor_is_exact_in_decimals() -> None:
    assert parse_number("3", factor=Decimal("0.1")) == 0.3
    with pytest.raises(NumberTextError, match="too large"):
        parse_number("1e300", factor=Decimal("1e300"))


@pytest.mark.parametrize(
    ("mz", "decimals"), [(43.0, 0), (43.1, 1), (43.05, 2), (43.0184, 4), (1e-05, 5), (10000.0, 0), (5e-324, 324)]
)
def test_decimals_are_those_of_the_shortest_text(mz: float, decimals: int) -> None:
    assert written_decimals(mz) == decimals


@settings(deadline=None)
@given(st.lists(st.integers(1, 10_000).map(float), min_size=1))
def test_whole_mz_are_unit_mass_without_a_note(mz: list[float]) -> None:
    assert decide_mass_accuracy(mz, None, None) == (MassAccuracy.UNIT, "")


@settings(deadline=None)
@given(st.integers(1, 9_999), st.integers(1, 999).filter(lambda n: n % 10 != 0))
def test_three_decimals_are_never_guessed(whole: int, thousandths: int) -> None:
    with pytest.raises(MassAccuracyUnknownError):
        decide_mass_accuracy([50.0, float(f"{whole}.{thousandths:03d}")], None, None)


NUMBER_LIKE = (
    st.text("0123456789.,+-eE _", max_size=9)
    | FINITE.map(repr)
    | st.sampled_from(["nan", "1e999", "1e-999", "0", "-0.0", "0" * 70, "0e5", "\u0661", "5e-324"])
)


@settings(deadline=None, max_examples=500)
@given(st.lists(NUMBER_LIKE, max_size=6), st.sampled_from(["point", "comma"]))
def test_many_numbers_at_once_are_read_as_one_by_one(texts: list[str], decimal: DecimalMark) -> None:
    slow: list[float] | None
    try:
        slow = [parse_number(text, decimal) for text in texts]
    except NumberTextError:
        slow = None
    fast = parse_numbers(texts, decimal)
    assert fast == slow
    assert [math.copysign(1, value) for value in fast or []] == [math.copysign(1, value) for value in slow or []]
