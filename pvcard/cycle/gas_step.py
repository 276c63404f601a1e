"""One step of mass and energy of the gas in a batch of cylinder ends.

Two implicit stages a step (Alexander's method of order two): the flow through a wide open valve
relaxes the pressure within a few microseconds, so explicit steps would have to be that short. The
one stiff relation, flow in proportion to the root of the pressure difference, is solved in closed
form.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from pvcard.cycle.setting import FIRST_STAGE, Setting, Side
from pvcard.flow import labyrinth_flow, series_value, slot_flow
from pvcard.heat import adair_nusselt, annand_nusselt, woschni_coefficient
from pvcard.types import Booleans, Floats

# Rounds of the closed-form solution a stage: the second mends the linear guess of the first.
_ROUNDS = 2
# An ideal valve is a non-return gap of this many piston areas.
_WIDE_OPEN = 50.0
_SMALLEST_DROP = 1e-12


class Contents(NamedTuple):
    """State of the gas in each end, all (ends, cards)."""

    mass: Floats  # kg
    energy: Floats  # J, above the fluid's datum
    volume: Floats  # m3
    pressure: Floats  # Pa
    temperature: Floats  # K
    density: Floats  # kg/m3
    enthalpy: Floats  # J/kg


class Stream(NamedTuple):
    """Flow of one path into the cylinder, (ends, cards): mass [kg/s] and energy [W]."""

    mass: Floats
    energy: Floats


class Slow(NamedTuple):
    """What is computed once a stage: leaks, wall heat, the lesser of two open valves."""

    suction_leak: Stream
    discharge_leak: Stream
    rings: Stream
    packing: Stream
    heat: Floats  # W into the gas
    mass: Floats  # kg/s, sum
    energy: Floats  # W, sum with heat
    lesser: Stream | None  # of that valve of an end with both open which passes less


class StepFlows(NamedTuple):
    """What passed during one step, (ends, cards): masses [kg] into the cylinder, energies [J]."""

    suction: Floats
    suction_energy: Floats
    discharge: Floats
    discharge_energy: Floats
    discharge_out: Floats  # mass out only, >= 0
    discharge_out_energy: Floats
    suction_leak: Floats
    discharge_leak: Floats
    rings: Floats
    packing: Floats
    leak_energy: Floats
    heat: Floats
    work: Floats  # taken in by the gas


@dataclass
class DischargeLine:
    """Enthalpy and density of the gas in the discharge line, (cards,); settle with the cycle."""

    enthalpy: Floats
    density: Floats


def gas_state(setting: Setting, mass: Floats, energy: Floats, volume: Floats) -> Contents:
    """State from mass, energy and volume.

    Parameters
    ----------
    setting : what stays fixed over a turn
    mass, energy, volume : (ends, cards)
        [kg], [J], [m3]

    Returns
    -------
    Contents
    """
    density = mass / volume
    specific = energy / mass
    pressure, temperature = setting.fluid.state(density, specific)
    return Contents(
        mass, energy, volume, pressure, temperature, density, specific + pressure / density
    )


def _law_flow(
    leak: dict[str, Floats], upstream: Floats, density: Floats, downstream: Floats, series: Floats
) -> Floats:
    """Flow of one path, upstream and downstream already told apart. [kg/s]."""
    flow: Floats = np.zeros_like(upstream)
    if leak["orifice"].any():
        drop = np.minimum(1 - downstream / upstream, series[-1])
        flow = flow + leak["orifice"] * np.sqrt(
            upstream * density * drop * series_value(drop, series)
        )
    if leak["slot"].any():
        flow = flow + slot_flow(leak["slot"], upstream, density, downstream)
    if leak["labyrinth"].any():
        flow = flow + labyrinth_flow(
            leak["labyrinth"], leak["throttlings"], upstream, density, downstream
        )
    return flow


def _leak(
    leak: dict[str, Floats],
    inside: tuple[Floats, Floats, Floats],
    outside: tuple[Floats, Floats, Floats],
    series: Floats,
) -> Stream:
    """Flow into ``inside`` from ``outside``, each (pressure, density, enthalpy)."""
    out = inside[0] > outside[0]
    upstream = np.where(out, inside[0], outside[0])
    downstream = np.where(out, outside[0], inside[0])
    density = np.where(out, inside[1], outside[1])
    flow = _law_flow(leak, upstream, density, downstream, series)
    mass = np.where(out, -flow, flow)
    return Stream(mass, mass * np.where(out, inside[2], outside[2]))


def _present(leak: dict[str, Floats]) -> bool:
    return bool(leak["orifice"].any() or leak["slot"].any() or leak["labyrinth"].any())


class GasStep:
    """Advances the gas of a batch by one step after another.

    Parameters
    ----------
    setting : Setting
    ideal_valves : valves without inertia and resistance, closing at once
    """

    def __init__(self, setting: Setting, *, ideal_valves: bool) -> None:
        """Sort out which paths are there."""
        self.setting = setting
        self.ideal_valves = ideal_valves
        batch = setting.batch
        self.shape = (batch.ends, batch.cards)
        self.zero = np.zeros(self.shape)
        self.no_stream = Stream(self.zero, self.zero)
        self.no = np.zeros(self.shape, dtype=bool)
        self.yes = np.ones(self.shape, dtype=bool)
        # What is open in the step at hand: sorted out once a step.
        self.discharge_open = self.both_sides = self.all_shut = False
        self.leaks = batch.leaks
        self.present = {path: _present(leak) for path, leak in batch.leaks.items()}
        if "crank" not in batch.described.ends:
            self.present["packing"] = False
        if batch.ends == 1 and "ring_back_pressure" not in batch.cylinder:
            self.present["rings"] = False
        self.wide = _WIDE_OPEN * setting.piston_area
        cylinder = batch.cylinder
        self.piston_speed = 2 * cylinder["stroke"] * cylinder["speed"]
        self.wall_scale = np.pi * cylinder["bore"] / setting.piston_area
        gas = setting.suction.gas
        self.suction_gas = (gas.density, gas.enthalpy)
        self.line = DischargeLine(
            setting.discharge.gas.enthalpy.copy(), setting.discharge.gas.density.copy()
        )

    # -- slow parts ------------------------------------------------------------------------------

    def _heat(self, step: int, gas: Contents, areas: tuple[Floats, Floats]) -> Floats:
        batch = self.setting.batch
        law, wall = batch.described.wall.law, batch.wall
        if law == "none":
            return self.zero
        bore = batch.cylinder["bore"]
        surface = 2 * self.setting.piston_area + self.wall_scale * gas.volume
        if law == "annand":
            reynolds = gas.density * (self.piston_speed * bore / wall["viscosity"])
            nusselt = annand_nusselt(reynolds, wall["annand_coefficient"])
            coefficient = nusselt * (wall["conductivity"] / bore)
        elif law == "adair":
            size = 6 * gas.volume / surface
            swirl = self.setting.swirl[:, step]
            reynolds = gas.density * np.square(size) * swirl / (2 * wall["viscosity"])
            coefficient = adair_nusselt(reynolds, wall["prandtl"]) * wall["conductivity"] / size
        else:
            velocity = np.where(areas[0] + areas[1] > 0, 6.18, 2.28) * self.piston_speed
            coefficient = woschni_coefficient(bore, gas.pressure, gas.temperature, velocity)
        difference = self.setting.wall_temperature - gas.temperature
        result: Floats = wall["multiplier"] * coefficient * surface * difference
        return result

    def _rings(self, gas: Contents) -> Stream:
        series, leak = self.setting.leak_series, self.leaks["rings"]
        first = (gas.pressure[0], gas.density[0], gas.enthalpy[0])
        if self.setting.batch.ends == 2:
            second = (gas.pressure[1], gas.density[1], gas.enthalpy[1])
            stream = _leak(leak, first, second, series)
            return Stream(
                np.stack([stream.mass, -stream.mass]), np.stack([stream.energy, -stream.energy])
            )
        stream = _leak(leak, first, self._outside("ring_back_pressure"), series)
        return Stream(stream.mass[None], stream.energy[None])

    def _outside(self, name: str) -> tuple[Floats, Floats, Floats]:
        back = self.setting.batch.cylinder[name]
        density, enthalpy = self.suction_gas
        return back, density * back / self.setting.suction.pressure, enthalpy

    def _packing(self, gas: Contents) -> Stream:
        inside = (gas.pressure[-1], gas.density[-1], gas.enthalpy[-1])
        outside = self._outside("packing_back_pressure")
        stream = _leak(self.leaks["packing"], inside, outside, self.setting.leak_series)
        mass, energy = np.zeros(self.shape), np.zeros(self.shape)
        mass[-1], energy[-1] = stream
        return Stream(mass, energy)

    def slow(
        self,
        step: int,
        gas: Contents,
        lines: tuple[Floats, Floats],
        areas: tuple[Floats, Floats],
    ) -> Slow:
        """Leaks and heat at a state; pressures of, and valve areas to, suction and discharge."""
        inside = (gas.pressure, gas.density, gas.enthalpy)
        series = self.setting.leak_series
        streams = [self.no_stream] * 4
        if self.present["suction"]:
            outside = (lines[0] + self.zero, *self.suction_gas)
            streams[0] = _leak(self.leaks["suction"], inside, outside, series)
        if self.present["discharge"]:
            outside = (lines[1] + self.zero, self.line.density, self.line.enthalpy)
            streams[1] = _leak(self.leaks["discharge"], inside, outside, series)
        if self.present["rings"]:
            streams[2] = self._rings(gas)
        if self.present["packing"]:
            streams[3] = self._packing(gas)
        heat = self._heat(step, gas, areas)
        lesser = self._lesser(gas, lines, areas)
        passing = [stream for stream in streams if stream is not self.no_stream]
        if lesser is not None:
            passing.append(lesser)
        mass = sum((stream.mass for stream in passing), self.zero)
        energy = sum((stream.energy for stream in passing), heat)
        return Slow(streams[0], streams[1], streams[2], streams[3], heat, mass, energy, lesser)

    def _lesser(
        self, gas: Contents, lines: tuple[Floats, Floats], areas: tuple[Floats, Floats]
    ) -> Stream | None:
        """Stream of the smaller opening where both valves of an end are open at once."""
        if self.ideal_valves or not ((areas[0] > 0) & (areas[1] > 0)).any():
            return None
        governing = self._governing(areas, gas.pressure, lines)
        inside = (gas.pressure, gas.density, gas.enthalpy)
        streams = []
        for number, side in enumerate((self.setting.suction, self.setting.discharge)):
            beyond = self.suction_gas if number == 0 else (self.line.density, self.line.enthalpy)
            smaller = np.where(governing, number == 0, number == 1)
            nothing = np.zeros_like(areas[number])
            opening = {
                "orifice": np.where(smaller, areas[number], 0.0),
                "slot": nothing,
                "labyrinth": nothing,
            }
            streams.append(
                _leak(opening, inside, (lines[number] + self.zero, *beyond), side.series)
            )
        mass, energy = (sum(parts, self.zero) for parts in zip(*streams))
        return Stream(mass, energy)

    # -- the valve that is open ------------------------------------------------------------------

    def _governing(
        self, areas: tuple[Floats, Floats], pressure: Floats, lines: tuple[Floats, Floats]
    ) -> Booleans:
        """Whether the discharge valve moves the pressure more strongly than the suction valve."""
        above = areas[1] * np.sqrt(np.abs(pressure - lines[0]))
        below = areas[0] * np.sqrt(np.abs(pressure - lines[1]))
        result: Booleans = above > below
        return result

    def _gap(
        self, areas: tuple[Floats, Floats], predicted: Floats, lines: tuple[Floats, Floats]
    ) -> tuple[Booleans, Floats]:
        """Which side's valve governs (true: discharge) and its area."""
        if not self.ideal_valves:
            if not self.both_sides:
                return (self.yes, areas[1]) if self.discharge_open else (self.no, areas[0])
            discharge = self._governing(areas, predicted, lines)
            return discharge, np.where(discharge, areas[1], areas[0])
        discharge = (predicted > lines[1]) | ((predicted > lines[0]) & (areas[0] == 0))
        forward = np.where(discharge, predicted > lines[1], (predicted < lines[0]) | (areas[0] > 0))
        return discharge, np.where(forward, self.wide, 0.0)

    def _conductance(
        self,
        area: Floats,
        gas: Contents,
        outside: tuple[Floats, Floats],
        out: Booleans,
        series: Floats,
    ) -> Floats:
        """Flow over the root of the pressure difference, at the last known pressure."""
        pressure, density = outside
        upstream = np.where(out, np.maximum(gas.pressure, pressure), pressure)
        downstream = np.where(out, pressure, np.minimum(gas.pressure, pressure))
        drop = np.maximum(1 - downstream / upstream, _SMALLEST_DROP)
        limited = np.minimum(drop, series[-1])
        value = series_value(limited, series) * limited / drop
        result: Floats = area * np.sqrt(np.where(out, gas.density, density) * value)
        return result

    def stage(
        self,
        step: int,
        base: tuple[Floats, Floats],
        weight: Floats,
        volumes: tuple[Floats, Floats],
        guess: tuple[Contents, Slow],
        surroundings: tuple[tuple[Floats, Floats], tuple[Floats, Floats]],
    ) -> tuple[Contents, Slow, Stream, Booleans, Floats]:
        """Solve one implicit stage.

        ``base``: mass and energy to which ``weight`` [s] times the rates is added; ``volumes``: at
        the stage, and the change over which the stage's pressure works; ``surroundings``: line
        pressures, valve areas.
        Returns state, slow rates, valve stream, which side it belongs to (true: discharge), working
        pressure.
        """
        gas, slow = guess
        lines, areas = surroundings
        volume, change = volumes
        stream, side = self.no_stream, self.no
        for turn in range(_ROUNDS):
            working = gas.pressure
            if turn > 0:
                slow = self.slow(step, gas, lines, areas)
            mass = base[0] + weight * slow.mass
            energy = base[1] + weight * slow.energy - working * change
            if not self.all_shut:
                stream, side = self._valve(gas, energy, weight, volume, surroundings)
                mass = mass + weight * stream.mass
                energy = energy + weight * stream.energy
            gas = gas_state(self.setting, mass, energy, volume)
        return gas, slow, stream, side, working

    def _beyond(
        self, side: Booleans, lines: tuple[Floats, Floats]
    ) -> tuple[Floats, Floats, Floats, Floats]:
        """Pressure, density, enthalpy and nozzle series of the line behind the governing valve."""
        suction, discharge = self.setting.suction, self.setting.discharge
        if side is self.no:
            return (lines[0], *self.suction_gas, suction.series[:, None])
        if side is self.yes:
            return lines[1], self.line.density, self.line.enthalpy, discharge.series[:, None]
        return (
            np.where(side, lines[1], lines[0]),
            np.where(side, self.line.density, self.suction_gas[0]),
            np.where(side, self.line.enthalpy, self.suction_gas[1]),
            np.where(side, discharge.series[:, None], suction.series[:, None]),
        )

    def _valve(
        self,
        gas: Contents,
        energy: Floats,
        weight: Floats,
        volume: Floats,
        surroundings: tuple[tuple[Floats, Floats], tuple[Floats, Floats]],
    ) -> tuple[Stream, Booleans]:
        """Flow through the governing valve of each end, at the end of the stage.

        With ``d0`` the pressure difference that would be there without the flow, ``d`` that with
        it: ``d = d0 - b sqrt(d)``, since flow goes with the root of ``d`` and takes pressure off in
        proportion.
        """
        lines, areas = surroundings
        stiffness = gas.pressure * gas.volume / (gas.energy * volume)
        predicted = stiffness * energy
        side, area = self._gap(areas, predicted, lines)
        line, density, warmth, series = self._beyond(side, lines)
        difference = predicted - line
        out = difference > 0
        conductance = self._conductance(area, gas, (line, density), out, series)
        enthalpy = np.where(out, gas.enthalpy, warmth)
        damping = stiffness * weight * enthalpy * conductance
        size = np.abs(difference)
        root = 2 * size / (damping + np.sqrt(np.square(damping) + 4 * size) + 1e-300)
        flow = np.where(out, -conductance, conductance) * root
        return Stream(flow, flow * enthalpy), side

    # -- one whole step --------------------------------------------------------------------------

    def step(
        self, step: int, gas: Contents, slow: Slow, areas: tuple[Floats, Floats]
    ) -> tuple[Contents, Slow, StepFlows]:
        """Advance by one step with given valve areas, (ends, cards) each."""
        setting = self.setting
        suction_open, self.discharge_open = bool(areas[0].any()), bool(areas[1].any())
        self.both_sides = self.ideal_valves or (suction_open and self.discharge_open)
        self.all_shut = not (self.ideal_valves or suction_open or self.discharge_open)
        weight = FIRST_STAGE * setting.duration[step]
        carry = (1 - FIRST_STAGE) / FIRST_STAGE
        first_change = setting.stage_volume[step] - setting.volume[step]
        second_change = setting.volume[step + 1] - setting.volume[step] - carry * first_change
        middle = self._surroundings(step, FIRST_STAGE)
        first = self.stage(
            step,
            (gas.mass, gas.energy),
            weight,
            (setting.stage_volume[step], first_change),
            (gas, slow),
            (middle, areas),
        )
        base = (
            gas.mass + carry * (first[0].mass - gas.mass),
            gas.energy + carry * (first[0].energy - gas.energy),
        )
        second = self.stage(
            step,
            base,
            weight,
            (setting.volume[step + 1], second_change),
            (first[0], first[1]),
            (self._surroundings(step, 1.0), areas),
        )
        flows = _passed(
            ((first, carry * weight, carry * first_change), (second, weight, second_change))
        )
        return second[0], second[1], flows

    def _surroundings(self, step: int, part: float) -> tuple[Floats, Floats]:
        setting = self.setting
        return setting.suction.pressure_at(step, part), setting.discharge.pressure_at(step, part)


def _passed(
    stages: tuple[tuple[tuple[Contents, Slow, Stream, Booleans, Floats], Floats, Floats], ...],
) -> StepFlows:
    """Add up what passed in the two stages."""
    total: list[Floats] = []
    for (_, slow, stream, side, working), weight, change in stages:
        discharge = (stream.mass * side, stream.energy * side)
        suction = (stream.mass - discharge[0], stream.energy - discharge[1])
        leak = slow.energy - slow.heat
        if slow.lesser is not None:
            other = (slow.lesser.mass * side, slow.lesser.energy * side)
            suction = (suction[0] + other[0], suction[1] + other[1])
            discharge = (
                discharge[0] + slow.lesser.mass - other[0],
                discharge[1] + slow.lesser.energy - other[1],
            )
            leak = leak - slow.lesser.energy
        leaving = discharge[0] < 0
        part = [
            weight * suction[0],
            weight * suction[1],
            weight * discharge[0],
            weight * discharge[1],
            -weight * (leaving * discharge[0]),
            -weight * (leaving * discharge[1]),
            weight * slow.suction_leak.mass,
            weight * slow.discharge_leak.mass,
            weight * slow.rings.mass,
            weight * slow.packing.mass,
            weight * leak,
            weight * slow.heat,
            -working * change,
        ]
        total = part if not total else [old + new for old, new in zip(total, part)]
    return StepFlows(*total)


def side_area(side: Side, position: Floats) -> Floats:
    """Effective flow area of a side, in proportion to lift, (ends, cards). [m2]."""
    result: Floats = side.area * position / side.plates.lift
    return result
