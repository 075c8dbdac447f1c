"""From measured unit-resolution m/z to whole numbers.

Whole m/z are left alone. Fractional m/z drift with composition (up for hydrogen-rich, down for halogen-rich ions), so
no fixed rounding rule is right at both ends: one mass-defect line, `fraction = intercept + slope * m/z`, is fitted per
spectrum, every m/z is assigned along it, and peaks that fall near a boundary are reported. For a known formula the
formula decides those. The project's own rule (DESIGN section 5); the fit is a weighted circular least squares, because
a fraction of 0.98 and one of 0.02 lie close together.

A background of hydrocarbons or siloxanes in a spectrum of a polyhalogenated compound breaks a single line, far above
the boundary even by a whole unit. Therefore every m/z is also held against the mass defects that are possible: below
m/z 330 or so they leave one whole number; above, the defects seen in the rest of the spectrum tell which numbers are
in question. Where they leave several or none, or contradict the line, the peak is reported.
`tests/properties/test_unit_mass_of_mixtures.py` measures how often that fails.
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
LOWEST_DEFECT, HIGHEST_DEFECT = -1.05e-3, 1.16e-3
"""Mass defect per m/z that GC analytes span: Br2 -1.03, CBr4 -0.99, C40H82 1.14 per mille."""
DEFECT_SLACK = 0.15
"""Da by which an m/z may lie outside those limits: what is left of calibration offset and centroid noise."""
KNOWN_DEFECT_SLACK, KNOWN_DEFECT_MARGIN = 0.1, 0.15e-3
"""The same around the defects seen in the spectrum itself: Da, and per m/z. Chosen on seeded mixtures."""
WIDEST_GAP = 100.0
"""m/z without a peak, above which a hydrocarbon-like fraction is no longer taken for granted: the lone molecular ion of
a polyhalogenated compound over a hydrocarbon background looks the same. Losses of Br2 or I2 make gaps of their own, but
those ions lie below their whole numbers.
"""
LOW_MASS = 150.0
"""Below, fractions show the calibration offset more than the composition; above, the reverse."""
FEWEST_LOW_PEAKS = 5
MOST_PEAKS_FITTED = 2_000
"""The tallest are enough for a line, and memory stays bounded."""
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
    """Assign whole numbers to measured m/z, shape `(n_peaks,)`, rising, of a unit-resolution spectrum.

    A molecular `formula`, when known, decides the peaks that the line leaves doubtful.
    """
    nearest = np.rint(mz)
    if np.all(np.abs(mz - nearest) <= INTEGER_TOLERANCE):
        return UnitMassAssignment(nearest.astype(np.int64), 0.0, 0.0)
    slope, intercept = _fit_line(mz, intensity)
    shifted = mz - (intercept + slope * mz)
    along_line = np.rint(shifted).astype(np.int64)
    calibrated = mz - _calibration_offset(mz, intensity, intercept)
    unit, settled, open_question = _by_possible_defects(calibrated, along_line, slope)
    unsure = open_question | (unit != along_line) | (np.abs(shifted - along_line) > BOUNDARY_DISTANCE)
    by_formula: list[int] = []
    if formula is not None:
        for i in np.flatnonzero(unsure | ~settled):
            near = subformulae_near_mz(formula, float(calibrated[i]), FORMULA_TOLERANCE_DA)
            fitting = {f.nominal_mass for f in near}
            if len(fitting) == 1 and (unsure[i] or unit[i] not in fitting):
                unit[i] = fitting.pop()
                by_formula.append(int(i))
    doubtful = tuple(int(i) for i in np.flatnonzero(unsure) if i not in by_formula)
    return UnitMassAssignment(unit, slope, intercept, doubtful, tuple(by_formula))


def _calibration_offset(mz: NDArray[np.float64], intensity: NDArray[np.float64], intercept: float) -> float:
    """Intercept of the low-mass peaks alone, where compositions hardly differ; else that of the whole spectrum."""
    low = mz < LOW_MASS
    if np.count_nonzero(low) < FEWEST_LOW_PEAKS or not np.any(intensity[low] > 0):
        return intercept
    return _fit_line(mz[low], intensity[low])[1]


def _by_possible_defects(
    mz: NDArray[np.float64], along_line: NDArray[np.int64], slope: float
) -> tuple[NDArray[np.int64], NDArray[np.bool_], NDArray[np.bool_]]:
    """Whole numbers by mass defect, the line deciding between equals; which are settled by what is possible at all;
    which stay open because the spectrum's other defects leave several or none, or lie too far below.
    """
    below = np.floor(mz).astype(np.int64)
    # Defects exceed 1 beyond m/z 860, so the next but one can be the right number.
    candidates = below + np.arange(-1, 3)[:, None]
    defects = mz - candidates

    def fitting(lowest: float, highest: float, slack: float) -> tuple[NDArray[np.bool_], NDArray[np.int64]]:
        """Where exactly one candidate lies within the limits, and the first that does."""
        within = (candidates > 0) & (defects >= lowest * candidates - slack) & (defects <= highest * candidates + slack)
        first: NDArray[np.int64] = candidates[np.argmax(within, axis=0), np.arange(len(mz))]
        return np.count_nonzero(within, axis=0) == 1, first

    settled, possible = fitting(LOWEST_DEFECT, HIGHEST_DEFECT, DEFECT_SLACK)
    seen = settled & (mz > LOW_MASS)
    known_slopes = np.append((mz - possible)[seen] / possible[seen], slope)
    one_known, known = fitting(
        float(known_slopes.min()) - KNOWN_DEFECT_MARGIN,
        float(known_slopes.max()) + KNOWN_DEFECT_MARGIN,
        KNOWN_DEFECT_SLACK,
    )
    beyond_gap = np.logical_or.accumulate(np.diff(mz, prepend=mz[0]) > WIDEST_GAP)
    decided = ~settled & one_known & ~(beyond_gap & (known <= below))
    unit = np.where(settled, possible, np.where(decided, known, along_line))
    return unit, settled, ~settled & ~decided


def _fit_line(mz: NDArray[np.float64], intensity: NDArray[np.float64]) -> tuple[float, float]:
    """Slope and intercept that bring the weighted fractions closest to whole numbers; ties go to the flattest line."""
    if len(mz) > MOST_PEAKS_FITTED:
        tallest = np.argsort(intensity, kind="stable")[-MOST_PEAKS_FITTED:]
        mz, intensity = mz[tallest], intensity[tallest]
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
