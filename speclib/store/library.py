"""A library file at work: opened once, read in read transactions, written through `writing`."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path
from types import TracebackType

from speclib.clock import Clock, system_clock, utc_text
from speclib.errors import SignatureMissingError
from speclib.store.connection import (
    BUSY_TIMEOUT_S,
    create_library_file,
    explained_errors,
    open_library,
    publish,
    remove_temporary,
)
from speclib.store.trail import library_state
from speclib.store.writing import UidSource, WriteTransaction, random_uid, writing


class Library:
    """An open library. Use as a context manager; `clock` and `new_uid` can be set for reproducible runs."""

    def __init__(
        self,
        path: Path,
        *,
        clock: Clock = system_clock,
        new_uid: UidSource = random_uid,
        timeout_s: float = BUSY_TIMEOUT_S,
    ) -> None:
        self.path = path
        self.clock = clock
        self.new_uid = new_uid
        self._connection = open_library(path, timeout_s=timeout_s, clock=clock)

    @classmethod
    def create(
        cls,
        path: Path,
        *,
        analyst: str | None = None,
        clock: Clock = system_clock,
        new_uid: UidSource = random_uid,
    ) -> Library:
        """Make a new, empty library at `path` and open it.

        Raises:
            LibraryError: something stands there already, or the folder cannot be written.
        """
        temporary = create_library_file(path)
        try:
            with (
                explained_errors(path),
                closing(sqlite3.connect(temporary, isolation_level=None)) as connection,
            ):
                connection.row_factory = sqlite3.Row
                connection.execute("PRAGMA foreign_keys = ON")
                with writing(
                    connection, path, action="init", analyst=analyst, clock=clock, new_uid=new_uid
                ) as transaction:
                    transaction.insert("library", created=utc_text(clock()), four_eyes=0)
            publish(temporary, path)
        finally:
            remove_temporary(temporary)
        return cls(path, clock=clock, new_uid=new_uid)

    def __enter__(self) -> Library:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the file."""
        self._connection.close()

    @contextmanager
    def reading(self) -> Iterator[sqlite3.Connection]:
        """One consistent state of the library for the length of the block; nothing can be written inside.

        Inside another `reading` or `writing` block it reads the state of that block, which ends with that block.
        """
        with explained_errors(self.path):
            inside_another = self._connection.in_transaction
            if inside_another:
                yield self._connection
                return
            self._connection.execute("PRAGMA query_only = ON")
            try:
                self._connection.execute("BEGIN")
                yield self._connection
            finally:
                # SQLite may have ended the transaction by itself, after an I/O error say.
                if self._connection.in_transaction:
                    self._connection.execute("ROLLBACK")
                self._connection.execute("PRAGMA query_only = OFF")

    @contextmanager
    def writing(self, action: str, *, analyst: str | None, reason: str | None = None) -> Iterator[WriteTransaction]:
        """One signed transaction with one event; see `store.writing`.

        Raises:
            SignatureMissingError: nobody signs.
        """
        if not any(letter.isprintable() and not letter.isspace() for letter in analyst or ""):
            raise SignatureMissingError
        with writing(
            self._connection,
            self.path,
            action=action,
            analyst=(analyst or "").strip(),
            clock=self.clock,
            reason=reason,
            new_uid=self.new_uid,
        ) as transaction:
            yield transaction

    def state(self) -> str:
        """The library state: hash of the newest event."""
        with self.reading() as connection:
            return library_state(connection)
