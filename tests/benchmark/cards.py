"""Batches of invented cards for timing: ideal lines, rippled plateaus, noise; every card its own
machine."""

from __future__ import annotations

import numpy as np

from pvcard.card_set import CardSet
from pvcard.gas import gas_from_composition, gas_table
from pvcard.kinematics import motion
from pvcard.types import Floats
from pvcard.uncertainty import INDEX, INPUTS, UNIT_INPUTS

NATURAL_GAS = {"methane": 0.92, "ethane": 0.05, "nitrogen": 0.02, "carbon_dioxide": 0.01}
SAMPLES = 720


def invented_cards(count: int, seed: int = 1) -> CardSet:
    """Head-end and crank-end cards of `count` different cylinders between 8 and 35 bar."""
    rng = np.random.default_rng(seed)
    gas = gas_from_composition(NATURAL_GAS)
    table = gas_table(gas, pressure=(5e5, 50e5), temperature=(255.0, 480.0))
    low = rng.uniform(8e5, 12e5, count)
    high = low * rng.uniform(2.0, 3.2, count)
    bore, stroke = rng.uniform(0.2, 0.5, count), rng.uniform(0.15, 0.35, count)
    sign = np.where(np.arange(count) % 2, -1.0, 1.0)
    share = np.where(sign < 0, 0.04, 0.0)
    ratio, clearance = rng.uniform(0.18, 0.25, count), rng.uniform(0.1, 0.2, count)
    grid = np.arange(SAMPLES) * 360.0 / SAMPLES
    temperature = rng.uniform(290, 310, count)
    shares = np.linspace(-0.1, 1.1, 80)
    along = low[:, None] * (high / low)[:, None] ** shares
    path = table.isentropic(low[:, None], temperature[:, None], along)
    lines = np.log(path.density2 / path.density1), np.log(along)
    pressure = _pressures(grid, ratio, sign, clearance, low, high, lines, rng)
    return CardSet(
        crank_angle=grid,
        pressure=pressure,
        rod_sign=sign,
        rod_ratio=ratio,
        bore=bore,
        stroke=stroke,
        piston_area=np.pi / 4 * bore**2 * (1 - share),
        area_by_bore=2 / (1 - share),
        clearance=clearance + rng.normal(0, 0.01, count),
        suction_pressure=low,
        discharge_pressure=high,
        suction_temperature=temperature,
        discharge_temperature=rng.uniform(370, 400, count),
        speed=rng.uniform(5, 15, count),
        gas=gas,
        table=table,
    )


def _pressures(
    grid: Floats,
    ratio: Floats,
    sign: Floats,
    clearance: Floats,
    low: Floats,
    high: Floats,
    lines: tuple[Floats, Floats],
    rng: np.random.Generator,
) -> Floats:
    travel = motion(grid, ratio[:, None], sign[:, None]).travel
    volume = clearance[:, None] + travel
    suction, discharge = low[:, None], high[:, None]
    # Isentropes of the real gas; a little warmed and cooled, as walls do.
    full = np.log((1 + clearance[:, None]) / volume)
    left = np.log(clearance[:, None] / volume)
    compression, expansion = np.empty_like(volume), np.empty_like(volume)
    for row, (ln_density, ln_pressure) in enumerate(zip(*lines)):
        top = np.interp(np.log(high[row]), ln_pressure, ln_density)
        compression[row] = np.interp(full[row], ln_density, ln_pressure) - 0.001 * full[row]
        expansion[row] = np.interp(left[row] + top, ln_density, ln_pressure) + 0.002 * left[row]
    compression, expansion = np.exp(compression), np.exp(expansion)
    flow = np.abs(np.sin(np.radians(grid)))
    ripple = 0.01 * np.sin(np.radians(grid) * 9)
    inlet = suction * (1 - 0.03 * flow**2 + ripple)
    outlet = discharge * (1 + 0.03 * flow**2 + ripple)
    out = grid < 180
    pressure = np.where(out, np.maximum(expansion, inlet), np.minimum(compression, outlet))
    noise: Floats = pressure * (1 + 1e-4 * rng.standard_normal(pressure.shape))
    return noise


def usual_uncertainty(cards: CardSet) -> Floats:
    """Standard uncertainties of all inputs, the defaults of a machine description."""
    values = {
        "dead_centre": 0.5,
        "pressure_level": 0.01 * cards.suction_pressure,
        "pressure_gain": 0.003,
        "suction_pressure": 0.002 * cards.suction_pressure,
        "discharge_pressure": 0.002 * cards.discharge_pressure,
        "suction_temperature": 1.0,
        "discharge_temperature": 1.0,
        "bore": 5e-4,
        "stroke": 5e-4,
        "connecting_rod_length": 2e-3,
        "clearance": 0.02,
        "gas_exponent": 2e-3,
        "speed": 1e-3,
        "heat_multiplier": 0.5,
        "wall_temperature": 0.15,
        "heat_shape": 0.4,
        "warming": 3.0,
        "clearance_gas": 4.0,
    }
    result = np.zeros((len(cards.pressure), len(INPUTS)))
    for name, value in values.items():
        result[:, INDEX[name]] = value
    for name in UNIT_INPUTS:
        result[:, INDEX[name]] = 1.0
    return result
