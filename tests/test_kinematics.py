"""Slider-crank motion against limits, derivatives and the triangle of crank and rod."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from pvcard.kinematics import (
    CRANK_END,
    HEAD_END,
    acceleration,
    crank_angle_at,
    motion,
    motion_from_sine,
    place,
    travel_by_ratio,
)

ANGLE = np.linspace(0.0, 360.0, 145)
BOTH = pytest.mark.parametrize("sign", [HEAD_END, CRANK_END])


@BOTH
@pytest.mark.parametrize("ratio", [0.1, 0.25, 0.45])
def test_travel_is_the_side_of_the_triangle(sign: float, ratio: float) -> None:
    # LAW: pin on the cylinder's axis, crank 1, rod 1/ratio: the distance from pin to shaft by
    # Pythagoras in coordinates; the crank end sees the piston from the other side.
    crank = np.radians(ANGLE + (0.0 if sign == HEAD_END else 180.0))
    distance = np.cos(crank) + np.sqrt(1 / ratio**2 - np.sin(crank) ** 2)
    head = (1 + 1 / ratio - distance) / 2
    expected = head if sign == HEAD_END else 1 - head
    assert_allclose(motion(ANGLE, ratio, sign).travel, expected, atol=1e-13)


@BOTH
def test_slope_and_curvature_are_derivatives(sign: float) -> None:
    # LIMIT: central differences of the travel, error of second order in the step.
    step = 1e-3
    around = [motion(ANGLE + move, 0.3, sign) for move in (-step, 0.0, step)]
    radians = np.radians(step)
    slope = (around[2].travel - around[0].travel) / (2 * radians)
    curvature = (around[2].slope - around[0].slope) / (2 * radians)
    assert_allclose(around[1].slope, slope, atol=1e-9)
    assert_allclose(around[1].curvature, curvature, atol=1e-9)


@BOTH
def test_change_with_the_rod_is_a_derivative(sign: float) -> None:
    # LIMIT: central difference of the motion by the ratio.
    step, radians = 1e-5, np.radians(ANGLE)
    more, less = motion(ANGLE, 0.3 + step, sign), motion(ANGLE, 0.3 - step, sign)
    travel, slope = travel_by_ratio(np.sin(radians), np.cos(radians), 0.3, sign)
    assert_allclose(travel, (more.travel - less.travel) / (2 * step), atol=1e-9)
    assert_allclose(slope, (more.slope - less.slope) / (2 * step), atol=1e-9)


@BOTH
def test_stroke_begins_and_ends_at_rest(sign: float) -> None:
    # LAW: dead centres: travel 0 and 1, no speed; r w^2 (1 +- m) there (chapter 15 of Khurmi and
    # Gupta, before the series is cut), half of it by the stroke.
    at = motion(np.array([0.0, 180.0]), 0.2, sign)
    assert_allclose(at.travel, [0, 1], atol=1e-15)
    assert_allclose(at.slope, [0, 0], atol=1e-15)
    assert_allclose(at.curvature, [(1 + sign * 0.2) / 2, -(1 - sign * 0.2) / 2], atol=1e-14)


@BOTH
def test_both_strokes_are_mirrors(sign: float) -> None:
    # LAW: the mechanism without offset is symmetric about its axis.
    out, back = motion(ANGLE, 0.22, sign), motion(360 - ANGLE, 0.22, sign)
    assert_allclose(out.travel, back.travel, atol=1e-14)
    assert_allclose(out.slope, -back.slope, atol=1e-14)


def test_known_sines_and_the_short_form_give_the_same_motion() -> None:
    # LAW: one formula behind all of them, to the last bits.
    radians = np.radians(ANGLE)
    whole = motion(ANGLE, 0.22, HEAD_END)
    ready = motion_from_sine(np.sin(radians), np.cos(radians), 0.22, HEAD_END)
    for one, two in zip(whole, ready, strict=True):
        assert_allclose(one, two, atol=1e-15)
    assert_allclose(place(ANGLE, 0.22, HEAD_END).travel, whole.travel, atol=1e-15)


def test_cards_of_other_rods_are_one_batch() -> None:
    # LAW: batch equals one by one.
    ratio, sign = np.array([[0.1], [0.2], [0.3]]), np.array([[1.0], [-1.0], [1.0]])
    batch = motion(ANGLE, ratio, sign)
    assert batch.travel.shape == (3, ANGLE.size)
    for row in range(3):
        alone = motion(ANGLE, float(ratio[row, 0]), float(sign[row, 0]))
        assert_allclose(batch.travel[row], alone.travel, rtol=0, atol=1e-15)
        assert_allclose(batch.curvature[row], alone.curvature, rtol=0, atol=1e-15)


def test_angle_of_a_travel_stays_on_the_stroke_and_lets_nan_through() -> None:
    # LAW: travels outside the stroke belong to its ends; what is not known stays so.
    found = crank_angle_at(np.array([-0.1, 0.0, 1.0, 1.2, np.nan]), 0.2, HEAD_END)
    assert_allclose(found, [0, 0, 180, 180, np.nan], atol=1e-6)


def test_mean_acceleration_of_a_turn_is_nothing() -> None:
    # LAW: a periodic motion gains no speed over a turn: the sum over equal steps vanishes.
    angle = np.arange(720) / 2
    gained = acceleration(angle, 0.1, 0.4, 12.0)
    assert abs(gained.mean()) < 1e-12 * gained.max()


def test_acceleration_grows_with_the_square_of_the_speed() -> None:
    # LAW: r w^2 times a function of the angle alone.
    slow, fast = (acceleration(ANGLE, 0.1, 0.4, speed) for speed in (5.0, 15.0))
    assert_allclose(fast, 9 * slow, rtol=1e-13)


def test_inputs_stay_as_they_are() -> None:
    # LAW: no change to what the caller hands in.
    angle = ANGLE.copy()
    motion(angle, 0.2, HEAD_END)
    np.testing.assert_array_equal(angle, ANGLE)


def test_books_that_cut_the_series_are_near() -> None:
    # SOURCE: KIN-07, KIN-12: Khurmi and Gupta, examples 15.3 and 15.4: fastest at 74.955 deg with
    # a rod of 1 m on a crank of 0.3 m, no acceleration at 79.272 deg with 1.5 m on 0.3 m, both with
    # two terms of the series; KIN-09: exact 74.529 deg.
    fine = np.linspace(60.0, 90.0, 30001)
    fastest = fine[np.argmax(motion(fine, 0.3, HEAD_END).slope)]
    assert fastest == pytest.approx(74.5289, abs=2e-3)
    assert fastest == pytest.approx(74.955, abs=0.5)
    still = fine[np.argmin(np.abs(acceleration(fine, 0.3, 1.5, 3.0)))]
    assert still == pytest.approx(79.272, abs=0.25)
