"""Line pressures and temperatures of a cylinder: read, or estimated where that is honest."""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from pvcard.ingest.recording import DISCHARGE_LINE, SUCTION_LINE, LineReadings
from pvcard.machine import Cylinder, Machine
from pvcard.types import Floats

FROM_CARD = 0.02  # relative: valve loss hides line pressure on a card (common practice, no source)
FROM_STAGE = 5.0  # K: how far a declared temperature may lie from that of the day


class Assumed(NamedTuple):
    """A value the export does not give."""

    value: float
    unit: str
    uncertainty: float
    text: str


@dataclass(frozen=True)
class LineValues:
    """Values at the lines of one end with standard uncertainties; NaN where unknown."""

    suction_pressure: float  # Pa
    discharge_pressure: float  # Pa
    suction_temperature: float  # K
    discharge_temperature: float  # K
    suction_pressure_u: float
    discharge_pressure_u: float
    suction_temperature_u: float
    discharge_temperature_u: float
    from_trace: bool = False  # whether a pressure was read off the trace itself


def line_values(
    machine: Machine,
    cylinder: Cylinder,
    readings: LineReadings | None,
    trace: tuple[Floats, Floats],
    nozzles: dict[tuple[str, str], Floats],
    end: str,
    shift: float,
) -> tuple[LineValues, list[Assumed]]:
    """Collect the line values of an end.

    Parameters
    ----------
    machine, cylinder
        As declared.
    readings : what the export says, or None
    trace : (samples,) twice
        Crank angle from the own dead centre and pressure. [deg], [Pa]
    nozzles : mean traces of the lines by end and kind [Pa]
    end : name of the end
    shift : added to line pressures without reference [Pa]

    Returns
    -------
    values : LineValues
    assumed : list of Assumed
        One entry for each value the export does not give.
    """
    unsure = machine.uncertainty
    assumed: list[Assumed] = []
    pressures: list[tuple[float, float]] = []
    off_trace = False
    for side, kind in (("suction", SUCTION_LINE), ("discharge", DISCHARGE_LINE)):
        value = getattr(readings, f"{side}_pressure", None)
        if value is not None:
            reference = getattr(readings, f"{side}_pressure_reference", None)
            value += shift if reference == "unknown" else 0.0
            pressures.append((value, unsure.line_pressure * value))
            continue
        found, text, share = _estimated_pressure(side, nozzles.get((end, kind)), trace)
        off_trace |= (end, kind) not in nozzles
        pressures.append((found, share * found))
        assumed.append(Assumed(found / 1e5, "bar", share * found / 1e5, text))
    temperature, temperature_u = _suction_temperature(machine, cylinder, readings, assumed)
    discharge = getattr(readings, "discharge_temperature", None)
    return (
        LineValues(
            pressures[0][0],
            pressures[1][0],
            temperature,
            np.nan if discharge is None else discharge,
            pressures[0][1],
            pressures[1][1],
            temperature_u,
            unsure.line_temperature,
            off_trace,
        ),
        assumed,
    )


def _estimated_pressure(
    side: str, nozzle: Floats | None, trace: tuple[Floats, Floats]
) -> tuple[float, str, float]:
    """Line pressure from a trace of the line, else from the flat part of the card."""
    if nozzle is not None:
        text = f"the export gives no {side} pressure; the mean of the {side} line's trace was taken"
        return float(nozzle.mean()), text, 0.005
    angle, pressure = trace
    if side == "suction":
        flat = (angle > 120) & (angle < 175)
        found = float(np.median(pressure[flat])) if flat.any() else float(pressure.min())
    else:
        found = float(np.median(np.sort(pressure)[-max(3, len(pressure) // 12) :]))
    text = (
        f"the export gives no {side} pressure; the level of the trace while that valve is open was "
        "taken, so that losses on that side cannot be told"
    )
    return found, text, FROM_CARD


def _suction_temperature(
    machine: Machine, cylinder: Cylinder, readings: LineReadings | None, assumed: list[Assumed]
) -> tuple[float, float]:
    read = getattr(readings, "suction_temperature", None)
    if read is not None:
        return float(read), machine.uncertainty.line_temperature
    stages = {stage.number: stage for stage in machine.stages}
    own = stages.get(cylinder.stage)
    before = stages.get(cylinder.stage - 1)
    for value, name in (
        (getattr(own, "suction_temperature", None), "suction_temperature of its stage"),
        (
            getattr(before, "cooler_outlet_temperature", None),
            "cooler_outlet_temperature of the stage before",
        ),
    ):
        if value is not None:
            text = f"the export gives no suction temperature; {name} as declared was taken"
            assumed.append(Assumed(value - 273.15, "degC", FROM_STAGE, text))
            return float(value), FROM_STAGE
    return np.nan, machine.uncertainty.line_temperature
