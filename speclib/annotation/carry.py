"""Carrying accepted assignments of relatives to an unknown: candidates by route, grouped, checked and argued.

Routes: `same-ion`, a fragment of the donor that the unknown shows at the same m/z; `same-loss`, a neutral that both
lose, so that the ion moves by the whole mass difference. Published idea: Moorthy et al., Anal. Chem. 2017, 89, 13261;
Stein, J. Am. Soc. Mass Spectrom. 1995, 6, 644. `same-loss` needs the unknown's formula, because only then does the
ion's formula follow.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from speclib.annotation.checks import Candidate, CheckContext, check_candidate, failed_check, is_hard
from speclib.annotation.prior import PRIOR_BASIS, prior_confidence
from speclib.annotation.satellites import Satellites, predict_satellites
from speclib.chemistry.formula import Formula, parse_formula
from speclib.model.assignment import Assignment, Parity, Route
from speclib.model.results import DonorVote, Neighbour, Proposal
from speclib.search.rows import Comparable

MOLECULAR_ION = "molecular ion"
RULES_VERSION = 1
"""Version of routes, checks and prior; every carried assignment keeps it."""
VOTE_POWER = 4
"""A donor votes with its similarity to this power: near relatives outweigh a crowd of distant ones. Chosen by
leaving out each compound of a set of principal-peak tables in turn; powers 3 to 6 do equally well there."""
SMALLEST_SHARE = 0.02
HEIGHT_POWER = 0.25


@dataclass(frozen=True, eq=False)
class Donor:
    """A neighbour with the accepted assignments of its compound's references; `comparable` carries its formula and
    mass.
    """

    neighbour: Neighbour
    comparable: Comparable
    assignments: tuple[Assignment, ...]


@dataclass(frozen=True, eq=False)
class Unknown:
    """The unknown on whole m/z, with what is known of its molecule."""

    comparable: Comparable
    nominal_mass: int | None
    formula: Formula | None


def carry_assignments(unknown: Unknown, donors: Sequence[Donor]) -> tuple[list[Proposal], list[Proposal]]:
    """Proposals and refused ones, each list by m/z, then confidence. Donors must be references of different compounds.

    One proposal per peak and formula; compositions that fit the same peak are all shown.
    """
    candidates = _collect(unknown, donors)
    satellites = predict_satellites(unknown.comparable.nominal, unknown.formula, candidates)
    proposals: list[Proposal] = []
    refused: list[Proposal] = []
    for candidate in candidates:
        made = _judge(unknown, candidate, candidates, satellites)
        (refused if made.refused_by else proposals).append(made)

    def order(p: Proposal) -> tuple[float, float, str]:
        return p.mz, -(p.confidence or 0.0), p.formula

    return sorted(proposals, key=order), sorted(refused, key=order)


def _collect(unknown: Unknown, donors: Sequence[Donor]) -> list[Candidate]:
    """Candidates by (peak on whole m/z, formula); votes of one donor for one candidate count once, by its best
    route.
    """
    place = {int(m): i for i, m in enumerate(unknown.comparable.nominal.mz)}
    votes: dict[tuple[int, Formula], dict[str, tuple[DonorVote, Assignment]]] = {}

    def vote(mz: int, formula: Formula, donor: Donor, assignment: Assignment, route: Route) -> None:
        if mz not in place:
            return
        n = donor.neighbour
        weight = n.similarity**VOTE_POWER * _side_share(donor, assignment, route) ** 0.5
        weight *= _height_agreement(unknown, donor, assignment, place[mz])
        cast = DonorVote(assignment.id, assignment.uid, n.spectrum_id, n.compound.name, route, n.similarity, weight)
        votes.setdefault((mz, formula), {}).setdefault(f"{n.compound.uid}|{route}", (cast, assignment))

    for donor in donors:
        for assignment in donor.assignments:
            if assignment.isotope_of is not None:
                continue
            formula = parse_formula(assignment.formula)
            # A molecular ion is no fragment of another molecule: it is carried as 'nothing lost' only.
            if assignment.neutral_loss:
                vote(formula.nominal_mass, formula, donor, assignment, Route.SAME_ION)
            moved = _same_loss_ion(unknown, assignment)
            if moved is not None and not (moved == formula and assignment.neutral_loss):
                vote(moved.nominal_mass, moved, donor, assignment, Route.SAME_LOSS)
    return [_candidate(place[mz], mz, formula, list(cast.values())) for (mz, formula), cast in sorted(votes.items())]


def _side_share(donor: Donor, assignment: Assignment, route: Route) -> float:
    """Chance that the change lies where the route needs it, if it could lie anywhere in the donor.

    For `same-loss` it has to lie in the ion (its part of the donor's mass), for `same-ion` in the neutral. Never 0, so
    that no evidence is thrown away.
    """
    if not donor.comparable.nominal_mass:
        return 0.5
    ion = parse_formula(assignment.formula).nominal_mass / donor.comparable.nominal_mass
    return max(SMALLEST_SHARE, ion if route is Route.SAME_LOSS else 1.0 - ion)


def _height_agreement(unknown: Unknown, donor: Donor, assignment: Assignment, position: int) -> float:
    """How alike the two peaks stand in their spectra: the ratio of their relative heights to a low power.

    A low power, because relatives differ in height more often than in composition. A donor replicate without the peak
    counts as a tenth as high.
    """
    ours, theirs = unknown.comparable.nominal, donor.comparable.nominal
    ours_height = float(ours.intensity[position] / ours.intensity.max())
    found = np.flatnonzero(theirs.mz == np.rint(assignment.mz))
    theirs_height = float(theirs.intensity[found[0]] / theirs.intensity.max()) if len(found) else 0.1 * ours_height
    low, high = sorted((ours_height, theirs_height))
    return max(SMALLEST_SHARE, low / high) ** HEIGHT_POWER if high > 0 else 1.0


def _same_loss_ion(unknown: Unknown, assignment: Assignment) -> Formula | None:
    """The unknown's ion after the donor's loss, or None when the unknown's formula is not known or lacks the loss."""
    if unknown.formula is None:
        return None
    loss = parse_formula(assignment.neutral_loss) if assignment.neutral_loss else Formula()
    if not unknown.formula.contains(loss) or loss == unknown.formula:
        return None
    return unknown.formula - loss


def _candidate(index: int, mz: int, formula: Formula, cast: list[tuple[DonorVote, Assignment]]) -> Candidate:
    ordered = sorted(cast, key=lambda item: (-item[0].weight, item[0].assignment_id))
    # One compound votes once for a composition, whichever routes lead to it.
    per_compound: dict[str, float] = {}
    for donor, _ in ordered:
        per_compound[donor.compound_name] = max(per_compound.get(donor.compound_name, 0.0), donor.weight)
    best = ordered[0][1]
    return Candidate(
        peak=index,
        mz=mz,
        formula=formula,
        mechanism=best.mechanism,
        donor_parity=best.parity,
        votes=tuple(donor for donor, _ in ordered),
        weight=sum(per_compound.values()),
        compounds=len(per_compound),
    )


def _judge(unknown: Unknown, candidate: Candidate, all_: Sequence[Candidate], satellites: Satellites) -> Proposal:
    rivals = [other for other in all_ if other.peak == candidate.peak and other is not candidate]
    context = CheckContext(unknown.comparable, unknown.nominal_mass, unknown.formula, satellites, tuple(rivals))
    checks = check_candidate(candidate, context)
    refused_by = failed_check(checks, is_hard)
    loss = None
    if unknown.formula is not None and unknown.formula.contains(candidate.formula):
        loss = str(unknown.formula - candidate.formula)
    best = candidate.votes[0]
    position = int(unknown.comparable.nominal.position[candidate.peak])
    confidence = None if refused_by else prior_confidence(candidate, rivals, checks, context)
    return Proposal(
        peak=position,
        mz=float(unknown.comparable.spectrum.mz[position]),
        formula=str(candidate.formula),
        neutral_loss=loss,
        mechanism=MOLECULAR_ION if loss == "" else candidate.mechanism,
        parity=Parity(candidate.formula.ion_parity),
        route=best.route,
        donors=candidate.votes,
        checks=checks,
        confidence=confidence,
        confidence_basis=PRIOR_BASIS,
        reason=_reason(candidate, loss),
        refused_by=refused_by,
    )


def _reason(candidate: Candidate, loss: str | None) -> str:
    """The argument in words: who shows the same ion, who loses the same neutral, and by which mechanism."""
    parts = []
    for route, one, many in (
        (Route.SAME_ION, f"shows {candidate.formula}+ at the same m/z", f"show {candidate.formula}+ at the same m/z"),
        (Route.SAME_LOSS, f"loses {loss or 'nothing'} in the same way", f"lose {loss or 'nothing'} in the same way"),
    ):
        names = list(dict.fromkeys(vote.compound_name for vote in candidate.votes if vote.route is route))
        if names:
            others = f" and {len(names) - 1} more" if len(names) > 1 else ""
            parts.append(
                (candidate.votes[0].route is not route, f"{names[0]}{others} {one if len(names) == 1 else many}")
            )
    return f"{'; '.join(text for _, text in sorted(parts))} ({candidate.mechanism})"
