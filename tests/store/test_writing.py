# ruff: noqa: PT012 (what is done before it raises is the point of these blocks)
"""The one write path: everything and its event, or nothing."""

from __future__ import annotations

import sqlite3
import sys
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

from speclib.errors import (
    EntryNotFoundError,
    InvalidValueError,
    LibraryBusyError,
    LibraryError,
    RefusedError,
    SignatureMissingError,
)
from speclib.store.history import recent_events
from speclib.store.library import Library
from speclib.store.verifying import verify_library

if TYPE_CHECKING:
    from tests.store.conftest import Build, Start


def count(library: Library, table: str) -> int:
    with library.reading() as connection:
        return int(connection.execute(f"SELECT count(*) FROM {table}").fetchone()[0])


def assert_intact(library: Library) -> None:
    with library.reading() as connection:
        assert verify_library(connection).differences == ()


def test_rows_and_their_event_are_one_transaction(library: Library, build: Build) -> None:
    before = library.state()
    with library.writing("compound add", analyst="  A. Analyst ", reason="why") as transaction:
        build.compound(transaction, "acetone")
        transaction.detail = {"names": ["acetone"]}
        with Library(library.path) as other:
            assert count(other, "compounds") == 0
            assert other.state() == before
    with Library(library.path) as other, other.reading() as connection:
        newest = recent_events(connection, 1)[0].event
    assert (newest.action, newest.analyst, newest.reason) == ("compound add", "A. Analyst", "why")
    assert (newest.detail, newest.previous_hash) == ({"names": ["acetone"]}, before)
    assert library.state() == newest.hash != before
    assert count(library, "compounds") == 1
    assert_intact(library)


@pytest.mark.parametrize("error", [ValueError, KeyboardInterrupt, sqlite3.OperationalError, RefusedError])
def test_an_exception_inside_leaves_neither_rows_nor_event(
    filled: Library, build: Build, digest: Callable[[Path], str], error: type[BaseException]
) -> None:
    before, hashed = filled.state(), digest(filled.path)
    held = count(filled, "compounds")
    with (
        pytest.raises(LibraryError if error is sqlite3.OperationalError else error),
        filled.writing("compound add", analyst="A") as transaction,
    ):
        build.compound(transaction, "acetone")
        transaction.update("compounds", 1, name="other")
        raise error("stop")
    assert (filled.state(), count(filled, "compounds"), digest(filled.path)) == (before, held, hashed)
    with filled.writing("compound add", analyst="A") as transaction:
        build.compound(transaction, "acetone")
    assert_intact(filled)


def test_an_undone_step_leaves_the_rest_and_the_trail_agrees_with_the_rows(filled: Library, build: Build) -> None:
    with filled.writing("intake", analyst="A") as transaction:
        kept = build.compound(transaction, "acetone")
        transaction.update("compounds", 1, cas="1-1-1")
        with pytest.raises(RefusedError), transaction.step():
            build.compound(transaction, "undone")
            transaction.update("compounds", 1, cas="2-2-2")
            transaction.update("compounds", 2, derivative="undone")
            raise RefusedError("no")
        with transaction.step():
            build.compound(transaction, "butanone")
    with filled.reading() as connection:
        names = [row["name"] for row in connection.execute("SELECT name FROM compounds ORDER BY id")]
        first = connection.execute("SELECT cas, rev FROM compounds WHERE id = 1").fetchone()
        changed = recent_events(connection, 1)[0].event.id
        touched = connection.execute("SELECT count(*) FROM event_changes WHERE event_id = ?", (changed,)).fetchone()[0]
    assert names == ["2-hexanone", "2-hexanone oxime", "acetone", "butanone"]
    assert (kept, tuple(first), touched) == (3, ("1-1-1", 2), 3)
    assert_intact(filled)


def test_local_ids_given_again_after_an_undone_step_do_not_confuse_the_trail(library: Library, build: Build) -> None:
    with library.writing("intake", analyst="A") as transaction:
        with pytest.raises(ValueError, match="no"), transaction.step():
            undone = build.compound(transaction, "undone", synonyms=["wrong"])
            spectrum = build.spectrum(transaction, build.found({43: 1.0}), undone)
            build.assignment(transaction, spectrum)
            # Looks keys up before they are undone.
            transaction.update("spectra", spectrum, molecular_mass=3)
            transaction.changes()
            raise ValueError("no")
        again = build.compound(transaction, "acetone", synonyms=["propanone"])
        spectrum_again = build.spectrum(transaction, build.found({43: 2.0}), again)
        build.assignment(transaction, spectrum_again)
    assert (undone, spectrum) == (again, spectrum_again)
    assert_intact(library)


def test_steps_nest_and_the_inner_one_is_undone_alone(library: Library, build: Build) -> None:
    with library.writing("intake", analyst="A") as transaction, transaction.step():
        build.compound(transaction, "outer")
        with pytest.raises(ValueError, match="no"), transaction.step():
            build.compound(transaction, "inner")
            raise ValueError("no")
        build.compound(transaction, "outer too")
    assert count(library, "compounds") == 2
    assert_intact(library)


def test_a_constraint_that_fails_in_a_step_is_a_sentence_and_leaves_the_rest_usable(
    library: Library, build: Build
) -> None:
    with library.writing("intake", analyst="A") as transaction:
        build.compound(transaction, "acetone")
        with pytest.raises(sqlite3.IntegrityError), transaction.step():
            transaction.insert("compound_names", compound_id=99, kind="synonym", name="x")
        build.compound(transaction, "butanone")
    assert count(library, "compounds") == 2
    with (
        pytest.raises(LibraryError, match=r"refuses the change: FOREIGN KEY .*; nothing was changed"),
        library.writing("intake", analyst="A") as transaction,
    ):
        transaction.insert("compound_names", compound_id=99, kind="synonym", name="x")
    assert_intact(library)


def test_abandoning_writes_nothing(filled: Library, build: Build, digest: Callable[[Path], str]) -> None:
    before = digest(filled.path)
    with filled.writing("intake", analyst="A") as transaction:
        build.compound(transaction, "acetone")
        transaction.abandon()
    assert digest(filled.path) == before
    with filled.writing("intake", analyst="A"):
        pass
    assert digest(filled.path) != before


@pytest.mark.parametrize("analyst", [None, "", " ", "\t\n", "\u00a0\u2003", "\u200b"])
def test_nobody_signs_nothing_is_done(filled: Library, analyst: str | None, digest: Callable[[Path], str]) -> None:
    before = digest(filled.path)
    with pytest.raises(SignatureMissingError, match="--by NAME"), filled.writing("x", analyst=analyst):
        pytest.fail("the block must not run")
    assert digest(filled.path) == before


def test_a_row_that_somebody_changed_meanwhile_is_not_decided_on(filled: Library) -> None:
    with Library(filled.path) as other, other.writing("edit", analyst="B") as transaction:
        transaction.update("compounds", 1, expected_rev=1, cas="1-1-1")
    before = filled.state()
    with pytest.raises(RefusedError, match="changed by somebody else"), filled.writing("edit", analyst="A") as mine:
        mine.update("compounds", 1, expected_rev=1, cas="2-2-2")
    assert filled.state() == before
    with filled.writing("edit", analyst="A") as mine:
        mine.update("compounds", 1, expected_rev=2, cas="2-2-2")
    assert_intact(filled)


def test_misuse_of_update_is_refused(filled: Library) -> None:
    wrong: list[tuple[str, int, dict[str, Any], type[Exception]]] = [
        ("compounds", 99, {"cas": "1"}, EntryNotFoundError),
        ("compounds", 1, {"uid": "other"}, ValueError),
        ("compound_names", 1, {"name": "other"}, ValueError),
        ("findings", 1, {"answer": "seen", "expected_rev": 1}, ValueError),
        ("structures", 1, {"inchikey": "other"}, LibraryError),
        ("spectra", 1, {"mz": b"\x00" * 24}, LibraryError),
        ("compounds", 1, {"colour": "blue"}, LibraryError),
    ]
    before = filled.state()
    for table, row, values, error in wrong:
        with pytest.raises(error), filled.writing("edit", analyst="A") as transaction:
            transaction.update(table, row, **values)
    assert filled.state() == before
    assert_intact(filled)


def test_a_change_after_the_end_of_its_transaction_is_refused(library: Library, build: Build) -> None:
    with library.writing("x", analyst="A") as transaction:
        pass
    with pytest.raises(LibraryError, match="after the end"):
        build.compound(transaction, "acetone")
    with library.writing("y", analyst="A"), pytest.raises(LibraryError, match="after the end"):
        build.compound(transaction, "acetone")
    with pytest.raises(LibraryError, match="after the end"), transaction.step():
        pass
    assert count(library, "compounds") == 0


def test_when_sqlite_rolled_back_by_itself_nothing_can_be_added_behind_it(library: Library, build: Build) -> None:
    before = library.state()
    with pytest.raises(LibraryError, match="after the end"), library.writing("x", analyst="A") as transaction:
        build.compound(transaction, "acetone")
        with pytest.raises(LibraryError, match="after the end"), transaction.step():
            transaction.connection.execute("ROLLBACK")
            build.compound(transaction, "loose")
    assert (library.state(), count(library, "compounds")) == (before, 0)


def test_a_text_that_is_no_unicode_and_a_number_too_large_are_named(library: Library, build: Build) -> None:
    before = library.state()
    undecoded = b"caf\xe9.txt".decode("utf-8", "surrogateescape")
    for values in ({"name": undecoded}, {"name": "x", "cas": undecoded}):
        with pytest.raises(InvalidValueError, match=r"caf\\udce9\.txt"), library.writing("x", analyst="A") as t:
            build.compound(t, **values)
    for where in ({"reason": undecoded, "analyst": "A"}, {"analyst": f"A {undecoded}"}):
        with pytest.raises(InvalidValueError, match="valid Unicode"), library.writing("x", **where):
            pass
    with pytest.raises(InvalidValueError, match="valid Unicode"), library.writing("x", analyst="A") as t:
        t.detail = {"file": undecoded}
    with pytest.raises(InvalidValueError, match="too large"), library.writing("x", analyst="A") as t:
        build.spectrum(t, build.found({43: 1.0}), None, molecular_mass=2**63)
    assert library.state() == before


def test_detail_with_keys_that_are_no_text_is_hashed_as_it_is_read_back(library: Library) -> None:
    with library.writing("x", analyst="A") as transaction:
        transaction.detail = {"counts": {10: "a", 9: "b", 1: "c"}, "pair": (1, 2)}
    assert_intact(library)


def test_detail_that_is_no_json_writes_nothing(library: Library) -> None:
    before = library.state()
    for value in (float("nan"), float("inf")):
        with pytest.raises(ValueError, match="JSON"), library.writing("x", analyst="A") as transaction:
            transaction.detail = {"value": value}
    assert library.state() == before


def test_writing_inside_reading_or_writing_is_refused_and_harms_nothing(library: Library, build: Build) -> None:
    with library.reading() as connection:
        with pytest.raises(LibraryError), library.writing("x", analyst="A"):
            pass
        assert connection.execute("SELECT count(*) FROM events").fetchone()[0] == 1
    with library.writing("x", analyst="A") as transaction:
        build.compound(transaction, "acetone")
        with pytest.raises(LibraryError), library.writing("y", analyst="A"):
            pass
        build.compound(transaction, "butanone")
    assert count(library, "compounds") == 2
    assert_intact(library)


def test_two_writers_of_a_hundred_increments_each_lose_none(library: Library, build: Build, start: Start) -> None:
    with library.writing("method", analyst="A") as transaction:
        row = transaction.insert("methods", name="screen", programme="0")
    code = f"""
with Library(path, timeout_s=60) as library:
    for _ in range(100):
        with library.writing("count", analyst=sys.argv[2]) as t:
            held = t.connection.execute("SELECT programme, rev FROM methods WHERE id = {row}").fetchone()
            t.update("methods", {row}, expected_rev=held["rev"], programme=str(int(held["programme"]) + 1))
"""
    writers = [start(code, library.path, name) for name in ("A", "B")]
    for writer in writers:
        _, trouble = writer.communicate(timeout=60)
        assert writer.returncode == 0, trouble
    with library.reading() as connection:
        held = connection.execute("SELECT programme, rev FROM methods").fetchone()
        signed = connection.execute(
            "SELECT analyst, count(*) FROM events WHERE action = 'count' GROUP BY analyst ORDER BY analyst"
        ).fetchall()
    assert tuple(held) == ("200", 201)
    assert [tuple(row) for row in signed] == [("A", 100), ("B", 100)]
    assert_intact(library)


def test_a_second_writer_with_little_patience_is_told_in_one_sentence(library: Library, start: Start) -> None:
    code = """
with Library(path) as library:
    with library.writing("long", analyst="B"):
        say("writing")
        time.sleep(60)
"""
    other = start(code, library.path)
    assert other.stdout is not None
    assert other.stdout.readline() == "writing\n", other.stderr
    with Library(library.path, timeout_s=0.05) as mine:
        with pytest.raises(LibraryBusyError) as told, mine.writing("short", analyst="A"):
            pytest.fail("the block must not run")
        assert str(told.value).count("\n") == 0
        assert str(mine.path) in str(told.value)
        assert "another process" in str(told.value)
        assert "nothing was changed; try again" in str(told.value)
        assert count(mine, "events") == 1  # reading goes on


def test_a_reader_during_a_write_sees_the_old_state_and_blocks_the_commit_only_as_long_as_it_reads(
    filled: Library, build: Build
) -> None:
    with Library(filled.path) as reader:
        before = reader.state()
        with filled.writing("add", analyst="A") as transaction:
            build.compound(transaction, "acetone")
            assert (reader.state(), count(reader, "compounds")) == (before, 2)
            assert_intact(reader)
        assert count(reader, "compounds") == 3
    with Library(filled.path, timeout_s=0.05) as writer, filled.reading() as connection:
        connection.execute("SELECT count(*) FROM events").fetchone()
        with pytest.raises(LibraryBusyError), writer.writing("add", analyst="A") as transaction:
            build.compound(transaction, "butanone")
        connection.execute("SELECT count(*) FROM events").fetchone()
    assert count(filled, "compounds") == 3
    with filled.writing("add", analyst="A") as transaction:
        build.compound(transaction, "butanone")
    assert_intact(filled)


@pytest.mark.skipif(sys.platform == "win32", reason="processes are killed otherwise here")
@pytest.mark.parametrize("action", ["a step", "plain"])
def test_a_process_killed_in_the_middle_of_a_transaction_leaves_the_library_as_before(
    filled: Library, digest: Callable[[Path], str], start: Start, action: str
) -> None:
    before, state = digest(filled.path), filled.state()
    filled.close()
    code = """
import contextlib
with Library(path) as library, library.writing("intake", analyst="B") as t:
    with t.step() if sys.argv[2] == "a step" else contextlib.nullcontext():
        t.insert("compounds", name="half")
        t.update("compounds", 1, name="other")
        say("half way")
        time.sleep(60)
"""
    victim = start(code, filled.path, action)
    assert victim.stdout is not None
    assert victim.stdout.readline() == "half way\n"
    victim.kill()
    victim.wait()
    with Library(filled.path) as again:
        assert (again.state(), count(again, "compounds")) == (state, 2)
        assert_intact(again)
        with again.writing("go on", analyst="A") as transaction:
            transaction.insert("compounds", name="whole")
        assert_intact(again)
    assert digest(filled.path) != before


HOT_JOURNAL = """
with Library(path) as library, library.writing("intake", analyst="B") as t:
    t.connection.execute("PRAGMA cache_size = 1")
    for number in range(200):
        t.insert("compounds", name=f"half {number} " + "x" * 500)
    t.update("compounds", 1, name="other")
    say("half way")
    time.sleep(60)
"""


@pytest.mark.skipif(sys.platform == "win32", reason="processes are killed otherwise here")
def test_a_process_killed_with_pages_in_the_file_already_is_undone_by_the_reader_that_comes_first(
    filled: Library, digest: Callable[[Path], str], start: Start
) -> None:
    before, state = digest(filled.path), filled.state()
    filled.close()
    victim = start(HOT_JOURNAL, filled.path)
    assert victim.stdout is not None
    assert victim.stdout.readline() == "half way\n"
    victim.kill()
    victim.wait()
    journal = filled.path.with_name(f"{filled.path.name}-journal")
    assert journal.stat().st_size > 0
    assert digest(filled.path) != before, "the half-written pages must be in the file for this test to mean anything"
    with Library(filled.path) as reader:
        assert (reader.state(), count(reader, "compounds")) == (state, 2)
        assert_intact(reader)
    assert not journal.exists()
    assert digest(filled.path) == before


@pytest.mark.skipif(sys.platform == "win32", reason="no file size limit here")
@pytest.mark.parametrize("room", [0, 20_000, 300_000])
def test_a_full_disk_is_told_in_a_sentence_and_leaves_the_library_whole(
    filled: Library, digest: Callable[[Path], str], start: Start, room: int
) -> None:
    before, state = digest(filled.path), filled.state()
    filled.close()
    code = """
signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
limit = path.stat().st_size + int(sys.argv[2])
resource.setrlimit(resource.RLIMIT_FSIZE, (limit, limit))
with Library(path) as library:
    try:
        with library.writing("intake", analyst="B") as t:
            t.update("compounds", 1, name="other")
            for number in range(1000):
                t.insert("compounds", name=f"half {number} " + "x" * 1000)
    except SpeclibError as error:
        say(error)
    with library.reading() as connection:
        say(verify_library(connection).intact)
"""
    outcome, trouble = start(code, filled.path, room).communicate(timeout=60)
    told, intact = outcome.splitlines()
    assert trouble == ""
    assert str(filled.path) in told
    assert "full" in told
    assert "nothing was changed" in told
    assert intact == "True"
    assert digest(filled.path) == before
    assert [p.name for p in filled.path.parent.iterdir()] == [filled.path.name]
    with Library(filled.path) as again:
        assert again.state() == state
        assert_intact(again)


def test_a_library_that_may_not_grow_refuses_and_goes_on(filled: Library, build: Build) -> None:
    state = filled.state()
    with (
        pytest.raises(LibraryError, match=r"disk of .* is full; nothing was changed"),
        filled.writing("intake", analyst="A") as transaction,
    ):
        pages = transaction.connection.execute("PRAGMA page_count").fetchone()[0]
        transaction.connection.execute(f"PRAGMA max_page_count = {pages + 1}")
        for number in range(1000):
            build.compound(transaction, f"compound {number} {'x' * 500}")
    assert (filled.state(), count(filled, "compounds")) == (state, 2)
    with filled.writing("intake", analyst="A") as transaction:
        build.compound(transaction, "small")
    assert_intact(filled)
