"""Equally spaced ordinates of JCAMP-DX: decoding, checks, bounds, and what becomes of them."""

from __future__ import annotations

import time
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from speclib.errors import InputFileError
from speclib.formats.jcamp_asdf import decode_equally_spaced
from speclib.formats.jcamp_records import read_blocks
from speclib.formats.jcamp_tables import find_table, split_table
from speclib.formats.reading import ReadOptions, read_spectra_from_bytes
from speclib.formats.text_document import decode_document
from speclib.model.spectrum import SourceSpectrum

POSITIVE_SQZ, NEGATIVE_SQZ = "@ABCDEFGHI", "@abcdefghi"
POSITIVE_DIF, NEGATIVE_DIF = "%JKLMNOPQR", "%jklmnopqr"
DUP = " STUVWXYZs"


def block(count: int, lines: str, labels: str = "", first: float = 1, last: float | None = None) -> str:
    end = first + count - 1 if last is None else last
    return (
        "##TITLE= a\n##DATA TYPE= MASS SPECTRUM\n##.IONIZATION MODE= EI+\n##XUNITS= M/Z\n"
        f"##FIRSTX= {first}\n##LASTX= {end}\n##NPOINTS= {count}\n{labels}##XYDATA= (X++(Y..Y))\n{lines}\n##END=\n"
    )


def decoded(text: str) -> list[float]:
    document = decode_document("ms.jdx", text.encode())
    found = read_blocks(document)[0]
    table = split_table(document, find_table(document, found))
    return [float(y) for y in decode_equally_spaced(document, found, table.body).y]


def read(text: str, **options: Any) -> SourceSpectrum:
    return read_spectra_from_bytes("ms.jdx", text.encode(), ReadOptions(**options)).spectra[0]


def refusal(text: str) -> InputFileError:
    with pytest.raises(InputFileError) as caught:
        read(text)
    assert caught.value.advice
    assert str(caught.value).isprintable()
    return caught.value


# The four forms of one series of ordinates, as the protocol's own example shows them in its table VII.
@pytest.mark.parametrize(
    "line",
    [
        "1 1 2 3 3 2 1 0 -1 -2 -3",
        "1+1+2+3+3+2+1+0-1-2-3",
        "1ABCCBA@abc",
        "1AJJ%jjjjjj",
        "1AJT%jX",
        "1ABCTBA@abc",
        "1,1;2, 3 3\t2 1 0 -1 -2 -3",
        "1 1.0 2. 3 3 2e+00 1E+00 .0 -1 -2 -3",
    ],
)
def test_all_forms_decode_to_the_same_ordinates(line: str) -> None:
    assert decoded(block(10, line)) == [1, 2, 3, 3, 2, 1, 0, -1, -2, -3]


def test_a_check_ordinate_is_compared_and_dropped() -> None:
    assert decoded(block(4, "1A0J\n2A1J\n3A2J\n4A3")) == [10, 11, 12, 13]


def test_the_last_check_ordinate_may_be_missing() -> None:
    assert decoded(block(3, "1A0JJ")) == [10, 11, 12]


def test_a_repeated_difference_is_added_each_time() -> None:
    assert decoded(block(5, "1A0K5V")) == [10, 35, 60, 85, 110]
    assert decoded(block(4, "1A0V")) == [10, 10, 10, 10]


def test_factors_scale_and_missing_ordinates_stay_missing() -> None:
    values = decoded(block(3, "10 1 ? 3", "##XFACTOR= 0.1\n##YFACTOR= 0.1\n"))
    assert values[::2] == [0.1, 0.3]
    assert np.isnan(values[1])


def test_an_exponent_is_told_from_a_squeezed_digit() -> None:
    assert decoded(block(2, "1 1E+02 2e+02")) == [100, 200]
    assert decoded(block(2, "1E02B")) == [502, 2]


@pytest.mark.parametrize(
    ("text", "line", "words"),
    [
        (block(3, "1A0JJ\n3A1"), 10, "check ordinate 11 is not the 12"),
        (block(3, "1A0J\n2J"), 10, "does not repeat its last ordinate"),
        (block(2, "1A\n3B"), 10, "the line says that it begins at 3, but by FIRSTX, LASTX and NPOINTS it is 2"),
        (block(3, "1AB"), 7, "NPOINTS says 3 points but the table holds 2"),
        (block(2, "1ABC"), 9, "more than the 2 points"),
        (block(2, "1AS9999999999999999"), 9, "more than the 2 points"),
        (block(2, "1AJs999999999999999"), 9, "more than the 2 points"),
        (block(2, "1J2"), 9, "a difference follows no value"),
        (block(2, "1?J2"), 9, "a difference follows no value"),
        (block(2, "1T"), 9, "a repetition follows no value"),
        (block(3, "1ATT"), 9, "a repetition follows no value"),
        (block(2, "AB"), 9, "not with its abscissa"),
        (block(2, "1 2 x"), 9, "'x' is no ordinate"),
        (block(2, "1 2 3.4.5"), 9, "no ordinate"),
        (block(2, "1 2 " + "9" * 50), 9, "no ordinate"),
        (block(2, "1 2 1E+999"), 9, "too large"),
        (block(1, "1A", "##YFACTOR= 0\n"), 8, "not a number above 0"),
        (block(0, "1A"), 7, "NPOINTS is 0"),
        (block(3_000_000, "1A"), 7, "NPOINTS is 3000000"),
        (block(1, "1A").replace("##NPOINTS= 1\n", ""), 1, "need NPOINTS"),
        (block(1, "1A").replace("= 1\n", "= one\n", 1), 5, "need FIRSTX, a number"),
        (block(1, "1A").replace("##LASTX= 1\n", ""), 1, "need LASTX, a number: it is missing"),
    ],
)
def test_damage_is_refused_by_its_line(text: str, line: int, words: str) -> None:
    error = refusal(text)
    assert words in error.reason
    assert error.place == f"line {line}"


def test_sticks_on_whole_numbers_are_peaks_and_zeros_are_none() -> None:
    source = read(block(8, "41A0@G0@UI@", first=41, last=48))
    assert source.spectrum.mz.tolist() == [41, 43, 47]
    assert source.spectrum.intensity.tolist() == [10, 70, 9]


def test_falling_abscissae_and_missing_ordinates_are_understood() -> None:
    source = read(block(4, "46 1 ? 0 4", first=46, last=43))
    assert source.spectrum.mz.tolist() == [43, 46]
    assert source.notes == ("1 ordinates are missing ('?'): their m/z were left out",)


def test_another_first_ordinate_than_stated_is_remarked() -> None:
    assert any("FIRSTY says 9" in note for note in read(block(2, "1 1 2", "##FIRSTY= 9\n")).notes)
    assert read(block(2, "1 1 2", "##FIRSTY= 1\n")).notes == ()


def test_negative_sticks_are_refused() -> None:
    assert "negative" in refusal(block(2, "1Ab")).reason


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (block(3, "50.0 1 5 2", first=50, last=50.2), "(profile) over m/z: 3 points from 50 to 50.2, the highest 5"),
        (block(3, "50 1 5 2", first=50).replace("DATA TYPE= MASS", "DATA TYPE= CONTINUOUS MASS"), "(profile)"),
        (
            block(3, "7 1 5 2", first=7)
            .replace("DATA TYPE= MASS", "DATA TYPE= CONTINUOUS MASS")
            .replace("M/Z", "SECONDS"),
            "(raw scan), with 'SECONDS' and not m/z: 3 points from 7 to 9, the highest 5 at 8",
        ),
        (block(3, "50 1 5 2", first=50).replace("##XUNITS= M/Z\n", ""), "an abscissa without unit"),
        (block(3, "50 1 5 2", first=50).replace("M/Z", "SECONDS"), "XUNITS is 'SECONDS', not m/z"),
    ],
)
def test_profiles_and_raw_scans_are_refused_as_what_they_are(text: str, words: str) -> None:
    assert words in refusal(text).reason


def test_a_profile_beside_sticks_is_left_out_with_a_note() -> None:
    profile = block(3, "50.0 1 5 2", first=50, last=50.2)
    source = read(profile + block(2, "1 1 2"))
    assert source.index == 1
    assert any("line 4 was left out: it holds a continuous mass spectrum" in note for note in source.notes)


def encoded(values: list[int], form: str, per_line: int) -> str:
    """A plain encoder, for the property below: one form a table, as the protocol describes them."""
    lines, at = [], 0
    while at < len(values):
        chunk = values[at : at + per_line]
        # A line that follows a difference begins with the abscissa and ordinate of the point before.
        repeated = form in ("DIF", "DIFDUP") and at > 0 and per_line > 1
        start = at - 1 if repeated else at
        text = str(start + 1)
        previous = values[start]
        text += _squeezed(previous) if form != "PAC" else f"{previous:+d}"
        rest = chunk if repeated else chunk[1:]
        if form == "PAC":
            text += "".join(f"{value:+d}" for value in rest)
        elif form == "SQZ":
            text += "".join(map(_squeezed, rest))
        else:
            steps = np.diff([previous, *rest]).tolist()
            text += _differences(steps, repeat=form == "DIFDUP")
        lines.append(text)
        at += per_line
    return "\n".join(lines)


def _pseudo(value: int, positive: str, negative: str) -> str:
    digits = str(abs(value))
    return (negative if value < 0 else positive)[int(digits[0])] + digits[1:]


def _squeezed(value: int) -> str:
    return _pseudo(value, POSITIVE_SQZ, NEGATIVE_SQZ)


def _differences(steps: list[int], *, repeat: bool) -> str:
    text, at = "", 0
    while at < len(steps):
        run = 1
        while repeat and at + run < len(steps) and steps[at + run] == steps[at]:
            run += 1
        text += _pseudo(steps[at], POSITIVE_DIF, NEGATIVE_DIF)
        text += (DUP[int(str(run)[0])] + str(run)[1:]) if run > 1 else ""
        at += run
    return text


@settings(deadline=None)
@given(
    st.lists(st.integers(-(10**12), 10**12) | st.integers(-2, 2), min_size=1, max_size=60),
    st.sampled_from(["PAC", "SQZ", "DIF", "DIFDUP"]),
    st.integers(2, 20),
)
def test_any_ordinates_decode_from_every_form(values: list[int], form: str, per_line: int) -> None:
    assert decoded(block(len(values), encoded(values, form, per_line))) == values


@settings(deadline=None, max_examples=300)
@given(st.text("0123456789+-.@AaBbJjKkSTs%?Ee ,;\n", max_size=60), st.integers(1, 20))
def test_any_mix_of_pseudo_digits_is_decoded_or_refused(lines: str, count: int) -> None:
    try:
        read(block(count, lines))
    except InputFileError as error:
        assert error.advice  # noqa: PT017 - a refusal is one of two good outcomes


@pytest.mark.parametrize(
    "lines",
    ["1A" + "S" * 500_000, "1" + "A" * 1_000_000, "1 " + "1" * 1_000_000, "1A" + "s9" * 300_000, "1\n" * 300_000],
)
def test_a_table_made_to_be_slow_is_settled_in_seconds(lines: str) -> None:
    started = time.monotonic()
    refusal(block(2_000_000, lines))
    assert time.monotonic() - started < 10
