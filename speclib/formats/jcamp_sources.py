"""Which blocks of a JCAMP-DX file hold mass spectra, and what the others hold: LINK, series, assignments, structures.

A block that holds something else is left out and named; it is the reader who refuses a file in which nothing is left.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

from speclib.formats.jcamp_assignments import block_id, holds_assignments, read_assignments, referenced_blocks
from speclib.formats.jcamp_ntuples import pages_of
from speclib.formats.jcamp_records import Block, normalised_label
from speclib.formats.jcamp_tables import TABLE_LABELS
from speclib.formats.text_document import TextDocument, shown
from speclib.model.spectrum import ClaimedAssignment

MAX_SPECTRA = 20_000
MAX_ASSIGNMENTS_PER_FILE = 200_000
_MASS_SPECTRUM = ("MASSSPECTRUM", "MASSSPECTRA", "CONTINUOUSMASSSPECTRUM", "CONTINUOUSMASSSPECTRA")
_MZ_UNITS = ("MZ", "ME", "MASS", "MASSCHARGE", "MASSTOCHARGE", "MASSUNITS", "AMU", "DA", "U", "DALTON", "DALTONS")
"""XUNITS as labels are compared (blanks, `-`, `/`, `_` deleted)."""
STICKS = "export single spectra as PEAK TABLE blocks"


@dataclass(frozen=True)
class SpectrumBlock:
    """A block with one table of a mass spectrum, the LINK blocks around it (outermost first), and what goes with it."""

    block: Block
    outer: tuple[Block, ...] = ()
    assignments: tuple[ClaimedAssignment, ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class LeftOut:
    """A block that holds no stick spectrum: its line, what it holds instead, and the way out."""

    line: int
    holds: str
    advice: str


@dataclass
class Sources:
    """What a file holds, in order; `notes` concern the file as a whole."""

    spectra: list[SpectrumBlock] = field(default_factory=list)
    left_out: list[LeftOut] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)
    assignment_count: int = 0


def find_sources(document: TextDocument, blocks: list[Block]) -> Sources:
    """Sort the blocks of a file.

    Raises:
        InputFileError: a malformed series or table of assignments, assignments of no spectrum, too many spectra.
    """
    sources = Sources()
    _sort(document, blocks, (), sources)
    return sources


def has_mz_units(block: Block) -> bool:
    """Whether XUNITS says m/z."""
    return normalised_label(block.value("XUNITS")) in _MZ_UNITS


def _sort(document: TextDocument, blocks: list[Block], outer: tuple[Block, ...], sources: Sources) -> None:
    first = len(sources.spectra)
    assignments: list[Block] = []
    for block in blocks:
        if block.children or normalised_label(block.value("DATATYPE")) == "LINK":
            _check_link(document, block, sources)
            _sort(document, block.children, (*outer, block), sources)
        elif (other := _other_content(document, block)) is not None:
            sources.left_out.append(other)
        elif block.find("NTUPLES") or normalised_label(block.value("DATACLASS")) == "NTUPLES":
            for page, notes in pages_of(document, block):
                _check_units(document, page)
                sources.spectra.append(SpectrumBlock(page, outer, notes=tuple(notes)))
        elif holds_assignments(block) and not _has_table(block):
            assignments.append(block)
        else:
            claimed = _counted(document, block, sources) if holds_assignments(block) else ()
            sources.spectra.append(SpectrumBlock(block, outer, claimed))
        if len(sources.spectra) > MAX_SPECTRA:
            raise document.error(f"more than {MAX_SPECTRA} spectra", line=block.line, advice="split the file")
    for block in assignments:
        _join(document, block, sources, first, within_link=bool(outer))


def _has_table(block: Block) -> bool:
    return any(record.label in TABLE_LABELS for record in block.records)


def _check_link(document: TextDocument, block: Block, sources: Sources) -> None:
    if _has_table(block):
        raise document.error("a LINK block holds a table beside the blocks it links", line=block.line, advice=STICKS)
    stated = block.value("BLOCKS")
    count = len(block.children)
    # Some writers count the LINK block itself.
    if stated and stated not in (str(count), str(count + 1)):
        sources.notes.append(f"BLOCKS says {shown(stated)}, but the LINK block of line {block.line} holds {count}")
    if not block.children:
        sources.left_out.append(LeftOut(block.line, "0 linked blocks (LINK)", STICKS))


def _other_content(document: TextDocument, block: Block) -> LeftOut | None:
    data_type = normalised_label(block.value("DATATYPE"))
    if (block.find("JCAMPCS") or block.find("ATOMLIST")) and not _has_table(block):
        return LeftOut(block.line, "a chemical structure and no spectrum", "give the file of the spectrum")
    if data_type and not data_type.startswith(_MASS_SPECTRUM):
        what = f"data of the type {shown(block.value('DATATYPE'))}"
        return LeftOut(block.line, what, "give a mass spectrum")
    _check_units(document, block)
    series = block.find("NTUPLES") is not None
    if not data_type and not has_mz_units(block) and not series and not holds_assignments(block):
        raise document.error(
            "neither DATA TYPE nor XUNITS says that this is a mass spectrum",
            line=block.line,
            advice="add ##DATA TYPE= MASS SPECTRUM when it is one",
        )
    return None


def _check_units(document: TextDocument, block: Block) -> None:
    """Refuse sticks over anything but m/z; what continuous data run over is said when they are read."""
    units = block.find("XUNITS")
    continuous = normalised_label(block.value("DATATYPE")).startswith("CONTINUOUS")
    if units is not None and units.value and not has_mz_units(block) and not continuous:
        raise document.error(
            f"XUNITS is {shown(units.value)}, not m/z: this is not a mass spectrum",
            line=units.line,
            advice="give a mass spectrum",
        )


def _counted(document: TextDocument, block: Block, sources: Sources) -> tuple[ClaimedAssignment, ...]:
    found = read_assignments(document, block)
    sources.assignment_count += len(found)
    if sources.assignment_count > MAX_ASSIGNMENTS_PER_FILE:
        raise document.error(
            f"more than {MAX_ASSIGNMENTS_PER_FILE} peak assignments", line=block.line, advice="split the file"
        )
    return found


def _join(document: TextDocument, block: Block, sources: Sources, first: int, *, within_link: bool) -> None:
    """Give assignments to the spectrum they name, or to the only one of the same LINK block."""
    found = _counted(document, block, sources)
    candidates = range(first, len(sources.spectra)) if within_link else range(0)
    if not candidates:
        sources.left_out.append(LeftOut(block.line, "peak assignments and no spectrum", STICKS))
        return
    named = referenced_blocks(block)
    wanted = {name for name, _ in named}
    by_name = [at for at in candidates if block_id(sources.spectra[at].block) in wanted]
    own = block_id(block)
    by_spectrum = [
        at for at in candidates if own and own in {name for name, _ in referenced_blocks(sources.spectra[at].block)}
    ]
    targets = by_name or by_spectrum or ([] if named else list(candidates))
    if len(targets) != 1:
        line = named[0][1].line if named else block.line
        what = f"{len(targets)} mass spectra" if targets else "no mass spectrum"
        raise document.error(
            f"the peak assignments of line {block.line} belong to {what} of the same LINK block",
            line=line,
            advice="name the one spectrum with ##CROSS REFERENCE= MASS SPECTRUM: BLOCK_ID= n",
        )
    held = sources.spectra[targets[0]]
    sources.spectra[targets[0]] = replace(held, assignments=held.assignments + found)
