"""Checks of an assignment that a person makes by hand, before it is recorded."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from speclib.chemistry.formula import Formula, parse_formula, parse_ion_formula
from speclib.chemistry.subformulae import can_be_an_ion
from speclib.errors import InvalidFormulaError, InvalidValueError
from speclib.model.assignment import Parity
from speclib.search.rows import Comparable

ACCURATE_SLACK_DA = 0.02
"""How far an accurate m/z may lie from its ion when a person assigns it; wider than any search tolerance on purpose."""


@dataclass(frozen=True)
class CheckedAssignment:
    """An assignment that fits its peak and its molecule."""

    peak: int
    mz: float
    formula: Formula
    neutral_loss: Formula
    mechanism: str
    parity: Parity
    note: str


def check_manual_assignment(
    target: Comparable, *, mz: float, formula: str, neutral_loss: str | None, mechanism: str, note: str = ""
) -> CheckedAssignment:
    """Check that the peak exists, the ion has its m/z, and ion + loss is the molecule.

    Raises:
        InvalidValueError: no such peak, wrong mass, or not part of the molecule; says which.
        InvalidFormulaError: unreadable formula or loss.
    """
    peak = find_peak(target, mz)
    ion = parse_ion_formula(formula)
    found_mz = float(target.spectrum.mz[peak])
    _check_mass(target, peak, found_mz, ion)
    loss = parse_formula(neutral_loss) if (neutral_loss or "").strip() else None
    if target.formula is None:
        if loss is None:
            raise InvalidValueError(
                "the compound has no formula, so the neutral loss does not follow", "give the neutral loss"
            )
    else:
        loss = _loss_of(target.formula, ion, loss)
    if not mechanism.strip():
        raise InvalidValueError(f"m/z {found_mz:g} {ion}: no mechanism is given", "name it, e.g. alpha-cleavage")
    return CheckedAssignment(peak, found_mz, ion, loss, mechanism.strip(), Parity(ion.ion_parity), note.strip())


def find_peak(target: Comparable, mz: float) -> int:
    """Position of the peak meant by `mz`: on whole m/z for unit spectra, the nearest within 0.02 Da for accurate ones.

    Raises:
        InvalidValueError: there is none; the nearest peaks are named.
    """
    spectrum = target.spectrum
    if not np.isfinite(mz):
        raise InvalidValueError(f"m/z {mz} is not a number", "give the m/z of a peak")
    if target.is_accurate:
        nearest = int(np.argmin(np.abs(spectrum.mz - mz)))
        if abs(float(spectrum.mz[nearest]) - mz) <= ACCURATE_SLACK_DA:
            return nearest
    else:
        exact = np.flatnonzero(spectrum.mz == mz)
        if len(exact):
            return int(exact[0])
        hits = np.flatnonzero(target.nominal.mz == np.rint(mz))
        if len(hits) and abs(mz - round(mz)) < 0.5:
            return int(target.nominal.position[hits[0]])
    near = sorted(np.argsort(np.abs(spectrum.mz - mz))[:3])
    listed = ", ".join(f"{spectrum.mz[i]:g}" for i in near)
    raise InvalidValueError(f"the spectrum has no peak at m/z {mz:g}", f"the nearest are {listed}")


def _check_mass(target: Comparable, peak: int, mz: float, ion: Formula) -> None:
    if target.is_accurate:
        if abs(ion.ion_mz() - mz) > ACCURATE_SLACK_DA:
            raise InvalidValueError(
                f"{ion}+ has m/z {ion.ion_mz():.4f}, but the peak lies at {mz:.4f}", "check the formula"
            )
        return
    unit = int(target.nominal.assignment.unit_mz[peak])
    if ion.nominal_mass != unit:
        raise InvalidValueError(
            f"{ion}+ has nominal m/z {ion.nominal_mass}, but the peak lies at {unit}", "check the formula"
        )


def _loss_of(molecule: Formula, ion: Formula, stated: Formula | None) -> Formula:
    if not can_be_an_ion(ion):
        raise InvalidFormulaError(f"{ion} has too many hydrogens or halogens to be an ion", "check the formula")
    if not molecule.contains(ion):
        raise InvalidValueError(f"{ion} is not part of the molecule {molecule}", "check the formula")
    loss = molecule - ion
    if stated is not None and stated != loss:
        raise InvalidValueError(
            f"{ion} and the neutral loss {stated} do not add up to the molecule {molecule}",
            f"the loss would be {loss or 'none'}",
        )
    return loss
