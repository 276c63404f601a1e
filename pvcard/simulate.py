"""Simulated recordings: the cylinder model, a measuring chain, and the truth beside them.

A `Situation` says how a declared machine really is on one day: its leaks, true clearances, walls,
sensors and encoder. `simulate_recordings` computes what would be recorded; `pvcard.simulate_export`
writes it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from datetime import datetime
from typing import Any

import numpy as np

from pvcard.cycle import Cycles, Cylinders, Leaks, Pulsation, steady_state
from pvcard.cycle.declared import declared_cylinder
from pvcard.cycle.description import stacked
from pvcard.errors import InputError
from pvcard.gas import Gas, gas_for
from pvcard.machine import Machine
from pvcard.machine_parts import Cylinder
from pvcard.simulate_sensor import Sensor, as_read, through_passage
from pvcard.simulate_truth import cylinder_truth
from pvcard.types import Floats

_REFINE = 4
_PULSE_WIDTH = 9.0  # deg during which the once-per-turn pulse is high


@dataclass(frozen=True)
class CylinderSituation:
    """How one cylinder really is; leak sizes as in `Leak`, (1, ends) where an end is meant."""

    suction_pressure: float  # Pa, line, true
    discharge_pressure: float  # Pa
    suction_temperature: float  # K
    leaks: Leaks = field(default_factory=Leaks)
    clearance_error: tuple[float, ...] = ()  # true minus declared, fraction, an end
    heat_law: str = "annand"
    heat_multiplier: float = 1.0
    suction_heating: float = 2.0  # K
    valve_changes: Mapping[str, Mapping[str, float]] = field(default_factory=dict)
    pulsation: Pulsation = field(default_factory=Pulsation)
    sensors: tuple[Sensor, ...] = ()  # an end; the last one goes for all further ends
    load_step: str | None = None
    transducers: tuple[str, ...] = ()  # names, an end; none: not written
    line_error: tuple[float, float] = (0.0, 0.0)  # relative, of the two line readings
    temperature_error: tuple[float, float] = (0.0, 0.0)  # K, of the two readings


@dataclass(frozen=True)
class Situation:
    """How a machine really is on one day, and how it is recorded."""

    time: datetime
    speed: float  # 1/s
    cylinders: Mapping[str, CylinderSituation]
    encoder_offset: float = 0.0  # deg, export angle minus true angle
    speed_ripple: tuple[complex, ...] = ()  # relative, orders 1, 2, ...
    wander: float = 0.0  # relative standard deviation of the pressures between turns
    turns: int = 1
    averaged: bool = True  # the turns are written as their mean
    angle_step: float = 0.5  # deg
    first_angle: float = 0.0  # deg
    sampling_rate: float | None = None  # Hz: sampled in time with a pulse instead of by angle
    story: str = ""
    faults: tuple[dict[str, Any], ...] = ()


@dataclass(frozen=True)
class Simulated:
    """A simulated recording: columns as sampled, in SI, and what is true."""

    situation: Situation
    machine: Machine
    crank_angle: Floats | None  # (rows,) deg
    seconds: Floats | None  # (rows,) s
    pulse: Floats | None  # (rows,)
    cycle: Floats | None  # (rows,)
    pressure: dict[tuple[str, str], Floats]  # (cylinder, end) to (rows,) Pa
    lines: dict[str, dict[str, float]]  # cylinder to line readings, SI
    truth: dict[str, Any]


def _changed(described: Cylinders, way: CylinderSituation) -> Cylinders:
    """Put in the differences between the declared and the true cylinder."""
    if way.clearance_error:
        clearance = np.asarray(described.clearance) + np.array([way.clearance_error])
        described = replace(described, clearance=clearance)
    for side, changes in way.valve_changes.items():
        valves = getattr(described, f"{side}_valves")
        factors = {
            name: np.asarray(getattr(valves, name)) * value for name, value in changes.items()
        }
        described = replace(described, **{f"{side}_valves": replace(valves, **factors)})
    return described


def _twice(leaks: Leaks) -> Leaks:
    """Leaks and, as a second card, none."""

    def pair(size: Any, *, by_end: bool) -> Floats:
        once = np.asarray(size, dtype=np.float64)
        once = once.reshape(1, -1) if by_end else once.reshape(1)
        return np.concatenate([once, np.zeros_like(once)])

    paths = {}
    for path in ("suction", "discharge", "rings", "packing"):
        leak, by_end = getattr(leaks, path), path in ("suction", "discharge")
        paths[path] = replace(
            leak,
            orifice=pair(leak.orifice, by_end=by_end),
            slot=pair(leak.slot, by_end=by_end),
            labyrinth=pair(leak.labyrinth, by_end=by_end),
        )
    return Leaks(**paths)


def _described(machine: Machine, cylinder: Cylinder, gas: Gas, situation: Situation) -> Cylinders:
    """Two cards of a cylinder: as it is, and without its leaks."""
    way = situation.cylinders[cylinder.name]
    described = declared_cylinder(
        machine,
        cylinder.name,
        gas,
        speed=situation.speed,
        suction_pressure=way.suction_pressure,
        discharge_pressure=way.discharge_pressure,
        suction_temperature=way.suction_temperature,
        load_step=way.load_step,
        heat_law=way.heat_law,
        heat_multiplier=way.heat_multiplier,
        suction_heating=way.suction_heating,
        pulsation=way.pulsation,
    ).cylinders
    described = _changed(described, way)
    ripple = np.array([situation.speed_ripple]) if situation.speed_ripple else None
    return replace(described, leaks=_twice(way.leaks), speed_ripple=ripple)


@dataclass(frozen=True)
class _Job:
    """One cylinder of one recording, described and in time computed."""

    recording: int
    cylinder: Cylinder
    gas: Gas
    described: Cylinders


def _jobs(machine: Machine, situations: Sequence[Situation]) -> list[_Job]:
    jobs = []
    for number, situation in enumerate(situations):
        _check_names(machine, situation)
        for cylinder in machine.cylinders:
            way = situation.cylinders[cylinder.name]
            gas = gas_for(
                machine.gas_of(cylinder),
                suction=(way.suction_pressure, way.suction_temperature),
                discharge_pressure=way.discharge_pressure,
            )
            described = _described(machine, cylinder, gas, situation)
            jobs.append(_Job(number, cylinder, gas, described))
    return jobs


def _check_names(machine: Machine, situation: Situation) -> None:
    names = sorted(cylinder.name for cylinder in machine.cylinders)
    if names != sorted(situation.cylinders):
        raise InputError(
            "the situation does not name the cylinders of the machine",
            file=machine.source or None,
            found=", ".join(sorted(situation.cylinders)),
            expected=", ".join(names),
        )


def _computed(jobs: Sequence[_Job], step: float) -> list[Cycles]:
    """Cycles of all jobs, those of one kind and one gas in one batch."""
    groups: dict[tuple[Any, ...], list[int]] = {}
    for number, job in enumerate(jobs):
        described = job.described
        kind = (id(job.gas), described.ends, described.wall.law)
        groups.setdefault(kind, []).append(number)
    cycles: dict[int, Cycles] = {}
    for numbers in groups.values():
        batch = stacked([jobs[number].described for number in numbers])
        found = steady_state(batch, jobs[numbers[0]].gas, step=step)
        for place, number in enumerate(numbers):
            cycles[number] = found.take(slice(2 * place, 2 * place + 2))
    return [cycles[number] for number in range(len(jobs))]


def _sensor(way: CylinderSituation, end: int) -> Sensor:
    if not way.sensors:
        return Sensor()
    return way.sensors[min(end, len(way.sensors) - 1)]


@dataclass(frozen=True)
class _Rows:
    """Where the samples of an export lie: angle on the shaft, export angle, time, turn."""

    shaft: Floats  # deg, true, growing over the turns
    crank_angle: Floats | None
    seconds: Floats | None
    turn: Floats  # number of the turn, from 0


def _rows(situation: Situation) -> _Rows:
    if situation.sampling_rate is None:
        count = round(360 / situation.angle_step)
        export = situation.first_angle + np.arange(count) * situation.angle_step
        turns = np.repeat(np.arange(float(situation.turns)), count)
        shaft = np.tile(export, situation.turns) + 360 * turns - situation.encoder_offset
        return _Rows(shaft, np.tile(export, situation.turns), None, turns)
    total = situation.turns / situation.speed
    seconds = np.arange(int(total * situation.sampling_rate)) / situation.sampling_rate
    fine = np.linspace(0, 360, 1441)
    rate = np.ones(1440)
    for order, amplitude in enumerate(situation.speed_ripple, start=1):
        rate = rate + (amplitude * np.exp(1j * order * np.radians(fine[:-1] + 0.125))).real
    clock = np.concatenate([[0], np.cumsum(1 / rate)])
    clock = clock / clock[-1] / situation.speed
    whole, rest = np.divmod(seconds, 1 / situation.speed)
    # The recording starts a third of a turn before the first pulse.
    shaft = np.interp(rest, clock, fine) + 360 * whole - 120.0
    return _Rows(shaft, None, seconds, np.floor((shaft + situation.encoder_offset) / 360))


def _sampled(trace: Floats, rows: _Rows, wander: Floats) -> Floats:
    """A fine periodic turn at the rows, each turn scaled by the wander of the line pressures."""
    grid = np.arange(trace.size + 1) * (360 / trace.size)
    value = np.interp(rows.shaft % 360, grid, np.append(trace, trace[0]))
    scaled: Floats = value * wander[(rows.turn - rows.turn.min()).astype(int)]
    return scaled


def _averaged(values: Floats, turns: int) -> Floats:
    mean: Floats = values.reshape(turns, -1).mean(axis=0)
    return mean


def _line_readings(
    way: CylinderSituation, truth: dict[str, Any], rng: np.random.Generator
) -> dict[str, float]:
    warm = truth["discharge_temperature_degC"] + 273.15
    return {
        "suction pressure": way.suction_pressure * (1 + way.line_error[0]),
        "discharge pressure": way.discharge_pressure * (1 + way.line_error[1]),
        "suction temperature": way.suction_temperature + way.temperature_error[0],
        "discharge temperature": warm + way.temperature_error[1] + rng.normal(0, 0.1),
    }


def simulate_recordings(
    machine: Machine, situations: Sequence[Situation], *, seed: int = 0, step: float = 0.25
) -> list[Simulated]:
    """Compute what would be recorded from a machine in some situations.

    Parameters
    ----------
    machine : Machine
        As declared; valves it does not describe are assumed (see `declared_cylinder`).
    situations : Situation, one a recording
    seed : ()
        Of the noise; recording i takes the pair (seed, i), so that it does not depend on the
        others.
    step : ()
        Of the cylinder model. [deg]

    Returns
    -------
    list of Simulated
        Rows in SI and the truth in the terms of the reported quantities.

    Notes
    -----
    Every cylinder is computed with and without its leaks, since leaks are stated against the gas
    delivered without them. Turns differ by a common factor on all pressures (line wander), which
    is exact for a perfect gas at unchanged temperature.
    """
    jobs = _jobs(machine, situations)
    cycles = _computed(jobs, step)
    results = []
    for number, situation in enumerate(situations):
        own = [(job, found) for job, found in zip(jobs, cycles) if job.recording == number]
        results.append(_recorded(machine, situation, own, np.random.default_rng((seed, number))))
    return results


def _recorded(
    machine: Machine,
    situation: Situation,
    computed: Sequence[tuple[_Job, Cycles]],
    generator: np.random.Generator,
) -> Simulated:
    """Send the computed cycles of one recording through the measuring chain."""
    rows = _rows(situation)
    turns = int(rows.turn.max() - rows.turn.min()) + 1
    wander = 1 + generator.normal(0, 1, turns) * situation.wander
    pressure: dict[tuple[str, str], Floats] = {}
    truths, lines = [], {}
    for job, cycles in computed:
        cylinder, way = job.cylinder, situation.cylinders[job.cylinder.name]
        sensors = [_sensor(way, end) for end in range(len(cycles.ends))]
        truth = cylinder_truth(cylinder, cycles, job.described, job.gas, sensors)
        truths.append(truth)
        lines[cylinder.name] = _line_readings(way, truth, generator)
        for end, name in enumerate(cycles.ends):
            fine = through_passage(
                cycles.pressure[0, end],
                sensors[end],
                situation.speed,
                shift=cylinder.dead_centre,
                refine=_REFINE,
            )
            sampled = _sampled(fine, rows, wander)
            part = (rows.shaft - cylinder.dead_centre) % 360 / 360
            reading = as_read(sampled, sensors[end], part, generator)
            if situation.averaged and situation.sampling_rate is None:
                reading = _averaged(reading, situation.turns)
            pressure[cylinder.name, name] = reading
    return _collected(machine, situation, rows, pressure, lines, truths)


def _collected(
    machine: Machine,
    situation: Situation,
    rows: _Rows,
    pressure: dict[tuple[str, str], Floats],
    lines: dict[str, dict[str, float]],
    truths: list[dict[str, Any]],
) -> Simulated:
    angle, cycle, pulse = rows.crank_angle, None, None
    if angle is not None and situation.averaged:
        angle = angle[: angle.size // situation.turns]
    elif angle is not None:
        cycle = rows.turn + 1
    if rows.seconds is not None:
        position = (rows.shaft + situation.encoder_offset) % 360
        pulse = np.where(position < _PULSE_WIDTH, 5.0, 0.0)
    truth = {
        "machine": machine.name,
        "time": situation.time.isoformat(),
        "story": situation.story,
        "faults": list(situation.faults),
        "dead_centre_offset_deg": situation.encoder_offset,
        "speed_rpm": situation.speed * 60,
        "cylinders": truths,
    }
    return Simulated(situation, machine, angle, rows.seconds, pulse, cycle, pressure, lines, truth)
