import csv
import itertools
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from pvcard.cycle import (
    CycleError,
    Cycles,
    Cylinders,
    Leak,
    Leaks,
    Pulsation,
    ValveSide,
    Wall,
    card_figures,
    fluid_for,
    steady_state,
    valve_motion,
)
from pvcard.cycle.description import spread
from pvcard.cycle.gas_step import GasStep, gas_state
from pvcard.cycle.plates import Plates, advance, resting
from pvcard.cycle.setting import prepare
from pvcard.errors import InputError
from pvcard.gas import gas_from_composition
from pvcard.types import Floats

ROWS = {
    row["id"]: float(row["expected"])
    for row in csv.DictReader(
        (Path(__file__).parent / "data/check_values_cycle.csv").read_text().splitlines()
    )
}
K, R = 1.3, 500.0
BORE = 0.3
STROKE = 0.01 / (np.pi / 4 * BORE**2)  # swept volume 0.01 m3, as in the rows LKS
VALVES = ValveSide(30e-4)


class PerfectGas:
    """Constant heat capacities: the gas of the closed forms."""

    def density(self, pressure: Floats, temperature: Floats) -> Floats:
        return pressure / (R * temperature)

    def enthalpy(self, pressure: Floats, temperature: Floats) -> Floats:
        return K / (K - 1) * R * temperature + 0 * pressure

    def volume_exponent(self, pressure: Floats, temperature: Floats) -> Floats:
        return K + 0 * pressure * temperature


def described(**changes: Any) -> Cylinders:
    values: dict[str, Any] = {
        "bore": BORE,
        "stroke": STROKE,
        "connecting_rod_length": STROKE / 0.4,
        "clearance": 0.12,
        "speed": 10.0,
        "suction_pressure": 10e5,
        "discharge_pressure": 30e5,
        "suction_temperature": 300.0,
        "suction_valves": VALVES,
        "discharge_valves": VALVES,
    }
    return Cylinders(**(values | changes))


def ideal(*, step: float = 0.5, **changes: Any) -> Cycles:
    return steady_state(described(**changes), PerfectGas(), step=step, ideal_valves=True)


def test_ideal_cycle_of_a_perfect_gas() -> None:
    ratio, clearance = np.array([1.5, 3.0, 6.0]), np.array([0.2, 0.12, 0.06])
    found = ideal(discharge_pressure=ratio * 10e5, clearance=clearance[:, None])
    # LAW: theoretical card, work k/(k-1) ps Vs (1 + C - C r^(1/k)) (r^((k-1)/k) - 1), VE 1 - C
    # (r^(1/k) - 1).
    efficiency = 1 - clearance * (ratio ** (1 / K) - 1)
    work = K / (K - 1) * 10e5 * 0.01 * efficiency * (ratio ** ((K - 1) / K) - 1)
    drawn = 10e5 * efficiency * 0.01 / (R * 300.0)
    for end in (0, 1):
        assert_allclose(found.work[:, end], work, rtol=5e-5)
        assert_allclose(found.drawn[:, end], drawn, rtol=5e-5)
        assert_allclose(found.delivered[:, end], drawn, rtol=5e-5)
    assert_allclose(found.discharge_temperature, 300 * ratio ** ((K - 1) / K), atol=0.02)
    figures = card_figures(found, suction_pressure=10e5, discharge_pressure=ratio * 10e5)
    assert_allclose(figures.suction_volumetric_efficiency[:, 0], efficiency, rtol=1e-4)
    assert_allclose(figures.compression_exponent, K, atol=1e-4)  # LAW: isentropic, closed, no leak
    assert_allclose(figures.expansion_exponent, K, atol=2e-4)  # LAW: as above
    # LAW: an ideal valve loses nothing.
    assert_allclose(figures.suction_loss / figures.work, 0, atol=2e-4)
    assert_allclose(figures.discharge_loss / figures.work, 0, atol=2e-4)


@pytest.mark.parametrize(
    ("composition", "suction", "discharge"),
    [
        ({"methane": 0.94, "ethane": 0.04, "nitrogen": 0.02}, 40e5, 100e5),
        ({"hydrogen": 0.9, "methane": 0.1}, 20e5, 60e5),
        ({"carbon_dioxide": 1.0}, 20e5, 50e5),
    ],
)
def test_ideal_cycle_of_a_real_gas(
    composition: dict[str, float], suction: float, discharge: float
) -> None:
    gas = gas_from_composition(composition)
    case = described(suction_pressure=suction, discharge_pressure=discharge)
    found = steady_state(case, gas, step=0.5, ideal_valves=True)
    path = gas.isentropic(np.array(suction), np.array(300.0), np.array(discharge))
    # LAW: VE = 1 - C (rho_d / rho_s - 1), work = mass times isentropic enthalpy rise, gas of
    # GERG-2008.
    efficiency = 1 - 0.12 * (path.density2 / path.density1 - 1)
    mass = path.density1 * efficiency * 0.01
    assert_allclose(found.delivered, mass, rtol=1e-4)
    assert_allclose(found.work, mass * path.enthalpy_rise, rtol=1e-4)
    assert_allclose(found.discharge_temperature, path.temperature, atol=0.03)


def exponents(found: Cycles, end: int = 0) -> tuple[float, float]:
    """Slopes of ln p over ln V, window of the rows LKS: p between ps r^0.1 and ps r^0.9."""
    pressure, volume = found.pressure[0, end], found.volume[0, end]
    own = (found.crank_angle - 180.0 * (found.ends[end] == "crank")) % 360
    inside = (pressure > 10e5 * 3**0.1) & (pressure < 10e5 * 3**0.9)
    parts = (inside & (own >= 180), inside & (own < 180))
    squeeze, growth = (
        -np.polyfit(np.log(volume[part]), np.log(pressure[part]), 1)[0] for part in parts
    )
    return float(squeeze), float(growth)


def strokes_read_from(found: Cycles) -> tuple[float, float]:
    """Volume between leaving and reaching each line pressure, head end, valves without loss."""
    pressure, volume = found.pressure[0, 0], found.volume[0, 0]
    half = len(pressure) // 2
    growth, squeeze = slice(0, half), slice(half, None)

    def reached(part: slice, line: float, side: float) -> float:
        """Volume at which the line pressure is reached: through the last two samples before."""
        trace, room = pressure[part], volume[part]
        first = int(np.flatnonzero(side * (trace - line) <= line * 1e-4)[0])
        slope = (room[first - 1] - room[first - 2]) / (trace[first - 1] - trace[first - 2])
        return float(room[first - 1] + slope * (line - trace[first - 1]))

    def left(part: slice, line: float, side: float) -> float:
        """Volume of the last sample at line pressure, or of the dead centre."""
        at = np.flatnonzero(side * (pressure[part] - line) <= line * 1e-5)
        return float(volume[part][at[-1] if at.size else 0])

    drawn = left(squeeze, 10e5, 1.0) - reached(growth, 10e5, 1.0)
    pushed = reached(squeeze, 30e5, -1.0) - left(growth, 30e5, -1.0)
    return drawn, pushed


@pytest.mark.parametrize(("path", "first"), [("suction", 1), ("discharge", 7)])
def test_signature_of_a_valve_leak(path: str, first: int) -> None:
    # SOURCE: rows LKS-01..12, an independent adiabatic integration at 0.02 deg from first
    # principles.
    sizes = np.array([[0.0], [5e-6]])
    both = ideal(ends=("head",), leaks=Leaks(**{path: Leak(orifice=sizes)}))
    healthy, leaking = both.take(slice(0, 1)), both.take(slice(1, 2))
    row = {number: ROWS[f"LKS-{first + number:02d}"] for number in range(6)}
    leak = leaking.suction_leak + leaking.discharge_leak
    squeeze, growth = exponents(leaking)
    assert_allclose(leak / healthy.delivered * 100, row[0], atol=0.02)
    assert_allclose(squeeze, row[1], atol=5e-4)
    assert_allclose(growth, row[2], atol=5e-4)
    assert_allclose((leaking.delivered / healthy.delivered - 1) * 100, row[3], atol=0.03)
    assert_allclose(leaking.work / healthy.work, row[4], atol=5e-4)
    drawn, pushed = strokes_read_from(leaking)
    ratio = drawn * 10e5 / 300.0 / (pushed * 30e5 / leaking.discharge_temperature)
    assert_allclose(ratio, row[5], atol=2e-3)


def test_signature_of_a_ring_leak() -> None:
    # SOURCE: rows LKS-13..19, as above with two coupled ends.
    both = ideal(leaks=Leaks(rings=Leak(orifice=np.array([0.0, 10e-6]))))
    healthy, leaking = both.take(slice(0, 1)), both.take(slice(1, 2))
    assert_allclose(exponents(leaking, 0), (ROWS["LKS-13"], ROWS["LKS-14"]), atol=1e-3)
    assert_allclose(exponents(leaking, 1), (ROWS["LKS-15"], ROWS["LKS-16"]), atol=1e-3)
    loss = leaking.delivered.sum() / healthy.delivered.sum() - 1
    assert_allclose(loss * 100, ROWS["LKS-17"], atol=0.03)
    assert_allclose(leaking.work[0, 0] / healthy.work[0, 0], ROWS["LKS-18"], atol=5e-4)
    rise = leaking.discharge_temperature - healthy.discharge_temperature
    assert_allclose(rise, ROWS["LKS-19"], atol=0.1)


def hard_case() -> tuple[Cylinders, Any]:
    """All paths leak, heat, pulsation and ripple: what a balance must survive."""
    gas = gas_from_composition({"methane": 0.9, "ethane": 0.1})
    case = described(
        piston_rod_diameter=0.06,
        connecting_rod_length=0.35,
        leaks=Leaks(
            suction=Leak(orifice=3e-6),
            discharge=Leak(slot=1e-11),
            rings=Leak(labyrinth=8e-6),
            packing=Leak(orifice=1e-6),
        ),
        wall=Wall("annand"),
        suction_valves=replace(VALVES, spring_preload=25.0),
        pulsation=Pulsation(suction=np.array([[[0.01, 0.005j]]])),
        speed_ripple=np.array([[0.01, 0.005]]),
        suction_heating=3.0,
    )
    return case, gas


def test_balances_close_and_agree_with_the_equation_of_state() -> None:
    case, gas = hard_case()
    found = steady_state(case, gas, step=0.5)
    assert found.converged.all()
    # LAW: conservation of mass and energy over a periodic turn.
    assert abs(found.mass_imbalance[0]) < 1e-6
    assert abs(found.energy_imbalance[0]) < 1e-6
    lost = found.drawn.sum() - found.delivered.sum() - found.packing_leak[0]
    assert_allclose(lost / found.drawn.sum(), 0, atol=1e-6)
    # LAW: work is the loop integral of the sampled card, trapezoids.
    step = np.roll(found.volume, -1, axis=-1) - found.volume
    middle = 0.5 * (found.pressure + np.roll(found.pressure, -1, axis=-1))
    assert_allclose(found.work, -(middle * step).sum(axis=-1), rtol=2e-4)


def test_first_law_over_the_whole_cylinder() -> None:
    gas = gas_from_composition({"methane": 0.9, "ethane": 0.1})
    case = described(wall=Wall("annand"), leaks=Leaks(rings=Leak(orifice=5e-6)))
    found = steady_state(case, gas, step=1.0, ideal_valves=True)
    inlet = gas.enthalpy(np.array([10e5]), np.array([300.0]))
    outlet = gas.enthalpy(np.array([30e5]), found.discharge_temperature)
    gained = found.delivered.sum() * (outlet - inlet)
    # LAW: work + heat = mass (h_out - h_in), enthalpies from GERG-2008 itself.
    assert_allclose(found.work.sum() + found.heat.sum(), gained, rtol=2e-5)


def test_halving_the_step_changes_little() -> None:
    case, gas = hard_case()
    fluid = fluid_for(case, gas)
    coarse, middle, fine = (steady_state(case, fluid, step=step).work for step in (1.0, 0.5, 0.25))
    first, second = np.abs(middle - coarse).max(), np.abs(fine - middle).max()
    # LIMIT: second order, so that each halving leaves a quarter of the change (a third is allowed);
    # from the default step of 0.25 deg to 0.125 deg that is below 1e-4 of the work.
    assert second < first / 3
    assert second / 3 / fine.min() < 1e-4


@pytest.mark.parametrize("law", ["annand", "adair", "woschni"])
def test_heat_from_cold_walls_lowers_the_discharge_temperature(law: str) -> None:
    found = ideal(step=1.0, wall=Wall(law, multiplier=np.array([0.0, 1.0]), position=0.0))
    # LIMIT: walls as cold as the suction gas can only take heat from it.
    assert (found.heat[1] < 0).all()
    assert found.discharge_temperature[1] < found.discharge_temperature[0] - 0.2


def test_half_flow_by_delayed_closing() -> None:
    both = ideal(held_open_until=np.array([[np.nan, np.nan], [266.5, np.nan]]))
    full, half = both.take(slice(0, 1)), both.take(slice(1, 2))
    # LAW: the gas kept is that between the closing point and the re-expanded clearance gas.
    kept = half.volume[0, 0, 533] - 0.12 * 3 ** (1 / K) * 0.01
    expected = kept / ((1 - 0.12 * (3 ** (1 / K) - 1)) * 0.01)
    assert_allclose(half.delivered[0, 0] / full.delivered[0, 0], expected, atol=3e-4)
    assert_allclose(expected, 0.5, atol=2e-3)  # LAW: half flow at 266.6 deg for this case
    assert_allclose(half.delivered[0, 1], full.delivered[0, 1], rtol=1e-9)


def test_valves_held_open_deliver_nothing_and_cost_little() -> None:
    # One batch: first card loaded, second with its head end held open.
    held = np.array([[np.nan, np.nan], [360.0, np.nan]])
    found = steady_state(described(held_open_until=held), PerfectGas(), step=0.5)
    # LIMIT: an end that stays open to suction delivers nothing; its loop is the valve loss alone.
    assert_allclose(found.delivered[1, 0], 0, atol=1e-9)
    assert 0 < found.work[1, 0] < 0.15 * found.work[0, 0]


def test_speed_ripple_leaves_the_adiabatic_ideal_cycle_alone() -> None:
    # LIMIT: without heat, leaks and valve losses, time plays no part.
    found = ideal(step=1.0, speed_ripple=np.array([[0.0, 0.0], [0.03, 0.02j]]))
    assert_allclose(found.work[1], found.work[0], rtol=1e-8)


def test_ideal_valves_follow_the_pulsation() -> None:
    found = ideal(pulsation=Pulsation(suction=np.array([[[0.02]]])), ends=("head",))
    angle = found.crank_angle
    inside = (angle > 60) & (angle < 170)
    wave = 10e5 * (1 + 0.02 * np.cos(np.radians(angle)))
    # LAW: prescribed line pressure, Re(a exp(i theta)); no loss in an ideal valve, flow going in.
    assert_allclose(found.pressure[0, 0][inside], wave[inside], rtol=1e-6)


def plates(**changes: float) -> Plates:
    values = {
        "lift": 2e-3,
        "mass": 0.05,
        "spring_rate": 0.0,
        "spring_preload": 0.0,
        "port_area": 1e-3,
        "damping": 0.0,
        "seat_restitution": 0.5,
        "guard_restitution": 0.0,
        "stiction": 0.0,
    }
    return Plates(**{name: np.array([[value]]) for name, value in (values | changes).items()})


def test_free_flight_against_the_guard() -> None:
    state, one = resting((1, 1)), plates()
    for _ in range(40):
        advance(state, one, np.array([[60e3]]), np.array([1e-4]))
    # LAW: sqrt(2 F h / m) for 60 N over 2 mm and 0.05 kg [VLV-02]; steps that do not hit the
    # impact.
    assert_allclose(state.guard_impact, ROWS["VLV-02"], rtol=1e-6)
    assert_allclose(state.position, 2e-3)  # LAW: restitution zero, it stays


def test_natural_frequency_of_a_plate() -> None:
    state, one = resting((1, 1)), plates(spring_rate=8000.0, lift=1.0)
    step, positions = 1e-5, []
    for _ in range(20000):
        advance(state, one, np.array([[8e3]]), np.array([step]))
        positions.append(float(state.position[0, 0]))
    trace = np.array(positions)
    tops = np.flatnonzero((trace[1:-1] > trace[:-2]) & (trace[1:-1] >= trace[2:]))
    # LAW: sqrt(k / m) / 2 pi [VLV-01].
    found = (len(tops) - 1) / ((tops[-1] - tops[0]) * step)
    assert_allclose(found, ROWS["VLV-01"], rtol=1e-3)


def test_bounce_loses_speed_by_the_restitution() -> None:
    state = resting((1, 1))
    state.position[:], one = 1e-3, plates(spring_preload=1.0)
    heights, up = [], False
    for _ in range(4000):
        advance(state, one, np.array([[0.0]]), np.array([1e-5]))
        moving_up = bool(state.speed[0, 0] > 0)
        if up and not moving_up:
            heights.append(float(state.position[0, 0]))
        up = moving_up
    # LAW: each height is the square of the restitution, a quarter, of the one before.
    assert_allclose(heights[0], 0.25e-3, rtol=1e-3)
    assert_allclose(heights[1], 0.0625e-3, rtol=2e-3)
    # LAW: fall from 1 mm at 20 m/s2.
    assert_allclose(state.seat_impact, np.sqrt(2 * 20 * 1e-3), rtol=1e-6)


def test_choked_discharge_of_a_vessel() -> None:
    area, volume = 5e-5, 0.01
    case = described(ends=("head",), leaks=Leaks(suction=Leak(orifice=area)), suction_pressure=1e5)
    setting = prepare(spread(case), fluid_for(case, PerfectGas()), 720)
    still = replace(
        setting,
        volume=np.full_like(setting.volume, volume),
        stage_volume=np.full_like(setting.stage_volume, volume),
    )
    engine = GasStep(still, ideal_valves=False)
    line = still.fluid.line(np.array([30e5]), np.array([350.0]))
    mass = line.density[None] * volume
    gas = gas_state(
        still, mass, mass * (line.enthalpy - 30e5 / line.density), np.full((1, 1), volume)
    )
    shut = (np.zeros((1, 1)), np.zeros((1, 1)))
    slow = engine.slow(0, gas, (np.array([1e5]), np.array([30e5])), shut)
    for step in range(720):
        gas, slow, _ = engine.step(step, gas, slow, shut)
    # LAW: adiabatic choked discharge of a vessel, p / p0 = (1 + (k-1)/2 t / tau)^(-2k/(k-1)),
    # tau = V / (A c0) ((k+1)/2)^((k+1)/(2(k-1))); one turn lasts 0.1 s.
    sound = np.sqrt(K * R * 350.0)
    tau = volume / (area * sound) * ((K + 1) / 2) ** ((K + 1) / (2 * (K - 1)))
    expected = 30e5 * (1 + (K - 1) / 2 * 0.1 / tau) ** (-2 * K / (K - 1))
    assert expected < 0.9 * 30e5
    assert_allclose(gas.pressure, expected, rtol=1e-5)


def test_batch_equals_one_by_one_and_leaves_its_input_alone() -> None:
    pressures, clearances = (
        np.array([22e5, 30e5, 41e5]),
        np.array([[0.1, 0.12], [0.2, 0.15], [0.3, 0.1]]),
    )
    before = pressures.copy(), clearances.copy()
    batch = described(discharge_pressure=pressures, clearance=clearances, wall=Wall("annand"))
    fluid = fluid_for(batch, PerfectGas())
    together = steady_state(batch, fluid, step=1.0)
    for card in range(3):
        alone = steady_state(
            described(
                discharge_pressure=pressures[card],
                clearance=clearances[card : card + 1],
                wall=Wall("annand"),
            ),
            fluid,
            step=1.0,
        )
        # LAW: cards do not know of one another.
        assert_allclose(alone.pressure[0], together.pressure[card], rtol=1e-6)
    assert_array_equal(pressures, before[0])
    assert_array_equal(clearances, before[1])


def test_cards_far_apart_in_pressure_keep_their_order() -> None:
    pressures = np.array([30e5, 1e5, 90e5])
    found = ideal(step=1.0, suction_pressure=pressures, discharge_pressure=3 * pressures)
    # LAW: the work of a perfect gas is in proportion to the suction pressure at equal ratio.
    assert_allclose(found.work[:, 0] / pressures, found.work[0, 0] / 30e5, rtol=1e-4)


def test_stiffer_springs_close_earlier() -> None:
    soft = replace(
        VALVES, spring_rate=np.array([[5e3], [4e4]]), spring_preload=np.array([[5.0], [60.0]])
    )
    found = steady_state(described(suction_valves=soft), PerfectGas(), step=0.5)
    motion = valve_motion(found, "suction", speed=10.0)
    # LIMIT: a spring that is stronger everywhere closes the plate earlier and lets less gas back.
    assert (motion.closing_late[1] < motion.closing_late[0]).all()
    assert (motion.backflow[1] <= motion.backflow[0]).all()
    assert (motion.full_lift <= 1).all()
    assert (motion.seat_impact > 0).all()


BAD: list[tuple[dict[str, Any], str]] = [
    ({"clearance": 0.0}, "clearance"),
    ({"clearance": 12.0}, "fraction"),
    ({"discharge_pressure": 5e5}, "swapped"),
    ({"suction_valves": ValveSide(30e-4, lift=0.0)}, "lift"),
    ({"suction_valves": ValveSide(0.0)}, "flow_area"),
    ({"discharge_valves": ValveSide(1e-3, moving_mass=np.nan)}, "moving_mass"),
    ({"speed": 0.0}, "speed"),
    ({"connecting_rod_length": 0.05}, "connecting_rod_length"),
    ({"leaks": Leaks(rings=Leak(orifice=-1e-6))}, "rings"),
    ({"wall": Wall("woodworm")}, "woodworm"),
    ({"ends": ("left",)}, "left"),
    ({"bore": np.array([0.3, 0.3]), "speed": np.array([10.0, 10.0, 10.0])}, "disagree"),
]


@pytest.mark.parametrize(("changes", "words"), BAD)
def test_bad_parameters_are_named(changes: dict[str, Any], words: str) -> None:
    with pytest.raises(CycleError) as caught:
        steady_state(described(**changes), PerfectGas())
    assert words in str(caught.value)


def test_two_phase_suction_is_refused() -> None:
    gas = gas_from_composition({"propane": 1.0})
    case = described(suction_pressure=15e5, discharge_pressure=40e5)
    with pytest.raises(InputError):
        steady_state(case, gas)


def test_nothing_undefined_leaves_the_model() -> None:
    extremes = itertools.product((1.05, 8.0), (0.02, 1.0), (0.0, 4e-5))
    ratio, clearance, leak = np.array(list(extremes)).T
    case = described(
        discharge_pressure=10e5 * ratio,
        clearance=clearance[:, None],
        leaks=Leaks(suction=Leak(orifice=leak[:, None]), rings=Leak(orifice=leak)),
        wall=Wall("annand", multiplier=3.0),
        ends=("head", "crank"),
    )
    found = steady_state(case, PerfectGas(), step=1.0)
    for name in ("pressure", "temperature", "mass", "work", "delivered", "discharge_temperature"):
        assert np.isfinite(getattr(found, name)).all(), name
    assert found.converged.all()
