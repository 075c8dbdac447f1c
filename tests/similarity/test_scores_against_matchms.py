"""Scores against matchms on seeded random pairs, of unit and of accurate mass.

Intensities are continuous, so that no two products tie: matchms breaks ties by its sort, we by a written rule.
Molecular masses are given to matchms as precursor m/z.
"""

from __future__ import annotations

import random
from typing import Any

import matchms.similarity as reference
import numpy as np
import pytest
from matchms import Spectrum as MatchmsSpectrum

from speclib.similarity.scores import SCORES, Measure, Peaks
from speclib.similarity.weights import WEIGHTINGS, Weighting
from speclib.units import Tolerance

CLASSES: dict[Measure, Any] = {
    Measure.COSINE: reference.CosineGreedy,
    Measure.SHIFTED: reference.ModifiedCosineGreedy,
    Measure.LOSS: reference.NeutralLossesCosine,
}
Rows = list[tuple[float, float]]


def unit_pair(rng: random.Random) -> tuple[Rows, int, Rows, int]:
    """Two peak lists on whole m/z that share some peaks, often a homologous series apart."""
    mass_b = rng.randint(80, 200)
    mass_a = mass_b + rng.choice([-28, -14, -2, 0, 14, 16, 28, 42])
    chosen_b = sorted(rng.sample(range(29, mass_b + 2), rng.randint(3, 30)))
    moved = {m + rng.choice([0, mass_a - mass_b]) for m in chosen_b}
    chosen_a = sorted(m for m in moved | set(rng.sample(range(29, 220), rng.randint(1, 8))) if m > 0)
    return (
        [(float(m), rng.uniform(0.5, 100.0)) for m in chosen_a],
        mass_a,
        [(float(m), rng.uniform(0.5, 100.0)) for m in chosen_b],
        mass_b,
    )


def accurate_pair(rng: random.Random) -> tuple[Rows, float, Rows, float]:
    """Accurate peak lists with several candidates inside the tolerance now and then; none within 0.6 below M."""
    mass_b = rng.uniform(120.0, 300.0)
    mass_a = mass_b + rng.choice([0.0, 14.01565, 15.99491, -18.01056])
    highest = min(mass_a, mass_b) - 20.0
    b = {rng.uniform(30.0, highest): rng.uniform(0.5, 100.0) for _ in range(rng.randint(3, 40))}
    a = {m + rng.choice([0.0, mass_a - mass_b]) + rng.gauss(0.0, 0.01): rng.uniform(0.5, 100.0) for m in b}
    a |= {m + rng.uniform(0.0, 0.03): rng.uniform(0.5, 100.0) for m in list(b)[:5]}
    return sorted(a.items()), mass_a, sorted(b.items()), mass_b


def both_scores(
    measure: Measure, pair: tuple[Rows, float, Rows, float], weighting: Weighting, tolerance_da: float
) -> tuple[tuple[float, int], tuple[float, int]]:
    rows_a, mass_a, rows_b, mass_b = pair
    (mz_a, height_a), (mz_b, height_b) = np.array(rows_a).T, np.array(rows_b).T
    found = SCORES[measure](
        Peaks(mz_a, height_a, mass_a), Peaks(mz_b, height_b, mass_b), weighting, Tolerance(tolerance_da, "da")
    )
    theirs = CLASSES[measure](
        tolerance=tolerance_da, mz_power=weighting.mz_power, intensity_power=weighting.intensity_power
    ).pair(
        MatchmsSpectrum(mz=mz_a, intensities=height_a, metadata={"precursor_mz": float(mass_a)}),
        MatchmsSpectrum(mz=mz_b, intensities=height_b, metadata={"precursor_mz": float(mass_b)}),
    )
    return (found.forward, len(found.pairs)), (float(theirs["score"]), int(theirs["matches"]))


@pytest.mark.parametrize("weighting", WEIGHTINGS.values(), ids=lambda w: w.name)
@pytest.mark.parametrize("measure", list(Measure))
def test_unit_mass_scores_equal_those_of_matchms(measure: Measure, weighting: Weighting) -> None:
    rng = random.Random(20)
    nonzero = 0
    for _ in range(60):
        ours, theirs = both_scores(measure, unit_pair(rng), weighting, 0.1)
        assert ours[0] == pytest.approx(theirs[0], abs=1e-9)
        assert ours[1] == theirs[1]
        nonzero += ours[0] > 0
    assert nonzero > 40


@pytest.mark.parametrize("weighting", WEIGHTINGS.values(), ids=lambda w: w.name)
@pytest.mark.parametrize("measure", list(Measure))
def test_accurate_mass_scores_equal_those_of_matchms(measure: Measure, weighting: Weighting) -> None:
    rng = random.Random(21)
    nonzero = 0
    for _ in range(60):
        ours, theirs = both_scores(measure, accurate_pair(rng), weighting, rng.choice([0.005, 0.02, 0.05]))
        assert ours[0] == pytest.approx(theirs[0], abs=1e-9)
        assert ours[1] == theirs[1]
        nonzero += ours[0] > 0
    assert nonzero > 40
