"""The truth of a simulated cylinder in the terms of the reported quantities."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from pvcard.cycle import Cycles, Cylinders, card_figures, valve_motion
from pvcard.flow import nozzle_flow
from pvcard.gas import Gas
from pvcard.machine_parts import Cylinder
from pvcard.simulate_sensor import Sensor
from pvcard.types import Floats

_SECONDS_PER_HOUR = 3600.0


def _scalar(value: Any) -> float:
    return float(np.asarray(value, dtype=np.float64).ravel()[0])


def _rounded(value: float, digits: int = 6) -> float | None:
    """A number for JSON: null where it is not defined."""
    return None if not np.isfinite(value) else float(f"{value:.{digits}g}")


def _unit_flow(
    inside: tuple[Floats, Floats], outside: tuple[Floats, Floats], exponent: float, *, out: bool
) -> Floats:
    """Flow of one square metre in one direction, by sample; sides as (pressure, density)."""
    high, low = (inside, outside) if out else (outside, inside)
    return nozzle_flow(1.0, high[0], high[1], low[0], exponent)


def _leak_areas(
    cycles: Cycles, end: int, lines: dict[str, float], exponent: float
) -> dict[str, float]:
    """Ideal nozzles that would pass the leaked gas per turn. [m2]."""
    pressure, density = cycles.pressure[0], cycles.mass[0] / cycles.volume[0]
    seconds = 1 / lines["speed"] / cycles.crank_angle.size
    ones = np.ones_like(pressure[end])
    here = (pressure[end], density[end])
    suction = (lines["suction_pressure"] * ones, lines["suction_density"] * ones)
    discharge = (lines["discharge_pressure"] * ones, lines["discharge_density"] * ones)
    atmosphere = (lines["atmosphere"] * ones, ones)
    other = (pressure[1 - end], density[1 - end]) if len(pressure) == 2 else atmosphere
    unit = {
        "suction": _unit_flow(here, suction, exponent, out=True),
        "discharge": _unit_flow(here, discharge, exponent, out=False),
        "ring": _unit_flow(here, other, exponent, out=True)
        + (_unit_flow(here, other, exponent, out=False) if len(pressure) == 2 else 0.0),
        "packing": _unit_flow(here, atmosphere, exponent, out=True),
    }
    mass = {
        "suction": cycles.suction_leak[0, end],
        "discharge": cycles.discharge_leak[0, end],
        "ring": cycles.ring_leak[0],
        "packing": cycles.packing_leak[0],
    }
    return {path: float(mass[path] / (unit[path].sum() * seconds)) for path in unit}


def cylinder_truth(
    cylinder: Cylinder, cycles: Cycles, described: Cylinders, gas: Gas, sensors: Sequence[Sensor]
) -> dict[str, Any]:
    """State what is true of a simulated cylinder.

    Parameters
    ----------
    cylinder : Cylinder
        As declared.
    cycles : Cycles
        Two cards: as it is, and without its leaks.
    described : Cylinders
        What the model was told, so the true clearances.
    gas : Gas
    sensors : one an end

    Returns
    -------
    dict
        Identity, line states, and a list of ends with reported names as keys; undefined values are
        None.

    Notes
    -----
    A leak is the gas it passes per turn in its harmful direction over the gas delivered without
    leaks; rings: both directions over both ends.
    """
    speed = _scalar(described.speed)
    low, high = _scalar(described.suction_pressure), _scalar(described.discharge_pressure)
    cold = _scalar(described.suction_temperature)
    path = gas.isentropic(np.array(low), np.array(cold), np.array(high))
    warm = float(cycles.discharge_temperature[0])
    lines = {
        "speed": speed,
        "suction_pressure": low,
        "discharge_pressure": high,
        "suction_density": float(path.density1),
        "discharge_density": _scalar(gas.density(np.array(high), np.array(warm))),
        "atmosphere": _scalar(described.packing_back_pressure),
    }
    figures = card_figures(cycles, suction_pressure=low, discharge_pressure=high)
    motions = {side: valve_motion(cycles, side, speed=speed) for side in ("suction", "discharge")}
    clearance = np.broadcast_to(np.asarray(described.clearance), cycles.work.shape)
    ends = []
    for end, name in enumerate(cycles.ends):
        row = {
            "cylinder": cylinder.name,
            "end": name,
            **_card_row(cycles, figures, end, speed),
            **_flow_row(cycles, end, speed),
            **_ideal_row(cycles, end, float(clearance[0, end]), path, speed),
            **_motion_row(motions, end),
            **_leak_row(
                cycles, end, name, _leak_areas(cycles, end, lines, float(path.volume_exponent))
            ),
            "clearance_pct": 100 * float(clearance[0, end]),
            "isentropic_exponent": float(path.volume_exponent),
            "passage_resonance_Hz": sensors[end].resonance or np.nan,
            "passage_delay_deg": sensors[end].lag(speed),
            "pressure_level_offset_bar": sensors[end].zero / 1e5,
            "pressure_gain_pct": 100 * sensors[end].gain,
            "thermal_drift_bar_per_turn": sensors[end].drift / 1e5,
        }
        ends.append({key: _json(value) for key, value in row.items()})
    return {
        "cylinder": cylinder.name,
        "suction_pressure_bar": low / 1e5,
        "discharge_pressure_bar": high / 1e5,
        "suction_temperature_degC": cold - 273.15,
        "discharge_temperature_degC": warm - 273.15,
        "discharge_temperature_excess_K": warm - float(path.temperature),
        "wall_temperature_degC": float(cycles.wall_temperature[0]) - 273.15,
        "ends": ends,
    }


def _json(value: Any) -> Any:
    return value if isinstance(value, str) else _rounded(float(value))


def _card_row(cycles: Cycles, figures: Any, end: int, speed: float) -> dict[str, float]:
    work = float(cycles.work[0, end])
    losses = {
        side: float(getattr(figures, f"{side}_loss")[0, end]) for side in ("suction", "discharge")
    }
    row = {
        "indicated_power_kW": work * speed / 1e3,
        "indicated_work_kJ": work / 1e3,
        "mean_effective_pressure_bar": work / cycles.swept_volume[0, end] / 1e5,
        "compression_exponent": figures.compression_exponent[0, end],
        "expansion_exponent": figures.expansion_exponent[0, end],
        "pressure_max_bar": cycles.pressure[0, end].max() / 1e5,
        "pressure_min_bar": cycles.pressure[0, end].min() / 1e5,
    }
    for side, loss in losses.items():
        efficiency = getattr(figures, f"{side}_volumetric_efficiency")[0, end]
        row[f"{side}_volumetric_efficiency_pct"] = 100 * efficiency
        row[f"{side}_valve_loss_kW"] = loss * speed / 1e3
        row[f"{side}_valve_loss_pct"] = 100 * loss / work
    return row


def _flow_row(cycles: Cycles, end: int, speed: float) -> dict[str, float]:
    hourly = speed * _SECONDS_PER_HOUR
    specific = cycles.work[:, end] / np.where(
        cycles.delivered[:, end] > 0, cycles.delivered[:, end], np.nan
    )
    power = (specific[0] - specific[1]) * cycles.delivered[0, end] * speed
    return {
        "suction_flow_kg_h": cycles.drawn[0, end] * hourly,
        "discharge_flow_kg_h": cycles.delivered[0, end] * hourly,
        "leak_power_kW": power / 1e3,
    }


def _ideal_row(
    cycles: Cycles, end: int, clearance: float, path: Any, speed: float
) -> dict[str, float]:
    squeeze = float(path.density2 / path.density1)
    drawn = 1 - clearance * (squeeze - 1)
    mass = float(path.density1) * drawn * float(cycles.swept_volume[0, end])
    useful = float(path.enthalpy_rise) * float(cycles.delivered[0, end])
    return {
        "ideal_power_kW": mass * float(path.enthalpy_rise) * speed / 1e3,
        "ideal_discharge_temperature_degC": float(path.temperature) - 273.15,
        "ideal_suction_volumetric_efficiency_pct": 100 * drawn,
        "ideal_discharge_volumetric_efficiency_pct": 100 * drawn / squeeze,
        "isentropic_efficiency_pct": 100 * useful / float(cycles.work[0, end]),
    }


def _motion_row(motions: dict[str, Any], end: int) -> dict[str, float]:
    row: dict[str, float] = {}
    for side, motion in motions.items():
        row[f"{side}_opening_deg"] = motion.opening[0, end]
        row[f"{side}_closing_deg"] = motion.closing[0, end]
        row[f"{side}_closing_late_deg"] = motion.closing_late[0, end]
        row[f"{side}_flutter_count"] = motion.flutter[0, end]
        row[f"{side}_impact_speed_m_s"] = motion.seat_impact[0, end]
    return row


def _leak_row(cycles: Cycles, end: int, name: str, areas: dict[str, float]) -> dict[str, float]:
    healthy = cycles.delivered[1]
    own = healthy[end] if healthy[end] > 0 else np.nan
    both = healthy.sum() if healthy.sum() > 0 else np.nan
    row = {
        "suction_leak_pct": 100 * cycles.suction_leak[0, end] / own,
        "discharge_leak_pct": 100 * cycles.discharge_leak[0, end] / own,
        "ring_leak_pct": 100 * cycles.ring_leak[0] / both,
        "suction_leak_mm2": 1e6 * areas["suction"],
        "discharge_leak_mm2": 1e6 * areas["discharge"],
        "ring_leak_mm2": 1e6 * areas["ring"],
    }
    if name == "crank":
        row["packing_leak_pct"] = 100 * cycles.packing_leak[0] / own
        row["packing_leak_mm2"] = 1e6 * areas["packing"]
    return row
