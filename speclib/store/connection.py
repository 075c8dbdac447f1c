"""Opening and making library files, and turning SQLite's complaints into sentences.

The journal is SQLite's rollback journal with synchronous FULL: one file that can be copied to a stick.
"""

from __future__ import annotations

import os
import secrets
import shutil
import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager, suppress
from itertools import count
from pathlib import Path
from urllib.parse import quote

from speclib.clock import Clock, system_clock
from speclib.errors import LibraryBusyError, LibraryError
from speclib.store.migrations import MIGRATIONS, migrate, schema_version
from speclib.store.schema import APPLICATION_ID
from speclib.store.trail import library_state

BUSY_TIMEOUT_S = 5.0
_HEADER = b"SQLite format 3\x00"


@contextmanager
def explained_errors(path: Path) -> Iterator[None]:
    """Turn SQLite errors of the block into library errors that name the file and say what to do."""
    try:
        yield
    except sqlite3.Error as error:
        raise _explain(path, error) from error


def _explain(path: Path, error: sqlite3.Error) -> LibraryError:
    code = getattr(error, "sqlite_errorcode", None)
    kind = code & 0xFF if isinstance(code, int) else None
    if kind in (sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED):
        return LibraryBusyError(
            f"the library {path} is in use by another process",
            "nothing was changed; try again in a moment",
        )
    if code == sqlite3.SQLITE_READONLY_ROLLBACK:
        return LibraryError(
            f"a write to the library {path} was broken off, and undoing it needs permission to write",
            "open it once where it can be written, or copy it together with its -journal file to a folder of yours",
        )
    if kind in (sqlite3.SQLITE_READONLY, sqlite3.SQLITE_CANTOPEN, sqlite3.SQLITE_PERM):
        return LibraryError(
            f"the library {path} or its folder cannot be written",
            "nothing was changed; check the permissions or copy the library to a folder of yours",
        )
    if kind == sqlite3.SQLITE_FULL:
        return LibraryError(f"the disk of {path} is full", "nothing was changed; free some space and try again")
    if kind == sqlite3.SQLITE_IOERR:
        return LibraryError(
            f"the disk of {path} failed or is full ({error})",
            "nothing was changed; check the disk, its free space and your quota",
        )
    if kind in (sqlite3.SQLITE_CORRUPT, sqlite3.SQLITE_NOTADB):
        return LibraryError(f"the library {path} is damaged ({error})", "copy the file away and go back to a backup")
    if isinstance(error, sqlite3.IntegrityError):
        return LibraryError(f"the library {path} refuses the change: {error}", "nothing was changed")
    return LibraryError(f"the library {path} cannot be used: {error}", "nothing was changed")


def _require_library_file(path: Path) -> None:
    try:
        if path.is_dir():
            raise LibraryError(f"{path} is a folder, not a library", "name the library file")
        if not path.exists():
            raise LibraryError(f"there is no library {path}", f"make one with: speclib init {path}")
        # Reading from a pipe or a device could wait for ever.
        header = b""
        if path.is_file():
            with path.open("rb") as handle:
                header = handle.read(len(_HEADER))
    except OSError as error:
        raise LibraryError(f"the library {path} cannot be read ({error.strerror})", "check the permissions") from error
    if header != _HEADER:
        raise _not_a_library(path)


def _not_a_library(path: Path) -> LibraryError:
    return LibraryError(f"{path} is not a speclib library", "name the file that `speclib init` made")


def database_uri(place: str, mode: str) -> str:
    """URI of a file for SQLite, from an absolute path written with forward slashes.

    Not `Path.as_uri`, which makes a server of the first part of a Windows share: SQLite refuses servers.
    """
    return f"file://{'' if place.startswith('/') else '/'}{quote(os.fsencode(place), safe='/:')}?mode={mode}"


def _connect(path: Path, mode: str, timeout_s: float) -> sqlite3.Connection:
    uri = database_uri(path.absolute().as_posix(), mode)
    connection = sqlite3.connect(uri, uri=True, isolation_level=None, timeout=timeout_s)
    try:
        connection.row_factory = sqlite3.Row
        connection.execute("PRAGMA foreign_keys = ON")
        connection.execute("PRAGMA recursive_triggers = ON")
        connection.execute("PRAGMA synchronous = FULL")
    except BaseException:
        connection.close()
        raise
    return connection


def open_library(path: Path, *, timeout_s: float = BUSY_TIMEOUT_S, clock: Clock = system_clock) -> sqlite3.Connection:
    """Open a library, migrating an older one after a backup beside it.

    The file is opened writable where possible, because SQLite has to be able to roll back what a killed process left
    behind; `reading` and `writing` decide what a connection may do.

    Raises:
        LibraryError: missing, not a library, newer than this program, unreadable, damaged.
    """
    _require_library_file(path)
    writable = os.access(path, os.W_OK) and os.access(path.absolute().parent, os.W_OK)
    with explained_errors(path):
        connection = _connect(path, "rw" if writable else "ro", timeout_s)
    try:
        with explained_errors(path):
            _check_version(connection, path, writable, clock)
    except BaseException:
        connection.close()
        raise
    return connection


def _check_version(connection: sqlite3.Connection, path: Path, writable: bool, clock: Clock) -> None:
    if connection.execute("PRAGMA application_id").fetchone()[0] != APPLICATION_ID:
        raise _not_a_library(path)
    version = schema_version(connection)
    if version > len(MIGRATIONS):
        raise LibraryError(
            f"the library {path} has schema {version}, newer than the {len(MIGRATIONS)} that this speclib knows",
            "it was left untouched; install a newer speclib",
        )
    if connection.execute("SELECT count(*) FROM library").fetchone()[0] != 1:
        raise LibraryError(f"the library {path} is damaged (it has lost its own row)", "go back to a backup")
    if version == len(MIGRATIONS):
        return
    if not writable:
        raise LibraryError(f"the library {path} has the old schema {version} and cannot be written", "copy it first")
    migrate(connection, clock=clock, back_up=lambda: _back_up(connection, path, version).name)


def _back_up(connection: sqlite3.Connection, path: Path, version: int) -> Path:
    """Copy an old library beside itself before it is migrated, unless a whole copy of this very state stands there."""
    state = library_state(connection)
    for number in count(1):
        backup = path.with_name(f"{path.name}.schema-{version}{f'-{number}' if number > 1 else ''}.backup")
        if not backup.exists():
            break
        if _state_of_backup(backup) == state:
            return backup
    # Under another name until it is whole: a backup that was broken off must never pass for one.
    temporary = backup.with_name(f".{backup.name}.{secrets.token_hex(4)}.new")
    try:
        # Read through a connection of its own: SQLite copies nothing through one that holds the write lock.
        with closing(_connect(path, "ro", BUSY_TIMEOUT_S)) as source, closing(sqlite3.connect(temporary)) as target:
            source.backup(target)
        shutil.copymode(path, temporary)
    except BaseException:
        remove_temporary(temporary)
        raise
    publish(temporary, backup)
    return backup


def _state_of_backup(backup: Path) -> str | None:
    try:
        with closing(_connect(backup, "ro", BUSY_TIMEOUT_S)) as connection:
            return library_state(connection)
    except sqlite3.Error:
        return None


def create_library_file(path: Path) -> Path:
    """Make an empty library with all tables under a temporary name beside `path`, and return that name.

    The caller fills in the first rows and then calls `publish`, so that no half-made library is ever seen.

    Raises:
        LibraryError: something stands at `path` already, or the folder cannot be written.
    """
    try:
        taken, has_folder = path.exists() or path.is_symlink(), path.absolute().parent.is_dir()
    except OSError as error:
        raise LibraryError(f"{path} cannot be made ({error.strerror})", "choose another name or folder") from error
    if taken:
        raise LibraryError(f"{path} exists already", "choose another name; nothing was changed")
    if not has_folder:
        raise LibraryError(f"the folder {path.absolute().parent} does not exist", "make it first")
    temporary = path.with_name(f".{path.name}.{secrets.token_hex(4)}.new")
    try:
        with explained_errors(path):
            connection = sqlite3.connect(temporary, isolation_level=None)
            with closing(connection):
                migrate(connection)
    except BaseException:
        remove_temporary(temporary)
        raise
    return temporary


def remove_temporary(temporary: Path) -> None:
    """Remove a file that did not get its name, and the journal that a failed write may have left beside it."""
    for leftover in (temporary, temporary.with_name(f"{temporary.name}-journal")):
        with suppress(OSError):
            leftover.unlink(missing_ok=True)


def publish(temporary: Path, path: Path) -> None:
    """Give a finished library its name, without overwriting anything.

    Raises:
        LibraryError: somebody made a file of that name meanwhile, or the folder does not let us.
    """
    try:
        try:
            os.link(temporary, path)
        except FileExistsError:
            raise
        except OSError:
            # No hard links here (a stick, say): the check and the rename leave a gap of a moment.
            if path.exists():
                raise FileExistsError from None
            temporary.rename(path)
    except FileExistsError as error:
        raise LibraryError(f"{path} exists already", "choose another name; nothing was changed") from error
    except OSError as error:
        raise LibraryError(f"{path} cannot be made ({error.strerror})", "nothing was changed") from error
    finally:
        remove_temporary(temporary)
