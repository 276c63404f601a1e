"""One revolution after another of a batch of cylinders, gas and valve plates together."""

from __future__ import annotations

import numpy as np

from pvcard.cycle.gas_step import Contents, GasStep, Slow, StepFlows, gas_state, side_area
from pvcard.cycle.plates import advance, resting
from pvcard.cycle.result import Sums, Trace
from pvcard.cycle.setting import Setting
from pvcard.types import Floats

_LEAST_DELIVERY = 0.005  # of the gas in the cylinder
_HELD_FROM = 150.0  # deg of own angle from which a delayed suction valve is held


class Turner:
    """Turns one chunk of a batch."""

    def __init__(self, setting: Setting, *, ideal_valves: bool) -> None:
        """Start with the plates on their seats."""
        self.setting = setting
        self.ideal_valves = ideal_valves
        self.gas_step = GasStep(setting, ideal_valves=ideal_valves)
        batch = setting.batch
        self.shape = (batch.ends, batch.cards)
        self.plates = (resting(self.shape), resting(self.shape))
        steps = len(setting.angle) - 1
        self.trace = Trace(*(np.zeros((steps, *self.shape)) for _ in range(5)))
        held = batch.end["held_open_until"]
        self.held = None if np.isnan(held).all() else held
        self.fixed_line = "discharge_temperature" in batch.cylinder
        self.gas = self._start()
        self.sums = self._no_sums()

    def _no_sums(self) -> Sums:
        zeros = [np.zeros(self.shape) for _ in range(len(StepFlows._fields) + 6)]
        return Sums(zeros[6:], *zeros[:6])

    def _start(self) -> Contents:
        """Clearance gas at discharge state, or a full cylinder at suction state."""
        setting = self.setting
        cylinder = setting.batch.cylinder
        density, energy = np.empty(self.shape), np.empty(self.shape)
        for row, end in enumerate(setting.batch.described.ends):
            full = end == "crank"
            pressure = cylinder["suction_pressure" if full else "discharge_pressure"]
            temperature = cylinder["suction_temperature"] if full else setting.ideal_discharge
            line = setting.fluid.line(pressure, temperature)
            density[row] = line.density
            energy[row] = line.enthalpy - pressure / line.density
        mass = density * setting.volume[0]
        return gas_state(setting, mass, mass * energy, setting.volume[0])

    def vector(self) -> Floats:
        """Unknowns of the map, (unknowns, cards)."""
        parts = [self.gas.mass, self.gas.energy]
        if not self.fixed_line:
            parts.append(self.gas_step.line.enthalpy[None])
        return np.concatenate(parts)

    def set_vector(self, vector: Floats) -> None:
        """Start the next turn from these unknowns."""
        rows = self.shape[0]
        self.gas = gas_state(
            self.setting, vector[:rows], vector[rows : 2 * rows], self.setting.volume[0]
        )
        if not self.fixed_line:
            self._set_line(vector[-1])

    def _set_line(self, enthalpy: Floats) -> None:
        line = self.gas_step.line
        line.enthalpy = enthalpy
        line.density, self.line_temperature = self.setting.fluid.state_of_enthalpy(
            self.setting.discharge.pressure, enthalpy
        )

    def _areas(self, step: int) -> tuple[Floats, Floats]:
        """Valve areas for a step; plates of suction valves held open are kept at full lift."""
        suction, discharge = self.setting.suction, self.setting.discharge
        zero = np.zeros(self.shape)
        if self.held is not None:
            # To the nearest step: half a step is added to the angle at its start.
            own = self.setting.own_angle[:, step, None] + 180.0 / len(self.setting.duration)
            held = (self.held >= 360) | ((own > _HELD_FROM) & (own < self.held))
            if self.ideal_valves:
                return np.where(held, suction.area, 0.0), zero
            plates = self.plates[0]
            plates.position = np.where(held, suction.plates.lift, plates.position)
            plates.speed = np.where(held, 0.0, plates.speed)
        if self.ideal_valves:
            return zero, zero
        return (
            side_area(suction, self.plates[0].position),
            side_area(discharge, self.plates[1].position),
        )

    def _move(self, step: int, pressure: Floats) -> None:
        """Plates from the middle of one step to the middle of the next."""
        if self.ideal_valves:
            return
        setting = self.setting
        following = (step + 1) % len(setting.duration)
        duration = 0.5 * (setting.duration[step] + setting.duration[following])
        suction, discharge = setting.suction, setting.discharge
        opening = suction.pressure_at(step, 1.0) - pressure
        advance(self.plates[0], suction.plates, opening, duration)
        opening = pressure - discharge.pressure_at(step, 1.0)
        advance(self.plates[1], discharge.plates, opening, duration)

    def turn(self) -> None:
        """One revolution; leaves the final state in `gas` and `gas_step.line`."""
        setting, gas = self.setting, self.gas
        self.sums = self._no_sums()
        for plates in self.plates:
            plates.seat_impact = np.zeros(self.shape)
            plates.guard_impact = np.zeros(self.shape)
        areas = self._areas(0)
        slow = self._first_slow(gas, areas)
        trace, before = self.trace, self._lifts()
        for step in range(len(setting.duration)):
            trace.pressure[step], trace.temperature[step] = gas.pressure, gas.temperature
            trace.mass[step] = gas.mass
            gas, slow, flows = self.gas_step.step(step, gas, slow, areas)
            self.sums.add(flows)
            after = self._lifts()
            trace.suction_lift[step] = 0.5 * (before[0] + after[0])
            trace.discharge_lift[step] = 0.5 * (before[1] + after[1])
            before = after
            self._move(step, gas.pressure)
            areas = self._areas(min(step + 1, len(setting.duration)))
        self.gas = gas
        if not self.fixed_line:
            self._mix_line()

    def _lifts(self) -> tuple[Floats, Floats]:
        return self.plates[0].position, self.plates[1].position

    def _first_slow(self, gas: Contents, areas: tuple[Floats, Floats]) -> Slow:
        lines = (
            self.setting.suction.pressure_at(0, 0.0),
            self.setting.discharge.pressure_at(0, 0.0),
        )
        return self.gas_step.slow(0, gas, lines, areas)

    def _mix_line(self) -> None:
        flows = StepFlows(*self.sums.net)
        out = flows.discharge_out.sum(axis=0)
        energy = flows.discharge_out_energy.sum(axis=0)
        # A cylinder that delivers next to nothing leaves the line in its ideal state.
        enough = out > _LEAST_DELIVERY * self.gas.mass.sum(axis=0)
        ideal = self.setting.discharge.gas.enthalpy
        self._set_line(np.where(enough, energy / np.where(enough, out, 1.0), ideal))
