"""Ends of many recordings as batches of cards, measured group by group."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import cast

import numpy as np

from pvcard.analysis.end_traces import EndTrace
from pvcard.card.measure import CHUNK, Columns, Measured, measure, measure_without_gas
from pvcard.card_set import CardSet
from pvcard.errors import GasError
from pvcard.gas import Gas, check_gas_phase, gas_for, gas_table
from pvcard.gas_table import GasTable
from pvcard.line_fit import (
    CLEARANCE_GAS_PRIOR,
    HEAT_PRIOR,
    SHAPE_PRIOR,
    WALL_PRIOR,
    WARMING_PRIOR,
)
from pvcard.machine import Machine
from pvcard.types import Floats
from pvcard.uncertainty import INDEX, INPUTS, UNIT_INPUTS

Progress = Callable[[str, float], None]
# K, that a table reaches beyond line and ideal temperatures; colder only as far as the gas allows.
_HOTTER, _COLDER = 100.0, (40.0, 32.0, 24.0, 16.0, 8.0)


@dataclass(frozen=True, eq=False)
class Job:
    """One end to be measured, with the clearance of its load step."""

    trace: EndTrace
    machine: Machine
    clearance: float  # fraction, NaN where not declared
    clearance_uncertainty: float


@dataclass(frozen=True, eq=False)
class Outcome:
    """Where the figures of a job stand, or why there are none."""

    measured: Measured | None
    row: int
    cards: CardSet | None
    input_uncertainty: Floats | None  # (inputs,)
    problem: str = ""
    plain: Columns | None = None  # what could be told without gas and line values

    @property
    def columns(self) -> Columns:
        """Everything that was measured."""
        if self.measured is not None:
            return self.measured.columns
        return self.plain or {}


def measure_jobs(
    jobs: Sequence[Job], *, with_uncertainty: bool = True, progress: Progress | None = None
) -> list[Outcome]:
    """Measure every end, those of one gas and one grid of angles together.

    Parameters
    ----------
    jobs : sequence of Job
    with_uncertainty : whether to carry uncertainties
    progress : called with a text and the share done

    Returns
    -------
    list of Outcome
        In the order of the jobs.
    """
    groups: dict[tuple[object, ...], list[int]] = {}
    gases: dict[int, Gas] = {}
    outcomes: list[Outcome] = [Outcome(None, 0, None, None)] * len(jobs)
    for number, job in enumerate(jobs):
        problem = _unusable(job)
        if problem:
            outcomes[number] = _without_gas(job, problem, with_uncertainty)
            continue
        try:
            gas = _gas_of(job)
        except GasError as error:
            outcomes[number] = _without_gas(job, error.message(), with_uncertainty)
            continue
        gases[id(gas)] = gas
        groups.setdefault(_key(job, gas), []).append(number)
    done = 0
    for key, members in groups.items():
        for first in range(0, len(members), CHUNK):
            part = members[first : first + CHUNK]
            for number, outcome in zip(
                part,
                _measure_part(
                    [jobs[one] for one in part], gases[int(str(key[0]))], with_uncertainty
                ),
            ):
                outcomes[number] = outcome
            done += len(part)
            if progress:
                progress("measuring", done / len(jobs))
    return outcomes


def _without_gas(job: Job, problem: str, with_uncertainty: bool) -> Outcome:
    """Power and peaks of an end whose gas or lines are not known well enough for the rest."""
    cards = card_set([job], cast(Gas, None), cast(GasTable, None))
    unsure = input_uncertainty([job], None)
    plain = measure_without_gas(cards, with_uncertainty=with_uncertainty)
    return Outcome(None, 0, None, unsure[0], problem, plain)


def _unusable(job: Job) -> str:
    lines = job.trace.lines
    if not np.isfinite(lines.suction_temperature):
        return (
            "the suction temperature is not known: give 'suction temperature' in the export or "
            "suction_temperature of the stage"
        )
    if not np.all(job.trace.pressure > 0):
        return (
            "the trace reaches below zero absolute pressure: check whether gauge readings were "
            "taken as absolute"
        )
    if not lines.suction_pressure > 0:
        return "the suction pressure is not above zero absolute: check its unit, gauge or absolute"
    if not lines.discharge_pressure > lines.suction_pressure:
        return (
            f"the discharge pressure ({lines.discharge_pressure / 1e5:.4g} bar) is not above the "
            f"suction pressure ({lines.suction_pressure / 1e5:.4g} bar): check both readings"
        )
    return ""


def _gas_of(job: Job) -> Gas:
    lines = job.trace.lines
    gas = gas_for(
        job.machine.gas_of(job.trace.cylinder),
        suction=(lines.suction_pressure, lines.suction_temperature),
        discharge_pressure=lines.discharge_pressure,
    )
    check_gas_phase(gas, lines.suction_pressure, lines.suction_temperature)
    return gas


def _key(job: Job, gas: Gas) -> tuple[object, ...]:
    """Ends that can share a table and a grid."""
    lines, angle = job.trace.lines, job.trace.crank_angle
    return (
        id(gas),
        len(angle),
        angle.tobytes(),
        round(float(np.log(lines.suction_pressure)) / 0.7),
        round(float(np.log(lines.discharge_pressure)) / 0.7),
        round(lines.suction_temperature / 40),
    )


def _measure_part(jobs: list[Job], gas: Gas, with_uncertainty: bool) -> list[Outcome]:
    try:
        table = _table(jobs, gas)
    except GasError as error:
        if len(jobs) > 1:  # one odd trace must not take the figures of its neighbours
            return [_measure_part([job], gas, with_uncertainty)[0] for job in jobs]
        return [_without_gas(jobs[0], error.message(), with_uncertainty)]
    cards = card_set(jobs, gas, table)
    unsure = input_uncertainty(jobs, gas)
    measured = measure(cards, unsure, with_uncertainty=with_uncertainty)
    return [Outcome(measured, row, cards, unsure[row]) for row in range(len(jobs))]


def _table(jobs: list[Job], gas: Gas) -> GasTable:
    lines = [job.trace.lines for job in jobs]
    low = min(
        min(one.suction_pressure for one in lines),
        min(float(job.trace.pressure.min()) for job in jobs),
    )
    high = max(
        max(one.discharge_pressure for one in lines),
        max(float(job.trace.pressure.max()) for job in jobs),
    )
    cold = min(one.suction_temperature for one in lines)
    hot = max(
        float(
            gas.isentropic(
                np.array(one.suction_pressure),
                np.array(one.suction_temperature),
                np.array(one.discharge_pressure),
            ).temperature
        )
        for one in lines
    )
    for reach in _COLDER:
        try:
            return gas_table(
                gas, pressure=(0.9 * low, 1.15 * high), temperature=(cold - reach, hot + _HOTTER)
            )
        except GasError as error:
            problem = error
    raise problem


def card_set(jobs: Sequence[Job], gas: Gas, table: GasTable) -> CardSet:
    """Arrays of a group of ends.

    Parameters
    ----------
    jobs : sequence of Job
        Of one gas and one grid.
    gas, table : their gas

    Returns
    -------
    CardSet
    """

    def column(values: Sequence[float]) -> Floats:
        return np.array(values, dtype=np.float64)

    traces = [job.trace for job in jobs]
    own = [trace.cylinder for trace in traces]
    lines = [trace.lines for trace in traces]
    return CardSet(
        crank_angle=traces[0].crank_angle,
        pressure=np.stack([trace.pressure for trace in traces]),
        rod_sign=column([trace.rod_sign for trace in traces]),
        rod_ratio=column([one.stroke / 2 / one.connecting_rod_length for one in own]),
        bore=column([one.bore for one in own]),
        stroke=column([one.stroke for one in own]),
        piston_area=column([trace.cylinder.area(trace.end) for trace in traces]),
        area_by_bore=column(
            [np.pi / 2 * one.bore**2 / one.area(trace.end) for one, trace in zip(own, traces)]
        ),
        clearance=column([job.clearance for job in jobs]),
        suction_pressure=column([one.suction_pressure for one in lines]),
        discharge_pressure=column([one.discharge_pressure for one in lines]),
        suction_temperature=column([one.suction_temperature for one in lines]),
        discharge_temperature=column([one.discharge_temperature for one in lines]),
        speed=column([trace.speed for trace in traces]),
        gas=gas,
        table=table,
    )


def input_uncertainty(jobs: Sequence[Job], gas: Gas | None) -> Floats:
    """Standard uncertainties of all inputs for each end.

    Parameters
    ----------
    jobs : sequence of Job
    gas : Gas or None
        None where it is not known.

    Returns
    -------
    u : (cards, inputs)
        In the order of `pvcard.uncertainty.INPUTS`, each in the unit of its input.
    """
    result = np.zeros((len(jobs), len(INPUTS)))
    for row, job in enumerate(jobs):
        declared, lines, trace = job.machine.uncertainty, job.trace.lines, job.trace
        values = {
            "dead_centre": float(np.hypot(declared.dead_centre, trace.angle_uncertainty)),
            "pressure_level": declared.pressure_level * lines.suction_pressure,
            "pressure_gain": declared.pressure_gain,
            "suction_pressure": lines.suction_pressure_u,
            "discharge_pressure": lines.discharge_pressure_u,
            "suction_temperature": lines.suction_temperature_u,
            "discharge_temperature": lines.discharge_temperature_u,
            "bore": declared.bore,
            "stroke": declared.stroke,
            "connecting_rod_length": declared.connecting_rod_length,
            "clearance": job.clearance_uncertainty,
            "gas_exponent": float(
                np.hypot(declared.gas_exponent, gas.relative_exponent_uncertainty if gas else 0.0)
            ),
            "speed": trace.speed_uncertainty,
            "turn_scatter": trace.turn_scatter,
            "heat_multiplier": HEAT_PRIOR,
            "wall_temperature": WALL_PRIOR[1],
            "heat_shape": SHAPE_PRIOR,
            "warming": WARMING_PRIOR,
            "clearance_gas": CLEARANCE_GAS_PRIOR,
        }
        for name, value in values.items():
            result[row, INDEX[name]] = value
    for name in UNIT_INPUTS:
        result[:, INDEX[name]] = 1.0
    return result
