"""Plain exact search: every reference is scored; the definition that any faster path has to equal."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass

from speclib.model.entry import Role
from speclib.model.results import Neighbour
from speclib.progress import SILENT, Progress
from speclib.search.disagreements import disagreements
from speclib.search.rows import Comparable, ReferenceRow
from speclib.similarity.scores import SCORES, Measure, Peaks, Similarity
from speclib.similarity.weights import DEFAULT_WEIGHTING, Weighting
from speclib.units import ACCURATE_MASS_TOLERANCE, UNIT_MASS_TOLERANCE, Tolerance

DEFAULT_MIN_MATCHED = 3


@dataclass(frozen=True)
class SearchSettings:
    """How to search. `min_matched` peaks must match; `tolerance` is for pairs of accurate spectra only."""

    measure: Measure = Measure.COSINE
    weighting: Weighting = DEFAULT_WEIGHTING
    reverse: bool = False
    top: int | None = 10
    min_similarity: float = 0.0
    min_matched: int = DEFAULT_MIN_MATCHED
    tolerance: Tolerance = ACCURATE_MASS_TOLERANCE
    fold_replicates: bool = True


@dataclass(frozen=True, eq=False)
class Scored:
    """A reference with its score, and the forms that were compared."""

    row: ReferenceRow
    similarity: Similarity
    query: Peaks
    reference: Peaks


def forms(query: Comparable, reference: Comparable, settings: SearchSettings) -> tuple[Peaks, Peaks, Tolerance]:
    """The two forms to compare: as measured when both are of accurate mass, else on whole m/z.

    A measure that needs molecular masses falls back to whole m/z when an exact one is not known.
    """
    accurate = query.is_accurate and reference.is_accurate
    masses_known = query.exact_mass is not None and reference.exact_mass is not None
    if accurate and (masses_known or settings.measure is Measure.COSINE):
        return query.accurate_peaks, reference.accurate_peaks, settings.tolerance
    return query.unit_peaks, reference.unit_peaks, UNIT_MASS_TOLERANCE


def rank_rows(
    query: Comparable,
    rows: Iterable[ReferenceRow],
    settings: SearchSettings,
    *,
    keep: Callable[[ReferenceRow], bool] = lambda _: True,
    progress: Progress = SILENT,
) -> list[Scored]:
    """All references that match enough, best first, ties by spectrum id; replicates folded when the settings say so.

    Rows that `keep` turns down are not scored. A reference without molecular mass is passed over by measures that need
    one.
    """
    score = SCORES[settings.measure]
    needs_mass = settings.measure is not Measure.COSINE
    scored: list[Scored] = []
    candidates = [row for row in rows if row.entry.role is Role.REFERENCE and keep(row)]
    progress.start("search", len(candidates))
    try:
        for row in candidates:
            progress.advance()
            a, b, tolerance = forms(query, row.comparable, settings)
            if needs_mass and (a.molecular_mass is None or b.molecular_mass is None):
                continue
            found = score(a, b, settings.weighting, tolerance)
            ranked_by = found.reverse if settings.reverse else found.forward
            if len(found.pairs) >= settings.min_matched and ranked_by >= settings.min_similarity and ranked_by > 0:
                scored.append(Scored(row, found, a, b))
    finally:
        progress.finish()
    scored.sort(key=lambda s: (-(s.similarity.reverse if settings.reverse else s.similarity.forward), s.row.entry.id))
    return _best_of_each_compound(scored) if settings.fold_replicates else scored


def search_rows(
    query: Comparable,
    rows: Iterable[ReferenceRow],
    settings: SearchSettings,
    *,
    keep: Callable[[ReferenceRow], bool] = lambda _: True,
    progress: Progress = SILENT,
) -> list[Neighbour]:
    """The best `settings.top` neighbours of `query` among `rows`, in words; order as `rank_rows`."""
    return as_neighbours(query, rank_rows(query, rows, settings, keep=keep, progress=progress)[: settings.top])


def as_neighbours(query: Comparable, scored: Iterable[Scored]) -> list[Neighbour]:
    """Neighbours with ranks from 1 and what disagrees in words, which costs more than the score itself."""
    return [_neighbour(query, item, rank) for rank, item in enumerate(scored, start=1)]


def _best_of_each_compound(scored: list[Scored]) -> list[Scored]:
    best: dict[str, Scored] = {}
    for item in scored:
        compound = item.row.entry.compound
        best.setdefault(compound.identity if compound else f"spectrum {item.row.entry.id}", item)
    return list(best.values())


def _neighbour(query: Comparable, item: Scored, rank: int) -> Neighbour:
    entry, reference = item.row.entry, item.row.comparable
    if entry.compound is None or entry.status is None:
        raise ValueError("a reference has a compound and a status")
    difference = None
    if query.nominal_mass is not None and reference.nominal_mass is not None:
        difference = query.nominal_mass - reference.nominal_mass
    return Neighbour(
        rank=rank,
        spectrum_id=entry.id,
        spectrum_uid=entry.uid,
        status=entry.status,
        compound=entry.compound,
        similarity=item.similarity.forward,
        reverse_similarity=item.similarity.reverse,
        matched_peaks=len(item.similarity.pairs),
        mass_difference=difference,
        ri_difference=_ri_difference(query, reference),
        disagreements=disagreements(item.query, item.reference, item.similarity),
        pairs=tuple(
            (float(item.query.mz[p.a]), float(item.reference.mz[p.b]), p.shifted) for p in item.similarity.pairs
        ),
    )


def _ri_difference(query: Comparable, reference: Comparable) -> float | None:
    """Retention index of the query minus that of the reference, on the same phase only; else None."""
    ours, theirs = query.spectrum.measurement, reference.spectrum.measurement
    if ours.retention_index is None or theirs.retention_index is None:
        return None
    if ours.phase is None or ours.phase != theirs.phase:
        return None
    return ours.retention_index - theirs.retention_index
