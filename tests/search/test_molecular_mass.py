"""The highest plausible cluster as molecular mass. Spectra: typical principal peaks at 70 eV, from memory."""

from __future__ import annotations

import numpy as np
import pytest

from speclib.search.molecular_mass import highest_plausible_cluster

TABLE = {
    "toluene": ({39: 15, 51: 8, 63: 7, 65: 12, 91: 100, 92: 70, 93: 5}, 92),
    "chlorobenzene": ({50: 10, 51: 12, 77: 55, 112: 100, 113: 7, 114: 32}, 112),
    "bromobenzene": ({50: 15, 51: 20, 77: 100, 156: 75, 158: 73}, 156),
    "2-hexanone": ({29: 15, 43: 100, 57: 17, 58: 55, 85: 7, 100: 8}, 100),
    "tetrachloroethene": ({94: 50, 129: 75, 131: 72, 133: 23, 164: 80, 166: 100, 168: 48, 170: 10}, 164),
    "2,4,6-tribromophenol": ({62: 40, 141: 25, 143: 24, 328: 34, 330: 100, 332: 98, 334: 32}, 328),
    "naphthalene": ({51: 10, 64: 10, 102: 8, 127: 13, 128: 100, 129: 11}, 128),
}


@pytest.mark.parametrize("name", TABLE)
def test_the_molecular_ion_is_found_below_its_isotopes(name: str) -> None:
    peaks, mass = TABLE[name]
    mz = np.array(sorted(peaks), dtype=float)
    found = highest_plausible_cluster(mz, np.array([peaks[int(m)] for m in mz], dtype=float))
    assert found.value == mass


def test_silicon_satellites_are_not_taken_for_the_molecular_ion() -> None:
    # octamethylcyclotetrasiloxane: the highest ion is [M-CH3]+, 281; pattern of C7H21O4Si4 (IUPAC 2013 abundances)
    found = highest_plausible_cluster(np.array([73.0, 281.0, 282.0, 283.0]), np.array([17.0, 100.0, 28.3, 18.6]))
    assert found.value == 281
    assert "odd" in found.origin


def test_a_highest_cluster_that_loses_fourteen_is_no_molecular_ion_and_nothing_is_invented() -> None:
    found = highest_plausible_cluster(np.array([43.0, 86.0, 100.0]), np.array([100.0, 50.0, 5.0]))
    assert found.value is None
    assert "m/z 86 would be a loss of 14" in found.origin
