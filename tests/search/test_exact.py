"""Plain exact search: order, filters, folding, words."""

from __future__ import annotations

from dataclasses import replace

import pytest

from speclib.model.compound import Compound, Structure
from speclib.model.entry import LibrarySpectrum, Role, Status
from speclib.model.spectrum import MassAccuracy, Measurement, Spectrum
from speclib.search.exact import SearchSettings, search_rows
from speclib.search.rows import Comparable, ReferenceRow, reference_row
from speclib.similarity.scores import Measure
from speclib.units import Tolerance


def row(
    number: int,
    peaks: dict[float, float],
    *,
    compound: int | None = None,
    formula: str = "C6H12O",
    mass: int = 100,
    accuracy: MassAccuracy = MassAccuracy.UNIT,
    measurement: Measurement | None = None,
) -> ReferenceRow:
    which = compound if compound is not None else number
    structure = Structure("S", f"K{which}", f"K{which}", formula, mass, float(mass))
    return reference_row(
        LibrarySpectrum(
            number,
            f"s{number}",
            Role.REFERENCE,
            Status.CONFIRMED,
            Spectrum.of(sorted(peaks), [peaks[m] for m in sorted(peaks)], accuracy, measurement or Measurement()),
            Compound(which, f"c{which}", f"compound {which}", structure, formula),
        )
    )


KETONE = {43.0: 100.0, 58.0: 55.0, 85.0: 7.0, 100.0: 8.0}
OTHER = {43.0: 20.0, 57.0: 100.0, 85.0: 7.0, 100.0: 30.0}


def query(peaks: dict[float, float], mass: int | None = None, measurement: Measurement | None = None) -> Comparable:
    spectrum = Spectrum.of(sorted(peaks), [peaks[m] for m in sorted(peaks)], measurement=measurement or Measurement())
    return Comparable(spectrum, None, mass)


def test_best_first_and_ties_by_spectrum_id() -> None:
    rows = [row(7, KETONE), row(3, KETONE), row(5, OTHER)]
    found = search_rows(query(KETONE), rows, SearchSettings())
    assert [n.spectrum_id for n in found] == [3, 7, 5]
    assert found[0].similarity == pytest.approx(1.0)
    assert [n.rank for n in found] == [1, 2, 3]


def test_replicates_are_folded_to_the_best_unless_all_are_asked_for() -> None:
    rows = [row(1, OTHER, compound=1), row(2, KETONE, compound=1)]
    assert [n.spectrum_id for n in search_rows(query(KETONE), rows, SearchSettings())] == [2]
    unfolded = SearchSettings(fold_replicates=False)
    assert [n.spectrum_id for n in search_rows(query(KETONE), rows, unfolded)] == [2, 1]


def test_too_few_matching_peaks_make_no_neighbour() -> None:
    rows = [row(1, {43.0: 100.0, 58.0: 55.0})]
    assert search_rows(query(KETONE), rows, SearchSettings(min_matched=3)) == []
    assert len(search_rows(query(KETONE), rows, SearchSettings(min_matched=2))) == 1


def test_what_disagrees_is_said_gravest_first() -> None:
    found = search_rows(query({**KETONE, 97.0: 40.0}), [row(1, {**KETONE, 85.0: 30.0})], SearchSettings())
    words = found[0].disagreements
    assert words[0] == "unknown has m/z 97 at 40 that the reference lacks"
    assert words[1] == "m/z 85 is 7 in the unknown, 30 in the reference"


def test_peaks_outside_the_common_scanned_range_neither_count_nor_disagree() -> None:
    full = row(1, {29.0: 100.0, **KETONE}, measurement=Measurement(mz_from=25, mz_to=300))
    unknown = query(KETONE, measurement=Measurement(mz_from=40, mz_to=300))
    found = search_rows(unknown, [full], SearchSettings())
    assert found[0].similarity == pytest.approx(1.0)
    assert found[0].disagreements == ()


def test_measures_that_need_a_mass_pass_over_references_without_one() -> None:
    bare = row(1, KETONE)
    bare = ReferenceRow(bare.entry, Comparable(bare.entry.spectrum, None, None))
    assert search_rows(query(KETONE, 100), [bare], SearchSettings(measure=Measure.SHIFTED)) == []


def test_reverse_ranking_forgives_what_only_the_unknown_has() -> None:
    mixture = query({**KETONE, 77.0: 300.0})
    found = search_rows(mixture, [row(1, KETONE)], SearchSettings(reverse=True))
    assert found[0].reverse_similarity == pytest.approx(1.0)
    assert found[0].similarity < 0.65


def test_accurate_spectra_are_compared_as_measured_and_mixed_pairs_on_whole_numbers() -> None:
    accurate = {43.0178: 100.0, 58.0413: 55.0, 85.0648: 7.0}
    moved = {mz + 0.02: height for mz, height in accurate.items()}
    unknown = Comparable(Spectrum.of(list(moved), list(moved.values()), MassAccuracy.ACCURATE), None, None)
    reference = row(1, accurate, accuracy=MassAccuracy.ACCURATE)
    narrow = SearchSettings(tolerance=Tolerance(0.005, "da"))
    assert search_rows(unknown, [reference], narrow) == []
    assert len(search_rows(unknown, [reference], replace(narrow, tolerance=Tolerance(0.03, "da")))) == 1
    unit = row(2, {43.0: 100.0, 58.0: 55.0, 85.0: 7.0})
    assert search_rows(unknown, [unit], narrow)[0].similarity == pytest.approx(1.0)


def test_retention_index_is_shown_as_a_difference_on_the_same_phase_only() -> None:
    held = row(1, KETONE, measurement=Measurement(retention_index=790, phase="5% phenyl"))
    same = query(KETONE, measurement=Measurement(retention_index=792, phase="5% phenyl"))
    other = query(KETONE, measurement=Measurement(retention_index=792, phase="polyethylene glycol"))
    assert search_rows(same, [held], SearchSettings())[0].ri_difference == pytest.approx(2.0)
    assert search_rows(other, [held], SearchSettings())[0].ri_difference is None
    assert search_rows(same, [held], SearchSettings())[0].similarity == pytest.approx(1.0)


def test_a_row_that_is_kept_out_is_not_scored() -> None:
    rows = [row(1, KETONE), row(2, KETONE)]
    found = search_rows(query(KETONE), rows, SearchSettings(), keep=lambda r: r.entry.id != 1)
    assert [n.spectrum_id for n in found] == [2]
