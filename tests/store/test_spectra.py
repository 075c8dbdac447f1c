"""Spectra come back as they went in."""

from __future__ import annotations

from dataclasses import fields
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from speclib.errors import AmbiguousEntryError, EntryNotFoundError, RefusedError
from speclib.model.entry import Role, Status
from speclib.model.finding import Severity
from speclib.model.spectrum import MassAccuracy, Measurement, SourceFile, SourceSpectrum, Spectrum
from speclib.store.library import Library
from speclib.store.spectra import (
    find_spectrum_by_source,
    get_spectrum,
    insert_findings,
    insert_source,
    insert_spectrum,
    open_findings,
    searchable_references,
    sign,
    sign_offs,
    spectra_of_compound,
    spectra_with_content,
)
from speclib.store.verifying import verify_library

if TYPE_CHECKING:
    from tests.store.conftest import Build

positive = st.floats(min_value=0, max_value=1e9, allow_nan=False, allow_infinity=False)
words = st.text(st.characters(exclude_categories=["Cs"]), max_size=12)
FREE_TEXT = {
    "ionisation", "analyser", "carrier_gas", "column", "programme", "method", "inlet", "solvent", "derivatisation",
    "instrument", "analyst", "acquired_at", "background", "blank", "sample", "comment", "phase",
}  # fmt: skip
NUMBERS = {
    "threshold", "electron_energy_ev", "source_temperature_c", "scan_rate_hz", "amount_on_column_ng",
    "retention_time_s", "retention_index",
}  # fmt: skip


@st.composite
def measurements(draw: st.DrawFn) -> Measurement:
    values: dict[str, Any] = {name: draw(st.none() | words) for name in FREE_TEXT}
    values |= {name: draw(st.none() | positive) for name in NUMBERS}
    if draw(st.booleans()):
        values |= {"mz_from": draw(st.floats(0, 100)), "mz_to": draw(st.floats(101, 1000))}
    values["scans_averaged"] = draw(st.none() | st.integers(1, 10**6))
    return Measurement(**values)


@st.composite
def spectra(draw: st.DrawFn) -> Spectrum:
    mz = sorted(draw(st.sets(st.floats(1e-300, 10_000, exclude_min=False), min_size=1, max_size=40)))
    intensity = draw(st.lists(st.floats(0, 1e300), min_size=len(mz), max_size=len(mz)))
    intensity[0] = intensity[0] or 5e-324
    return Spectrum(
        np.array(mz),
        np.array(intensity),
        draw(st.sampled_from(MassAccuracy)),
        draw(measurements()),
        draw(st.dictionaries(words, words, max_size=4)),
    )


def test_the_strategy_covers_every_field_of_a_measurement() -> None:
    names = {f.name for f in fields(Measurement)}
    assert names == FREE_TEXT | NUMBERS | {"mz_from", "mz_to", "scans_averaged"}


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(spectrum=spectra())
def test_a_stored_spectrum_comes_back_bit_for_bit_with_all_its_fields(library: Library, spectrum: Spectrum) -> None:
    with library.writing("intake", analyst="A") as transaction:
        number = insert_spectrum(
            transaction,
            SourceSpectrum("f", 3, spectrum),
            role=Role.UNKNOWN,
            status=None,
            compound_id=None,
            source_id=None,
            molecular_mass=None,
        )
    with library.reading() as connection:
        held = get_spectrum(connection, number)
        same = spectra_with_content(connection, spectrum.content_hash)
    assert held.spectrum == spectrum
    assert held.spectrum.mz.tobytes() == spectrum.mz.tobytes()
    assert held.spectrum.intensity.tobytes() == spectrum.intensity.tobytes()
    assert held.spectrum.measurement.known() == spectrum.measurement.known()
    assert dict(held.spectrum.raw_fields) == dict(spectrum.raw_fields)
    assert not held.spectrum.mz.flags.writeable
    assert (held.source_index, held.role, held.rev) == (3, Role.UNKNOWN, 1)
    assert number in {entry.id for entry in same}


def test_all_those_spectra_verify(library: Library, build: Build) -> None:
    with library.writing("intake", analyst="A") as transaction:
        for number in range(3):
            build.spectrum(transaction, build.found({43.0 + number: 1e-300, 500.5: 1e300}, a='"\\\u0000\ud7ff'), None)
    with library.reading() as connection:
        assert verify_library(connection).differences == ()


def test_equal_phases_and_methods_are_one_row(library: Library, build: Build) -> None:
    with library.writing("intake", analyst="A") as transaction:
        for method in ("Screen", "screen", "other"):
            build.spectrum(
                transaction, build.found({43: 1.0}, measurement=Measurement(phase="5% phenyl", method=method)), None
            )
    with library.reading() as connection:
        assert [r["name"] for r in connection.execute("SELECT name FROM methods ORDER BY id")] == ["Screen", "other"]
        assert [r["name"] for r in connection.execute("SELECT name FROM phases")] == ["5% phenyl"]
        assert [get_spectrum(connection, n).spectrum.measurement.method for n in (1, 2)] == ["Screen", "screen"]


@pytest.mark.parametrize("number", [0, -1, 3, 2**63, 10**30, -(10**30)])
def test_a_number_that_no_spectrum_has_is_named(filled: Library, number: int) -> None:
    with filled.reading() as connection, pytest.raises(EntryNotFoundError, match=f"no spectrum {number}"):
        get_spectrum(connection, number)


def test_a_spectrum_is_found_by_its_file_and_an_ambiguous_file_lists_the_candidates(
    filled: Library, build: Build
) -> None:
    with filled.writing("intake", analyst="A") as transaction:
        source = SourceFile("run_100%.txt", "1" * 64, "invented", ())
        number = insert_source(transaction, source, "t")
        assert insert_source(transaction, source, "later") == number
        for index in (1, 2):
            build.spectrum(transaction, build.found({50.0 + index: 1.0}, index=index), None, source_id=number)
    nothing: list[tuple[str, int | None]] = [
        ("%", None),
        ("run_100_.txt", None),
        ("run_100%.txt", 3),
        ("invented.txt", 10**30),
    ]
    with filled.reading() as connection:
        assert find_spectrum_by_source(connection, "invented.txt", None).id == 1
        assert find_spectrum_by_source(connection, "run_100%.txt", 2).source_index == 2
        with pytest.raises(AmbiguousEntryError, match=r"3 \(index 1, unknown\), 4 \(index 2, unknown\)"):
            find_spectrum_by_source(connection, "run_100%.txt", None)
        for name, wanted in nothing:
            with pytest.raises(EntryNotFoundError):
                find_spectrum_by_source(connection, name, wanted)
        with pytest.raises(EntryNotFoundError):
            find_spectrum_by_source(connection, b"caf\xe9".decode("utf-8", "surrogateescape"), None)


def test_withdrawn_references_are_kept_but_not_searched(filled: Library) -> None:
    with filled.writing("withdraw", analyst="A", reason="wrong lot") as transaction:
        entry = get_spectrum(transaction.connection, 1)
        sign(transaction, entry, Status.WITHDRAWN, analyst="A", reason="wrong lot")
    with filled.reading() as connection:
        assert searchable_references(connection) == []
        assert [e.status for e in spectra_of_compound(connection, 1)] == [Status.WITHDRAWN]
        decisions = sign_offs(connection, 1)
        assert verify_library(connection).intact
    assert [(d["decision"], d["standard"], d["reason"], d["imported"]) for d in decisions] == [
        ("confirmed", "lot 1", None, False),
        ("withdrawn", None, "wrong lot", False),
    ]
    assert decisions[0]["at"] < decisions[1]["at"]


def test_a_sign_off_of_a_spectrum_that_changed_meanwhile_is_refused(filled: Library) -> None:
    with filled.reading() as connection:
        entry = get_spectrum(connection, 1)
    with filled.writing("edit", analyst="B") as transaction:
        transaction.update("spectra", 1, molecular_mass=101)
    with pytest.raises(RefusedError), filled.writing("confirm", analyst="A") as transaction:
        sign(transaction, entry, Status.CONFIRMED, analyst="A")


def test_findings_come_back_and_are_recorded_once_also_on_a_second_check(filled: Library, build: Build) -> None:
    again = [build.finding(), build.finding("a third"), build.finding("a third")]
    with filled.writing("check", analyst="A") as transaction:
        insert_findings(transaction, 1, again)
        transaction.update("findings", 2, answer="seen", answered_event=transaction.event_id)
    with filled.reading() as connection:
        assert open_findings(connection, 1) == [build.finding(), build.finding("a third")]
        answered = connection.execute("SELECT answer, severity FROM findings WHERE id = 2").fetchone()
        assert tuple(answered) == ("seen", Severity.NOTE.value)
        assert verify_library(connection).intact


def test_a_library_can_be_copied_while_closed(filled: Library, tmp_path: Path) -> None:
    state = filled.state()
    filled.close()
    copy = tmp_path / "stick.sqlite"
    copy.write_bytes(filled.path.read_bytes())
    with Library(copy) as library:
        assert library.state() == state
