"""How near pvcard comes on simulated healthy cylinders whose truth is known.

``python tests/benchmark/accuracy.py`` prints a table for docs/accuracy.md: for each quantity the
median and largest error, the median standard uncertainty, and how often the truth lies within two
of them. The cylinders have moving valve plates and a heat law and size that the fit is not told;
sensors are ideal, the declared clearance is off by half a point, mark, level and gain as declared
in "small" uncertainties.
"""

from __future__ import annotations

import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np

from pvcard.card.measure import measure
from pvcard.card_set import CardSet
from pvcard.cycle import (
    Cycles,
    Cylinders,
    ValveSide,
    Wall,
    card_figures,
    steady_state,
    valve_motion,
)
from pvcard.gas import gas_from_composition, gas_table
from pvcard.gas_models import Gas
from pvcard.types import Floats

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from tests.cards import uncertainties

CASES = {
    "natural gas": ({"methane": 0.92, "ethane": 0.05, "nitrogen": 0.02, "propane": 0.01}, 25e5),
    "hydrogen": ({"hydrogen": 0.95, "methane": 0.05}, 20e5),
    "air": ({"nitrogen": 0.7812, "oxygen": 0.2096, "argon": 0.0092}, 1e5),
}
EACH = 24  # cylinders of each gas, two ends each
_PI4 = np.pi / 4


def machines(gas: Gas, low: float, law: str, rng: np.random.Generator) -> Cylinders:
    """Invented cylinders of usual size, speed and ratio for a gas."""
    suction = low * rng.uniform(0.8, 1.2, EACH)
    bore, stroke = rng.uniform(0.25, 0.5, EACH), rng.uniform(0.15, 0.3, EACH)
    speed = rng.uniform(5.0, 14.0, EACH)
    sound = float(gas.speed_of_sound(np.array(low), np.array(300.0)))
    area = (_PI4 * bore**2 * 2 * stroke * speed / (0.10 * sound))[:, None] * np.ones(2)
    spread = rng.uniform(0.9, 1.3, (EACH, 2))
    one = np.array(low), np.array(310.0)
    valves = ValveSide(
        flow_area=area * spread,
        lift=2e-3,
        moving_mass=40 * area,
        spring_rate=4e6 * area,
        spring_preload=0.01 * low * 3 * area,
        port_area=3 * area,
        damping=600 * area,
    )
    return Cylinders(
        bore=bore,
        stroke=stroke,
        connecting_rod_length=stroke * rng.uniform(2.0, 2.6, EACH),
        clearance=rng.uniform(0.08, 0.3, (EACH, 2)),
        speed=speed,
        suction_pressure=suction,
        discharge_pressure=suction * rng.uniform(1.7, 3.4, EACH),
        suction_temperature=rng.uniform(285.0, 315.0, EACH),
        suction_valves=valves,
        discharge_valves=replace(valves, flow_area=area * spread * 0.9),
        piston_rod_diameter=0.06,
        wall=Wall(
            law,
            multiplier=rng.uniform(0.6, 1.6, EACH),
            position=rng.uniform(0.35, 0.65, EACH),
            viscosity=float(gas.viscosity(one[1])),
            conductivity=float(gas.conductivity(one[1])),
        ),
    )


def cards_of(case: Cylinders, found: Cycles, gas: Gas, rng: np.random.Generator) -> CardSet:
    """Both ends of every cylinder as a batch, declared clearances off by half a point."""
    samples = len(found.crank_angle)
    crank = np.roll(found.pressure[:, 1], -samples // 2, axis=-1)
    pressure = np.concatenate([found.pressure[:, 0], crank])
    bore, stroke = np.tile(case.bore, 2), np.tile(case.stroke, 2)
    end = np.repeat([0, 1], EACH)
    share = np.where(end == 1, (0.06 / bore) ** 2, 0.0)
    low, high = np.tile(case.suction_pressure, 2), np.tile(case.discharge_pressure, 2)
    true = np.concatenate([case.clearance[:, 0], case.clearance[:, 1]])
    table = gas_table(
        gas,
        pressure=(0.85 * float(pressure.min()), 1.1 * float(pressure.max())),
        temperature=(255.0, float(found.temperature.max()) + 60),
    )
    return CardSet(
        crank_angle=found.crank_angle,
        pressure=pressure,
        rod_sign=1.0 - 2.0 * end,
        rod_ratio=stroke / 2 / np.tile(case.connecting_rod_length, 2),
        bore=bore,
        stroke=stroke,
        piston_area=_PI4 * bore**2 * (1 - share),
        area_by_bore=2 / (1 - share),
        clearance=true + rng.normal(0, 0.005, 2 * EACH),
        suction_pressure=low,
        discharge_pressure=high,
        suction_temperature=np.tile(case.suction_temperature, 2),
        discharge_temperature=np.tile(found.discharge_temperature, 2),
        speed=np.tile(case.speed, 2),
        gas=gas,
        table=table,
    )


def small_uncertainty(cards: CardSet) -> Floats:
    """A well kept measuring chain: mark to 0.02 deg, pressures to 0.02 %."""
    sizes: dict[str, Any] = {
        "dead_centre": 0.02,
        "pressure_level": 2e-4 * cards.suction_pressure,
        "pressure_gain": 2e-4,
        "suction_pressure": 2e-4 * cards.suction_pressure,
        "discharge_pressure": 2e-4 * cards.discharge_pressure,
        "suction_temperature": 0.1,
        "discharge_temperature": 0.1,
        "clearance": 0.005,
        "speed": 1e-4,
    }
    return uncertainties(cards, **sizes)


def truth(case: Cylinders, found: Cycles) -> dict[str, Floats]:
    """What pvcard should say, head ends first."""
    figures = card_figures(
        found,
        suction_pressure=case.suction_pressure,
        discharge_pressure=case.discharge_pressure,
    )
    speed = np.tile(case.speed, 2)

    def ends(values: Floats) -> Floats:
        return np.concatenate([values[:, 0], values[:, 1]])

    result = {
        "indicated_power_kW": ends(found.work) * speed / 1e3,
        "clearance_pct": 100 * ends(np.asarray(case.clearance)),
        "suction_valve_loss_kW": ends(figures.suction_loss) * speed / 1e3,
        "discharge_valve_loss_kW": ends(figures.discharge_loss) * speed / 1e3,
        "suction_volumetric_efficiency_pct": 100 * ends(figures.suction_volumetric_efficiency),
        "discharge_volumetric_efficiency_pct": 100 * ends(figures.discharge_volumetric_efficiency),
        "discharge_flow_kg_h": ends(found.delivered) * speed * 3600,
        "ideal_discharge_temperature_degC": np.tile(found.ideal_discharge_temperature, 2) - 273.15,
    }
    for side in ("suction", "discharge"):
        motion = valve_motion(found, side, speed=case.speed)
        result[f"{side}_opening_deg"] = ends(motion.opening)
        result[f"{side}_closing_deg"] = ends(motion.closing)
    return result


def study(law: str) -> dict[str, list[Floats]]:
    """Error, uncertainty and truth of every quantity over all gases."""
    rng = np.random.default_rng(2024)
    gathered: dict[str, list[Floats]] = {}
    for composition, low in CASES.values():
        gas = gas_from_composition(composition)
        case = machines(gas, low, law, rng)
        found = steady_state(case, gas, step=0.5)
        cards = cards_of(case, found, gas, rng)
        unsure = small_uncertainty(cards)
        columns = measure(cards, unsure).columns
        keep = np.tile(found.converged, 2)
        for name, true in truth(case, found).items():
            error = columns[name].value - true
            if name.endswith("_deg"):
                error = (error + 180) % 360 - 180
            u = columns[name].uncertainty(unsure)
            gathered.setdefault(name, []).append(np.stack([error, u, true])[:, keep])
    return gathered


def main() -> None:
    """Print the table."""
    for law in ("annand", "adair"):
        print(f"\nWall heat by {law}\n")
        print("| quantity | cards | median error | largest | median u | within 2 u |")
        print("| --- | --- | --- | --- | --- | --- |")
        for name, parts in study(law).items():
            error, u, true = np.concatenate(parts, axis=-1)
            scale, unit = (100 / np.abs(true), "%") if name.endswith(("_kW", "_kg_h")) else (1, "")
            size = np.abs(error) * scale
            inside = 100 * np.nanmean(np.abs(error) <= 2 * u)
            middle = np.nanmedian(u * scale)
            print(
                f"| {name} | {np.isfinite(error).sum()} | {np.nanmedian(size):.3g} {unit} | "
                f"{np.nanmax(size):.3g} {unit} | {middle:.3g} {unit} | {inside:.0f} % |"
            )


if __name__ == "__main__":
    main()
