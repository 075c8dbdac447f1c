# ruff: noqa: PT012 (what is done before it raises is the point of these blocks)
"""Reading blocks: one state, no writing, and nothing left behind when they fail."""

from __future__ import annotations

import sqlite3
from contextlib import closing

import pytest

from speclib.errors import LibraryError
from speclib.store.library import Library
from speclib.store.verifying import verify_library


def write(library: Library, name: str = "new") -> None:
    with library.writing("add", analyst="A") as transaction:
        transaction.insert("compounds", name=name)


def test_reading_sees_one_state_from_its_first_read_on(library: Library) -> None:
    with Library(library.path, timeout_s=0.05) as other, library.reading() as connection:
        assert connection.execute("SELECT count(*) FROM compounds").fetchone()[0] == 0
        with pytest.raises(LibraryError, match="in use by another process"):
            write(other)
        assert connection.execute("SELECT count(*) FROM compounds").fetchone()[0] == 0


def test_nothing_can_be_written_while_reading_and_writing_works_afterwards(library: Library) -> None:
    with pytest.raises(LibraryError, match="cannot be written"), library.reading() as connection:
        connection.execute("INSERT INTO phases (name, chemistry) VALUES ('p', 'other')")
    write(library)
    with library.reading() as connection:
        assert connection.execute("SELECT count(*) FROM compounds").fetchone()[0] == 1


@pytest.mark.parametrize("error", [ValueError, KeyboardInterrupt, sqlite3.OperationalError])
def test_an_exception_while_reading_leaves_the_library_usable(library: Library, error: type[BaseException]) -> None:
    with pytest.raises(LibraryError if error is sqlite3.OperationalError else error), library.reading() as connection:
        connection.execute("SELECT * FROM events")
        raise error("stop")
    write(library)
    assert library.state()


def test_when_sqlite_ends_the_read_by_itself_the_first_error_is_told(library: Library) -> None:
    with pytest.raises(ValueError, match="the first"), library.reading() as connection:
        connection.execute("ROLLBACK")
        raise ValueError("the first")
    write(library)


def test_reading_inside_reading_is_the_same_state(library: Library) -> None:
    with library.reading() as outer:
        before = library.state()
        with library.reading() as inner:
            assert inner.execute("SELECT count(*) FROM events").fetchone()[0] == 1
        assert outer.in_transaction
        assert library.state() == before
        with pytest.raises(sqlite3.OperationalError):
            outer.execute("DELETE FROM changes")
    write(library)


def test_reading_inside_writing_does_not_stop_the_writing(library: Library) -> None:
    with library.writing("add", analyst="A") as transaction:
        transaction.insert("compounds", name="first")
        with library.reading() as connection:
            assert connection.execute("SELECT count(*) FROM compounds").fetchone()[0] == 1
        before = library.state()
        transaction.insert("compounds", name="second")
    assert library.state() != before
    with library.reading() as connection:
        assert connection.execute("SELECT count(*) FROM compounds").fetchone()[0] == 2
        assert verify_library(connection).intact


def test_a_reader_that_is_done_blocks_nobody(library: Library) -> None:
    with library.reading() as connection:
        connection.execute("SELECT * FROM events").fetchone()
    with Library(library.path, timeout_s=0.0) as other:
        write(other)


def test_a_closed_library_says_so(library: Library) -> None:
    library.close()
    with pytest.raises((LibraryError, sqlite3.ProgrammingError), match="closed"):
        library.state()


def test_another_program_that_holds_the_whole_file_is_waited_for_and_then_named(library: Library) -> None:
    with (
        closing(sqlite3.connect(library.path, isolation_level=None)) as other,
        Library(library.path, timeout_s=0.05) as mine,
    ):
        other.execute("BEGIN EXCLUSIVE")
        with pytest.raises(LibraryError, match="in use by another process"):
            mine.state()
        other.execute("ROLLBACK")
        assert mine.state()
