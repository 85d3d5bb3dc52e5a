"""What sort of file some bytes are, told from the bytes and not from the name."""

from __future__ import annotations

import io
import zipfile
from typing import Literal

from .limits import MAX_BYTES, MAX_UNPACKED, MEGABYTE
from .refusal import EXPORT_TEXT, Refusal

Kind = Literal["text", "spreadsheet"]

_PICTURE = "Drop the file with the measured numbers, not a picture of the curve"
_UNPACK = "Unpack the archive and drop the files inside it"

# First bytes, what they are, and what to do about it.
_SIGNATURES: tuple[tuple[bytes, str, str], ...] = (
    (b"\x89PNG", "this is a picture (PNG)", _PICTURE),
    (b"\xff\xd8\xff", "this is a picture (JPEG)", _PICTURE),
    (b"GIF8", "this is a picture (GIF)", _PICTURE),
    (b"II*\x00", "this is a picture (TIFF)", _PICTURE),
    (b"MM\x00*", "this is a picture (TIFF)", _PICTURE),
    (b"%PDF", "this is a PDF document", EXPORT_TEXT),
    (b"{\\rtf", "this is a formatted text document (RTF)", "Save it as plain text and drop that file"),
    (b"\x1f\x8b", "this is a packed archive (gzip)", _UNPACK),
    (b"7z\xbc\xaf\x27\x1c", "this is a packed archive (7z)", _UNPACK),
    (b"Rar!", "this is a packed archive (RAR)", _UNPACK),
    (b"BZh", "this is a packed archive (bzip2)", _UNPACK),
    (b"\xfd7zXZ", "this is a packed archive (xz)", _UNPACK),
    (b"\x7fELF", "this is a program", EXPORT_TEXT),
    (b"\x89HDF", "this is a binary data file (HDF5)", EXPORT_TEXT),
    (b"SQLite format 3\x00", "this is a database", EXPORT_TEXT),
)
_OLE = b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1"
_ENCRYPTED = "EncryptedPackage".encode("utf-16-le")


def kind_of(data: bytes) -> Kind:
    """Text or spreadsheet.

    Raises
    ------
    Refusal
        For anything else, and for a file that is empty or too large.
    """
    if not data:
        raise Refusal("the file is empty", "Export the sweep again and check that the file has a size above zero")
    if len(data) > MAX_BYTES:
        raise Refusal(
            f"the file has {len(data) / MEGABYTE:.0f} MB, more than the {MAX_BYTES / MEGABYTE:.0f} MB that are read",
            "Split it into smaller files",
        )
    for signature, problem, remedy in _SIGNATURES:
        if data.startswith(signature):
            raise Refusal(problem, remedy)
    if data[:4] == b"RIFF" and data[8:12] == b"WEBP":
        raise Refusal("this is a picture (WebP)", _PICTURE)
    if data[:2] == b"BM" and b"\x00" in data[:14]:
        raise Refusal("this is a picture (BMP)", _PICTURE)
    if data[:2] == b"MZ" and b"\x00" in data[:16]:
        raise Refusal("this is a program", EXPORT_TEXT)
    if data.startswith(_OLE):
        if _ENCRYPTED in data:
            raise Refusal(
                "the spreadsheet is protected with a password", "Remove the password, save it and drop it again"
            )
        return "spreadsheet"
    if data.startswith((b"PK\x03\x04", b"PK\x05\x06")):
        return _zip_kind(data)
    _refuse_markup(data)
    return "text"


def _zip_kind(data: bytes) -> Kind:
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            entries = archive.infolist()
    except (zipfile.BadZipFile, ValueError, OSError, NotImplementedError, EOFError) as error:
        raise Refusal(
            "this is a spreadsheet or a zip archive, and it is damaged",
            "Save the spreadsheet again, or export it as CSV, and drop that file",
        ) from error
    names = {entry.filename for entry in entries}
    if sum(entry.file_size for entry in entries) > MAX_UNPACKED:
        raise Refusal(
            f"unpacked, this spreadsheet or archive would be larger than {MAX_UNPACKED / MEGABYTE:.0f} MB",
            "Save only the sheets with the sweeps, or export them as CSV",
        )
    if any(name.startswith("xl/") for name in names) or {"content.xml", "mimetype"} <= names:
        return "spreadsheet"
    if any(name.startswith(("word/", "ppt/")) for name in names):
        raise Refusal("this is a text document or a presentation, not a table", EXPORT_TEXT)
    raise Refusal("this is a zip archive", _UNPACK)


def _refuse_markup(data: bytes) -> None:
    start = data[:2000].lstrip(b"\xef\xbb\xbf \t\r\n").lower()
    if start.startswith((b"<!doctype html", b"<html", b"<head", b"<table", b"<body")):
        raise Refusal(
            "this is a web page (HTML), even if its name says spreadsheet",
            "Open it in a spreadsheet program, save it as CSV or XLSX and drop that file",
        )
    if start.startswith((b"<?xml", b"<svg")):
        raise Refusal("this is an XML file, not a table", EXPORT_TEXT)
