"""Search: neighbours of an unknown among the references."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

from speclib.errors import InvalidValueError
from speclib.formats.reading import ReadOptions
from speclib.model.results import SearchResult
from speclib.progress import SILENT, Progress
from speclib.search.exact import SearchSettings, search_rows
from speclib.search.rows import ReferenceRow, reference_row
from speclib.similarity.scores import Measure
from speclib.store.compounds import get_compound
from speclib.store.library import Library
from speclib.store.spectra import searchable_references
from speclib.store.trail import library_state
from speclib.workflows.query import (
    Asked,
    comparable_query,
    given_molecule,
    mass_remarks,
    reading_remarks,
    resolve_query,
)
from speclib.workflows.sources import RunSelection


@dataclass(frozen=True)
class SearchRequest:
    """What a person asks: the target, what is known of its molecule, what to leave out, and how to search."""

    target: str
    index: int | None = None
    mass: str | None = None
    formula: str | None = None
    exclude_compounds: tuple[str, ...] = ()
    confirmed_only: bool = False
    settings: SearchSettings = field(default_factory=SearchSettings)
    reading: ReadOptions = field(default_factory=ReadOptions)
    selection: RunSelection | None = None


def search_library(library: Library, request: SearchRequest, *, progress: Progress = SILENT) -> SearchResult:
    """Search the confirmed and provisional references of a library.

    Raises:
        SpeclibError: the target or an option cannot be used, or the measure needs a molecular mass that is not known.
    """
    asked = resolve_query(
        library, request.target, index=request.index, reading=request.reading, selection=request.selection
    )
    given = given_molecule(request.mass, request.formula)
    query, mass, formula = comparable_query(asked, given)
    if request.settings.measure is not Measure.COSINE and query.nominal_mass is None:
        raise InvalidValueError(
            f"the measure {request.settings.measure.value} needs the molecular mass, "
            "and no cluster of the spectrum looks like it",
            "give --mass",
        )
    rows, keep, state = reference_rows(library, asked, request.exclude_compounds, confirmed_only=request.confirmed_only)
    neighbours = search_rows(query, rows, request.settings, keep=keep, progress=progress)
    remarks = [*reading_remarks(asked), *mass_remarks(query)]
    if request.settings.measure is not Measure.COSINE and mass.inferred:
        remarks.append(f"the molecular mass {mass.value} is inferred ({mass.origin}); give --mass if you know it")
    if not neighbours:
        remarks.append("no reference matches enough peaks")
    return SearchResult(
        query=asked.query,
        measure=request.settings.measure.value,
        weighting=request.settings.weighting.name,
        reverse=request.settings.reverse,
        library_state=state,
        searched=sum(1 for row in rows if keep(row)),
        neighbours=tuple(neighbours),
        molecular_mass=mass,
        molecular_formula=formula,
        remarks=tuple(remarks),
    )


def reference_rows(
    library: Library, asked: Asked, exclude: Sequence[str], *, confirmed_only: bool = False
) -> tuple[list[ReferenceRow], Callable[[ReferenceRow], bool], str]:
    """Rows of all references, the filter that leaves out what was asked, and the library state, from one read
    transaction.

    Raises:
        EntryNotFoundError, AmbiguousEntryError: a compound to exclude that the library does not hold.
    """
    with library.reading() as connection:
        entries = searchable_references(connection)
        excluded = {get_compound(connection, text).identity for text in exclude}
        state = library_state(connection)
    own = asked.entry.id if asked.entry else None

    def keep(row: ReferenceRow) -> bool:
        entry = row.entry
        if entry.id == own or (confirmed_only and entry.status is not None and entry.status.value != "confirmed"):
            return False
        return entry.compound is None or entry.compound.identity not in excluded

    return [reference_row(entry) for entry in entries], keep, state
