"""Sign-off of references against authentic standards."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from speclib.errors import InvalidValueError, RefusedError, SpeclibError
from speclib.model.compound import Compound
from speclib.model.entry import LibrarySpectrum, Role, Status
from speclib.model.finding import Severity
from speclib.store.library import Library
from speclib.store.spectra import get_spectrum, open_findings, sign
from speclib.store.trail import library_state


def require_gate(compound: Compound | None, standard: str | None, faults: Sequence[str]) -> None:
    """The gate of every sign-off: a compound with a formula, a named standard, no open fault.

    Raises:
        RefusedError: which of them is missing.
    """
    if compound is None or not compound.formula:
        raise RefusedError("a spectrum without compound and formula cannot be confirmed", "name its compound first")
    if not (standard or "").strip():
        raise RefusedError(
            f"{compound.name} cannot be confirmed without its standard",
            "say which authentic standard it was run against",
        )
    if faults:
        raise RefusedError(
            f"{compound.name} cannot be confirmed with an open fault: {faults[0]}", "correct the data first"
        )


@dataclass(frozen=True)
class ConfirmResult:
    """References that were confirmed, the doubts that were open on them, and the library state after."""

    confirmed: tuple[LibrarySpectrum, ...]
    standard: str
    analyst: str
    library_state: str
    doubts: dict[int, tuple[str, ...]]

    def to_json(self) -> dict[str, Any]:
        """The result as plain values."""
        return {
            "schema": 1,
            "confirmed": [entry.to_json() for entry in self.confirmed],
            "standard": self.standard,
            "analyst": self.analyst,
            "open_doubts": {str(spectrum_id): list(reasons) for spectrum_id, reasons in self.doubts.items()},
            "library_state": self.library_state,
        }


def confirm_references(
    library: Library,
    spectrum_ids: Sequence[int],
    *,
    standard: str,
    analyst: str | None,
    reason: str | None = None,
) -> ConfirmResult:
    """Confirm references against a standard, all or none of them.

    Raises:
        RefusedError: one of them does not pass the gate, is no reference, or is decided already.
        EntryNotFoundError: no such spectrum.
    """
    if not spectrum_ids:
        raise InvalidValueError("no spectrum is named", "give the numbers of the references to confirm")
    doubts: dict[int, tuple[str, ...]] = {}
    with library.writing("confirm", analyst=analyst, reason=reason) as transaction:
        connection = transaction.connection
        for spectrum_id in dict.fromkeys(spectrum_ids):
            entry = get_spectrum(connection, spectrum_id)
            try:
                _require_undecided(entry)
                findings = open_findings(connection, spectrum_id)
                require_gate(entry.compound, standard, [f.reason for f in findings if f.severity is Severity.FAULT])
                doubts[spectrum_id] = tuple(f.reason for f in findings if f.severity is Severity.DOUBT)
            except SpeclibError as error:
                raise RefusedError(
                    f"{entry.label}: {error.message}", error.advice or "nothing was confirmed"
                ) from error
            sign(
                transaction,
                entry,
                Status.CONFIRMED,
                analyst=(analyst or "").strip(),
                standard=standard.strip(),
                reason=reason,
            )
        transaction.detail = {"spectra": list(dict.fromkeys(spectrum_ids)), "standard": standard.strip()}
    with library.reading() as connection:
        confirmed = tuple(get_spectrum(connection, i) for i in dict.fromkeys(spectrum_ids))
        return ConfirmResult(confirmed, standard.strip(), (analyst or "").strip(), library_state(connection), doubts)


def _require_undecided(entry: LibrarySpectrum) -> None:
    if entry.role is not Role.REFERENCE:
        raise RefusedError("it is an unknown, not a reference of a compound", "take it in with its compound first")
    if entry.status is Status.CONFIRMED:
        raise RefusedError("it is confirmed already", "nothing was changed")
    if entry.status is Status.WITHDRAWN:
        raise RefusedError("it was withdrawn", "take in a new measurement")
