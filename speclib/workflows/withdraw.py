"""Taking back: a reference that should not have been confirmed, an assignment that is wrong. Nothing is deleted."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from speclib.errors import EntryNotFoundError, InvalidValueError, RefusedError
from speclib.model.assignment import Assignment, AssignmentState
from speclib.model.entry import LibrarySpectrum, Role, Status
from speclib.store.assignments import assignments_of, spectrum_of_assignment
from speclib.store.flags import flag_dependent_cases
from speclib.store.library import Library
from speclib.store.spectra import get_spectrum, sign
from speclib.store.trail import library_state


@dataclass(frozen=True)
class WithdrawResult:
    """References withdrawn or an assignment retracted, the cases that rested on them, and the library state after."""

    withdrawn: tuple[LibrarySpectrum, ...]
    retracted: Assignment | None
    flagged_cases: tuple[int, ...]
    library_state: str

    def to_json(self) -> dict[str, Any]:
        """The result as plain values."""
        return {
            "schema": 1,
            "withdrawn": [entry.to_json() for entry in self.withdrawn],
            "retracted": self.retracted.to_json() if self.retracted else None,
            "flagged_cases": list(self.flagged_cases),
            "library_state": self.library_state,
        }


def withdraw_references(
    library: Library, spectrum_ids: Sequence[int], *, analyst: str | None, reason: str | None
) -> WithdrawResult:
    """Withdraw references, all or none: they are found and donate no more, and cases that rest on them are flagged.

    Raises:
        InvalidValueError: no reason. RefusedError: no reference, or withdrawn already. EntryNotFoundError: no such
            spectrum.
    """
    words = _required(reason, "a withdrawal")
    ids = list(dict.fromkeys(spectrum_ids))
    flagged: set[int] = set()
    with library.writing("withdraw", analyst=analyst, reason=words) as transaction:
        for spectrum_id in ids:
            entry = get_spectrum(transaction.connection, spectrum_id)
            if entry.role is not Role.REFERENCE:
                raise RefusedError(f"{entry.label} is no reference", "only references are withdrawn")
            if entry.status is Status.WITHDRAWN:
                raise RefusedError(f"{entry.label} is withdrawn already", "nothing was changed")
            sign(transaction, entry, Status.WITHDRAWN, analyst=(analyst or "").strip(), reason=words)
            donors = assignments_of(transaction.connection, spectrum_id, (AssignmentState.ACCEPTED,))
            because = f"{entry.label} was withdrawn: {words}"
            ids_of_donors = [a.id for a in donors]
            flagged.update(
                flag_dependent_cases(transaction, entry.uid, ids_of_donors, because, spectrum_id=spectrum_id)
            )
        transaction.detail = {"spectra": ids, "flagged_cases": sorted(flagged)}
    with library.reading() as connection:
        entries = tuple(get_spectrum(connection, i) for i in ids)
        return WithdrawResult(entries, None, tuple(sorted(flagged)), library_state(connection))


def retract_assignment(
    library: Library, assignment_id: int, *, analyst: str | None, reason: str | None
) -> WithdrawResult:
    """Take an accepted assignment of a reference back: it donates no more, and cases that rest on it are flagged.

    Raises:
        InvalidValueError: no reason. RefusedError: it belongs to a case or is not accepted. EntryNotFoundError: none of
            that number.
    """
    words = _required(reason, "a retraction")
    with library.writing("retract", analyst=analyst, reason=words) as transaction:
        held = _get(transaction.connection, assignment_id)
        if held.case_id is not None:
            raise RefusedError(f"assignment {assignment_id} belongs to case {held.case_id}", "use `speclib review`")
        if held.state is not AssignmentState.ACCEPTED:
            raise RefusedError(f"assignment {assignment_id} is {held.state.value} already", "nothing was changed")
        transaction.update(
            "assignments", assignment_id, expected_rev=held.rev, state=AssignmentState.REJECTED.value, accepted_how=None
        )
        because = f"assignment {assignment_id} (m/z {held.mz:g} {held.formula}) was retracted: {words}"
        flagged = flag_dependent_cases(transaction, held.uid, [assignment_id], because)
        transaction.detail = {"assignment": assignment_id, "flagged_cases": flagged}
    with library.reading() as connection:
        return WithdrawResult((), _get(connection, assignment_id), tuple(flagged), library_state(connection))


def _get(connection: Any, assignment_id: int) -> Assignment:
    spectrum_id = spectrum_of_assignment(connection, assignment_id) if assignment_id < 2**63 else None
    if spectrum_id is None:
        raise EntryNotFoundError(
            f"the library holds no assignment {assignment_id}", "see `speclib compound show NAME --json`"
        )
    return next(a for a in assignments_of(connection, spectrum_id) if a.id == assignment_id)


def _required(reason: str | None, what: str) -> str:
    words = (reason or "").strip()
    if not words:
        raise InvalidValueError(f"{what} needs its reason", "add --reason TEXT")
    return words
