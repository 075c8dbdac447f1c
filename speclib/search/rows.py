"""What a search is handed: references and the query, each in the forms that a comparison can need."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

from speclib.chemistry.formula import Formula, parse_formula
from speclib.cleaning.nominal import NominalPeaks, bin_to_nominal_mass
from speclib.model.entry import LibrarySpectrum
from speclib.model.spectrum import MassAccuracy, Spectrum
from speclib.similarity.scores import Peaks


@dataclass(frozen=True, eq=False)
class Comparable:
    """A spectrum ready to be compared: on whole m/z always, as measured when it is of accurate mass.

    `nominal_mass` and `exact_mass` are those of the molecule, as far as known.
    """

    spectrum: Spectrum
    formula: Formula | None = None
    nominal_mass: int | None = None
    exact_mass: float | None = None

    @cached_property
    def nominal(self) -> NominalPeaks:
        """Peaks on whole m/z; the molecular formula, when known, decides doubtful ones."""
        return bin_to_nominal_mass(self.spectrum, self.formula)

    @property
    def is_accurate(self) -> bool:
        """Whether m/z were measured accurately."""
        return self.spectrum.mass_accuracy is MassAccuracy.ACCURATE

    @cached_property
    def unit_peaks(self) -> Peaks:
        """Whole-m/z form."""
        measured = self.spectrum.measurement
        mass = None if self.nominal_mass is None else float(self.nominal_mass)
        return Peaks(self.nominal.mz, self.nominal.intensity, mass, measured.mz_from, measured.mz_to)

    @cached_property
    def accurate_peaks(self) -> Peaks:
        """As measured; the molecular mass is the exact one, when known."""
        measured = self.spectrum.measurement
        return Peaks(self.spectrum.mz, self.spectrum.intensity, self.exact_mass, measured.mz_from, measured.mz_to)


@dataclass(frozen=True, eq=False)
class ReferenceRow:
    """A searchable reference."""

    entry: LibrarySpectrum
    comparable: Comparable


def reference_row(entry: LibrarySpectrum) -> ReferenceRow:
    """Make the row of a stored reference; formula and masses come from its compound."""
    compound = entry.compound
    formula = parse_formula(compound.formula) if compound and compound.formula else None
    return ReferenceRow(
        entry,
        Comparable(
            entry.spectrum,
            formula,
            formula.nominal_mass if formula else entry.molecular_mass,
            formula.exact_mass if formula else None,
        ),
    )
