"""Recordings and machines with known errors: what was declared and read differs from the truth by
draws as wide as the declared standard uncertainties."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy.interpolate import CubicSpline

from pvcard.ingest.recording import LineReadings, Recording
from pvcard.machine import Cylinder, CylinderEnd, Machine
from pvcard.types import Floats


def misdeclared(machine: Machine, rng: np.random.Generator) -> Machine:
    """The machine as somebody might have measured it."""
    unsure = machine.uncertainty

    def end(own: CylinderEnd) -> CylinderEnd:
        known = own.clearance or 0.0
        return replace(own, clearance=max(known + rng.normal(0, unsure.clearance), 0.01))

    def cylinder(own: Cylinder) -> Cylinder:
        rod = own.connecting_rod_length * (1 + rng.normal(0, unsure.connecting_rod_length))
        return replace(
            own,
            bore=own.bore * (1 + rng.normal(0, unsure.bore)),
            stroke=own.stroke * (1 + rng.normal(0, unsure.stroke)),
            connecting_rod_length=rod,
            head_end=end(own.head_end),
            crank_end=end(own.crank_end),
        )

    return replace(machine, cylinders=tuple(cylinder(one) for one in machine.cylinders))


def misread_lines(
    readings: LineReadings, machine: Machine, rng: np.random.Generator
) -> LineReadings:
    """Line readings as the gauges might have had them."""
    unsure = machine.uncertainty
    assert readings.suction_pressure is not None
    assert readings.discharge_pressure is not None
    assert readings.suction_temperature is not None
    discharge = readings.discharge_temperature
    if discharge is not None:
        discharge += rng.normal(0, unsure.line_temperature)
    return replace(
        readings,
        suction_pressure=readings.suction_pressure * (1 + rng.normal(0, unsure.line_pressure)),
        discharge_pressure=readings.discharge_pressure * (1 + rng.normal(0, unsure.line_pressure)),
        suction_temperature=readings.suction_temperature + rng.normal(0, unsure.line_temperature),
        discharge_temperature=discharge,
    )


def misread(
    clean: Recording, machine: Machine, rng: np.random.Generator, *, noise: float = 0.0
) -> Recording:
    """The recording with a mark, zeros, gains, lines and speed as uncertain as declared.

    It has to hold one turn, evenly sampled; `noise` is that of every sample, relative.
    """
    unsure = machine.uncertainty
    assert clean.crank_angle is not None
    assert clean.speed is not None
    mark = rng.normal(0, unsure.dead_centre)
    angle = np.append(clean.crank_angle, clean.crank_angle[0] + 360)
    channels = []
    for channel in clean.channels:
        low = clean.lines[channel.cylinder].suction_pressure
        assert low is not None
        closed = np.append(channel.pressure, channel.pressure[0])
        shown: Floats = CubicSpline(angle, closed, bc_type="periodic")(clean.crank_angle - mark)
        shown = shown * (1 + rng.normal(0, unsure.pressure_gain))
        shown = shown + rng.normal(0, unsure.pressure_level) * low
        shown = shown * (1 + noise * rng.standard_normal(shown.shape))
        channels.append(replace(channel, pressure=shown))
    lines = {name: misread_lines(one, machine, rng) for name, one in clean.lines.items()}
    speed = clean.speed * (1 + rng.normal(0, unsure.speed))
    return replace(clean, channels=tuple(channels), lines=lines, speed=speed)
