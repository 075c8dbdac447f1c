"""Writing of JCAMP-DX 5.00 mass spectra: a peak table each, linked with its assignments where there are any.

What is written reads back equal: every float as the shortest text of the same float64, every field of the measurement
under its label or a private one (`##$...`). Text is ASCII (`ascii_text`); what JCAMP-DX would take for a label or a
comment (`##`, `$$`) is written with one sign. Lines are at most 80 characters; a longer value is folded, with an equals
sign at the end of a line that goes on. What is not known stays empty and is never filled in.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from speclib.errors import InvalidValueError
from speclib.formats.ascii_text import ascii_text
from speclib.formats.jcamp_labels import PRIVATE_QUANTITIES, PRIVATE_TEXTS, private_name
from speclib.model.spectrum import MAX_MZ, ClaimedAssignment, Measurement, SourceSpectrum, Spectrum

__all__ = ["WritableSpectrum", "assignment_text", "value_text", "write_jcamp"]

MAX_LINE = 80
_REPEATED = re.compile(r"([#$])\1+")
_BRACKETS = str.maketrans("<>", "()")
_PLAIN_NUMBER = re.compile(r"[0-9]+(?:\.[0-9]+)?")
_IONISATION = {"EI": "EI+", "CI": "CI+"}


@dataclass(frozen=True)
class WritableSpectrum:
    """A spectrum with what is to be said of it; None and empty mean: not known.

    `assignments` carry text such as `f{C2H3O}` (mzPAF); the reader gives them back as claims.
    """

    spectrum: Spectrum
    title: str | None = None
    names: tuple[str, ...] = ()
    formula: str | None = None
    cas: str | None = None
    smiles: str | None = None
    inchikey: str | None = None
    assignments: tuple[ClaimedAssignment, ...] = ()

    @classmethod
    def of(cls, source: SourceSpectrum) -> WritableSpectrum:
        """What a reader found, to be written again."""
        return cls(
            source.spectrum,
            source.title,
            source.names,
            source.formula,
            source.cas,
            source.smiles,
            source.inchikey,
            source.assignments,
        )


def write_jcamp(spectra: Sequence[WritableSpectrum]) -> str:
    """The text of a file with these spectra in order; lines end with a line feed.

    Raises:
        InvalidValueError: no spectrum, or an assignment without m/z or text.
    """
    if not spectra:
        raise InvalidValueError("there is no spectrum to write", "choose at least one")
    lines: list[str] = []
    for written in spectra:
        lines += _linked(written) if written.assignments else _spectrum_block(written)
    return "".join(line + "\n" for line in lines)


def value_text(text: str) -> str:
    """A text as it is written and read back: one line of ASCII without the marks of labels and comments."""
    return ascii_text(_REPEATED.sub(r"\1", ascii_text(text)))


def assignment_text(text: str) -> str:
    """The text of an assignment as it is written: as `value_text`, angle brackets as round ones."""
    return value_text(text).translate(_BRACKETS)


def _linked(written: WritableSpectrum) -> Iterator[str]:
    """A LINK block of the peak table and its assignments, which name it by its BLOCK_ID."""
    yield from _record("TITLE", written.title)
    yield from ("##JCAMP-DX= 5.00", "##DATA TYPE= LINK", "##BLOCKS= 2")
    yield from _origin(written.spectrum)
    yield from _spectrum_block(written, block_id=1)
    yield from _record("TITLE", f"Peak assignments: {written.title or ''}")
    yield from ("##JCAMP-DX= 5.00", "##DATA TYPE= MASS SPECTRUM", "##DATA CLASS= ASSIGNMENTS")
    yield from _origin(written.spectrum)
    yield from ("##BLOCK_ID= 2", "##CROSS REFERENCE= MASS SPECTRUM: BLOCK_ID= 1", "##XUNITS= M/Z")
    yield from _record("YUNITS", _y_units(written.spectrum))
    yield f"##NPOINTS= {len(written.assignments)}"
    yield "##PEAK ASSIGNMENTS= (XYA)"
    for claim in written.assignments:
        yield from _assignment(claim)
    yield from ("##END=", "##END=")


def _spectrum_block(written: WritableSpectrum, block_id: int | None = None) -> Iterator[str]:
    spectrum, measured = written.spectrum, written.spectrum.measurement
    yield from _record("TITLE", written.title)
    yield from ("##JCAMP-DX= 5.00", "##DATA TYPE= MASS SPECTRUM", "##DATA CLASS= PEAK TABLE")
    if block_id is not None:
        yield from (f"##BLOCK_ID= {block_id}", "##CROSS REFERENCE= PEAK ASSIGNMENTS: BLOCK_ID= 2")
    yield from _origin(spectrum)
    yield from _names(written.names)
    yield from _known("CAS REGISTRY NO", written.cas)
    yield from _known("MOLFORM", written.formula)
    yield from _measurement(measured)
    yield f"##.BASE PEAK= {spectrum.base_peak[0]!r}"
    yield from _known("$INCHIKEY", written.inchikey)
    yield from _known("$SMILES", written.smiles)
    yield f"##$MASS ACCURACY= {spectrum.mass_accuracy.value}"
    yield "##XUNITS= M/Z"
    yield from _record("YUNITS", _y_units(spectrum))
    yield f"##NPOINTS= {len(spectrum)}"
    yield "##PEAK TABLE= (XY..XY)"
    for mz, intensity in zip(spectrum.mz.tolist(), spectrum.intensity.tolist(), strict=True):
        yield f"{mz!r}, {intensity!r}"
    yield "##END="


def _origin(spectrum: Spectrum) -> Iterator[str]:
    """ORIGIN and OWNER as the file said that the spectrum was read from: rights stay with the data."""
    for label in ("ORIGIN", "OWNER"):
        yield from _record(label, spectrum.raw_fields.get(label) or "unknown")


def _y_units(spectrum: Spectrum) -> str:
    return spectrum.raw_fields.get("YUNITS") or "ARBITRARY UNITS"


def _measurement(measured: Measurement) -> Iterator[str]:
    ionisation = measured.ionisation
    yield from _known("SPECTROMETER/DATA SYSTEM", measured.instrument)
    # These three are required of a mass spectrum: they are written even when nothing is known.
    yield from _record(".SPECTROMETER TYPE", measured.analyser)
    yield from _record(".INLET", measured.inlet)
    yield from _record(".IONIZATION MODE", _IONISATION.get(ionisation, ionisation) if ionisation else None)
    yield from _known(".IONIZATION ENERGY", measured.electron_energy_ev)
    yield from _known(".SOURCE TEMPERATURE", measured.source_temperature_c)
    yield from _known(".RETENTION TIME", measured.retention_time_s)
    ends = measured.mz_from, measured.mz_to
    in_one = all(_PLAIN_NUMBER.fullmatch(_number(end)) for end in ends)
    if in_one:
        yield f"##.ACQUISITION RANGE= {_number(ends[0])}, {_number(ends[1])}"
    yield from _known("LONG DATE", measured.acquired_at)
    yield from _known("SAMPLE DESCRIPTION", measured.sample)
    yield from _known("$RETENTION INDEX", measured.retention_index)
    for field in (*PRIVATE_QUANTITIES, "phase", "scans_averaged", *PRIVATE_TEXTS):
        if not (in_one and field in ("mz_from", "mz_to")):
            yield from _known(private_name(field), getattr(measured, field))


def _known(label: str, value: str | float | None) -> Iterator[str]:
    if value is not None:
        yield from _record(label, value)


def _record(label: str, value: str | float | None) -> Iterator[str]:
    yield from _folded(f"##{label}= ", value_text(value) if isinstance(value, str) else _number(value))


def _number(value: float | None) -> str:
    """The shortest text of the same number; `float` turns numpy's numbers into plain ones."""
    return "" if value is None else str(value) if isinstance(value, int) else repr(float(value) + 0.0)


def _names(names: Sequence[str]) -> Iterator[str]:
    # A name that ended with an equals sign would be joined with the next.
    texts = [text for name in names if (text := value_text(name).rstrip("= "))]
    for position, text in enumerate(dict.fromkeys(texts)):
        yield from _folded("" if position else "##NAMES= ", text)


def _assignment(claim: ClaimedAssignment) -> Iterator[str]:
    text = assignment_text(claim.text)
    if not text or not 0 < claim.mz <= MAX_MZ:
        raise InvalidValueError(
            f"an assignment {text!r} of m/z {claim.mz!r} cannot be written", "give its m/z and its text"
        )
    yield from _folded("", f"({_number(claim.mz)}, {_number(claim.intensity)}, <{text}>)")


def _folded(head: str, text: str) -> Iterator[str]:
    """The lines of a value; a folded one never begins with a blank, which would be lost (one before `=` is kept)."""
    line, rest = head, text
    while len(line) + len(rest) > MAX_LINE:
        cut = MAX_LINE - 1 - len(line)
        if rest[cut] == " ":
            # Runs of blanks are written as one: the sign before it is none.
            cut -= 1
        yield line + rest[:cut] + "="
        line, rest = "", rest[cut:]
    yield (line + rest).rstrip()
