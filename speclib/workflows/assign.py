"""Assignments by hand: one at a time, or from a CSV."""

from __future__ import annotations

import sqlite3
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from speclib.annotation.manual import CheckedAssignment, check_manual_assignment
from speclib.errors import InvalidValueError, RefusedError, SpeclibError
from speclib.formats.tables import TableRow, number_in_cell, read_table, whole_number_in_cell
from speclib.model.assignment import Assignment, AssignmentState
from speclib.model.entry import LibrarySpectrum, Status
from speclib.model.intake import Skipped
from speclib.progress import SILENT, Progress
from speclib.search.rows import reference_row
from speclib.store.assignments import assignments_of, insert_manual
from speclib.store.compounds import structure_id_of
from speclib.store.library import Library
from speclib.store.spectra import find_spectrum_by_source, get_spectrum
from speclib.store.trail import library_state
from speclib.store.writing import WriteTransaction

COLUMNS = ("file", "spectrum_id", "index", "mz", "formula", "neutral_loss", "mechanism", "note")


@dataclass(frozen=True)
class NewAssignment:
    """What a person says of a peak; the spectrum is named by number, or by file name and index. `place` is its CSV
    line.
    """

    mz: float
    formula: str
    mechanism: str
    neutral_loss: str | None = None
    note: str = ""
    spectrum_id: int | None = None
    file: str | None = None
    index: int | None = None
    place: str = ""
    line: int | None = None


@dataclass(frozen=True)
class AssignResult:
    """Assignments recorded, those that stood already, and what was skipped with its reason."""

    assignments: tuple[Assignment, ...]
    already_held: int
    skipped: tuple[Skipped, ...]
    library_state: str

    def to_json(self) -> dict[str, Any]:
        """The result as plain values."""
        return {
            "schema": 1,
            "library_state": self.library_state,
            "assignments": [a.to_json() for a in self.assignments],
            "already_held": self.already_held,
            "skipped": [s.to_json() for s in self.skipped],
        }


def assign_from_csv(library: Library, path: Path, *, analyst: str | None, progress: Progress = SILENT) -> AssignResult:
    """Record assignments from a CSV in one transaction; rows that cannot be used are skipped with their reason.

    Raises:
        InputFileError: the table as a whole cannot be read.
    """
    wanted: list[NewAssignment] = []
    skipped: list[Skipped] = []
    for row in read_table(path, COLUMNS, ("mz", "formula", "mechanism")):
        place = f"{path.name}, line {row.line}"
        try:
            wanted.append(_from_row(row, place))
        except SpeclibError as error:
            skipped.append(Skipped(row["file"] or row["spectrum_id"], f"{place}: {error}", row.line))
    result = _assign(library, wanted, skipped, analyst, progress, {"from": path.name})
    return replace(result, skipped=tuple(sorted(result.skipped, key=lambda s: s.line or 0)))


def assign_peak(library: Library, new: NewAssignment, *, analyst: str | None) -> AssignResult:
    """Record one assignment.

    Raises:
        SpeclibError: why it cannot be recorded.
    """
    return _assign(library, [new], [], analyst, SILENT, {}, alone=True)


def _from_row(row: TableRow, place: str) -> NewAssignment:
    mz = number_in_cell(row["mz"], "mz")
    if mz is None:
        raise InvalidValueError("the column mz is empty", "give the m/z of the peak")
    if not row["formula"]:
        raise InvalidValueError("the column formula is empty", "give the ion formula")
    spectrum_id = whole_number_in_cell(row["spectrum_id"], "spectrum_id")
    if spectrum_id is None and not row["file"]:
        raise InvalidValueError("neither file nor spectrum_id is given", "name the spectrum")
    return NewAssignment(
        mz,
        row["formula"],
        row["mechanism"],
        row["neutral_loss"] or None,
        row["note"],
        spectrum_id,
        row["file"] or None,
        whole_number_in_cell(row["index"], "index"),
        place,
        row.line,
    )


def _assign(
    library: Library,
    wanted: Sequence[NewAssignment],
    skipped: list[Skipped],
    analyst: str | None,
    progress: Progress,
    detail: dict[str, Any],
    *,
    alone: bool = False,
) -> AssignResult:
    made: list[tuple[int, int]] = []
    held = 0
    entries: dict[tuple[object, ...], LibrarySpectrum] = {}
    progress.start("assign", len(wanted))
    try:
        with library.writing("assign", analyst=analyst) as transaction:
            for new in wanted:
                progress.advance()
                try:
                    entry = _entry(transaction.connection, new, entries)
                    written = _record(transaction, entry, new)
                except SpeclibError as error:
                    if alone:
                        raise
                    skipped.append(Skipped(new.file or str(new.spectrum_id), f"{new.place}: {error}", new.line))
                    continue
                if written is None:
                    held += 1
                else:
                    made.append((entry.id, written))
            transaction.detail = {**detail, "assignments": len(made), "skipped": [s.reason for s in skipped]}
            if not made:
                transaction.abandon()
    finally:
        progress.finish()
    return _result(library, made, held, skipped)


def _result(library: Library, made: list[tuple[int, int]], held: int, skipped: list[Skipped]) -> AssignResult:
    with library.reading() as connection:
        wanted = {assignment_id for _, assignment_id in made}
        recorded = [
            assignment
            for spectrum_id in dict.fromkeys(spectrum_id for spectrum_id, _ in made)
            for assignment in assignments_of(connection, spectrum_id)
            if assignment.id in wanted
        ]
        return AssignResult(tuple(recorded), held, tuple(skipped), library_state(connection))


def _entry(
    connection: sqlite3.Connection, new: NewAssignment, known: dict[tuple[object, ...], LibrarySpectrum]
) -> LibrarySpectrum:
    key = (new.spectrum_id, new.file, new.index)
    if key not in known:
        if new.spectrum_id is not None:
            entry = get_spectrum(connection, new.spectrum_id)
            if new.file is not None and entry.source_file != new.file:
                raise RefusedError(f"{entry.label} does not come from {new.file}", "correct spectrum_id or file")
        else:
            entry = find_spectrum_by_source(connection, new.file or "", new.index)
        known[key] = entry
    return known[key]


def _record(transaction: WriteTransaction, entry: LibrarySpectrum, new: NewAssignment) -> int | None:
    """Write a checked assignment; None when the same ion stands accepted at that peak already."""
    if entry.status is Status.WITHDRAWN:
        raise RefusedError(f"{entry.label} was withdrawn", "assign a reference that is in use")
    checked: CheckedAssignment = check_manual_assignment(
        reference_row(entry).comparable,
        mz=new.mz,
        formula=new.formula,
        neutral_loss=new.neutral_loss,
        mechanism=new.mechanism,
        note=new.note,
    )
    for held in assignments_of(transaction.connection, entry.id, (AssignmentState.ACCEPTED,)):
        if held.peak == checked.peak and held.formula == str(checked.formula) and held.case_id is None:
            if held.mechanism == checked.mechanism:
                return None
            raise RefusedError(
                f"m/z {checked.mz:g} of {entry.label} is assigned as {held.formula} by {held.mechanism!r} already",
                "one ion has one assignment per peak",
            )
    return insert_manual(
        transaction,
        spectrum_id=entry.id,
        structure_id=structure_id_of(transaction.connection, entry.compound.id) if entry.compound else None,
        peak=checked.peak,
        formula=str(checked.formula),
        neutral_loss=str(checked.neutral_loss),
        mechanism=checked.mechanism,
        parity=checked.parity,
        note=checked.note,
    )
