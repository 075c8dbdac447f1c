"""Assignments by hand are checked before they are recorded."""

from __future__ import annotations

import pytest

from speclib.annotation.manual import check_manual_assignment, find_peak
from speclib.chemistry.formula import parse_formula
from speclib.errors import InvalidFormulaError, InvalidValueError
from speclib.model.assignment import Parity
from speclib.model.spectrum import MassAccuracy, Spectrum
from speclib.search.rows import Comparable

ACETONE = Comparable(Spectrum.of([15, 43, 58], [20, 100, 40]), parse_formula("C3H6O"), 58)


def test_the_loss_follows_from_the_formula() -> None:
    found = check_manual_assignment(ACETONE, mz=43, formula="C2H3O+", neutral_loss=None, mechanism="alpha-cleavage")
    assert (found.peak, str(found.neutral_loss), found.parity) == (1, "CH3", Parity.EE)


def test_the_molecular_ion_loses_nothing() -> None:
    found = check_manual_assignment(ACETONE, mz=58, formula="C3H6O+.", neutral_loss="", mechanism="molecular ion")
    assert (str(found.neutral_loss), found.parity) == ("", Parity.OE)


@pytest.mark.parametrize(
    ("mz", "formula", "loss", "words"),
    [
        (44, "C2H4O", None, "no peak at m/z 44"),
        (43, "C2H4O", None, "nominal m/z 44, but the peak lies at 43"),
        (43, "C3H7", None, "not part of the molecule"),
        (43, "C2H3O", "CH4", "do not add up"),
        (43, "CHNO", None, "not part of the molecule"),
        (float("nan"), "C2H3O", None, "not a number"),
    ],
)
def test_what_does_not_fit_is_said(mz: float, formula: str, loss: str | None, words: str) -> None:
    with pytest.raises(InvalidValueError, match=words):
        check_manual_assignment(ACETONE, mz=mz, formula=formula, neutral_loss=loss, mechanism="alpha-cleavage")


def test_an_ion_without_room_for_its_hydrogens_is_refused() -> None:
    target = Comparable(Spectrum.of([24], [1]), parse_formula("CH12"), 24)
    with pytest.raises(InvalidFormulaError, match="too many hydrogens"):
        check_manual_assignment(target, mz=24, formula="CH12", neutral_loss=None, mechanism="x")


def test_a_mechanism_is_required() -> None:
    with pytest.raises(InvalidValueError, match="no mechanism"):
        check_manual_assignment(ACETONE, mz=43, formula="C2H3O", neutral_loss=None, mechanism="  ")


def test_a_compound_without_formula_needs_the_loss() -> None:
    target = Comparable(Spectrum.of([43], [1]), None, None)
    with pytest.raises(InvalidValueError, match="give the neutral loss"):
        check_manual_assignment(target, mz=43, formula="C2H3O", neutral_loss=None, mechanism="x")


def test_accurate_peaks_are_found_within_twenty_millidalton_and_checked() -> None:
    target = Comparable(
        Spectrum.of([43.0178, 43.0542], [5, 10], MassAccuracy.ACCURATE), parse_formula("C6H12O"), 100, 100.0888
    )
    assert find_peak(target, 43.053) == 1
    with pytest.raises(InvalidValueError, match="no peak at m/z"):
        find_peak(target, 43.2)
    with pytest.raises(InvalidValueError, match=r"43\.0178"):
        check_manual_assignment(target, mz=43.0542, formula="C2H3O", neutral_loss=None, mechanism="x")


def test_a_unit_mass_peak_is_found_by_its_whole_number() -> None:
    target = Comparable(Spectrum.of([43.1, 57.1, 71.1], [5, 10, 3]), None, None)
    assert find_peak(target, 57) == 1
