"""From measured unit-resolution m/z to whole numbers.

Whole m/z are left alone. Fractional m/z drift with composition (up for hydrogen-rich, down for halogen-rich ions), so
no fixed rounding rule is right at both ends: one mass-defect line, `fraction = intercept + slope * m/z`, is fitted per
spectrum, every m/z is assigned along it, and peaks that fall near a boundary are reported. For a known formula the
formula decides those. The project's own rule (DESIGN section 5); the fit is a weighted circular least squares, because
a fraction of 0.98 and one of 0.02 lie close together.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from speclib.chemistry.formula import Formula
from speclib.chemistry.subformulae import subformulae_near_mz

INTEGER_TOLERANCE = 1e-6
STEEPEST_SLOPE = 1.25e-3
"""CH4 reaches 2.0 and C40H82 1.14 per mille; above m/z 30 nothing of a GC exceeds this. CBr4 lies at -1.0 per mille."""
WIDEST_INTERCEPT = 0.15
"""Da; the offset of a calibrated quadrupole, common practice, no source."""
BOUNDARY_DISTANCE = 0.3
"""A peak further than this from its line lies nearer to the boundary (0.5) than to the line: report it."""
FORMULA_TOLERANCE_DA = 0.15
"""How far a measured unit-mass centroid may lie from the exact mass of its ion; common practice, no source."""


@dataclass(frozen=True)
class UnitMassAssignment:
    """Whole m/z of each peak, the fitted line, and the positions of peaks that lie near a boundary.

    `unit_mz` has dtype int64 and the shape of the input; `doubtful` are positions in it, `by_formula` those that
    a known formula settled.
    """

    unit_mz: NDArray[np.int64]
    slope: float
    intercept: float
    doubtful: tuple[int, ...] = ()
    by_formula: tuple[int, ...] = ()


def assign_unit_masses(
    mz: NDArray[np.float64], intensity: NDArray[np.float64], formula: Formula | None = None
) -> UnitMassAssignment:
    """Assign whole numbers to measured m/z, shape `(n_peaks,)`, of a unit-resolution spectrum.

    A molecular `formula`, when known, decides the peaks that the line leaves doubtful.
    """
    nearest = np.rint(mz)
    if np.all(np.abs(mz - nearest) <= INTEGER_TOLERANCE):
        return UnitMassAssignment(nearest.astype(np.int64), 0.0, 0.0)
    slope, intercept = _fit_line(mz, intensity)
    shifted = mz - (intercept + slope * mz)
    unit = np.rint(shifted).astype(np.int64)
    unsure = [int(i) for i in np.flatnonzero(np.abs(shifted - unit) > BOUNDARY_DISTANCE)]
    settled: list[int] = []
    if formula is not None:
        # The line is blind to the formula; where the formula allows exactly one whole number it decides every peak.
        for i in range(len(mz)):
            fitting = {f.nominal_mass for f in subformulae_near_mz(formula, float(mz[i]), FORMULA_TOLERANCE_DA)}
            if len(fitting) == 1 and (i in unsure or unit[i] not in fitting):
                unit[i] = fitting.pop()
                settled.append(i)
    doubtful = tuple(i for i in unsure if i not in settled)
    return UnitMassAssignment(unit, slope, intercept, doubtful, tuple(settled))


def _fit_line(mz: NDArray[np.float64], intensity: NDArray[np.float64]) -> tuple[float, float]:
    """Slope and intercept that bring the weighted fractions closest to whole numbers; ties go to the flattest line."""
    top = float(intensity.max())
    weight = np.sqrt(intensity / top) if top > 0 else np.ones_like(intensity)
    slopes = np.linspace(-STEEPEST_SLOPE, STEEPEST_SLOPE, 251)
    intercepts = np.linspace(-WIDEST_INTERCEPT, WIDEST_INTERCEPT, 61)
    phase = np.exp(2j * np.pi * mz)
    turned = np.exp(-2j * np.pi * np.outer(slopes, mz)) @ (weight * phase)
    closeness = np.real(turned[:, None] * np.exp(-2j * np.pi * intercepts)[None, :]) / weight.sum()
    # A steep line must earn its slope: without this, three peaks can be fitted by any alias.
    penalty = 0.01 * np.abs(slopes / STEEPEST_SLOPE)[:, None] + 0.01 * np.abs(intercepts / WIDEST_INTERCEPT)[None, :]
    best = np.unravel_index(int(np.argmax(closeness - penalty)), closeness.shape)
    return float(slopes[best[0]]), float(intercepts[best[1]])
