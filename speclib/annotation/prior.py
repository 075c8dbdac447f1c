"""Confidence of a carried proposal before anything has been fitted on the library.

A documented prior, no measured probability: the proposal's share of the vote, where a small fixed vote stands for a
composition that no donor knows. `reliability` replaces it.
"""

from __future__ import annotations

from collections.abc import Sequence

from speclib.annotation.checks import LOSS, other_compositions
from speclib.annotation.votes import Candidate, Unknown
from speclib.model.results import Check

PRIOR_BASIS = "prior"
UNSEEN_VOTE = 0.06
"""Vote of a composition that no donor knows, when the molecular formula is not known either."""
UNSEEN_VOTE_WITHIN_FORMULA = 0.03
"""The same when the formula is known and allows other compositions; it is 0 when it allows one only."""
SINGLE_WITNESS_LIMIT, SEVERAL_WITNESSES_LIMIT = 0.75, 0.95
"""One donor compound, or several, do not make a composition surer than this while others are possible."""
DISTANT_LIMIT = 0.6
"""A donor without any similarity would not make a composition surer than this; the limit rises to HIGHEST with it."""
IMPLAUSIBLE_LOSS_FACTOR = 0.5
LOWEST, HIGHEST = 0.02, 0.97
"""A prior is never certain."""


def prior_confidence(
    candidate: Candidate, rivals: Sequence[Candidate], checks: Sequence[Check], unknown: Unknown
) -> float:
    """Prior probability that the composition is right.

    own vote / (own vote + votes of rivals + unseen vote), halved for an implausible loss, limited
    by the number and the similarity of the donors, and within 0.02 and 0.97. The two unseen votes were chosen so that,
    on principal-peak tables with each compound left out in turn, the prior is close to the share found right without a
    formula and stays below it with one.
    """
    if unknown.formula is None:
        unseen, only = UNSEEN_VOTE, False
    else:
        only = not other_compositions(candidate, unknown)
        unseen = 0.0 if only else UNSEEN_VOTE_WITHIN_FORMULA
    limit = HIGHEST
    if not only:
        limit = SINGLE_WITNESS_LIMIT if candidate.compounds == 1 else SEVERAL_WITNESSES_LIMIT
    value = candidate.weight / (candidate.weight + unseen + sum(rival.weight for rival in rivals))
    if any(check.name == LOSS and check.passed is False for check in checks):
        value *= IMPLAUSIBLE_LOSS_FACTOR
    nearest = max(vote.similarity for vote in candidate.votes)
    return min(limit, DISTANT_LIMIT + (HIGHEST - DISTANT_LIMIT) * nearest, max(LOWEST, value))
