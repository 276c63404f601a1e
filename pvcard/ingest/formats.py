"""The kinds of file an export can be, one reader each, told apart by content.

A reader turns a file into a table: names, metadata and a way to read the wanted columns. What the
columns mean is found out afterwards, the same for every kind. A further kind is added by its
reader in `READERS`.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import NamedTuple, Protocol

from pvcard.errors import ExportError
from pvcard.ingest.text import Entry, Recognise, TextLayout, open_text
from pvcard.types import Floats

_HEAD = 4096
_UNIVERSAL_FILE = re.compile(rb"\s*-1\s+58\b")


class Table(Protocol):
    """What each reader hands over: understood, but with the numbers still unread."""

    @property
    def names(self) -> tuple[str, ...]:
        """Titles of the columns."""

    @property
    def metadata(self) -> Mapping[str, Entry]:
        """Key as written -> value."""

    @property
    def header_line(self) -> int | None:
        """Line of the titles, where the file has lines."""

    @property
    def notes(self) -> list[str]:
        """What was assumed."""

    @property
    def decimal_comma(self) -> bool:
        """Whether numbers use a decimal comma; known once they are read."""

    def read(
        self, positions: Sequence[int], progress: Callable[[float], None] | None = None
    ) -> list[Floats]:
        """Read the columns at `positions`, each (rows,), a missing value as NaN."""

    def place(self, position: int, row: int) -> str:
        """How an error names one value."""


class Reader(NamedTuple):
    """One kind of file."""

    name: str
    recognises: Callable[[bytes, Path], bool]  # first bytes and path
    open: Callable[[Path, TextLayout, Recognise], Table]


def _is_text(head: bytes, path: Path) -> bool:
    """Whether nothing stands in it that no text has."""
    control = sum(head.count(code) for code in range(32) if code not in b"\t\n\r\f\x1a")
    return control == 0


READERS: tuple[Reader, ...] = (Reader("delimited text", _is_text, open_text),)

# First bytes, what such a file is, what to do about it.
_FOREIGN: tuple[tuple[bytes, str, str], ...] = (
    (b"\xff\xfe", "text in UTF-16", "Save it as UTF-8"),
    (b"\xfe\xff", "text in UTF-16", "Save it as UTF-8"),
    (b"PK\x03\x04", "a zip archive", "Unpack it first"),
    (b"\x1f\x8b", "a gzip archive", "Unpack it first"),
    (b"BZh", "a bzip2 archive", "Unpack it first"),
    (b"\xfd7zXZ", "an xz archive", "Unpack it first"),
    (b"7z\xbc\xaf\x27\x1c", "a 7-zip archive", "Unpack it first"),
    (b"Rar!", "a rar archive", "Unpack it first"),
    (b"\xd0\xcf\x11\xe0", "an old spreadsheet or document", "Save the sheet as CSV"),
    (b"%PDF", "a PDF", "Export the readings as text; a page cannot be read"),
    (b"\x89PNG", "a picture", "Export the readings as text; a picture cannot be read"),
    (b"\xff\xd8\xff", "a picture", "Export the readings as text; a picture cannot be read"),
    (b"GIF8", "a picture", "Export the readings as text; a picture cannot be read"),
    (b"\x89HDF\r\n\x1a\n", "an HDF5 file", "Export the readings as delimited text"),
    (b"MATLAB 5.0", "a MATLAB file", "Export the readings as delimited text"),
    (b"TDSm", "a binary measurement file", "Export the readings as delimited text"),
    (b"SQLite format 3", "a database", "Export the readings as delimited text"),
    (b"<?xml", "XML", "Export the readings as delimited text"),
    (b"<!DOCTYPE html", "a web page", "Export the readings as delimited text"),
    (b"<html", "a web page", "Export the readings as delimited text"),
    (b"{", "JSON", "Export the readings as delimited text"),
)


def reader_for(path: Path) -> Reader:
    """The reader that can read a file.

    Parameters
    ----------
    path : the export

    Returns
    -------
    reader : an error says what an unreadable file looks like, and what is read
    """
    if path.is_dir():
        raise ExportError(
            "is a folder",
            file=str(path),
            expected="one or more export files",
            advice=f"Name the files in it, such as {path}/*.csv",
        )
    try:
        with open(path, "rb") as stream:
            head = stream.read(_HEAD)
    except OSError as problem:
        reason = (problem.strerror or str(problem)).lower()
        raise ExportError(f"cannot be read ({reason})", file=str(path)) from None
    if not head.strip():
        raise ExportError(
            "the file is empty", file=str(path), expected=_expected(), advice="Export again"
        )
    for first, looks, advice in _FOREIGN:
        if head.startswith(first):
            raise _foreign(path, *_spreadsheet(head, looks, advice))
    if _UNIVERSAL_FILE.match(head):
        raise _foreign(path, "a Universal File Format file", "Export the readings as text")
    for reader in READERS:
        if reader.recognises(head, path):
            return reader
    if b"\0" in head[:64] and head[:64].count(b"\0") >= 16 and b"\0\0\0" not in head[:64]:
        raise _foreign(path, "text in UTF-16", "Save it as UTF-8")
    raise _foreign(path, "a binary file", "Export the readings as delimited text")


def _spreadsheet(head: bytes, looks: str, advice: str) -> tuple[str, str]:
    """A zip archive may be a spreadsheet."""
    if head.startswith(b"PK") and (b"[Content_Types].xml" in head or b"xl/" in head):
        return "a spreadsheet", "Save the sheet as CSV"
    return looks, advice


def _foreign(path: Path, looks: str, advice: str) -> ExportError:
    return ExportError(
        "not an export that can be read",
        file=str(path),
        found=f"what looks like {looks}",
        expected=_expected(),
        advice=advice,
    )


def _expected() -> str:
    return " or ".join(reader.name for reader in READERS)
