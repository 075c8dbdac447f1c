"""How often a wrong whole number goes unreported, on seeded mixtures of known composition.

Molecules of nine families give random sub-formulas with their isotopologues; peaks on the same whole number merge;
every spectrum has one calibration offset within +-0.1 and centroid noise of 0.03 (standard deviation).

Measured on 1020 spectra (60 of each make-up below, 120 thousand peaks, seed 1):
one line alone: 3.9 % of peaks wrong, 2.1 % wrong and not reported; 63 % of the spectra of a brominated compound on
hydrocarbon background held one; with the defects that are possible and that the spectrum shows: 2.2 % wrong,
0.008 % wrong and not reported, in 2 spectra. Right but reported, of a substance alone: alkanes 1.3 %, esters 2.6 %
(ions above a gap of 100), brominated 0.25 %, TMS 0.3 %, others none; 41 % of the peaks of a brominated compound on a
hydrocarbon background of similar height, where m/z above 330 fit either; 13 % over all.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from numpy.typing import NDArray

from speclib.chemistry.elements import ELEMENTS
from speclib.chemistry.formula import Formula, parse_formula
from speclib.chemistry.unit_mass import assign_unit_masses

FAMILIES: dict[str, tuple[str, ...]] = {
    "alkane": tuple(f"C{n}H{2 * n + 2}" for n in (12, 16, 20, 24, 28, 32, 36, 40, 44, 48, 52, 56)),
    "ester": ("C17H34O2", "C24H38O4", "C27H54O2", "C57H104O6", "C20H30O4", "C35H62O3"),
    "aromatic": ("C16H10", "C20H12", "C24H12", "C18H14", "C15H12O2"),
    "siloxane": tuple(f"C{2 * n}H{6 * n}O{n}Si{n}" for n in (4, 5, 6, 7, 8)),
    "tms": ("C21H52O6Si5", "C24H62O7Si6", "C12H28OSi", "C18H41NO7Si5", "C30H54OSi"),
    "bromo": (
        *("C12H5Br5O", "C12H6Br4O", "C12H4Br6O", "C12H3Br7O", "C6Br6", "C6H3Br3O", "CBr4", "C15H12Br4O2"),
        *("C12H18Br6", "C12Br10O", "C14H4Br10", "C8H5Br5", "C7H3Br5", "C13H8Br4O", "C9H6Br6O"),
    ),
    "chloro": ("C12Cl10", "C12H4Cl6", "C6Cl6", "C14H9Cl5", "C10H5Cl7", "C12H3Cl7"),
    "iodo": ("CHI3", "C6H3I3O", "C6H4I2", "C7H3I3O2"),
    "fluoro": ("C12F27N", "C18H5F10P", "C8HF17", "C10HF19O2"),
}
ALONE = [(family,) for family in FAMILIES]
MIXED = [
    ("bromo", "alkane"),
    ("bromo", "siloxane"),
    ("bromo", "alkane", "siloxane"),
    ("chloro", "alkane"),
    ("iodo", "alkane"),
    ("fluoro", "alkane"),
    ("ester", "siloxane"),
]
NOISE, LARGEST_OFFSET = 0.03, 0.1


@dataclass(frozen=True)
class Made:
    """A spectrum with the truth about it; `of_first` marks peaks of the first substance."""

    mz: NDArray[np.float64]
    intensity: NDArray[np.float64]
    whole: NDArray[np.int64]
    of_first: NDArray[np.bool_]
    first: Formula


def isotopologues(
    formula: Formula, cache: dict[Formula, list[tuple[int, float, float]]]
) -> list[tuple[int, float, float]]:
    """(whole number, mean m/z, share) of the isotopologues above 2 % of the tallest."""
    if formula in cache:
        return cache[formula]
    pattern = {0: (1.0, 0.0)}
    for symbol, count in formula:
        number, mass, abundance = ELEMENTS[symbol].reference
        for _ in range(count):
            grown: dict[int, tuple[float, float]] = {}
            for offset, (share, shift) in pattern.items():
                for n, m, a in ELEMENTS[symbol].isotopes:
                    weight = share * a / abundance
                    if weight >= 1e-5:
                        held, mean = grown.get(offset + n - number, (0.0, 0.0))
                        total = held + weight
                        grown[offset + n - number] = (total, (mean * held + (shift + m - mass) * weight) / total)
            pattern = grown
    top = max(share for share, _ in pattern.values())
    cache[formula] = [
        (formula.nominal_mass + offset, formula.ion_mz() + shift, share / top)
        for offset, (share, shift) in pattern.items()
        if share >= 0.02 * top
    ]
    return cache[formula]


def fragments(rng: np.random.Generator, parent: Formula) -> list[Formula]:
    """The molecule and random parts of it that keep roughly its hydrogen content."""
    wanted = int(rng.integers(15, 60))
    found = [parent]
    for _ in range(20 * wanted):
        share = rng.beta(1.0, 1.3)
        counts = {
            symbol: round(count * float(np.clip(share + rng.normal(0.0, 0.2), 0.0, 1.0)))
            for symbol, count in parent
            if symbol != "H"
        }
        hydrogens = parent["H"] * counts.get("C", 0) / max(parent["C"], 1) + rng.integers(-3, 2)
        counts["H"] = int(np.clip(round(hydrogens), 0, parent["H"]))
        part = Formula.of(counts)
        if part.nominal_mass >= 29 and -0.5 <= part.rdbe <= parent.rdbe + 6:
            found.append(part)
        if len(found) == wanted:
            break
    return found


CACHE: dict[Formula, list[tuple[int, float, float]]] = {}


def make(
    rng: np.random.Generator, families: tuple[str, ...], background: tuple[float, ...] = (0.05, 0.2, 0.6, 1.5)
) -> Made:
    """Mix one molecule of each family; all but the first at a height drawn from `background`."""
    sums: dict[int, list[float]] = {}
    first = parse_formula(str(rng.choice(FAMILIES[families[0]])))
    for position, family in enumerate(families):
        molecule = parse_formula(str(rng.choice(FAMILIES[family]))) if position else first
        scale = float(rng.choice(background)) if position else 1.0
        for part in fragments(rng, molecule):
            height = scale * (rng.exponential(1.0) + 0.05)
            for number, centre, share in isotopologues(part, CACHE):
                held = sums.setdefault(number, [0.0, 0.0, 0.0])
                held[0] += height * share
                held[1] += height * share * centre
                held[2] += 0.0 if position else height * share
    top = max(held[0] for held in sums.values())
    rows = sorted((number, *held) for number, held in sums.items() if held[0] >= 0.002 * top)
    whole = np.array([row[0] for row in rows], dtype=np.int64)
    intensity = np.array([row[1] for row in rows])
    offset = rng.uniform(-LARGEST_OFFSET, LARGEST_OFFSET)
    mz = np.array([row[2] / row[1] for row in rows]) + offset + rng.normal(0.0, NOISE, len(rows))
    mz = np.round(mz, 2)
    of_first = np.array([row[3] > 0.9 * row[1] for row in rows])
    order = np.argsort(mz, kind="stable")
    order = order[np.concatenate([[True], np.diff(mz[order]) > 0])]
    return Made(mz[order], intensity[order], whole[order], of_first[order], first)


def count(spectra: list[Made]) -> tuple[int, int, int, int]:
    """Peaks; wrong; wrong and not reported; right but reported."""
    peaks = wrong = silent = needless = 0
    for made in spectra:
        found = assign_unit_masses(made.mz, made.intensity)
        bad = found.unit_mz != made.whole
        reported = np.zeros(len(bad), dtype=bool)
        reported[list(found.doubtful)] = True
        peaks += len(bad)
        wrong += int(bad.sum())
        silent += int((bad & ~reported).sum())
        needless += int((~bad & reported).sum())
    return peaks, wrong, silent, needless


@pytest.mark.parametrize("families", ALONE, ids="+".join)
def test_a_substance_alone_is_right_and_hardly_ever_reported(families: tuple[str, ...]) -> None:
    rng = np.random.default_rng(2)
    peaks, wrong, _, needless = count([make(rng, families) for _ in range(8)])
    assert wrong == 0
    assert needless <= 0.05 * peaks


@pytest.mark.parametrize("families", MIXED, ids="+".join)
def test_a_wrong_whole_number_in_a_mixture_is_reported(families: tuple[str, ...]) -> None:
    rng = np.random.default_rng(3)
    peaks, _, silent, _ = count([make(rng, families) for _ in range(8)])
    # Measured over all: 0.008 %; the worst make-up, chlorinated on hydrocarbons, 0.085 %.
    assert silent <= 0.002 * peaks


def test_over_any_three_families_wrong_numbers_are_rare_and_reported() -> None:
    rng = np.random.default_rng(4)
    spectra = [make(rng, tuple(rng.choice(list(FAMILIES), 3, replace=False).tolist())) for _ in range(30)]
    peaks, wrong, silent, _ = count(spectra)
    assert wrong <= 0.05 * peaks
    assert silent <= 0.0005 * peaks


@pytest.mark.parametrize("family", ["bromo", "chloro", "iodo"])
def test_light_siloxane_bleed_leaves_a_halogenated_compound_right(family: str) -> None:
    rng = np.random.default_rng(5)
    peaks, wrong, silent, _ = count([make(rng, (family, "siloxane"), background=(0.02, 0.05)) for _ in range(8)])
    assert wrong <= 0.001 * peaks
    assert silent == 0


@pytest.mark.parametrize("background", ["alkane", "siloxane"])
@pytest.mark.parametrize("family", ["bromo", "iodo", "tms", "ester"])
def test_with_its_formula_known_the_ions_of_a_compound_are_right_on_any_background(
    family: str, background: str
) -> None:
    # The formula is believed for background ions too where it offers one number: about 1 % of all peaks of
    # brominated compounds on alkanes are settled wrongly that way, none of them an ion of the compound.
    rng = np.random.default_rng(6)
    peaks = wrong = 0
    for _ in range(10):
        made = make(rng, (family, background), background=(0.05, 0.2))
        found = assign_unit_masses(made.mz, made.intensity, made.first)
        reported = np.zeros(len(made.mz), dtype=bool)
        reported[list(found.doubtful)] = True
        peaks += int(made.of_first.sum())
        wrong += int(((found.unit_mz != made.whole) & made.of_first & ~reported).sum())
    assert wrong <= 0.001 * peaks
