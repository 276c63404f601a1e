"""Losses in the valves: areas between the trace and the line pressures."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.card.lines import Crossing, Crossings
from pvcard.card.work import Running, integral_at
from pvcard.card_set import CardSet, Turning, curvature
from pvcard.kinematics import place
from pvcard.types import Floats
from pvcard.uncertainty import Estimate, constant


class Span(NamedTuple):
    """The stretch of a card over which a loss is taken."""

    first_angle: Floats  # (cards,) deg
    last_angle: Floats  # (cards,) deg
    first_travel: Floats  # (cards,) fraction of the stroke
    last_travel: Floats  # (cards,)


def _clipped(point: Crossing) -> Floats:
    return np.clip(point.travel, 0.0, 1.0)


def suction_span(at: Crossings) -> Span:
    """Stretch from where expansion reaches suction pressure to where compression leaves it.

    Parameters
    ----------
    at : Crossings

    Returns
    -------
    Span
    """
    first, last = at.expansion_end, at.compression_start
    return Span(first.crank_angle, last.crank_angle, _clipped(first), _clipped(last))


def discharge_span(at: Crossings) -> Span:
    """Stretch from where compression reaches discharge pressure to where expansion leaves it.

    Parameters
    ----------
    at : Crossings

    Returns
    -------
    Span
        It passes the dead centre: the last angle is smaller than the first.
    """
    first, last = at.compression_end, at.expansion_start
    return Span(first.crank_angle, last.crank_angle, _clipped(first), _clipped(last))


def trace_integral(cards: CardSet, turn: Turning, running: Running, span: Span) -> Floats:
    """Integral of ``p dx`` along the trace over a stretch.

    Parameters
    ----------
    cards, turn, running
        Of one batch.
    span : Span

    Returns
    -------
    integral : (cards,)
        [Pa]
    """
    first = integral_at(cards, turn, running, span.first_angle)
    last = integral_at(cards, turn, running, span.last_angle)
    passes = span.last_angle < span.first_angle
    return last - first + np.where(passes, running.turn, 0.0)


def valve_loss(
    cards: CardSet,
    turn: Turning,
    running: Running,
    span: Span,
    line_pressure: Estimate,
    noise: tuple[str, Floats],
) -> Estimate:
    """Loss per revolution against a constant line pressure.

    Parameters
    ----------
    cards, turn, running
        Of one batch.
    span : Span
        Of the suction or the discharge side.
    line_pressure : (cards,)
        [Pa]
    noise : name of the input that stands for the samples' noise, and its size [J]

    Returns
    -------
    loss : (cards,)
        ``integral of (p_line - p) dV``, signed: on the discharge side ``dV`` is negative and the
        same integral is ``(p - p_line) (-dV)``. [J]

    Notes
    -----
    At both ends trace and line pressure meet, so that moving the ends changes nothing of first
    order.
    """
    swept = cards.swept_volume
    width = span.last_travel - span.first_travel
    integral = trace_integral(cards, turn, running, span)
    inputs = line_pressure.slopes.shape[1]
    loss = line_pressure * (swept * width) - integral * swept
    if not inputs:
        return loss
    loss = loss.depending_on("pressure_level", swept * width)
    loss = loss.depending_on("pressure_gain", -integral * swept)
    loss = loss.depending_on("bore", loss.value * cards.area_by_bore)
    loss = loss.depending_on("stroke", loss.value)
    loss = loss.depending_on(
        "dead_centre", _by_mark(cards, turn, span, line_pressure.value) * swept
    )
    return loss.depending_on(noise[0], noise[1])


def _by_mark(cards: CardSet, turn: Turning, span: Span, line_pressure: Floats) -> Floats:
    """``- integral of (p_line - p) x''`` over the stretch, per degree."""
    grid = cards.crank_angle
    first, last = span.first_angle[:, None], span.last_angle[:, None]
    inside = np.where(
        last > first, (grid >= first) & (grid <= last), (grid >= first) | (grid <= last)
    )
    gap = (line_pressure[:, None] - cards.pressure) * inside
    gap *= turn.weight
    total: Floats = np.einsum("cs,cs->c", gap, curvature(cards, turn))
    return -total * (np.pi / 180)


class FlowIntegral(NamedTuple):
    """What a flow area is made of."""

    loss: Estimate  # (cards,) J over the open part up to the dead centre
    cube: Floats  # (cards,) integral of the cube of the piston's dimensionless speed


def open_part(
    cards: CardSet,
    turn: Turning,
    running: Running,
    opening: Floats,
    line_pressure: Estimate,
) -> FlowIntegral:
    """Loss and piston speed between the opening of a valve and the end of that stroke.

    Parameters
    ----------
    cards, turn, running
        Of one batch.
    opening : (cards,)
        Crank angle of the opening: below 180 for suction, above for discharge. [deg]
    line_pressure : (cards,)
        [Pa]

    Returns
    -------
    FlowIntegral
    """
    suction = opening < 180
    end = np.where(suction, 180.0, 360.0)
    travel = place(opening, cards.rod_ratio, cards.rod_sign).travel
    span = Span(opening, np.where(suction, 180.0, 0.0), travel, np.where(suction, 1.0, 0.0))
    integral = trace_integral(cards, turn, running, span)
    swept = cards.swept_volume
    width = span.last_travel - travel
    loss = line_pressure * (swept * width) - integral * swept
    loss = loss.depending_on("pressure_level", swept * width)
    loss = loss.depending_on("pressure_gain", -integral * swept)
    points, weights = np.polynomial.legendre.leggauss(16)
    half = (end - opening) / 2
    angle = opening[:, None] + half[:, None] * (points + 1)
    speed = np.abs(place(angle, cards.rod_ratio[:, None], cards.rod_sign[:, None]).slope)
    cube = np.einsum("cn,n->c", speed**3, weights) * half * np.pi / 180
    return FlowIntegral(loss, cube)


def flow_area(
    cards: CardSet,
    part: FlowIntegral,
    density: Floats,
    upstream_pressure: Floats,
    exponent: Floats,
    width: Floats,
) -> Estimate:
    """Effective flow area that explains the loss over the open part of a valve.

    Parameters
    ----------
    cards : CardSet
    part : FlowIntegral
    density : (cards,)
        Of the gas before the valve. [kg/m3]
    upstream_pressure : (cards,)
        [Pa]
    exponent : (cards,)
        Isentropic exponent. [-]
    width : (cards,)
        Share of the stroke during which the valve is open. [-]

    Returns
    -------
    area : (cards,)
        NaN where no loss is seen. [m2]

    Notes
    -----
    ``dp = rho / 2 (Q / area)^2`` with the piston's displacement as flow, integrated over the
    stroke, with the first term of the expansibility of a nozzle, ``1 - 3 dp / (4 k p)``.
    """
    swept = cards.swept_volume
    speed = 2 * np.pi * cards.speed
    size = constant(density * swept**3 * speed**2 * part.cube / 2, part.loss.slopes.shape[1])
    area = (size / part.loss).power(0.5)
    mean_drop = np.abs(part.loss.value) / (swept * np.maximum(width, 1e-6))
    return area / (1 - 0.75 / exponent * np.clip(mean_drop / upstream_pressure, 0, 0.3))
