"""Votes of donors for what the peaks of an unknown are.

A donor votes with its similarity, the chance that the change lies on the side that the route needs, and how alike the
two peaks stand in their spectra. One compound votes once for a composition, however many replicates and routes lead to
it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from speclib.chemistry.formula import Formula, parse_formula
from speclib.model.assignment import Assignment, Parity, Route
from speclib.model.results import DonorVote, Neighbour
from speclib.search.rows import Comparable

VOTE_POWER = 4
"""A donor votes with its similarity to this power: near relatives outweigh a crowd of distant ones.

Chosen by leaving out each compound of a set of principal-peak tables in turn; powers 3 to 6 do equally well there.
"""
SMALLEST_SHARE = 0.02
HEIGHT_POWER = 0.25
"""Low, because relatives differ in height more often than in composition; a minor ion must not outvote a major one.

Chosen by judgement on the demo library; it changes little on principal-peak tables.
"""
ACCURATE_LIMIT_DA = 0.005
"""How far a measured accurate m/z may lie from that of its ion; common practice, no source."""


@dataclass(frozen=True, eq=False)
class Donor:
    """A neighbour with the accepted assignments of its compound; `comparable` carries its formula and mass."""

    neighbour: Neighbour
    comparable: Comparable
    assignments: tuple[Assignment, ...]


@dataclass(frozen=True, eq=False)
class Unknown:
    """The unknown, with what is known of its molecule; `mass_is_given` is False when the mass is only inferred."""

    comparable: Comparable
    nominal_mass: int | None
    formula: Formula | None
    mass_is_given: bool = True


@dataclass(frozen=True)
class Candidate:
    """A composition that donors vote for at one peak.

    `peak` is the position in the unknown's arrays as measured, `mz` the nominal m/z of the composition, `weight` the
    sum of one vote per donor compound.
    """

    peak: int
    mz: int
    formula: Formula
    mechanism: str
    donor_parity: Parity
    votes: tuple[DonorVote, ...]
    weight: float
    compounds: int


@dataclass(frozen=True)
class _Cast:
    vote: DonorVote
    assignment: Assignment
    compound_key: str


def collect_candidates(unknown: Unknown, donors: Sequence[Donor]) -> list[Candidate]:
    """Every composition that a donor's assignment suggests for a peak that the unknown shows, by m/z and formula."""
    casts: dict[tuple[int, Formula], list[_Cast]] = {}

    def cast(formula: Formula, donor: Donor, assignment: Assignment, route: Route) -> None:
        peak = peak_of_ion(unknown.comparable, formula)
        if peak is None:
            return
        n = donor.neighbour
        weight = n.similarity**VOTE_POWER * _side_share(donor, assignment, route) ** 0.5
        weight *= _height_agreement(unknown, donor, assignment, formula)
        vote = DonorVote(
            assignment.id, assignment.uid, assignment.spectrum_id, n.compound.name, route, n.similarity, weight
        )
        casts.setdefault((peak, formula), []).append(_Cast(vote, assignment, n.compound.identity))

    for donor in donors:
        for assignment in donor.assignments:
            if assignment.isotope_of is not None or assignment.neutral_loss is None:
                continue
            formula = parse_formula(assignment.formula)
            # A molecular ion is no fragment of another molecule: it is carried as 'nothing lost' only.
            if assignment.neutral_loss:
                cast(formula, donor, assignment, Route.SAME_ION)
            moved = _same_loss_ion(unknown, assignment)
            if moved is not None and not (moved == formula and assignment.neutral_loss):
                cast(moved, donor, assignment, Route.SAME_LOSS)
    return [_candidate(peak, formula, found) for (peak, formula), found in sorted(casts.items())]


def peak_of_ion(comparable: Comparable, ion: Formula) -> int | None:
    """Position of the peak that could be the ion: on its nominal m/z; for accurate mass the nearest within the limit.

    Without a peak that near, an accurate spectrum offers the tallest of the same nominal m/z, for the mass check to
    refuse.
    """
    if comparable.is_accurate:
        away = np.abs(comparable.spectrum.mz - ion.ion_mz())
        distance = np.where(comparable.spectrum.intensity > 0, away, float("inf"))
        nearest = int(np.argmin(distance))
        if distance[nearest] <= ACCURATE_LIMIT_DA:
            return nearest
    bins = np.flatnonzero((comparable.nominal.mz == ion.nominal_mass) & (comparable.nominal.intensity > 0))
    return int(comparable.nominal.position[bins[0]]) if len(bins) else None


def _side_share(donor: Donor, assignment: Assignment, route: Route) -> float:
    """Chance that the change lies where the route needs it, if it could lie anywhere in the donor.

    For `same-loss` it has to lie in the ion (its part of the donor's mass), for `same-ion` in the neutral. Never 0, so
    that no evidence is thrown away.
    """
    if not donor.comparable.nominal_mass:
        return 0.5
    ion = parse_formula(assignment.formula).nominal_mass / donor.comparable.nominal_mass
    return max(SMALLEST_SHARE, ion if route is Route.SAME_LOSS else 1.0 - ion)


def _height_agreement(unknown: Unknown, donor: Donor, assignment: Assignment, ion: Formula) -> float:
    """How alike the two peaks stand in their spectra: the ratio of their relative heights, to a low power.

    A donor replicate without the peak counts as a tenth as high.
    """
    ours, theirs = unknown.comparable.nominal, donor.comparable.nominal
    ours_height = ours.height(ion.nominal_mass) / float(ours.intensity.max())
    theirs_height = theirs.height(parse_formula(assignment.formula).nominal_mass) / float(theirs.intensity.max())
    low, high = sorted((ours_height, theirs_height or 0.1 * ours_height))
    return max(SMALLEST_SHARE, low / high) ** HEIGHT_POWER if high > 0 else 1.0


def _same_loss_ion(unknown: Unknown, assignment: Assignment) -> Formula | None:
    """The unknown's ion after the donor's loss, or None when the unknown's formula is not known or lacks the loss."""
    if unknown.formula is None:
        return None
    loss = parse_formula(assignment.neutral_loss) if assignment.neutral_loss else Formula()
    if not unknown.formula.contains(loss) or loss == unknown.formula:
        return None
    return unknown.formula - loss


def _candidate(peak: int, formula: Formula, casts: Sequence[_Cast]) -> Candidate:
    ordered = sorted(casts, key=lambda c: (-c.vote.weight, c.vote.assignment_id, c.vote.route))
    per_compound: dict[str, float] = {}
    for c in ordered:
        per_compound[c.compound_key] = max(per_compound.get(c.compound_key, 0.0), c.vote.weight)
    best = ordered[0].assignment
    return Candidate(
        peak=peak,
        mz=formula.nominal_mass,
        formula=formula,
        mechanism=best.mechanism,
        donor_parity=best.parity,
        votes=tuple(c.vote for c in ordered),
        weight=sum(per_compound.values()),
        compounds=len(per_compound),
    )
