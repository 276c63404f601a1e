"""Numbers of a delimited text, block by block, so that a large export stays in bounded memory.

A block whose every line has the same number of fields goes the fast way: small exports through
Python's own `float`, large ones through the parser of pandas. Anything irregular goes line by line,
which either explains itself (a missing value, a blank line, a cut last line) or ends in an error
that names the line and the column.
"""

from __future__ import annotations

import io
import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from pvcard.errors import ExportError
from pvcard.types import Floats

BLOCK_SIZE = 1 << 24  # bytes
SMALL_SIZE = 2_000_000  # bytes; below, loading pandas would cost more than it saves
MISSING = (
    "",
    "nan",
    "NaN",
    "NAN",
    "na",
    "NA",
    "n/a",
    "N/A",
    "#N/A",
    "null",
    "NULL",
    "-",
    "--",
    "---",
)
_MISSING = frozenset(word.encode() for word in MISSING)
_NUMBER = re.compile(rb"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?|[+-]?inf(inity)?", re.IGNORECASE)
_IS_BLANK = np.isin(np.arange(256), list(b" \t\n\r\v\f"))  # as bytes.split has it
_QUOTED = re.compile(rb'"([^"\n]*)"')

Progress = Callable[[float], None]


@dataclass
class NumberText:
    """The part of a text below its header, and what was learnt about it."""

    path: Path
    start: int  # bytes before the first data line
    first_line: int  # number of the first data line in the file, from 1
    delimiter: bytes  # b" " stands for any run of blanks
    names: tuple[str, ...]
    decimal: str | None  # ".", "," or None while undecided
    carriage_returns: bool  # lines end with a bare carriage return
    notes: list[str] = field(default_factory=list)
    skipped: list[int] = field(
        default_factory=list
    )  # rows before which a blank line was passed over

    def line_of(self, row: int) -> int:
        """Line of the file on which a row stands."""
        return self.first_line + row + sum(1 for before in self.skipped if before <= row)

    def place(self, position: int, row: int) -> str:
        """Line and column, as an error names them."""
        return f"line {self.line_of(row)}, column '{self.names[position]}'"

    def read(self, positions: Sequence[int], progress: Progress | None = None) -> list[Floats]:
        """Read the columns at `positions`; a missing value becomes NaN.

        Parameters
        ----------
        positions : places of the wanted columns, from 0
        progress : called with the fraction read so far

        Returns
        -------
        columns : list of (rows,)
            In the order of `positions`, in the units of the export.
        """
        total = max(self.path.stat().st_size - self.start, 1)
        whole = [np.empty(0) for _ in positions]
        rows = read = 0
        for block, size, last in self._blocks():
            columns = self._parse(block, positions, rows, last, small=total < SMALL_SIZE)
            read += size
            more = len(columns[0])
            expected = int(1.02 * (rows + more) * total / read)
            for number, column in enumerate(columns):
                whole[number] = _with_room(whole[number], rows, rows + more, expected)
                whole[number][rows : rows + more] = column
            rows += more
            if progress is not None:
                progress(min(read / total, 1.0))
        return [column[:rows] for column in whole]

    def _blocks(self) -> Iterator[tuple[bytes, int, bool]]:
        """Whole lines of about `BLOCK_SIZE` bytes; how many were read; whether it is the last."""
        remaining = self.path.stat().st_size - self.start
        rest = b""
        with open(self.path, "rb") as stream:
            stream.seek(self.start)
            while chunk := stream.read(BLOCK_SIZE):
                remaining -= len(chunk)
                if self.carriage_returns:
                    chunk = chunk.replace(b"\r", b"\n")
                data = rest + chunk
                if remaining <= 0:
                    yield data.replace(b"\r\n", b"\n").rstrip(b"\n\r \x1a\0"), len(chunk), True
                    return
                cut = data.rfind(b"\n") + 1
                rest = data[cut:]
                yield data[:cut].replace(b"\r\n", b"\n").removesuffix(b"\n"), len(chunk), False

    def _parse(
        self, data: bytes, positions: Sequence[int], row: int, last: bool, *, small: bool
    ) -> list[Floats]:
        """Numbers of one block whose first line is row `row`."""
        if not data:
            return [np.empty(0) for _ in positions]
        if b'"' in data:
            data = _QUOTED.sub(lambda found: _unquoted(found.group(1), self.delimiter), data)
        if self.decimal is None:
            self.decimal = self._decimal_of(data, positions, row)
        mixed = self.decimal == "," and b"." in data
        if b"_" not in data and not mixed and _regular(data, self.delimiter, len(self.names)):
            plain = data.replace(b",", b".") if self.decimal == "," else data
            try:
                if small:
                    return _by_python(plain, self.delimiter, len(self.names), positions)
                return _by_pandas(plain, self.delimiter, positions)
            except ValueError:
                pass
        return self._line_by_line(data, positions, row, last)

    def _decimal_of(self, data: bytes, positions: Sequence[int], row: int) -> str | None:
        """Decimal mark of the wanted columns; None while they show neither."""
        if self.delimiter == b",":
            return "."
        if b"," not in data:
            return "." if b"." in data else None
        seen = set()
        for shift, line in enumerate(data.split(b"\n", 1000)[:1000]):
            fields = _split(line, self.delimiter)
            for position in positions:
                value = fields[position] if position < len(fields) else b""
                seen |= {mark for mark in (b".", b",") if mark in value}
                if len(seen) == 2:
                    raise self._error(
                        "decimal point and decimal comma are mixed",
                        position,
                        row + shift,
                        found=repr(value.decode("latin-1")),
                        expected="one decimal mark throughout and no mark between thousands",
                    )
        return {frozenset(): None, frozenset((b".",)): "."}.get(frozenset(seen), ",")

    def _line_by_line(
        self, data: bytes, positions: Sequence[int], row: int, last: bool
    ) -> list[Floats]:
        """Numbers of a block that is not regular; explains what cannot be read."""
        lines = data.split(b"\n")
        values: list[list[float]] = []
        wanted = len(self.names)
        for index, line in enumerate(lines):
            here = row + len(values)
            if not line.strip(b" \t" if self.delimiter == b" " else b" "):
                self.skipped.append(here)
                continue
            fields = _split(line, self.delimiter)
            if len(fields) == wanted + 1 and not fields[-1].strip():
                fields.pop()
            if len(fields) != wanted:
                if last and index == len(lines) - 1 and here > 0:
                    self.notes.append(
                        f"the last line ({self.line_of(here)}) has {len(fields)} of {wanted} "
                        "fields and was left out"
                    )
                    break
                raise self._ragged(here, fields, wanted)
            values.append(
                [self._number(fields[position], position, here) for position in positions]
            )
        table = np.array(values, dtype=np.float64).reshape(len(values), len(positions))
        return [np.ascontiguousarray(column) for column in table.T]

    def _number(self, text: bytes, position: int, row: int) -> float:
        """One field as a number; NaN when it is blank."""
        text = text.strip()
        if text in _MISSING:
            return np.nan
        plain = text.replace(b",", b".") if self.decimal == "," else text
        if _NUMBER.fullmatch(plain) and not (self.decimal == "," and b"." in text):
            return float(plain)
        advice = "Leave a missing value blank, and keep text out of columns of numbers"
        if b"," in text or (self.decimal == "," and b"." in text):
            mark = "comma" if self.decimal == "," else "point"
            advice = (
                f"The decimal mark was taken to be a {mark}; if it is not, say so in columns.toml, "
                "[text] decimal"
            )
        raise self._error(
            "not a number",
            position,
            row,
            found=repr(text.decode("latin-1")),
            expected="a number",
            advice=advice,
        )

    def _ragged(self, row: int, fields: list[bytes], wanted: int) -> ExportError:
        """Error for a line with too many or too few fields."""
        advice = "Export again, or remove that line"
        if self.delimiter == b"," and len(fields) > wanted:
            advice += ". A decimal comma needs ; or tab between the columns"
        return ExportError(
            "the line has another number of fields than the header",
            file=str(self.path),
            place=f"line {self.line_of(row)}",
            found=f"{len(fields)} field(s)",
            expected=str(wanted),
            advice=advice,
        )

    def _error(self, problem: str, position: int, row: int, **words: str) -> ExportError:
        """Error that names file, line and column."""
        return ExportError(problem, file=str(self.path), place=self.place(position, row), **words)


def _with_room(column: Floats, filled: int, needed: int, expected: int) -> Floats:
    """The column, moved to a larger place where it is too short."""
    if len(column) >= needed:
        return column
    larger = np.empty(max(needed, expected))
    larger[:filled] = column[:filled]
    return larger


def _split(line: bytes, delimiter: bytes) -> list[bytes]:
    """Fields of one line."""
    return line.split() if delimiter == b" " else line.split(delimiter)


def _unquoted(text: bytes, delimiter: bytes) -> bytes:
    """Content of a quoted field; where commas part the columns, one inside is a decimal comma."""
    return text.replace(b",", b".") if delimiter == b"," else text


def _regular(data: bytes, delimiter: bytes, fields: int) -> bool:
    """Whether each line of a block has the same number of fields."""
    characters = np.frombuffer(data, dtype=np.uint8)
    ends = np.append(np.flatnonzero(characters == ord("\n")), len(characters))
    if delimiter == b" ":
        blank = _IS_BLANK[characters]
        starts = np.flatnonzero(~blank & np.concatenate(([True], blank[:-1])))
        return bool((np.diff(np.searchsorted(starts, ends), prepend=0) == fields).all())
    marks = np.flatnonzero(characters == ord(delimiter))
    if len(marks) != len(ends) * (fields - 1):
        return False
    by_line = marks.reshape(len(ends), fields - 1)
    return bool((by_line[:, -1] < ends).all() and (by_line[1:, 0] > ends[:-1]).all())


def _by_python(
    data: bytes, delimiter: bytes, fields: int, positions: Sequence[int]
) -> list[Floats]:
    """Columns of a regular block; ValueError where a field is not a plain number."""
    tokens = data.split() if delimiter == b" " else data.replace(b"\n", delimiter).split(delimiter)
    return [np.array(list(map(float, tokens[position::fields]))) for position in positions]


def _by_pandas(data: bytes, delimiter: bytes, positions: Sequence[int]) -> list[Floats]:
    """Columns of a large regular block; ValueError where a field is not a plain number."""
    import pandas

    frame = pandas.read_csv(
        io.BytesIO(data),
        sep=r"\s+" if delimiter == b" " else delimiter.decode(),
        header=None,
        usecols=sorted(set(positions)),
        dtype=np.float64,
        na_values=list(MISSING),
        keep_default_na=False,
        skip_blank_lines=False,
        quoting=3,
        engine="c",
    )
    return [frame[position].to_numpy() for position in positions]
