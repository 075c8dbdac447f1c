"""Layouts of two columns: the fast way of parting a row gives what the definition gives."""

from __future__ import annotations

import time

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from speclib.formats.columns import Layout, Row, _attempt, _plain_row
from speclib.formats.number_text import is_number_text
from speclib.formats.options import ReadOptions
from speclib.formats.reading import read_spectra_from_bytes
from speclib.model.spectrum import MassAccuracy

LAYOUTS = [
    Layout("tab", "point"), Layout("tab", "comma"), Layout("semicolon", "point"), Layout("semicolon", "comma"),
    Layout("comma", "point"), Layout("blank", "point"), Layout("blank", "comma"), Layout("comma", "comma"),
]  # fmt: skip
ROW = st.text("0123456789.,;\t e+-", min_size=1, max_size=14).map(lambda text: text.strip(" \t")).filter(bool)


@settings(deadline=None, max_examples=1000)
@given(ROW, st.sampled_from(LAYOUTS))
@example("1\t\t2", LAYOUTS[0])
@example("1 \t 2", LAYOUTS[5])
@example("1,2,", LAYOUTS[4])
def test_a_plain_row_is_parted_as_the_layout_parts_it(text: str, layout: Layout) -> None:
    plain = _plain_row(layout)
    match = plain.fullmatch(text) if plain is not None else None
    if match is not None:
        assert list(match.groups()) == layout.split(text)
        assert all(is_number_text(field, layout.decimal) for field in match.groups())


@settings(deadline=None, max_examples=300)
@given(st.lists(ROW, min_size=1, max_size=5), st.sampled_from(LAYOUTS))
def test_an_attempt_fits_exactly_when_every_row_is_two_or_three_numbers(texts: list[str], layout: Layout) -> None:
    attempt = _attempt([Row(number, text) for number, text in enumerate(texts, start=1)], layout)
    fields = [layout.split(text) for text in texts]
    width = len(fields[0])
    good = [
        len(row) == width in (2, 3) and all(is_number_text(field, layout.decimal) for field in row) for row in fields
    ]
    assert attempt.failed_at == (None if all(good) else good.index(False))
    assert attempt.fields == fields[: attempt.failed_at]


@pytest.mark.parametrize("sign", ["\t", ";", " ", ", "])
def test_a_file_of_as_many_peaks_as_there_may_be_is_read_in_seconds(sign: str) -> None:
    text = "".join(f"{number * 0.05!r}{sign}{number + 0.5}\n" for number in range(1, 200_000))
    started = time.monotonic()
    file = read_spectra_from_bytes("x.txt", text.encode(), ReadOptions(mass_accuracy=MassAccuracy.ACCURATE))
    assert time.monotonic() - started < 20
    assert len(file.spectra[0].spectrum) == 199_999
