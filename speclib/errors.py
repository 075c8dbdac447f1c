"""The errors of speclib: one base, few children, each with a sentence for the user and a next step.

Every message that can reach a user says what is wrong, where, and what to do about it.
"""

from __future__ import annotations


class SpeclibError(Exception):
    """Base of all errors that speclib raises on purpose.

    `message` is one sentence without a final stop; `advice` says what to do next.
    """

    def __init__(self, message: str, advice: str = "") -> None:
        super().__init__(message)
        self.message = message
        self.advice = advice

    def __str__(self) -> str:
        """Message and advice as one line."""
        return f"{self.message}; {self.advice}" if self.advice else self.message


class InputFileError(SpeclibError):
    """A file cannot be read: names the file, the place in it, the reason and the cure."""

    def __init__(self, file: str, reason: str, *, place: str = "", advice: str = "") -> None:
        where = f"{file}, {place}" if place else file
        super().__init__(f"{where}: {reason}", advice)
        self.file = file
        self.place = place
        self.reason = reason


class InvalidSpectrumError(SpeclibError):
    """Peaks that no spectrum can have: empty, non-finite, negative, unsorted, of unequal length."""


class InvalidFormulaError(SpeclibError):
    """A text that is no molecular formula, or an operation that leaves a negative count."""


class InvalidStructureError(SpeclibError):
    """A SMILES that is empty, cannot be read, or has no standard InChI."""


class InvalidValueError(SpeclibError):
    """A value given by the user (option, manifest cell) that cannot be used."""


class LibraryError(SpeclibError):
    """The library file cannot be used: not a library, newer than this program, locked, read-only, damaged."""


class LibraryBusyError(LibraryError):
    """Another process holds the write lock of the library."""


class EntryNotFoundError(SpeclibError):
    """A compound, spectrum, assignment or case that the library does not hold."""


class AmbiguousEntryError(SpeclibError):
    """A name that fits several entries; the message lists the candidates."""


class RefusedError(SpeclibError):
    """A change that a rule of the library forbids (gate of sign-off, duplicate, decided already)."""


class SignatureMissingError(SpeclibError):
    """A change without the name of the person who makes it."""

    def __init__(self) -> None:
        super().__init__(
            "this changes the library and nobody signs it",
            "add --by NAME or set SPECLIB_ANALYST",
        )
