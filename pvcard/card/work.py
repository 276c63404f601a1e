"""Indicated work and the running integral of p dV from which losses are cut."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.card_set import CardSet, Turning, curvature
from pvcard.kinematics import place, travel_by_ratio
from pvcard.types import Floats
from pvcard.uncertainty import Estimate, constant

_RADIAN = np.pi / 180


def indicated_work(cards: CardSet, turn: Turning, white_noise: Floats, inputs: int) -> Estimate:
    """Work taken in per revolution, the area of each closed loop.

    Parameters
    ----------
    cards, turn
        Of one batch.
    white_noise : (cards,)
        Standard deviation of single samples, relative to pressure. [-]
    inputs : number of inputs carried, 0 for none

    Returns
    -------
    work : (cards,)
        Positive when the gas takes work in. NaN where a sample is NaN. [J]

    Notes
    -----
    ``W = - closed integral of p (dV/d theta) d theta`` with the exact ``dV/d theta``: over a
    closed turn the trapezoid rule in the angle converges faster than in the volume [1]_. The
    difference from every second sample, a third of it, is carried as the error of the spacing.

    References
    ----------
    .. [1] L. N. Trefethen and J. A. C. Weideman, "The exponentially convergent trapezoidal rule",
    SIAM
       Review 56 (2014) 385.
    """
    slope = turn.motion.slope
    weighted = cards.pressure * turn.weight
    loop = np.einsum("cs,cs->c", weighted, slope)
    swept = cards.swept_volume
    work = -loop * swept
    if not inputs:
        return constant(work, 0)
    by_angle = np.einsum("cs,cs->c", weighted, curvature(cards, turn)) * swept * _RADIAN
    by_ratio = -np.einsum("cs,cs->c", weighted, _slope_by_ratio(cards, turn)) * swept
    by_ratio *= cards.rod_ratio
    estimate = constant(work, inputs).depending_on("dead_centre", by_angle)
    estimate = estimate.depending_on("pressure_gain", work)
    estimate = estimate.depending_on("bore", work * cards.area_by_bore)
    estimate = estimate.depending_on("stroke", work + by_ratio)
    estimate = estimate.depending_on("connecting_rod_length", -by_ratio)
    spread = np.sqrt(np.einsum("cs,cs->c", np.square(weighted), np.square(slope)))
    noise = np.hypot(white_noise * swept * spread, _spacing_error(cards, turn, loop) * swept)
    return estimate.depending_on("noise_work", noise)


def _slope_by_ratio(cards: CardSet, turn: Turning) -> Floats:
    return travel_by_ratio(
        turn.sine[None, :], turn.cosine[None, :], cards.rod_ratio[:, None], cards.rod_sign[:, None]
    )[1]


def _spacing_error(cards: CardSet, turn: Turning, loop: Floats) -> Floats:
    samples = cards.pressure.shape[-1]
    if samples % 2:
        return np.zeros(len(loop))
    step = turn.weight[::2] + (turn.weight[1::2] + np.roll(turn.weight[1::2], 1)) / 2
    coarse = np.einsum(
        "cs,cs,s->c", cards.pressure[:, ::2], turn.motion.slope[:, ::2], step, optimize=True
    )
    error: Floats = np.abs(coarse - loop) / 3
    return error


class Running(NamedTuple):
    """Integral of p dx along the turn, x being the fraction of the stroke."""

    total: Floats  # (cards, samples), from the first sample
    turn: Floats  # (cards,), over the whole turn


def running_integral(cards: CardSet, turn: Turning) -> Running:
    """Integral of ``p dx`` from the first sample to each, by trapezoids.

    Parameters
    ----------
    cards, turn
        Of one batch.

    Returns
    -------
    Running
        [Pa]
    """
    pressure, travel = cards.pressure, turn.motion.travel
    total = np.empty_like(pressure)
    total[:, 0] = 0
    np.add(pressure[:, 1:], pressure[:, :-1], out=total[:, 1:])
    total[:, 1:] *= np.subtract(travel[:, 1:], travel[:, :-1])
    np.cumsum(total, axis=-1, out=total)
    total *= 0.5
    closing = (pressure[:, 0] + pressure[:, -1]) * (travel[:, 0] - travel[:, -1]) / 2
    return Running(total, total[:, -1] + closing)


def integral_at(cards: CardSet, turn: Turning, running: Running, crank_angle: Floats) -> Floats:
    """Running integral at any crank angle, the trace taken as straight between samples.

    Parameters
    ----------
    cards, turn, running
        Of one batch.
    crank_angle : (cards,)
        From the own dead centre, within [0, 360). NaN gives NaN. [deg]

    Returns
    -------
    integral : (cards,)
        [Pa]
    """
    grid = cards.crank_angle
    known = np.where(np.isfinite(crank_angle), crank_angle, 0.0)
    left = np.clip(np.searchsorted(grid, known, side="right") - 1, 0, len(grid) - 2)
    row = np.arange(len(known))
    pressure = cards.pressure[row, left]
    step = grid[left + 1] - grid[left]
    share = (known - grid[left]) / step
    there = pressure + share * (cards.pressure[row, left + 1] - pressure)
    travel = place(known, cards.rod_ratio, cards.rod_sign).travel
    part = (pressure + there) / 2 * (travel - turn.motion.travel[row, left])
    return np.where(np.isfinite(crank_angle), running.total[row, left] + part, np.nan)
