"""JCAMP-DX: linked blocks, series of pages, peak assignments, and what is left out of a file with its reason."""

from __future__ import annotations

from typing import Any

import pytest

from speclib.errors import InputFileError
from speclib.formats.reading import ReadOptions, read_spectra_from_bytes
from speclib.model.spectrum import ClaimedAssignment, SourceSpectrum

HEAD = "##TITLE= a\n##JCAMP-DX= 5.00\n##DATA TYPE= MASS SPECTRUM\n##.IONIZATION MODE= EI+\n"
TABLE = "##NPOINTS= 2\n##PEAK TABLE= (XY..XY)\n43 100\n57 80\n"
END = "##END=\n"
PLAIN = HEAD + TABLE + END
STRUCTURE = "##TITLE= s\n##JCAMP-CS= 3.7\n##BLOCK_ID= 9\n##ATOMLIST=\n$$ AN AS\n 1 C\n" + END
INFRARED = HEAD.replace("MASS", "INFRARED") + TABLE + END
LINK = "##TITLE= l\n##JCAMP-DX= 5.00\n##DATA TYPE= LINK\n"


def read(text: str, **options: Any) -> tuple[SourceSpectrum, ...]:
    return read_spectra_from_bytes("ms.jdx", text.encode(), ReadOptions(**options)).spectra


def refusal(text: str) -> InputFileError:
    with pytest.raises(InputFileError) as caught:
        read(text)
    error = caught.value
    assert str(error).startswith("ms.jdx, line ")
    assert error.advice
    assert str(error).isprintable()
    return error


def linked(*blocks: str, labels: str = "") -> str:
    return LINK + f"##BLOCKS= {len(blocks)}\n" + labels + "".join(blocks) + END


def with_id(number: int, labels: str = "") -> str:
    return HEAD + f"##BLOCK_ID= {number}\n" + labels + TABLE + END


def assignments(table: str, labels: str = "##CROSS REFERENCE= MASS SPECTRUM: BLOCK_ID= 1\n") -> str:
    return HEAD + "##DATA CLASS= ASSIGNMENTS\n" + labels + table + "\n" + END


# linked blocks


def test_compound_data_of_the_outer_block_hold_for_the_inner_ones() -> None:
    labels = "##CAS NAME= 1-propanol\n##NAMES= propyl alcohol\nn-propanol\n##MOLFORM= C 3 H 8 O 1\n"
    labels += "##CAS REGISTRY NO= 71-23-8\n##$SMILES= CCCO\n##BP= 97\n"
    first, second = read(linked(PLAIN, PLAIN.replace("= a", "= b"), labels=labels))
    assert (first.title, second.title) == ("a", "b")
    for source in (first, second):
        assert source.names == ("1-propanol", "propyl alcohol", "n-propanol")
        assert (source.formula, source.cas, source.smiles) == ("C 3 H 8 O 1", "71-23-8", "CCCO")
        assert source.spectrum.raw_fields["LINK BP"] == "97"
        assert source.notes == ()


def test_inner_compound_data_win_where_they_agree_in_other_spelling() -> None:
    inner = HEAD + "##MOLFORM= C3 H8 O\n" + TABLE + END
    source = read(linked(inner, labels="##MOLFORM= C 3 H 8 O 1\n##CAS REGISTRY NO= 71-23-8\n"))[0]
    assert (source.formula, source.cas, source.notes) == ("C3 H8 O", "71-23-8", ())


def test_nothing_is_inherited_by_a_block_on_another_compound() -> None:
    inner = HEAD + "##MOLFORM= C2 H6 O\n" + TABLE + END
    source = read(linked(inner, labels="##MOLFORM= C10H8\n##CAS REGISTRY NO= 91-20-3\n##CAS NAME= n\n"))[0]
    assert (source.formula, source.cas, source.names) == ("C2 H6 O", None, ())
    assert any("nothing was taken over" in note for note in source.notes)


def test_a_formula_that_differs_in_a_count_of_one_is_another_compound() -> None:
    inner = HEAD + "##MOLFORM= C11 H8\n" + TABLE + END
    assert read(linked(inner, labels="##MOLFORM= C H8\n##CAS NAME= n\n"))[0].names == ()


def test_measurements_are_not_inherited() -> None:
    plain = PLAIN.replace("##.IONIZATION MODE= EI+\n", "")
    source = read(linked(plain, labels="##.IONIZATION MODE= EI+\n##.INLET= GC\n"))[0]
    assert source.spectrum.measurement.known() == {}
    assert any("the block around it says 'EI+' (line 5)" in note for note in source.notes)


def test_links_nest() -> None:
    text = linked(linked(PLAIN, labels="##CAS NAME= inner\n"), PLAIN, labels="##CAS NAME= outer\n##MOLFORM= C\n")
    first, second = read(text)
    assert (first.names, first.formula) == (("inner", "outer"), "C")
    assert second.names == ("outer",)


def test_a_wrong_count_of_blocks_is_remarked() -> None:
    assert any("BLOCKS says '5'" in note for note in read(LINK + "##BLOCKS= 5\n" + PLAIN + END)[0].notes)


def test_structures_and_other_spectra_are_left_out_with_a_note() -> None:
    spectra = read(linked(STRUCTURE, INFRARED, PLAIN, PLAIN))
    assert [source.index for source in spectra] == [1, 2]
    assert sum("left out" in note for note in spectra[0].notes) == 2
    assert any("chemical structure" in note for note in spectra[0].notes)
    assert any("'INFRARED SPECTRUM'" in note for note in spectra[0].notes)
    assert spectra[1].notes == ()


def test_a_file_without_a_mass_spectrum_says_what_it_holds() -> None:
    assert "chemical structure" in refusal(linked(STRUCTURE, INFRARED)).reason
    assert "1 more blocks" in refusal(linked(STRUCTURE, INFRARED)).reason


def test_a_private_record_of_many_lines_is_no_table() -> None:
    labels = "##$HINT PEAK ASSIGNMENT= (XYWA)\n15 -1 -1 <to CH3>\n27 -1 -1 <to C2H3>\n"
    source = read(linked(PLAIN, labels=labels))[0]
    assert source.assignments == ()
    assert "<to C2H3>" in source.spectrum.raw_fields["LINK $HINT PEAK ASSIGNMENT"]


def test_a_table_in_the_link_itself_is_refused() -> None:
    assert "holds a table beside" in refusal(LINK + TABLE + PLAIN + END).reason


# assignments


@pytest.mark.parametrize(
    ("table", "expected"),
    [
        ("##PEAK ASSIGNMENTS= (XYA)\n(43.0, 100.0, <f{C2H3O}>)", (43.0, 100.0, "f{C2H3O}")),
        ("##PEAK ASSIGNMENTS= (XYMA)\n( 43.00, 1.0,, < 7>)", (43.0, 1.0, "7")),
        ("##PEAK ASSIGNMENTS=(XYMA) (43,,S,<a, b (c) d>)", (43.0, None, "a, b (c) d")),
        ("##PEAK ASSIGNMENTS= (XA)\n(43 <x>)", (43.0, None, "x")),
        ("##PEAK ASSIGNMENTS= (xya)\n(43,?,<a -> b>);", (43.0, None, "a -> b")),
        ("##PEAK ASSIGNMENTS= (XYA)\n(43, 5,\n <two\n words>\n) $$ done", (43.0, 5.0, "two words")),
        ("##PEAK ASSIGNMENTS= (XYA)\n(43, 5, <fold=\ned>)", (43.0, 5.0, "folded")),
        ("##XFACTOR= 0.1\n##YFACTOR= 10\n##PEAK ASSIGNMENTS= (XYA)\n(430, 1, <x>)", (43.0, 10.0, "x")),
    ],
)
def test_an_assignment_is_a_claim_of_the_spectrum_it_refers_to(table: str, expected: tuple[Any, ...]) -> None:
    source = read(linked(with_id(1), assignments(table)))[0]
    assert source.assignments == (ClaimedAssignment(*expected),)
    assert source.notes == ()


def test_several_assignments_on_a_line_and_of_one_peak_are_kept_in_order() -> None:
    table = "##NPOINTS= 3\n##PEAK ASSIGNMENTS= (XYA)\n(57,1,<a>) (43,1,<b>), (43,1,<c>)"
    claims = read(linked(with_id(1), assignments(table)))[0].assignments
    assert [(claim.mz, claim.text) for claim in claims] == [(57, "a"), (43, "b"), (43, "c")]


TWO = "##PEAK ASSIGNMENTS= (XYA)\n(43,1,<a>)"


@pytest.mark.parametrize(
    ("blocks", "where"),
    [
        ((with_id(1), with_id(2), assignments(TWO, "##CROSS REFERENCE= MASS SPECTRUM: BLOCK_ID= 2\n")), [0, 1]),
        ((assignments(TWO, "##CROSS REFERENCE= STRUCTURE: BLOCK_ID= 9\nMASS SPECTRUM: BLOCK_ID=1\n"), with_id(1)), [1]),
        ((with_id(1), with_id(2, "##CROSS REFERENCE= A: BLOCK_ID= 7\n"), assignments(TWO, "##BLOCK_ID= 7\n")), [0, 1]),
        ((STRUCTURE, PLAIN, assignments(TWO, "")), [1]),
        ((HEAD + TABLE + TWO + "\n" + END, with_id(1)), [1, 0]),
    ],
    ids=["named", "before", "named by the spectrum", "the only one", "in the block"],
)
def test_assignments_find_their_spectrum(blocks: tuple[str, ...], where: list[int]) -> None:
    assert [len(source.assignments) for source in read(linked(*blocks))] == where


@pytest.mark.parametrize(
    "blocks",
    [
        (with_id(1), assignments(TWO, "##CROSS REFERENCE= MASS SPECTRUM: BLOCK_ID= 3\n")),
        (with_id(1), with_id(2), assignments(TWO, "")),
        (with_id(1), with_id(1), assignments(TWO)),
    ],
    ids=["unknown", "unnamed", "twice"],
)
def test_assignments_of_no_certain_spectrum_are_refused(blocks: tuple[str, ...]) -> None:
    assert "belong to" in refusal(linked(*blocks)).reason


def test_assignments_outside_a_link_belong_to_nothing() -> None:
    source = read(PLAIN + assignments(TWO))[0]
    assert source.assignments == ()
    assert any("peak assignments and no spectrum" in note for note in source.notes)
    assert "peak assignments and no spectrum" in refusal(assignments(TWO)).reason


@pytest.mark.parametrize(
    ("table", "words"),
    [
        ("##PEAK ASSIGNMENTS= (XYA)\n43, 5, <a>", "no peak assignment"),
        ("##PEAK ASSIGNMENTS= (XYA)\n(43, 5, <a>", "not closed"),
        ("##PEAK ASSIGNMENTS= (XYA)\n(43, 5, <a)", "not closed"),
        ("##PEAK ASSIGNMENTS= (XYA)\n(43, 5, a)", "not written as <text>"),
        ("##PEAK ASSIGNMENTS= (XYA)\n(43, <a>)", "fields of (XYA)"),
        ("##PEAK ASSIGNMENTS= (XYA)\n(43, 5, 6, <a>)", "fields of (XYA)"),
        ("##PEAK ASSIGNMENTS= (XYA)\n(43, 5, < >)", "0 characters"),
        ("##PEAK ASSIGNMENTS= (XYA)\n(0, 5, <a>)", "m/z '0' is not possible"),
        ("##PEAK ASSIGNMENTS= (XYA)\n(, 5, <a>)", "m/z '' is not possible"),
        ("##PEAK ASSIGNMENTS= (XYA)\n(nan, 5, <a>)", "not a finite number"),
        ("##PEAK ASSIGNMENTS= (XYA)\n(43, -5, <a>)", "negative"),
        ("##PEAK ASSIGNMENTS= (YX)\n(43, 5, <a>)", "form '(YX)'"),
        ("##PEAK ASSIGNMENTS=\n(43, 5, <a>)", "does not say the form"),
        ("##NPOINTS= 2\n##PEAK ASSIGNMENTS= (XYA)\n(43, 5, <a>)", "NPOINTS says '2'"),
        ("##PEAK ASSIGNMENTS= (XYA)\n" * 2, "twice"),
        ("", "no PEAK ASSIGNMENTS"),
        ("##PEAK ASSIGNMENTS= (XYA)\n(43, 5, <" + "a" * 3000 + ">)", "3000 characters"),
        ("##PEAK ASSIGNMENTS= (XYA)\n(43, 5, <" + "a\n" * 9000, "has no end"),
        ("##PEAK ASSIGNMENTS= (XYA)\n" + " " * 200_000 + "(", "characters is not read"),
        ("##PEAK ASSIGNMENTS= (XYA)\n" + "(43,1,<a>)\n" * 20_001, "more than 20000"),
    ],
)
def test_a_malformed_assignment_is_refused(table: str, words: str) -> None:
    assert words in refusal(linked(with_id(1), assignments(table))).reason


def test_an_assignment_without_a_peak_is_remarked_and_kept() -> None:
    source = read(linked(with_id(1), assignments("##PEAK ASSIGNMENTS= (XYA)\n(58, 1, <a>)\n(57.4, 1, <b>)")))[0]
    assert [claim.mz for claim in source.assignments] == [58, 57.4]
    assert source.notes == ("m/z 58 carries an assignment but is no peak of the table",)


def test_assignments_of_another_kind_of_spectrum_are_left_out() -> None:
    other = assignments(TWO).replace("MASS SPECTRUM\n", "NMR PEAK ASSIGNMENTS\n", 1)
    source = read(linked(with_id(1), other))[0]
    assert source.assignments == ()
    assert any("NMR PEAK ASSIGNMENTS" in note for note in source.notes)


# series

LISTS = """##NTUPLES= MASS SPECTRUM
##VAR_NAME= MASS, INTENSITY, RETENTION TIME,
##SYMBOL= X, Y, T
##VAR_TYPE= INDEPENDENT, DEPENDENT, INDEPENDENT
##VAR_FORM= AFFN, AFFN, AFFN
##VAR_DIM= , , 2
##UNITS= M/Z, RELATIVE ABUNDANCE, SECONDS
##FIRST= , , 272
"""
PAGES = """##PAGE= T= 272
##NPOINTS= 2
##DATA TABLE= (XY..XY), PEAKS
43, 100; 57, 80
##PAGE= T= 301.5 $$ second
##NPOINTS= 1
##DATA TABLE= (XY..XY), PEAKS
94 1
##END NTUPLES= MASS SPECTRUM
"""


def series(lists: str = LISTS, pages: str = PAGES) -> str:
    return HEAD + "##DATA CLASS= NTUPLES\n" + lists + pages + END


def test_a_page_is_a_spectrum_with_its_retention_time() -> None:
    first, second = read(series())
    assert (first.index, second.index) == (1, 2)
    assert [s.spectrum.measurement.retention_time_s for s in (first, second)] == [272.0, 301.5]
    assert [s.spectrum.measurement.ionisation for s in (first, second)] == ["EI", "EI"]
    assert first.spectrum.mz.tolist() == [43, 57]
    assert second.spectrum.mz.tolist() == [94]
    assert (first.notes, second.notes) == ((), ())
    assert second.spectrum.raw_fields["PAGE"] == "T= 301.5"
    assert "second" in second.spectrum.raw_fields.values()
    assert "second" not in first.spectrum.raw_fields.values()


def test_pages_in_minutes_are_converted() -> None:
    spectra = read(series(LISTS.replace("SECONDS", "MINUTES"), PAGES.replace("272", "5.3")))
    assert spectra[0].spectrum.measurement.retention_time_s == 318.0


def test_factors_of_the_lists_scale_their_variables() -> None:
    spectra = read(series(LISTS + "##FACTOR= 0.1, 10, 2\n", PAGES.replace("43, 100; 57, 80", "430, 10; 570, 8")))
    assert spectra[0].spectrum.mz.tolist() == [43, 57]
    assert spectra[0].spectrum.intensity.tolist() == [100, 80]
    assert spectra[0].spectrum.measurement.retention_time_s == 544.0


@pytest.mark.parametrize(
    ("lists", "pages", "words"),
    [
        (LISTS.replace(", SECONDS", ","), PAGES, "its unit is not given"),
        (LISTS.replace("SECONDS", "FORTNIGHTS"), PAGES, "'fortnights' is not read"),
        (LISTS, PAGES.replace("T= 272", "T= late"), "was not used"),
        (LISTS, PAGES.replace("T= 272", "Q= 272"), "no variable"),
        (LISTS, PAGES.replace("T= 272", "first"), "was not understood"),
    ],
)
def test_a_time_that_is_not_certain_is_remarked_and_not_used(lists: str, pages: str, words: str) -> None:
    source = read(series(lists, pages))[0]
    assert source.spectrum.measurement.retention_time_s is None
    assert any(words in note for note in source.notes)


def test_the_retention_time_label_of_a_page_comes_first() -> None:
    pages = PAGES.replace("##PAGE= T= 272\n", "##PAGE= T= 272\n##.RETENTION TIME= 273\n")
    assert read(series(pages=pages))[0].spectrum.measurement.retention_time_s == 273.0


def test_a_page_may_be_numbered_besides() -> None:
    lists = LISTS.replace("X, Y, T", "X, Y, N, T").replace("INTENSITY, RET", "INTENSITY, SCAN NUMBER, RET")
    lists = lists.replace("ABUNDANCE, SEC", "ABUNDANCE, , SEC").replace(", , 272", "").replace(", , 2\n", "\n")
    pages = PAGES.replace("T= 272", "N= 7, T= 272")
    assert read(series(lists, pages))[0].spectrum.measurement.retention_time_s == 272.0


@pytest.mark.parametrize(
    ("lists", "pages", "words"),
    [
        (LISTS, "##END NTUPLES= MASS SPECTRUM\n", "holds no page"),
        (LISTS, PAGES.replace("##END NTUPLES= MASS SPECTRUM\n", ""), "no ##END NTUPLES="),
        (LISTS.replace("##SYMBOL= X, Y, T\n", ""), PAGES, "does not name its variables"),
        (LISTS.replace("X, Y, T", "X, X, T"), PAGES, "does not name its variables"),
        (LISTS.replace("X, Y, T", "X, , T"), PAGES, "does not name its variables"),
        (LISTS.replace("X, Y, T", "A, B, T"), PAGES, "where X and Y are expected"),
        (LISTS.replace("X, Y, T", "X, Q\n#, T"), PAGES, "'X, Q\\n#, T'"),
        (LISTS.replace("AFFN, AFFN, AFFN", "AFFN, AFFN, AFFN, AFFN"), PAGES, "more items than ##SYMBOL="),
        (LISTS.replace("M/Z", "SECONDS"), PAGES, "not m/z"),
        (LISTS, PAGES.replace("= 2\n", "= 3\n"), "NPOINTS says 3"),
        (LISTS, PAGES.replace(", PEAKS", ", PROFILE"), "profile"),
        (LISTS, PAGES.replace("##DATA TABLE= (XY..XY), PEAKS\n43, 100; 57, 80\n", ""), "no peak table"),
    ],
)
def test_a_malformed_series_is_refused(lists: str, pages: str, words: str) -> None:
    assert words in refusal(series(lists, pages)).reason


def test_a_series_may_be_linked_and_inherits() -> None:
    spectra = read(linked(series(), PLAIN, labels="##CAS NAME= n\n"))
    assert [source.names for source in spectra] == [("n",)] * 3


def test_too_many_pages_are_refused() -> None:
    page = "##PAGE= T= 1\n##DATA TABLE= (XY..XY)\n43 1\n"
    assert "20001 pages" in refusal(series(pages=page * 20_001 + "##END NTUPLES=\n")).reason
