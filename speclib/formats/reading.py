"""The door to all readers: bytes in, `SourceFile` out. The reader is chosen by content, never by the file's extension.

A new format is one more `TextReader` in `_TEXT_READERS`, or a binary signature that leads to its reader instead of to a
refusal in `foreign_content`.
"""

from __future__ import annotations

import hashlib
import stat
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from speclib.errors import InputFileError
from speclib.formats.delimited_text import read_delimited_text
from speclib.formats.foreign_content import refuse_foreign_bytes, refuse_foreign_text
from speclib.formats.options import DecimalMark, ReadOptions, Separator
from speclib.formats.text_document import TextDocument, decode_document, shown_name
from speclib.model.spectrum import SourceFile, SourceSpectrum

__all__ = ["MAX_FILE_BYTES", "DecimalMark", "ReadOptions", "Separator", "read_spectra", "read_spectra_from_bytes"]

MAX_FILE_BYTES = 64 * 1024 * 1024
_SINGLE_SPECTRA = "give files of single spectra, not whole runs"


@dataclass(frozen=True)
class TextReader:
    """A reader of one text format: its name, how it knows its own, and what it does."""

    name: str
    recognises: Callable[[TextDocument], bool]
    read: Callable[[TextDocument, ReadOptions], tuple[SourceSpectrum, ...]]


def _is_jcamp(document: TextDocument) -> bool:
    # The JCAMP-DX modules load only for files that can be it: they cost as much as all other readers together.
    if not any("##" in line for line in document.lines):
        return False
    from speclib.formats.jcamp_dx import is_jcamp

    return is_jcamp(document)


def _read_jcamp(document: TextDocument, options: ReadOptions) -> tuple[SourceSpectrum, ...]:
    from speclib.formats.jcamp_dx import read_jcamp

    return read_jcamp(document, options)


_TEXT_READERS = (
    TextReader("JCAMP-DX", _is_jcamp, _read_jcamp),
    # The last one takes whatever no other reader knows, and says what it misses.
    TextReader("delimited text", lambda _: True, read_delimited_text),
)


def read_spectra(path: Path, options: ReadOptions = ReadOptions()) -> SourceFile:  # noqa: B008 - frozen
    """Read every spectrum of a file.

    Raises:
        InputFileError: the file cannot be opened, is not a format that is read here, is malformed, or leaves something
            open that `options` must answer.
    """
    return read_spectra_from_bytes(path.name or str(path), read_file_bytes(path), options)


def read_spectra_from_bytes(
    file_name: str,
    data: bytes,
    options: ReadOptions = ReadOptions(),  # noqa: B008 - frozen
) -> SourceFile:
    """Read every spectrum of a file whose bytes are at hand, as from an upload; errors as `read_spectra`."""
    name = shown_name(file_name)
    if len(data) > MAX_FILE_BYTES:
        raise _too_large(name, MAX_FILE_BYTES, _SINGLE_SPECTRA)
    if not data.strip(b" \t\r\n\0\x1a\xef\xbb\xbf\xff\xfe"):
        raise InputFileError(name, "the file is empty", advice="export the spectrum again")
    refuse_foreign_bytes(name, data)
    document = decode_document(file_name, data, options.encoding)
    refuse_foreign_text(document)
    reader = next(reader for reader in _TEXT_READERS if reader.recognises(document))
    spectra = reader.read(document, options)
    return SourceFile(file_name, hashlib.sha256(data).hexdigest(), reader.name, spectra)


def read_file_bytes(path: Path, most: int | None = None, advice: str = _SINGLE_SPECTRA) -> bytes:
    """The bytes of a regular file of at most `most` (`MAX_FILE_BYTES`) bytes; `advice` is for a larger one.

    Raises:
        InputFileError: missing, a folder or a device, not readable, too large.
    """
    name = shown_name(path.name or str(path))
    most = MAX_FILE_BYTES if most is None else most
    try:
        mode = path.stat().st_mode
        if stat.S_ISDIR(mode):
            raise InputFileError(name, "this is a folder, not a file", advice="name the file in it")
        if not stat.S_ISREG(mode):
            # Opening a pipe or a device could wait for ever.
            raise InputFileError(name, "this is not a regular file", advice="copy the data to a file first")
        with path.open("rb") as stream:
            data = stream.read(most + 1)
    except FileNotFoundError as error:
        raise InputFileError(
            shown_name(str(path)), "the file does not exist", advice="check name and folder"
        ) from error
    except PermissionError as error:
        raise InputFileError(
            name, "the file may not be read (permission denied)", advice="ask its owner for the right to read it"
        ) from error
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
        raise InputFileError(name, f"the file cannot be opened ({reason})", advice="check name and folder") from error
    if len(data) > most:
        raise _too_large(name, most, advice)
    return data


def _too_large(name: str, most: int, advice: str) -> InputFileError:
    return InputFileError(name, f"the file is larger than {most // 2**20} MiB", advice=advice)
