"""Content that is recognised but not read here: each kind is refused by its name with a way out."""

from __future__ import annotations

from speclib.errors import InputFileError
from speclib.formats.text_document import TextDocument

_EXPORT = "export the spectrum as JCAMP-DX or as text with two columns"
_TAKE = "an ANDI-MS run gives one spectrum at a time, by its retention time (--at)"
_SHEET = "save the sheet with the peaks as CSV or tab-separated text"
_UNPACK = "unpack it first"

_SIGNATURES: tuple[tuple[bytes, str, str], ...] = (
    (b"CDF\x01", "a netCDF file (the container of ANDI-MS runs)", f"{_TAKE}; or {_EXPORT}"),
    (b"CDF\x02", "a netCDF file (the container of ANDI-MS runs)", f"{_TAKE}; or {_EXPORT}"),
    (b"CDF\x05", "a netCDF file (the container of ANDI-MS runs)", _EXPORT),
    (b"\x89HDF\r\n\x1a\n", "an HDF5 or netCDF-4 file", _EXPORT),
    (b"PK\x03\x04", "a zip archive or a spreadsheet workbook", f"{_UNPACK}, or {_SHEET}"),
    (b"PK\x05\x06", "an empty zip archive", "give the file itself"),
    (b"\x1f\x8b", "a gzip-compressed file", _UNPACK),
    (b"BZh", "a bzip2-compressed file", _UNPACK),
    (b"\xfd7zXZ\x00", "an xz-compressed file", _UNPACK),
    (b"7z\xbc\xaf\x27\x1c", "a 7-Zip archive", _UNPACK),
    (b"%PDF-", "a PDF document", "get the peak table as text from the program that printed it"),
    (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1", "an old office document or workbook", _SHEET),
    (b"SQLite format 3\x00", "an SQLite database", "a library is named with -L, a spectrum file is JCAMP-DX or text"),
    (b"\x89PNG\r\n\x1a\n", "a PNG picture", "a picture of a spectrum holds no peaks; " + _EXPORT),
    (b"\xff\xd8\xff", "a JPEG picture", "a picture of a spectrum holds no peaks; " + _EXPORT),
    (b"GIF8", "a GIF picture", "a picture of a spectrum holds no peaks; " + _EXPORT),
)
_TEXT_BEGINNINGS: tuple[tuple[str, str, str], ...] = (
    ("<mzspeclib", "an mzSpecLib text library", "mzSpecLib is not read as a spectrum file; " + _EXPORT),
    ("{\\rtf", "a word processor document (RTF)", "save it as plain text"),
    ("{", "a JSON document", _EXPORT),
    ("[{", "a JSON document", _EXPORT),
)
_XML_HEAD = 4096


def refuse_foreign_bytes(name: str, data: bytes) -> None:
    """Refuse binary content that is known by its first bytes.

    Raises:
        InputFileError: it is one of those.
    """
    for signature, what, advice in _SIGNATURES:
        if data.startswith(signature):
            raise _refusal(name, what, advice)


def refuse_foreign_text(document: TextDocument) -> None:
    """Refuse text of a known format that is not read here; XML is never parsed, so entities cannot do harm.

    Raises:
        InputFileError: it is one of those.
    """
    first = next((line for line in document.lines if line.strip()), "")
    head = first.lstrip().lower()
    for beginning, what, advice in _TEXT_BEGINNINGS:
        if head.startswith(beginning):
            raise document.error(f"this is {what}, which is not read here", place="beginning", advice=advice)
    if head.startswith("<"):
        raise document.error(
            f"this is {_xml_kind(document)}, which is not read here", place="beginning", advice=_EXPORT
        )


def _xml_kind(document: TextDocument) -> str:
    head = "\n".join(document.lines[:60])[:_XML_HEAD].lower()
    if "<mzml" in head or "<indexedmzml" in head:
        return "an mzML run (XML)"
    return "an HTML page" if "<html" in head or "<!doctype html" in head else "an XML document"


def _refusal(name: str, what: str, advice: str) -> InputFileError:
    return InputFileError(name, f"this is {what}, which is not read here", place="first bytes", advice=advice)
