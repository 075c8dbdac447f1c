"""JCAMP-DX mass spectra."""

from __future__ import annotations

from typing import Any

import pytest

from speclib.errors import InputFileError
from speclib.formats.jcamp_records import normalised_label
from speclib.formats.reading import ReadOptions, read_spectra_from_bytes
from speclib.model.spectrum import MassAccuracy, SourceSpectrum

HEAD = "##TITLE= a\n##JCAMP-DX= 5.00\n##DATA TYPE= MASS SPECTRUM\n"
TABLE = "##NPOINTS= 2\n##PEAK TABLE= (XY..XY)\n43 100\n57 80\n"
END = "##END=\n"
EI = "##.IONIZATION MODE= EI+\n"


def read(text: str, **options: Any) -> tuple[SourceSpectrum, ...]:
    return read_spectra_from_bytes("ms.jdx", text.encode(), ReadOptions(**options)).spectra


def with_labels(labels: str) -> SourceSpectrum:
    return read(HEAD + labels + "\n" + TABLE + END)[0]


def peaks(table: str) -> list[tuple[float, float]]:
    spectrum = read(HEAD + table + "\n" + END, mass_accuracy="unit")[0].spectrum
    return list(zip(spectrum.mz.tolist(), spectrum.intensity.tolist(), strict=True))


def refusal(text: str) -> InputFileError:
    with pytest.raises(InputFileError) as caught:
        read(text)
    error = caught.value
    assert str(error).startswith("ms.jdx, line ")
    assert error.advice
    assert str(error).isprintable()
    return error


@pytest.mark.parametrize("name", ["DATA TYPE", "DATA_TYPE", "DATATYPE", "Data Type", "data-type", "DATA/TYPE"])
def test_labels_are_compared_without_blanks_case_and_signs(name: str) -> None:
    assert normalised_label(name) == "DATATYPE"


@pytest.mark.parametrize(
    "table",
    [
        "##NPOINTS= 2\n##PEAK TABLE= (XY..XY)\n43, 100\n57, 80",
        "##NPOINTS= 2\n##PEAKTABLE= (XY..XY)\n43,100 57,80",
        "##NPOINTS= 2\n##PEAk TABLE=(xy..xy)\n43,100;57,80;",
        "##NPOINTS= 2\n##XYPOINTS= (XY..XY)\n43 100; 57\n80",
        "##NPOINTS= 2\n##XYDATA= (XY..XY)\n43;100;57;80",
        "##NPOINTS= 2\n##PEAK TABLE= ( XY .. XY ), PEAKS\n43\n100\n57\n80",
        "##NPOINTS= 2\n##PEAK TABLE= (XY..XY) 43,100\n57,80 $$ done",
        "##NPOINTS= 2\n  ##PEAK TABLE= (XY..XY)\n$$ first\n57,80\n\n43,1.0e+002",
        "##NPOINTS= 2\n##XFACTOR= 0.1\n##YFACTOR= 10\n##PEAK TABLE= (XY..XY)\n430,10 570,8",
        "##NPOINTS= 3\n##PEAK TABLE= (XY..XY)\n0,0\n43,100 57,80",
        "##NPOINTS= 3\n##PEAK TABLE= (XY..XY)\n43,100 50,? 57,80",
        "##NPOINTS= 2\n##PEAK TABLE= (XYW..XYW)\n43,100,0.5; 57,80,0.7",
        "##NPOINTS= 2\n##PEAK TABLE= (XYW..XYW)\n43 100 ?\n57 80 1",
        "##NPOINTS= 2\n##YFACTOR= 1E-003\n##PEAK TABLE= (XY..XY)\n43,1.0e+005 57,8e4",
    ],
)
def test_pairs_are_read_in_any_mix_of_separators(table: str) -> None:
    assert peaks(table) == [(43, 100), (57, 80)]


def test_factors_are_applied_in_decimal_arithmetic() -> None:
    assert peaks("##NPOINTS= 1\n##XFACTOR= 0.1\n##PEAK TABLE= (XY..XY)\n3 5") == [(0.3, 5)]


def test_a_point_at_the_origin_is_left_out_with_a_note() -> None:
    notes = read(HEAD + "##NPOINTS= 2\n##PEAK TABLE= (XY..XY)\n0,0 43,5\n" + END)[0].notes
    assert any("point 0, 0 (line 6)" in note for note in notes)


def test_a_missing_count_is_remarked() -> None:
    assert read(HEAD + EI + "##PEAK TABLE= (XY..XY)\n43 5\n" + END)[0].notes == (
        "NPOINTS is missing: the number of peaks could not be verified",
    )


@pytest.mark.parametrize(
    ("table", "place", "words"),
    [
        ("##NPOINTS= 3\n##PEAK TABLE= (XY..XY)\n43 5\n44 6", 4, "NPOINTS says 3 peaks but the table holds 2"),
        ("##NPOINTS= many\n##PEAK TABLE= (XY..XY)\n43 5", 4, "not a whole number"),
        ("##NPOINTS= 2\n##PEAK TABLE= (XY..XY)\n43,05; 100,0\n57,06; 20,1", 4, "commas seem to mark decimals"),
        ("##PEAK TABLE= (XY..XY)\n43,05; 100,0", 5, "decimals of a decimal comma"),
        ("##NPOINTS= 2\n##PEAK TABLE= (XY..XY)\n43 5\n44", 7, "half a pair"),
        ("##NPOINTS= 2\n##PEAK TABLE= (XY..XY)\n43,5;57;80,6", 6, "half a pair"),
        ("##PEAK TABLE= (XY..XY)\n43,5;57;80,6;90", 4, "between semicolons stands half a pair"),
        ("##NPOINTS= 1\n##PEAK TABLE= (XY..XY)\n43,,5", 6, "a number is missing"),
        ("##NPOINTS= 1\n##PEAK TABLE= (XY..XY)\n?,43", 6, "'?' says that a value is missing"),
        ("##NPOINTS= 1\n##PEAK TABLE= (XY..XY)\n43,?", 5, "no peaks"),
        ("##NPOINTS= 1\n##PEAK TABLE= (XY..XY)\n43 nan", 6, "not a finite number"),
        ("##NPOINTS= 1\n##PEAK TABLE= (XY..XY)\n43 1_0", 6, "not a number"),
        ("##NPOINTS= 1\n##PEAK TABLE= (XY..XY)\n43 -5", 6, "negative"),
        ("##NPOINTS= 1\n##PEAK TABLE= (XY..XY)\n0 5", 6, "must lie above 0"),
        ("##NPOINTS= 2\n##PEAK TABLE= (XY..XY)\n43 5\n43 6", 7, "stands twice, in lines 6 and 7"),
        ("##NPOINTS= 0\n##PEAK TABLE= (XY..XY)", 5, "no peaks"),
        ("##NPOINTS= 1\n##PEAK TABLE=\n43 5", 5, "does not say the form"),
        ("##NPOINTS= 1\n##PEAK TABLE= (XYW..XYW)\n43,5", 6, "half a group of m/z, intensity and width"),
        ("##PEAK TABLE= (XYW..XYW)\n43,5;44,5,1,2", 4, "half a group of m/z"),
        ("##NPOINTS= 1\n##PEAK TABLE= (XYW..XYW)\n43,5,wide", 6, "'wide' is not a number"),
        ("##NPOINTS= 1\n##PEAK TABLE= (XZ..XZ)\n43 5", 5, "the form '(XZ..XZ)'"),
        ("##NPOINTS= 1\n##XFACTOR= 0\n##PEAK TABLE= (XY..XY)\n43 5", 5, "XFACTOR '0' is not a number above 0"),
        ("##NPOINTS= 1\n##PEAK TABLE= (XY..XY)\n43 5\n##XYDATA= (XY..XY)\n43 5", 7, "two tables"),
        ("##NPOINTS= 1", 1, "no peak table"),
        ("##NPOINTS= 1\n##PEAK TABLE= (XY..XY)\n43.0184 5", 6, "4 decimals"),
        ("##XUNITS= SECONDS\n##NPOINTS= 1\n##PEAK TABLE= (XY..XY)\n43 5", 4, "XUNITS is 'SECONDS', not m/z"),
    ],
)
def test_a_bad_table_is_refused_by_its_line(table: str, place: int, words: str) -> None:
    error = refusal(HEAD + table + "\n" + END)
    assert words in error.reason
    assert error.place == f"line {place}"


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (HEAD + TABLE, "has no ##END="),
        (TABLE + END, "stands outside a block"),
        (HEAD + TABLE + END + END, "closes no block"),
        (HEAD + TABLE + END + "##OWNER= a\n", "stands outside a block"),
        (HEAD + TABLE + END + "stray\n", "stands behind ##END="),
        ("stray\n" + HEAD + TABLE + END, "stands before the first labelled record"),
        (HEAD + HEAD + TABLE + END, "begins a block inside that of line 1"),
        (HEAD + "##OWNER nobody\n" + TABLE + END, "has no equals sign"),
        ("##TITLE= a\n##DATA TYPE= LINK\n" * 30, "more than 20 deep"),
        ("##TITLE= a\n" + TABLE + END, "neither DATA TYPE nor XUNITS"),
    ],
)
def test_a_broken_structure_is_refused(text: str, words: str) -> None:
    assert words in refusal(text).reason


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("##TITLE= a\n##DATA TYPE= LINK\n##BLOCKS= 0\n" + END, "0 linked blocks"),
        (HEAD.replace("MASS", "CONTINUOUS MASS") + TABLE + END, "continuous mass spectrum (profile)"),
        (HEAD.replace("MASS", "INFRARED") + TABLE + END, "'INFRARED SPECTRUM'"),
        ("##TITLE= a\n##JCAMP-CS= 3.7\n##ATOMLIST=\n1 C\n" + END, "chemical structure"),
        (HEAD + "##DATA CLASS= ASSIGNMENTS\n##PEAK ASSIGNMENTS= (XYA)\n(43, 5, <a>)\n" + END, "peak assignments"),
    ],
)
def test_what_is_not_read_is_called_by_its_name(text: str, words: str) -> None:
    assert words in refusal(text).reason


@pytest.mark.parametrize(
    ("labels", "field", "value"),
    [
        ("##.IONIZATION MODE= EI+", "ionisation", "EI"),
        ("##.IONISATION MODE= EI", "ionisation", "EI"),
        ("##.Ionization_Mode= ei (+)", "ionisation", "EI"),
        ("##.IONIZATION MODE= CI+", "ionisation", "CI"),
        ("##.IONIZATION ENERGY= 70", "electron_energy_ev", 70.0),
        ("##.IONIZATION ENERGY= 70 eV", "electron_energy_ev", 70.0),
        ("##.RETENTION TIME= 318.5", "retention_time_s", 318.5),
        ("##.RETENTION TIME= 5.3 min", "retention_time_s", 318.0),
        ("##$RETENTION INDEX= 1723", "retention_index", 1723.0),
        ("##.ACQUISITION RANGE= 250, 35.5", "mz_from", 35.5),
        ("##.ACQUISITION RANGE= 250, 35.5", "mz_to", 250.0),
        ("##.SPECTROMETER TYPE= TRAP", "analyser", "TRAP"),
        ("##.INLET= GC", "inlet", "GC"),
        ("##.SOURCE TEMPERATURE= 230", "source_temperature_c", 230.0),
        ("##SPECTROMETER/DATA SYSTEM= Model 1", "instrument", "Model 1"),
    ],
)
def test_a_label_becomes_a_field_and_stays_verbatim(labels: str, field: str, value: Any) -> None:
    spectrum = with_labels(labels).spectrum
    assert spectrum.measurement.known()[field] == value
    name, _, text = labels[2:].partition("=")
    assert spectrum.raw_fields[name] == text.strip()


@pytest.mark.parametrize(("mode", "words"), [("ESI+", "neither"), ("FAB", "neither"), ("EI?", "neither")])
def test_other_ions_are_refused(mode: str, words: str) -> None:
    error = refusal(HEAD + f"##.IONIZATION MODE= {mode}\n" + TABLE + END)
    assert words in error.reason
    assert error.place == "line 4"


def test_nothing_is_taken_from_comments_or_defaults() -> None:
    source = read("$$ EI+, 70 eV\n" + HEAD.replace("= a", "= ethanol 70 eV EI") + "$$ 70 eV\n" + TABLE + END)[0]
    assert source.spectrum.measurement.known() == {}
    assert source.spectrum.raw_fields["$$ line 1"] == "EI+, 70 eV"
    assert source.spectrum.raw_fields["$$ line 5"] == "70 eV"


def test_an_unreadable_value_is_remarked_and_kept() -> None:
    source = with_labels(EI + "##.RETENTION TIME= late")
    assert source.spectrum.measurement.retention_time_s is None
    assert source.spectrum.raw_fields[".RETENTION TIME"] == "late"
    assert source.notes == ("##.RETENTION TIME= 'late' (line 5) was not used: it is not a number",)


def test_a_label_twice_with_two_values_is_refused_but_kept_when_equal() -> None:
    error = refusal(HEAD + "##.INLET= GC\n##.INLET= DIRECT\n" + TABLE + END)
    assert "but line 4 says 'GC'" in error.reason
    assert with_labels("##.INLET= GC\n##.INLET= GC").spectrum.raw_fields[".INLET (line 5)"] == "GC"


@pytest.mark.parametrize("cas", ["0 - 00 - 0", "0-00-0", ""])
def test_an_empty_cas_number_is_none(cas: str) -> None:
    assert with_labels(f"##CAS REGISTRY NO= {cas}").cas is None


def test_claims_are_verbatim() -> None:
    source = with_labels("##MOLFORM= C 3 H 8 O 1\n##CAS REGISTRY NO= 71-23-8\n##$SMILES= CCCO\n##$INCHIKEY= X")
    assert (source.title, source.formula, source.cas) == ("a", "C 3 H 8 O 1", "71-23-8")
    assert (source.smiles, source.inchikey) == ("CCCO", "X")


def test_values_of_several_lines_are_kept_whole() -> None:
    assert with_labels("##OWNER= a\nb\n  c  ").spectrum.raw_fields["OWNER"] == "a\nb\nc"


def test_another_base_peak_than_stated_is_remarked() -> None:
    assert any("says m/z 57" in note for note in with_labels("##.BASE PEAK= 57").notes)
    assert with_labels(EI + "##.BASE PEAK= 43 AMU").notes == ()


def test_blocks_in_a_row_are_spectra_in_order_with_their_own_comments() -> None:
    spectra = read((HEAD + "$$ one\n" + TABLE + "##END= $$ first\n") + HEAD.replace("= a", "= b $$ two") + TABLE + END)
    assert [(s.index, s.title) for s in spectra] == [(1, "a"), (2, "b")]
    assert set(spectra[0].spectrum.raw_fields.values()) >= {"one", "first"}
    assert "two" in spectra[1].spectrum.raw_fields.values()
    assert "two" not in spectra[0].spectrum.raw_fields.values()


def test_a_bad_block_is_refused_by_its_line() -> None:
    error = refusal(HEAD + TABLE + END + HEAD + TABLE.replace("= 2", "= 9") + END)
    assert error.place == "line 12"


def test_mass_accuracy_follows_label_and_option() -> None:
    table = "##NPOINTS= 1\n##PEAK TABLE= (XY..XY)\n43.0184 5\n"
    assert read(HEAD + "##$MASS ACCURACY= accurate\n" + table + END)[0].spectrum.mass_accuracy is MassAccuracy.ACCURATE
    assert read(HEAD + table + END, mass_accuracy="unit")[0].spectrum.mass_accuracy is MassAccuracy.UNIT
    assert "neither unit nor" in refusal(HEAD + "##$MASS ACCURACY= fine\n" + table + END).reason


def test_a_table_of_mz_needs_no_data_type() -> None:
    assert len(read("##TITLE= a\n##XUNITS= m/z\n" + TABLE + END)) == 1


def test_more_peaks_than_a_spectrum_may_have_are_refused() -> None:
    table = "##PEAK TABLE= (XY..XY)\n" + "".join(f"{i} 1\n" for i in range(1, 200_002))
    assert "more than 200000 peaks" in refusal(HEAD + table + END).reason
