"""Carry on small invented spectra whose chemistry is plain to see."""

from __future__ import annotations

from dataclasses import replace

import pytest

from speclib.annotation.carry import carry_assignments
from speclib.annotation.checks import DONORS, FORMULA, ISOTOPES, LOSS, MASS, PARITY
from speclib.annotation.votes import Donor, Unknown
from speclib.chemistry.formula import Formula, parse_formula
from speclib.model.assignment import Assignment, AssignmentOrigin, AssignmentState, Parity, Route
from speclib.model.compound import Compound, Structure
from speclib.model.entry import LibrarySpectrum, Role, Status
from speclib.model.results import Proposal
from speclib.model.spectrum import MassAccuracy, Measurement, Spectrum
from speclib.search.exact import SearchSettings, search_rows
from speclib.search.rows import Comparable, ReferenceRow, reference_row
from speclib.similarity.scores import Measure

Ions = list[tuple[float, str, str]]


def reference(number: int, name: str, formula: str, peaks: dict[float, float]) -> ReferenceRow:
    f = parse_formula(formula)
    structure = Structure(
        name, f"{'A' * 13}{chr(65 + number)}-UHFFFAOYSA-N", name, formula, f.nominal_mass, f.exact_mass
    )
    compound = Compound(number, f"c{number}", name, structure, formula)
    spectrum = Spectrum.of(sorted(peaks), [peaks[m] for m in sorted(peaks)])
    return reference_row(LibrarySpectrum(number, f"s{number}", Role.REFERENCE, Status.CONFIRMED, spectrum, compound))


def accepted(row: ReferenceRow, ions: Ions) -> tuple[Assignment, ...]:
    molecule = row.comparable.formula or Formula()
    made = []
    for number, (mz, formula, mechanism) in enumerate(ions, start=1):
        ion = parse_formula(formula)
        made.append(
            Assignment(
                row.entry.id * 100 + number,
                f"a{row.entry.id}-{number}",
                row.entry.id,
                0,
                mz,
                formula,
                str(molecule - ion),
                mechanism,
                Parity(ion.ion_parity),
                AssignmentOrigin.MANUAL,
                AssignmentState.ACCEPTED,
                accepted_how="individually",
            )
        )
    return tuple(made)


HEXANONE = reference(1, "2-hexanone", "C6H12O", {29: 15, 41: 15, 43: 100, 57: 17, 58: 55, 85: 7, 100: 8})
HEXANONE_IONS: Ions = [
    (43, "C2H3O", "alpha-cleavage"),
    (58, "C3H6O", "McLafferty rearrangement"),
    (85, "C5H9O", "alpha-cleavage"),
    (100, "C6H12O", "molecular ion"),
]
OCTANONE = {29.0: 10.0, 41.0: 15.0, 43.0: 100.0, 58.0: 75.0, 59.0: 12.0, 71.0: 12.0, 113.0: 4.0, 128.0: 5.0}


def carried(
    peaks: dict[float, float],
    formula: str | None,
    mass: int | None,
    donors: list[tuple[ReferenceRow, Ions]],
    accuracy: MassAccuracy = MassAccuracy.UNIT,
    measurement: Measurement | None = None,
) -> tuple[list[Proposal], list[Proposal]]:
    spectrum = Spectrum.of(sorted(peaks), [peaks[m] for m in sorted(peaks)], accuracy, measurement or Measurement())
    molecule = parse_formula(formula) if formula else None
    query = Comparable(spectrum, molecule, mass, molecule.exact_mass if molecule else None)
    settings = SearchSettings(
        measure=Measure.SHIFTED if mass else Measure.COSINE, min_similarity=0.1, min_matched=1, top=None
    )
    rows = [row for row, _ in donors]
    found = search_rows(query, rows, settings)
    ions = {row.entry.id: ions for row, ions in donors}
    by_id = {row.entry.id: row for row in rows}
    made = [
        Donor(n, by_id[n.spectrum_id].comparable, accepted(by_id[n.spectrum_id], ions[n.spectrum_id])) for n in found
    ]
    return carry_assignments(Unknown(query, mass, molecule), made)


def at(proposals: list[Proposal], mz: float) -> dict[str, Proposal]:
    return {p.formula: p for p in proposals if p.mz == mz}


def check(proposal: Proposal, name: str) -> tuple[bool | None, str]:
    found = next(c for c in proposal.checks if c.name == name)
    return found.passed, found.detail


def test_an_ion_without_the_changed_part_stays_and_one_with_it_moves() -> None:
    proposals, _ = carried(OCTANONE, "C8H16O", 128, [(HEXANONE, HEXANONE_IONS)])
    assert at(proposals, 58)["C3H6O"].route is Route.SAME_ION
    moved = at(proposals, 113)
    assert moved["C7H13O"].route is Route.SAME_LOSS
    assert moved["C7H13O"].neutral_loss == "CH3"
    assert at(proposals, 128)["C8H16O"].mechanism == "molecular ion"


def test_every_proposal_names_its_donor_assignment_and_all_checks() -> None:
    proposals, _ = carried(OCTANONE, "C8H16O", 128, [(HEXANONE, HEXANONE_IONS)])
    for proposal in proposals:
        assert proposal.donors
        assert all(vote.assignment_uid.startswith("a1-") for vote in proposal.donors)
        assert [c.name for c in proposal.checks] == [MASS, FORMULA, PARITY, LOSS, ISOTOPES, DONORS]
        assert proposal.confidence_basis == "prior"


def test_without_the_formula_same_loss_is_left_out() -> None:
    proposals, refused = carried(OCTANONE, None, 128, [(HEXANONE, HEXANONE_IONS)])
    assert {p.route for p in [*proposals, *refused]} == {Route.SAME_ION}
    assert all(p.neutral_loss is None for p in proposals)
    assert check(proposals[0], FORMULA)[0] is None


def test_a_molecular_ion_of_a_donor_is_never_carried_as_a_fragment() -> None:
    peaks = {**OCTANONE, 100.0: 6.0}
    proposals, refused = carried(peaks, "C8H16O", 128, [(HEXANONE, HEXANONE_IONS)])
    assert "C6H12O" not in at([*proposals, *refused], 100)


def test_an_ion_that_the_molecule_cannot_hold_is_refused_by_the_formula() -> None:
    proposals, refused = carried({43: 100, 58: 50, 128: 5}, "C9H20", 128, [(HEXANONE, HEXANONE_IONS)])
    assert not at(proposals, 58)
    assert at(refused, 58)["C3H6O"].refused_by == FORMULA
    assert "C9H20" in check(at(refused, 58)["C3H6O"], FORMULA)[1]


def test_a_hydrocarbon_ion_with_more_hydrogens_than_an_alkyl_cation_is_refused() -> None:
    donor = reference(6, "donor", "C9H20O", {43: 50, 73: 100, 144: 20})
    _, refused = carried({43: 50, 73: 100, 116: 20}, "C7H16O", 116, [(donor, [(73, "C5H13", "x")])])
    assert at(refused, 73)["C5H13"].refused_by == FORMULA


def test_an_isotope_satellite_is_refused_and_names_its_parent() -> None:
    # m/z 93 is 8 % of m/z 92: 13C of C7H8 (7.6 %) accounts for nearly all of it.
    donor = reference(2, "donor", "C8H10", {91: 100, 92: 60, 93: 5, 106: 30})
    ions: Ions = [(91, "C7H7", "benzylic cleavage"), (92, "C7H8", "McLafferty rearrangement"), (93, "C7H9", "x")]
    _, refused = carried({91: 20, 92: 100, 93: 8, 120: 20}, "C9H12", 120, [(donor, ions)])
    satellite = at(refused, 93)["C7H9"]
    assert satellite.refused_by == ISOTOPES
    assert "m/z 92" in check(satellite, ISOTOPES)[1]


def test_a_chlorine_ion_without_its_satellite_is_refused_only_when_it_should_show() -> None:
    donor = reference(3, "donor", "C6H5Cl", {77: 60, 112: 100, 114: 32})
    ions: Ions = [(112, "C6H5Cl", "x"), (77, "C6H5", "halogen loss")]
    ions_as_fragment: Ions = [(112, "C6H5Cl", "ring fragmentation")]
    bigger = reference(4, "bigger donor", "C7H7Cl", {112: 100, 114: 33, 126: 20})
    peaks = {50.0: 1.0, 77.0: 60.0, 112.0: 100.0, 140.0: 5.0}
    donors = [(donor, ions), (bigger, ions_as_fragment)]
    _, refused = carried(peaks, "C8H9Cl", 140, donors)
    assert at(refused, 112)["C6H5Cl"].refused_by == ISOTOPES
    # Without its 13C satellites only, it stays: background subtraction takes those off.
    proposals, _ = carried({**peaks, 114.0: 32.0}, "C8H9Cl", 140, donors)
    assert check(at(proposals, 112)["C6H5Cl"], ISOTOPES)[0] is None
    # Scanned only to 112, no satellite could be seen.
    low = Measurement(mz_from=40, mz_to=112)
    proposals, _ = carried(peaks, "C8H9Cl", 140, donors, measurement=low)
    assert "C6H5Cl" in at(proposals, 112)


def test_two_compositions_of_one_unit_mass_are_both_shown_and_share_the_vote() -> None:
    alkane = reference(5, "hexane", "C6H14", {29: 40, 41: 60, 43: 75, 57: 100, 86: 15})
    proposals, _ = carried(
        {29: 30, 41: 50, 43: 100, 57: 40, 58: 20, 100: 5},
        "C6H12O",
        100,
        [(HEXANONE, [(43, "C2H3O", "alpha-cleavage")]), (alkane, [(43, "C3H7", "sigma cleavage")])],
    )
    both = at(proposals, 43)
    assert set(both) >= {"C2H3O", "C3H7"}
    assert sum(p.confidence or 0 for p in both.values()) <= 1.0


def test_replicates_of_a_donor_do_not_vote_twice() -> None:
    twin = replace(HEXANONE, entry=replace(HEXANONE.entry, id=9, uid="s9"))
    once, _ = carried(OCTANONE, "C8H16O", 128, [(HEXANONE, HEXANONE_IONS)])
    twice, _ = carried(OCTANONE, "C8H16O", 128, [(HEXANONE, HEXANONE_IONS), (twin, HEXANONE_IONS)])
    assert [(p.formula, p.confidence) for p in once] == [(p.formula, p.confidence) for p in twice]


def test_an_implausible_loss_lowers_the_confidence_but_is_shown() -> None:
    near = {43.0: 100.0, 58.0: 50.0, 86.0: 10.0, 100.0: 5.0}
    sixteen = {43.0: 100.0, 58.0: 50.0, 86.0: 10.0, 102.0: 5.0}
    donor_ions: Ions = [(86, "C4H6O2", "x")]
    donor = reference(7, "donor", "C7H12O2", {43: 100, 58: 50, 86: 10, 128: 5})
    doubtful, _ = carried(near, "C5H8O2", 100, [(donor, donor_ions)])
    plausible, _ = carried(sixteen, "C5H10O2", 102, [(donor, donor_ions)])
    assert check(at(doubtful, 86)["C4H6O2"], LOSS) == (
        False,
        "a loss of CH2 (14) from the molecular ion is implausible",
    )
    assert check(at(plausible, 86)["C4H6O2"], LOSS)[0] is True
    assert (at(doubtful, 86)["C4H6O2"].confidence or 0) < 0.7 * (at(plausible, 86)["C4H6O2"].confidence or 0)


def test_accurate_mass_decides_between_compositions() -> None:
    donor_ions: Ions = [(43, "C2H3O", "alpha-cleavage"), (58, "C3H6O", "McLafferty rearrangement")]
    peaks = {43.0542: 100.0, 58.0413: 50.0, 128.1196: 5.0}
    proposals, refused = carried(peaks, "C8H16O", 128, [(HEXANONE, donor_ions)], MassAccuracy.ACCURATE)
    assert at(refused, 43.0542)["C2H3O"].refused_by == MASS
    assert "C3H6O" in at(proposals, 58.0413)


def test_two_accurate_peaks_of_one_nominal_mass_each_get_their_own_ion() -> None:
    alkane = reference(5, "hexane", "C6H14", {29: 40, 41: 60, 43: 75, 57: 100, 86: 15})
    peaks = {43.0178: 60.0, 43.0542: 100.0, 58.0413: 50.0, 128.1196: 5.0}
    donors = [(HEXANONE, [(43.0, "C2H3O", "alpha-cleavage")]), (alkane, [(43.0, "C3H7", "sigma cleavage")])]
    proposals, refused = carried(peaks, "C8H16O", 128, donors, MassAccuracy.ACCURATE)
    assert set(at(proposals, 43.0178)) == {"C2H3O"}
    assert set(at(proposals, 43.0542)) == {"C3H7"}
    assert not [p for p in refused if p.refused_by == MASS]


def test_what_the_molecule_cannot_hold_does_not_explain_satellites() -> None:
    bromo = reference(8, "bromo donor", "C5H9Br", {43: 40, 69: 100, 107: 60, 109: 60, 148: 20})
    arene = reference(9, "arene donor", "C9H12O", {43: 40, 69: 20, 107: 100, 109: 60, 136: 40})
    peaks = {43.0: 30.0, 107.0: 100.0, 109.0: 60.0, 136.0: 20.0}
    donors = [(bromo, [(107.0, "C2H4Br", "x")]), (arene, [(109.0, "C7H9O", "y"), (107.0, "C8H11", "z")])]
    proposals, refused = carried(peaks, "C9H12O", 136, donors)
    assert at(refused, 107)["C2H4Br"].refused_by == FORMULA
    assert "C7H9O" in at(proposals, 109)


def test_stereoisomers_are_one_witness() -> None:
    trans = HEXANONE
    key = trans.entry.compound.structure if trans.entry.compound else None
    assert key is not None
    other = replace(key, inchikey=key.inchikey.replace("UHFFFAOYSA", "VOTSOKGWSA"))
    compound = replace(trans.entry.compound, id=77, uid="c77", name="stereoisomer", structure=other)  # type: ignore[type-var]
    cis = replace(trans, entry=replace(trans.entry, id=77, uid="s77", compound=compound))
    alone, _ = carried(OCTANONE, "C8H16O", 128, [(trans, HEXANONE_IONS)])
    both, _ = carried(OCTANONE, "C8H16O", 128, [(trans, HEXANONE_IONS), (cis, HEXANONE_IONS)])
    assert [(p.formula, p.confidence) for p in both] == [(p.formula, p.confidence) for p in alone]


def test_a_donor_whose_record_breaks_the_nitrogen_rule_is_refused() -> None:
    rows = [(HEXANONE, HEXANONE_IONS)]
    spectrum = Spectrum.of(sorted(OCTANONE), [OCTANONE[m] for m in sorted(OCTANONE)])
    query = Comparable(spectrum, parse_formula("C8H16O"), 128)
    (neighbour,) = search_rows(query, [HEXANONE], SearchSettings(measure=Measure.SHIFTED, min_matched=1))
    wrong = tuple(replace(a, parity=Parity.OE) for a in accepted(HEXANONE, HEXANONE_IONS) if a.formula == "C2H3O")
    donor = Donor(neighbour, rows[0][0].comparable, wrong)
    _, refused = carry_assignments(Unknown(query, 128, parse_formula("C8H16O")), [donor])
    assert {p.refused_by for p in refused} == {PARITY}


def test_a_minor_ion_of_a_donor_does_not_outvote_a_major_one() -> None:
    major = reference(10, "major", "C6H12O", {43: 100, 58: 55, 85: 7, 100: 8})
    minor = reference(11, "minor", "C6H12O", {43: 1, 58: 55, 85: 7, 100: 8})
    for row, least in ((major, True), (minor, False)):
        proposals, _ = carried(OCTANONE, "C8H16O", 128, [(row, [(43, "C2H3O", "x")])])
        weight = at(proposals, 43)["C2H3O"].donors[0].weight / at(proposals, 43)["C2H3O"].donors[0].similarity ** 4
        assert (weight > 0.7) is least


@pytest.mark.parametrize("formula", ["C8H16O", None])
def test_carry_is_deterministic(formula: str | None) -> None:
    runs = [carried(OCTANONE, formula, 128, [(HEXANONE, HEXANONE_IONS)]) for _ in range(2)]
    assert runs[0] == runs[1]


def test_no_donor_means_no_proposal() -> None:
    assert carried({91: 100, 92: 60}, "C7H8", 92, []) == ([], [])
