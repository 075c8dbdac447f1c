"""Two columns of text: what is recognised, what is asked about, what is refused."""

from __future__ import annotations

from typing import Any

import pytest

from speclib.errors import InputFileError
from speclib.formats.reading import ReadOptions, read_spectra_from_bytes
from speclib.model.spectrum import MassAccuracy, SourceSpectrum


def read(text: str, **options: Any) -> SourceSpectrum:
    return read_spectra_from_bytes("peaks.txt", text.encode(), ReadOptions(**options)).spectra[0]


def peaks(text: str, **options: Any) -> list[tuple[float, float]]:
    spectrum = read(text, **options).spectrum
    return list(zip(spectrum.mz.tolist(), spectrum.intensity.tolist(), strict=True))


def refusal(text: str, **options: Any) -> InputFileError:
    with pytest.raises(InputFileError) as caught:
        read(text, **options)
    error = caught.value
    assert str(error).startswith("peaks.txt, line ")
    assert error.advice
    assert str(error).isprintable()
    return error


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("43\t100\n57\t80", [(43, 100), (57, 80)]),
        ("43 \t 100", [(43, 100)]),
        ("43;100", [(43, 100)]),
        ("43 ; 100 ;", [(43, 100)]),
        ("43,100\n57,80", [(43, 100), (57, 80)]),
        ("43, 100", [(43, 100)]),
        ("  43   100  ", [(43, 100)]),
        ("43.5,100.25", [(43.5, 100.25)]),
        ("43,05 100,0", [(43.05, 100.0)]),
        ("43,05\t100,0", [(43.05, 100.0)]),
        ("43,05;100,0", [(43.05, 100.0)]),
        ("43,05;100\n57;1", [(43.05, 100), (57, 1)]),
        ("43;1,234\n57;2,5", [(43, 1.234), (57, 2.5)]),
        ("43;0,123", [(43, 0.123)]),
        ("43;1234,567", [(43, 1234.567)]),
        ("1,2E1;3,4e+02", [(12, 340)]),
        ("4.3E1 1E3", [(43, 1000)]),
        ("+43 +5", [(43, 5)]),
        ("43. .5", [(43, 0.5)]),
        ("043 005", [(43, 5)]),
        ("57 80\n43 100", [(43, 100), (57, 80)]),
        ("43 0\n44 1", [(43, 0), (44, 1)]),
        ("43 -0\n44 1", [(43, 0), (44, 1)]),
        ("\n\n43 100\n\n57 80\n\n", [(43, 100), (57, 80)]),
        ("43;100\n;;\n57;80", [(43, 100), (57, 80)]),
        ("43 100\n# a remark\n57 80", [(43, 100), (57, 80)]),
        ("sep=;\nm/z;Int\n43;5", [(43, 5)]),
        ("41 100 100\n43 50 50\n57 10.04 10", [(41, 100), (43, 50), (57, 10.04)]),
        ("41 1.234\n43 2.345", [(41, 1.234), (43, 2.345)]),
        ("41 100.5\n43 2.345\n44 7", [(41, 100.5), (43, 2.345), (44, 7)]),
    ],
)
def test_one_possible_reading_is_taken(text: str, expected: list[tuple[float, float]]) -> None:
    assert peaks(text) == expected


@pytest.mark.parametrize(
    ("text", "words", "option"),
    [
        ("43,05,100,0", "commas may part columns or mark decimals", "--separator"),
        ("43,05,100,0\n57,1,20,5", "commas may part columns or mark decimals", "--decimal"),
        ("43,05,100", "commas may part columns or mark decimals", "--separator"),
        ("43,1,100\n57,2,200\n58,3,300", "commas may part columns or mark decimals", "--separator"),
        ("43,05, 100", "commas may part columns or mark decimals", "--separator"),
        ("43;1,234", "'1,234' may be 1.234 or 1234", "--decimal comma"),
        ("43;1,234\n57;876", "'1,234' may be 1.234 or 1234", "--decimal comma"),
        ("43\t1,234", "'1,234' may be 1.234 or 1234", "--decimal comma"),
        ("43 1,234", "'1,234' may be 1.234 or 1234", "--decimal comma"),
        ("1,008;5", "'1,008' may be 1.008 or 1008", "--decimal comma"),
        ("43;876\n57;1.234", "'1.234' may be 1.234 or 1234", "--decimal point"),
        ("43,100 57,200\n71,50 85,30", "two peaks written m/z,intensity", "--decimal comma"),
        ("43,100;57,200", "two peaks written m/z,intensity", "--decimal comma"),
        ("43,05\n57,06", "looks like one number with a decimal comma", "--separator comma"),
    ],
)
def test_two_possible_readings_are_asked_about(text: str, words: str, option: str) -> None:
    error = refusal(text)
    assert words in error.reason
    assert option in error.advice


@pytest.mark.parametrize(
    ("text", "options", "expected"),
    [
        ("43,05,100,0\n57,1,20,5", {"separator": "comma", "decimal": "comma"}, [(43.05, 100.0), (57.1, 20.5)]),
        ("43;1,234", {"decimal": "comma"}, [(43, 1.234)]),
        ("43;876\n57;1.234", {"decimal": "point"}, [(43, 876), (57, 1.234)]),
        ("43,100 57,200", {"decimal": "comma"}, [(43.1, 57.2)]),
        ("43,05\n57,06", {"separator": "comma"}, [(43, 5), (57, 6)]),
        ("43,100", {"separator": "comma"}, [(43, 100)]),
    ],
)
def test_the_answer_by_option_is_followed(
    text: str, options: dict[str, Any], expected: list[tuple[float, float]]
) -> None:
    assert peaks(text, mass_accuracy="unit", **options) == expected


@pytest.mark.parametrize(
    ("text", "options"),
    [
        ("43,05,100", {"separator": "comma", "decimal": "comma"}),
        ("43;5", {"separator": "tab"}),
        ("43;5,5", {"decimal": "point"}),
        ("43;5.5", {"decimal": "comma"}),
        ("43,5", {"decimal": "comma"}),
    ],
)
def test_an_answer_that_does_not_fit_the_file_is_refused(text: str, options: dict[str, Any]) -> None:
    assert refusal(text, **options).place == "line 1"


@pytest.mark.parametrize(
    "number", ["1.234,5", "1'234", "1 234", "1,234,567", "1\u00a0234", "1\u202f234,5", "1\u2019234"]
)
def test_thousands_marks_are_never_read(number: str) -> None:
    error = refusal(f"43;5\n57;{number}")
    assert "thousands marks" in error.reason
    assert error.place == "line 2"
    assert "without thousands marks" in error.advice


def test_why_a_comma_parts_columns_is_said() -> None:
    assert any("as a decimal mark it would leave one number a line" in note for note in read("43,100").notes)
    assert read("43,100", separator="comma").notes == ()
    assert read("43.5,100", mass_accuracy="unit").notes == ()


def test_decimal_commas_of_accurate_mz_are_evidence_enough() -> None:
    assert peaks("43,018;999\n57,034;12", mass_accuracy="accurate") == [(43.018, 999), (57.034, 12)]


@pytest.mark.parametrize(
    ("line", "words"),
    [
        ("57 nan", "'nan' is not a finite number"),
        ("57 -inf", "'-inf' is not a finite number"),
        ("57 0x1F", "'0x1F' is not a number"),
        ("57 1_000", "'1_000' is not a number"),
        ("57 -5", "negative"),
        ("-57 5", "must lie above 0"),
        ("0 5", "must lie above 0"),
        ("10001 5", "at most at 10000"),
        ("57 1e999", "too large"),
        ("57 1e-999", "too close to 0"),
        ("57 5 base", "'base' stands after m/z and intensity"),
        ("57 5 # base", "stands after m/z and intensity"),
        ("57 5 6", "3 columns"),
        ("57", "is not two numbers"),
        ("57 \u0665", "is not a number"),
        ("57 \u22125", "is not a number"),
        ("57 " + "1" * 70, "70 characters"),
        ('"57" 5', "quotation marks"),
        ("57;5", "is not two numbers"),
        ("57 5,5", "decimal comma"),
        ("O 5", "'O' is not a number"),
    ],
)
def test_a_bad_line_is_refused_by_its_number(line: str, words: str) -> None:
    error = refusal(f"# name: a\n41.5 1.5\n{line}\n60.5 2.5\n", mass_accuracy="unit")
    assert words in error.reason
    assert error.place == "line 3"


@pytest.mark.parametrize("text", ["43\t\t100", "43;;100"])
def test_an_empty_column_is_refused(text: str) -> None:
    assert "a field is empty" in refusal(text).reason


def test_a_quoted_table_is_refused() -> None:
    assert "quotation marks" in refusal('"43","5"').reason


def test_the_same_mz_twice_names_both_lines() -> None:
    error = refusal("# a: b\n43 5\n57 1\n43.0 6\n")
    assert error.reason == "m/z 43.0 stands twice, in lines 2 and 4"
    assert error.place == "line 4"


def test_three_columns_without_an_explanation_are_refused() -> None:
    assert "three columns" in refusal("43 100 7\n57 80 9\n58 3 3").reason
    assert "4 columns" in refusal("43 100 7 8").reason


def test_a_relative_third_column_is_left_out_with_a_note() -> None:
    source = read("m/z;Intensity;Rel. Int.\n43;200;100\n57;20;10")
    assert source.spectrum.intensity.tolist() == [200, 20]
    assert any("'Rel. Int.' was not read" in note for note in source.notes)


@pytest.mark.parametrize(
    "heading", ["m/z;intensity", "Mass;Abundance", '"m/z";"Rel. Int. (%)"', "mz;counts", "m/z;Caffeine"]
)
def test_headings_are_known_and_kept(heading: str) -> None:
    source = read(f"{heading}\n43;5")
    assert source.spectrum.mz.tolist() == [43]
    assert dict(source.spectrum.raw_fields) == {"column headings": heading}
    assert source.notes == ()


def test_headings_in_the_other_order_turn_the_columns() -> None:
    assert peaks("intensity\tm/z\n5\t43") == [(43, 5)]
    assert peaks("# intensity m/z\n5 43") == [(43, 5)]


def test_unknown_headings_are_read_in_order_with_a_note() -> None:
    source = read("x;y\n43;5")
    assert source.spectrum.mz.tolist() == [43]
    assert "first column was taken as m/z" in source.notes[0]


@pytest.mark.parametrize("heading", ["time;intensity", "RT;TIC", "Retention time;Abundance"])
def test_a_chromatogram_is_not_taken_for_a_spectrum(heading: str) -> None:
    assert "not a mass spectrum" in refusal(f"{heading}\n5;43\n6;44").reason


@pytest.mark.parametrize("line", ["Caffeine", "Name: caffeine", "a = b", "one two three"])
def test_a_first_line_that_is_no_heading_is_refused(line: str) -> None:
    error = refusal(f"{line}\n43;5")
    assert error.place == "line 1"
    assert "#" in error.advice


def test_a_second_row_of_words_is_refused() -> None:
    assert refusal("m/z;intensity\nDa;counts\n43;5").place == "line 2"


def test_a_second_spectrum_below_an_empty_line_is_refused() -> None:
    error = refusal("43 5\n57 6\n\n41 7\n58 8")
    assert "second spectrum" in error.reason
    assert error.place == "line 4"


def test_a_labelled_line_below_peaks_is_refused_but_a_remark_is_kept() -> None:
    assert "stands below peaks" in refusal("43 5\n# name: other\n57 6").reason
    assert dict(read("43 5\n# well done\n").spectrum.raw_fields) == {"comment in line 2": "well done"}


def test_a_file_of_labels_only_has_no_peaks() -> None:
    with pytest.raises(InputFileError, match="no line holds two numbers"):
        read("# name: a\n")


def test_only_zero_intensities_are_refused() -> None:
    assert "no peak has an intensity above 0" in refusal("43 0\n44 0").reason


def test_more_peaks_than_a_spectrum_may_have_are_refused() -> None:
    text = "".join(f"{i / 100}\t1\n" for i in range(1, 200_002))
    assert "more than 200000 peaks" in refusal(text).reason


@pytest.mark.parametrize(
    ("mz", "accuracy", "notes"),
    [
        ("43", MassAccuracy.UNIT, 0),
        ("43.000", MassAccuracy.UNIT, 0),
        ("43.1", MassAccuracy.UNIT, 1),
        ("43.05", MassAccuracy.UNIT, 1),
        ("43.050", MassAccuracy.UNIT, 1),
    ],
)
def test_few_decimals_are_unit_mass(mz: str, accuracy: MassAccuracy, notes: int) -> None:
    source = read(f"{mz}\t5.5")
    assert source.spectrum.mass_accuracy is accuracy
    assert len(source.notes) == notes


def test_three_decimals_are_asked_about() -> None:
    error = refusal("43\t5\n57.034\t6.5")
    assert "3 decimals (57.034)" in error.reason
    assert error.advice == "say it with --mass-accuracy unit or --mass-accuracy accurate"
    assert read("57.034\t6.5", mass_accuracy="accurate").spectrum.mass_accuracy is MassAccuracy.ACCURATE
    assert read("57.034\t6.5", mass_accuracy="unit").spectrum.mass_accuracy is MassAccuracy.UNIT


def test_the_label_says_the_mass_accuracy_and_the_option_wins() -> None:
    text = "# mass_accuracy: accurate\n57.034\t6.5"
    assert read(text).spectrum.mass_accuracy is MassAccuracy.ACCURATE
    other = read(text, mass_accuracy="unit")
    assert other.spectrum.mass_accuracy is MassAccuracy.UNIT
    assert other.notes == ("the file says accurate mass, read as unit mass as asked",)
