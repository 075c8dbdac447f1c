"""The spectrum that a search or a carry asks about: a file, or a stored spectrum by its number."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path

from speclib.chemistry.formula import Formula, parse_formula, require_closed_shell
from speclib.chemistry.isotopes import isotope_pattern
from speclib.chemistry.unit_mass import HIGHEST_DEFECT, LOWEST_DEFECT
from speclib.curation.intake_checks import check_at_intake
from speclib.errors import AmbiguousEntryError, EntryNotFoundError, InputFileError, InvalidValueError
from speclib.formats.reading import ReadOptions
from speclib.model.entry import LibrarySpectrum
from speclib.model.results import Estimate, Query
from speclib.model.spectrum import SourceFile, SourceSpectrum, Spectrum
from speclib.search.molecular_mass import highest_plausible_cluster
from speclib.search.rows import Comparable
from speclib.store.library import Library
from speclib.store.spectra import get_spectrum
from speclib.workflows.manifest import phase_named
from speclib.workflows.sources import RUN_READER, RunSelection, read_source

MOST_ISOTOPE_STEPS = 12
"""Satellites of polyhalogenated molecular ions reach some steps above the reference composition."""


@dataclass(frozen=True)
class Asked:
    """A resolved query: the spectrum, where it comes from, and what the library holds of it."""

    spectrum: Spectrum
    query: Query
    source: SourceFile | None = None
    found: SourceSpectrum | None = None
    entry: LibrarySpectrum | None = None


@dataclass(frozen=True)
class Molecule:
    """What is given of the unknown's molecule."""

    nominal_mass: int | None = None
    exact_mass: float | None = None
    formula: Formula | None = None


def resolve_query(
    library: Library,
    target: str,
    *,
    index: int | None = None,
    reading: ReadOptions | None = None,
    selection: RunSelection | None = None,
) -> Asked:
    """Find the spectrum that `target` means: the path of a file, or the number of a stored spectrum.

    Raises:
        EntryNotFoundError, AmbiguousEntryError, InputFileError: what does not work, and what to do.
    """
    path = Path(target)
    is_number = target.isascii() and target.isdigit() and len(target) < 18
    if is_number and path.exists():
        raise AmbiguousEntryError(f"{target} is a file and a spectrum number", f"write ./{target} for the file")
    if is_number:
        with library.reading() as connection:
            entry = get_spectrum(connection, int(target))
        return _stored(entry)
    source = read_source(path, reading or ReadOptions(), selection)
    if index is None and len(source.spectra) > 1:
        raise InputFileError(
            source.file_name, f"holds {len(source.spectra)} spectra", advice="choose one with --index N"
        )
    # The one spectrum taken from a run is numbered by its scan.
    wanted = None if source.reader == RUN_READER else index
    chosen = next((s for s in source.spectra if wanted is None or s.index == wanted), None)
    if chosen is None:
        raise EntryNotFoundError(
            f"{source.file_name} has no spectrum {index}, only {len(source.spectra)}", "correct --index"
        )
    measurement = chosen.spectrum.measurement
    measurement = replace(measurement, phase=phase_named(measurement.phase))
    chosen = replace(chosen, spectrum=replace(chosen.spectrum, measurement=measurement))
    query = _query(chosen.spectrum, source.file_name, None, source.file_name, chosen.index)
    return Asked(chosen.spectrum, query, source, chosen)


def _stored(entry: LibrarySpectrum) -> Asked:
    query = _query(entry.spectrum, entry.label, entry.id, entry.source_file, entry.source_index)
    return Asked(entry.spectrum, query, entry=entry)


def _query(spectrum: Spectrum, label: str, spectrum_id: int | None, file: str | None, index: int) -> Query:
    measured = spectrum.measurement
    return Query(
        label,
        spectrum_id,
        file,
        index,
        len(spectrum),
        spectrum.base_peak[0],
        measured.mz_from,
        measured.mz_to,
    )


def given_molecule(mass: str | None, formula: str | None) -> Molecule:
    """Read `--mass` (nominal without a decimal point, exact with one) and `--formula`, and hold them against each
    other.

    Raises:
        InvalidValueError, InvalidFormulaError: unreadable, or in contradiction.
    """
    known = parse_formula(formula) if formula else None
    if known is not None:
        require_closed_shell(known)
    if mass is None:
        return Molecule(known.nominal_mass, known.exact_mass, known) if known else Molecule()
    try:
        value = float(mass)
    except ValueError:
        value = -1.0
    if not 1.0 <= value <= 10_000.0 or "_" in mass:
        raise InvalidValueError(f"{mass!r} is not a molecular mass", "give a number such as 286 or 286.2144")
    exact = None if "." not in mass and "e" not in mass.lower() else value
    nominal = _nominal(value, exact is not None, known)
    if known is not None and (known.nominal_mass != nominal or (exact and abs(exact - known.exact_mass) > 0.05)):
        raise InvalidValueError(
            f"the mass {mass} and the formula {known} disagree "
            f"(nominal {known.nominal_mass}, exact {known.exact_mass:.4f})",
            "give one of them",
        )
    return Molecule(nominal, known.exact_mass if known else exact, known)


def mass_remarks(query: Comparable) -> list[str]:
    """What speaks against the molecular mass in the spectrum itself: major peaks above it that isotopes cannot be."""
    if query.nominal_mass is None:
        return []
    peaks = query.nominal
    steps = max(isotope_pattern(query.formula)) if query.formula else MOST_ISOTOPE_STEPS
    above = (peaks.mz > query.nominal_mass + steps) & (peaks.intensity >= 0.02 * peaks.intensity.max())
    if not above.any():
        return []
    listed = ", ".join(f"{mz:g}" for mz in peaks.mz[above][-4:])
    return [f"peaks above the molecular mass {query.nominal_mass} (m/z {listed}) contradict it"]


def reading_remarks(asked: Asked) -> list[str]:
    """What the reader and the checks at the door say of a file that is asked about."""
    if asked.found is None:
        return []
    return [finding.reason for finding in check_at_intake(asked.found, None, ())]


def _nominal(value: float, is_exact: bool, known: Formula | None) -> int:
    if known is not None and is_exact and abs(value - known.exact_mass) <= 0.05:
        return known.nominal_mass
    possible = [n for n in (int(value), int(value) + 1) if LOWEST_DEFECT * n <= value - n <= HIGHEST_DEFECT * n]
    if is_exact and len(possible) != 1:
        raise InvalidValueError(f"the exact mass {value} does not tell the nominal mass safely", "give --formula too")
    return possible[0] if is_exact else round(value)


def comparable_query(asked: Asked, given: Molecule) -> tuple[Comparable, Estimate, Estimate]:
    """The query ready for comparison, with its molecular mass and formula and where they come from.

    What is given comes first; then what the library holds: a reference's compound, an unknown's recorded mass; then the
    highest plausible cluster of the spectrum.
    """
    origin = "given"
    if given.nominal_mass is None and asked.entry is not None:
        given, origin = _held_molecule(asked.entry)
    bare = Comparable(asked.spectrum, given.formula, given.nominal_mass, given.exact_mass)
    formula = Estimate(str(given.formula) if given.formula else None, origin if given.formula else "not known")
    if given.nominal_mass is not None:
        return bare, Estimate(given.nominal_mass, origin), formula
    estimate = highest_plausible_cluster(bare.nominal.mz, bare.nominal.intensity)
    value = estimate.value if isinstance(estimate.value, int) else None
    return replace(bare, nominal_mass=value), estimate, formula


def _held_molecule(entry: LibrarySpectrum) -> tuple[Molecule, str]:
    """What the library holds of a stored spectrum's molecule, and how to call that."""
    if entry.compound is not None and entry.compound.formula:
        known = parse_formula(entry.compound.formula)
        return Molecule(known.nominal_mass, known.exact_mass, known), "compound of the reference"
    return Molecule(entry.molecular_mass), "recorded with the unknown"
