"""Carry: proposals for an unknown from its confirmed relatives, kept as a case unless asked otherwise."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from speclib.annotation.carry import RULES_VERSION, carry_assignments
from speclib.annotation.votes import Donor, Unknown
from speclib.chemistry.formula import Formula, parse_formula
from speclib.clock import utc_text
from speclib.curation.intake_checks import check_at_intake
from speclib.formats.reading import ReadOptions
from speclib.model.entry import Role
from speclib.model.results import CarryResult, Difference, Estimate, Neighbour
from speclib.progress import SILENT, Progress
from speclib.search.exact import DEFAULT_MIN_MATCHED, Scored, SearchSettings, as_neighbours, rank_rows
from speclib.search.rows import Comparable, ReferenceRow
from speclib.similarity.scores import Measure
from speclib.store.assignments import compounds_with_donor_assignments, donor_assignments
from speclib.store.cases import Case, get_case, insert_case, open_cases_of
from speclib.store.library import Library
from speclib.store.spectra import insert_findings, insert_source, insert_spectrum, spectra_with_content
from speclib.store.writing import WriteTransaction
from speclib.workflows.query import (
    Asked,
    comparable_query,
    given_molecule,
    mass_remarks,
    reading_remarks,
    resolve_query,
)
from speclib.workflows.search import reference_rows
from speclib.workflows.sources import RunSelection

DEFAULT_MIN_SIMILARITY = 0.3
DEFAULT_MOST_DONORS = 20
WEAK_SIMILARITY = 0.6
"""Below this the best donor is hardly a relative; common practice, no source."""


@dataclass(frozen=True)
class CarryRequest:
    """What a person asks of carry."""

    target: str
    index: int | None = None
    mass: str | None = None
    formula: str | None = None
    exclude_compounds: tuple[str, ...] = ()
    min_similarity: float = DEFAULT_MIN_SIMILARITY
    min_matched: int = DEFAULT_MIN_MATCHED
    most_donors: int = DEFAULT_MOST_DONORS
    reading: ReadOptions = field(default_factory=ReadOptions)
    selection: RunSelection | None = None


def carry_to_unknown(
    library: Library,
    request: CarryRequest,
    *,
    save: bool,
    analyst: str | None = None,
    progress: Progress = SILENT,
) -> CarryResult:
    """Propose assignments for an unknown; with `save`, keep unknown, neighbours and proposals as a case.

    Raises:
        SpeclibError: the target or an option cannot be used; SignatureMissingError when saving unsigned.
    """
    asked = resolve_query(
        library, request.target, index=request.index, reading=request.reading, selection=request.selection
    )
    given = given_molecule(request.mass, request.formula)
    query, mass, formula = comparable_query(asked, given)
    rows, keep, state = reference_rows(library, asked, request.exclude_compounds)
    settings = SearchSettings(
        measure=Measure.SHIFTED if query.nominal_mass is not None else Measure.COSINE,
        min_similarity=request.min_similarity,
        min_matched=request.min_matched,
        top=None,
    )
    ranked = rank_rows(query, rows, settings, keep=_keeps_relatives(asked, keep), progress=progress)
    donors = _donors(library, query, ranked, request.most_donors)
    proposals, refused = carry_assignments(Unknown(query, query.nominal_mass, query.formula, not mass.inferred), donors)
    result = CarryResult(
        unknown=asked.query,
        library_state=state,
        molecular_mass=mass,
        molecular_formula=formula,
        donors=tuple(d.neighbour for d in donors),
        proposals=tuple(proposals),
        refused=tuple(refused),
        difference=_difference(query.formula, query.nominal_mass, donors[0].neighbour if donors else None),
        remarks=(
            *reading_remarks(asked),
            *mass_remarks(query),
            *_remarks(request, query.formula, bool(ranked), donors, mass),
        ),
    )
    if not save:
        return result
    return _save(library, request, asked, result, analyst)


def _keeps_relatives(asked: Asked, keep: Callable[[ReferenceRow], bool]) -> Callable[[ReferenceRow], bool]:
    """A stored reference takes nothing from its own compound: that would be no carrying."""
    own = asked.entry.compound.identity if asked.entry and asked.entry.compound else None
    if own is None:
        return keep
    return lambda row: keep(row) and (row.entry.compound is None or row.entry.compound.identity != own)


def _donors(library: Library, query: Comparable, ranked: Sequence[Scored], most: int) -> list[Donor]:
    """The nearest references whose compounds have assignments to carry."""
    with library.reading() as connection:
        able = compounds_with_donor_assignments(connection)
        chosen = [s for s in ranked if s.row.entry.compound and s.row.entry.compound.id in able][:most]
        return [
            Donor(neighbour, scored.row.comparable, tuple(donor_assignments(connection, neighbour.compound.id)))
            for neighbour, scored in zip(as_neighbours(query, chosen), chosen, strict=True)
        ]


def _remarks(
    request: CarryRequest, formula: Formula | None, has_neighbours: bool, donors: Sequence[Donor], mass: Estimate
) -> list[str]:
    remarks = []
    if not has_neighbours:
        remarks.append(
            f"a stranger: no reference reaches a similarity of {request.min_similarity:g} with {request.min_matched} "
            "matched peaks, so nothing is carried"
        )
    elif not donors:
        remarks.append("none of the neighbours has accepted assignments, so nothing is carried; see `speclib assign`")
    elif donors[0].neighbour.similarity < WEAK_SIMILARITY:
        remarks.append(
            f"no donor is a near relative (the best similarity is {donors[0].neighbour.similarity:.2f}): "
            "take every proposal with great caution"
        )
    if mass.inferred and mass.value is not None:
        remarks.append(f"the molecular mass {mass.value} is inferred from the spectrum; give --mass if you know it")
    elif mass.value is None:
        remarks.append("the molecular mass is not known, so donors were found by direct peaks only; give --mass")
    if formula is None:
        remarks.append("the molecular formula is not known, so same-loss is left out; give --formula")
    return remarks


def _difference(formula: Formula | None, mass: int | None, nearest: Neighbour | None) -> Difference:
    """What the unknown has more than its nearest donor; as a formula only when both formulas are known."""
    if nearest is None or mass is None or nearest.mass_difference is None:
        return Difference(None)
    if formula is None or nearest.compound.formula is None:
        return Difference(nearest.mass_difference)
    donor = parse_formula(nearest.compound.formula)
    symbols = dict.fromkeys([s for s, _ in formula] + [s for s, _ in donor])
    gained = Formula.of({s: max(0, formula[s] - donor[s]) for s in symbols})
    lost = Formula.of({s: max(0, donor[s] - formula[s]) for s in symbols})
    text = (f"+{gained}" if gained else "") + (f"-{lost}" if lost else "")
    return Difference(nearest.mass_difference, (text,) if text else ())


def _save(
    library: Library, request: CarryRequest, asked: Asked, result: CarryResult, analyst: str | None
) -> CarryResult:
    with library.writing("carry", analyst=analyst) as transaction:
        spectrum_id = asked.entry.id if asked.entry else _store_unknown(transaction, library, asked, result)
        earlier = open_cases_of(transaction.connection, spectrum_id)
        case_id = insert_case(
            transaction,
            result,
            spectrum_id=spectrum_id,
            settings=_settings(request, result),
            rules_version=RULES_VERSION,
        )
        transaction.detail = {
            "case": case_id,
            "spectrum": spectrum_id,
            "proposals": len(result.proposals),
            "refused": len(result.refused),
        }
    case = load_case(library, case_id)
    remarks = result.remarks
    if earlier:
        remarks += (f"case {', '.join(map(str, earlier))} on the same spectrum is still open",)
    return replace(
        result,
        case_id=case_id,
        unknown=replace(result.unknown, spectrum_id=spectrum_id),
        proposals=tuple(sorted(case.proposals, key=lambda p: (p.mz, -(p.confidence or 0.0), p.formula))),
        refused=case.refused,
        remarks=remarks,
    )


def load_case(library: Library, case_id: int) -> Case:
    """A stored case.

    Raises:
        EntryNotFoundError: there is none of that number.
    """
    with library.reading() as connection:
        return get_case(connection, case_id)


def _settings(request: CarryRequest, result: CarryResult) -> dict[str, Any]:
    return {
        "molecular_mass": result.molecular_mass.to_json(),
        "molecular_formula": result.molecular_formula.to_json(),
        "min_similarity": request.min_similarity,
        "min_matched": request.min_matched,
        "most_donors": request.most_donors,
        "excluded": list(request.exclude_compounds),
        "difference": result.difference.to_json(),
        "remarks": list(result.remarks),
    }


def _store_unknown(transaction: WriteTransaction, library: Library, asked: Asked, result: CarryResult) -> int:
    """Store the file's spectrum as an unknown, or return the held one with its peaks; a mass that is given is kept."""
    if asked.source is None or asked.found is None:
        raise ValueError("a query is a stored spectrum or comes from a file")
    same = spectra_with_content(transaction.connection, asked.spectrum.content_hash)
    held = next((entry for entry in same if entry.role is Role.UNKNOWN), None)
    mass = result.molecular_mass.value if result.molecular_mass.origin == "given" else None
    if held:
        if held.molecular_mass is None and isinstance(mass, int):
            transaction.update("spectra", held.id, expected_rev=held.rev, molecular_mass=mass)
        return held.id
    spectrum_id = insert_spectrum(
        transaction,
        asked.found,
        role=Role.UNKNOWN,
        status=None,
        compound_id=None,
        source_id=insert_source(transaction, asked.source, utc_text(library.clock())),
        molecular_mass=mass if isinstance(mass, int) else None,
    )
    insert_findings(transaction, spectrum_id, check_at_intake(asked.found, None, same))
    return spectrum_id
