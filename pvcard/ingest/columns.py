"""What each column of an export means: by its own name, or by a `columns.toml`.

Names that mean nothing are left out and listed once; when something that is needed is missing, the
error lists the names that were found and the nearest ones.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from pvcard.errors import ExportError, InputError
from pvcard.ingest.columns_file import ColumnMap, MappedColumn
from pvcard.ingest.roles import (
    ANGLE,
    CYCLE,
    PRESSURE,
    PULSE,
    TIME,
    Role,
    plain,
    role_of_name,
    split_unit,
)
from pvcard.units import parse_pressure_unit, parse_unit

if TYPE_CHECKING:
    from pvcard.machine import Machine

_MOST_LISTED = 30
_FIELDS = {ANGLE: "angle", TIME: "time", PULSE: "pulse", CYCLE: "cycle"}


@dataclass(frozen=True)
class Column:
    """One column that is read."""

    position: int  # from 0
    name: str
    role: Role
    unit: str  # as written, "" where it has none
    size: float  # SI (angle: deg) per unit of the export
    reference: str = ""  # of a pressure: "absolute", "gauge" or "unknown"


@dataclass
class MatchedColumns:
    """The columns of one export that are read."""

    angle: Column | None = None
    time: Column | None = None
    pulse: Column | None = None
    cycle: Column | None = None
    pressures: list[Column] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)

    def all(self) -> list[Column]:
        """Every column that is read, once."""
        single = (self.angle, self.time, self.pulse, self.cycle)
        return [column for column in single if column is not None] + self.pressures


def recognised(names: Sequence[str], column_map: ColumnMap) -> int:
    """How many of some names mean something; tells the header from other lines."""
    mapped = {plain(name) for name in column_map.columns}
    return sum(plain(name) in mapped or role_of_name(name) is not None for name in names)


def match_columns(
    names: Sequence[str], column_map: ColumnMap, machine: Machine, *, file: str, line: int | None
) -> MatchedColumns:
    """Find the role of each column.

    Parameters
    ----------
    names : titles of the columns, in order
    column_map : what columns.toml says; it comes before the names themselves
    machine : whose cylinders may appear
    file, line : named in errors

    Returns
    -------
    matched : with notes on what was left out and why
    """
    return _Matching(names, column_map, machine, file, line).run()


class _Matching:
    """The matching of one export."""

    def __init__(
        self,
        names: Sequence[str],
        column_map: ColumnMap,
        machine: Machine,
        file: str,
        line: int | None,
    ) -> None:
        self.names = names
        self.column_map = column_map
        self.cylinders = {plain(cylinder.name): cylinder.name for cylinder in machine.cylinders}
        self.machine_name = machine.name
        self.file = file
        self.place = None if line is None else f"line {line}"
        self.matched = MatchedColumns()
        self.left_out: list[str] = []
        self.strange_cylinders: dict[str, None] = {}

    def run(self) -> MatchedColumns:
        """Match all columns and check that the needed ones are there."""
        taken: dict[Role, str] = {}
        for position, name in enumerate(self.names):
            column = self._column(position, name)
            if column is None:
                continue
            if column.role in taken:
                raise self._error(
                    f"two columns hold the {column.role}",
                    found=f"'{taken[column.role]}' and '{name}'",
                    expected="one",
                    advice="Rename one of them, or name the right one in columns.toml",
                )
            taken[column.role] = name
            self._keep(column)
        self._note_left_out()
        self._check()
        return self.matched

    def _column(self, position: int, name: str) -> Column | None:
        """The column as it is read; None when it is left out."""
        found = self._mapped(name)
        described = (found.role, found.unit) if found else role_of_name(name)
        if described is None:
            if name:
                self.left_out.append(name)
            return None
        role, unit = described
        if role.what == PRESSURE:
            cylinder = self.cylinders.get(plain(role.cylinder))
            if cylinder is None:
                self.strange_cylinders[role.cylinder] = None
                self.left_out.append(name)
                return None
            role = role._replace(cylinder=cylinder)
        return self._with_unit(position, name, role, unit, found)

    def _mapped(self, name: str) -> MappedColumn | None:
        """What columns.toml says of a column; capitals and blanks are forgiven."""
        exact = self.column_map.columns.get(name)
        if exact is not None or not name:
            return exact
        alike = [
            column
            for key, column in self.column_map.columns.items()
            if plain(key) == plain(name) and key not in self.names
        ]
        return alike[0] if len(alike) == 1 else None

    def _with_unit(
        self, position: int, name: str, role: Role, unit: str | None, mapped: MappedColumn | None
    ) -> Column:
        """Look the unit up."""
        if role.what in (CYCLE, PULSE):
            return Column(position, name, role, unit or "", 1.0)
        if not unit and role.what == ANGLE:
            self.matched.notes.append(f"column '{name}' has no unit; taken as degrees")
            unit = "deg"
        if not unit:
            example = f"{name} [s]" if role.what == TIME else f"{split_unit(name)[0]} [bar(a)]"
            raise self._error(
                "the column has no unit", found=f"'{name}'", expected=f"for example '{example}'"
            )
        try:
            if role.what == PRESSURE:
                size, reference = parse_pressure_unit(unit)
                return Column(position, name, role, unit, size, reference)
            size = parse_unit(unit, "angle" if role.what == ANGLE else "time").size
        except InputError as problem:
            key = f"{mapped.key}.unit" if mapped else None
            raise ExportError(
                problem.problem,
                file=self.column_map.source if key else self.file,
                place=key or f"{self.place}, column '{name}'",
                found=problem.found,
                expected=problem.expected,
                advice=problem.advice,
            ) from None
        return Column(position, name, role, unit, size)

    def _keep(self, column: Column) -> None:
        """Put a column where it belongs."""
        if column.role.what == PRESSURE:
            self.matched.pressures.append(column)
        else:
            setattr(self.matched, _FIELDS[column.role.what], column)

    def _note_left_out(self) -> None:
        """List once what is not read."""
        notes = self.matched.notes
        if self.left_out:
            hint = "" if self.strange_cylinders else self._hint(self.left_out)
            notes.append(f"columns left out: {_listed(self.left_out)}{hint}")
        if self.strange_cylinders:
            notes.append(
                f"machine {self.machine_name} has no cylinder {_listed(self.strange_cylinders)}; "
                f"it has {_listed(self.cylinders.values())}"
            )
        present = {plain(name) for name in self.names}
        absent = [name for name in self.column_map.columns if plain(name) not in present]
        if absent:
            notes.append(
                f"named in {self.column_map.source} but not in the export: {_listed(absent)}"
            )

    def _hint(self, names: Sequence[str]) -> str:
        """Nearest meaningful name of the first doubtful one, as part of a sentence."""
        ends = ("head end", "crank end")
        known = [f"{cylinder} {end}" for cylinder in self.cylinders.values() for end in ends]
        known += ["crank_angle", "once_per_turn", "cycle", *self.column_map.columns]
        pressures = known[: 2 * len(self.cylinders)]
        known += [f"{name} {side} line" for name in pressures for side in ("suction", "discharge")]
        by_plain = {plain(name): name for name in known}
        for name in names:
            near = difflib.get_close_matches(plain(split_unit(name)[0]), by_plain, 1, 0.75)
            if near:
                return f" (did you mean '{by_plain[near[0]]}' by '{name}'?)"
        return ""

    def _check(self) -> None:
        """Whether angle and pressure are there."""
        matched = self.matched
        cylinder = next(iter(self.cylinders.values()), "C1")
        missing = []
        expected = []
        if not matched.pressures:
            missing.append("no column is a cylinder pressure")
            expected.append(f"a name such as '{cylinder} head end [bar(a)]'")
        if matched.angle is None and matched.time is None:
            missing.append("no column is a crank angle")
            expected.append("'crank_angle [deg]', or 'time [s]' with 'once_per_turn [-]'")
        elif matched.angle is None and matched.pulse is None:
            missing.append("there is time but nothing that marks the turns")
            expected.append("'once_per_turn [-]' beside the time, or 'crank_angle [deg]'")
        if missing:
            raise self._error(
                " and ".join(missing),
                found=_listed(name for name in self.names if name),
                expected="; ".join(expected),
                advice=" ".join(
                    ["Rename columns, or map them in a columns.toml.", *self._reasons()]
                ),
            )

    def _reasons(self) -> list[str]:
        """What is known that explains why something is missing, as sentences."""
        if self.strange_cylinders:
            return [
                f"Machine {self.machine_name} has no cylinder {_listed(self.strange_cylinders)}, "
                f"only {_listed(self.cylinders.values())}"
            ]
        hint = self._hint(self.left_out).strip(" ()")
        return [hint[0].upper() + hint[1:]] if hint else []

    def _error(self, problem: str, **words: str) -> ExportError:
        return ExportError(problem, file=self.file, place=self.place, **words)


def _listed(names: Iterable[str]) -> str:
    """Names in quotes, parted by commas; a very long list is cut."""
    quoted = [f"'{name}'" for name in names]
    more = len(quoted) - _MOST_LISTED
    return ", ".join(quoted[:_MOST_LISTED]) + (f" and {more} more" if more > 0 else "")
