"""Cases: list, show, decide."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from speclib.errors import EntryNotFoundError, InvalidValueError, RefusedError
from speclib.model.assignment import AssignmentState
from speclib.model.results import Proposal
from speclib.store.cases import Case, get_case, list_cases
from speclib.store.flags import close_flags
from speclib.store.library import Library
from speclib.store.trail import library_state


@dataclass(frozen=True)
class Decisions:
    """What a reviewer decides: proposals by number, or the best undecided one of each peak from a confidence on.

    The latter is recorded as `by rule`. `seen_rev` is the revision of the case that the reviewer looked at.
    """

    accept: tuple[int, ...] = ()
    reject: tuple[int, ...] = ()
    accept_from: float | None = None
    revise: bool = False
    seen_rev: int | None = None
    settle_flags: bool = False


@dataclass(frozen=True)
class ReviewResult:
    """The case after the decisions, and which proposals were decided."""

    case: Case
    accepted: tuple[int, ...]
    rejected: tuple[int, ...]
    library_state: str

    def to_json(self) -> dict[str, Any]:
        """The result as plain values."""
        return {
            "schema": 1,
            "case_id": self.case.id,
            "accepted": list(self.accepted),
            "rejected": list(self.rejected),
            "undecided": sum(p.state == AssignmentState.PROPOSED.value for p in self.case.proposals),
            "library_state": self.library_state,
        }


def all_cases(library: Library) -> list[dict[str, Any]]:
    """All cases in short."""
    with library.reading() as connection:
        return list_cases(connection)


def review_case(
    library: Library, case_id: int, decisions: Decisions, *, analyst: str | None, reason: str | None = None
) -> ReviewResult:
    """Accept and reject proposals of a case, all in one event.

    A proposal that is decided already is refused unless `revise`; then the reason is required too. A refused proposal
    cannot be accepted: its failed check stands.

    Raises:
        RefusedError, EntryNotFoundError, InvalidValueError: which decision cannot be made; none of them is.
    """
    _check_wishes(decisions, reason)
    with library.writing("review", analyst=analyst, reason=reason) as transaction:
        case = get_case(transaction.connection, case_id)
        if case.status != "open":
            raise RefusedError(f"case {case_id} is {case.status}", "decisions are made on open cases")
        if decisions.seen_rev is not None and decisions.seen_rev != case.rev:
            raise RefusedError(
                f"case {case_id} was changed by somebody else: it is at revision {case.rev} now",
                "look at it again, then decide",
            )
        if case.flags and decisions.accept_from is not None and not decisions.settle_flags:
            raise RefusedError(
                f"case {case_id} is flagged: {case.flags[0]['reason']}",
                "look at what it rests on, then settle the flags with --settle-flags",
            )
        plan = _plan(case, decisions)
        settled = close_flags(transaction, case.uid) if decisions.settle_flags else 0
        if plan or settled:
            transaction.update("cases", case_id, expected_rev=decisions.seen_rev)
        for proposal, state, how in plan:
            transaction.update(
                "assignments",
                proposal.id or 0,
                expected_rev=proposal.rev,
                state=state.value,
                accepted_how=how,
            )
        accepted = tuple(p.id or 0 for p, state, _ in plan if state is AssignmentState.ACCEPTED)
        rejected = tuple(p.id or 0 for p, state, _ in plan if state is AssignmentState.REJECTED)
        transaction.detail = {"case": case_id, "accepted": list(accepted), "rejected": list(rejected)}
        if settled:
            transaction.detail["flags_settled"] = settled
        if not plan and not settled:
            transaction.abandon()
    with library.reading() as connection:
        return ReviewResult(get_case(connection, case_id), accepted, rejected, library_state(connection))


def _check_wishes(decisions: Decisions, reason: str | None) -> None:
    if not (decisions.accept or decisions.reject or decisions.accept_from is not None or decisions.settle_flags):
        raise InvalidValueError("no decision is given", "use --accept, --reject, --accept-from or --settle-flags")
    both = set(decisions.accept) & set(decisions.reject)
    if both:
        raise InvalidValueError(f"proposal {min(both)} is both accepted and rejected", "decide for one")
    if (decisions.reject or decisions.revise or decisions.settle_flags) and not (reason or "").strip():
        raise InvalidValueError("a rejection, a revised decision or settled flags need a reason", "add --reason TEXT")


_Planned = tuple[Proposal, AssignmentState, str | None]


def _plan(case: Case, decisions: Decisions) -> list[_Planned]:
    proposals = {p.id: p for p in (*case.proposals, *case.refused)}
    plan: list[_Planned] = []

    def add(ids: Sequence[int], state: AssignmentState, how: str | None) -> None:
        for wanted in dict.fromkeys(ids):
            proposal = proposals.get(wanted)
            if proposal is None:
                raise EntryNotFoundError(
                    f"case {case.id} has no proposal {wanted}", f"see `speclib case show {case.id}`"
                )
            _require_decidable(proposal, decisions.revise)
            plan.append((proposal, state, how))

    add(decisions.accept, AssignmentState.ACCEPTED, "individually")
    add(decisions.reject, AssignmentState.REJECTED, None)
    if decisions.accept_from is not None:
        named = {*decisions.accept, *decisions.reject}
        taken = {
            p.peak for p in case.proposals if p.state == AssignmentState.ACCEPTED.value or p.id in decisions.accept
        }
        undecided = [p for p in case.proposals if p.state == AssignmentState.PROPOSED.value and p.id not in named]
        best = {p.peak: p.id for p in sorted(undecided, key=lambda p: p.confidence or 0.0) if p.peak not in taken}
        plan += [
            (p, AssignmentState.ACCEPTED, "by rule")
            for p in case.proposals
            if p.state == AssignmentState.PROPOSED.value
            and p.id not in named
            and p.id == best.get(p.peak)
            and (p.confidence or 0.0) >= decisions.accept_from
        ]
    return plan


def _require_decidable(proposal: Proposal, revise: bool) -> None:
    if proposal.refused_by is not None:
        raise RefusedError(
            f"proposal {proposal.id} was refused by the check '{proposal.refused_by}'",
            "assign the peak by hand if you know better",
        )
    if proposal.state == AssignmentState.SUPERSEDED.value:
        raise RefusedError(f"proposal {proposal.id} is superseded", "carry again")
    if proposal.state != AssignmentState.PROPOSED.value and not revise:
        raise RefusedError(
            f"proposal {proposal.id} is {proposal.state} already", "add --revise and --reason to decide anew"
        )
