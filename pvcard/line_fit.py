"""Fit of the closed spans: clearance, wall heat and start temperatures, with all that they rest on.

Gauss-Newton with the declared machine and published ranges as priors. Parameters that are not free
- the mark, the level, the gas - stay where they were declared, yet what their uncertainty does to
the fitted ones is carried exactly, so that later rooms may free them without another formula.

The noise of a trace is white between samples and, far larger in effect, correlated along the turn:
misfit of any gas and heat model. The scatter that the fit leaves scales it.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.card_set import CardSet
from pvcard.closed_lines import (
    PARAMETERS,
    PLACE,
    Linear,
    Problem,
    linearise,
    start_clearance,
    taken,
)
from pvcard.types import Booleans, Floats
from pvcard.uncertainty import FIT_NOISE, INDEX, INPUTS
from pvcard.windows import NODES

FREE = (
    "clearance",
    "compression_level",
    "expansion_level",
    "heat",
    "wall",
    "shape",
    "warming",
    "clearance_gas",
)
# Standard deviations of the priors. Annand's coefficient scatters by a factor of 1.65 among
# published machines;
# the others are judgements, of the size common practice sees (common practice, no source).
HEAT_PRIOR = 0.5
WALL_PRIOR = (0.5, 0.15)
SHAPE_PRIOR = 0.4
WARMING_PRIOR = 3.0  # K, beyond what the heat balance of the suction stroke says
CLEARANCE_GAS_PRIOR = 4.0  # K
MODEL_NOISE = 1e-4  # of pressure: misfit of any model of a closed line
CORRELATION_DEG = 8.0  # over which that misfit is alike
GAS_EXCHANGE = (
    2.2  # wall heat while gas flows in, over that of closed valves: Woschni's (6.18 / 2.28)^0.8
)
ITERATIONS = 12  # at most; most cards settle after four
CORNERS = (0, NODES - 1, NODES, 2 * NODES - 1)  # first and last node of compression, of expansion
# A card has settled once its next step is this small, squared and in standard deviations.
_SETTLED = 0.02
# Largest step of each free parameter.
_LARGEST = np.array([0.05, 1.0, 1.0, 0.7, 0.3, 0.5, 8.0, 8.0])
_RANGES = (
    ("clearance", 0.002, 3.0),
    ("heat", -np.log(5.0), np.log(5.0)),
    ("wall", -0.5, 1.5),
    ("shape", -0.95, 2.0),
    ("warming", -8.0, 45.0),
    ("clearance_gas", -22.0, 30.0),
)


class Fit(NamedTuple):
    """Fitted parameters of each card, what they rest on, and how well the model follows."""

    state: Floats  # (cards, parameters)
    slopes: Floats  # (cards, parameters, inputs), empty last axis without uncertainties
    linear: Linear  # at that state
    corner_slopes: Floats  # (cards, 4, inputs): modelled ln p at `CORNERS` by the inputs
    misfit: Floats  # (cards,) rms residual of ln p
    clearance_alone: Floats  # (cards,) fraction, as the trace alone has it
    clearance_alone_u: Floats  # (cards,)
    prior_kept: Booleans  # (cards,) whether the declared clearance took part


class _Priors(NamedTuple):
    mean: Floats  # (cards, free)
    weight: Floats  # (cards, free), one over variance
    # (cards, free): the heat balance of the suction stroke, linear in the free parameters
    row: Floats
    balance: Floats  # (cards,) K, its value at zero
    by_drop: Floats  # (cards,) K, change of that by the relative drop of pressure at the open valve


def fit_lines(
    case: Problem,
    *,
    clearance_uncertainty: Floats,
    white_noise: Floats,
    with_uncertainty: bool = True,
) -> Fit:
    """Fit the closed spans of every card.

    Parameters
    ----------
    case : Problem
        From `pvcard.closed_lines.problem`.
    clearance_uncertainty : (cards,)
        Standard uncertainty of the declared clearance, fraction of swept volume; infinite drops
        it. [-]
    white_noise : (cards,)
        Standard deviation of single samples, relative to pressure. [-]
    with_uncertainty : whether to carry derivatives by the inputs

    Returns
    -------
    Fit
        NaN for cards without closed spans.
    """
    cards = case.cards
    known = np.isfinite(cards.clearance) & np.isfinite(clearance_uncertainty)
    prior_u = np.where(known, clearance_uncertainty, np.inf)
    state, linear, priors, information = _solve(case, prior_u, white_noise)
    misfit = _misfit(linear)
    alone, alone_u = _without_prior(cards, state, information, prior_u)
    far = known & (np.abs(alone - cards.clearance) > 3 * np.hypot(prior_u, alone_u))
    if far.any():
        prior_u = np.where(far, np.inf, prior_u)
        state, linear, priors, information = _solve(case, prior_u, white_noise)
        misfit = _misfit(linear)
    if with_uncertainty:
        slopes = _slopes(case, linear, priors, information, white_noise, misfit)
        corners = _corner_slopes(case, linear, slopes)
    else:
        slopes = np.zeros((*state.shape, 0))
        corners = np.zeros((len(state), len(CORNERS), 0))
    return Fit(state, slopes, linear, corners, misfit, alone, alone_u, known & ~far)


def _solve(
    case: Problem, prior_u: Floats, white_noise: Floats
) -> tuple[Floats, Linear, _Priors, Floats]:
    """Gauss-Newton from the declared values; cards that have settled are left alone."""
    state = np.zeros((len(prior_u), len(PARAMETERS)))
    priors = _priors(case, prior_u)
    state[:, : len(FREE)] = priors.mean
    state[:, PLACE["clearance"]] = case.start
    state[:, PLACE["warming"]] = -_imbalance(priors, state)
    weight = _weights(case, white_noise)
    moving = np.flatnonzero(case.windows.found)
    part, own = case, priors
    before = state.copy()
    for _ in range(ITERATIONS):
        if not len(moving):
            break
        if len(moving) < len(part.ln_pressure):
            part, own = taken(case, moving), _Priors(*(one[moving] for one in priors))
        linear = linearise(part, state[moving], everything=False)
        step, left = _step(linear, weight[moving], own, state[moving])
        lost = ~np.isfinite(left)  # outside the states of the gas: go half the way back
        here = state[moving]
        state[moving, : len(FREE)] -= np.where(lost[:, None], 0.0, step)
        _keep_within(state)
        state[moving[lost]] = (here[lost] + before[moving[lost]]) / 2
        before[moving[~lost]] = here[~lost]
        settled = left <= _SETTLED
        moving = moving[~settled]
    state[~case.windows.found] = np.nan
    linear = linearise(case, state)
    information = _information(linear, weight, priors)
    unusable = ~np.all(np.isfinite(information), axis=(-1, -2))
    state[unusable] = np.nan  # part of a span lies outside the states of the gas
    return state, linear, priors, information


def _imbalance(priors: _Priors, state: Floats) -> Floats:
    """How far the heat balance of the suction stroke is missed. [K]."""
    result: Floats = priors.balance + np.einsum("cp,cp->c", priors.row, state[:, : len(FREE)])
    return result


def _step(linear: Linear, weight: Floats, priors: _Priors, state: Floats) -> tuple[Floats, Floats]:
    """Step of the free parameters to be taken off, no larger than the model is linear.

    Second comes what it is expected to gain, in units of the chi-square per degree of freedom: the
    square of the step in standard deviations.
    """
    free = slice(0, len(FREE))
    information = _information(linear, weight, priors)
    pull = np.einsum("cnp,cn->cp", linear.jacobian[..., free], weight * linear.residual)
    pull += priors.row * (_imbalance(priors, state) / WARMING_PRIOR**2)[:, None]
    pull += priors.weight * (state[:, free] - priors.mean)
    step = _solved(information, pull[..., None])[..., 0]
    scatter = np.einsum("cn,cn,cn->c", weight, linear.residual, linear.residual)
    gain = np.einsum("cp,cp->c", step, pull) / (1 + scatter / linear.residual.shape[-1])
    return np.clip(step, -_LARGEST, _LARGEST), gain


def _keep_within(state: Floats) -> None:
    """Hold parameters within what is physically possible."""
    for name, lowest, highest in _RANGES:
        column = state[:, PLACE[name]]
        np.clip(column, lowest, highest, out=column)


def _solved(matrix: Floats, right: Floats) -> Floats:
    """Solve for each card; NaN where the card has no numbers."""
    good: Booleans = np.all(np.isfinite(matrix), axis=(-1, -2))
    safe = np.where(good[:, None, None], matrix, np.eye(matrix.shape[-1]))
    result = np.linalg.solve(safe, np.where(good[:, None, None], right, 0.0))
    result[~good] = np.nan
    return result


def _weights(case: Problem, white_noise: Floats) -> Floats:
    """Weight of each node so that alike errors of neighbours are not counted as independent."""
    cards = len(case.ln_pressure)
    angle = case.crank_angle.reshape(cards, 2, NODES)
    length = angle[:, :, -1] - angle[:, :, 0]
    independent = 1 + length / (2 * CORRELATION_DEG)
    variance = MODEL_NOISE**2 * NODES / np.minimum(independent, NODES)
    variance = variance + np.square(white_noise)[:, None] / np.minimum(case.width, 1e9)
    return np.repeat(1 / variance, NODES, axis=-1)


def _information(linear: Linear, weight: Floats, priors: _Priors) -> Floats:
    part = linear.jacobian[..., : len(FREE)]
    matrix: Floats = np.swapaxes(part, -1, -2) @ (weight[..., None] * part)
    matrix += priors.row[:, :, None] * priors.row[:, None, :] / WARMING_PRIOR**2
    place = np.arange(len(FREE))
    matrix[:, place, place] += priors.weight
    return matrix


def _priors(case: Problem, prior_u: Floats) -> _Priors:
    cards = case.cards
    count = len(cards.pressure)
    mean = np.zeros((count, len(FREE)))
    weight = np.zeros_like(mean)
    mean[:, 0], weight[:, 0] = start_clearance(cards), 1 / np.square(prior_u)
    weight[:, 1:3] = 1e-6  # levels are free; a trace of weight keeps the matrix regular
    weight[:, 3] = 1 / HEAT_PRIOR**2
    mean[:, 4], weight[:, 4] = WALL_PRIOR[0], 1 / WALL_PRIOR[1] ** 2
    weight[:, 5] = 1 / SHAPE_PRIOR**2
    weight[:, 7] = 1 / CLEARANCE_GAS_PRIOR**2
    row, balance, by_drop = _suction_balance(case)
    mean[:, 7] = _clearance_gas_mean(case)
    return _Priors(mean, weight, row, balance, by_drop)


def _at_open_suction(cards: CardSet) -> Booleans:
    """Samples at which the suction valve of any working end is open."""
    return (cards.crank_angle > 90) & (cards.crank_angle < 170)


def _suction_balance(case: Problem) -> tuple[Floats, Floats, Floats]:
    """Warming of the gas drawn in, less what heat, loss and clearance gas would make of it.

    Notes
    -----
    First law of the suction stroke, gas of constant heat capacity: fresh gas takes heat from the
    wall and the work lost in the valve; the gas left in the clearance mixes in with its own
    temperature.
    """
    cards, known = case.cards, case.references
    clearance = start_clearance(cards)
    expanded = clearance * known.path.density2 / known.path.density1
    share = np.clip(expanded / (1 + clearance), 0.0, 0.9)
    mass = known.suction.density * cards.swept_volume * (1 + clearance)
    opening = np.degrees(np.arccos(np.clip(1 - 2 * (expanded - clearance), -1, 1)))
    time = (180 - opening) / 360 / cards.speed
    area = 2 * cards.piston_area + np.pi * cards.bore * cards.stroke * (clearance + 0.6)
    gain = GAS_EXCHANGE * known.heat_rate * area * time / mass
    gain = gain / known.suction.enthalpy_by_temperature
    span = known.path.temperature - cards.suction_temperature
    shown = cards.pressure[:, _at_open_suction(cards)].mean(-1)
    drop = 1 - shown / cards.suction_pressure
    exponent = known.path.temperature_exponent
    loss = cards.suction_temperature * (exponent - 1) / exponent * np.clip(drop, 0, 0.2)
    # warming (1 - share + gain / 2) = gain wall span + loss + share (clearance gas), gain ~
    # exp(heat)
    row = np.zeros((len(span), len(FREE)))
    row[:, 6] = 1
    mixed = 1 / (1 - share + gain / 2)
    expected = gain * span * WALL_PRIOR[0] * mixed
    row[:, 3] = -expected / (1 + 0.5 * gain * mixed)
    row[:, 4] = -gain * span * mixed
    row[:, 7] = -share * mixed
    by_drop = np.where((drop > 0) & (drop < 0.2), -mixed * loss / np.where(drop == 0, 1, drop), 0)
    return row, -(loss * mixed) - (expected + row[:, 4] * WALL_PRIOR[0]), by_drop


def _clearance_gas_mean(case: Problem) -> Floats:
    """Cooling of the gas in the clearance while the piston turns, followed to suction pressure.
    [K]."""
    cards, known = case.cards, case.references
    density = known.path.density2
    rate = known.heat_rate * np.power(density / known.path.density1, 0.7)
    depth = start_clearance(cards) * cards.stroke
    time = 50 / 360 / cards.speed
    decay = rate * 2 / (density * depth) * time / known.suction.enthalpy_by_temperature
    excess = known.path.temperature - cards.suction_temperature
    fall = (1 - WALL_PRIOR[0]) * excess * -np.expm1(-decay)
    return -fall * cards.suction_temperature / known.path.temperature


def _misfit(linear: Linear) -> Floats:
    misfit: Floats = np.sqrt(np.mean(np.square(linear.residual), axis=-1))
    return misfit


def _without_prior(
    cards: CardSet, state: Floats, information: Floats, prior_u: Floats
) -> tuple[Floats, Floats]:
    """What the trace alone says of the clearance: the prior taken out of the Gaussian again."""
    right = np.zeros((*state[:, : len(FREE)].shape, 1))
    right[:, 0] = 1
    variance = _solved(information, right)[:, 0, 0]
    weight = 1 / variance - 1 / np.square(prior_u)
    own = state[:, 0] / variance - start_clearance(cards) / np.square(prior_u)
    with np.errstate(divide="ignore", invalid="ignore"):
        alone = np.where(weight > 0, own / weight, np.nan)
        return alone, np.where(weight > 0, 1 / np.sqrt(np.abs(weight)), np.inf)


def _slopes(
    case: Problem,
    linear: Linear,
    priors: _Priors,
    information: Floats,
    white_noise: Floats,
    misfit: Floats,
) -> Floats:
    """Derivatives of all parameters by all inputs, from the conditions of the minimum."""
    free = len(FREE)
    count = len(information)
    weight = _weights(case, white_noise)
    part = np.swapaxes(linear.jacobian[..., :free] * weight[..., None], -1, -2)
    gain = _solved(information, part)  # (cards, free, 2 nodes)
    slopes = np.zeros((count, len(PARAMETERS), len(INPUTS)))
    for name, column in _considered(case, linear):
        slopes[:, :free, INDEX[name]] -= np.einsum("cfn,cn->cf", gain, column)
    inverse = _solved(information, np.broadcast_to(np.eye(free), information.shape))
    for name, place in (
        ("clearance", 0),
        ("heat_multiplier", 3),
        ("wall_temperature", 4),
        ("heat_shape", 5),
        ("clearance_gas", 7),
    ):
        slopes[:, :free, INDEX[name]] += inverse[:, :, place] * priors.weight[:, place, None]
    balance = np.einsum("cfg,cg->cf", inverse, priors.row) / WARMING_PRIOR**2
    slopes[:, :free, INDEX["warming"]] += balance
    # The drop is 1 - (mean trace) / (line pressure): it moves with level, gain and line pressure.
    drop = balance * priors.by_drop[:, None]
    shown = case.cards.pressure[:, _at_open_suction(case.cards)].mean(-1)
    line = case.cards.suction_pressure
    slopes[:, :free, INDEX["pressure_level"]] -= drop / line[:, None]
    slopes[:, :free, INDEX["pressure_gain"]] += drop * (shown / line)[:, None]
    slopes[:, :free, INDEX["suction_pressure"]] -= drop * (shown / line**2)[:, None]
    first = INDEX["line_noise_1"]
    slopes[:, :free, first : first + FIT_NOISE] = _noise_factors(case, gain, white_noise, misfit)
    slopes[:, PLACE["dead_centre"], INDEX["dead_centre"]] = 1
    slopes[:, PLACE["pressure_level"], INDEX["pressure_level"]] = 1
    slopes[:, PLACE["pressure_gain"], INDEX["pressure_gain"]] = 1
    slopes[:, PLACE["rod_ratio"], INDEX["stroke"]] = 1
    slopes[:, PLACE["rod_ratio"], INDEX["connecting_rod_length"]] = -1
    slopes[:, PLACE["exponent"], INDEX["gas_exponent"]] = 1
    return slopes


def _considered(case: Problem, linear: Linear) -> list[tuple[str, Floats]]:
    """Derivatives of the residual by inputs that the fit does not free."""
    jacobian = linear.jacobian
    rod = jacobian[..., PLACE["rod_ratio"]]
    return [
        ("dead_centre", jacobian[..., PLACE["dead_centre"]]),
        ("pressure_level", jacobian[..., PLACE["pressure_level"]]),
        ("pressure_gain", jacobian[..., PLACE["pressure_gain"]]),
        ("stroke", rod),
        ("connecting_rod_length", -rod),
        ("gas_exponent", jacobian[..., PLACE["exponent"]]),
        ("suction_temperature", jacobian[..., PLACE["warming"]]),
    ]


def _noise_factors(case: Problem, gain: Floats, white_noise: Floats, misfit: Floats) -> Floats:
    """Square root of the covariance that noise and misfit of the trace leave in the parameters."""
    count = len(gain)
    angle = case.crank_angle.reshape(count, 2, NODES)
    apart = np.abs(angle[..., :, None] - angle[..., None, :])
    white = np.square(white_noise)[:, None] / np.maximum(case.width, 1e-9)
    expected = np.sqrt(MODEL_NOISE**2 + white.mean(-1))
    scale = np.square(np.maximum(MODEL_NOISE, MODEL_NOISE * misfit / expected))
    noise = scale[:, None, None, None] * np.exp(-apart / CORRELATION_DEG)
    place = np.arange(NODES)
    noise[..., place, place] += white[..., None]
    halves = gain.reshape(count, len(FREE), 2, NODES).transpose(0, 2, 1, 3)
    covariance = (halves @ noise @ np.swapaxes(halves, -1, -2)).sum(1)
    size = np.sqrt(np.einsum("cff->cf", covariance))
    size = np.where(size > 0, size, 1.0)
    scaled = covariance / (size[:, :, None] * size[:, None, :])
    good = np.isfinite(scaled).all((-1, -2))
    scaled = np.where(good[:, None, None], scaled, np.eye(len(FREE)))
    root = np.linalg.cholesky(scaled + 1e-9 * np.eye(len(FREE)))
    factors: Floats = np.where(good[:, None, None], root, np.nan) * size[:, :, None]
    return factors


def _corner_slopes(case: Problem, linear: Linear, slopes: Floats) -> Floats:
    """Change of the modelled line at the ends of both spans, crank angle fixed, with every
    input."""
    jacobian = linear.jacobian[:, CORNERS, :]
    result: Floats = -(jacobian @ slopes)
    result[..., INDEX["suction_temperature"]] -= jacobian[..., PLACE["warming"]]
    pressure = np.exp(case.ln_pressure[:, CORNERS])
    result[..., INDEX["pressure_level"]] -= 1 / pressure
    result[..., INDEX["pressure_gain"]] += 1
    return result
