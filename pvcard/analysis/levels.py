"""Whether pressures written with a bare unit are absolute or gauge: decided by their own level.

A bare unit is never guessed silently. Where trace and line reading differ in how they were
written, the one with a reference decides about the other; where both are bare they share one
reading, the one in which the level of the trace fits, and the answer says so.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from pvcard.ingest.recording import CYLINDER_PRESSURE, Channel, LineReadings
from pvcard.machine import Cylinder
from pvcard.repair.entry import repair_entry
from pvcard.types import Floats


class ReferenceShift(NamedTuple):
    """What to add to bare line pressures of a cylinder, and whether that was found or assumed."""

    lines: float  # Pa
    decided: bool


class LevelChoice(NamedTuple):
    """What to add to a trace, with the repair that reports it."""

    shift: float  # Pa
    repair: dict[str, Any] | None


def line_reference_shift(
    cylinder: Cylinder,
    channels: dict[tuple[str, str, str], Channel],
    readings: LineReadings | None,
    traces: dict[str, tuple[Floats, Floats]],
    barometer: float,
) -> ReferenceShift:
    """Decide what bare line pressures of a cylinder mean.

    Parameters
    ----------
    cylinder : Cylinder
    channels : by cylinder, end and kind
    readings : line readings or None
    traces : crank angle and turns by end [deg], [Pa]
    barometer : ambient pressure [Pa]

    Returns
    -------
    ReferenceShift
    """
    reference = getattr(readings, "suction_pressure_reference", None)
    value = getattr(readings, "suction_pressure", None)
    if reference != "unknown" or value is None:
        return ReferenceShift(barometer, False)
    for end, (angle, stack) in traces.items():
        channel = channels[cylinder.name, end, CYLINDER_PRESSURE]
        if channel.reference != "unknown":
            level = suction_level(angle, stack.mean(0))
            gauge = abs(level - value - barometer) < abs(level - value)
            return ReferenceShift(barometer if gauge else 0.0, True)
    return ReferenceShift(0.0, False)


def suction_level(crank_angle: Floats, pressure: Floats) -> float:
    """Level of a trace while gas is drawn in.

    Parameters
    ----------
    crank_angle : (samples,)
        From the own dead centre. [deg]
    pressure : (samples,)
        [Pa]

    Returns
    -------
    level : float
        [Pa]
    """
    flat = (crank_angle > 120) & (crank_angle < 175)
    return float(np.median(pressure[flat])) if flat.any() else float(np.min(pressure))


def trace_level(
    channel: Channel,
    crank_angle: Floats,
    pressure: Floats,
    lines: Any,
    barometer: float,
    shift: ReferenceShift,
) -> LevelChoice:
    """Decide what a trace with a bare unit means, by its level against the suction line.

    Parameters
    ----------
    channel : Channel
    crank_angle, pressure : (samples,)
        Mean turn from the own dead centre. [deg], [Pa]
    lines : LineValues
        Of the same end.
    barometer : ambient pressure [Pa]
    shift : decision about bare line pressures of the cylinder

    Returns
    -------
    LevelChoice
        Nothing for a trace whose unit says what it is.
    """
    if channel.reference != "unknown":
        return LevelChoice(0.0, None)
    level = suction_level(crank_angle, pressure)
    line = lines.suction_pressure
    gauge = not lines.from_trace and abs(level + barometer - line) < abs(level - line)
    meaning = "gauge" if gauge else "absolute"
    evidence = (
        f"the unit '{channel.unit}' does not say whether it is absolute or gauge; read as "
        f"{meaning}, since the trace lies at {level / 1e5:.4g} bar while gas is drawn in and the "
        f"suction line at {line / 1e5:.4g} bar absolute"
    )
    if lines.from_trace or (not shift.decided and shift.lines == 0.0):
        evidence = (
            f"neither the unit '{channel.unit}' of the trace nor that of the line pressure says "
            f"whether it is absolute or gauge; both were read as {meaning}. "
            "Write (a) or (g) behind it"
        )
    repair = repair_entry(
        "pressure_level_offset",
        evidence,
        cylinder=channel.cylinder,
        end=channel.end,
        figure=(-barometer / 1e5 if gauge else 0.0, "bar", 0.01),
        applied=gauge,
    )
    return LevelChoice(barometer if gauge else 0.0, repair)
