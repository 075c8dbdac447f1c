"""What a JCAMP-DX file leaves open about its ionisation: said in remarks, never filled in.

The everyday reference is electron ionisation at 70 eV, but files say so only sometimes, and now and then only in a
comment or the title. Such words are quoted, so that a person decides.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence

from speclib.formats.assembling import LOW_ENERGY_EV, Labels
from speclib.formats.jcamp_records import Block
from speclib.formats.jcamp_tables import TABLE_LABELS
from speclib.formats.text_document import shown

MODES = (".IONIZATIONMODE", ".IONISATIONMODE")
ENERGIES = (".IONIZATIONENERGY", ".IONISATIONENERGY")
_ENERGY = re.compile(r"(?<![0-9.])([0-9]{1,4}(?:\.[0-9]{1,6})?)[ \t]{0,3}e\.?V\b", re.IGNORECASE)
_CHEMICAL = re.compile(r"\b[NP]?CI\b|\bchemical[ -]ioni[sz]ation\b", re.IGNORECASE)
_SPEAKING = ("TITLE", "SAMPLEDESCRIPTION", "INSTRUMENTALPARAMETERS", ".INSTRUMENTPARAMETERS", "DATAPROCESSING")
_MAX_TEXTS = 200
_MAX_TEXT = 500


def ionisation_notes(block: Block, outer: Sequence[Block], labels: Labels) -> list[str]:
    """Remarks on an ionisation or electron energy that is not stated, or stated where it is not taken from."""
    notes = []
    texts = list(_speaking_texts(block, outer))
    if "ionisation" not in labels.measurement:
        notes.append(_not_stated(outer, texts))
    if "electron_energy_ev" not in labels.measurement:
        for text, line in texts:
            energy = _ENERGY.search(text)
            if energy is not None:
                low = float(energy[1]) < LOW_ENERGY_EV
                notes.append(
                    f"an electron energy of {energy[0]} stands only in the text {shown(text)} (line {line}) and was "
                    "not taken over" + ("; if it is true, it must not be mixed with 70 eV EI references" if low else "")
                )
                break
    return notes


def _not_stated(outer: Sequence[Block], texts: list[tuple[str, int]]) -> str:
    record = next((record for block in reversed(outer) if (record := block.find(*MODES)) and record.value), None)
    if record is not None:
        return (
            f"the ionisation is not stated in this block; the block around it says {shown(record.value)} "
            f"(line {record.line}), which was not taken over"
        )
    for text, line in texts:
        if _CHEMICAL.search(text):
            return (
                f"the ionisation is not stated; the text {shown(text, 100)} (line {line}) speaks of chemical "
                "ionisation: it must not be mixed with 70 eV EI references"
            )
    return "the ionisation is not stated; that it is EI at 70 eV was not assumed"


def _speaking_texts(block: Block, outer: Sequence[Block]) -> Iterator[tuple[str, int]]:
    """Titles, descriptions and comments, those of the block first, each with its line; bounded in number and length."""
    left = _MAX_TEXTS
    for source in (block, *reversed(outer)):
        for record in source.records:
            if record.label in _SPEAKING and record.label not in TABLE_LABELS and left:
                left -= 1
                yield record.value[:_MAX_TEXT], record.line
        for comment in source.comments:
            if left:
                left -= 1
                yield comment.text[:_MAX_TEXT], comment.line
