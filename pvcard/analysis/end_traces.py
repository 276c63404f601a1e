"""One cylinder end of one recording, ready to be measured: trace, line values, what was assumed."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np

from pvcard.analysis.levels import LevelChoice, line_reference_shift, trace_level
from pvcard.analysis.line_values import Assumed, LineValues, line_values
from pvcard.errors import ExportError
from pvcard.ingest.recording import (
    CYLINDER_PRESSURE,
    DISCHARGE_LINE,
    SUCTION_LINE,
    Channel,
    Recording,
)
from pvcard.kinematics import CRANK_END, HEAD_END
from pvcard.machine import Cylinder, Machine
from pvcard.repair import Turns, turns
from pvcard.repair.entry import repair_entry
from pvcard.types import Floats, Integers


@dataclass(frozen=True, eq=False)
class EndTrace:
    """One end: its mean turn from its own dead centre, and the values of its lines."""

    cylinder: Cylinder
    end: str
    crank_angle: Floats  # (samples,) deg, ascending in [0, 360)
    pressure: Floats  # (samples,) Pa
    turns: int
    turn_scatter: float  # relative standard uncertainty of the mean work from the scatter of turns
    lines: LineValues
    speed: float  # rev/s
    speed_uncertainty: float  # relative
    angle_uncertainty: float  # deg, beyond that of the mark
    suction_line: Floats | None = None  # (samples,) Pa
    discharge_line: Floats | None = None
    level: LevelChoice | None = None

    @property
    def rod_sign(self) -> float:
        """+1 for a head end, -1 for a crank end."""
        return HEAD_END if self.end == "head" else CRANK_END


@dataclass
class Gathered:
    """All ends of a recording that can be measured, and what was said on the way."""

    recording: Recording
    machine: Machine
    ends: list[EndTrace]
    turn_count: int
    samples: int
    repairs: list[dict[str, Any]] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)
    absent: list[tuple[Cylinder, str]] = field(default_factory=list)  # ends without a trace


def gather(recording: Recording, machine: Machine) -> Gathered:
    """Take a recording apart into its ends.

    Parameters
    ----------
    recording : Recording
    machine : Machine
        The one it was made on.

    Returns
    -------
    Gathered

    Raises
    ------
    ExportError
        If no turn is complete or no trace belongs to an end that compresses.
    """
    parted = turns(recording)
    result = Gathered(recording, machine, [], parted.count, len(parted.crank_angle))
    result.repairs.extend(dict(one) for one in parted.repairs)
    result.notes.extend(recording.notes)
    result.notes.extend(parted.notes)
    speed, speed_u = _speed(result, parted)
    channels = {channel.key: channel for channel in recording.channels}
    for cylinder in machine.cylinders:
        mine = [
            end for end in cylinder.ends if (cylinder.name, end.name, CYLINDER_PRESSURE) in channels
        ]
        own: list[str] = [end.name for end in mine]
        result.absent.extend((cylinder, end.name) for end in cylinder.ends if end.name not in own)
        if not own:
            continue
        traces = {name: _own_trace(parted, cylinder, name, CYLINDER_PRESSURE) for name in own}
        _one_cylinder(result, parted, cylinder, channels, traces, (speed, speed_u))
    if not result.ends:
        names = ", ".join(sorted({channel.cylinder for channel in recording.channels}))
        raise ExportError(
            "no trace belongs to a cylinder end that compresses",
            file=recording.source,
            found=f"traces of {names}" if names else "no pressure trace",
            expected="a trace of " + ", ".join(one.name for one in machine.cylinders),
        )
    return result


def _one_cylinder(
    result: Gathered,
    parted: Turns,
    cylinder: Cylinder,
    channels: dict[tuple[str, str, str], Channel],
    traces: dict[str, tuple[Floats, Floats]],
    speed: tuple[float, float],
) -> None:
    recording, machine = result.recording, result.machine
    nozzles = {
        (end, kind): _own_trace(parted, cylinder, end, kind)[1].mean(0)
        for end in traces
        for kind in (SUCTION_LINE, DISCHARGE_LINE)
        if (cylinder.name, end, kind) in channels
    }
    readings = recording.lines.get(cylinder.name)
    barometer = recording.barometric_pressure or machine.barometric_pressure
    shift = line_reference_shift(cylinder, channels, readings, traces, barometer)
    for end, (angle, stack) in traces.items():
        channel = channels[cylinder.name, end, CYLINDER_PRESSURE]
        mean = stack.mean(0)
        lines, assumed = line_values(
            machine, cylinder, readings, (angle, mean), nozzles, end, shift.lines
        )
        level = trace_level(channel, angle, mean, lines, barometer, shift)
        _say_assumed(result, cylinder, assumed)
        if level.repair:
            result.repairs.append(level.repair)
        result.ends.append(
            EndTrace(
                cylinder,
                end,
                angle,
                mean + level.shift,
                len(stack),
                _scatter(stack, angle),
                lines,
                speed[0],
                speed[1],
                parted.angle_uncertainty_deg,
                nozzles.get((end, SUCTION_LINE)),
                nozzles.get((end, DISCHARGE_LINE)),
                level,
            )
        )


def _say_assumed(result: Gathered, cylinder: Cylinder, assumed: list[Assumed]) -> None:
    """Report what was assumed, once per cylinder."""
    entries = [
        repair_entry(
            "assumed_value",
            one.text,
            cylinder=cylinder.name,
            figure=(one.value, one.unit, one.uncertainty),
        )
        for one in assumed
    ]
    said = {(one["cylinder"], one["evidence"][0]["text"]) for one in result.repairs}
    for entry in entries:
        if (cylinder.name, entry["evidence"][0]["text"]) not in said:
            result.repairs.append(entry)


def _speed(result: Gathered, parted: Turns) -> tuple[float, float]:
    """Speed and its relative uncertainty; the rated one if the recording says nothing."""
    declared = result.machine.uncertainty.speed
    if parted.speed:
        return parted.speed, declared
    rated = result.machine.rated_speed
    text = "the export gives no speed; the rated speed was taken, within 2 %"
    figure = (rated * 60, "rpm", rated * 60 * 0.02)
    result.repairs.append(repair_entry("assumed_value", text, figure=figure))
    return rated, 0.02


def _own_trace(parted: Turns, cylinder: Cylinder, end: str, kind: str) -> tuple[Floats, Floats]:
    """Turns of a channel on the angle from the end's own dead centre."""
    start = cylinder.dead_centre + (0.0 if end == "head" else 180.0)
    own: Floats = np.mod(parted.crank_angle - start, 360.0)
    own[own > 360.0 - 1e-7] = 0.0
    order: Integers = np.argsort(own, kind="stable")
    angle: Floats = np.round(own[order], 9)
    return angle, parted.pressures[cylinder.name, end, kind][:, order]


def _scatter(stack: Floats, angle: Floats) -> float:
    """Relative standard error of the mean work, from works of single turns."""
    if len(stack) < 3:
        return 0.0
    slope = np.sin(np.radians(angle))  # of the piston, well enough for a scatter
    work = stack @ slope
    mean = abs(float(work.mean()))
    return float(work.std(ddof=1) / np.sqrt(len(work)) / mean) if mean > 0 else 0.0
