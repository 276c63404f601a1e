"""What does not change from turn to turn: volumes, durations, lines, walls."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pvcard.cycle.description import Spread
from pvcard.cycle.fluid import Fluid, LineState
from pvcard.cycle.plates import Plates
from pvcard.flow import nozzle_series
from pvcard.heat import adair_swirl_speed
from pvcard.kinematics import motion
from pvcard.types import Floats

# Where the first stage of a step stands: 1 - 1/sqrt(2), Alexander's two-stage method.
FIRST_STAGE = 1 - 1 / np.sqrt(2)


@dataclass(frozen=True)
class Side:
    """Suction or discharge line of a batch; pressures (cards,) or, with pulsation, by sample."""

    pressure: Floats  # (cards,) mean
    gas: LineState  # each (cards,)
    series: Floats  # (7, cards) of the nozzle law
    area: Floats  # (ends, cards) at full lift
    waves: Floats | None  # (steps + 1, ends, cards) pressure over mean pressure
    plates: Plates

    def pressure_at(self, step: int, part: float) -> Floats:
        """Line pressure ``part`` of a step after its start, (ends, cards) or (cards,). [Pa]."""
        if self.waves is None:
            return self.pressure
        wave: Floats = (1 - part) * self.waves[step] + part * self.waves[step + 1]
        return self.pressure * wave


@dataclass(frozen=True)
class Setting:
    """One batch, ready to be turned."""

    batch: Spread
    fluid: Fluid
    angle: Floats  # (steps + 1,) deg from the head-end dead centre
    own_angle: Floats  # (ends, steps + 1) deg from each end's own dead centre
    duration: Floats  # (steps, cards) s
    piston_area: Floats  # (ends, cards) m2
    swept: Floats  # (ends, cards) m3
    volume: Floats  # (steps + 1, ends, cards) m3
    stage_volume: Floats  # (steps, ends, cards) m3
    suction: Side
    discharge: Side
    leak_series: Floats  # (7, cards)
    wall_temperature: Floats  # (cards,) K
    ideal_discharge: Floats  # (cards,) K, isentropic from suction line to discharge pressure
    swirl: Floats  # (ends, steps + 1, cards) rad/s, of Adair's correlation


def piston_areas(batch: Spread) -> Floats:
    """Piston area facing each end, (ends, cards). [m2]."""
    areas = {
        "head": ("bore", "tail_rod_diameter"),
        "crank": ("bore", "piston_rod_diameter"),
    }
    return np.array(
        [
            np.pi / 4 * (batch.cylinder[outer] ** 2 - batch.cylinder[inner] ** 2)
            for outer, inner in (areas[end] for end in batch.described.ends)
        ]
    )


def isentropic_temperature(
    fluid: Fluid, suction_pressure: Floats, suction_temperature: Floats, discharge_pressure: Floats
) -> Floats:
    """Temperature after isentropic compression, from the fluid's own polynomials.

    Parameters
    ----------
    fluid : Fluid
    suction_pressure, suction_temperature, discharge_pressure : (cards,)
        [Pa], [K], [Pa]

    Returns
    -------
    temperature : (cards,)
        [K]

    Notes
    -----
    ``dh = dp / rho`` integrated in ln p by the classical fourth-order Runge-Kutta rule in 32 steps.
    """
    state = fluid.line(suction_pressure, suction_temperature)
    enthalpy = state.enthalpy.copy()
    step = np.log(discharge_pressure / suction_pressure) / 32
    pressure = suction_pressure.copy()

    def slope(at: Floats, value: Floats) -> Floats:
        return at / fluid.state_of_enthalpy(at, value)[0]

    for _ in range(32):
        half, full = pressure * np.exp(0.5 * step), pressure * np.exp(step)
        first = slope(pressure, enthalpy)
        second = slope(half, enthalpy + 0.5 * step * first)
        third = slope(half, enthalpy + 0.5 * step * second)
        fourth = slope(full, enthalpy + step * third)
        enthalpy = enthalpy + step / 6 * (first + 2 * second + 2 * third + fourth)
        pressure = full
    return fluid.state_of_enthalpy(discharge_pressure, enthalpy)[1]


def waves(amplitudes: object, angle: Floats, shape: tuple[int, ...]) -> Floats | None:
    """One plus the sum of harmonic waves.

    Parameters
    ----------
    amplitudes : None or complex (..., orders), spread over ``shape``
        Of orders 1, 2, ... of the turn. [-]
    angle : (samples,)
        [deg]
    shape : shape of one sample, the last axis of the amplitudes left out

    Returns
    -------
    waves : (samples, *shape reversed) or None
        None where there are no amplitudes. [-]
    """
    if amplitudes is None:
        return None
    complex_amplitudes = np.asarray(amplitudes, dtype=np.complex128)
    orders = complex_amplitudes.shape[-1]
    spread = np.broadcast_to(complex_amplitudes, (*shape, orders))
    turning = np.exp(1j * np.radians(angle)[:, None] * np.arange(1, orders + 1))
    result: Floats = 1 + np.einsum("...k,sk->s...", spread, turning).real
    return np.ascontiguousarray(
        np.moveaxis(result, range(1, result.ndim), range(result.ndim - 1, 0, -1))
    )


def _durations(batch: Spread, angle: Floats) -> Floats:
    middle = 0.5 * (angle[1:] + angle[:-1])
    ripple = waves(batch.described.speed_ripple, middle, (batch.cards,))
    share = np.ones((len(middle), batch.cards)) if ripple is None else 1 / ripple
    result: Floats = share / share.sum(axis=0) / batch.cylinder["speed"]
    return result


def _side(batch: Spread, fluid: Fluid, name: str, temperature: Floats, angle: Floats) -> Side:
    valves = batch.suction if name == "suction" else batch.discharge
    pressure = batch.cylinder[f"{name}_pressure"]
    gas = fluid.line(pressure, temperature)
    plates = Plates(
        valves["lift"],
        valves["moving_mass"],
        valves["spring_rate"],
        valves["spring_preload"],
        valves["port_area"],
        valves["damping"],
        valves["seat_restitution"],
        valves["guard_restitution"],
        valves["stiction"],
    )
    wave = waves(getattr(batch.described.pulsation, name), angle, (batch.cards, batch.ends))
    return Side(pressure, gas, nozzle_series(gas.exponent), valves["flow_area"], wave, plates)


def prepare(batch: Spread, fluid: Fluid, steps: int) -> Setting:
    """Work out all that stays the same from turn to turn.

    Parameters
    ----------
    batch : Spread
    fluid : Fluid
    steps : number of steps a turn

    Returns
    -------
    Setting
    """
    angle: Floats = np.arange(steps + 1, dtype=np.float64) * (360.0 / steps)
    ends = batch.described.ends
    own_angle = np.array([(angle - (0.0 if end == "head" else 180.0)) % 360 for end in ends])
    ratio = 0.5 * batch.cylinder["stroke"] / batch.cylinder["connecting_rod_length"]
    area = piston_areas(batch)
    swept = area * batch.cylinder["stroke"]

    def volumes(offset: float, count: int) -> Floats:
        travel = [
            motion(
                (own_angle[row, :count] + offset)[:, None],
                ratio[None, :],
                1.0 if end == "head" else -1.0,
            ).travel
            for row, end in enumerate(ends)
        ]
        result: Floats = swept * (batch.end["clearance"] + np.stack(travel, axis=1))
        return result

    suction_pressure = batch.cylinder["suction_pressure"]
    suction_temperature = batch.cylinder["suction_temperature"]
    inlet = suction_temperature + batch.cylinder["suction_heating"]
    ideal = isentropic_temperature(
        fluid, suction_pressure, suction_temperature, batch.cylinder["discharge_pressure"]
    )
    delivered = batch.cylinder.get("discharge_temperature", ideal)
    suction = _side(batch, fluid, "suction", inlet, angle)
    discharge = _side(batch, fluid, "discharge", delivered, angle)
    swirl = np.stack(
        [adair_swirl_speed(row[:, None], batch.cylinder["speed"][None, :]) for row in own_angle]
    )
    return Setting(
        batch,
        fluid,
        angle,
        own_angle,
        _durations(batch, angle),
        area,
        swept,
        volumes(0.0, steps + 1),
        volumes(FIRST_STAGE * 360.0 / steps, steps),
        suction,
        discharge,
        nozzle_series(0.5 * (suction.gas.exponent + discharge.gas.exponent)),
        suction_temperature + batch.wall["position"] * (ideal - suction_temperature),
        ideal,
        swirl,
    )
