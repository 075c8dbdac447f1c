"""The manifest: a CSV that says what each file holds. Only `file` is required; paths are relative to the manifest."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

from speclib.chemistry.cas import is_valid_cas
from speclib.errors import InputFileError, InvalidValueError
from speclib.formats.tables import TableRow, number_in_cell, read_table, whole_number_in_cell
from speclib.model.entry import Status
from speclib.model.spectrum import MassAccuracy, PhaseChemistry
from speclib.units import seconds_from_minutes
from speclib.workflows.compounds import NewCompound

COLUMNS = (
    "file", "index", "compound", "smiles", "cas", "classes", "derivative_of", "status", "standard", "rt_min", "ri",
    "phase", "method", "mass_accuracy", "mz_from", "mz_to", "instrument", "note",
)  # fmt: skip


@dataclass(frozen=True)
class ManifestRow:
    """One checked row. `compound` is None for an unknown; `measured` overrides what the file says."""

    line: int
    path: Path
    index: int | None
    compound: NewCompound | None
    status: Status
    standard: str | None
    mass_accuracy: MassAccuracy | None
    measured: dict[str, Any]


@dataclass(frozen=True)
class BadRow:
    """A row that cannot be used; the others can."""

    file: str
    reason: str
    line: int


def read_manifest(path: Path) -> tuple[list[ManifestRow], list[BadRow]]:
    """Read a manifest; rows that cannot be used are returned with their reason.

    Raises:
        InputFileError: the table as a whole cannot be read, or has no rows.
    """
    rows: list[ManifestRow] = []
    bad: list[BadRow] = []
    table = read_table(path, COLUMNS, ("file",))
    for cells in table:
        try:
            rows.append(_manifest_row(path.parent, cells))
        except InvalidValueError as error:
            bad.append(BadRow(cells["file"] or path.name, f"{path.name}, line {cells.line}: {error}", cells.line))
    if not table:
        raise InputFileError(path.name, "has a header but no rows", advice="add one row per spectrum")
    return rows, bad


def _manifest_row(folder: Path, cells: TableRow) -> ManifestRow:
    if not cells["file"]:
        raise InvalidValueError("the column file is empty", "name the file of the spectrum")
    if cells["cas"] and not is_valid_cas(cells["cas"]):
        raise InvalidValueError(
            f"{cells['cas']!r} is not a CAS number (form or check digit is wrong)", "check the digits"
        )
    compound = None
    if cells["compound"] or cells["smiles"]:
        compound = NewCompound(
            name=cells["compound"] or cells["smiles"],
            smiles=cells["smiles"] or None,
            cas=cells["cas"] or None,
            classes=tuple(part.strip() for part in cells["classes"].split(";") if part.strip()),
            derivative_of=cells["derivative_of"] or None,
        )
    minutes = number_in_cell(cells["rt_min"], "rt_min")
    return ManifestRow(
        line=cells.line,
        path=folder / cells["file"],
        index=whole_number_in_cell(cells["index"], "index"),
        compound=compound,
        status=_status(cells["status"], compound),
        standard=cells["standard"] or None,
        mass_accuracy=mass_accuracy_named(cells["mass_accuracy"]),
        measured={
            "retention_time_s": None if minutes is None else seconds_from_minutes(minutes),
            "retention_index": number_in_cell(cells["ri"], "ri"),
            "phase": phase_named(cells["phase"]),
            "method": cells["method"] or None,
            "mz_from": number_in_cell(cells["mz_from"], "mz_from"),
            "mz_to": number_in_cell(cells["mz_to"], "mz_to"),
            "instrument": cells["instrument"] or None,
            "comment": cells["note"] or None,
        },
    )


def _status(text: str, compound: NewCompound | None) -> Status:
    if compound is None:
        if text:
            raise InvalidValueError(f"status {text!r} on a row without compound and smiles", "an unknown has no status")
        return Status.PROVISIONAL
    wanted = text.casefold() or Status.PROVISIONAL.value
    if wanted not in (Status.PROVISIONAL.value, Status.CONFIRMED.value):
        raise InvalidValueError(f"status {text!r} is not possible at intake", "write provisional or confirmed")
    return Status(wanted)


def mass_accuracy_named(text: str | None) -> MassAccuracy | None:
    """`unit` or `accurate`, or None for nothing.

    Raises:
        InvalidValueError: something else.
    """
    if not text:
        return None
    try:
        return MassAccuracy(text.casefold())
    except ValueError:
        raise InvalidValueError(f"mass accuracy {text!r} is not known", "write unit or accurate") from None


def phase_named(text: str | None) -> str | None:
    """The stationary phase by chemistry, written in any spacing or case; None for nothing.

    Raises:
        InvalidValueError: not one of the chemistries; they are listed.
    """
    if not text:
        return None

    def packed(name: str) -> str:
        return "".join(c for c in name.casefold() if c.isalnum() or c == "%")

    for phase in PhaseChemistry:
        if packed(text) == packed(phase.value):
            return phase.value
    known = ", ".join(phase.value for phase in PhaseChemistry)
    raise InvalidValueError(f"the phase {text!r} is not known", f"name its chemistry: {known}")
