"""From the tables of machine.toml to a `Machine`."""

from __future__ import annotations

import zoneinfo
from datetime import UTC, datetime
from pathlib import Path as FilePath
from typing import Any, TypeVar

from scipy import constants as const

from pvcard import machine_keys as keys
from pvcard.errors import GasError
from pvcard.machine_checks import PartError, Path, nearest
from pvcard.machine_document import Document, load_document, parse_document
from pvcard.machine_parts import (
    Cylinder,
    CylinderEnd,
    GasDescription,
    LoadStep,
    LoadStepEnd,
    Machine,
    Stage,
    Valves,
)
from pvcard.machine_settings import Costs, Limits, Reference, Uncertainty
from pvcard.machine_values import Reader

Part = TypeVar("Part")

# ICAO Standard Atmosphere (Doc 7488/3, 1993): the layer below 11 km.
SEA_LEVEL_TEMPERATURE = 288.15  # K
LAPSE_RATE = 0.0065  # K/m
AIR_GAS_CONSTANT = 287.05287  # J/(kg K)


def standard_atmosphere_pressure(altitude: float) -> float:
    """Pressure of the ICAO Standard Atmosphere, below 11 km.

    Parameters
    ----------
    altitude : geopotential, above mean sea level [m]

    Returns
    -------
    pressure : [Pa]

    Notes
    -----
    ``p = p0 (1 - L h / T0) ** (g / (R L))`` [1]_. Weather moves the true pressure by some 3 %.

    References
    ----------
    .. [1] ICAO, *Manual of the ICAO Standard Atmosphere*, Doc 7488/3, 3rd edition, 1993, section 2.

    Examples
    --------
    >>> round(standard_atmosphere_pressure(1000.0))
    89875
    """
    exponent = const.g / (AIR_GAS_CONSTANT * LAPSE_RATE)
    return float(const.atm * (1 - LAPSE_RATE * altitude / SEA_LEVEL_TEMPERATURE) ** exponent)


def read_machine(path: str | FilePath) -> Machine:
    """Read one machine description.

    Parameters
    ----------
    path : a TOML file

    Returns
    -------
    machine : SI, every key checked; `notes` says what was assumed or normalised

    Raises
    ------
    MachineError : names file, line and key, what was found and what to write
    """
    return build_machine(load_document(path))


def read_machine_text(text: str, *, source: str = "machine.toml") -> Machine:
    """Return the machine that a description as text declares, as `read_machine` does a file.

    Parameters
    ----------
    text : TOML
    source : named in errors and kept as the machine's source

    Returns
    -------
    machine : as from `read_machine`
    """
    return build_machine(parse_document(text, source))


def build_machine(document: Document) -> Machine:
    """Return the machine that the tables of a document declare.

    Parameters
    ----------
    document : as from `machine_document.load_document`

    Returns
    -------
    machine : SI, checked as a whole
    """
    _check_top(document)
    reader = Reader(document)
    values = _machine_values(reader)
    values["gas"] = _gas(reader, ("gas",)) if "gas" in document.data else None
    count = len(document.data.get("stage", []))
    if count:
        values["stages"] = tuple(_stage(reader, ("stage", i)) for i in range(count))
    values["cylinders"] = _cylinders(reader)
    steps = range(len(document.data.get("load_step", [])))
    values["load_steps"] = tuple(_load_step(reader, ("load_step", i)) for i in steps)
    for name, part, known in (
        ("uncertainty", Uncertainty, keys.UNCERTAINTY),
        ("limits", Limits, keys.LIMITS),
        ("costs", Costs, keys.COSTS),
        ("reference", Reference, keys.REFERENCE),
    ):
        if name in document.data:
            values[name] = _build(reader, (name,), part, reader.table((name,), known))
    _check_currencies(document, values.get("costs", Costs()))
    values |= {"source": document.file, "sha256": document.sha256, "text": document.text}
    return _build(reader, (), Machine, values | {"notes": tuple(document.notes)})


# --- tables -------------------------------------------------------------------------------------


def _build(reader: Reader, path: Path, part: type[Part], values: dict[str, Any]) -> Part:
    """Make a part; where it contradicts itself, name the line and what is typed there."""
    try:
        return part(**values)
    except PartError as problem:
        where = (*path, *problem.path)
        typed = reader.document.at(where)
        found = repr(typed) if isinstance(typed, (str, int, float)) else problem.found
        raise reader.document.error(
            where,
            problem.problem,
            found=found,
            expected=problem.expected,
            advice=problem.advice,
        ) from None


def _check_top(document: Document) -> None:
    for name, value in document.data.items():
        if name not in keys.TOP_TABLES:
            near = nearest(name, keys.TOP_TABLES)
            advice = f"Did you mean [{near}]?" if near else None
            if name in keys.MACHINE:
                advice = f"{name} belongs below a line [machine]"
            raise document.error(
                (name,),
                "unknown table" if isinstance(value, (dict, list)) else "this key is in no table",
                expected="one of " + ", ".join(keys.TOP_TABLES),
                advice=advice,
            )
        several = keys.TOP_TABLES[name]
        fits = isinstance(value, list if several else dict)
        if fits and several:
            fits = all(isinstance(table, dict) for table in value)
        if not fits:
            header = f"[[{name}]]" if several else f"[{name}]"
            raise document.error((name,), f"write {header} on a line of its own, keys below it")
    if "machine" not in document.data:
        raise document.error(
            ("machine",),
            "the table [machine] is missing",
            expected="a machine description",
            advice='It begins with [machine] and name = "K-3"',
        )


def _machine_values(reader: Reader) -> dict[str, Any]:
    document, path = reader.document, ("machine",)
    raw = document.data["machine"]
    if isinstance(raw.get("time_zone"), str):
        reader.zone = _zone(document, raw["time_zone"])
    values = reader.table(path, keys.MACHINE)
    altitude = values.pop("site_altitude", None)
    if altitude is not None and "barometric_pressure" in values:
        raise document.error(
            (*path, "site_altitude"),
            "barometric_pressure and site_altitude are both given",
            advice="Keep one of them; a measured barometric pressure is the better",
        )
    if altitude is not None:
        values["barometric_pressure"] = standard_atmosphere_pressure(altitude)
        values["barometric_pressure_from"] = "site_altitude"
    elif "barometric_pressure" in values:
        values["barometric_pressure_from"] = "declared"
    else:
        document.notes.append(
            "neither barometric_pressure nor site_altitude is given: 1.01325 bar is assumed"
        )
    reader.barometric_pressure = values.get("barometric_pressure", const.atm)
    return values


def _zone(document: Document, name: str) -> zoneinfo.ZoneInfo:
    try:
        return zoneinfo.ZoneInfo(name)
    except (zoneinfo.ZoneInfoNotFoundError, ValueError, OSError):
        known = zoneinfo.available_timezones()
        near = nearest(name, known)
        advice = f'Did you mean "{near}"?' if near else "See the list of IANA time zones"
        if not known:
            advice = "This computer has no list of time zones: install the package tzdata"
        raise document.error(
            ("machine", "time_zone"),
            "unknown time zone",
            found=repr(name),
            expected='an IANA name, for example "Europe/Prague"',
            advice=advice,
        ) from None


def _gas(reader: Reader, path: Path) -> GasDescription:
    from pvcard.gas_components import normalise_composition

    values = reader.table(path, keys.GAS)
    basis = values.pop("basis", None)
    notes: tuple[str, ...] = ()
    if "composition" in values:
        written = {
            name: reader.value((*path, "composition", name), _SHARE, amount)
            for name, amount in values["composition"].items()
        }
        try:
            values["composition"], notes = normalise_composition(written, basis=basis or "mole")
        except GasError as problem:
            named = [n for n in written if problem.place == n or problem.found == repr(n)]
            named = [n for n in written if problem.place == n or problem.found == repr(n)]
            where: Path = (*path, "composition", *named[:1])
            raise reader.document.error(
                where,
                problem.problem,
                found=problem.found,
                expected=problem.expected,
                advice=problem.advice,
            ) from None
    for key in ("basis", "water_saturated", "relative_humidity"):
        if "composition" not in values and reader.document.at((*path, key)):
            raise reader.document.error(
                (*path, key), "this needs a composition", advice="Give the composition too"
            )
    if "analysis_date" in values:
        values["analysis_date"] = values["analysis_date"].astimezone(reader.zone).date()
    reader.document.notes.extend(f"{reader.document.place(path)}: {note}" for note in notes)
    return _build(reader, path, GasDescription, values | {"notes": tuple(notes)})


_SHARE = keys.Key("ratio", "0.94")


def _stage(reader: Reader, path: Path) -> Stage:
    values = reader.table(path, keys.STAGE)
    if "gas" in values:
        values["gas"] = _gas(reader, (*path, "gas"))
    return _build(reader, path, Stage, values)


def _cylinders(reader: Reader) -> tuple[Cylinder, ...]:
    tables = reader.document.data.get("cylinder", [])
    taken = {table.get("throw") for table in tables if isinstance(table.get("throw"), int)}
    free = (number for number in range(1, 100) if number not in taken)
    cylinders = []
    for index in range(len(tables)):
        path = ("cylinder", index)
        values = reader.table(path, keys.CYLINDER)
        values.setdefault("throw", 0)
        if "throw" not in tables[index]:
            values["throw"] = next(free)
        values["dead_centre"] = values["dead_centre"] % 360.0 % 360.0
        for name in ("head", "crank"):
            values[f"{name}_end"] = _end(reader, (*path, f"{name}_end"), name)
        if "gas" in values:
            values["gas"] = _gas(reader, (*path, "gas"))
        cylinder = _build(reader, path, Cylinder, values)
        _check_valves(reader, path, cylinder)
        reader.document.notes.extend(_oddities(cylinder))
        cylinders.append(cylinder)
    return tuple(cylinders)


def _end(reader: Reader, path: Path, name: str) -> CylinderEnd:
    values = reader.table(path, keys.END)
    for side in ("suction_valves", "discharge_valves"):
        if side in values:
            table = reader.table((*path, side), keys.VALVES)
            values[side] = _build(reader, (*path, side), Valves, table)
    return _build(reader, path, CylinderEnd, values | {"name": name})


def _check_valves(reader: Reader, path: Path, cylinder: Cylinder) -> None:
    for end in cylinder.ends:
        for side, valves in (("suction", end.suction_valves), ("discharge", end.discharge_valves)):
            if valves is not None and valves.total_flow_area > cylinder.area(end):
                raise reader.document.error(
                    (*path, f"{end.name}_end", f"{side}_valves", "flow_area"),
                    "the valves are larger than the piston",
                    found=f"{valves.count} times {valves.flow_area * 1e4:g} cm2",
                    expected=f"together less than the piston, {cylinder.area(end) * 1e4:.4g} cm2",
                    advice="flow_area is the effective area of one valve; mm2 written as cm2?",
                )


def _oddities(cylinder: Cylinder) -> list[str]:
    """What is possible but seldom, to be told and not refused."""
    notes = []
    ratio = 2 * cylinder.connecting_rod_length / cylinder.stroke
    if not 2.5 <= ratio <= 12:
        notes.append(
            f"cylinder {cylinder.name}: connecting rod / crank radius is {ratio:.3g}, "
            "usual is 4 to 6; check stroke and connecting_rod_length"
        )
    for end in cylinder.ends:
        if end.clearance is not None and end.clearance < 0.01:
            notes.append(
                f"cylinder {cylinder.name}: {end.name}_end clearance of {end.clearance:.3%} is "
                'unusually small; 15 % is written as "15 %"'
            )
    return notes


def _load_step(reader: Reader, path: Path) -> LoadStep:
    values = reader.table(path, keys.LOAD_STEP)
    for end in ("head_end", "crank_end"):
        if end in values:
            table = reader.table((*path, end), keys.LOAD_STEP_END)
            values[end] = _build(reader, (*path, end), LoadStepEnd, table)
    return _build(reader, path, LoadStep, values)


def _check_currencies(document: Document, costs: Costs) -> None:
    first: str | None = None
    for key in ("energy_price", "gas_value", "stop_cost"):
        cost = getattr(costs, key)
        if cost is None:
            continue
        first = first or cost.currency
        if cost.currency != first:
            raise document.error(
                ("costs", key),
                "the costs are in two currencies",
                found=f"{cost.currency} and {first}",
                expected="one currency for all",
            )


def moment_of(machine: Machine) -> datetime:
    """Return the moment from which a description holds.

    Parameters
    ----------
    machine : one without `valid_from` always held

    Returns
    -------
    moment : UTC
    """
    return machine.valid_from or datetime.min.replace(tzinfo=UTC)
