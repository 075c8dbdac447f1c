"""Making and opening library files: nothing half-made, nothing foreign touched, no complaint without a sentence."""

from __future__ import annotations

import os
import shutil
import sqlite3
import sys
from collections.abc import Callable
from contextlib import closing
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

from speclib.errors import LibraryError
from speclib.store import connection as opening
from speclib.store.connection import create_library_file, database_uri, publish
from speclib.store.library import Library
from speclib.store.verifying import verify_library

if TYPE_CHECKING:
    from tests.store.conftest import Start

posix_only = pytest.mark.skipif(sys.platform == "win32", reason="permissions and processes are POSIX here")


def refused(path: Path) -> str:
    """Open and read a file that cannot be used, and return the sentence."""
    with pytest.raises(LibraryError) as told, Library(path) as library, library.reading() as connection:
        connection.execute("SELECT count(*) FROM spectra").fetchone()
    sentence = str(told.value)
    assert "\n" not in sentence
    assert str(path) in sentence
    return sentence


def test_a_new_library_stands_alone_in_its_folder_and_is_intact(tmp_path: Path) -> None:
    with Library.create(tmp_path / "new.sqlite") as library, library.reading() as connection:
        result = verify_library(connection)
    assert (result.intact, result.events, result.rows, result.spectra) == (True, 1, 1, 0)
    assert [p.name for p in tmp_path.iterdir()] == ["new.sqlite"]


@pytest.mark.parametrize("name", ["what? 100%#1.sqlite", "Bücher & Spektren.sqlite", "a'b\"c;d.sqlite", " .sqlite"])
def test_any_file_name_can_be_a_library(tmp_path: Path, name: str) -> None:
    folder = tmp_path / "50% ? # folder"
    folder.mkdir()
    path = folder / name
    Library.create(path).close()
    with Library(path) as library:
        assert library.state()
    assert [p.name for p in folder.iterdir()] == [name]
    assert [p.name for p in tmp_path.iterdir()] == [folder.name]


def test_a_relative_path_goes_on_to_mean_the_same_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    with Library.create(Path("new.sqlite")) as library:
        (tmp_path / "elsewhere").mkdir()
        monkeypatch.chdir(tmp_path / "elsewhere")
        with library.writing("x", analyst="A"):
            pass
    assert sorted(p.name for p in tmp_path.iterdir()) == ["elsewhere", "new.sqlite"]


@pytest.mark.parametrize(
    ("place", "uri"),
    [
        ("/lab/a b.sqlite", "file:///lab/a%20b.sqlite?mode=ro"),
        ("C:/lab/x?.sqlite", "file:///C:/lab/x%3F.sqlite?mode=ro"),
        ("//server/share/lab.sqlite", "file:////server/share/lab.sqlite?mode=ro"),
    ],
)
def test_paths_of_windows_and_of_its_shares_become_uris_without_a_server(place: str, uri: str) -> None:
    assert database_uri(place, "ro") == uri


@pytest.mark.parametrize("kind", ["file", "folder", "symlink", "dangling symlink", "library"])
def test_init_leaves_what_stands_there_alone(tmp_path: Path, template: Path, kind: str) -> None:
    path = tmp_path / "taken"
    if kind == "file":
        path.write_text("mine")
    elif kind == "folder":
        path.mkdir()
    elif kind == "library":
        shutil.copy(template, path)
    else:
        target = tmp_path / "target"
        if kind == "symlink":
            target.write_text("mine")
        path.symlink_to(target)
    before = sorted(p.name for p in tmp_path.iterdir())
    content = path.read_bytes() if path.is_file() else b""
    with pytest.raises(LibraryError, match="exists already; choose another name"):
        Library.create(path)
    assert sorted(p.name for p in tmp_path.iterdir()) == before
    assert (path.read_bytes() if path.is_file() else b"") == content


def test_init_in_a_missing_folder_or_below_a_file_is_refused(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    for place in ("missing/new.sqlite", "file/new.sqlite"):
        with pytest.raises(LibraryError, match="does not exist; make it first"):
            Library.create(tmp_path / place)
    with pytest.raises(LibraryError, match=r"cannot be made|cannot be written"):
        Library.create(tmp_path / ("x" * 300))
    assert [p.name for p in tmp_path.iterdir()] == ["file"]


@pytest.mark.parametrize("error", [KeyboardInterrupt, sqlite3.OperationalError("disk I/O error"), ValueError])
@pytest.mark.parametrize("moment", ["schema", "first row", "name"])
def test_init_that_fails_leaves_no_file_behind(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, moment: str, error: BaseException | type[BaseException]
) -> None:
    def fail(*_: object, **__: object) -> None:
        raise error

    if moment == "schema":
        monkeypatch.setattr(opening, "migrate", fail)
    elif moment == "first row":
        monkeypatch.setattr("speclib.store.writing.write_event", fail)
    else:
        monkeypatch.setattr(os, "link", fail)
    with pytest.raises((LibraryError, KeyboardInterrupt, ValueError, sqlite3.Error)):
        Library.create(tmp_path / "new.sqlite")
    assert list(tmp_path.iterdir()) == []


def test_until_it_has_its_first_event_a_new_library_has_no_name(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path, seen = tmp_path / "new.sqlite", []
    link = os.link

    def look(source: Path, target: Path) -> None:
        seen.append(path.exists())
        with closing(sqlite3.connect(source)) as connection:
            seen.append(connection.execute("SELECT count(*) FROM events").fetchone()[0])
        link(source, target)
        seen.append(path.exists())

    monkeypatch.setattr(os, "link", look)
    Library.create(path).close()
    assert seen == [False, 1, True]


def test_of_two_that_make_the_same_library_at_once_the_second_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "new.sqlite"
    first, second = create_library_file(path), create_library_file(path)
    publish(first, path)
    content = path.read_bytes()
    with pytest.raises(LibraryError, match="exists already"):
        publish(second, path)
    assert path.read_bytes() == content
    assert [p.name for p in tmp_path.iterdir()] == ["new.sqlite"]


def test_where_there_are_no_hard_links_the_library_is_renamed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def no_links(*_: object) -> None:
        raise PermissionError(1, "Operation not permitted")

    monkeypatch.setattr(os, "link", no_links)
    Library.create(tmp_path / "new.sqlite").close()
    assert [p.name for p in tmp_path.iterdir()] == ["new.sqlite"]
    temporary = create_library_file(tmp_path / "other.sqlite")
    (tmp_path / "other.sqlite").write_text("mine")
    with pytest.raises(LibraryError, match="exists already"):
        publish(temporary, tmp_path / "other.sqlite")
    assert (tmp_path / "other.sqlite").read_text() == "mine"


def _other_database(path: Path) -> None:
    with closing(sqlite3.connect(path)) as connection:
        connection.execute("CREATE TABLE spectra (id INTEGER PRIMARY KEY, name TEXT)")
        connection.commit()


def _our_mark_on_another_database(path: Path) -> None:
    _other_database(path)
    with closing(sqlite3.connect(path)) as connection:
        connection.execute(f"PRAGMA application_id = {0x53504C42}")
        connection.execute("PRAGMA user_version = 1")


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda path: path.write_bytes(b""), "is not a speclib library"),
        (lambda path: path.write_bytes(b"SQLite format 3"), "is not a speclib library"),
        (lambda path: path.write_text("m/z,intensity\n43,100\n"), "is not a speclib library"),
        (lambda path: path.write_bytes(os.urandom(5000)), "is not a speclib library"),
        (lambda path: path.write_bytes(b"SQLite format 3\x00" + b"\x07" * 5000), "is damaged"),
        (_other_database, "is not a speclib library"),
        (_our_mark_on_another_database, "cannot be used: no such table: library"),
    ],
    ids=["empty", "half a header", "text", "random", "header only", "other database", "our mark on another database"],
)
def test_what_is_no_library_is_named_and_left_alone(
    tmp_path: Path, digest: Callable[[Path], str], make: Callable[[Path], object], words: str
) -> None:
    path = tmp_path / "thing.sqlite"
    make(path)
    before = digest(path)
    assert words in refused(path)
    assert digest(path) == before
    assert [p.name for p in tmp_path.iterdir()] == ["thing.sqlite"]


@pytest.mark.parametrize("kept", [100, 512, 4096, 5000, 0.5, -4097])
def test_a_truncated_library_is_named_and_left_alone(
    filled_path: Path, digest: Callable[[Path], str], kept: float
) -> None:
    content = filled_path.read_bytes()
    filled_path.write_bytes(content[: int(len(content) * kept) if isinstance(kept, float) else kept])
    before = digest(filled_path)
    assert "is damaged" in refused(filled_path)
    assert digest(filled_path) == before


def test_random_bytes_behind_a_valid_header_are_named_and_left_alone(
    filled_path: Path, digest: Callable[[Path], str]
) -> None:
    content = filled_path.read_bytes()
    filled_path.write_bytes(content[:100] + os.urandom(len(content) - 100))
    before = digest(filled_path)
    assert "is damaged" in refused(filled_path)
    assert digest(filled_path) == before


def test_a_missing_file_a_folder_and_a_path_below_a_file_are_named(tmp_path: Path, path: Path) -> None:
    assert "there is no library" in refused(tmp_path / "missing.sqlite")
    assert "speclib init" in refused(tmp_path / "missing.sqlite")
    assert "is a folder" in refused(tmp_path)
    assert "there is no library" in refused(path / "below")
    assert "cannot be read" in refused(tmp_path / ("x" * 300))
    assert [p.name for p in tmp_path.iterdir()] == [path.name]


@posix_only
def test_a_pipe_is_no_library_and_nobody_waits_for_it(tmp_path: Path) -> None:
    pipe = tmp_path / "pipe"
    os.mkfifo(pipe)
    assert "is not a speclib library" in refused(pipe)


def test_a_library_without_its_own_row_is_damaged(path: Path) -> None:
    with closing(sqlite3.connect(path)) as raw:
        raw.execute("DROP TRIGGER library_never_deleted")
        raw.execute("DELETE FROM library")
        raw.commit()
    assert "is damaged" in refused(path)


def test_a_newer_library_is_refused_and_untouched(filled_path: Path, digest: Callable[[Path], str]) -> None:
    with closing(sqlite3.connect(filled_path)) as raw:
        raw.execute("PRAGMA user_version = 999")
        raw.execute("ALTER TABLE library ADD COLUMN colour TEXT")
    before = digest(filled_path)
    sentence = refused(filled_path)
    assert "schema 999, newer than" in sentence
    assert "left untouched" in sentence
    assert digest(filled_path) == before
    assert [p.name for p in filled_path.parent.iterdir()] == [filled_path.name]


def open_folders(path: Path) -> None:
    """Let anybody go down to a file in pytest's private folders."""
    for folder in path.parents[:3]:
        folder.chmod(0o755)


READ_AND_WRITE = """
with Library(path) as library:
    with library.reading() as connection:
        say(verify_library(connection).intact)
    try:
        with library.writing("x", analyst="B") as t:
            t.insert("compounds", name="new")
        say("written")
    except LibraryError as error:
        say(error)
"""


@posix_only
@pytest.mark.parametrize(("file_mode", "folder_mode"), [(0o444, 0o555), (0o444, 0o777), (0o666, 0o555)])
def test_without_permission_to_write_reading_works_and_writing_is_refused(
    filled_path: Path, digest: Callable[[Path], str], start: Start, file_mode: int, folder_mode: int
) -> None:
    before = digest(filled_path)
    open_folders(filled_path)
    filled_path.chmod(file_mode)
    filled_path.parent.chmod(folder_mode)
    try:
        told, trouble = start(READ_AND_WRITE, filled_path, nobody=True).communicate(timeout=60)
    finally:
        filled_path.parent.chmod(0o755)
    assert trouble == ""
    assert told.splitlines()[0] == "True"
    assert told.splitlines()[1:] == [
        f"the library {filled_path} or its folder cannot be written; nothing was changed; "
        "check the permissions or copy the library to a folder of yours"
    ]
    assert digest(filled_path) == before
    assert [p.name for p in filled_path.parent.iterdir()] == [filled_path.name]


@posix_only
def test_what_may_not_even_be_read_or_made_is_named(filled_path: Path, start: Start) -> None:
    open_folders(filled_path)
    filled_path.chmod(0o600)
    closed = filled_path.parent / "closed"
    closed.mkdir(mode=0o700)
    code = """
closed = path.parent / "closed" / "x"
for place, act in (
    (path, Library), (closed, Library), (closed, Library.create), (path.parent / "new", Library.create)
):
    try:
        act(place)
        say("done")
    except LibraryError as error:
        say(error)
"""
    told, trouble = start(code, filled_path, nobody=True).communicate(timeout=60)
    assert trouble == ""
    lines = told.splitlines()
    assert ["cannot be read" in line for line in lines] == [True, True, False, False]
    assert "cannot be made" in lines[2] or "does not exist" in lines[2]
    assert "cannot be written" in lines[3]
    assert sorted(p.name for p in filled_path.parent.iterdir()) == ["closed", filled_path.name]


@posix_only
def test_a_broken_off_write_in_a_read_only_folder_is_explained_and_undone_where_it_can_be(
    filled_path: Path, digest: Callable[[Path], str], start: Start
) -> None:
    before = digest(filled_path)
    writer = start(
        """
with Library(path) as library, library.writing("intake", analyst="B") as t:
    t.connection.execute("PRAGMA cache_size = 1")
    for number in range(200):
        t.insert("compounds", name=f"half {number} " + "x" * 500)
    say("half way")
    os.kill(os.getpid(), signal.SIGKILL)
""",
        filled_path,
    )
    writer.communicate(timeout=60)
    assert digest(filled_path) != before
    open_folders(filled_path)
    filled_path.parent.chmod(0o555)
    try:
        code = "try:\n    Library(path).state()\nexcept LibraryError as error:\n    say(error)"
        filled_path.chmod(0o644)
        told, trouble = start(code, filled_path, nobody=True).communicate(timeout=60)
    finally:
        filled_path.parent.chmod(0o755)
    assert (trouble, told.count("\n")) == ("", 1)
    assert "cannot be written" in told or "undoing it needs permission" in told
    with Library(filled_path) as library, library.reading() as connection:
        assert verify_library(connection).intact
    assert digest(filled_path) == before


def test_a_connection_that_cannot_be_used_is_closed(filled_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    opened: list[sqlite3.Connection] = []
    connect = sqlite3.connect

    def remember(*args: object, **values: object) -> sqlite3.Connection:
        opened.append(connect(*args, **values))  # type: ignore[call-overload]
        return opened[-1]

    monkeypatch.setattr(sqlite3, "connect", remember)
    with closing(connect(filled_path)) as raw:
        raw.execute("PRAGMA user_version = 999")
    refused(filled_path)
    filled_path.write_bytes(b"SQLite format 3\x00" + b"\x07" * 5000)
    refused(filled_path)
    assert len(opened) == 2
    for connection in opened:
        with pytest.raises(sqlite3.ProgrammingError, match="closed"):
            connection.execute("SELECT 1")
