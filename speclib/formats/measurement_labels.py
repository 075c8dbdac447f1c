"""The `# key: value` lines of delimited text: which keys are known, and how their values are read.

Known keys are the fields of `Measurement`, the claims of a `SourceSpectrum`, and everyday spellings of both. A quantity
without a unit, in the key or in the value, is asked about where more than one unit is common; nothing is assumed.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from speclib.formats import quantities as q
from speclib.formats.assembling import Labels
from speclib.formats.options import DecimalMark
from speclib.formats.text_document import TextDocument, shown

_TEXTS = (
    "analyser", "carrier_gas", "column", "programme", "method", "inlet", "solvent", "derivatisation", "instrument",
    "analyst", "acquired_at", "background", "blank", "sample", "comment",
)  # fmt: skip
_UNITS = {
    "mz_from": q.MZ,
    "mz_to": q.MZ,
    "threshold": q.NO_UNIT,
    "electron_energy_ev": q.ENERGY,
    "electron_energy": q.ENERGY,
    "source_temperature_c": q.kept_unit(q.TEMPERATURE),
    "source_temperature": q.TEMPERATURE,
    "scan_rate_hz": q.kept_unit(q.RATE),
    "scan_rate": q.RATE,
    "amount_on_column_ng": q.kept_unit(q.AMOUNT),
    "amount_on_column": q.AMOUNT,
    "retention_time_s": q.kept_unit(q.TIME),
    "retention_time_min": q.MINUTES,
    "retention_time": q.TIME,
    "retention_index": q.NO_UNIT,
}
_FIELD_OF = {
    "electron_energy": "electron_energy_ev",
    "source_temperature": "source_temperature_c",
    "scan_rate": "scan_rate_hz",
    "amount_on_column": "amount_on_column_ng",
    "retention_time_min": "retention_time_s",
    "retention_time": "retention_time_s",
}
_CLAIMS = ("title", "formula", "cas", "smiles", "inchikey")
_ALIASES = {
    "name": "title",
    "compound": "title",
    "compound_name": "title",
    "molecular_formula": "formula",
    "sum_formula": "formula",
    "molform": "formula",
    "cas_number": "cas",
    "cas_no": "cas",
    "cas_rn": "cas",
    "cas_registry_no": "cas",
    "cas_registry_number": "cas",
    "inchi_key": "inchikey",
    "ionization": "ionisation",
    "ionisation_mode": "ionisation",
    "ionization_mode": "ionisation",
    "ionisation_energy": "electron_energy",
    "ionization_energy": "electron_energy",
    "ionisation_energy_ev": "electron_energy_ev",
    "ionization_energy_ev": "electron_energy_ev",
    "analyzer": "analyser",
    "mass_analyzer": "analyser",
    "mass_analyser": "analyser",
    "oven_programme": "programme",
    "oven_program": "programme",
    "derivatization": "derivatisation",
    "rt": "retention_time",
    "rt_s": "retention_time_s",
    "rt_sec": "retention_time_s",
    "rt_min": "retention_time_min",
    "ri": "retention_index",
    "scan_range": "mz_range",
    "scanned_range": "mz_range",
    "mass_range": "mz_range",
    "acquisition_range": "mz_range",
    "acquired": "acquired_at",
    "operator": "analyst",
    "note": "comment",
}


@dataclass(frozen=True)
class LabelLine:
    """One `# key: value` line; the key is "" for a comment without a key."""

    line: int
    key: str
    value: str


def split_label(line: int, text: str) -> LabelLine:
    """Split a line that begins with `#` at its first colon or equals sign."""
    body = text.lstrip(" \t#").rstrip()
    match = re.match(r"([^:=]{1,80})[:=]", body)
    if match is None:
        return LabelLine(line, "", body)
    return LabelLine(line, match[1].strip(), body[match.end() :].strip())


def known_key(key: str) -> str | None:
    """The project's name of a key, or None when it is not known."""
    name = re.sub(r"[^a-z0-9]+", "_", key.lower().replace("m/z", "mz")).strip("_")
    name = _ALIASES.get(name, name)
    return name if name in _READERS or name in _UNITS else None


def read_labels(document: TextDocument, lines: list[LabelLine], decimal: DecimalMark | None) -> Labels:
    """Read the labelled lines; unknown keys and comments are kept verbatim. `decimal` is the mark of the peak table.

    Raises:
        InputFileError: a known key twice, or with a value that cannot be read.
    """
    labels = Labels()
    seen: dict[str, int] = {}
    targets: tuple[str, ...]
    for label in lines:
        name = known_key(label.key)
        if name is None:
            if label.key or label.value:
                labels.keep(label.key or f"comment in line {label.line}", label.value, label.line)
            continue
        if not label.value:
            continue
        targets = ("mz_from", "mz_to") if name == "mz_range" else (_FIELD_OF.get(name, name),)
        for target in targets:
            if target in seen and target != "comment":
                raise document.error(
                    f"{shown(label.key)} was already given in line {seen[target]}", line=label.line, advice="keep one"
                )
            seen[target] = label.line
        try:
            _apply(labels, name, label.value, decimal)
        except q.ValueTextError as error:
            raise document.error(
                f"the value {shown(label.value)} of {shown(label.key)} {error}",
                line=label.line,
                advice="correct the value, or leave it empty when it is not known",
            ) from error
    return labels


def _apply(labels: Labels, name: str, value: str, decimal: DecimalMark | None) -> None:
    if name in _UNITS:
        number = q.parse_quantity(value, _UNITS[name], decimal)
        labels.measurement[_FIELD_OF.get(name, name)] = number
        return
    _READERS[name](labels, value)


def _keep_text(name: str) -> Callable[[Labels, str], None]:
    def keep(labels: Labels, value: str) -> None:
        held = labels.measurement.get(name)
        labels.measurement[name] = value if held is None else f"{held}\n{value}"

    return keep


def _keep_claim(name: str) -> Callable[[Labels, str], None]:
    def keep(labels: Labels, value: str) -> None:
        labels.claims[name] = value

    return keep


def _keep_read(name: str, read: Callable[[str], Any]) -> Callable[[Labels, str], None]:
    def keep(labels: Labels, value: str) -> None:
        labels.measurement[name] = read(value)

    return keep


def _keep_range(labels: Labels, value: str) -> None:
    labels.measurement["mz_from"], labels.measurement["mz_to"] = q.parse_range(value)


def _keep_mass_accuracy(labels: Labels, value: str) -> None:
    labels.mass_accuracy = q.parse_mass_accuracy_label(value)


_READERS: dict[str, Callable[[Labels, str], None]] = {
    **{name: _keep_text(name) for name in _TEXTS},
    **{name: _keep_claim(name) for name in _CLAIMS},
    "ionisation": _keep_read("ionisation", q.parse_ionisation),
    "phase": _keep_read("phase", q.parse_phase),
    "scans_averaged": _keep_read("scans_averaged", q.parse_whole_number),
    "mz_range": _keep_range,
    "mass_accuracy": _keep_mass_accuracy,
}
