"""Model of a card's closed spans: real gas, wall heat, clearance; residuals and their derivatives.

With both valves shut the mass is constant and entropy changes only by heat [1]_. A trapped gas
whose pressure is measured and whose volume is known up to the clearance therefore obeys, at every
angle of a span,

    s(p, m / V) = s(start) + integral of dQ / (m T),

with the entropy of the real gas and dQ by Annand's coefficient [2]_ with free size, wall
temperature and course. Divided by the slope of entropy with ``ln p`` the difference is a residual
in ``ln p``. No polytropic exponent enters: fitting exponents together with the clearance is the
wrong estimator, since wall heat then passes for clearance.

References
----------
.. [1] First and second law for a closed system; e.g. M. J. Moran and H. N. Shapiro, *Fundamentals
of
   Engineering Thermodynamics*, chapter 6.
.. [2] See `pvcard.heat.annand_nusselt`.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.card_set import CardSet, Turning
from pvcard.gas_table import IsentropicSlopes, TableState
from pvcard.heat import annand_nusselt
from pvcard.kinematics import Place, place_from_sine, travel_by_ratio
from pvcard.types import Floats, Integers
from pvcard.windows import NODES, Windows, span_means

PARAMETERS = (
    "clearance",  # fraction of swept volume
    "compression_level",  # ln p
    "expansion_level",  # ln p
    "heat",  # natural logarithm of the multiplier of the wall heat
    "wall",  # place of the wall between suction and ideal discharge temperature, 0 to 1
    "shape",  # share of a second harmonic in the wall heat
    "warming",  # K above suction line temperature, of the compression line at suction pressure
    "clearance_gas",  # K, expansion line above compression line, at suction pressure
    "dead_centre",  # deg, shift of the mark
    "pressure_level",  # Pa shown above the truth
    "pressure_gain",  # relative
    "rod_ratio",  # natural logarithm
    "exponent",  # natural logarithm of a factor on the gas's volume exponent
)
PLACE = {name: number for number, name in enumerate(PARAMETERS)}
COMPRESSION, EXPANSION = slice(0, NODES), slice(NODES, 2 * NODES)
_ANNAND = 0.55  # middle of the published 0.35 to 0.8
_RADIAN = np.pi / 180


class References(NamedTuple):
    """Gas states that a card is measured against; each (cards,)."""

    suction: TableState  # at the suction line
    path: IsentropicSlopes  # isentropic from there to discharge pressure
    heat_rate: Floats  # (cards,) W/(m2 K), Annand's coefficient at the suction line state


class Problem(NamedTuple):
    """Nodes of the closed spans and all that stays fixed while a fit moves."""

    cards: CardSet
    references: References
    windows: Windows
    sine: Floats  # (cards, 2 nodes), of the crank angle
    cosine: Floats
    crank_angle: Floats  # (cards, 2 nodes) deg
    start: Floats  # (cards,) clearance from which a fit starts: two points of the expansion
    declared: Place  # (cards, 2 nodes), motion at the declared mark and rod
    ln_pressure: Floats  # (cards, 2 nodes)
    width: Floats  # (cards, 2) samples per node


class Linear(NamedTuple):
    """Residuals and what they depend on, at one state of the parameters."""

    residual: Floats  # (cards, 2 nodes), measured less modelled ln p
    jacobian: Floats  # (cards, 2 nodes, parameters)
    ln_volume: Floats  # (cards, 2 nodes), over the swept volume
    exponent: Floats  # (cards, 2 nodes), of the gas: -(v/p) (dp/dv) at constant entropy
    heat_slope: Floats  # (cards, 2 nodes), change of modelled ln p by heat per radian


def references(cards: CardSet) -> References:
    """Gas states each card is measured against.

    Parameters
    ----------
    cards : CardSet

    Returns
    -------
    References
        NaN where the table of the gas does not reach.
    """
    suction = cards.table.state(cards.suction_pressure, cards.suction_temperature)
    path = cards.table.isentropic(
        cards.suction_pressure, cards.suction_temperature, cards.discharge_pressure
    )
    temperature = cards.suction_temperature
    viscosity, conductivity = cards.gas.viscosity(temperature), cards.gas.conductivity(temperature)
    piston_speed = 2 * cards.stroke * cards.speed
    reynolds = suction.density * piston_speed * cards.bore / viscosity
    rate = annand_nusselt(reynolds, _ANNAND) * conductivity / cards.bore
    return References(suction, path, rate)


def problem(cards: CardSet, turn: Turning, windows: Windows, known: References) -> Problem:
    """Condense the closed spans of each card into nodes.

    Parameters
    ----------
    cards, turn, windows, known
        Of the same batch.

    Returns
    -------
    Problem

    Notes
    -----
    Before samples are averaged into nodes the trace is flattened with the mean exponent of the gas
    and the declared clearance; what is left is nearly straight, so that averaging adds no curvature
    error.
    """
    exponent = known.path.volume_exponent[:, None]
    start = _two_point_clearance(cards, turn, windows, known.path.volume_exponent)
    guess = start[:, None]
    with np.errstate(invalid="ignore", divide="ignore"):
        flat = np.log(cards.pressure) + exponent * np.log(guess + turn.motion.travel)
    bins = span_means(flat, cards.crank_angle, windows)
    angle = np.radians(bins.crank_angle)
    sine, cosine = np.sin(angle), np.cos(angle)
    at = place_from_sine(sine, cosine, cards.rod_ratio[:, None], cards.rod_sign[:, None])
    ln_pressure = bins.mean - exponent * np.log(guess + at.travel)
    return Problem(
        cards, known, windows, sine, cosine, bins.crank_angle, start, at, ln_pressure, bins.width
    )


def _two_point_clearance(
    cards: CardSet, turn: Turning, windows: Windows, exponent: Floats
) -> Floats:
    """Clearance that joins the ends of the expansion span by the mean exponent of the gas.

    Notes
    -----
    ``C = (x_B - q x_A) / (q - 1)`` with ``q = (p_A / p_B)^(1/n)``; as declared where that is
    absurd.
    """
    row = np.arange(len(exponent))
    first, last = windows.expansion_first, windows.expansion_last
    travel = turn.motion.travel
    with np.errstate(invalid="ignore", divide="ignore"):
        q = (cards.pressure[row, first] / cards.pressure[row, last]) ** (1 / exponent)
        found = (travel[row, last] - q * travel[row, first]) / (q - 1)
    good = np.isfinite(found) & (found > 0.005) & (found < 5.0)
    return np.where(good, found, start_clearance(cards))


def taken(case: Problem, rows: Integers) -> Problem:
    """Some cards of a problem, for further steps of a fit; their traces are left behind.

    Parameters
    ----------
    case : Problem
    rows : numbers of the cards

    Returns
    -------
    Problem
    """
    known = case.references
    return Problem(
        case.cards.rows(rows),
        References(
            TableState(*(one[rows] for one in known.suction)),
            IsentropicSlopes(*(one[rows] for one in known.path)),
            known.heat_rate[rows],
        ),
        case.windows.rows(rows),
        case.sine[rows],
        case.cosine[rows],
        case.crank_angle[rows],
        case.start[rows],
        Place(*(one[rows] for one in case.declared)),
        case.ln_pressure[rows],
        case.width[rows],
    )


def start_clearance(cards: CardSet) -> Floats:
    """Clearance from which a fit starts: as declared, else a middling one.

    Parameters
    ----------
    cards : CardSet

    Returns
    -------
    clearance : (cards,)
        Fraction of swept volume. [-]
    """
    return np.where(np.isfinite(cards.clearance), cards.clearance, 0.15)


class _Gas(NamedTuple):
    """State of the trapped gas at the nodes; each (cards, 2 nodes)."""

    ln_density: Floats
    start: Floats  # K, of the line followed to suction pressure
    by_temperature: Floats  # (cards, 1), change of ln density by ln temperature
    fall: Floats  # ln volume over that at the first node
    exponent: Floats  # -(v/p) (dp/dv) at constant entropy
    slope: Floats  # J/(kg K), change of entropy by ln p
    rise: Floats  # ln p: entropy gained since the first node


class _Heat(NamedTuple):
    """Heat to the trapped gas at the nodes; each (cards, 2 nodes)."""

    base: Floats  # change of ln p by heat, per radian and kelvin of difference, multiplier included
    difference: Floats  # K, wall less gas
    harmonic: Floats
    shape: Floats  # 1 + shape times harmonic
    temperature: Floats  # K, of the gas


def _trapped_gas(case: Problem, state: Floats, ln_p: Floats, ln_volume: Floats) -> _Gas:
    cards, known = case.cards, case.references
    suction = cards.suction_temperature[:, None]
    start = np.repeat(suction + state[:, PLACE["warming"], None], 2 * NODES, axis=-1)
    start[:, EXPANSION] += state[:, PLACE["clearance_gas"], None]
    by_temperature = known.suction.ln_density_by_temperature[:, None] * suction
    ends = start[:, ::NODES] / suction
    ln_line = np.log(known.suction.density)[:, None] + by_temperature * np.log(ends)
    relative = ln_p[:, ::NODES] - np.log(cards.suction_pressure)[:, None]
    ln_anchor = ln_line + relative / known.path.volume_exponent[:, None]
    fall = _anchored(ln_volume)
    ln_density = np.repeat(ln_anchor, NODES, axis=-1) - fall
    gas = cards.table.entropy_from_density(ln_p, ln_density)
    exponent = -gas.d_ln_rho / gas.d_ln_p
    rise = _anchored(gas.entropy) / gas.d_ln_p
    rise += exponent * state[:, PLACE["exponent"], None] * fall
    return _Gas(ln_density, start, by_temperature, fall, exponent, gas.d_ln_p, rise)


def _wall_heat(case: Problem, state: Floats, gas: _Gas, ln_p: Floats, clear: Floats) -> _Heat:
    cards, known = case.cards, case.references
    suction = cards.suction_temperature
    exponent = known.path.temperature_exponent[:, None]
    relative = ln_p - np.log(cards.suction_pressure)[:, None]
    temperature = gas.start * np.exp(relative * ((exponent - 1) / exponent))
    span = known.path.temperature - suction
    wall = (suction + state[:, PLACE["wall"]] * span)[:, None]
    # Annand's coefficient goes with rho^0.7, the mass with rho V: the rest goes with rho^-0.3.
    # Area over swept volume is ends + sides times the volume over the swept volume.
    ends = 2 / cards.stroke
    sides = np.pi * cards.bore / cards.piston_area
    size = known.heat_rate / (2 * np.pi * cards.speed) / np.power(known.suction.density, 0.7)
    size = size * np.exp(state[:, PLACE["heat"]])
    area = ends[:, None] + sides[:, None] * clear
    base = size[:, None] * area / clear * np.exp(-0.3 * gas.ln_density)
    base /= temperature * gas.slope
    harmonic = 2 * np.square(case.cosine) - 1
    shape = 1 + state[:, PLACE["shape"], None] * harmonic
    return _Heat(base, wall - temperature, harmonic, shape, temperature)


def _running(rate: Floats, crank_angle: Floats) -> Floats:
    """Integral of a rate per radian from the first node of each span, by trapezoids."""
    cards = len(rate)
    shaped = rate.reshape(cards, 2, NODES)
    step = np.diff(crank_angle.reshape(cards, 2, NODES)) * (_RADIAN / 2)
    total = np.zeros_like(shaped)
    np.cumsum(step * (shaped[..., 1:] + shaped[..., :-1]), axis=-1, out=total[..., 1:])
    return total.reshape(cards, 2 * NODES)


def _anchored(values: Floats) -> Floats:
    """Values less that at the first node of the same span."""
    cards = len(values)
    shaped = values.reshape(cards, 2, NODES)
    return (shaped - shaped[..., :1]).reshape(cards, 2 * NODES)


def linearise(case: Problem, state: Floats, *, everything: bool = True) -> Linear:
    """Residuals of the closed spans and their derivatives by the parameters.

    Parameters
    ----------
    case : Problem
    state : (cards, parameters)
        In the order and units of `PARAMETERS`.
    everything : whether also by mark, level, gain, rod and exponent; else those are zero

    Returns
    -------
    Linear
        Derivatives of the heat by clearance and level are left out: they are small of second order.
    """
    cards = case.cards
    at, sine, cosine, ratio = _placed(case, state)
    clear = state[:, PLACE["clearance"], None] + at.travel
    ln_volume = np.log(clear)
    gain, level = state[:, PLACE["pressure_gain"], None], state[:, PLACE["pressure_level"], None]
    shown = np.exp(case.ln_pressure)
    with np.errstate(invalid="ignore"):
        ln_p = np.log(shown * (1 + gain) - level)
    gas = _trapped_gas(case, state, ln_p, ln_volume)
    wall = _wall_heat(case, state, gas, ln_p, clear)
    rate = wall.base * wall.shape
    flow = rate * wall.difference
    heat = _running(flow, case.crank_angle)
    residual = gas.rise - np.repeat(state[:, 1:3], NODES, axis=-1) - heat
    jacobian = np.zeros((*residual.shape, len(PARAMETERS)))
    jacobian[:, COMPRESSION, 1] = -1
    jacobian[:, EXPANSION, 2] = -1
    jacobian[..., PLACE["clearance"]] = gas.exponent * _anchored(1 / clear)
    jacobian[..., PLACE["heat"]] = -heat
    _put_heat_columns(jacobian, case, gas, wall, rate)
    if everything:
        by_ratio = travel_by_ratio(sine, cosine, ratio, cards.rod_sign[:, None])[0] * ratio
        turned = gas.exponent * _RADIAN
        pressure = np.exp(ln_p)
        jacobian[..., PLACE["dead_centre"]] = -turned * _anchored(at.slope / clear)
        jacobian[..., PLACE["pressure_level"]] = -_anchored(1 / pressure)
        jacobian[..., PLACE["pressure_gain"]] = _anchored(shown / pressure)
        jacobian[..., PLACE["rod_ratio"]] = gas.exponent * _anchored(by_ratio / clear)
        jacobian[..., PLACE["exponent"]] = gas.exponent * gas.fall
    return Linear(residual, jacobian, ln_volume, gas.exponent, flow)


def _placed(case: Problem, state: Floats) -> tuple[Place, Floats, Floats, Floats]:
    """Motion at the nodes for the mark and rod of a state."""
    cards = case.cards
    mark, rod = state[:, PLACE["dead_centre"], None], state[:, PLACE["rod_ratio"], None]
    ratio = cards.rod_ratio[:, None]
    if not mark.any() and not rod.any():
        return case.declared, case.sine, case.cosine, ratio
    shift = mark * _RADIAN
    sine = case.sine * np.cos(shift) - case.cosine * np.sin(shift)
    cosine = case.cosine * np.cos(shift) + case.sine * np.sin(shift)
    ratio = ratio * np.exp(rod)
    return place_from_sine(sine, cosine, ratio, cards.rod_sign[:, None]), sine, cosine, ratio


def _put_heat_columns(
    jacobian: Floats, case: Problem, gas: _Gas, wall: _Heat, rate: Floats
) -> None:
    """Fill in the derivatives by wall temperature, course of the heat and start temperatures."""
    cards, known = case.cards, case.references
    span = (known.path.temperature - cards.suction_temperature)[:, None]
    jacobian[..., PLACE["wall"]] = -_running(rate, case.crank_angle) * span
    wavy = wall.base * wall.difference * wall.harmonic
    jacobian[..., PLACE["shape"]] = -_running(wavy, case.crank_angle)
    cooling = _running(rate * wall.temperature / gas.start, case.crank_angle)
    warming = cooling - _anchored(gas.exponent) * gas.by_temperature / gas.start
    jacobian[..., PLACE["warming"]] = warming
    jacobian[:, EXPANSION, PLACE["clearance_gas"]] = warming[:, EXPANSION]
