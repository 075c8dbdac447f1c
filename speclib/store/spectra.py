"""Spectra and their findings: rows in, records out."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Iterable
from typing import Any

import numpy as np

from speclib.errors import AmbiguousEntryError, EntryNotFoundError
from speclib.model.entry import LibrarySpectrum, Role, Status
from speclib.model.finding import Finding, Severity
from speclib.model.spectrum import MassAccuracy, Measurement, SourceFile, SourceSpectrum, Spectrum
from speclib.store.canonical import canonical_json
from speclib.store.compounds import compounds_by_id
from speclib.store.schema import LOCAL_IDS, is_storable
from speclib.store.writing import WriteTransaction

_OWN_COLUMNS = ("mz_from", "mz_to", "retention_time_s", "retention_index")
"""Measurement fields with a column of their own; the others live in the acquisition JSON."""


def _spectrum(row: sqlite3.Row) -> Spectrum:
    measured = json.loads(row["acquisition"])
    measured |= {name: row[name] for name in _OWN_COLUMNS if row[name] is not None}
    return Spectrum(
        np.frombuffer(row["mz"], dtype="<f8"),
        np.frombuffer(row["intensity"], dtype="<f8"),
        MassAccuracy(row["mass_accuracy"]),
        Measurement(**measured),
        json.loads(row["raw_fields"]),
    )


def _entries(connection: sqlite3.Connection, where: str, values: Iterable[object] = ()) -> list[LibrarySpectrum]:
    rows = connection.execute(
        f"SELECT p.*, f.file_name FROM spectra p LEFT JOIN sources f ON f.id = p.source_id WHERE {where} ORDER BY p.id",  # noqa: S608 (conditions from this module)
        tuple(values),
    ).fetchall()
    compounds = compounds_by_id(connection, (row["compound_id"] for row in rows if row["compound_id"] is not None))
    return [
        LibrarySpectrum(
            row["id"],
            row["uid"],
            Role(row["role"]),
            Status(row["status"]) if row["status"] else None,
            _spectrum(row),
            compounds.get(row["compound_id"]),
            row["file_name"],
            row["source_index"],
            row["molecular_mass"],
            row["rev"],
        )
        for row in rows
    ]


def get_spectrum(connection: sqlite3.Connection, spectrum_id: int) -> LibrarySpectrum:
    """A stored spectrum by its number.

    Raises:
        EntryNotFoundError: the library holds none of that number.
    """
    found = _entries(connection, "p.id = ?", (spectrum_id,)) if spectrum_id in LOCAL_IDS else []
    if not found:
        raise EntryNotFoundError(f"the library holds no spectrum {spectrum_id}", "see `speclib compound show NAME`")
    return found[0]


def find_spectrum_by_source(connection: sqlite3.Connection, file_name: str, index: int | None) -> LibrarySpectrum:
    """The one stored spectrum that was read from a file of that name (and index in it).

    Raises:
        EntryNotFoundError: none. AmbiguousEntryError: several; they are listed.
    """
    found = []
    if is_storable(file_name) and (index is None or index in LOCAL_IDS):
        found = _entries(connection, "f.file_name = ?1 AND (?2 IS NULL OR p.source_index = ?2)", (file_name, index))
    where = f"{file_name}, spectrum {index}" if index is not None else file_name
    if not found:
        raise EntryNotFoundError(f"no spectrum of {where} is in the library", "read the file with `speclib intake`")
    if len(found) > 1:
        listed = ", ".join(
            f"{e.id} (index {e.source_index}, {e.compound.name if e.compound else 'unknown'})" for e in found[:10]
        )
        raise AmbiguousEntryError(f"{where} means several spectra: {listed}", "give the spectrum_id or the index")
    return found[0]


def spectra_of_compound(connection: sqlite3.Connection, compound_id: int) -> list[LibrarySpectrum]:
    """All spectra of a compound, withdrawn ones included."""
    return _entries(connection, "p.compound_id = ?", (compound_id,))


def spectra_with_content(connection: sqlite3.Connection, content_hash: str) -> list[LibrarySpectrum]:
    """Stored spectra with exactly these peaks."""
    return _entries(connection, "p.content_hash = ?", (content_hash,))


def searchable_references(connection: sqlite3.Connection) -> list[LibrarySpectrum]:
    """All references that are not withdrawn, by id."""
    return _entries(connection, "p.role = 'reference' AND p.status <> 'withdrawn'")


def insert_source(transaction: WriteTransaction, source: SourceFile, read_at: str) -> int:
    """Record a source file once and return its id."""
    row = transaction.connection.execute(
        "SELECT id FROM sources WHERE sha256 = ? AND file_name = ?", (source.sha256, source.file_name)
    ).fetchone()
    if row:
        return int(row["id"])
    return transaction.insert(
        "sources", file_name=source.file_name, sha256=source.sha256, reader=source.reader, read_at=read_at
    )


def _named_row(transaction: WriteTransaction, table: str, name: str | None, **values: Any) -> int | None:
    if name is None:
        return None
    row = transaction.connection.execute(f"SELECT id FROM {table} WHERE name = ?", (name,)).fetchone()  # noqa: S608
    return int(row["id"]) if row else transaction.insert(table, name=name, **values)


def insert_spectrum(
    transaction: WriteTransaction,
    found: SourceSpectrum,
    *,
    role: Role,
    status: Status | None,
    compound_id: int | None,
    source_id: int | None,
    molecular_mass: int | None,
) -> int:
    """Add a spectrum with peaks as read and return its id; phase and method rows are made when new."""
    spectrum = found.spectrum
    measured = spectrum.measurement.known()
    own = {name: measured.pop(name, None) for name in _OWN_COLUMNS}
    phase = measured.get("phase")
    return transaction.insert(
        "spectra",
        role=role.value,
        status=status.value if status else None,
        compound_id=compound_id,
        source_id=source_id,
        source_index=found.index,
        mz=spectrum.mz.astype("<f8").tobytes(),
        intensity=spectrum.intensity.astype("<f8").tobytes(),
        peak_count=len(spectrum),
        content_hash=spectrum.content_hash,
        mass_accuracy=spectrum.mass_accuracy.value,
        molecular_mass=molecular_mass,
        phase_id=_named_row(transaction, "phases", phase, chemistry=phase),
        method_id=_named_row(transaction, "methods", measured.get("method"), instrument=measured.get("instrument")),
        acquisition=canonical_json(measured),
        raw_fields=canonical_json(dict(spectrum.raw_fields)),
        **own,
    )


def insert_findings(transaction: WriteTransaction, spectrum_id: int, findings: Iterable[Finding]) -> None:
    """Record findings of a spectrum, each once; those that stand already are left as they are."""
    held = transaction.connection.execute(
        "SELECT check_name, fingerprint FROM findings WHERE spectrum_id = ?", (spectrum_id,)
    )
    known = {(row["check_name"], row["fingerprint"]) for row in held}
    for key, finding in {(f.check, f.fingerprint): f for f in findings}.items():
        if key in known:
            continue
        transaction.insert(
            "findings",
            spectrum_id=spectrum_id,
            check_name=finding.check,
            severity=finding.severity.value,
            peaks=canonical_json(list(finding.peaks)),
            reason=finding.reason,
            source=finding.source,
            fingerprint=finding.fingerprint,
        )


def open_findings(connection: sqlite3.Connection, spectrum_id: int) -> list[Finding]:
    """Findings of a spectrum that nobody has answered."""
    rows = connection.execute(
        "SELECT * FROM findings WHERE spectrum_id = ? AND answer IS NULL ORDER BY id", (spectrum_id,)
    )
    return [
        Finding(r["check_name"], Severity(r["severity"]), r["reason"], r["source"], tuple(json.loads(r["peaks"])))
        for r in rows
    ]


def sign_offs(connection: sqlite3.Connection, spectrum_id: int) -> list[dict[str, Any]]:
    """Decisions on a reference, oldest first, with the time of each."""
    rows = connection.execute(
        "SELECT s.decision, s.analyst, s.standard, s.reason, s.imported, e.at FROM sign_offs s "
        "JOIN events e ON e.id = s.event_id WHERE s.spectrum_id = ? ORDER BY s.id",
        (spectrum_id,),
    )
    return [{**dict(row), "imported": bool(row["imported"])} for row in rows]


def sign(
    transaction: WriteTransaction,
    entry: LibrarySpectrum,
    status: Status,
    *,
    analyst: str,
    standard: str | None = None,
    reason: str | None = None,
    imported: bool = False,
) -> None:
    """Record a sign-off (`confirmed` or `withdrawn`) and set the status."""
    transaction.insert(
        "sign_offs",
        spectrum_id=entry.id,
        decision=status.value,
        analyst=analyst,
        standard=standard,
        reason=reason,
        imported=int(imported),
        event_id=transaction.event_id,
    )
    transaction.update("spectra", entry.id, expected_rev=entry.rev, status=status.value)
