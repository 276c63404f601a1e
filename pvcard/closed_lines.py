"""Model of a card's closed spans: real gas, wall heat, clearance; residuals and their derivatives.

With both valves shut the mass is constant and entropy changes only by heat [1]_. A trapped gas whose pressure
is measured and whose volume is known up to the clearance therefore obeys, at every angle of a span,

    s(p, m / V) = s(start) + integral of dQ / (m T),

with the entropy of the real gas and dQ by Annand's coefficient [2]_ with free size, wall temperature and
course. Divided by the slope of entropy with ``ln p`` the difference is a residual in ``ln p``. No polytropic
exponent enters: fitting exponents together with the clearance is the wrong estimator, since wall heat
then passes for clearance.

References
----------
.. [1] First and second law for a closed system; e.g. M. J. Moran and H. N. Shapiro, *Fundamentals of
   Engineering Thermodynamics*, chapter 6.
.. [2] See `pvcard.heat.annand_nusselt`.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.card_set import CardSet, Turning
from pvcard.gas_table import IsentropicSlopes, TableState
from pvcard.heat import annand_nusselt
from pvcard.kinematics import motion_from_sine, travel_by_ratio
from pvcard.types import Floats
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
    Before samples are averaged into nodes the trace is flattened with the mean exponent of the gas and
    the declared clearance; what is left is nearly straight, so that averaging adds no curvature error.
    """
    exponent = known.path.volume_exponent[:, None]
    guess = start_clearance(cards)[:, None]
    with np.errstate(invalid="ignore", divide="ignore"):
        flat = np.log(cards.pressure) + exponent * np.log(guess + turn.motion.travel)
    bins = span_means(flat, cards.crank_angle, windows)
    angle = np.radians(bins.crank_angle)
    sine, cosine = np.sin(angle), np.cos(angle)
    travel = motion_from_sine(
        sine, cosine, cards.rod_ratio[:, None], cards.rod_sign[:, None]
    ).travel
    ln_pressure = bins.mean - exponent * np.log(guess + travel)
    return Problem(
        cards, known, windows, sine, cosine, bins.crank_angle, ln_pressure, bins.width
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


class _Wall(NamedTuple):
    base: Floats  # (cards, 2 nodes) entropy by heat per radian and per kelvin of difference
    difference: Floats  # (cards, 2 nodes) K, wall less gas
    harmonic: Floats  # (cards, 2 nodes)
    temperature: Floats  # (cards, 2 nodes) K, of the gas


def _wall(
    case: Problem, state: Floats, start: Floats, ln_p: Floats, ln_rho: Floats, clear: Floats
) -> _Wall:
    """Heat to the gas per radian, per unit multiplier and kelvin."""
    cards, known = case.cards, case.references
    suction = cards.suction_temperature
    exponent = known.path.temperature_exponent[:, None]
    relative = ln_p - np.log(cards.suction_pressure)[:, None]
    temperature = start * np.exp(relative * (exponent - 1) / exponent)
    span = known.path.temperature - suction
    wall = (suction + state[:, PLACE["wall"]] * span)[:, None]
    area = 2 * cards.piston_area[:, None] + np.pi * (cards.bore * cards.stroke)[:, None] * clear
    mass = np.exp(ln_rho) * cards.swept_volume[:, None] * clear
    density = np.exp(0.7 * (ln_rho - np.log(known.suction.density)[:, None]))
    rate = known.heat_rate[:, None] * density * area / (mass * temperature)
    base = rate / (2 * np.pi * cards.speed[:, None])
    return _Wall(base, wall - temperature, 2 * case.cosine**2 - 1, temperature)


def _running(rate: Floats, crank_angle: Floats) -> Floats:
    """Integral of a rate per radian from the first node of each span, by trapezoids."""
    total = np.zeros_like(rate)
    step = np.diff(crank_angle) * _RADIAN * (rate[:, 1:] + rate[:, :-1]) / 2
    np.cumsum(step[:, : NODES - 1], axis=-1, out=total[:, 1:NODES])
    np.cumsum(step[:, NODES:], axis=-1, out=total[:, NODES + 1 :])
    return total


def _anchored(values: Floats) -> Floats:
    """Values less that at the first node of the same span."""
    result = values.copy()
    result[:, COMPRESSION] -= values[:, :1]
    result[:, EXPANSION] -= values[:, NODES : NODES + 1]
    return result


def _start_temperatures(case: Problem, state: Floats) -> Floats:
    """Temperature of each line, followed to suction pressure: (cards, 2 nodes)."""
    suction = case.cards.suction_temperature[:, None]
    warming = state[:, PLACE["warming"], None]
    result = np.repeat(suction + warming, 2 * NODES, axis=-1)
    result[:, EXPANSION] += state[:, PLACE["clearance_gas"], None]
    return result


def _first_of_span(values: Floats) -> Floats:
    cards = len(values)
    return np.repeat(values.reshape(cards, 2, NODES)[:, :, 0], NODES, axis=-1)


def linearise(case: Problem, state: Floats) -> Linear:
    """Residuals of the closed spans and their derivatives by all parameters.

    Parameters
    ----------
    case : Problem
    state : (cards, parameters)
        In the order and units of `PARAMETERS`.

    Returns
    -------
    Linear
        Derivatives of the heat by clearance and level are left out: they are small of second order.
    """
    cards, known = case.cards, case.references
    shift = state[:, PLACE["dead_centre"], None] * _RADIAN
    sine = case.sine * np.cos(shift) - case.cosine * np.sin(shift)
    cosine = case.cosine * np.cos(shift) + case.sine * np.sin(shift)
    ratio = cards.rod_ratio[:, None] * np.exp(state[:, PLACE["rod_ratio"], None])
    sign = cards.rod_sign[:, None]
    motion = motion_from_sine(sine, cosine, ratio, sign)
    clear = state[:, PLACE["clearance"], None] + motion.travel
    ln_volume = np.log(clear)
    shown = np.exp(case.ln_pressure)
    pressure = shown * (1 + state[:, PLACE["pressure_gain"], None])
    pressure = pressure - state[:, PLACE["pressure_level"], None]
    with np.errstate(invalid="ignore"):
        ln_p = np.log(pressure)

    start = _start_temperatures(case, state)
    by_temperature = (known.suction.ln_density_by_temperature * cards.suction_temperature)[:, None]
    ln_start = np.log(known.suction.density)[:, None] + by_temperature * np.log(
        start / cards.suction_temperature[:, None]
    )
    relative = ln_p - np.log(cards.suction_pressure)[:, None]
    ln_anchor = ln_start + _first_of_span(relative) / known.path.volume_exponent[:, None]
    fall = _anchored(ln_volume)
    ln_rho = ln_anchor - fall
    gas = cards.table.entropy_from_density(ln_p, ln_rho)
    exponent = -gas.d_ln_rho / gas.d_ln_p
    factor = state[:, PLACE["exponent"], None]
    rise = (gas.entropy - _first_of_span(gas.entropy)) / gas.d_ln_p + exponent * factor * fall

    wall = _wall(case, state, start, ln_p, ln_rho, clear)
    multiplier = np.exp(state[:, PLACE["heat"], None])
    shape = 1 + state[:, PLACE["shape"], None] * wall.harmonic
    plain = wall.base * wall.difference
    flow = plain * shape
    scale = multiplier / gas.d_ln_p
    heat = scale * _running(flow, case.crank_angle)

    level = np.repeat(state[:, 1:3], NODES, axis=-1)
    residual = rise - level - heat
    jacobian = np.zeros((*residual.shape, len(PARAMETERS)))

    def put(name: str, column: Floats) -> None:
        jacobian[:, :, PLACE[name]] = column

    jacobian[:, COMPRESSION, 1] = -1
    jacobian[:, EXPANSION, 2] = -1
    put("clearance", exponent * _anchored(1 / clear))
    put("heat", -heat)
    span = (known.path.temperature - cards.suction_temperature)[:, None]
    put("wall", -scale * _running(wall.base * shape, case.crank_angle) * span)
    put("shape", -scale * _running(plain * wall.harmonic, case.crank_angle))
    cooling = scale * _running(wall.base * shape * wall.temperature / start, case.crank_angle)
    warming = cooling - _anchored(exponent) * by_temperature / start
    put("warming", warming)
    jacobian[:, EXPANSION, PLACE["clearance_gas"]] = warming[:, EXPANSION]
    put("dead_centre", -exponent * _anchored(motion.slope / clear) * _RADIAN)
    put("pressure_level", -_anchored(1 / pressure))
    put("pressure_gain", _anchored(shown / pressure))
    by_ratio = travel_by_ratio(sine, cosine, ratio, sign)[0] * ratio
    put("rod_ratio", exponent * _anchored(by_ratio / clear))
    put("exponent", exponent * fall)
    heat_slope = scale * flow
    return Linear(residual, jacobian, ln_volume, exponent, heat_slope)
