"""Delimited text: encoding, delimiter, metadata and header, found from the first lines of the file.

The header is the line with the most names that mean something; lines above it that start with `#`
hold `key: value`. What had to be assumed on the way is kept as notes.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from pvcard.errors import ExportError
from pvcard.ingest.text_numbers import NumberText, Progress
from pvcard.types import Floats

HEAD_SIZE = 1 << 18  # bytes in which the header must come
_DATA_LINES = 20  # lines of numbers looked at to understand the head
DELIMITERS = {"\t": "tab", ";": "semicolon", ",": "comma", " ": "blanks"}
_BYTE_ORDER_MARK = b"\xef\xbb\xbf"
_NUMBER = re.compile(r"[+-]?(\d+[.,]?\d*|[.,]\d+)([eE][+-]?\d+)?")
_NAME_WITH_UNIT = re.compile(r"\s*([^\[\]]*\[[^\[\]]*\])")

Recognise = Callable[[Sequence[str]], int]


@dataclass(frozen=True)
class TextLayout:
    """The `[text]` table of columns.toml; None where it is to be found out."""

    delimiter: str | None = None
    decimal: str | None = None
    encoding: str | None = None
    header_row: int | None = None  # line of the file, from 1
    time_format: str | None = None
    time_zone: str | None = None


@dataclass(frozen=True)
class Entry:
    """One metadata value as written, and where."""

    value: str
    line: int
    marked: bool = (
        True  # whether the line starts with `#`; others count only when columns.toml maps them
    )


@dataclass
class TextTable:
    """A text whose header is understood and whose numbers are still to be read."""

    names: tuple[str, ...]
    metadata: dict[str, Entry]
    numbers: NumberText
    header_line: int
    notes: list[str] = field(default_factory=list)

    def read(self, positions: Sequence[int], progress: Progress | None = None) -> list[Floats]:
        """Read the columns at `positions`, each (rows,); a missing value is NaN."""
        columns = self.numbers.read(positions, progress)
        self.notes.extend(self.numbers.notes)
        if self.numbers.skipped:
            self.notes.append(
                f"{len(self.numbers.skipped)} blank line(s) between the data were passed over"
            )
        return columns

    def place(self, position: int, row: int) -> str:
        """Line and column of one value."""
        return self.numbers.place(position, row)

    @property
    def decimal_comma(self) -> bool:
        """Whether the numbers turned out to use a decimal comma."""
        return self.numbers.decimal == ","


@dataclass(frozen=True)
class _Line:
    """One line of the head."""

    text: str
    number: int  # from 1
    start: int  # byte offset

    @property
    def commented(self) -> bool:
        return self.text.startswith(("#", '"#'))

    @property
    def bare(self) -> str:
        text = self.text.strip('"') if self.text.startswith('"#') else self.text
        return text.lstrip("# \t") if self.commented else text.strip(" ")


@dataclass(frozen=True)
class _Header:
    """The header line once split."""

    line: _Line
    delimiter: str
    names: tuple[str, ...]


def open_text(path: Path, layout: TextLayout, recognise: Recognise) -> TextTable:
    """Understand the head of a delimited text.

    Parameters
    ----------
    path : the export
    layout : what columns.toml says about the text
    recognise : how many of some names mean something; decides which line is the header

    Returns
    -------
    table : names and metadata, numbers still unread
    """
    with open(path, "rb") as stream:
        head = stream.read(HEAD_SIZE)
        cut = bool(stream.read(1))
    notes: list[str] = []
    returns = b"\n" not in head and b"\r" in head
    lines = _lines(head, layout, returns, cut, notes)
    header = _find_header(path, lines, layout, recognise)
    if header.line.commented:
        notes.append(f"the line of names ({header.line.number}) starts with #; taken as the header")
    first = _first_data_line(path, lines, header, notes)
    names = _fitted_names(path, header, first)
    if layout.delimiter is None and header.delimiter == " ":
        notes.append("columns are parted by blanks")
    numbers = NumberText(
        path=path,
        start=first.start,
        first_line=first.number,
        delimiter=header.delimiter.encode(),
        names=names,
        decimal="." if header.delimiter == "," else layout.decimal,
        carriage_returns=returns,
    )
    return TextTable(names, _metadata(lines, header), numbers, header.line.number, notes)


def _lines(
    head: bytes, layout: TextLayout, returns: bool, cut: bool, notes: list[str]
) -> list[_Line]:
    """Lines of the head with their numbers and offsets; a cut last one is left out."""
    offset = 0
    if head.startswith(_BYTE_ORDER_MARK):
        offset = len(_BYTE_ORDER_MARK)
        notes.append("the file starts with a byte-order mark, passed over")
    pieces = head[offset:].split(b"\r" if returns else b"\n")
    if cut and len(pieces) > 1:
        pieces.pop()
    encoding = layout.encoding or "utf-8"
    lines: list[_Line] = []
    data_lines = 0
    for number, piece in enumerate(pieces, start=1):
        try:
            text = piece.decode(encoding)
        except UnicodeDecodeError:
            text = piece.decode("latin-1")
        line = _Line(text.rstrip("\r"), number, offset)
        lines.append(line)
        offset += len(piece) + 1
        data_lines += _looks_like_data(line)
        if data_lines >= _DATA_LINES and number >= (layout.header_row or 0) + _DATA_LINES:
            break
    return lines


def _split(text: str, delimiter: str) -> tuple[str, ...]:
    """Names or fields of one line, without quotes and surrounding blanks."""
    if delimiter == " ":
        return _split_at_blanks(text)
    return tuple(name.strip() for name in _outside_quotes(text, delimiter))


def _outside_quotes(text: str, delimiter: str) -> list[str]:
    """Parts of a line between delimiters that do not stand in quotes; the quotes are dropped."""
    parts = [""]
    for number, piece in enumerate(text.split('"')):
        if number % 2:
            parts[-1] += piece
        else:
            first, *others = piece.split(delimiter)
            parts[-1] += first
            parts += others
    return parts


def _split_at_blanks(text: str) -> tuple[str, ...]:
    """Names parted by blanks; a name that ends with its unit in brackets may hold blanks itself."""
    text = text.strip()
    if '"' in text:
        return tuple(name.strip() for name in _outside_quotes(text, " ") if name.strip())
    if "[" not in text:
        return tuple(text.split())
    names: list[str] = []
    for part in re.split(r"\s{2,}|\t", text):
        pieces = [piece.strip() for piece in _NAME_WITH_UNIT.findall(part)] or [part]
        if pieces[0].lower().startswith("cycle "):
            pieces[:1] = ["cycle", pieces[0][6:].strip()]
        names.extend(pieces)
    return tuple(names)


def _is_number(text: str) -> bool:
    return _NUMBER.fullmatch(text.strip().strip('"')) is not None


def _looks_like_data(line: _Line) -> bool:
    """Whether a line consists of numbers only."""
    fields = [part for part in re.split(r"[;\t, ]+", line.text.strip()) if part]
    return bool(fields) and all(_is_number(part) for part in fields)


def _find_header(
    path: Path, lines: list[_Line], layout: TextLayout, recognise: Recognise
) -> _Header:
    """The line of names: that which columns.toml names, else the one with the most known names."""
    if layout.header_row is not None:
        candidates = [line for line in lines if line.number == layout.header_row]
    else:
        candidates = []
        for line in lines:
            if _looks_like_data(line):
                break
            if line.text.strip():
                candidates.append(line)
    best: tuple[int, _Header] | None = None
    for line in candidates:
        for delimiter in [layout.delimiter] if layout.delimiter else DELIMITERS:
            names = _split(line.bare, delimiter)
            known = recognise(names)
            if known and (best is None or known > best[0]):
                best = known, _Header(line, delimiter, names)
    if best is not None:
        return best[1]
    if layout.header_row is not None:
        raise ExportError(
            "the line that columns.toml calls the header holds no known name",
            file=str(path),
            place=f"line {layout.header_row}",
            found=repr(candidates[0].text.strip()[:60]) if candidates else "no such line",
            expected="names such as 'crank_angle [deg]', or those that columns.toml maps",
            advice="Lines count from 1, comments and blank lines included",
        )
    plain = [line for line in candidates if not line.commented]
    return _unknown_header(path, lines, plain, layout)


def _unknown_header(
    path: Path, lines: list[_Line], plain: list[_Line], layout: TextLayout
) -> _Header:
    """A header none of whose names is known, split so that a later error can list them."""
    if not plain:
        shown = next((line for line in lines if line.text.strip() and not line.commented), None)
        place = f"line {shown.number}" if shown else None
        raise ExportError(
            "no line of column names" if shown else "there are no data in it",
            file=str(path),
            place=place,
            found=repr(shown.text.strip()[:60]) if shown else "no line other than comments",
            expected="names such as 'crank_angle [deg]' and 'C1 head end [bar(a)]' above the data",
            advice="Export with column names" if shown else "Export again",
        )
    line = plain[-1]
    delimiter = layout.delimiter or next((mark for mark in DELIMITERS if mark in line.text), ",")
    return _Header(line, delimiter, _split(line.bare, delimiter))


def _first_data_line(path: Path, lines: list[_Line], header: _Header, notes: list[str]) -> _Line:
    """First line below the header that holds numbers; a line of units is passed over."""
    passed = 0
    for line in lines[header.line.number :]:
        if not line.text.strip():
            continue
        fields = (
            line.text.split() if header.delimiter == " " else _split(line.text, header.delimiter)
        )
        if line.commented or (passed < 3 and not any(_is_number(field) for field in fields)):
            passed += 1
            notes.append(f"line {line.number} below the names holds no numbers and was passed over")
            continue
        return line
    raise ExportError(
        "there are column names but no data below them",
        file=str(path),
        place=f"line {header.line.number}",
        expected="a line of numbers for each sample",
        advice="Export again; the writing may have been cut short",
    )


def _fitted_names(path: Path, header: _Header, first: _Line) -> tuple[str, ...]:
    """Names as many as the data have fields; only empty ones at the end may differ."""
    names = list(header.names)
    fields = first.text.split() if header.delimiter == " " else _split(first.text, header.delimiter)
    while len(names) > len(fields) and not names[-1]:
        names.pop()
    if len(fields) > len(names) and not any(fields[len(names) :]):
        names += [""] * (len(fields) - len(names))
    if len(names) == 1 and len(fields) == 1:
        raise ExportError(
            "only one column was found",
            file=str(path),
            place=f"line {header.line.number}",
            found=repr(header.line.text.strip()[:60]),
            expected="columns parted by comma, semicolon, tab or blanks",
            advice="Name another delimiter in columns.toml, [text] delimiter",
        )
    if len(names) != len(fields):
        advice = "Name each column once"
        if header.delimiter == "," and len(fields) > len(names):
            advice = "A decimal comma needs ; or tab between the columns"
        raise ExportError(
            "the first line of data has another number of fields than the header",
            file=str(path),
            place=f"line {first.number}",
            found=f"{len(fields)} field(s)",
            expected=f"{len(names)}, parted by {DELIMITERS[header.delimiter]}",
            advice=advice,
        )
    return tuple(names)


def _metadata(lines: list[_Line], header: _Header) -> dict[str, Entry]:
    """`key: value` of the lines above the header; the first one counts where a key comes twice."""
    entries: dict[str, Entry] = {}
    for line in lines[: header.line.number - 1]:
        marks = [":"] if line.commented or header.delimiter == " " else [":", header.delimiter]
        first = min(marks, key=lambda mark: line.bare.find(mark) % (len(line.bare) + 1))
        key, mark, value = line.bare.partition(first)
        if mark and key.strip():
            entry = Entry(
                value.strip().strip(header.delimiter).strip(), line.number, line.commented
            )
            entries.setdefault(key.strip(), entry)
    return entries
