"""JCAMP-DX: nothing is invented about the ionisation, and what is no 70 eV EI is kept apart."""

from __future__ import annotations

import pytest

from speclib.formats.reading import read_spectra_from_bytes
from speclib.model.spectrum import SourceSpectrum

TABLE = "##NPOINTS= 2\n##PEAK TABLE= (XY..XY)\n43 100\n57 80\n"
APART = "it must not be mixed with 70 eV EI references"


def read(labels: str = "", title: str = "a") -> SourceSpectrum:
    text = f"##TITLE= {title}\n##DATA TYPE= MASS SPECTRUM\n{labels}{TABLE}##END=\n"
    return read_spectra_from_bytes("ms.jdx", text.encode()).spectra[0]


def test_an_ionisation_that_is_not_stated_is_remarked() -> None:
    source = read()
    assert source.spectrum.measurement.known() == {}
    assert source.notes == ("the ionisation is not stated; that it is EI at 70 eV was not assumed",)


@pytest.mark.parametrize("label", ["SAMPLE_DESCRIPTION= methane CI run", "$NOTE= x\n$$ chemical ionization"])
def test_words_that_speak_of_chemical_ionisation_are_quoted(label: str) -> None:
    source = read(f"##{label}\n")
    assert source.spectrum.measurement.ionisation is None
    assert "speaks of chemical ionisation" in source.notes[0]
    assert APART in source.notes[0]


@pytest.mark.parametrize("title", ["CIS-2-butene", "acid", "ci", "SPECIAL"])
def test_other_words_are_not_taken_for_it(title: str) -> None:
    speaks = "speaks of" in read(title=title).notes[0]
    assert speaks is (title == "ci")


@pytest.mark.parametrize(
    ("mode", "kept", "words"),
    [
        ("CI+", "CI", "chemical ionisation"),
        ("CI", "CI", "chemical ionisation"),
        ("CI-", "CI-", "chemical ionisation, negative ions"),
        ("EI-", "EI-", "negative ions"),
        ("ei (-)", "EI-", "negative ions"),
        ("EI negative", "EI-", "negative ions"),
    ],
)
def test_other_than_positive_ei_is_kept_with_a_remark(mode: str, kept: str, words: str) -> None:
    source = read(f"##.IONIZATION MODE= {mode}\n")
    assert source.spectrum.measurement.ionisation == kept
    assert source.notes == (f"this is {words}: {APART}",)


@pytest.mark.parametrize(("energy", "remarked"), [("12", True), ("29.9 eV", True), ("30", False), ("70", False)])
def test_a_low_electron_energy_is_kept_with_a_remark(energy: str, remarked: bool) -> None:
    source = read(f"##.IONIZATION MODE= EI+\n##.IONIZATION ENERGY= {energy}\n")
    assert source.spectrum.measurement.electron_energy_ev == float(energy.split()[0])
    assert any(APART in note for note in source.notes) is remarked


@pytest.mark.parametrize(
    ("labels", "title", "quoted", "line"),
    [
        ("", "ethanol (70 eV EI)", "70 eV", 1),
        ("$$ at 20eV\n", "a", "20eV", 4),
        ("##INSTRUMENTAL PARAMETERS= 11.2 EV, low resolution\n", "a", "11.2 EV", 4),
    ],
)
def test_an_energy_in_words_is_quoted_and_not_taken_over(labels: str, title: str, quoted: str, line: int) -> None:
    source = read("##.IONIZATION MODE= EI+\n" + labels, title)
    assert source.spectrum.measurement.electron_energy_ev is None
    (note,) = source.notes
    assert f"electron energy of {quoted} stands only in the text" in note
    assert f"(line {line})" in note
    assert (APART in note) is (quoted != "70 eV")


def test_an_energy_in_words_beside_a_stated_one_is_no_matter() -> None:
    assert read("##.IONIZATION MODE= EI+\n##.IONIZATION ENERGY= 70\n$$ 70 eV\n").notes == ()


def test_keV_is_no_electron_energy() -> None:  # noqa: N802 - the unit
    assert read("##.IONIZATION MODE= EI+\n$$ 5 keV, 8 devices\n").notes == ()
