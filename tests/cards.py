"""Cards with known truth: exact polytropes between line pressures, of a gas with a constant
exponent."""

from __future__ import annotations

import numpy as np

from pvcard.card_set import CardSet
from pvcard.gas import ExponentGas, gas_table
from pvcard.kinematics import motion
from pvcard.types import Floats
from pvcard.uncertainty import INDEX, INPUTS, UNIT_INPUTS

UNIVERSAL = 8.314462618  # J/(mol K), CODATA


def perfect_gas(exponent: float, gas_constant: float) -> ExponentGas:
    """Ideal gas with constant heat capacity."""
    return ExponentGas(exponent, 1.0, UNIVERSAL / gas_constant)


def ideal_pressure(
    grid: Floats, ratio: float, sign: float, clearance: float, low: float, high: float, n: float
) -> Floats:
    """Pressure of an ideal card at crank angles from the own dead centre."""
    volume = clearance + motion(grid, ratio, sign).travel
    falling = high * (clearance / volume) ** n
    rising = low * ((1 + clearance) / volume) ** n
    return np.where(grid < 180, np.maximum(falling, low), np.minimum(rising, high))


def ideal_cards(
    *,
    clearance: Floats | float = 0.12,
    low: float = 10e5,
    high: Floats | float = 30e5,
    exponent: float = 1.3,
    gas_constant: float = 500.0,
    temperature: float = 300.0,
    swept: float = 0.01,
    speed: float = 10.0,
    ratio: float = 0.2,
    sign: float = 1.0,
    samples: int = 720,
    count: int = 1,
) -> CardSet:
    """A batch of ideal cards; arrays give one card each."""
    clearances = np.broadcast_to(np.asarray(clearance, dtype=float), (count,)).copy()
    highs = np.broadcast_to(np.asarray(high, dtype=float), (count,)).copy()
    grid = np.arange(samples) * 360.0 / samples
    pressure = np.stack(
        [
            ideal_pressure(grid, ratio, sign, c, low, p, exponent)
            for c, p in zip(clearances, highs, strict=True)
        ]
    )
    stroke = 0.2
    area = swept / stroke
    bore = np.sqrt(4 * area / np.pi)
    gas = perfect_gas(exponent, gas_constant)
    hottest = temperature * (float(highs.max()) / low) ** ((exponent - 1) / exponent)
    table = gas_table(
        gas,
        pressure=(0.5 * low, 1.5 * float(highs.max())),
        temperature=(temperature - 50, hottest + 120),
    )

    def full(value: float) -> Floats:
        return np.full(count, float(value))

    return CardSet(
        crank_angle=grid,
        pressure=pressure,
        rod_sign=full(sign),
        rod_ratio=full(ratio),
        bore=full(bore),
        stroke=full(stroke),
        piston_area=full(area),
        area_by_bore=full(2.0),
        clearance=clearances,
        suction_pressure=full(low),
        discharge_pressure=highs,
        suction_temperature=full(temperature),
        discharge_temperature=full(np.nan),
        speed=full(speed),
        gas=gas,
        table=table,
    )


def uncertainties(cards: CardSet, **changed: float) -> Floats:
    """Sizes of all inputs: the defaults of a machine description unless changed."""
    values: dict[str, Floats | float] = {
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
    values.update(changed)
    result = np.zeros((len(cards.pressure), len(INPUTS)))
    for name in UNIT_INPUTS:
        result[:, INDEX[name]] = 1.0
    for name, value in values.items():
        result[:, INDEX[name]] = value
    return result
