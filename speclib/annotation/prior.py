"""Confidence of a carried proposal before anything has been fitted on the library.

A documented prior, no measured probability. It starts from the nearest donor's similarity and the share of the vote,
and is higher when the unknown's formula leaves one composition only. `reliability` replaces it.
"""

from __future__ import annotations

from collections.abc import Sequence

from speclib.annotation.checks import DONORS, LOSS, Candidate, CheckContext
from speclib.chemistry.subformulae import subformulae_of_nominal_mz
from speclib.model.results import Check

PRIOR_BASIS = "prior"
LOWEST, HIGHEST = 0.02, 0.97


def prior_confidence(
    candidate: Candidate, rivals: Sequence[Candidate], checks: Sequence[Check], context: CheckContext
) -> float:
    """Prior probability that the composition is right.

    share of the vote x (0.55 + 0.45 x best similarity), halved for an implausible loss; when the formula allows one
    composition only, at least 0.9. Clipped to 0.02 .. 0.97: a prior is never certain.
    """
    molecule = context.molecule
    live = [rival for rival in rivals if molecule is None or molecule.contains(rival.formula)]
    share = candidate.weight / (candidate.weight + sum(rival.weight for rival in live))
    best = max(vote.similarity for vote in candidate.votes)
    value = share * (0.55 + 0.45 * best)
    if molecule is not None and len(subformulae_of_nominal_mz(molecule, candidate.mz)) == 1:
        value = max(value, 0.9)
    if any(check.name == LOSS and check.passed is False for check in checks):
        value *= 0.5
    if any(check.name == DONORS and check.passed is False for check in checks):
        value *= 0.9
    return min(HIGHEST, max(LOWEST, value))
