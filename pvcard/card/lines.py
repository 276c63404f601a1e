"""Where the fitted lines of a card reach the line pressures, with all that this rests on."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.closed_lines import PLACE, Problem
from pvcard.kinematics import crank_angle_at, place, travel_by_ratio
from pvcard.line_fit import CORNERS, Fit
from pvcard.types import Floats
from pvcard.uncertainty import Estimate, constant


class Crossing(NamedTuple):
    """A point where a fitted line meets a line pressure."""

    volume: Estimate  # (cards,) over the swept volume, clearance included
    travel: (
        Floats  # (cards,) of the piston there, may lie outside 0 to 1 for a line that is extended
    )
    crank_angle: Floats  # (cards,) deg, from the own dead centre


class Crossings(NamedTuple):
    """The four corners of a card as the fitted lines have them."""

    compression_start: Crossing  # compression line at suction pressure
    compression_end: Crossing  # compression line at discharge pressure
    expansion_start: Crossing  # expansion line at discharge pressure
    expansion_end: Crossing  # expansion line at suction pressure


def corner_exponents(case: Problem, fit: Fit) -> Floats:
    """Local polytropic exponent of the modelled line at the ends of both spans, heat included.

    Parameters
    ----------
    case, fit
        Of one batch.

    Returns
    -------
    exponent : (cards, 4)
        At `CORNERS`. [-]
    """
    cards = case.cards
    at = place(case.crank_angle[:, CORNERS], cards.rod_ratio[:, None], cards.rod_sign[:, None])
    clear = fit.state[:, PLACE["clearance"], None] + at.travel
    with np.errstate(divide="ignore", invalid="ignore"):
        heat = fit.linear.heat_slope[:, CORNERS] * clear / at.slope
    exponent = fit.linear.exponent[:, CORNERS]
    limit = 0.5 * exponent
    return exponent - np.clip(heat, -limit, limit)


def crossings(
    case: Problem, fit: Fit, suction_pressure: Estimate, discharge_pressure: Estimate
) -> Crossings:
    """Find where both fitted lines reach both line pressures.

    Parameters
    ----------
    case, fit
        Of one batch.
    suction_pressure, discharge_pressure : (cards,)
        [Pa]

    Returns
    -------
    Crossings
        NaN for cards without fitted lines.

    Notes
    -----
    From the last node of a span the line goes on with its local exponent, over the 6 % of the
    pressure rise that the span leaves out.
    """
    exponents = corner_exponents(case, fit)
    clearance = Estimate(fit.state[:, 0], fit.slopes[:, 0])
    wanted = (suction_pressure, discharge_pressure, discharge_pressure, suction_pressure)
    found = []
    for number, pressure in enumerate(wanted):
        node = CORNERS[number]
        travel = _travel(case, node, fit.slopes.shape[-1])
        ln_model = case.ln_pressure[:, node] - fit.linear.residual[:, node]
        line = Estimate(ln_model, fit.corner_slopes[:, number])
        ln_volume = (clearance + travel).log() + (line - pressure.log()) / exponents[:, number]
        volume = ln_volume.exp()
        at = volume.value - clearance.value
        angle = crank_angle_at(at, case.cards.rod_ratio, case.cards.rod_sign)
        found.append(Crossing(volume, at, angle if number > 1 else 360 - angle))
    return Crossings(*found)


def _travel(case: Problem, node: int, inputs: int) -> Estimate:
    """Piston travel at a node; moves with the mark and the rod."""
    cards = case.cards
    sine, cosine = case.sine[:, node], case.cosine[:, node]
    at = place(case.crank_angle[:, node], cards.rod_ratio, cards.rod_sign)
    by_ratio = travel_by_ratio(sine, cosine, cards.rod_ratio, cards.rod_sign)[0] * cards.rod_ratio
    travel = constant(at.travel, inputs).depending_on("dead_centre", -at.slope * np.pi / 180)
    travel = travel.depending_on("stroke", by_ratio)
    return travel.depending_on("connecting_rod_length", -by_ratio)


def polytropic_exponents(case: Problem, fit: Fit) -> tuple[Estimate, Estimate]:
    """Slopes of both closed parts in ln p over ln V at the fitted clearance.

    Parameters
    ----------
    case, fit
        Of one batch.

    Returns
    -------
    compression, expansion : (cards,)
        [-]

    Notes
    -----
    Straight lines by least squares through the nodes of each span. With the clearance, the mark
    and the level the volumes or pressures of the nodes move; the derivatives follow from that.
    """
    nodes = case.ln_pressure.shape[1] // 2
    pair = []
    for part in (slice(0, nodes), slice(nodes, 2 * nodes)):
        x = fit.linear.ln_volume[:, part]
        x = x - x.mean(-1, keepdims=True)
        y = case.ln_pressure[:, part]
        spread = np.einsum("cn,cn->c", x, x)
        exponent = -np.einsum("cn,cn->c", x, y) / spread
        pair.append(Estimate(exponent, _exponent_slopes(case, fit, part, x, spread, exponent)))
    return pair[0], pair[1]


def _exponent_slopes(
    case: Problem, fit: Fit, part: slice, x: Floats, spread: Floats, exponent: Floats
) -> Floats:
    """Derivatives of a slope -sum(x y)/sum(x x) when the abscissae or ordinates move."""
    if not fit.slopes.shape[-1]:
        return np.zeros((len(spread), 0))
    cards = case.cards
    at = place(case.crank_angle[:, part], cards.rod_ratio[:, None], cards.rod_sign[:, None])
    clear = np.exp(fit.linear.ln_volume[:, part])
    residual = case.ln_pressure[:, part] + exponent[:, None] * fit.linear.ln_volume[:, part]
    residual = residual - residual.mean(-1, keepdims=True)
    share = -(residual + exponent[:, None] * x) / spread[:, None]  # d exponent / d x

    def through_volume(change: Floats) -> Floats:
        centred = change - change.mean(-1, keepdims=True)
        result: Floats = np.einsum("cn,cn->c", share, centred)
        return result

    sine, cosine = case.sine[:, part], case.cosine[:, part]
    by_ratio = travel_by_ratio(sine, cosine, cards.rod_ratio[:, None], cards.rod_sign[:, None])[0]
    rod = through_volume(by_ratio * cards.rod_ratio[:, None] / clear)
    mark = through_volume(-at.slope * (np.pi / 180) / clear)
    level = np.einsum("cn,cn->c", x, np.exp(-case.ln_pressure[:, part])) / spread
    moved = Estimate(np.zeros_like(rod), through_volume(1 / clear)[:, None] * fit.slopes[:, 0])
    moved = moved.depending_on("dead_centre", mark).depending_on("pressure_level", level)
    moved = moved.depending_on("stroke", rod).depending_on("connecting_rod_length", -rod)
    return moved.slopes


def stroke_fractions(
    case: Problem, fit: Fit, at: Crossings, line_pressures: tuple[Floats, Floats]
) -> tuple[Estimate, Estimate]:
    """Stroke volume between both fitted lines at each line pressure.

    Parameters
    ----------
    case, fit, at
        Of one batch.
    line_pressures : two of (cards,)
        Suction and discharge. [Pa]

    Returns
    -------
    suction, discharge : (cards,)
        Volumetric efficiencies. [-]

    Notes
    -----
    Lines are the polytropes of `polytropic_exponents`, through the whole span. Lines carried on
    with the local exponent, wall heat included, meet the pressures elsewhere; that difference
    counts as the half width of a uniform distribution (JCGM 100, 4.3.7).
    """
    nodes = case.ln_pressure.shape[1] // 2
    pair = []
    for number, (low, high) in enumerate(((0, 3), (1, 2))):
        ln_pressure = np.log(line_pressures[number])
        volumes = [
            _polytrope_volume(case, fit, part, ln_pressure)
            for part in (slice(0, nodes), slice(nodes, 2 * nodes))
        ]
        own = at[low].volume - at[high].volume
        value = volumes[0] - volumes[1]
        name = ("suction_line_choice", "discharge_line_choice")[number]
        choice = np.abs(value - own.value) / np.sqrt(3)
        pair.append(Estimate(value, own.slopes).depending_on(name, choice))
    return pair[0], pair[1]


def _polytrope_volume(case: Problem, fit: Fit, part: slice, ln_pressure: Floats) -> Floats:
    x, y = fit.linear.ln_volume[:, part], case.ln_pressure[:, part]
    mean = x.mean(-1)
    centred = x - mean[:, None]
    slope = np.einsum("cn,cn->c", centred, y) / np.einsum("cn,cn->c", centred, centred)
    volume: Floats = np.exp(mean + (ln_pressure - y.mean(-1)) / slope)
    return volume
