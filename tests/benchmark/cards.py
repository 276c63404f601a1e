"""Batches of cards for timing: simulated healthy cylinders, measured many times with noise."""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from pvcard.card_set import CardSet
from pvcard.cycle import Cylinders, ValveSide, Wall, steady_state
from pvcard.gas import gas_from_composition, gas_table
from pvcard.types import Floats

NATURAL_GAS = {"methane": 0.92, "ethane": 0.05, "nitrogen": 0.02, "carbon_dioxide": 0.01}
SAMPLES = 720
CYLINDERS = 64  # different machines; every card is one of their ends with noise of its own
ROD = 0.06  # m


@lru_cache(maxsize=1)
def simulated() -> dict[str, Floats]:
    """Steady cycles of `CYLINDERS` double-acting cylinders between 8 and 35 bar."""
    rng = np.random.default_rng(11)
    count = CYLINDERS
    low = rng.uniform(8e5, 12e5, count)
    values = {
        "low": low,
        "high": low * rng.uniform(2.0, 3.2, count),
        "bore": rng.uniform(0.25, 0.45, count),
        "stroke": rng.uniform(0.15, 0.3, count),
        "speed": rng.uniform(5.0, 14.0, count),
        "temperature": rng.uniform(290.0, 310.0, count),
        "clearance": rng.uniform(0.1, 0.2, (count, 2)),
    }
    values["rod"] = values["stroke"] * rng.uniform(2.0, 2.6, count)
    area = np.pi / 4 * values["bore"] ** 2
    flow = (area * values["stroke"] * values["speed"] / 22.0)[:, None] * np.ones(2)
    valves = ValveSide(flow_area=flow, port_area=3 * flow, spring_preload=2e4 * flow)
    found = steady_state(
        Cylinders(
            bore=values["bore"],
            stroke=values["stroke"],
            connecting_rod_length=values["rod"],
            clearance=values["clearance"],
            speed=values["speed"],
            suction_pressure=values["low"],
            discharge_pressure=values["high"],
            suction_temperature=values["temperature"],
            suction_valves=valves,
            discharge_valves=valves,
            piston_rod_diameter=ROD,
            wall=Wall("annand"),
        ),
        gas_from_composition(NATURAL_GAS),
        step=360 / SAMPLES,
        ideal_valves=True,
    )
    head, crank = found.pressure[:, 0], np.roll(found.pressure[:, 1], -SAMPLES // 2, axis=-1)
    return values | {"pressure": np.stack([head, crank], axis=1)}


def invented_cards(count: int, seed: int = 1) -> CardSet:
    """Take `count` ends of the simulated cylinders in turn, each measured with noise of its own."""
    rng = np.random.default_rng(seed)
    base = simulated()
    number = np.arange(count)
    which, end = (number // 2) % CYLINDERS, number % 2
    gas = gas_from_composition(NATURAL_GAS)
    table = gas_table(gas, pressure=(5e5, 50e5), temperature=(255.0, 480.0))
    bore, stroke = base["bore"][which], base["stroke"][which]
    share = np.where(end == 1, (ROD / bore) ** 2, 0.0)
    pressure = base["pressure"][which, end]
    noise = 1e-4 * rng.standard_normal(pressure.shape)
    return CardSet(
        crank_angle=np.arange(SAMPLES) * 360.0 / SAMPLES,
        pressure=pressure * (1 + noise),
        rod_sign=np.where(end == 0, 1.0, -1.0),
        rod_ratio=stroke / 2 / base["rod"][which],
        bore=bore,
        stroke=stroke,
        piston_area=np.pi / 4 * bore**2 * (1 - share),
        area_by_bore=2 / (1 - share),
        clearance=base["clearance"][which, end] + rng.normal(0, 0.01, count),
        suction_pressure=base["low"][which],
        discharge_pressure=base["high"][which],
        suction_temperature=base["temperature"][which],
        discharge_temperature=np.full(count, np.nan),
        speed=base["speed"][which],
        gas=gas,
        table=table,
    )
