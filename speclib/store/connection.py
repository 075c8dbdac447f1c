"""Opening and making library files, and turning SQLite's complaints into sentences.

The journal is SQLite's rollback journal with synchronous FULL: one file that can be copied to a stick.
"""

from __future__ import annotations

import os
import secrets
import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path

from speclib.errors import LibraryBusyError, LibraryError
from speclib.store.migrations import MIGRATIONS, migrate
from speclib.store.schema import APPLICATION_ID

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
    text = str(error).lower()
    if "locked" in text or "busy" in text:
        return LibraryBusyError(
            f"the library {path} is being written by another process",
            "nothing was changed; try again in a moment",
        )
    if "readonly" in text or "read-only" in text or "unable to open" in text:
        return LibraryError(
            f"the library {path} or its folder cannot be written",
            "nothing was changed; check the permissions or copy the library to a folder of yours",
        )
    if "full" in text:
        return LibraryError(f"the disk of {path} is full", "nothing was changed; free some space and try again")
    if "not a database" in text or "malformed" in text or "corrupt" in text:
        return LibraryError(f"the library {path} is damaged ({error})", "copy the file away and go back to a backup")
    if isinstance(error, sqlite3.IntegrityError):
        return LibraryError(f"the library {path} refuses the change: {error}", "nothing was changed")
    return LibraryError(f"the library {path} cannot be used: {error}", "nothing was changed")


def _require_library_file(path: Path) -> None:
    if path.is_dir():
        raise LibraryError(f"{path} is a folder, not a library", "name the library file")
    if not path.exists():
        raise LibraryError(f"there is no library {path}", f"make one with: speclib init {path}")
    try:
        with path.open("rb") as handle:
            header = handle.read(len(_HEADER))
    except OSError as error:
        raise LibraryError(f"the library {path} cannot be read ({error.strerror})", "check the permissions") from error
    if header != _HEADER:
        raise LibraryError(f"{path} is not a speclib library", "name the file that `speclib init` made")


def _connect(path: Path, mode: str, timeout_s: float) -> sqlite3.Connection:
    connection = sqlite3.connect(
        f"{path.absolute().as_uri()}?mode={mode}", uri=True, isolation_level=None, timeout=timeout_s
    )
    connection.row_factory = sqlite3.Row
    connection.execute("PRAGMA foreign_keys = ON")
    connection.execute("PRAGMA synchronous = FULL")
    return connection


def open_library(path: Path, *, timeout_s: float = BUSY_TIMEOUT_S) -> sqlite3.Connection:
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
            _check_version(connection, path, writable)
    except BaseException:
        connection.close()
        raise
    return connection


def _check_version(connection: sqlite3.Connection, path: Path, writable: bool) -> None:
    application_id = connection.execute("PRAGMA application_id").fetchone()[0]
    version = connection.execute("PRAGMA user_version").fetchone()[0]
    if application_id != APPLICATION_ID:
        raise LibraryError(f"{path} is not a speclib library", "name the file that `speclib init` made")
    if version > len(MIGRATIONS):
        raise LibraryError(
            f"the library {path} has schema {version}, newer than the {len(MIGRATIONS)} that this speclib knows",
            "it was left untouched; install a newer speclib",
        )
    if version == len(MIGRATIONS):
        return
    if not writable:
        raise LibraryError(f"the library {path} has the old schema {version} and cannot be written", "copy it first")
    backup = path.with_name(f"{path.name}.schema-{version}.backup")
    if not backup.exists():
        with closing(sqlite3.connect(backup)) as target:
            connection.backup(target)
    migrate(connection)


def create_library_file(path: Path) -> Path:
    """Make an empty library with all tables under a temporary name beside `path`, and return that name.

    The caller fills in the first rows and then calls `publish`, so that no half-made library is ever seen.

    Raises:
        LibraryError: something stands at `path` already, or the folder cannot be written.
    """
    if path.exists() or path.is_symlink():
        raise LibraryError(f"{path} exists already", "choose another name; nothing was changed")
    if not path.absolute().parent.is_dir():
        raise LibraryError(f"the folder {path.absolute().parent} does not exist", "make it first")
    temporary = path.with_name(f".{path.name}.{secrets.token_hex(4)}.new")
    try:
        with explained_errors(path):
            connection = sqlite3.connect(temporary, isolation_level=None)
            with closing(connection):
                connection.execute("PRAGMA foreign_keys = ON")
                migrate(connection)
    except BaseException:
        temporary.unlink(missing_ok=True)
        raise
    return temporary


def publish(temporary: Path, path: Path) -> None:
    """Give a finished library its name, without overwriting anything.

    Raises:
        LibraryError: somebody made a file of that name meanwhile.
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
    finally:
        temporary.unlink(missing_ok=True)
