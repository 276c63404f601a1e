"""Propagated uncertainties against Monte Carlo (JCGM 101:2008, clause 7): both draw on the same
inputs."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.interpolate import CubicSpline

import pvcard
from pvcard.analysis.batch import Job, measure_jobs
from pvcard.analysis.end_traces import gather
from pvcard.card.measure import Measured, measure
from pvcard.card_set import CardSet
from pvcard.types import Floats
from pvcard.uncertainty import INDEX, INPUTS, sum_uncertainty
from tests.cards import ideal_cards, uncertainties

DRAWS = 1200
# Inputs that the draws vary; relative ones as fractions.
SIZES = {
    "dead_centre": 0.1,  # deg
    "pressure_level": 0.03e5,  # Pa
    "pressure_gain": 0.003,
    "suction_pressure": 0.02e5,
    "discharge_pressure": 0.06e5,
    "suction_temperature": 1.0,
    "bore": 5e-4,
    "stroke": 1e-3,
    "connecting_rod_length": 4e-3,
    "clearance": 0.01,
    "speed": 1e-3,
}
COLUMNS = (
    "indicated_power_kW",
    "mean_effective_pressure_bar",
    "ideal_power_kW",
    "clearance_pct",
    "compression_exponent",
    "expansion_exponent",
    "suction_volumetric_efficiency_pct",
    "discharge_volumetric_efficiency_pct",
    "suction_valve_loss_kW",
    "discharge_valve_loss_kW",
    "other_loss_kW",
    "discharge_flow_kg_h",
    "isentropic_efficiency_pct",
    "ideal_discharge_temperature_degC",
    "pressure_ratio",
    "pressure_max_bar",
)


SINGLE = ("rod_sign", "area_by_bore", "discharge_temperature")


def only_drawn() -> Floats:
    """Uncertainties of the drawn inputs, everything else known exactly."""
    result = np.zeros((1, len(INPUTS)))
    for name, size in SIZES.items():
        result[0, INDEX[name]] = size
    return result


def real_card() -> tuple[CardSet, CubicSpline]:
    """A card of the example plant with wall heat and valve losses, and its trace at any angle."""
    folder = Path(__file__).parents[1] / "example_data" / "H-1"
    machine = pvcard.read_machine(folder / "machine.toml")
    recording = pvcard.read_export(folder / "exports" / "2024-01-23.csv", machine)[0]
    trace = next(end for end in gather(recording, machine).ends if end.end == "head")
    job = Job(trace, machine, machine.clearance(trace.cylinder, trace.end), 0.02)
    outcome = measure_jobs([job], with_uncertainty=False)[0]
    assert outcome.cards is not None
    angle = np.append(trace.crank_angle, trace.crank_angle[0] + 360)
    spline = CubicSpline(angle, np.append(trace.pressure, trace.pressure[0]), bc_type="periodic")
    return outcome.cards, spline


def drawn(base: CardSet, spline: CubicSpline, draws: dict[str, Floats]) -> CardSet:
    """The same trace, each time read with other inputs."""
    one = {name: np.repeat(getattr(base, name), DRAWS) for name in SINGLE}
    stroke, rod = 1 + draws["stroke"], 1 + draws["connecting_rod_length"]
    angle = base.crank_angle[None, :] + draws["dead_centre"][:, None]
    pressure = spline(angle) * (1 + draws["pressure_gain"])[:, None]
    return replace(
        base,
        **one
        | {
            "pressure": pressure - draws["pressure_level"][:, None],
            "rod_ratio": base.rod_ratio[0] * stroke / rod,
            "bore": base.bore[0] * (1 + draws["bore"]),
            "piston_area": base.piston_area[0] * (1 + draws["bore"]) ** 2,
            "stroke": base.stroke[0] * stroke,
            "clearance": base.clearance[0] + draws["clearance"],
            "suction_pressure": base.suction_pressure[0] + draws["suction_pressure"],
            "discharge_pressure": base.discharge_pressure[0] + draws["discharge_pressure"],
            "suction_temperature": base.suction_temperature[0] + draws["suction_temperature"],
            "speed": base.speed[0] * (1 + draws["speed"]),
        },
    )


@pytest.fixture(scope="module")
def both() -> tuple[Measured, Measured]:
    """One card with propagated uncertainties, and many readings of it."""
    rng = np.random.default_rng(20240514)
    base, spline = real_card()
    draws = {name: size * rng.standard_normal(DRAWS) for name, size in SIZES.items()}
    many = drawn(base, spline, draws)
    prior = {"clearance": SIZES["clearance"]}
    one = measure(base, uncertainties(base, **prior))
    return one, measure(many, uncertainties(many, **prior), with_uncertainty=False)


@pytest.mark.parametrize("column", COLUMNS)
def test_propagation_agrees_with_drawing(both: tuple[Measured, Measured], column: str) -> None:
    # LAW: JCGM 101, propagation of distributions; 1200 draws know a deviation to 2 %.
    propagated = float(both[0].columns[column].uncertainty(only_drawn())[0])
    values = both[1].columns[column].value
    assert np.isfinite(values).all()
    assert propagated == pytest.approx(float(values.std(ddof=1)), rel=0.10)


def test_sums_keep_what_is_shared() -> None:
    # LAW: JCGM 100 equation 16: a fully shared part adds up, an own part adds in squares.
    shares = np.zeros((3, len(INPUTS)))
    shares[:, INDEX["dead_centre"]] = 1.0  # of the machine: 3
    shares[:, INDEX["bore"]] = 1.0  # of the cylinder: (2, 1)
    shares[:, INDEX["pressure_gain"]] = 1.0  # of each end: (1, 1, 1)
    u = sum_uncertainty(shares, ["C1", "C1", "C2"])
    assert u == pytest.approx(np.sqrt(3**2 + 2**2 + 1**2 + 3 * 1**2))


def test_difference_of_two_ends_is_blind_to_the_shared_mark() -> None:
    # LAW: what both terms share cancels in their difference.
    base = ideal_cards(count=2)
    u = uncertainties(base)
    power = measure(base, u).columns["indicated_power_kW"]
    shares = power.contributions(u)
    shares[1] *= -1
    alone = shares[:, INDEX["pressure_gain"]]
    noise = [shares[:, place] for name, place in INDEX.items() if name == "noise_work"]
    own = np.sqrt((alone**2).sum() + sum((part**2).sum() for part in noise))
    assert sum_uncertainty(shares, ["C1", "C1"]) == pytest.approx(float(own), rel=1e-6)


def test_exponent_of_the_gas_moves_the_theoretical_card_as_its_derivative_says() -> None:
    # LIMIT: central difference of two gases of slightly other exponent.
    step = 1e-4
    place = INDEX["gas_exponent"]
    centre = measure(ideal_cards(samples=360), uncertainties(ideal_cards(samples=360)))
    sides = []
    for sign in (1, -1):
        cards = ideal_cards(samples=360)
        other = ideal_cards(samples=360, exponent=1.3 * (1 + sign * step))
        moved = replace(cards, gas=other.gas, table=other.table)
        sides.append(measure(moved, uncertainties(moved), with_uncertainty=False))
    for column in ("ideal_discharge_temperature_degC", "ideal_power_kW", "clearance_pct"):
        slope = (sides[0].columns[column].value[0] - sides[1].columns[column].value[0]) / 2 / step
        own = centre.columns[column].slopes[0, place]
        assert own == pytest.approx(slope, rel=0.1, abs=1e-3), column
