"""The `# key: value` lines of an export: state of the machine, line readings, evidence.

Keys are compared without regard to capitals, blanks and underscores. What is left blank counts as
missing; what cannot be read is an error that names the line and the key.
"""

from __future__ import annotations

import difflib
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import UTC, datetime
from typing import TYPE_CHECKING
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

from pvcard.errors import ExportError, InputError
from pvcard.ingest.columns_file import ColumnMap
from pvcard.ingest.recording import Evidence, LineReadings
from pvcard.ingest.roles import plain
from pvcard.ingest.text import Entry
from pvcard.units import parse_pressure, parse_quantity

if TYPE_CHECKING:
    from pvcard.machine import Machine

MACHINE_KEYS = (
    "machine",
    "time",
    "speed",
    "load step",
    "barometric pressure",
    "recording",
    "measured flow",
    "driver power",
)
_CYLINDER_KEYS = (
    re.compile(r"(?P<side>suction|discharge) (?P<what>pressure|temperature)"),
    re.compile(r"(?P<what>load step)"),
    re.compile(r"(?P<what>packing vent flow)"),
    re.compile(
        r"(?P<end>head|crank) end (?P<side>suction|discharge) valve (?P<valve>\d+) "
        r"(?P<what>cap temperature)"
    ),
    re.compile(r"(?P<end>head|crank) end (?P<what>transducer)"),
)
_EXAMPLE_KEYS = (
    "suction pressure",
    "discharge pressure",
    "suction temperature",
    "discharge temperature",
    "load step",
    "packing vent flow",
    "head end transducer",
    "crank end transducer",
)
_BLANK = ("", "-", "--", "n/a", "na", "nan", "none", "null", "?")
_VOLUME_FLOW = re.compile(
    r"(m3|m³|ft3|ft³|cu ?ft|cf[mhd]|\bl|litres?|liters?|gal)\b", re.IGNORECASE
)


@dataclass
class Readings:
    """What the metadata of one export say, in SI."""

    machine_name: str | None = None
    time: datetime | None = None  # UTC
    speed: float | None = None  # rev/s
    load_steps: dict[str, str] = field(default_factory=dict)
    barometric_pressure: float | None = None  # Pa, of the metadata only
    recording_id: str | None = None
    lines: dict[str, LineReadings] = field(default_factory=dict)
    evidence: dict[str, Evidence] = field(default_factory=dict)
    transducers: dict[tuple[str, str], str] = field(default_factory=dict)
    notes: list[str] = field(default_factory=list)


def read_metadata(
    entries: Mapping[str, Entry],
    column_map: ColumnMap,
    machine: Machine,
    *,
    file: str,
    decimal: str | None = None,
) -> Readings:
    """Understand the metadata of one export.

    Parameters
    ----------
    entries : key as written -> value and line
    column_map : its `[metadata]` turns the analyser's keys into ours
    machine : whose cylinders, load steps, time zone and barometric pressure count
    file : named in errors
    decimal : decimal mark of the numbers, if known

    Returns
    -------
    readings : SI, pressures absolute; `lines` has an entry for each cylinder of the machine
    """
    return _Reading(column_map, machine, file, decimal).run(entries)


@dataclass(frozen=True)
class _Key:
    """One of our keys, taken apart."""

    text: str
    what: str
    cylinder: str | None = None
    end: str | None = None
    side: str | None = None
    valve: int | None = None


class _Reading:
    """The metadata of one export."""

    def __init__(
        self, column_map: ColumnMap, machine: Machine, file: str, decimal: str | None
    ) -> None:
        self.theirs = {plain(their): our for their, our in column_map.metadata.items()}
        self.column_map = column_map
        self.machine = machine
        self.file = file
        self.decimal = decimal
        self.cylinders = {plain(cylinder.name): cylinder.name for cylinder in machine.cylinders}
        self.readings = Readings(lines={name: LineReadings() for name in self.cylinders.values()})
        self.values: dict[str, dict[str, float | str]] = {name: {} for name in self.readings.lines}

    def run(self, entries: Mapping[str, Entry]) -> Readings:
        """Read every entry; the barometric pressure first, since gauge readings need it."""
        self._check_mapping()
        known: list[tuple[_Key, Entry]] = []
        unknown: list[str] = []
        for name, entry in entries.items():
            key = self._key(self.theirs.get(plain(name), name if entry.marked else ""))
            if key is None:
                unknown += [name] if entry.marked else []
            elif plain(entry.value) in _BLANK:
                self.readings.notes.append(f"'{name}' is left blank and counts as missing")
            else:
                known.append((key, entry))
        known.sort(key=lambda pair: pair[0].what != "barometric pressure")
        for key, entry in known:
            self._take(key, entry)
        for cylinder, values in self.values.items():
            self.readings.lines[cylinder] = LineReadings(**values)  # type: ignore[arg-type]
        if unknown:
            self._note_unknown(unknown)
        return self.readings

    def _check_mapping(self) -> None:
        """Whether each "our key" of columns.toml is one of ours; its cylinder may be another's."""
        for their, our in self.column_map.metadata.items():
            if self._key(our) is None and _cylinder_key(plain(our)) is None:
                near = difflib.get_close_matches(plain(our), self._all_keys(), 1, 0.5)
                raise ExportError(
                    "not a metadata key",
                    file=self.column_map.source,
                    place=f"metadata.{their}",
                    found=f"'{our}'",
                    expected=f"one of {', '.join(MACHINE_KEYS)}, 'C1 suction pressure' ...",
                    advice=f"Did you mean '{near[0]}'?" if near else None,
                )

    def _all_keys(self) -> list[str]:
        ours = [f"{name} {key}" for name in self.cylinders.values() for key in _EXAMPLE_KEYS]
        return [*MACHINE_KEYS, *ours]

    def _key(self, text: str) -> _Key | None:
        """One of our keys for this machine; None for any other."""
        key = plain(text)
        if key in MACHINE_KEYS:
            return _Key(text, key)
        found = _cylinder_key(key)
        if found is None:
            return None
        prefix, parts = found
        if not prefix and len(self.cylinders) == 1:
            prefix = next(iter(self.cylinders))
        cylinder = self.cylinders.get(prefix)
        if cylinder is None:
            return None
        valve = parts.get("valve")
        return _Key(
            text,
            parts["what"],
            cylinder,
            parts.get("end"),
            parts.get("side"),
            int(valve) if valve else None,
        )

    def _note_unknown(self, unknown: list[str]) -> None:
        """List once the keys that mean nothing, with the nearest known one."""
        by_plain = {plain(key): key for key in self._all_keys()}
        parts = []
        for name in unknown:
            near = difflib.get_close_matches(plain(name), by_plain, 1, 0.8)
            parts.append(f"'{name}'" + (f" (did you mean '{by_plain[near[0]]}'?)" if near else ""))
        self.readings.notes.append(f"metadata left out: {', '.join(parts)}")

    def _take(self, key: _Key, entry: Entry) -> None:
        """Store one value."""
        readings = self.readings
        match key.what:
            case "machine":
                readings.machine_name = entry.value
                if plain(entry.value) != plain(self.machine.name):
                    readings.notes.append(
                        f"the export names machine '{entry.value}', "
                        f"the description '{self.machine.name}'"
                    )
            case "time":
                readings.time = self._time(key, entry)
            case "speed":
                readings.speed = self._quantity(key, entry, "speed")
                if not readings.speed > 0:
                    raise self._error(
                        "not a speed of running", key, entry, "a speed above zero, '590 rpm'"
                    )
            case "recording":
                readings.recording_id = entry.value
            case "load step":
                self._load_step(key, entry)
            case "barometric pressure":
                readings.barometric_pressure = self._barometric_pressure(key, entry)
            case "transducer":
                readings.transducers[key.cylinder or "", key.end or ""] = entry.value
            case "pressure" | "temperature":
                self._line_value(key, entry)
            case _:
                self._evidence(key, entry)

    def _line_value(self, key: _Key, entry: Entry) -> None:
        """Pressure or temperature of a line."""
        values = self.values[key.cylinder or ""]
        name = f"{key.side}_{key.what}"
        if key.what == "temperature":
            values[name] = self._quantity(key, entry, "temperature")
            return
        barometric = self.readings.barometric_pressure or self.machine.barometric_pressure
        try:
            pressure = parse_pressure(
                entry.value, barometric_pressure=barometric, decimal=self._decimal()
            )
        except InputError as problem:
            raise self._placed(problem, key, entry) from None
        values[name] = pressure.pascal
        values[f"{name}_reference"] = pressure.reference
        if pressure.reference == "unknown":
            self.readings.notes.append(
                f"'{key.text}' does not say whether it is absolute or gauge ('{entry.value}'); "
                "the level check decides"
            )

    def _barometric_pressure(self, key: _Key, entry: Entry) -> float:
        """Absolute by nature, whatever its unit says."""
        value = self._quantity(key, entry, "pressure")
        if not 4e4 < value < 1.2e5:
            raise self._error(
                "not a barometric pressure", key, entry, "0.5 to 1.1 bar, such as '1013 mbar'"
            )
        return value

    def _load_step(self, key: _Key, entry: Entry) -> None:
        """Name of a load step, as the machine declares it."""
        declared = {plain(step.name): step for step in self.machine.load_steps}
        if not declared:
            self.readings.notes.append(
                f"load step '{entry.value}' is left out: the machine declares none"
            )
            return
        step = declared.get(plain(entry.value))
        if step is None:
            near = difflib.get_close_matches(plain(entry.value), declared, 1, 0.5)
            raise self._error(
                "the machine has no such load step",
                key,
                entry,
                f"one of {', '.join(repr(step.name) for step in declared.values())}",
                f"Did you mean '{declared[near[0]].name}'?" if near else None,
            )
        self.readings.load_steps[key.cylinder or ""] = step.name

    def _evidence(self, key: _Key, entry: Entry) -> None:
        """Cap temperature, packing vent flow, measured flow or driver power."""
        dimension = {"cap temperature": "temperature", "driver power": "power"}.get(key.what)
        if dimension is None:
            dimension, value = self._flow(key, entry)
        else:
            value = self._quantity(key, entry, dimension)
        words = [key.cylinder, key.end and f"{key.end} end", key.side]
        words += [f"valve {key.valve}" if key.valve else None, key.what]
        self.readings.evidence[" ".join(word for word in words if word)] = Evidence(
            kind=key.what,
            value=value,
            dimension=dimension,
            text=entry.value,
            cylinder=key.cylinder,
            end=key.end,
            side=key.side,
            valve=key.valve,
        )

    def _flow(self, key: _Key, entry: Entry) -> tuple[str, float]:
        """A flow by mass, or by volume when its unit says so."""
        dimension = "volume_flow" if _VOLUME_FLOW.search(entry.value) else "mass_flow"
        return dimension, self._quantity(key, entry, dimension)

    def _time(self, key: _Key, entry: Entry) -> datetime:
        """Moment in UTC; day and month are never guessed."""
        layout = self.column_map.layout
        try:
            if layout.time_format is not None:
                moment = datetime.strptime(entry.value, layout.time_format)
            else:
                moment = datetime.fromisoformat(entry.value)
        except ValueError:
            pattern = layout.time_format
            raise self._error(
                "the time cannot be read",
                key,
                entry,
                f"the layout '{pattern}'" if pattern else "ISO 8601, such as 2024-03-01T14:30:00",
                None
                if pattern
                else "Name another layout in columns.toml, such as "
                '[text] time_format = "%d.%m.%Y %H:%M"; day and month are not guessed',
            ) from None
        if moment.tzinfo is not None:
            return moment.astimezone(UTC)
        return self._local(moment)

    def _local(self, moment: datetime) -> datetime:
        """UTC of a time without offset."""
        name = self.column_map.layout.time_zone or self.machine.time_zone
        if not name:
            self.readings.notes.append("the time has no offset and no time zone; taken as UTC")
            return moment.replace(tzinfo=UTC)
        try:
            zone = ZoneInfo(name)
        except (ZoneInfoNotFoundError, ValueError, OSError):
            raise ExportError(
                "unknown time zone",
                file=self.column_map.source if self.column_map.layout.time_zone else self.file,
                place="text.time_zone" if self.column_map.layout.time_zone else "time_zone",
                found=repr(name),
                expected="an IANA name such as 'Europe/Prague'",
            ) from None
        first, second = (moment.replace(tzinfo=zone, fold=fold) for fold in (0, 1))
        if first.utcoffset() != second.utcoffset():
            self.readings.notes.append(
                f"{moment.isoformat()} falls into a change of the clocks of {name}; "
                "taken with the offset before it"
            )
        return first.astimezone(UTC)

    def _quantity(self, key: _Key, entry: Entry, dimension: str) -> float:
        try:
            return parse_quantity(entry.value, dimension, decimal=self._decimal())
        except InputError as problem:
            raise self._placed(problem, key, entry) from None

    def _decimal(self) -> str | None:
        """A decimal comma of the numbers holds for the metadata; a point leaves the comma open."""
        return "," if self.decimal == "," else None

    def _placed(self, problem: InputError, key: _Key, entry: Entry) -> ExportError:
        return ExportError(
            problem.problem,
            file=self.file,
            place=_place(key, entry),
            found=problem.found or repr(entry.value),
            expected=problem.expected and problem.expected.removesuffix(", in quotes"),
            advice=problem.advice,
        )

    def _error(
        self, problem: str, key: _Key, entry: Entry, expected: str, advice: str | None = None
    ) -> ExportError:
        return ExportError(
            problem,
            file=self.file,
            place=_place(key, entry),
            found=repr(entry.value),
            expected=expected,
            advice=advice,
        )


def _place(key: _Key, entry: Entry) -> str:
    return f"line {entry.line}, '{key.text}'" if entry.line else f"'{key.text}'"


def _cylinder_key(key: str) -> tuple[str, dict[str, str]] | None:
    """Cylinder (plain, may be empty) and parts of a per-cylinder key."""
    for pattern in _CYLINDER_KEYS:
        found = re.fullmatch(rf"(?:(?P<cylinder>.+?) )?{pattern.pattern}", key)
        if found:
            parts = {name: text for name, text in found.groupdict().items() if text}
            return parts.pop("cylinder", ""), parts
    return None
