"""Whole numbers for measured unit-resolution m/z: single substances, offsets, formula. Mixtures: `tests/properties`."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
import pytest
from numpy.typing import NDArray

from speclib.chemistry.elements import ELECTRON_MASS, ELEMENTS
from speclib.chemistry.formula import Formula, parse_formula
from speclib.chemistry.unit_mass import MOST_PEAKS_FITTED, assign_unit_masses

Floats = NDArray[np.float64]
OFFSETS = [-0.1, 0.0, 0.1]

ALKANES = {f"C{n}H{2 * n + 2}": [f"C{m}H{2 * m + 1}" for m in range(3, n - 1)] for n in (8, 20, 30, 40, 48, 56, 70)}
SUBSTANCES: dict[str, list[str]] = {
    **ALKANES,
    "C6H3Br3O": ["C5H3Br3", "C5H2Br2", "C6H2BrO", "C5H2Br", "C5H3", "C3H2", "C4H2O", "C5H2O"],
    "CBr4": ["CBr3", "CBr2", "CBr", "Br"],
    "C12H5Br5O": ["C12H5Br3O", "C11H5Br2", "C12H5BrO", "C6H3Br2O", "C6H3BrO", "C11H5", "C6H3O", "C5H3"],
    "C12Br10O": ["C12Br8O", "C12Br6O", "C11Br5", "C6Br5O", "C6Br3", "C6Br2", "C6Br", "C5Br"],
    "C6Br6": ["C6Br5", "C6Br4", "C6Br3", "C6Br2", "C6Br", "C5Br", "C6"],
    "CHI3": ["CHI2", "CHI", "I", "CI"],
    "C12Cl10": ["C12Cl8", "C12Cl6", "C12Cl4", "C11Cl5", "C6Cl3", "C5Cl2"],
    "C24H38O4": ["C16H23O4", "C8H7O4", "C8H5O3", "C8H17", "C8H16", "C5H11", "C4H9", "C3H7"],
    "C10H30O5Si5": ["C9H27O5Si5", "C7H21O4Si4", "C5H15O3Si3", "C5H15OSi2", "C3H9Si", "C2H7OSi"],
    "C12F27N": ["C12F26N", "C9F20N", "C8F16N", "C5F10N", "C4F9", "C3F5", "C2F4", "CF3"],
    "C18H5F10P": ["C12H5F5P", "C12F10P", "C12H5F5", "C6F5", "C6H5", "C4H3"],
}


def clusters(formulas: Iterable[str]) -> tuple[Floats, Floats, NDArray[np.int64]]:
    """m/z, intensity and whole number of ions with their Cl and Br isotopologues; the heaviest ion is the smallest."""
    heights: dict[int, tuple[float, float]] = {}
    for i, text in enumerate(formulas):
        formula = parse_formula(text)
        for halogen, share, step in (("Br", 0.9728, 1.99795), ("Cl", 0.32, 1.99705)):
            if formula[halogen]:
                row = np.array([1.0])
                for _ in range(formula[halogen]):
                    row = np.convolve(row, [1.0, share])
                shares, mass_step = row / row.max(), step
                break
        else:
            shares, mass_step = np.array([1.0]), 0.0
        for k, relative in enumerate(shares):
            heights[formula.nominal_mass + 2 * k] = (
                formula.ion_mz() + mass_step * k,
                float(relative) * (10.0 + 90.0 / (1 + i)),
            )
    whole = np.array(sorted(heights), dtype=np.int64)
    mz = np.array([heights[int(n)][0] for n in whole])
    return mz, np.array([heights[int(n)][1] for n in whole]), whole


@pytest.mark.parametrize("offset", OFFSETS)
@pytest.mark.parametrize("substance", SUBSTANCES)
def test_one_substance_is_right_whatever_the_calibration_offset(substance: str, offset: float) -> None:
    mz, intensity, whole = clusters([substance, *SUBSTANCES[substance]])
    for seed in range(5):
        noise = np.random.default_rng(seed).normal(0.0, 0.03, len(mz))
        measured = np.round(mz + offset + noise, 2)
        found = assign_unit_masses(measured, intensity)
        assert found.unit_mz.tolist() == whole.tolist()
        assert found.unit_mz.dtype == np.int64
        assert len(found.doubtful) <= 0.05 * len(mz)


@pytest.mark.parametrize(
    ("formula", "written", "nominal"),
    [
        ("C40H82", 562.64, 562),
        ("C56H114", 786.89, 786),
        ("C6H3Br3O", 327.77, 328),
        ("CBr4", 327.673, 328),
        ("C12H5Br5O", 559.626, 560),
        ("C6Br6", 545.51, 546),
        ("CHI3", 393.72, 394),
    ],
)
@pytest.mark.parametrize("known", [False, True], ids=["formula unknown", "formula known"])
def test_molecular_ions_that_no_fixed_rounding_puts_right(
    formula: str, written: float, nominal: int, known: bool
) -> None:
    mz, intensity, _ = clusters([formula, *SUBSTANCES[formula]])
    measured = np.round(mz, 2)
    position = int(np.argmin(np.abs(measured - written)))
    assert measured[position] == pytest.approx(written, abs=0.011)
    found = assign_unit_masses(measured, intensity, parse_formula(formula) if known else None)
    assert found.unit_mz[position] == nominal
    assert position not in found.doubtful


def test_whole_mz_are_left_alone_even_against_the_formula() -> None:
    mz = np.array([43.0, 57.0, 563.0])
    found = assign_unit_masses(mz, np.ones(3), parse_formula("C40H82"))
    assert found.unit_mz.tolist() == [43, 57, 563]
    assert (found.slope, found.intercept, found.doubtful, found.by_formula) == (0.0, 0.0, (), ())


def test_whole_mz_with_the_last_bits_wrong_are_whole() -> None:
    found = assign_unit_masses(np.array([43.0000001, 56.9999999]), np.ones(2))
    assert found.unit_mz.tolist() == [43, 57]


@pytest.mark.parametrize("offset", OFFSETS)
def test_a_known_formula_decides_what_the_line_leaves_in_doubt(offset: float) -> None:
    # One ion of a polybrominated molecule far from a hydrocarbon-like rest.
    ions = ["C12H5Br5O", *ALKANES["C30H62"]]
    mz, intensity, whole = clusters(ions)
    mz = mz + offset
    blind = assign_unit_masses(mz, intensity)
    top = int(np.flatnonzero(whole == 560)[0])
    informed = assign_unit_masses(mz, intensity, parse_formula("C12H5Br5O"))
    assert blind.unit_mz[top] == 560 or top in blind.doubtful
    assert informed.unit_mz[top] == 560
    assert top not in informed.doubtful
    if blind.unit_mz[top] != 560 or top in blind.doubtful:
        assert top in informed.by_formula


def test_a_peak_between_two_whole_numbers_is_doubtful() -> None:
    mz = np.array([41.03, 43.05, 57.06, 71.08, 99.55, 113.12, 127.14])
    found = assign_unit_masses(mz, np.array([30.0, 100, 80, 50, 5, 10, 5]))
    assert found.doubtful == (4,)
    assert np.delete(found.unit_mz, 4).tolist() == [41, 43, 57, 71, 113, 127]


def test_siloxane_background_does_not_move_a_brominated_ion_unnoticed() -> None:
    mz, intensity, whole = clusters(["C12H5Br5O", *SUBSTANCES["C12H5Br5O"], "C5H15OSi2", "C5H15O3Si3", "C7H21O4Si4"])
    found = assign_unit_masses(np.round(mz, 2), intensity)
    assert found.unit_mz.tolist() == whole.tolist()


@pytest.mark.parametrize("mz", [[0.4], [17.03], [149.02], [562.64], [9999.5]])
def test_one_peak_gets_a_number(mz: list[float]) -> None:
    found = assign_unit_masses(np.array(mz), np.array([1.0]))
    assert abs(float(found.unit_mz[0]) - mz[0]) <= 1.0


def test_peaks_without_intensity_do_not_disturb_the_fit() -> None:
    mz, intensity, whole = clusters(["C30H62", *ALKANES["C30H62"]])
    intensity = np.where(whole < 150, 0.0, intensity)
    assert assign_unit_masses(mz, intensity).unit_mz.tolist() == whole.tolist()


def test_the_result_does_not_depend_on_the_scale_of_intensity() -> None:
    mz, intensity, _ = clusters(["C12H5Br5O", *SUBSTANCES["C12H5Br5O"], *ALKANES["C30H62"]])
    first = assign_unit_masses(mz, intensity)
    for factor in (1e-290, 1e290):
        again = assign_unit_masses(mz, intensity * factor)
        assert again.unit_mz.tolist() == first.unit_mz.tolist()
        assert again.doubtful == first.doubtful


def test_a_very_long_peak_list_is_fitted_on_its_tallest_peaks() -> None:
    mz, intensity, whole = clusters(["C40H82", *ALKANES["C40H82"]])
    crowd = np.setdiff1d(np.round(np.linspace(30.3, 700.2, 3 * MOST_PEAKS_FITTED), 3), mz)
    together = np.concatenate([mz, crowd])
    order = np.argsort(together)
    heights = np.concatenate([intensity, np.full(len(crowd), 1e-6)])[order]
    found = assign_unit_masses(together[order], heights)
    positions = np.searchsorted(together[order], mz)
    assert found.unit_mz[positions].tolist() == whole.tolist()


def test_the_input_is_not_changed() -> None:
    mz, intensity, _ = clusters(["C6Br6", *SUBSTANCES["C6Br6"]])
    before = mz.copy(), intensity.copy()
    assign_unit_masses(mz, intensity, parse_formula("C6Br6"))
    assert np.array_equal(mz, before[0])
    assert np.array_equal(intensity, before[1])


def test_the_test_spectra_step_like_isotopes() -> None:
    for symbol, step in (("Br", 1.99795), ("Cl", 1.99705)):
        (_, light, _), (_, heavy, _) = ELEMENTS[symbol].isotopes
        assert heavy - light == pytest.approx(step, abs=1e-5)
    assert Formula.of({"C": 6, "Br": 6}).ion_mz() == pytest.approx(545.51 - ELECTRON_MASS, abs=0.001)
