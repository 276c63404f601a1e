"""Cards against closed forms: events, losses, batches, neighbours, finer grids."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from pvcard.card.ideal import ideal_card, line_states
from pvcard.card.measure import measure
from pvcard.card.work import indicated_work
from pvcard.card_set import CardSet, turning
from pvcard.closed_lines import references
from pvcard.gas import ExponentGas, gas_table
from pvcard.kinematics import CRANK_END, HEAD_END, crank_angle_at, motion
from pvcard.types import Floats
from pvcard.uncertainty import constant
from tests.cards import ideal_cards, ideal_pressure, uncertainties


def values(cards: CardSet) -> dict[str, Floats]:
    """All columns without uncertainties."""
    found = measure(cards, uncertainties(cards), with_uncertainty=False)
    return {name: estimate.value for name, estimate in found.columns.items()}


def test_long_rod_moves_like_a_cosine() -> None:
    # LIMIT: rod of infinite length: (1 - cos t) / 2, both ends alike.
    angle = np.linspace(0, 360, 37)
    for sign in (HEAD_END, CRANK_END):
        np.testing.assert_allclose(
            motion(angle, 1e-9, sign).travel, (1 - np.cos(np.radians(angle))) / 2, atol=1e-8
        )


def test_both_ends_share_one_piston() -> None:
    # LAW: what one end gains the other loses, half a turn apart.
    angle = np.linspace(0, 360, 73)
    head, crank = motion(angle, 0.22, HEAD_END), motion(angle + 180, 0.22, CRANK_END)
    np.testing.assert_allclose(head.travel, 1 - crank.travel, atol=1e-14)
    np.testing.assert_allclose(head.slope, -crank.slope, atol=1e-14)
    np.testing.assert_allclose(head.curvature, -crank.curvature, atol=1e-13)


@pytest.mark.parametrize("sign", [HEAD_END, CRANK_END])
def test_angle_of_a_travel_inverts_the_motion(sign: float) -> None:
    # LAW: inverse function.
    angle = np.linspace(0.5, 179.5, 60)
    travel = motion(angle, 0.25, sign).travel
    np.testing.assert_allclose(crank_angle_at(travel, 0.25, sign), angle, atol=1e-9)


def test_work_of_an_ellipse_is_its_area() -> None:
    # LIMIT: pressure sine against a cosine piston: the loop is an ellipse of area pi a b.
    cards = replace(ideal_cards(samples=180), rod_ratio=np.array([1e-9]))
    angle = np.radians(cards.crank_angle)
    cards = replace(cards, pressure=(3e5 - 2e5 * np.sin(angle))[None, :])
    work = indicated_work(cards, turning(cards), np.zeros(1), 0).value
    np.testing.assert_allclose(work, np.pi * 2e5 * 0.5 * 0.01, rtol=1e-9)


def test_ideal_card_opens_and_closes_where_the_lines_meet_the_pressures() -> None:
    # LAW: p V^n constant: the valves open at C r^(1/n) and (1 + C) r^(-1/n).
    found = values(ideal_cards())
    expansion = 0.12 * 3 ** (1 / 1.3) - 0.12
    compression = 1.12 * 3 ** (-1 / 1.3) - 0.12
    opens = crank_angle_at(np.array([expansion, compression]), 0.2, HEAD_END)
    assert found["suction_opening_deg"][0] == pytest.approx(opens[0], abs=1.0)
    assert found["discharge_opening_deg"][0] == pytest.approx(360 - opens[1], abs=1.0)
    assert found["suction_volumetric_efficiency_pct"][0] == pytest.approx(
        100 * (1 - expansion), abs=0.02
    )
    assert found["discharge_volumetric_efficiency_pct"][0] == pytest.approx(
        100 * compression, abs=0.02
    )
    assert found["compression_exponent"][0] == pytest.approx(1.3, abs=5e-4)
    assert found["expansion_exponent"][0] == pytest.approx(1.3, abs=5e-4)
    assert found["clearance_pct"][0] == pytest.approx(12.0, abs=0.02)


def test_loss_of_a_constant_drop_is_drop_times_volume() -> None:
    # LAW: both plateaus 5 % beyond the lines; between the crossings the loss is nearly dp times
    # volume.
    cards = ideal_cards(samples=3600)
    grid = cards.crank_angle
    low, high = 0.95 * 10e5, 1.05 * 30e5
    volume = 0.12 + motion(grid, 0.2, HEAD_END).travel
    falling = 30e5 * (0.12 / volume) ** 1.3
    rising = 10e5 * (1.12 / volume) ** 1.3
    pressure = np.where(grid < 180, np.maximum(falling, low), np.minimum(rising, high))
    found = values(replace(cards, pressure=pressure[None, :]))
    first = 0.12 * 3 ** (1 / 1.3)
    opening = 0.12 * (30e5 / low) ** (1 / 1.3)
    # between first and opening the trace still follows the polytrope: its own integral
    closed = 10e5 * (opening - first) - 30e5 * 0.12**1.3 / 0.3 * (first**-0.3 - opening**-0.3)
    loss = (0.05 * 10e5 * (1.12 - opening) + closed) * 0.01 * 10 / 1e3
    assert found["suction_valve_loss_kW"][0] == pytest.approx(loss, rel=5e-3)
    assert found["discharge_valve_loss_kW"][0] > 0


def test_batch_equals_one_by_one() -> None:
    # LAW: a batch is many cards, nothing more.
    many = ideal_cards(
        clearance=np.array([0.08, 0.12, 0.3]), high=np.array([20e5, 30e5, 25e5]), count=3
    )
    together = values(many)
    for row in range(3):
        alone = values(many.part(row, row + 1))
        for name, value in alone.items():
            np.testing.assert_allclose(together[name][row], value[0], rtol=1e-9, err_msg=name)


def test_a_broken_card_leaves_its_neighbours_alone() -> None:
    # LAW: one bad card never stops the batch.
    many = ideal_cards(count=3)
    pressure = many.pressure.copy()
    pressure[1] = np.nan
    broken = values(replace(many, pressure=pressure))
    whole = values(many)
    for name in ("indicated_power_kW", "clearance_pct", "suction_valve_loss_kW"):
        assert np.isnan(broken[name][1])
        np.testing.assert_array_equal(broken[name][[0, 2]], whole[name][[0, 2]])


def test_inputs_stay_as_they_are() -> None:
    # LAW: no change to what the caller hands in.
    cards = ideal_cards()
    kept = cards.pressure.copy()
    unsure = uncertainties(cards)
    kept_u = unsure.copy()
    measure(cards, unsure)
    np.testing.assert_array_equal(cards.pressure, kept)
    np.testing.assert_array_equal(unsure, kept_u)


def test_finer_samples_come_nearer_to_the_closed_form() -> None:
    # LAW: n/(n-1) ps Vs (1 + C - C r^(1/n)) (r^((n-1)/n) - 1).
    n, c, r = 1.3, 0.12, 3.0
    true = n / (n - 1) * 10e5 * 0.01 * (1 + c - c * r ** (1 / n)) * (r ** ((n - 1) / n) - 1)
    errors = []
    for samples in (90, 360, 1440):
        cards = ideal_cards(samples=samples)
        work = indicated_work(cards, turning(cards), np.zeros(1), 0).value[0]
        errors.append(abs(work / true - 1))
    assert errors[2] < errors[0] / 10
    assert errors[2] < 2e-5


def test_uneven_angles_give_the_same_work() -> None:
    # LAW: the trapezoid rule on any grid.
    rng = np.random.default_rng(7)
    cards = ideal_cards(samples=2000)
    grid = np.sort(np.mod(cards.crank_angle + rng.uniform(-0.06, 0.06, 2000), 360.0))
    pressure = ideal_pressure(grid, 0.2, HEAD_END, 0.12, 10e5, 30e5, 1.3)
    uneven = replace(cards, crank_angle=grid, pressure=pressure[None, :])
    one = values(cards)["indicated_power_kW"][0]
    assert values(uneven)["indicated_power_kW"][0] == pytest.approx(one, rel=2e-4)


@pytest.mark.parametrize("clearance", [0.05, 0.12, 0.35])
@pytest.mark.parametrize("high", [15e5, 30e5, 50e5])
def test_clearance_is_found_whatever_was_declared(clearance: float, high: float) -> None:
    # TRUTH: the card's own clearance; the declared one is 3 points off and hardly believed.
    cards = ideal_cards(clearance=clearance, high=high)
    cards = replace(cards, clearance=cards.clearance + 0.03)
    found = measure(cards, uncertainties(cards, clearance=0.05), with_uncertainty=False)
    assert found.columns["clearance_pct"].value[0] == pytest.approx(100 * clearance, abs=0.3)


def test_thin_loop_has_power_but_no_lines() -> None:
    # LAW: an end that does not compress has neither closed spans nor clearance.
    cards = ideal_cards()
    angle = np.radians(cards.crank_angle)
    idle = replace(cards, pressure=(10e5 - 0.2e5 * np.sin(angle))[None, :])
    found = measure(idle, uncertainties(idle))
    assert not found.closed[0]
    assert found.columns["indicated_power_kW"].value[0] > 0


def test_real_gas_efficiency_is_a_mass_balance_of_the_clearance() -> None:
    # SOURCE: HBK-03 in data/check_values_core.csv: 1 - C ((Zs/Zd) r^(1/k) - 1), k the exponent of
    # temperature; r = 3, C = 0.10, k = 1.27, Zs = 0.98, Zd = 0.96.
    ratio, k, z_suction, z_discharge = 3.0, 1.27, 0.98, 0.96
    squeeze = z_suction / z_discharge * ratio ** (1 / k)
    gas = ExponentGas(
        float(np.log(ratio) / np.log(squeeze)),
        z_suction,
        0.018,
        compressibility_slope=float(np.log(z_discharge / z_suction) / np.log(ratio)),
        suction_pressure=10e5,
        pressure_ratio=ratio,
    )
    table = gas_table(gas, pressure=(5e5, 40e5), temperature=(250.0, 520.0))
    cards = replace(ideal_cards(samples=36), gas=gas, table=table)
    known = references(cards)
    assert known.path.temperature_exponent[0] == pytest.approx(k, rel=1e-4)
    states = line_states(cards, known, 0)
    card = ideal_card(constant(np.array([0.10]), 0), constant(np.array([0.01]), 0), states)
    assert 100 * card.suction_efficiency.value[0] == pytest.approx(85.7539570587, abs=1e-3)


@pytest.mark.parametrize(("n", "expected"), [(1.3, 3.117), (1.4, 3.247)])
def test_power_at_falling_suction_pressure_has_its_maximum(n: float, expected: float) -> None:
    # LAW: fixed discharge pressure, no clearance: greatest work at r = n^(n / (n - 1)), from
    # d/dr of (r^((n-1)/n) - 1) / r.
    assert n ** (n / (n - 1)) == pytest.approx(expected, abs=5e-4)
    ratios = np.linspace(expected - 0.3, expected + 0.3, 121)
    work = []
    for ratio in ratios:
        cards = ideal_cards(low=30e5 / ratio, high=30e5, exponent=n, samples=36)
        states = line_states(cards, references(cards), 0)
        card = ideal_card(constant(np.zeros(1), 0), constant(np.array([0.01]), 0), states)
        work.append(float(card.work.value[0]))
    assert ratios[int(np.argmax(work))] == pytest.approx(expected, abs=0.03)


@pytest.mark.parametrize("sign", [HEAD_END, CRANK_END])
def test_ideal_card_has_no_losses_and_delivers_what_it_draws(sign: float) -> None:
    # LAW: p V^k between the lines: indicated = theoretical work, both losses nothing, flow
    # rho VE Vs N at either line.
    cards = ideal_cards(sign=sign, samples=1440, gas_constant=500.0, temperature=300.0)
    found = values(cards)
    power = found["indicated_power_kW"][0]
    assert found["ideal_power_kW"][0] == pytest.approx(power, rel=1e-3)
    for name in ("suction_valve_loss_kW", "discharge_valve_loss_kW", "other_loss_kW"):
        assert abs(found[name][0]) < 2e-3 * power, name
    density = 10e5 / (500.0 * 300.0)
    flow = density * (1.12 - 0.12 * 3 ** (1 / 1.3)) * 0.01 * 10 * 3600
    assert found["discharge_flow_kg_h"][0] == pytest.approx(flow, rel=0.01)
    assert found["flow_ratio"][0] == pytest.approx(1.0, abs=2e-3)
    assert found["isentropic_efficiency_pct"][0] == pytest.approx(100.0, abs=1.0)
    hot = 300 * 3 ** (0.3 / 1.3) - 273.15
    assert found["ideal_discharge_temperature_degC"][0] == pytest.approx(hot, abs=0.01)


def test_parts_of_the_power_add_up_for_any_card() -> None:
    # LAW: indicated = theoretical + both losses + the rest, whatever the trace looks like.
    cards = ideal_cards(clearance=np.array([0.08, 0.2]), count=2)
    wave = 1 + 0.02 * np.sin(np.radians(7 * cards.crank_angle))
    found = values(replace(cards, pressure=cards.pressure * wave))
    parts = ("ideal_power_kW", "suction_valve_loss_kW", "discharge_valve_loss_kW", "other_loss_kW")
    total = sum(found[name] for name in parts)
    np.testing.assert_allclose(total, found["indicated_power_kW"], rtol=1e-12)


def test_figures_scale_with_the_size_of_the_machine() -> None:
    # LAW: similarity of the loop: work with swept volume, power with speed; fractions stay.
    small, large = values(ideal_cards()), values(ideal_cards(swept=0.03, speed=20.0))
    assert large["indicated_work_kJ"][0] == pytest.approx(3 * small["indicated_work_kJ"][0])
    assert large["indicated_power_kW"][0] == pytest.approx(6 * small["indicated_power_kW"][0])
    for name in ("mean_effective_pressure_bar", "pressure_ratio", "pressure_max_bar"):
        assert large[name][0] == pytest.approx(small[name][0])


def test_work_does_not_depend_on_the_zero_of_the_transducer() -> None:
    # LAW: the closed integral of a constant is nothing.
    cards = ideal_cards()
    shifted = replace(cards, pressure=cards.pressure + 0.3e5)
    found, plain = values(shifted), values(cards)
    assert found["indicated_power_kW"][0] == pytest.approx(plain["indicated_power_kW"][0], rel=1e-6)
    assert found["pressure_max_bar"][0] == pytest.approx(plain["pressure_max_bar"][0] + 0.3)
