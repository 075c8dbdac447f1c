"""The audit trail as people read it: history and verification."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from speclib.errors import InvalidValueError
from speclib.progress import SILENT, Progress
from speclib.store.cases import get_case
from speclib.store.compounds import get_compound
from speclib.store.history import HistoryEntry, events_of_row, recent_events
from speclib.store.library import Library
from speclib.store.spectra import get_spectrum
from speclib.store.trail import library_state
from speclib.store.verifying import Verification, verify_library


@dataclass(frozen=True)
class History:
    """Events, newest first; `subject` names the row asked for, or is None."""

    subject: str | None
    entries: tuple[HistoryEntry, ...]
    library_state: str

    def to_json(self) -> dict[str, Any]:
        """The history as plain values."""
        return {
            "schema": 1,
            "subject": self.subject,
            "library_state": self.library_state,
            "events": [entry.to_json() for entry in self.entries],
        }


def library_history(
    library: Library,
    *,
    limit: int | None = None,
    spectrum: int | None = None,
    compound: str | None = None,
    case: int | None = None,
) -> History:
    """All events, or those that touched one spectrum, compound or case.

    Raises:
        InvalidValueError: more than one subject. EntryNotFoundError: no such row.
    """
    if sum(x is not None for x in (spectrum, compound, case)) > 1:
        raise InvalidValueError(
            "history can be asked of one thing at a time", "give one of --spectrum, --compound, --case"
        )
    with library.reading() as connection:
        state = library_state(connection)
        if spectrum is not None:
            entry = get_spectrum(connection, spectrum)
            subject, uid = entry.label, entry.uid
        elif compound is not None:
            held = get_compound(connection, compound)
            subject, uid = held.name, held.uid
        elif case is not None:
            subject, uid = f"case {case}", get_case(connection, case).uid
        else:
            return History(None, tuple(recent_events(connection, limit)), state)
        return History(subject, tuple(events_of_row(connection, uid)[:limit]), state)


def verify(library: Library, *, progress: Progress = SILENT) -> Verification:
    """Verify the library in one read transaction."""
    with library.reading() as connection:
        return verify_library(connection, progress)
