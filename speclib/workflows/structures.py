"""Many compounds at once: from an SD file, or from a table of SMILES."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from speclib.errors import InvalidValueError, SpeclibError
from speclib.formats.tables import read_table, read_text
from speclib.model.compound import Compound
from speclib.model.intake import Skipped
from speclib.progress import SILENT, Progress
from speclib.store.compounds import compounds_by_id
from speclib.store.library import Library
from speclib.store.trail import library_state
from speclib.workflows.compounds import NewCompound, check_new_compound, write_compound

COLUMNS = ("compound", "smiles", "formula", "cas", "synonyms", "classes", "derivative_of", "derivative")
NAME_FIELDS = ("name", "compound", "compound_name", "iupac_name")
SDF_MARK = "$$$$"


@dataclass(frozen=True)
class CompoundsAdded:
    """Compounds that were added, records that were skipped with their reason, and the library state after."""

    compounds: tuple[Compound, ...]
    skipped: tuple[Skipped, ...]
    library_state: str

    def to_json(self) -> dict[str, Any]:
        """The result as plain values."""
        return {
            "schema": 1,
            "library_state": self.library_state,
            "compounds": [c.to_json() for c in self.compounds],
            "skipped": [s.to_json() for s in self.skipped],
        }


_Record = tuple[int, NewCompound | InvalidValueError]


def add_compounds_from(
    library: Library, path: Path, *, analyst: str | None, progress: Progress = SILENT
) -> CompoundsAdded:
    """Add the compounds of a file in one transaction; records that cannot be used are skipped with their reason.

    An SD file is known by its record ends; anything else is a CSV table with the column `smiles` and any of the other
    `COLUMNS`; synonyms and classes are separated by semicolons.

    Raises:
        InputFileError: the file as a whole cannot be read.
    """
    sd_file = SDF_MARK in read_text(path)
    # Parents first: a derivative may stand above the compound that it names.
    records = sorted(
        _of_sdf(path) if sd_file else _of_table(path),
        key=lambda record: isinstance(record[1], NewCompound) and bool(record[1].derivative_of),
    )
    word = "record" if sd_file else "line"
    added: list[int] = []
    skipped: list[Skipped] = []
    progress.start("compounds", len(records))
    try:
        with library.writing("compound add", analyst=analyst) as transaction:
            for number, new in records:
                progress.advance()
                try:
                    if isinstance(new, InvalidValueError):
                        raise new
                    with transaction.step():
                        added.append(write_compound(transaction, check_new_compound(new)))
                except SpeclibError as error:
                    skipped.append(Skipped(path.name, f"{path.name}, {word} {number}: {error}", number))
            transaction.detail = {"from": path.name, "compounds": len(added), "skipped": [s.reason for s in skipped]}
            if not added:
                transaction.abandon()
    finally:
        progress.finish()
    with library.reading() as connection:
        made = compounds_by_id(connection, added)
        return CompoundsAdded(tuple(made.values()), tuple(skipped), library_state(connection))


def _of_table(path: Path) -> Iterator[_Record]:
    for row in read_table(path, COLUMNS, ("smiles",)):
        yield (
            row.line,
            NewCompound(
                row["compound"] or row["smiles"],
                row["smiles"] or None,
                row["formula"] or None,
                row["cas"] or None,
                _list(row["synonyms"]),
                _list(row["classes"]),
                row["derivative_of"] or None,
                row["derivative"] or None,
            ),
        )


def _of_sdf(path: Path) -> Iterator[_Record]:
    from speclib.chemistry.molecule import records_of_sdf

    for record in records_of_sdf(read_text(path)):
        if not record.smiles:
            yield record.number, InvalidValueError("the structure cannot be read", "correct the record")
            continue
        name = record.name or next((record.fields[f] for f in NAME_FIELDS if record.fields.get(f)), record.smiles)
        yield (
            record.number,
            NewCompound(
                name,
                record.smiles,
                cas=record.fields.get("cas") or None,
                synonyms=_list(record.fields.get("synonyms", "")),
                classes=_list(record.fields.get("classes", "")),
            ),
        )


def _list(text: str) -> tuple[str, ...]:
    return tuple(part.strip() for part in text.replace("\n", ";").split(";") if part.strip())
