"""What the labels of a JCAMP-DX block say of the measurement; every label and comment is kept verbatim besides.

Labels of mass spectra: Lampen et al., Appl. Spectrosc. 1994, 48, 1545. A value of a common label that cannot be read is
a remark, not a refusal: it stays verbatim. Nothing is taken from comments, titles or defaults: 70 eV is never assumed.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from speclib.formats import quantities as q
from speclib.formats.assembling import Labels
from speclib.formats.jcamp_records import Block, Record
from speclib.formats.jcamp_tables import TABLE_LABELS, form_of
from speclib.formats.text_document import TextDocument, shown

_TEXTS = {
    ".INLET": "inlet",
    ".SPECTROMETERTYPE": "analyser",
    "SPECTROMETERDATASYSTEM": "instrument",
    "SAMPLEDESCRIPTION": "sample",
    "LONGDATE": "acquired_at",
}
_CLAIMS = {
    "TITLE": "title",
    "MOLFORM": "formula",
    "CASREGISTRYNO": "cas",
    "$SMILES": "smiles",
    "$INCHIKEY": "inchikey",
}
_QUANTITIES = {
    ".IONIZATIONENERGY": ("electron_energy_ev", q.ENERGY),
    ".IONISATIONENERGY": ("electron_energy_ev", q.ENERGY),
    ".RETENTIONTIME": ("retention_time_s", q.SECONDS),
    ".SOURCETEMPERATURE": ("source_temperature_c", q.kept_unit(q.TEMPERATURE)),
    "$RETENTIONINDEX": ("retention_index", q.NO_UNIT),
}
_MODES = (".IONIZATIONMODE", ".IONISATIONMODE")
_RANGE = ".ACQUISITIONRANGE"
_ACCURACY = "$MASSACCURACY"
_FIELDS: dict[str, str] = {
    **_TEXTS,
    **_CLAIMS,
    **{label: field for label, (field, _) in _QUANTITIES.items()},
    **dict.fromkeys(_MODES, "ionisation"),
    _RANGE: "scanned range",
    _ACCURACY: "mass accuracy",
}


def read_block_labels(document: TextDocument, block: Block) -> Labels:
    """Read the labels of one block.

    Raises:
        InputFileError: a label of meaning twice with different values; ions that are not read; a mass accuracy that is
            not known.
    """
    labels = Labels()
    seen: dict[str, Record] = {}
    for record in block.records:
        table = record.label in TABLE_LABELS
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
    return labels


def _apply(document: TextDocument, labels: Labels, record: Record) -> None:
    value = record.value
    if record.label in _TEXTS:
        labels.measurement[_TEXTS[record.label]] = value
    elif record.label in _CLAIMS:
        # `0 - 00 - 0` is how some programs write that there is no number.
        if record.label != "CASREGISTRYNO" or value.translate(str.maketrans("", "", " -0")):
            labels.claims[_CLAIMS[record.label]] = value
    elif record.label in _QUANTITIES:
        field, unit = _QUANTITIES[record.label]
        _try(labels, record, lambda: {field: q.parse_quantity(value, unit)})
    elif record.label == _RANGE:
        _try(labels, record, lambda: dict(zip(("mz_from", "mz_to"), q.parse_range(value), strict=True)))
    elif record.label in _MODES:
        labels.measurement["ionisation"] = _required(
            document, record, q.parse_ionisation, "export a spectrum of positive ions"
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
