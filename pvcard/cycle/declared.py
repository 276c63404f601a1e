"""From a declared machine to the cylinder model, naming what had to be assumed."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.cycle.description import Cylinders, Leaks, Number, Pulsation, ValveSide, Wall
from pvcard.gas import Gas
from pvcard.machine import Machine
from pvcard.machine_parts import Cylinder, CylinderEnd, Valves
from pvcard.types import Floats

# What a side is given where the machine description is silent. Common practice, no source:
# effective area over piston area, lift, weight of the moving parts over port area, spring pressure
# over the mean valve drop of a typical machine, and what an impact leaves of the speed.
_AREA_SHARE = 0.06
_LIFT = 2e-3
_PORT_SHARE = 1.6
_MASS_OF_PORT = 40.0  # kg/m2
_PRELOAD_PRESSURE = 2000.0  # Pa
_SPRING_PRESSURE = 4000.0  # Pa more at full lift
_DAMPING_SHARE = 0.05  # of critical damping
_RESTITUTION = 0.2


class Declared(NamedTuple):
    """A described cylinder and what was assumed for it."""

    cylinders: Cylinders
    assumed: tuple[str, ...]


def _side(
    valves: Valves | None, piston_area: float, label: str
) -> tuple[dict[str, float], list[str]]:
    assumed: list[str] = []

    def value(name: str, otherwise: float) -> float:
        declared = getattr(valves, name) if valves is not None else None
        if declared is None:
            assumed.append(f"{label} {name.replace('_', ' ')} {otherwise:.4g} (SI) assumed")
            return otherwise
        return float(declared)

    count = valves.count if valves is not None else 1
    area = value("flow_area", _AREA_SHARE * piston_area)
    lift = value("lift", _LIFT)
    port = value("port_area", _PORT_SHARE * area)
    mass = value("moving_mass", _MASS_OF_PORT * port)
    rate = value("spring_rate", _SPRING_PRESSURE * port / lift)
    side = {
        "flow_area": count * area,
        "lift": lift,
        "moving_mass": mass,
        "spring_rate": rate,
        "spring_preload": value("spring_preload", _PRELOAD_PRESSURE * port),
        "port_area": port,
        "damping": value("damping", 2 * _DAMPING_SHARE * float(np.sqrt(rate * mass))),
        "seat_restitution": value("seat_restitution", _RESTITUTION),
        "guard_restitution": value("guard_restitution", _RESTITUTION),
    }
    return side, assumed


def _valves(
    cylinder: Cylinder, ends: tuple[CylinderEnd, ...], side: str
) -> tuple[ValveSide, list[str]]:
    found = [
        _side(getattr(end, f"{side}_valves"), cylinder.area(end), f"{end.name} end {side} valve")
        for end in ends
    ]
    names = found[0][0]
    fields = {name: np.array([[values[name] for values, _ in found]]) for name in names}
    return ValveSide(**fields), [text for _, texts in found for text in texts]


def _held(machine: Machine, cylinder: Cylinder, load_step: str | None) -> Floats | None:
    angles = []
    for end in cylinder.ends:
        step = machine.step_end(cylinder, end, load_step)
        if step.state == "loaded":
            angles.append(np.nan)
        elif step.state == "closing_delayed":
            angles.append(float(step.closing_angle or 360.0))
        else:
            angles.append(360.0)
    return np.array([angles]) if not np.isnan(angles).all() else None


def declared_cylinder(
    machine: Machine,
    cylinder: str,
    gas: Gas,
    *,
    speed: Number,
    suction_pressure: Number,
    discharge_pressure: Number,
    suction_temperature: Number,
    load_step: str | None = None,
    heat_law: str = "annand",
    heat_multiplier: Number = 1.0,
    suction_heating: Number = 0.0,
    leaks: Leaks | None = None,
    pulsation: Pulsation | None = None,
) -> Declared:
    """Describe one cylinder of a machine for the cylinder model.

    Parameters
    ----------
    machine : Machine
    cylinder : name of the cylinder
    gas : its gas
    speed, suction_pressure, discharge_pressure, suction_temperature : () or (cards,)
        Running states. [1/s], [Pa], [Pa], [K]
    load_step : name of the load step; None for the declared clearances
    heat_law : "none", "annand", "adair" or "woschni"
    heat_multiplier, suction_heating : () or (cards,)
        [-], [K]
    leaks, pulsation : as in `Cylinders`

    Returns
    -------
    Declared
        With a sentence for every value the description does not give.

    Notes
    -----
    A single working end has its rings leak to the suction line where the other end is open to
    suction, to the barometric pressure otherwise. Valves removed are treated like valves held open.
    """
    own = machine.cylinder(cylinder)
    ends = own.ends
    suction, first = _valves(own, ends, "suction")
    discharge, second = _valves(own, ends, "discharge")
    temperature = np.asarray(suction_temperature, dtype=np.float64) + 40.0
    viscosity, conductivity = gas.viscosity(temperature), gas.conductivity(temperature)
    capacity = gas.heat_capacity(np.full(temperature.shape, 1e5), temperature)
    wall = Wall(
        heat_law,
        heat_multiplier,
        viscosity=viscosity,
        conductivity=conductivity,
        prandtl=viscosity * capacity / conductivity,
    )
    back: Number | None = None
    if len(ends) == 1:
        other = own.crank_end if ends[0].name == "head" else own.head_end
        back = suction_pressure if other.open_to == "suction" else machine.barometric_pressure
    described = Cylinders(
        bore=own.bore,
        stroke=own.stroke,
        connecting_rod_length=own.connecting_rod_length,
        clearance=np.array([[machine.clearance(own, end, load_step) for end in ends]]),
        speed=speed,
        suction_pressure=suction_pressure,
        discharge_pressure=discharge_pressure,
        suction_temperature=suction_temperature,
        suction_valves=suction,
        discharge_valves=discharge,
        piston_rod_diameter=own.piston_rod_diameter,
        tail_rod_diameter=own.tail_rod_diameter,
        ends=tuple(end.name for end in ends),
        suction_heating=suction_heating,
        leaks=leaks or Leaks(),
        wall=wall,
        pulsation=pulsation or Pulsation(),
        held_open_until=_held(machine, own, load_step),
        ring_back_pressure=back,
        packing_back_pressure=machine.barometric_pressure,
    )
    return Declared(described, tuple(first + second))
