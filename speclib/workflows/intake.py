"""Intake: measured spectra into the library, checked at the door. One transaction and one event per file."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from speclib.chemistry.formula import parse_formula
from speclib.clock import utc_text
from speclib.curation.intake_checks import check_at_intake, check_same_conditions
from speclib.errors import InputFileError, LibraryError, RefusedError, SignatureMissingError, SpeclibError
from speclib.formats.reading import ReadOptions
from speclib.model.compound import Compound
from speclib.model.entry import LibrarySpectrum, Role, Status
from speclib.model.finding import Finding, Severity
from speclib.model.intake import IntakeResult, Skipped, TakenSpectrum
from speclib.model.spectrum import SourceFile, SourceSpectrum
from speclib.progress import SILENT, Progress
from speclib.store.compounds import compounds_by_id, find_by_inchikey, find_compounds_by_name
from speclib.store.library import Library
from speclib.store.spectra import (
    get_spectrum,
    insert_findings,
    insert_source,
    insert_spectrum,
    sign,
    spectra_of_compound,
    spectra_with_content,
)
from speclib.store.writing import WriteTransaction
from speclib.workflows.compounds import CheckedCompound, NewCompound, check_new_compound, write_compound
from speclib.workflows.confirm import require_gate
from speclib.workflows.manifest import ManifestRow, phase_named, read_manifest
from speclib.workflows.sources import RunSelection, read_source


@dataclass(frozen=True)
class IntakeOptions:
    """How to take spectra in: reading options, whether identical peaks may be stored again, which scans of a run."""

    reading: ReadOptions = field(default_factory=ReadOptions)
    replicate: bool = False
    selection: RunSelection | None = None


@dataclass(frozen=True)
class _Order:
    """One spectrum to be stored, as what; everything that needs no library has been checked."""

    found: SourceSpectrum
    row: ManifestRow
    compound: CheckedCompound | None
    existing_name: str | None


def intake_files(
    library: Library,
    paths: Sequence[Path],
    *,
    analyst: str | None,
    options: IntakeOptions | None = None,
    compound: NewCompound | None = None,
    progress: Progress = SILENT,
) -> IntakeResult:
    """Take in all spectra of files, as unknowns, or as provisional references of `compound`.

    A file that cannot be read is skipped with its reason; the others go in.
    """
    rows = [ManifestRow(0, path, None, compound, Status.PROVISIONAL, None, None, {}) for path in paths]
    return _intake(library, rows, [], analyst, options or IntakeOptions(), progress)


def intake_manifest(
    library: Library,
    manifest: Path,
    *,
    analyst: str | None,
    options: IntakeOptions | None = None,
    progress: Progress = SILENT,
) -> IntakeResult:
    """Take in what a manifest lists. A row that cannot be used is skipped with its reason; the others go in.

    Raises:
        InputFileError: the manifest as a whole cannot be read.
    """
    rows, bad = read_manifest(manifest)
    return _intake(
        library, rows, [Skipped(b.file, b.reason, b.line) for b in bad], analyst, options or IntakeOptions(), progress
    )


def _intake(
    library: Library,
    rows: Sequence[ManifestRow],
    skipped: list[Skipped],
    analyst: str | None,
    options: IntakeOptions,
    progress: Progress,
) -> IntakeResult:
    if not (analyst or "").strip():
        raise SignatureMissingError
    by_file: dict[Path, list[ManifestRow]] = {}
    # Parents first: a derivative may stand above the compound that it names.
    for row in sorted(rows, key=lambda r: bool(r.compound and r.compound.derivative_of)):
        by_file.setdefault(row.path, []).append(row)
    taken: list[TakenSpectrum] = []
    progress.start("intake", len(by_file))
    try:
        for path, its_rows in by_file.items():
            try:
                more, refused = _intake_file(library, path, its_rows, analyst, options)
            except LibraryError as error:
                # The files before this one are in the library: say so by going on to the result, not by ending here.
                more, refused = [], [Skipped(path.name, str(error))]
            taken.extend(more)
            skipped.extend(refused)
            progress.advance(path.name)
    finally:
        progress.finish()
    return IntakeResult(tuple(taken), tuple(skipped), library.state())


def _intake_file(
    library: Library, path: Path, rows: Sequence[ManifestRow], analyst: str | None, options: IntakeOptions
) -> tuple[list[TakenSpectrum], list[Skipped]]:
    """Parse and check a file before the lock is taken, then store its spectra in one transaction."""
    orders: list[_Order] = []
    skipped: list[Skipped] = []
    source: SourceFile | None = None
    read: dict[ReadOptions, SourceFile] = {}
    for row in rows:
        try:
            reading = _reading(options.reading, row)
            if reading not in read:
                read[reading] = read_source(path, reading, options.selection)
            source = read[reading]
            orders.extend(_orders(source, row))
        except SpeclibError as error:
            skipped.append(Skipped(row.path.name or str(row.path), _with_line(row, error), row.line or None))
    if source is None or not orders:
        return [], skipped
    taken: list[TakenSpectrum] = []
    with library.writing("intake", analyst=analyst) as transaction:
        for order in orders:
            try:
                with transaction.step():
                    taken.append(_store(transaction, library, source, order, analyst or "", options))
            except SpeclibError as error:
                skipped.append(Skipped(source.file_name, _with_line(order.row, error), order.row.line or None))
        transaction.detail = {
            "file": source.file_name,
            "sha256": source.sha256,
            "spectra": [t.spectrum_id for t in taken if not t.already_held],
            "already_held": [t.spectrum_id for t in taken if t.already_held],
            "skipped": [s.reason for s in skipped],
        }
        if all(t.already_held for t in taken):
            transaction.abandon()
    return taken, skipped


def _reading(options: ReadOptions, row: ManifestRow) -> ReadOptions:
    return options if row.mass_accuracy is None else replace(options, mass_accuracy=row.mass_accuracy)


def _with_line(row: ManifestRow, error: SpeclibError) -> str:
    return f"manifest line {row.line}: {error}" if row.line else str(error)


def _orders(source: SourceFile, row: ManifestRow) -> list[_Order]:
    chosen = [s for s in source.spectra if row.index is None or s.index == row.index]
    if not chosen:
        raise InputFileError(
            source.file_name,
            f"has no spectrum {row.index}, only {len(source.spectra)}",
            advice="correct the index",
        )
    if row.compound is not None and len(chosen) > 1:
        raise InputFileError(
            source.file_name,
            f"holds {len(chosen)} spectra, but one compound is given",
            advice="name one of them with the column index",
        )
    return [_order(found, row) for found in chosen]


def _order(found: SourceSpectrum, row: ManifestRow) -> _Order:
    measurement = found.spectrum.measurement.with_overrides(**row.measured)
    measurement = replace(measurement, phase=phase_named(measurement.phase))
    found = replace(found, spectrum=replace(found.spectrum, measurement=measurement))
    checked, existing = None, None
    if row.compound is not None:
        if row.compound.smiles or row.compound.formula:
            checked = check_new_compound(row.compound)
        elif found.smiles:
            checked = check_new_compound(replace(row.compound, smiles=found.smiles))
        else:
            existing = row.compound.name
    return _Order(found, row, checked, existing)


def _store(
    transaction: WriteTransaction,
    library: Library,
    source: SourceFile,
    order: _Order,
    analyst: str,
    options: IntakeOptions,
) -> TakenSpectrum:
    connection, found = transaction.connection, order.found
    compound = _compound(transaction, order)
    same = spectra_with_content(connection, found.spectrum.content_hash)
    held = None if options.replicate else _held(same, compound)
    if held:
        gone = ", which was withdrawn" if held.status is Status.WITHDRAWN else ""
        remark = f"its peaks are held already as {held.label}{gone}; nothing was stored (--replicate stores them again)"
        differing = _differing(held, order)
        if differing:
            remark += f"; what this row says differently was NOT taken over: {', '.join(differing)}"
        return _taken(found, held.id, compound, _status_text(held), (), already_held=True, remark=remark)
    formula = parse_formula(compound.formula) if compound and compound.formula else None
    others = [e for e in same if not _is_of(e, compound)] if options.replicate else same
    findings = check_at_intake(found, formula, others, compound.cas if compound else None)
    if compound:
        siblings = [e for e in spectra_of_compound(connection, compound.id) if e.status is not Status.WITHDRAWN]
        findings += check_same_conditions(found.spectrum, siblings)
    if order.row.status is Status.CONFIRMED:
        require_gate(compound, order.row.standard, [f.reason for f in findings if f.severity is Severity.FAULT])
    spectrum_id = insert_spectrum(
        transaction,
        found,
        role=Role.REFERENCE if compound else Role.UNKNOWN,
        status=Status.PROVISIONAL if compound else None,
        compound_id=compound.id if compound else None,
        source_id=insert_source(transaction, source, utc_text(library.clock())),
        molecular_mass=formula.nominal_mass if formula else None,
    )
    insert_findings(transaction, spectrum_id, findings)
    if order.row.status is Status.CONFIRMED:
        sign(
            transaction,
            get_spectrum(connection, spectrum_id),
            Status.CONFIRMED,
            analyst=analyst,
            standard=order.row.standard,
            reason="sign-off imported",
            imported=True,
        )
    status = order.row.status.value if compound else Role.UNKNOWN.value
    name_remark = None
    if compound and order.row.compound and order.row.compound.name.casefold() != compound.name.casefold():
        name_remark = f"the structure of {order.row.compound.name} is held under the name {compound.name}"
    return _taken(found, spectrum_id, compound, status, tuple(findings), remark=name_remark)


def _compound(transaction: WriteTransaction, order: _Order) -> Compound | None:
    """The compound of a reference: held already by structure or name, or made now."""
    connection = transaction.connection
    if order.compound and order.compound.structure:
        held = find_by_inchikey(connection, order.compound.structure.inchikey)
        if held is None:
            return _new_compound(transaction, order.compound)
        _require_name_free(find_compounds_by_name(connection, order.compound.new.name), held, order.compound.new.name)
        return held
    wanted = order.compound.new.name if order.compound else order.existing_name
    if wanted is None:
        return None
    found = find_compounds_by_name(connection, wanted)
    if len(found) == 1:
        return found[0]
    if found:
        raise RefusedError(f"{wanted!r} means {len(found)} compounds", "give the SMILES")
    if order.compound:
        return _new_compound(transaction, order.compound)
    raise RefusedError(f"the library holds no compound {wanted!r} yet", "give its SMILES in the column smiles")


def _require_name_free(named: Sequence[Compound], held: Compound, name: str) -> None:
    """A structure that is held may come under another name, but not under the name of another compound."""
    other = next((c for c in named if c.id != held.id), None)
    if other is not None:
        smiles = other.structure.smiles if other.structure else "no SMILES"
        raise RefusedError(
            f"{name} is held already as compound {other.id} ({smiles}), but the SMILES given is that of {held.name}",
            "correct one of the two",
        )


def _new_compound(transaction: WriteTransaction, checked: CheckedCompound) -> Compound:
    compound_id = write_compound(transaction, checked)
    return compounds_by_id(transaction.connection, [compound_id])[compound_id]


def _held(same: Sequence[LibrarySpectrum], compound: Compound | None) -> LibrarySpectrum | None:
    """A held spectrum that makes storing these peaks again pointless: of the same compound, or any for an unknown."""
    for entry in same:
        if compound is None or _is_of(entry, compound):
            return entry
    return None


def _is_of(entry: LibrarySpectrum, compound: Compound | None) -> bool:
    """Whether a held spectrum belongs to the compound (an unknown to none)."""
    held = entry.compound.id if entry.compound else None
    return held == (compound.id if compound else None)


def _differing(held: LibrarySpectrum, order: _Order) -> list[str]:
    """What an order says of a held spectrum that the library does not: a silent loss of corrections would be worse."""
    stored = held.spectrum.measurement.known()
    stated = order.found.spectrum.measurement.known()
    differing = [name for name, value in stated.items() if not _same(stored.get(name), value)]
    if order.row.status is Status.CONFIRMED and held.status is Status.PROVISIONAL:
        differing.insert(0, f"status confirmed (use `speclib confirm {held.id}`)")
    return differing


def _same(a: object, b: object) -> bool:
    if isinstance(a, float) and isinstance(b, float):
        return math.isclose(a, b, rel_tol=1e-9)
    return a == b


def _status_text(entry: LibrarySpectrum) -> str:
    return entry.status.value if entry.status else entry.role.value


def _taken(
    found: SourceSpectrum,
    spectrum_id: int,
    compound: Compound | None,
    status: str,
    findings: tuple[Finding, ...],
    *,
    already_held: bool = False,
    remark: str | None = None,
) -> TakenSpectrum:
    return TakenSpectrum(
        found.file_name,
        found.index,
        spectrum_id,
        compound.id if compound else None,
        status,
        findings,
        already_held,
        remark,
    )
