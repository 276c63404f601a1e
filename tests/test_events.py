"""Opening and closing angles: closed forms, simulated valves, noise, and what is not there."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from pvcard.card.measure import measure
from pvcard.card_set import CardSet
from pvcard.kinematics import CRANK_END, HEAD_END, crank_angle_at, motion
from pvcard.types import Floats
from tests.cards import ideal_cards, uncertainties

NAMES = ("suction_opening_deg", "discharge_opening_deg")
CLOSINGS = ("suction_closing_deg", "discharge_closing_deg")


def events(cards: CardSet) -> dict[str, tuple[Floats, Floats]]:
    """Angles with their standard uncertainties, the mark taken as exact."""
    unsure = uncertainties(cards, dead_centre=0.0)
    columns = measure(cards, unsure).columns
    return {
        name: (columns[name].value, columns[name].uncertainty(unsure)) for name in NAMES + CLOSINGS
    }


def openings(clearance: float, ratio: float, sign: float) -> tuple[float, float]:
    """Where an ideal card's valves open."""
    out = clearance * ratio ** (1 / 1.3) - clearance
    back = (1 + clearance) * ratio ** (-1 / 1.3) - clearance
    angle = crank_angle_at(np.array([out, back]), 0.2, sign)
    return float(angle[0]), 360 - float(angle[1])


@pytest.mark.parametrize("sign", [HEAD_END, CRANK_END])
@pytest.mark.parametrize("clearance", [0.08, 0.2])
@pytest.mark.parametrize("ratio", [2.0, 3.5])
def test_openings_of_ideal_cards(sign: float, clearance: float, ratio: float) -> None:
    # LAW: p V^n: the valves open at C r^(1/n) and (1 + C) r^(-1/n) of the swept volume. A plate
    # without mass leaves the line at once, so that pointing back as for a real one is a little
    # early.
    cards = ideal_cards(clearance=clearance, high=ratio * 10e5, sign=sign, samples=1440)
    found = events(cards)
    for name, angle in zip(NAMES, openings(clearance, ratio, sign), strict=True):
        value, u = found[name]
        assert -1.0 < value[0] - angle < 0.3, name
        assert abs(value[0] - angle) < 3 * u[0], name


def test_valves_of_an_ideal_card_close_at_the_dead_centres() -> None:
    # LAW: an ideal valve closes where the piston turns; the reading says how well it knows.
    found = events(ideal_cards(samples=1440))
    for name, angle in zip(CLOSINGS, (180.0, 0.0), strict=True):
        value, u = found[name]
        away = (value[0] - angle + 180) % 360 - 180
        assert abs(away) < max(3 * u[0], 1.0), name


def late_card(by: float) -> CardSet:
    """Ideal card whose suction valve closes `by` degrees after the dead centre."""
    cards = ideal_cards(samples=1440)
    grid = cards.crank_angle
    volume = 0.12 + motion(grid, 0.2, HEAD_END).travel
    trapped = 0.12 + float(motion(np.array([180 + by]), 0.2, HEAD_END).travel[0])
    rising = np.maximum(10e5 * (trapped / volume) ** 1.3, 10e5)
    falling = np.maximum(30e5 * (0.12 / volume) ** 1.3, 10e5)
    pressure = np.where(grid < 180, falling, np.minimum(rising, 30e5))
    return replace(cards, pressure=pressure[None, :])


@pytest.mark.parametrize("by", [15.0, 30.0])
def test_late_closing_is_read_from_the_trace(by: float) -> None:
    # TRUTH: gas flows back at suction pressure until the valve closes `by` after the dead centre.
    value, u = events(late_card(by))["suction_closing_deg"]
    assert value[0] == pytest.approx(180 + by, abs=4.0)
    assert abs(value[0] - 180 - by) < 3 * u[0]


def test_noise_widens_the_reading_and_does_not_shift_it() -> None:
    # TRUTH: 0.1 % white noise on each of 100 readings of one card.
    quiet = ideal_cards(samples=1440, count=100)
    noise = 1 + 1e-3 * np.random.default_rng(2).standard_normal(quiet.pressure.shape)
    found, plain = events(replace(quiet, pressure=quiet.pressure * noise)), events(quiet)
    for name, angle in zip(NAMES, openings(0.12, 3.0, HEAD_END), strict=True):
        value, u = found[name]
        assert np.median(u) >= np.median(plain[name][1])
        assert np.mean(np.abs(value - angle) <= 2 * u) >= 0.9, name
        assert abs(value.mean() - angle) < 2 * np.median(u), name


def test_a_card_without_spans_has_no_events_and_does_not_disturb() -> None:
    # LAW: what is not seen is not a number; the neighbour keeps its figures.
    cards = ideal_cards(count=2)
    pressure = cards.pressure.copy()
    pressure[0] = 10e5
    whole, broken = events(cards), events(replace(cards, pressure=pressure))
    for name in NAMES + CLOSINGS:
        assert np.isnan(broken[name][0][0]), name
        assert broken[name][0][1] == pytest.approx(whole[name][0][1], rel=1e-9), name


def test_events_move_with_the_mark() -> None:
    # LAW: a mark that is late by 1 deg shows every event 1 deg late: d angle / d mark = -1 in the
    # sense in which corrections are subtracted.
    cards = ideal_cards(samples=1440)
    with_mark, without = (uncertainties(cards, dead_centre=size) for size in (0.5, 0.0))
    columns = measure(cards, with_mark).columns
    for name in NAMES + CLOSINGS:
        both, rest = (columns[name].uncertainty(u)[0] for u in (with_mark, without))
        assert both == pytest.approx(np.hypot(0.5, rest), rel=1e-6), name
