"""JCAMP-DX mass spectra: files of one or more blocks with one peak table each.

What else such a file may hold (linked blocks, series, profiles, structures, assignments, spectra of other kinds) is
recognised and refused by its name in `_refuse_other_content`; a kind that is read later leaves that list.
"""

from __future__ import annotations

from speclib.formats.assembling import Labels, PeakRows, assemble_spectrum
from speclib.formats.jcamp_labels import read_block_labels
from speclib.formats.jcamp_records import Block, is_jcamp, normalised_label, read_blocks
from speclib.formats.jcamp_tables import find_table, read_table
from speclib.formats.options import ReadOptions
from speclib.formats.quantities import MZ, ValueTextError, parse_quantity
from speclib.formats.text_document import TextDocument, shown
from speclib.model.spectrum import SourceSpectrum

__all__ = ["MAX_PEAKS_PER_FILE", "is_jcamp", "read_jcamp"]

MAX_PEAKS_PER_FILE = 2_000_000
_MASS_SPECTRUM = ("MASSSPECTRUM", "MASSSPECTRA")
_MZ_UNITS = ("MZ", "ME", "MASS", "MASSCHARGE", "MASSTOCHARGE", "MASSUNITS", "AMU", "DA", "U", "DALTON", "DALTONS")
"""XUNITS as labels are compared (blanks, `-`, `/`, `_` deleted)."""
_STICKS = "export single spectra as PEAK TABLE blocks"


def read_jcamp(document: TextDocument, options: ReadOptions) -> tuple[SourceSpectrum, ...]:
    """Read the spectra of a file, one a block, numbered from 1.

    Raises:
        InputFileError: malformed text, or content that is not read.
    """
    blocks = read_blocks(document)
    spectra: list[SourceSpectrum] = []
    peak_count = 0
    for index, block in enumerate(blocks, start=1):
        spectrum = _read_block(document, index, block, options)
        peak_count += len(spectrum.spectrum)
        if peak_count > MAX_PEAKS_PER_FILE:
            raise document.error(
                f"the file holds more than {MAX_PEAKS_PER_FILE} peaks", line=block.line, advice="split the file"
            )
        spectra.append(spectrum)
    return tuple(spectra)


def _read_block(document: TextDocument, index: int, block: Block, options: ReadOptions) -> SourceSpectrum:
    _refuse_other_content(document, block)
    table = find_table(document, block)
    labels = read_block_labels(document, block)
    peaks, notes = read_table(document, block, table)
    labels.notes += notes
    _remark_other_base_peak(block, peaks, labels)
    return assemble_spectrum(document, index, peaks, labels, options, line=table.line)


def _refuse_other_content(document: TextDocument, block: Block) -> None:
    data_type, data_class = (normalised_label(block.value(label)) for label in ("DATATYPE", "DATACLASS"))
    content, advice = "", _STICKS
    if data_type == "LINK" or block.children:
        content = f"{len(block.children)} linked blocks (LINK)"
    elif block.find("JCAMPCS") or block.find("ATOMLIST"):
        content, advice = "a chemical structure and no spectrum", "give the file of the spectrum"
    elif block.find("NTUPLES") or data_class == "NTUPLES":
        content = "a series of spectra (NTUPLES)"
    elif block.find("PEAKASSIGNMENTS") or data_class == "ASSIGNMENTS":
        content, advice = "peak assignments", "give the spectrum as a PEAK TABLE block"
    elif data_type.startswith("CONTINUOUS"):
        content, advice = "a continuous (profile or raw) mass spectrum", "centroid it and export a PEAK TABLE"
    elif data_type and data_type not in _MASS_SPECTRUM:
        content, advice = f"data of the type {shown(block.value('DATATYPE'))}", "give a mass spectrum"
    if content:
        raise document.error(f"this holds {content}: that is not read here", line=block.line, advice=advice)
    _check_units(document, block, bool(data_type))


def _check_units(document: TextDocument, block: Block, typed: bool) -> None:
    record = block.find("XUNITS")
    units = normalised_label(record.value) if record else ""
    if record and units and units not in _MZ_UNITS:
        raise document.error(
            f"XUNITS is {shown(record.value)}, not m/z: this is not a mass spectrum",
            line=record.line,
            advice="give a mass spectrum",
        )
    if not typed and not units:
        raise document.error(
            "neither DATA TYPE nor XUNITS says that this is a mass spectrum",
            line=block.line,
            advice="add ##DATA TYPE= MASS SPECTRUM when it is one",
        )


def _remark_other_base_peak(block: Block, peaks: PeakRows, labels: Labels) -> None:
    record = block.find(".BASEPEAK")
    if record is None or not record.value or not len(peaks):
        return
    try:
        stated = parse_quantity(record.value, MZ)
    except ValueTextError:
        return
    highest = max(peaks.intensity)
    tops = [mz for mz, intensity in zip(peaks.mz, peaks.intensity, strict=True) if intensity == highest]
    if all(abs(mz - stated) > 0.5 for mz in tops):
        labels.notes.append(
            f"{record.heading} says m/z {stated:g} (line {record.line}), but the tallest peak of the table is "
            f"m/z {min(tops):g}"
        )
