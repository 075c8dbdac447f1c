"""JCAMP-DX mass spectra: single blocks, blocks in a row, LINK files, series (NTUPLES), with peak assignments.

Read are stick spectra. Profiles and raw scans are decoded as far as it takes to say what they are, and left out with
that reason; so are structures and spectra of other kinds. A file in which nothing is left is refused.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from speclib.formats.assembling import Labels, PeakRows, assemble_spectrum, too_many_peaks
from speclib.formats.jcamp_asdf import EquallySpaced, decode_equally_spaced
from speclib.formats.jcamp_labels import read_block_labels
from speclib.formats.jcamp_records import Block, Record, is_jcamp, normalised_label, read_blocks
from speclib.formats.jcamp_sources import LeftOut, SpectrumBlock, find_sources, has_mz_units
from speclib.formats.jcamp_tables import EQUALLY_SPACED, find_table, read_peaks, split_table, summed_up
from speclib.formats.options import ReadOptions
from speclib.formats.quantities import MZ, ValueTextError, parse_quantity
from speclib.formats.text_document import TextDocument, shown
from speclib.model.spectrum import MAX_PEAKS, ClaimedAssignment, SourceSpectrum, Spectrum

__all__ = ["MAX_PEAKS_PER_FILE", "is_jcamp", "read_jcamp"]

MAX_PEAKS_PER_FILE = 2_000_000
MAX_RAW_CHARACTERS_PER_FILE = 50_000_000
_CENTROID = "centroid it and export a PEAK TABLE"
_SAME_PEAK = 0.5
"""m/z; how far an assigned m/z may lie from a peak before it is remarked: unit m/z are rounded."""


def read_jcamp(document: TextDocument, options: ReadOptions) -> tuple[SourceSpectrum, ...]:
    """Read the stick spectra of a file, numbered from 1 in the order of the file.

    Raises:
        InputFileError: malformed text, or no stick spectrum at all; the reason says what the file holds instead.
    """
    sources = find_sources(document, read_blocks(document))
    spectra: list[SourceSpectrum] = []
    peak_count = raw_count = 0
    for source in sources.spectra:
        found = _read_block(document, len(spectra) + 1, source, options)
        if isinstance(found, LeftOut):
            sources.left_out.append(found)
            continue
        peak_count += len(found.spectrum)
        raw_count += sum(len(key) + len(value) for key, value in found.spectrum.raw_fields.items())
        if peak_count > MAX_PEAKS_PER_FILE or raw_count > MAX_RAW_CHARACTERS_PER_FILE:
            what = "peaks" if peak_count > MAX_PEAKS_PER_FILE else "characters of labels"
            limit = MAX_PEAKS_PER_FILE if peak_count > MAX_PEAKS_PER_FILE else MAX_RAW_CHARACTERS_PER_FILE
            raise document.error(
                f"the file holds more than {limit} {what}", line=source.block.line, advice="split the file"
            )
        spectra.append(found)
    left_out = sorted(sources.left_out, key=lambda other: other.line)
    if not spectra:
        raise _nothing_left(document, left_out)
    notes = sources.notes + [f"the block of line {o.line} was left out: it holds {o.holds}" for o in left_out]
    spectra[0] = replace(spectra[0], notes=(*spectra[0].notes, *summed_up(notes)))
    return tuple(spectra)


def _nothing_left(document: TextDocument, left_out: list[LeftOut]) -> Exception:
    if not left_out:
        return document.error(
            "the file holds no block", line=1, advice="get the file again from its source; it may be cut off"
        )
    # What comes nearest to a mass spectrum explains the refusal best.
    first = next((other for other in left_out if "mass spectrum" in other.holds), left_out[0])
    more = f" (and {len(left_out) - 1} more blocks without a stick spectrum)" if len(left_out) > 1 else ""
    return document.error(
        f"this holds {first.holds}{more}: that is not read here", line=first.line, advice=first.advice
    )


def _read_block(
    document: TextDocument, index: int, source: SpectrumBlock, options: ReadOptions
) -> SourceSpectrum | LeftOut:
    block = source.block
    table = find_table(document, block)
    text = split_table(document, table)
    continuous = normalised_label(block.value("DATATYPE")).startswith("CONTINUOUS")
    notes: list[str]
    if text.form == EQUALLY_SPACED:
        points = decode_equally_spaced(document, block, text.body)
        if continuous or text.kind == "PROFILE" or not _is_stick_grid(block, points):
            return _continuous(block, points.x, points.y)
        peaks, notes = _sticks(document, points)
    else:
        if not continuous or has_mz_units(block):
            peaks, notes = read_peaks(document, block, table, text)
        if continuous or text.kind == "PROFILE":
            known = has_mz_units(block)
            return _continuous(block, np.array(peaks.mz if known else ()), np.array(peaks.intensity if known else ()))
    labels = read_block_labels(document, block, source.outer)
    labels.notes += [*source.notes, *notes]
    _remark_other_base_peak(block, peaks, labels)
    found = assemble_spectrum(document, index, peaks, labels, options, line=table.line)
    if not source.assignments:
        return found
    return replace(
        found,
        assignments=source.assignments,
        notes=(*found.notes, *_assigned_without_peak(found.spectrum, source.assignments)),
    )


def _is_stick_grid(block: Block, points: EquallySpaced) -> bool:
    """Whether equally spaced points can be unit-mass sticks: XUNITS says m/z, and every abscissa is a whole number."""
    return has_mz_units(block) and bool(np.all(points.x == np.rint(points.x)))


def _sticks(document: TextDocument, points: EquallySpaced) -> tuple[PeakRows, list[str]]:
    """The peaks among equally spaced ordinates: a 0 says that nothing was found at that m/z."""
    peaks, notes = PeakRows(), list(points.notes)
    missing = int(np.count_nonzero(np.isnan(points.y)))
    if missing:
        notes.append(f"{missing} ordinates are missing ('?'): their m/z were left out")
    for position in np.flatnonzero(np.nan_to_num(points.y)):
        peaks.add(float(points.x[position]), float(points.y[position]), points.line[position])
        if len(peaks) > MAX_PEAKS:
            raise too_many_peaks(document, points.line[position])
    return peaks, notes


def _continuous(block: Block, x: np.ndarray, y: np.ndarray) -> LeftOut:
    """What continuous data are, in words: a raw scan over time, or a profile over m/z."""
    record: Record | None = block.find("XUNITS")
    units = record.value if record else ""
    line = record.line if record else block.line
    extent = ""
    if len(x) and np.any(np.isfinite(y)):
        top = int(np.nanargmax(y))
        extent = f": {len(x)} points from {x[0]:g} to {x[-1]:g}, the highest {y[top]:.10g} at {x[top]:.6g}"
    if not units or has_mz_units(block):
        over = "m/z" if units else "an abscissa without unit"
        return LeftOut(line, f"a continuous mass spectrum (profile) over {over}{extent}", _CENTROID)
    return LeftOut(
        line,
        f"a continuous mass spectrum as the detector gave it (raw scan), with {shown(units)} and not m/z{extent}",
        "convert it to m/z and centroid it with the instrument's program, then export a PEAK TABLE",
    )


def _assigned_without_peak(spectrum: Spectrum, assignments: tuple[ClaimedAssignment, ...]) -> list[str]:
    wanted = np.array([claim.mz for claim in assignments])
    above = np.searchsorted(spectrum.mz, wanted)
    distance = np.minimum(
        np.abs(spectrum.mz[np.clip(above, 0, len(spectrum) - 1)] - wanted),
        np.abs(spectrum.mz[np.clip(above - 1, 0, len(spectrum) - 1)] - wanted),
    )
    return summed_up(
        [f"m/z {mz:g} carries an assignment but is no peak of the table" for mz in wanted[distance > _SAME_PEAK]]
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
