"""An older library: backed up, then migrated as a whole or not at all."""

from __future__ import annotations

import shutil
import sqlite3
from collections.abc import Callable, Iterator
from contextlib import closing
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

from speclib.errors import LibraryError
from speclib.store import migrations
from speclib.store.history import recent_events
from speclib.store.library import Library
from speclib.store.schema import TABLES, trigger_names
from speclib.store.verifying import verify_library

if TYPE_CHECKING:
    from tests.store.conftest import Start

Register = Callable[[migrations.Migration], None]


@pytest.fixture
def register() -> Iterator[Register]:
    """Add made-up migrations to the list."""
    known = list(migrations.MIGRATIONS)
    yield migrations.MIGRATIONS.append
    migrations.MIGRATIONS[:] = known


def m0002_note_on_compounds(connection: sqlite3.Connection) -> None:
    connection.execute("ALTER TABLE compounds ADD COLUMN note TEXT")
    connection.execute("UPDATE compounds SET note = 'old' WHERE id = 1")


def m0002_rebuild_spectra_and_structures(connection: sqlite3.Connection) -> None:
    from sqlite_utils import Database

    database = Database(connection, execute_plugins=False)
    for table in ("spectra", "structures", "events", "event_changes"):
        database.table(table).transform()


def m0002_breaks_off(connection: sqlite3.Connection) -> None:
    connection.execute("ALTER TABLE compounds ADD COLUMN note TEXT")
    connection.execute("UPDATE compounds SET name = 'gone'")
    connection.execute("CREATE TABLE spectra (id INTEGER)")


def m0002_leaves_a_dangling_reference(connection: sqlite3.Connection) -> None:
    connection.execute("UPDATE assignments SET case_id = 999 WHERE case_id IS NOT NULL")


def backups(path: Path) -> list[str]:
    return sorted(p.name for p in path.parent.iterdir() if p != path)


def triggers(path: Path) -> set[str]:
    with closing(sqlite3.connect(path)) as connection:
        return {name for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'")}


def version(path: Path) -> int:
    with closing(sqlite3.connect(path)) as connection:
        return int(connection.execute("PRAGMA user_version").fetchone()[0])


def dump(path: Path) -> list[str]:
    with closing(sqlite3.connect(path)) as connection:
        return list(connection.iterdump())


def test_an_older_library_is_migrated_after_a_backup_beside_it(
    filled_path: Path, register: Register, monkeypatch: pytest.MonkeyPatch
) -> None:
    before = dump(filled_path)
    old = TABLES["compounds"]
    register(m0002_note_on_compounds)
    monkeypatch.setitem(TABLES, "compounds", replace(old, columns=(*old.columns, "note")))
    with Library(filled_path) as library, library.reading() as connection:
        assert connection.execute("SELECT note FROM compounds WHERE id = 1").fetchone()[0] == "old"
        assert verify_library(connection).differences == ()
        newest = recent_events(connection, 1)[0].event
        changed = connection.execute(
            "SELECT table_name, before, after FROM event_changes WHERE event_id = ?", (newest.id,)
        ).fetchall()
    assert (newest.action, newest.analyst) == ("migrate", None)
    assert newest.detail == {"from": 1, "to": 2, "backup": "lab.sqlite.schema-1.backup"}
    assert [row["table_name"] for row in changed] == ["compounds", "compounds"]
    assert '"note"' not in changed[0]["before"]
    assert '"note":"old"' in changed[0]["after"]
    assert backups(filled_path) == ["lab.sqlite.schema-1.backup"]
    assert dump(filled_path.with_name("lab.sqlite.schema-1.backup")) == before
    assert (version(filled_path), triggers(filled_path)) == (2, set(trigger_names()))
    with Library(filled_path) as again:
        again.close()
    assert len(backups(filled_path)) == 1


def test_a_new_library_sees_all_migrations_and_no_migration_event(tmp_path: Path, register: Register) -> None:
    register(m0002_note_on_compounds)
    with Library.create(tmp_path / "new.sqlite") as library, library.reading() as connection:
        assert [entry.event.action for entry in recent_events(connection)] == ["init"]
        connection.execute("SELECT note FROM compounds")
    assert version(tmp_path / "new.sqlite") == 2
    assert backups(tmp_path / "new.sqlite") == []


def test_after_tables_were_rebuilt_triggers_checks_and_references_stand_as_before(
    filled_path: Path, register: Register
) -> None:
    register(m0002_rebuild_spectra_and_structures)
    with Library(filled_path) as library, library.reading() as connection:
        assert verify_library(connection).differences == ()
        assert connection.execute("PRAGMA foreign_keys").fetchone()[0] == 1
    assert triggers(filled_path) == set(trigger_names())
    with closing(sqlite3.connect(filled_path)) as raw:
        raw.execute("PRAGMA foreign_keys = ON")
        assert raw.execute("PRAGMA foreign_key_check").fetchall() == []
        strict = {row[1]: row[5] for row in raw.execute("PRAGMA table_list")}
        assert (strict["spectra"], strict["structures"], strict["events"]) == (1, 1, 1)
        for statement in (
            "UPDATE spectra SET mz = mz",
            "DELETE FROM structures",
            "UPDATE structures SET smiles = 'C'",
            "UPDATE events SET reason = 'other'",
            "UPDATE spectra SET status = NULL WHERE role = 'reference'",
            "UPDATE spectra SET compound_id = 999 WHERE role = 'reference'",
            "UPDATE assignments SET structure_id = 999",
        ):
            with pytest.raises(sqlite3.IntegrityError):
                raw.execute(statement)


@pytest.mark.parametrize("migration", [m0002_breaks_off, m0002_leaves_a_dangling_reference])
def test_a_migration_that_fails_leaves_the_old_schema_whole_and_the_backup(
    filled_path: Path, register: Register, migration: migrations.Migration
) -> None:
    before, guards = dump(filled_path), triggers(filled_path)
    register(migration)
    for _ in range(2):
        with pytest.raises(LibraryError) as told:
            Library(filled_path)
        assert "\n" not in str(told.value)
        assert "nothing was changed" in str(told.value) or "left as it was" in str(told.value)
    assert dump(filled_path) == before
    assert (version(filled_path), triggers(filled_path)) == (1, guards)
    assert backups(filled_path) == ["lab.sqlite.schema-1.backup"]
    assert dump(filled_path.with_name("lab.sqlite.schema-1.backup")) == before
    migrations.MIGRATIONS.pop()
    with Library(filled_path) as library, library.reading() as connection:
        assert verify_library(connection).intact


def test_a_backup_of_an_earlier_state_is_kept_and_not_taken_for_one_of_this_state(
    filled_path: Path, register: Register
) -> None:
    register(m0002_breaks_off)
    with pytest.raises(LibraryError):
        Library(filled_path)
    migrations.MIGRATIONS.pop()
    with Library(filled_path) as library, library.writing("add", analyst="A") as transaction:
        transaction.insert("compounds", name="later")
    before = dump(filled_path)
    register(m0002_note_on_compounds)
    Library(filled_path).close()
    assert backups(filled_path) == ["lab.sqlite.schema-1-2.backup", "lab.sqlite.schema-1.backup"]
    assert dump(filled_path.with_name("lab.sqlite.schema-1-2.backup")) == before


def test_a_broken_backup_of_that_name_does_not_count(filled_path: Path, register: Register) -> None:
    broken = filled_path.with_name("lab.sqlite.schema-1.backup")
    broken.write_bytes(filled_path.read_bytes()[:5000])
    before = dump(filled_path)
    register(m0002_note_on_compounds)
    Library(filled_path).close()
    assert broken.stat().st_size == 5000
    assert dump(filled_path.with_name("lab.sqlite.schema-1-2.backup")) == before


def test_without_room_for_a_backup_nothing_is_migrated(
    filled_path: Path, register: Register, monkeypatch: pytest.MonkeyPatch
) -> None:
    def no_room(*_: object) -> None:
        raise sqlite3.OperationalError("database or disk is full")

    before = dump(filled_path)
    register(m0002_note_on_compounds)
    monkeypatch.setattr(shutil, "copymode", no_room)
    with pytest.raises(LibraryError):
        Library(filled_path)
    assert dump(filled_path) == before
    assert backups(filled_path) == []


def test_a_row_that_was_tampered_with_is_still_named_after_a_migration(filled_path: Path, register: Register) -> None:
    with closing(sqlite3.connect(filled_path)) as raw:
        raw.execute("UPDATE compounds SET name = 'other' WHERE id = 2")
        raw.commit()
    register(m0002_rebuild_spectra_and_structures)
    with Library(filled_path) as library, library.reading() as connection:
        assert verify_library(connection).differences == ("row 2 of compounds is not what the events say",)


def test_an_older_library_that_cannot_be_written_is_left_as_it_is(
    filled_path: Path, register: Register, monkeypatch: pytest.MonkeyPatch, digest: Callable[[Path], str]
) -> None:
    before = digest(filled_path)
    register(m0002_note_on_compounds)
    monkeypatch.setattr("os.access", lambda *_: False)
    with pytest.raises(LibraryError, match="old schema 1 and cannot be written; copy it first"):
        Library(filled_path)
    assert digest(filled_path) == before
    assert backups(filled_path) == []


def test_a_migration_waits_for_a_writer_and_is_refused_in_a_sentence(filled_path: Path, register: Register) -> None:
    with Library(filled_path) as old, old.writing("long", analyst="A"):
        register(m0002_note_on_compounds)
        with pytest.raises(LibraryError, match="in use by another process"):
            Library(filled_path, timeout_s=0.05)
    assert (version(filled_path), backups(filled_path)) == (1, [])


def test_two_programs_that_migrate_at_once_migrate_once(filled_path: Path, start: Start) -> None:
    code = """
from speclib.store import migrations
def m0002_note(connection):
    connection.execute("ALTER TABLE compounds ADD COLUMN note TEXT")
migrations.MIGRATIONS.append(m0002_note)
with Library(path, timeout_s=30) as library, library.reading() as connection:
    say(verify_library(connection).differences)
    say(connection.execute("SELECT count(*) FROM events WHERE action = 'migrate'").fetchone()[0])
"""
    both = [start(code, filled_path) for _ in range(2)]
    for process in both:
        told, trouble = process.communicate(timeout=60)
        assert (told, trouble) == ("()\n1\n", "")
    assert backups(filled_path) == ["lab.sqlite.schema-1.backup"]
