"""Reading `columns.toml`: which column of an analyser holds what.

It is written once per analyser, so it may name columns and cylinders that one export does not
have; keys and values that mean nothing are errors all the same.
"""

from __future__ import annotations

import difflib
import tomllib
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from pvcard.errors import ExportError
from pvcard.ingest.recording import CYLINDER_PRESSURE
from pvcard.ingest.roles import ANGLE, CYCLE, LINE_KINDS, PRESSURE, PULSE, TIME, Role
from pvcard.ingest.text import TextLayout

_TABLES = ("angle", "cycle", "time", "pulse", "pressure", "line_pressure", "text", "metadata")
_SINGLE = {"angle": ANGLE, "cycle": CYCLE, "time": TIME, "pulse": PULSE}
_WITH_UNIT = {"angle": "deg", "time": "s", "pressure": "bar(a)", "line_pressure": "bar(a)"}
_ENDS = {"head_end": "head", "crank_end": "crank"}
_TEXT_KEYS = ("delimiter", "decimal", "encoding", "header_row", "time_format", "time_zone")
_DELIMITERS = {
    ",": ",",
    "comma": ",",
    ";": ";",
    "semicolon": ";",
    "\t": "\t",
    "tab": "\t",
    "\\t": "\t",
    " ": " ",
    "blanks": " ",
    "blank": " ",
    "space": " ",
}
_DECIMALS = {".": ".", "point": ".", ",": ",", "comma": ","}
_ENCODINGS = {"utf-8": "utf-8", "utf8": "utf-8", "latin-1": "latin-1", "iso-8859-1": "latin-1"}


@dataclass(frozen=True)
class MappedColumn:
    """What one named column holds, and where columns.toml says so."""

    role: Role
    unit: str | None
    key: str


@dataclass(frozen=True)
class ColumnMap:
    """A whole `columns.toml`; empty when there is none."""

    source: str | None = None
    columns: Mapping[str, MappedColumn] = field(default_factory=dict)
    layout: TextLayout = field(default_factory=TextLayout)
    metadata: Mapping[str, str] = field(default_factory=dict)  # their key -> our key


def read_columns(path: str | Path) -> ColumnMap:
    """Read and check a `columns.toml`.

    Parameters
    ----------
    path : the file

    Returns
    -------
    column_map : names in it are not yet compared with any export
    """
    try:
        with open(path, "rb") as stream:
            content = tomllib.load(stream)
    except OSError as problem:
        reason = (problem.strerror or str(problem)).lower()
        raise ExportError(f"cannot be read ({reason})", file=str(path)) from None
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as problem:
        raise ExportError(
            "not valid TOML",
            file=str(path),
            found=str(problem),
            expected='lines such as: column = "P1"',
        ) from None
    return _ColumnsFile(str(path)).read(content)


class _ColumnsFile:
    """Checks the tables of one file; errors name the key."""

    def __init__(self, file: str) -> None:
        self.file = file
        self.columns: dict[str, MappedColumn] = {}

    def read(self, content: dict[str, Any]) -> ColumnMap:
        """Every table of the file."""
        self._known(content, _TABLES, "")
        for name, what in _SINGLE.items():
            if name in content:
                self._column(content[name], name, Role(what), with_unit=name in _WITH_UNIT)
        for cylinder, ends in self._table(content.get("pressure", {}), "pressure").items():
            self._ends(ends, f"pressure.{cylinder}", cylinder)
        for cylinder, ends in self._table(
            content.get("line_pressure", {}), "line_pressure"
        ).items():
            self._line_ends(ends, f"line_pressure.{cylinder}", cylinder)
        layout = self._layout(self._table(content.get("text", {}), "text"))
        metadata = self._table(content.get("metadata", {}), "metadata")
        for key in metadata:
            self._text(metadata, key, f"metadata.{key}")
        return ColumnMap(self.file, self.columns, layout, metadata)

    def _ends(self, ends: Any, place: str, cylinder: str) -> None:
        self._known(self._table(ends, place), _ENDS, place)
        for key, table in ends.items():
            role = Role(PRESSURE, cylinder, _ENDS[key], CYLINDER_PRESSURE)
            self._column(table, f"{place}.{key}", role, with_unit=True)

    def _line_ends(self, ends: Any, place: str, cylinder: str) -> None:
        self._known(self._table(ends, place), _ENDS, place)
        for key, sides in ends.items():
            self._known(self._table(sides, f"{place}.{key}"), LINE_KINDS, f"{place}.{key}")
            for side, table in sides.items():
                role = Role(PRESSURE, cylinder, _ENDS[key], LINE_KINDS[side])
                self._column(table, f"{place}.{key}.{side}", role, with_unit=True)

    def _column(self, table: Any, place: str, role: Role, *, with_unit: bool) -> None:
        """One table with `column` and, for a quantity, `unit`."""
        keys = ("column", "unit") if with_unit else ("column",)
        self._known(self._table(table, place), keys, place)
        example = _WITH_UNIT.get(place.split(".")[0], "")
        name = self._text(table, "column", f"{place}.column", expected="the name of a column")
        unit = None
        if with_unit:
            unit = self._text(
                table, "unit", f"{place}.unit", expected=f'a unit, such as "{example}"'
            )
        if name in self.columns:
            raise self._error(
                "the column is already taken",
                f"{place}.column",
                found=f"'{name}', which {self.columns[name].key} names too",
                expected="one use of each column",
            )
        self.columns[name] = MappedColumn(role, unit, place)

    def _layout(self, table: dict[str, Any]) -> TextLayout:
        """The `[text]` table."""
        self._known(table, _TEXT_KEYS, "text")
        row = table.get("header_row")
        if row is not None and (not isinstance(row, int) or isinstance(row, bool) or row < 1):
            raise self._error(
                "not a line number", "text.header_row", found=repr(row), expected="1, 2, 3 ..."
            )
        for key in ("time_format", "time_zone"):
            if key in table:
                self._text(table, key, f"text.{key}")
        return TextLayout(
            delimiter=self._choice(table, "delimiter", _DELIMITERS, '"," ";" "tab" or "blanks"'),
            decimal=self._choice(table, "decimal", _DECIMALS, '"." or ","'),
            encoding=self._choice(table, "encoding", _ENCODINGS, '"utf-8" or "latin-1"'),
            header_row=row,
            time_format=table.get("time_format"),
            time_zone=table.get("time_zone"),
        )

    def _choice(
        self, table: dict[str, Any], key: str, choices: Mapping[str, str], expected: str
    ) -> str | None:
        value = table.get(key)
        if value is None:
            return None
        chosen = choices.get(value.lower()) if isinstance(value, str) else None
        if chosen is None:
            raise self._error(
                "cannot be used here", f"text.{key}", found=repr(value), expected=expected
            )
        return chosen

    def _table(self, value: Any, place: str) -> dict[str, Any]:
        if isinstance(value, dict):
            return value
        raise self._error("not a table", place, found=repr(value), expected=f"[{place}]")

    def _text(
        self, table: dict[str, Any], key: str, place: str, *, expected: str = "a text in quotes"
    ) -> str:
        value = table.get(key)
        if isinstance(value, str) and value.strip():
            return value.strip()
        problem = "is missing" if value is None else "cannot be used here"
        found = None if value is None else repr(value)
        raise self._error(problem, place, found=found, expected=expected)

    def _known(self, table: dict[str, Any], known: Iterable[str], place: str) -> None:
        """Unknown keys are errors with the nearest known key."""
        for key in table:
            if key not in known:
                near = difflib.get_close_matches(key, list(known), n=1, cutoff=0.5)
                raise self._error(
                    "unknown key",
                    f"{place}.{key}" if place else key,
                    expected=f"one of {', '.join(known)}",
                    advice=f"Did you mean '{near[0]}'?" if near else None,
                )

    def _error(self, problem: str, place: str, **words: str | None) -> ExportError:
        return ExportError(problem, file=self.file, place=place, **words)
