"""Estimates: their rules of calculus, the law of propagation, and what terms of a sum share."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from numpy.testing import assert_allclose

from pvcard.uncertainty import (
    CARD,
    CYLINDER,
    INDEX,
    INPUTS,
    MACHINE,
    UNIT_INPUTS,
    Estimate,
    constant,
    sum_uncertainty,
)

ONE, TWO = "bore", "speed"  # inputs that stand for any two
FACTOR = np.array([2.0, -0.5, 3.0])
Rule = Callable[[Estimate, Estimate], Estimate]


def pair(first: float = 0.0, second: float = 0.0) -> tuple[Estimate, Estimate]:
    """Two figures of three cards, moved by changes of two inputs."""
    x = constant(np.array([1.0, 2.0, 3.5]) + 2.0 * first - 0.3 * second, len(INPUTS))
    y = constant(np.array([4.0, 0.5, 1.25]) + 0.7 * second, len(INPUTS))
    x = x.depending_on(ONE, 2.0).depending_on(TWO, -0.3)
    return x, y.depending_on(TWO, 0.7)


RULES: dict[str, Rule] = {
    "sum": lambda x, y: x + y,
    "difference": lambda x, y: x - y,
    "product": lambda x, y: x * y,
    "quotient": lambda x, y: x / y,
    "negative": lambda x, y: -x + 0.0 * y,
    "number on the left": lambda x, y: 3.0 - x + 2.0 / y,
    "array on the left": lambda x, y: FACTOR * x + FACTOR - y,
    "array on the right": lambda x, y: x * FACTOR + y / FACTOR + FACTOR,
    "logarithm": lambda x, y: (x * y).log(),
    "exponential": lambda x, y: (x / y).exp(),
    "power": lambda x, y: (x * y).power(1.3),
    "power of each card": lambda x, y: (x + y).power(np.array([0.5, 2.0, -1.0])),
    "long chain": lambda x, y: (x.power(1.4) * y.log() - x / (y + 2.0)).exp() / x,
}


@pytest.mark.parametrize("name", RULES)
def test_derivatives_are_those_of_the_value(name: str) -> None:
    # LIMIT: central difference of the same expression by each input.
    step = 1e-6
    found = RULES[name](*pair())
    for place, move in ((INDEX[ONE], (step, 0.0)), (INDEX[TWO], (0.0, step))):
        more, less = RULES[name](*pair(*move)), RULES[name](*pair(-move[0], -move[1]))
        slope = (more.value - less.value) / (2 * step)
        assert_allclose(found.slopes[:, place], slope, rtol=1e-6, atol=1e-8)
    others = np.delete(found.slopes, [INDEX[ONE], INDEX[TWO]], axis=1)
    assert not others.any()


def test_a_figure_less_itself_is_certain() -> None:
    # LAW: fully correlated with itself (JCGM 100, 5.2.2).
    x, _ = pair()
    assert not (x - x).uncertainty(np.ones((3, len(INPUTS)))).any()
    assert not (x / x).uncertainty(np.ones((3, len(INPUTS)))).any()


def test_independent_inputs_add_in_squares() -> None:
    # LAW: JCGM 100 equation 10: u^2 = (2 * 0.1)^2 + (0.3 * 0.5)^2.
    sizes = np.zeros((3, len(INPUTS)))
    sizes[:, INDEX[ONE]], sizes[:, INDEX[TWO]] = 0.1, 0.5
    x, _ = pair()
    assert_allclose(x.uncertainty(sizes), np.hypot(0.2, 0.15))
    assert_allclose(x.contributions(sizes)[:, INDEX[TWO]], -0.15)


def test_without_inputs_the_values_are_the_same() -> None:
    # LAW: carrying derivatives changes no value, and leaving them out is no error.
    for name, rule in RULES.items():
        bare = [Estimate(one.value, one.slopes[:, :0]) for one in pair()]
        found = rule(bare[0].depending_on(ONE, 5.0), bare[1])
        assert found.slopes.shape == (3, 0)
        np.testing.assert_array_equal(found.value, rule(*pair()).value, err_msg=name)


def test_logarithm_and_power_of_a_negative_number_are_unknown_and_quiet() -> None:
    # LAW: one bad card leaves its neighbours alone.
    x = constant(np.array([-1.0, 2.0]), len(INPUTS)).depending_on(ONE, 1.0)
    for found in (x.log(), x.power(0.5)):
        assert np.isnan(found.value[0])
        assert np.isfinite(found.value[1])
        assert np.isfinite(found.slopes[1]).all()


def test_figures_stay_as_they_are() -> None:
    # LAW: no change to what the caller hands in.
    x, y = pair()
    kept = x.value.copy(), x.slopes.copy()
    x.depending_on(ONE, 7.0)
    x.where(np.array([True, False, True]))
    _ = x * y / x
    np.testing.assert_array_equal(x.value, kept[0])
    np.testing.assert_array_equal(x.slopes, kept[1])


@pytest.mark.parametrize(
    ("shared", "expected"),
    [
        # LAW: JCGM 100 equation 16 with correlations one and zero, terms 1, 2 and 4 of which the
        # first two are of one cylinder.
        (MACHINE, 1 + 2 + 4),
        (CYLINDER, np.hypot(1 + 2, 4)),
        (CARD, np.sqrt(1 + 4 + 16)),
    ],
)
def test_sum_honours_who_shares_an_input(shared: str, expected: float) -> None:
    for place, one in enumerate(INPUTS):
        if one.shared_by != shared:
            continue
        shares = np.zeros((3, len(INPUTS)))
        shares[:, place] = [1.0, 2.0, 4.0]
        u = sum_uncertainty(shares, ["C1", "C1", "C2"])
        assert u == pytest.approx(expected), one.name


def test_sum_of_one_term_is_that_term() -> None:
    # LAW: nothing to share.
    rng = np.random.default_rng(3)
    shares = rng.standard_normal((1, len(INPUTS)))
    assert sum_uncertainty(shares, ["C1"]) == pytest.approx(float(np.linalg.norm(shares)))


def test_sum_does_not_depend_on_the_order_of_its_terms() -> None:
    # LAW: addition commutes.
    rng = np.random.default_rng(4)
    shares, names = rng.standard_normal((5, len(INPUTS))), ["B", "A", "B", "C", "A"]
    order = [3, 0, 4, 2, 1]
    mixed = sum_uncertainty(shares[order], [names[place] for place in order])
    assert mixed == pytest.approx(sum_uncertainty(shares, names))


def test_two_ends_with_one_mark_against_drawing() -> None:
    # LAW: JCGM 101: the sum of two figures that share one input and own another each, drawn; 20000
    # draws know a deviation to 0.5 %.
    rng = np.random.default_rng(11)
    mark, level = rng.standard_normal(20000), rng.standard_normal((20000, 2))
    total = (3 * mark + 2 * level[:, 0]) + (-1 * mark + 4 * level[:, 1])
    shares = np.zeros((2, len(INPUTS)))
    shares[:, INDEX["dead_centre"]] = [3, -1]
    shares[:, INDEX["pressure_level"]] = [2, 4]
    u = sum_uncertainty(shares, ["C1", "C1"])
    assert u == pytest.approx(total.std(), rel=0.02)


def test_names_of_inputs_are_one_each() -> None:
    # LAW: a name stands for one input; each says who shares it.
    assert len(INDEX) == len(INPUTS)
    assert set(UNIT_INPUTS) < set(INDEX)
    assert all(one.shared_by in (CARD, CYLINDER, MACHINE) and one.text for one in INPUTS)
