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
    "naphthalene": ({51: 10, 64: 10, 102: 8, 127: 13, 128: 100, 129: 11}, 128),
}


@pytest.mark.parametrize("name", TABLE)
def test_the_molecular_ion_is_found_below_its_isotopes(name: str) -> None:
    peaks, mass = TABLE[name]
    mz = np.array(sorted(peaks), dtype=float)
    found = highest_plausible_cluster(mz, np.array([peaks[int(m)] for m in mz], dtype=float))
    assert found.value == mass


def test_a_peak_fourteen_above_a_major_one_is_not_taken() -> None:
    found = highest_plausible_cluster(np.array([43.0, 86.0, 100.0]), np.array([100.0, 50.0, 5.0]))
    assert found.value == 86


def test_no_plausible_cluster_is_said_and_nothing_invented() -> None:
    found = highest_plausible_cluster(np.array([90.0, 100.0, 110.0]), np.array([100.0, 100.0, 100.0]))
    assert found.value in {90, None}
    assert "cluster" in found.origin
