"""What the labels of a JCAMP-DX block say of the measurement; every label and comment is kept verbatim besides.

Labels of mass spectra: Lampen et al., Appl. Spectrosc. 1994, 48, 1545. A value of a common label that cannot be read is
a remark, not a refusal: it stays verbatim. Nothing is taken from comments, titles or defaults: 70 eV is never assumed.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from typing import Any

from speclib.formats import quantities as q
from speclib.formats.assembling import Labels
from speclib.formats.jcamp_ionisation import ENERGIES, MODES, ionisation_notes
from speclib.formats.jcamp_records import Block, Record, normalised_label
from speclib.formats.jcamp_tables import TABLE_LABELS, form_of
from speclib.formats.text_document import TextDocument, shown

_TEXTS = {
    ".INLET": "inlet",
    ".SPECTROMETERTYPE": "analyser",
    "SPECTROMETERDATASYSTEM": "instrument",
    "SAMPLEDESCRIPTION": "sample",
    "LONGDATE": "acquired_at",
}
PRIVATE_TEXTS = (
    "carrier_gas", "column", "programme", "method", "solvent", "derivatisation", "analyst", "background", "blank",
    "comment",
)  # fmt: skip
PRIVATE_QUANTITIES = {
    "mz_from": q.MZ,
    "mz_to": q.MZ,
    "threshold": q.NO_UNIT,
    "scan_rate_hz": q.kept_unit(q.RATE),
    "amount_on_column_ng": q.kept_unit(q.AMOUNT),
}
_CLAIMS = {
    "TITLE": "title",
    "MOLFORM": "formula",
    "CASREGISTRYNO": "cas",
    "$SMILES": "smiles",
    "$INCHIKEY": "inchikey",
}
_NAMES = ("CASNAME", "NAMES")
_COMPOUND = ("MOLFORM", "CASREGISTRYNO", "$SMILES", "$INCHIKEY", *_NAMES)
"""Labels of a LINK block that hold for the blocks inside it."""


def private_name(field: str) -> str:
    """The private label under which a field of `Measurement` that has no label of its own is written."""
    return "$" + field.upper().replace("_", " ")


_QUANTITIES = {
    **dict.fromkeys(ENERGIES, ("electron_energy_ev", q.ENERGY)),
    ".RETENTIONTIME": ("retention_time_s", q.SECONDS),
    ".SOURCETEMPERATURE": ("source_temperature_c", q.kept_unit(q.TEMPERATURE)),
    "$RETENTIONINDEX": ("retention_index", q.NO_UNIT),
    **{normalised_label(private_name(field)): (field, unit) for field, unit in PRIVATE_QUANTITIES.items()},
}
_READ: dict[str, tuple[str, Callable[[str], Any]]] = {
    normalised_label(private_name("phase")): ("phase", q.parse_phase),
    normalised_label(private_name("scans_averaged")): ("scans_averaged", q.parse_whole_number),
}
_RANGE = ".ACQUISITIONRANGE"
_ACCURACY = "$MASSACCURACY"
_TEXTS |= {normalised_label(private_name(field)): field for field in PRIVATE_TEXTS}
_FIELDS: dict[str, str] = {
    **_TEXTS,
    **_CLAIMS,
    **{label: field for label, (field, _) in _QUANTITIES.items()},
    **{label: field for label, (field, _) in _READ.items()},
    **dict.fromkeys(MODES, "ionisation"),
    **{label: label for label in _NAMES},
    _RANGE: "scanned range",
    _ACCURACY: "mass accuracy",
}


def read_block_labels(document: TextDocument, block: Block, outer: Sequence[Block] = ()) -> Labels:
    """Read the labels of one block; compound data it does not state are those of the LINK blocks around it.

    `outer` are these blocks, the outermost first.

    Raises:
        InputFileError: a label of meaning twice with different values; ions that are not read; a mass accuracy that is
            not known.
    """
    labels = Labels()
    seen: dict[str, Record] = {}
    for record in block.records:
        table = record.label in TABLE_LABELS or record.label == "PEAKASSIGNMENTS"
        if not record.derived:
            labels.keep(record.name, form_of(record) if table else record.value, record.line)
        field = _FIELDS.get(record.label)
        if field is None or not record.value:
            continue
        if field in seen:
            if seen[field].value != record.value:
                raise document.error(
                    f"{record.heading} says {shown(record.value)}, but line {seen[field].line} "
                    f"says {shown(seen[field].value)}",
                    line=record.line,
                    advice="keep one of them",
                )
            continue
        seen[field] = record
        _apply(document, labels, record)
    for comment in block.comments:
        if comment.text:
            labels.keep(f"$$ line {comment.line}", comment.text, comment.line)
    for around in reversed(outer):
        _inherit(document, labels, around)
    labels.notes += ionisation_notes(block, outer, labels)
    return labels


def _inherit(document: TextDocument, labels: Labels, outer: Block) -> None:
    """Take compound data from a LINK block, all or nothing: a block on another compound shares none of them."""
    for record in outer.records:
        labels.keep(f"LINK {record.name}", record.value, record.line)
    found = Labels()
    for record in outer.records:
        if record.label in _COMPOUND and record.value:
            _apply(document, found, record)
    for claim, value in found.claims.items():
        own = labels.claims.get(claim)
        if own is not None and _compared(claim, own) != _compared(claim, value):
            labels.notes.append(
                f"the block says {shown(own)} where the LINK block of line {outer.line} says {shown(value)}: "
                "nothing was taken over from there"
            )
            return
    labels.claims = {**found.claims, **labels.claims}
    labels.names += found.names


def _compared(claim: str, value: str) -> str:
    """A claim as two spellings of it are compared: formulas without blanks and counts of 1, numbers without blanks."""
    packed = "".join(value.split())
    return re.sub(r"(?<![0-9])1(?![0-9])", "", packed) if claim == "formula" else packed


def _apply(document: TextDocument, labels: Labels, record: Record) -> None:
    value = record.unfolded
    if record.label in _TEXTS:
        labels.measurement[_TEXTS[record.label]] = value
    elif record.label in _CLAIMS:
        # `0 - 00 - 0` is how some programs write that there is no number.
        if record.label.startswith("$"):
            value = value.replace("\n", "")
        if record.label != "CASREGISTRYNO" or value.translate(str.maketrans("", "", " -0")):
            labels.claims[_CLAIMS[record.label]] = value
    elif record.label in _NAMES:
        labels.names += [name for name in value.split("\n") if name]
    elif record.label in _QUANTITIES:
        field, unit = _QUANTITIES[record.label]
        _try(labels, record, lambda: {field: q.parse_quantity(value, unit)})
    elif record.label in _READ:
        field, read = _READ[record.label]
        _try(labels, record, lambda: {field: read(value)})
    elif record.label == _RANGE:
        _try(labels, record, lambda: dict(zip(("mz_from", "mz_to"), q.parse_range(value), strict=True)))
    elif record.label in MODES:
        labels.measurement["ionisation"] = _required(
            document, record, q.parse_ionisation, "export a spectrum of electron or chemical ionisation"
        )
    else:
        labels.mass_accuracy = _required(document, record, q.parse_mass_accuracy_label, "write unit or accurate")


def _try(labels: Labels, record: Record, read: Callable[[], dict[str, Any]]) -> None:
    try:
        labels.measurement.update(read())
    except q.ValueTextError as error:
        labels.notes.append(f"{record.heading} {shown(record.value)} (line {record.line}) was not used: it {error}")


def _required(document: TextDocument, record: Record, read: Callable[[str], Any], advice: str) -> Any:
    try:
        return read(record.value)
    except q.ValueTextError as error:
        raise document.error(
            f"{record.heading} {shown(record.value)} {error}", line=record.line, advice=advice
        ) from error
