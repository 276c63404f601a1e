"""Closed spans: where they lie, their nodes, the model's derivatives, and what the fit finds."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from pvcard.card_set import CardSet, turning
from pvcard.closed_lines import (
    COMPRESSION,
    EXPANSION,
    PARAMETERS,
    PLACE,
    Problem,
    linearise,
    problem,
    references,
    start_clearance,
)
from pvcard.kinematics import HEAD_END, motion
from pvcard.line_fit import Fit, fit_lines
from pvcard.trace_noise import relative_noise
from pvcard.types import Floats
from pvcard.windows import LOWER_SHARE, NODES, UPPER_SHARE, closed_windows, span_means
from tests.cards import ideal_cards

OF_THE_HEAT = ("compression_level", "expansion_level", "heat", "wall", "shape")


def posed(cards: CardSet) -> Problem:
    """Closed spans of a batch, condensed."""
    turn = turning(cards)
    windows = closed_windows(
        cards.pressure, cards.suction_pressure, cards.discharge_pressure, turn.half
    )
    return problem(cards, turn, windows, references(cards))


def fitted(cards: CardSet, u: float = 0.02) -> Fit:
    """Fit with a declared clearance believed to `u`."""
    count = len(cards.pressure)
    return fit_lines(
        posed(cards),
        clearance_uncertainty=np.full(count, u),
        white_noise=np.full(count, 1e-6),
        with_uncertainty=False,
    )


def test_spans_lie_between_the_shares_of_the_rise() -> None:
    # LAW: 6 and 94 % of the rise: the samples inside, no further one.
    cards = ideal_cards(samples=3600)
    turn = turning(cards)
    found = closed_windows(
        cards.pressure, cards.suction_pressure, cards.discharge_pressure, turn.half
    )
    assert found.found[0]
    low, high = (10e5 + share * 20e5 for share in (LOWER_SHARE, UPPER_SHARE))
    for first, last in (
        (found.compression_first[0], found.compression_last[0]),
        (found.expansion_first[0], found.expansion_last[0]),
    ):
        inside = cards.pressure[0, first : last + 1]
        assert low <= inside.min() <= inside.max() <= high
        outside = cards.pressure[0, [first - 1, last + 1]]
        assert ((outside < low) | (outside > high)).all()


@pytest.mark.parametrize(
    ("name", "change"),
    [
        ("flat", lambda p: np.full_like(p, 10e5)),
        ("never reaches discharge pressure", lambda p: np.minimum(p, 25e5)),
        ("never falls to suction pressure", lambda p: np.maximum(p, 15e5)),
        ("not a number", lambda p: np.full_like(p, np.nan)),
    ],
)
def test_no_spans_where_the_trace_does_not_run_through(name: str, change: object) -> None:
    # LAW: both lines are needed, each between both pressures.
    cards = ideal_cards(count=2)
    pressure = cards.pressure.copy()
    pressure[0] = change(pressure[0])  # type: ignore[operator]
    half = turning(cards).half
    found = closed_windows(pressure, cards.suction_pressure, cards.discharge_pressure, half)
    assert not found.found[0], name
    assert found.found[1]


def test_ripple_at_open_valves_moves_no_span() -> None:
    # LAW: the spans are read from the last crossing before the first: what swings above discharge
    # and below suction pressure does not matter.
    cards = ideal_cards(samples=1440)
    half = turning(cards).half
    rough = cards.pressure.copy()
    wave = 1e5 * np.sin(np.radians(30 * cards.crank_angle))
    rough[0] += np.where(rough[0] <= 10e5 * 1.001, 0.5 * wave, 0)
    rough[0] += np.where(rough[0] >= 30e5 * 0.999, wave, 0)
    plain = closed_windows(cards.pressure, cards.suction_pressure, cards.discharge_pressure, half)
    found = closed_windows(rough, cards.suction_pressure, cards.discharge_pressure, half)
    for one, two in zip(found, plain, strict=True):
        np.testing.assert_array_equal(one, two)


def test_means_of_a_straight_line_are_its_values() -> None:
    # LAW: the mean of a straight line over a part is its value in the middle, but for what a cut
    # sample is coarser than the line: an eighth of its cell at either side.
    cards = ideal_cards(samples=720)
    half = turning(cards).half
    windows = closed_windows(cards.pressure, cards.suction_pressure, cards.discharge_pressure, half)
    bins = span_means(0.3 * cards.crank_angle[None, :] - 7, cards.crank_angle, windows)
    assert bins.mean.shape == (1, 2 * NODES)
    cut = 2 * 0.3 * 0.5 / 8 / bins.width.min()
    assert_allclose(bins.mean, 0.3 * bins.crank_angle - 7, atol=cut)
    assert (np.diff(bins.crank_angle[0, COMPRESSION]) > 0).all()
    assert (np.diff(bins.crank_angle[0, EXPANSION]) > 0).all()


def test_references_of_a_perfect_gas() -> None:
    # LAW: p = rho R T; volume and temperature exponent are both k; T2 = T1 r^((k-1)/k); to the
    # interpolation of the table.
    known = references(ideal_cards(exponent=1.3, gas_constant=500.0, temperature=300.0))
    assert_allclose(known.suction.density, 10e5 / (500.0 * 300.0), rtol=3e-6)
    assert_allclose(known.path.volume_exponent, 1.3, rtol=3e-6)
    assert_allclose(known.path.temperature_exponent, 1.3, rtol=3e-6)
    assert_allclose(known.path.temperature, 300 * 3 ** (0.3 / 1.3), rtol=3e-6)


@pytest.mark.parametrize("sign", [1.0, -1.0])
@pytest.mark.parametrize("heat", [-20.0, 0.0])
@pytest.mark.parametrize("name", PARAMETERS)
def test_derivatives_of_the_residuals(name: str, heat: float, sign: float) -> None:
    # LIMIT: central difference by each parameter. Left out, as `linearise` says, is what clearance,
    # mark, level and gain do to the wall heat: 6 % of a slope at most, and of the gain 0.02, which
    # at a gain uncertain by 0.3 % is less than the misfit allowed to any model.
    case = posed(ideal_cards(sign=sign))
    state = np.zeros((1, len(PARAMETERS)))
    state[:, PLACE["clearance"]], state[:, PLACE["wall"]] = 0.125, 0.5
    state[:, PLACE["heat"]] = heat
    size = {"pressure_level": 1e2, "warming": 1e-2, "clearance_gas": 1e-2}.get(name, 1e-5)
    step = np.zeros_like(state)
    step[:, PLACE[name]] = size
    more, less = linearise(case, state + step), linearise(case, state - step)
    slope = (more.residual - less.residual)[0] / (2 * size)
    own = linearise(case, state).jacobian[0, :, PLACE[name]]
    share = 0.06 if heat == 0.0 and name not in OF_THE_HEAT else 2e-3
    least = 0.02 if name == "pressure_gain" and heat == 0.0 else 1e-7
    assert_allclose(own, slope, atol=max(share * np.abs(slope).max(), least))


def test_an_isentrope_leaves_no_residual() -> None:
    # LAW: an ideal card of the gas's own exponent without heat: p V^k constant.
    case = posed(ideal_cards())
    state = np.zeros((1, len(PARAMETERS)))
    state[:, PLACE["clearance"]], state[:, PLACE["heat"]] = 0.12, -30.0
    assert np.abs(linearise(case, state).residual).max() < 2e-5


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_clearance_of_both_ends_without_a_declared_one(sign: float) -> None:
    # TRUTH: 12 % in the card; nothing declared, so the trace alone has to tell it.
    cards = replace(ideal_cards(sign=sign), clearance=np.array([np.nan]))
    assert start_clearance(cards)[0] == 0.15
    found = fitted(cards)
    assert not found.prior_kept[0]
    assert found.state[0, PLACE["clearance"]] == pytest.approx(0.12, abs=0.005)


def test_declared_clearance_is_dropped_beyond_three_of_its_uncertainties() -> None:
    # LAW: contract: a value found beyond three of its uncertainties drops its prior. 12 % in the
    # card, 14 and 30 % declared within 2 points each.
    cards = ideal_cards(count=2)
    found = fitted(replace(cards, clearance=np.array([0.14, 0.30])))
    np.testing.assert_array_equal(found.prior_kept, [True, False])
    assert found.state[1, PLACE["clearance"]] == pytest.approx(0.12, abs=0.005)
    assert_allclose(found.clearance_alone, 0.12, atol=0.005)


def test_fit_of_a_batch_is_that_of_each_card() -> None:
    # LAW: batch equals one by one, with a broken card among them.
    cards = ideal_cards(clearance=np.array([0.08, 0.12, 0.3]), count=3)
    pressure = cards.pressure.copy()
    pressure[1, 40] = np.nan
    together = fitted(replace(cards, pressure=pressure))
    assert np.isnan(together.state[1, 0])
    for row in (0, 2):
        alone = fitted(cards.part(row, row + 1))
        assert_allclose(together.state[row], alone.state[0], rtol=1e-9, atol=1e-12)


def noisy(size: float, samples: int = 720) -> CardSet:
    """Many readings of one ideal card, each sample with white noise."""
    cards = ideal_cards(samples=samples, count=200)
    noise = 1 + size * np.random.default_rng(5).standard_normal(cards.pressure.shape)
    return replace(cards, pressure=cards.pressure * noise)


@pytest.mark.parametrize("size", [1e-4, 1e-3])
def test_noise_is_told_from_the_trace(size: float) -> None:
    # TRUTH: white noise of this size; 200 cards with some 60 samples each.
    cards = noisy(size)
    turn = turning(cards)
    windows = closed_windows(
        cards.pressure, cards.suction_pressure, cards.discharge_pressure, turn.half
    )
    found: Floats = relative_noise(cards, turn, windows, np.full(200, 1.3))
    assert np.sqrt(np.mean(found**2)) == pytest.approx(size, rel=0.1)


def test_nodes_keep_the_curve_between_coarse_samples() -> None:
    # LAW: the trace is flattened before it is averaged: nodes lie on p V^n at any spacing.
    for samples in (120, 720):
        case = posed(ideal_cards(samples=samples))
        volume = 0.12 + motion(case.crank_angle, 0.2, HEAD_END).travel
        constant = case.ln_pressure + 1.3 * np.log(volume)
        assert np.ptp(constant[0, COMPRESSION]) < 1e-4
        assert np.ptp(constant[0, EXPANSION]) < 1e-4
