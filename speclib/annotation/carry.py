"""Carrying accepted assignments of relatives to an unknown: votes collected, checked, weighed and argued.

Routes: `same-ion`, a fragment of the donor that the unknown shows at the same m/z; `same-loss`, a neutral that both
lose, so that the ion moves by the whole mass difference. Published idea: Moorthy et al., Anal. Chem. 2017, 89, 13261;
Stein, J. Am. Soc. Mass Spectrom. 1995, 6, 644. `same-loss` needs the unknown's formula, because only then does the
ion's formula follow.
"""

from __future__ import annotations

from collections.abc import Sequence

from speclib.annotation.checks import (
    CheckContext,
    check_agreement,
    check_candidate,
    first_refusal,
    fits_molecule,
)
from speclib.annotation.prior import PRIOR_BASIS, prior_confidence
from speclib.annotation.satellites import predict_satellites
from speclib.annotation.votes import Candidate, Donor, Unknown, collect_candidates
from speclib.model.assignment import AssignmentState, Parity, Route
from speclib.model.results import Check, Proposal

RULES_VERSION = 1
"""Version of routes, votes, checks and prior; every carried assignment keeps it."""
MOLECULAR_ION = "molecular ion"


def carry_assignments(unknown: Unknown, donors: Sequence[Donor]) -> tuple[list[Proposal], list[Proposal]]:
    """Proposals and refused ones, each list by m/z, then confidence.

    One proposal per peak and formula; compositions that fit the same peak are all shown. What a check refuses neither
    explains satellites (when the formula is the reason) nor counts as a rival in the vote.
    """
    candidates = collect_candidates(unknown, donors)
    possible = [c for c in candidates if fits_molecule(c, unknown)]
    context = CheckContext(unknown, predict_satellites(unknown.comparable.nominal, unknown.formula, possible))
    checked = [(candidate, check_candidate(candidate, context)) for candidate in candidates]
    standing = [candidate for candidate, checks in checked if first_refusal(checks) is None]
    proposals: list[Proposal] = []
    refused: list[Proposal] = []
    for candidate, checks in checked:
        if first_refusal(checks) is None:
            rivals = [other for other in standing if other.peak == candidate.peak and other is not candidate]
            all_checks = (*checks, check_agreement(candidate, rivals))
            confidence = prior_confidence(candidate, rivals, all_checks, unknown)
            proposals.append(_proposal(unknown, candidate, all_checks, confidence))
        else:
            refused.append(_proposal(unknown, candidate, checks, None))

    def order(p: Proposal) -> tuple[float, float, str]:
        return p.mz, -(p.confidence or 0.0), p.formula

    return sorted(proposals, key=order), sorted(refused, key=order)


def _proposal(unknown: Unknown, candidate: Candidate, checks: tuple[Check, ...], confidence: float | None) -> Proposal:
    refused_by = first_refusal(checks)
    loss = None
    if unknown.formula is not None and unknown.formula.contains(candidate.formula):
        loss = str(unknown.formula - candidate.formula)
    return Proposal(
        peak=candidate.peak,
        mz=float(unknown.comparable.spectrum.mz[candidate.peak]),
        formula=str(candidate.formula),
        neutral_loss=loss,
        mechanism=MOLECULAR_ION if loss == "" else candidate.mechanism,
        parity=Parity(candidate.formula.ion_parity),
        route=candidate.votes[0].route,
        donors=candidate.votes,
        checks=checks,
        confidence=confidence,
        confidence_basis=PRIOR_BASIS,
        reason=_reason(candidate, loss),
        refused_by=refused_by,
        state=(AssignmentState.REFUSED if refused_by else AssignmentState.PROPOSED).value,
    )


def _reason(candidate: Candidate, loss: str | None) -> str:
    """The argument in words: who shows the same ion, who loses the same neutral, and by which mechanism."""
    if loss == "":
        return f"follows from the formula that is given; {candidate.votes[0].compound_name} shows its molecular ion too"
    parts = []
    for route, one, many in (
        (Route.SAME_ION, f"shows {candidate.formula}+ at the same m/z", f"show {candidate.formula}+ at the same m/z"),
        (Route.SAME_LOSS, f"loses {loss} in the same way", f"lose {loss} in the same way"),
    ):
        names = list(dict.fromkeys(vote.compound_name for vote in candidate.votes if vote.route is route))
        if names:
            others = f" and {len(names) - 1} more" if len(names) > 1 else ""
            words = f"{names[0]}{others} {one if len(names) == 1 else many}"
            parts.append((candidate.votes[0].route is not route, words))
    return f"{'; '.join(text for _, text in sorted(parts))} ({candidate.mechanism})"
