"""Write simulated recordings as exports, self-describing or in other columns."""

from __future__ import annotations

import json
import os
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from pvcard.simulate import Simulated
from pvcard.types import Floats

_PASCAL_PER_UNIT = {"bar": 1e5, "kPa": 1e3, "MPa": 1e6, "psi": 6894.757293168361}
_DIGITS = {"bar": 4, "kPa": 2, "MPa": 5, "psi": 3}


@dataclass(frozen=True)
class Layout:
    """How an export is written."""

    pressure_unit: str = "bar(a)"  # bar, kPa, MPa or psi with (a) or (g)
    temperature_unit: str = "degC"  # or degF
    delimiter: str = ","
    decimal: str = "."
    names: Mapping[str, str] = field(default_factory=dict)  # our column name to theirs
    extra: Mapping[str, str] = field(default_factory=dict)  # further metadata
    metadata_names: Mapping[str, str] = field(default_factory=dict)  # our key to theirs


def pressure_text(value: float, unit: str, barometer: float) -> str:
    """A pressure with its unit, from Pa."""
    return f"{float(pressure_in(np.array(value), unit, barometer)):.4f} {unit}"


def pressure_in(value: Floats, unit: str, barometer: float) -> Floats:
    """Pressures in a unit such as ``bar(a)`` or ``psi(g)``.

    Parameters
    ----------
    value : any shape
        Absolute. [Pa]
    unit : name of the unit with (a) or (g)
    barometer : ()
        [Pa]

    Returns
    -------
    value : same shape
        In that unit.

    Examples
    --------
    >>> float(pressure_in(np.array(2e5), "bar(g)", 1e5))
    1.0
    """
    name, reference = unit[:-3], unit[-3:]
    result: Floats = (value - (barometer if reference == "(g)" else 0.0)) / _PASCAL_PER_UNIT[name]
    return result


def _temperature_text(kelvin: float, unit: str) -> str:
    celsius = kelvin - 273.15
    value = celsius if unit == "degC" else celsius * 1.8 + 32
    return f"{value:.2f} {unit}"


def _metadata(simulated: Simulated, layout: Layout) -> list[tuple[str, str]]:
    machine, situation = simulated.machine, simulated.situation
    barometer = machine.barometric_pressure
    lines = [
        ("machine", machine.name),
        ("time", situation.time.isoformat()),
        ("speed", f"{situation.speed * 60:.2f} rpm"),
        ("barometric pressure", f"{barometer / 1e5:.5f} bar"),
    ]
    steps = {name: way.load_step for name, way in situation.cylinders.items()}
    if len(set(steps.values())) == 1 and None not in steps.values():
        lines.append(("load step", str(next(iter(steps.values())))))
    else:
        lines += [(f"{name} load step", step) for name, step in steps.items() if step]
    for name, readings in simulated.lines.items():
        for key, value in readings.items():
            text = (
                pressure_text(value, layout.pressure_unit, barometer)
                if key.endswith("pressure")
                else _temperature_text(value, layout.temperature_unit)
            )
            lines.append((f"{name} {key}", text))
    for name, way in situation.cylinders.items():
        ends = [end for cylinder, end in simulated.pressure if cylinder == name]
        for end, transducer in zip(ends, way.transducers):
            lines.append((f"{name} {end} end transducer", transducer))
    lines += list(layout.extra.items())
    return [(layout.metadata_names.get(key, key), value) for key, value in lines]


def _columns(simulated: Simulated, layout: Layout) -> list[tuple[str, list[str]]]:
    columns: list[tuple[str, list[str]]] = []
    if simulated.cycle is not None:
        columns.append(("cycle", [f"{value:.0f}" for value in simulated.cycle]))
    if simulated.crank_angle is not None:
        columns.append(("crank_angle [deg]", [f"{value:g}" for value in simulated.crank_angle]))
    if simulated.seconds is not None and simulated.pulse is not None:
        columns.append(("time [s]", [f"{value:.6f}" for value in simulated.seconds]))
        columns.append(("once_per_turn [-]", [f"{value:g}" for value in simulated.pulse]))
    digits = _DIGITS[layout.pressure_unit[:-3]]
    for (cylinder, end), pressure in simulated.pressure.items():
        shown = pressure_in(pressure, layout.pressure_unit, simulated.machine.barometric_pressure)
        name = f"{cylinder} {end} end [{layout.pressure_unit}]"
        columns.append((name, [f"{value:.{digits}f}" for value in shown]))
    return [(layout.names.get(name, name), cells) for name, cells in columns]


def export_text(simulated: Simulated, layout: Layout) -> str:
    """Text of an export.

    Parameters
    ----------
    simulated : Simulated
    layout : Layout

    Returns
    -------
    text : str
        Metadata, header and rows.
    """
    columns = _columns(simulated, layout)
    head = [f"# {key}: {value}" for key, value in _metadata(simulated, layout)]
    head.append(layout.delimiter.join(name for name, _ in columns))
    rows = [layout.delimiter.join(cells) for cells in zip(*(cells for _, cells in columns))]
    if layout.decimal != ".":
        rows = [row.replace(".", layout.decimal) for row in rows]
    return "\n".join([*head, *rows]) + "\n"


def write_text(path: Path, text: str) -> None:
    """Write a file aside and rename it, so that no half-written one is ever found."""
    path.parent.mkdir(parents=True, exist_ok=True)
    aside = path.with_name(path.name + ".part")
    aside.write_text(text, encoding="utf-8", newline="\n")
    os.replace(aside, path)


def write_simulated(
    simulated: Simulated, export: Path, truth: Path, *, layout: Layout | None = None
) -> None:
    """Write an export and the truth that belongs to it.

    Parameters
    ----------
    simulated : Simulated
    export, truth : paths of the two files
    layout : Layout, optional
        Self-describing with bar(a) and degC by default.
    """
    write_text(export, export_text(simulated, layout or Layout()))
    write_text(truth, json.dumps(simulated.truth, indent=1, allow_nan=False) + "\n")
