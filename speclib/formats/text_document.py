"""From bytes to numbered lines of text: byte order marks, encodings, line ends, and the refusal of what is no text."""

from __future__ import annotations

import codecs
import re
from dataclasses import dataclass

from speclib.errors import InputFileError
from speclib.formats.options import codec_name

MAX_LINES = 2_000_000
_LINE_END = re.compile(r"\r\n|\r|\n")
_CONTROL = re.compile("[\x00-\x08\x0b-\x1f\x7f-\x9f\ud800-\udfff]")
_BYTE_ORDER_MARKS = (
    (codecs.BOM_UTF8, "utf-8"),
    (codecs.BOM_UTF32_LE, "utf-32-le"),  # before UTF-16: it begins with the same two bytes
    (codecs.BOM_UTF32_BE, "utf-32-be"),
    (codecs.BOM_UTF16_LE, "utf-16-le"),
    (codecs.BOM_UTF16_BE, "utf-16-be"),
)
_END_OF_TEXT = "\x1a"
"""Ctrl-Z, with which old programs end a text file; anything after it is not text."""


def shown(text: str, limit: int = 40) -> str:
    """A piece of a file in quotation marks, as a message may show it: short, on one line, nothing unprintable."""
    return repr(text if len(text) <= limit else text[:limit] + "...")


def shown_name(name: str) -> str:
    """A file name as a message may show it: control characters and stray bytes escaped."""
    return "".join(c if c.isprintable() else repr(c)[1:-1] for c in name)


@dataclass(frozen=True)
class TextDocument:
    """A decoded file: base name, lines without their ends (the first is line 1), remarks of the decoder."""

    file_name: str
    lines: tuple[str, ...]
    notes: tuple[str, ...] = ()

    def error(self, reason: str, *, line: int | None = None, place: str = "", advice: str = "") -> InputFileError:
        """The refusal of this file, to be raised; the place is a line, or in words."""
        where = f"line {line}" if line is not None else place
        return InputFileError(shown_name(self.file_name), reason, place=where, advice=advice)


def decode_document(file_name: str, data: bytes, encoding: str | None = None) -> TextDocument:
    """Decode the bytes of a file and split them into lines.

    Without `encoding`: a byte order mark decides, else UTF-8, else Windows-1252 with a note.

    Raises:
        InputFileError: not text, or not text in the encoding that was named.
    """
    text, notes = _decoded(file_name, data, encoding)
    text = text.removeprefix("\ufeff")
    if _END_OF_TEXT in text:
        head, _, tail = text.partition(_END_OF_TEXT)
        if not tail.strip(_END_OF_TEXT + "\0 \r\n"):
            text = head
    if text.count("\n") + text.count("\r") > MAX_LINES:
        raise InputFileError(
            shown_name(file_name),
            f"more than {MAX_LINES} lines are not read",
            advice="give a file of single spectra",
        )
    document = TextDocument(file_name, tuple(_LINE_END.split(text)), notes)
    _refuse_control_characters(document)
    return document


def _decoded(file_name: str, data: bytes, encoding: str | None) -> tuple[str, tuple[str, ...]]:
    marked = next((name for mark, name in _BYTE_ORDER_MARKS if data.startswith(mark)), None)
    if encoding is not None:
        named = codec_name(encoding)
        if marked is not None and not marked.startswith(named.removesuffix("-sig")):
            raise InputFileError(
                shown_name(file_name),
                f"the file begins with the byte order mark of {marked}, but --encoding {encoding} was given",
                place="first bytes",
                advice=f"leave --encoding out or give --encoding {marked}",
            )
        return _strictly(file_name, data, named), ()
    if marked is not None:
        return _strictly(file_name, data, marked), ()
    _refuse_null_bytes(file_name, data)
    try:
        return data.decode("utf-8"), ()
    except UnicodeDecodeError as error:
        line = 1 + len(re.findall(rb"\r\n|\r|\n", data[: error.start]))
    text = _strictly(file_name, data, "cp1252")
    note = f"the text is not UTF-8 (line {line}) and was read as Windows-1252; --encoding NAME reads it otherwise"
    return text, (note,)


def _strictly(file_name: str, data: bytes, codec: str) -> str:
    try:
        return data.decode(codec)
    except UnicodeDecodeError as error:
        # In 16 and 32 bit encodings a line end is wider than its byte, but the byte still occurs once a line.
        line = 1 + data.count(b"\n", 0, error.start)
        what = "neither UTF-8 nor Windows-1252" if codec == "cp1252" else f"not {codec}"
        reason = f"the bytes at offset {error.start} are {what}"
    except UnicodeError as error:
        line, reason = 1, f"the bytes are not {codec} ({error})"
    raise InputFileError(
        shown_name(file_name),
        reason,
        place=f"line {line}",
        advice="name the encoding with --encoding NAME, or save the file as UTF-8",
    )


def _refuse_null_bytes(file_name: str, data: bytes) -> None:
    position = data.rstrip(b"\0\x1a").find(b"\0")
    if position < 0:
        return
    head = data[:400]
    advice = "give a JCAMP-DX file or a text file with two columns"
    if len(head) >= 4 and head[1::2].count(0) >= len(head[1::2]) * 0.9 and 0 not in head[::2]:
        advice = "if it is text in UTF-16, say so with --encoding utf-16-le"
    elif len(head) >= 4 and head[::2].count(0) >= len(head[::2]) * 0.9 and 0 not in head[1::2]:
        advice = "if it is text in UTF-16, say so with --encoding utf-16-be"
    raise InputFileError(
        shown_name(file_name),
        "this is binary data, not text (it holds a null byte)",
        place=f"offset {position}",
        advice=advice,
    )


def _refuse_control_characters(document: TextDocument) -> None:
    if _CONTROL.search("\n".join(document.lines)) is None:
        return
    for number, line in enumerate(document.lines, start=1):
        stray = _CONTROL.search(line)
        if stray is not None:
            raise document.error(
                f"the control character {stray[0]!r} has no place in text: this is binary data or a damaged file",
                line=number,
                advice="give a JCAMP-DX file or a text file with two columns, or name its --encoding",
            )
