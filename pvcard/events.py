"""When the valves open and close, read from where the trace parts from the closed lines.

The model of a closed span - real gas, wall heat, fitted clearance - is carried on beyond the span,
sample by sample. While both valves are shut the trace follows it; where gas flows through a valve
it departs. No fixed angle and no fixed share of the line pressures is used, so pulsation and
springs do not mislead.

At an opening the departure grows from nothing with a high power of the time; two levels of it
point back to its start. At a closing, near a dead centre, level errors of the model are as large
as the departure, so there its slope and bend are watched: a closed line leaves them near zero.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.card_set import Turning
from pvcard.closed_lines import PLACE, Problem
from pvcard.line_fit import CORNERS, Fit
from pvcard.types import Booleans, Floats, Integers
from pvcard.uncertainty import Estimate, constant

_STEP_DEG = 0.5  # spacing at which a departure is followed, or the grid's own if coarser
_OPENING_REACH_DEG, _SUCTION_REACH_DEG, _DISCHARGE_REACH_DEG = 30.0, 65.0, 45.0
_OPENING_LEVEL = 1e-3  # least departure in ln p that counts at an opening
_LEVELS_APART = 8.0  # second level over first; a growth with the third power takes twice the time
_CLOSING_SLOPE = 1.5e-4  # least slope of the departure in ln p per degree that counts at a closing
_CLOSING_BEND = 1.5e-5  # least second derivative of it, per degree squared
# What a misfit inside the spans, mostly ringing, may add outside them: times the misfit in ln p,
# per degree, and per degree squared (of a ringing of some 25 degrees; no source).
_MISFITS, _MISFIT_SLOPE, _MISFIT_BEND = 4.0, 0.25, 0.06
_SIGMAS = 6.0  # of white noise, below which nothing counts


class Event(NamedTuple):
    """An event of each card with what reading it is uncertain by."""

    crank_angle: Floats  # (cards,) deg in [0, 360) from the own dead centre, NaN where not seen
    uncertainty: Floats  # (cards,) deg, of the reading alone


class Events(NamedTuple):
    """Opening and closing of the valves of each end."""

    suction_opening: Event
    suction_closing: Event
    discharge_opening: Event
    discharge_closing: Event


class _Noise(NamedTuple):
    """What a departure must exceed, relative to pressure; each (cards,)."""

    white: Floats  # standard deviation of single samples
    misfit: Floats  # rms of what the model leaves within the spans


class _Path(NamedTuple):
    """Samples beyond a span, each (cards, 1 + steps), the end of the span first."""

    crank_angle: Floats  # deg
    travel: Floats
    cosine: Floats  # of the crank angle
    measured: Floats  # ln p


class _Departure(NamedTuple):
    crank_angle: Floats  # (cards, steps) deg, starting at the corner
    value: Floats  # (cards, steps), measured less modelled ln p
    inside: Booleans  # (cards, steps)
    spacing: float  # deg, mean distance of neighbours


def valve_events(case: Problem, fit: Fit, turn: Turning, white_noise: Floats) -> Events:
    """Opening and closing angles of each card.

    Parameters
    ----------
    case, fit, turn
        Of one batch.
    white_noise : (cards,)
        Standard deviation of single samples, relative to pressure. [-]

    Returns
    -------
    Events
        NaN where an event is not seen within reach of its span.
    """
    windows = case.windows
    half = int(np.searchsorted(case.cards.crank_angle, 180.0))
    last = len(case.cards.crank_angle) - 1
    expansion_end = _departure(
        case, fit, turn, 3, windows.expansion_last, +1, _OPENING_REACH_DEG, (0, half)
    )
    compression_end = _departure(
        case, fit, turn, 1, windows.compression_last, +1, _OPENING_REACH_DEG, (half, last)
    )
    compression_start = _departure(
        case,
        fit,
        turn,
        0,
        windows.compression_first,
        -1,
        _SUCTION_REACH_DEG,
        (half - half // 15, last),
    )
    expansion_start = _departure(
        case, fit, turn, 2, windows.expansion_first, -1, _DISCHARGE_REACH_DEG, (-half // 15, half)
    )
    noise = _Noise(white_noise, fit.misfit)
    return Events(
        _opening(expansion_end, +1.0, noise),
        _closing(compression_start, noise),
        _opening(compression_end, -1.0, noise),
        _closing(expansion_start, noise),
    )


def _departure(
    case: Problem,
    fit: Fit,
    turning: Turning,
    corner: int,
    start: Integers,
    direction: int,
    reach: float,
    limits: tuple[int, int],
) -> _Departure:
    """Follow the trace from the end of a span and compare it with the modelled line."""
    cards = case.cards
    grid = cards.crank_angle
    spacing = 360 / len(grid)
    stride = max(1, round(_STEP_DEG / spacing))
    steps = max(4, int(reach / (spacing * stride)))
    index = start[:, None] + direction * stride * np.arange(1, steps + 1)
    inside = (index >= limits[0]) & (index <= limits[1])
    turn = np.floor_divide(index, len(grid))  # -1 before the dead centre of least volume
    index = index - turn * len(grid)
    node = CORNERS[corner]
    beyond = grid[index] + 360.0 * turn
    angle = _after(case.crank_angle[:, node], beyond)
    at_corner = case.ln_pressure[:, node] - fit.linear.residual[:, node]
    with np.errstate(invalid="ignore", divide="ignore"):
        shown = np.log(np.take_along_axis(cards.pressure, index, axis=-1))
    measured = _after(at_corner, shown)
    path = _Path(
        angle,
        _after(case.declared.travel[:, node], np.take_along_axis(turning.motion.travel, index, -1)),
        _after(case.cosine[:, node], turning.cosine[index]),
        measured,
    )
    departure = measured - _extended(case, fit, corner, path)
    return _Departure(angle[:, 1:], departure[:, 1:], inside, spacing * stride)


def _after(first: Floats, others: Floats) -> Floats:
    return np.concatenate([first[:, None], others], axis=-1)


def _extended(case: Problem, fit: Fit, corner: int, path: _Path) -> Floats:
    """Modelled ln p along a path, from the corner in its first column."""
    clear = fit.state[:, PLACE["clearance"], None] + path.travel
    ln_volume = np.log(clear)
    measured = path.measured
    exponent = _exponent_along(fit, corner, measured)
    gain = _heat_along(case, fit, corner, path, clear, ln_volume)
    step = np.diff(path.crank_angle) * (np.pi / 180) * (gain[:, 1:] + gain[:, :-1])
    step -= np.diff(ln_volume) * (exponent[:, 1:] + exponent[:, :-1])
    result = np.empty_like(measured)
    result[:, 0] = measured[:, 0]
    result[:, 1:] = measured[:, :1] + np.cumsum(step, axis=-1) / 2
    return result


def _exponent_along(fit: Fit, corner: int, ln_pressure: Floats) -> Floats:
    """Exponent of the gas beyond a span: as at its end, with its trend over the span."""
    ends = (0, 1) if corner < 2 else (2, 3)
    own, other = CORNERS[corner], CORNERS[ends[1] if corner == ends[0] else ends[0]]
    exponent = fit.linear.exponent
    step = exponent[:, other] - exponent[:, own]
    apart = fit.linear.ln_volume[:, own] - fit.linear.ln_volume[:, other]
    trend = step / (apart * exponent[:, own])
    result: Floats = exponent[:, own, None] + trend[:, None] * (ln_pressure - ln_pressure[:, :1])
    return result


def _heat_along(
    case: Problem,
    fit: Fit,
    corner: int,
    path: _Path,
    clear: Floats,
    ln_volume: Floats,
) -> Floats:
    """Change of modelled ln p by heat per radian beyond a span, scaled from its end.

    Notes
    -----
    Heat over stored energy goes with ``rho^0.7 (area) (T_wall - T) / (p V)``, temperature with the
    product ``p V`` of the trapped mass.
    """
    cards, known, state = case.cards, case.references, fit.state
    node = CORNERS[corner]
    suction = cards.suction_temperature
    start = suction + state[:, PLACE["warming"]]
    if corner > 1:
        start = start + state[:, PLACE["clearance_gas"]]
    exponent = known.path.temperature_exponent
    at_corner = case.ln_pressure[:, node] - np.log(cards.suction_pressure)
    first = start * np.exp(at_corner * (exponent - 1) / exponent)
    fall = ln_volume - ln_volume[:, :1]
    product = np.exp(path.measured - path.measured[:, :1] + fall)
    wall = suction + state[:, PLACE["wall"]] * (known.path.temperature - suction)
    difference = wall[:, None] - first[:, None] * product
    difference *= 1 + state[:, PLACE["shape"], None] * (2 * np.square(path.cosine) - 1)
    own = difference[:, :1]
    safe = np.where(np.abs(own) < 1.0, np.where(own < 0, -1.0, 1.0), own)
    depth = (cards.bore * cards.stroke * np.pi / (2 * cards.piston_area))[:, None]
    scale = fit.linear.heat_slope[:, node, None] / safe / (1 + depth * clear[:, :1])
    result: Floats = scale * difference * (1 + depth * clear) * np.exp(-0.7 * fall) / product
    return result


def _first_true(mask: Booleans) -> tuple[Integers, Booleans]:
    found: Booleans = np.any(mask, axis=-1)
    return np.argmax(mask, axis=-1), found


def _crossing(departure: _Departure, size: Floats, level: Floats) -> tuple[Floats, Booleans]:
    """First angle at which `size` passes `level`, straight between samples."""
    place, seen = _first_true((size > level[:, None]) & departure.inside)
    row = np.arange(len(size))
    before = np.maximum(place - 1, 0)
    low, high = size[row, before], size[row, place]
    rise = high - low
    share = np.where(rise > 0, (level - low) / np.where(rise > 0, rise, 1.0), 1.0)
    first, second = departure.crank_angle[row, before], departure.crank_angle[row, place]
    angle = np.where(place > 0, first + np.clip(share, 0, 1) * (second - first), second)
    return angle, seen


def _opening(departure: _Departure, sign: float, noise: _Noise) -> Event:
    size = sign * departure.value
    sustained = size.copy()
    sustained[:, :-1] = np.minimum(size[:, :-1], size[:, 1:])  # one stray sample is not an opening
    level = np.maximum(_OPENING_LEVEL, _SIGMAS * noise.white)
    level = np.maximum(level, _MISFITS * noise.misfit)
    early, seen = _crossing(departure, sustained, level)
    late, grown = _crossing(departure, sustained, _LEVELS_APART * level)
    back = np.where(grown, np.clip(late - early, 0, 3.0), 0.5)
    angle = np.where(seen, early - back, np.nan)
    return Event(angle, np.hypot(0.3 + 0.3 * back, departure.spacing / 3))


def _closing(departure: _Departure, noise: _Noise) -> Event:
    """Last angle before the span at which the departure still bends or runs away."""
    step = departure.spacing
    reach = _half_width(noise.white, step)
    slope, bend = _local_parabola(departure.value, reach)
    slope, bend = np.abs(slope) / step, np.abs(bend) / step**2
    offsets = np.arange(-reach, reach + 1.0)
    centred = offsets**2 - np.mean(offsets**2)
    noise_slope = noise.white / np.sqrt(np.sum(offsets**2)) / step
    noise_bend = 2 * noise.white / np.sqrt(np.sum(centred**2)) / step**2
    slope_level = np.maximum(_CLOSING_SLOPE, _SIGMAS * noise_slope)
    slope_level = np.maximum(slope_level, _MISFIT_SLOPE * noise.misfit)
    bend_level = np.maximum(_CLOSING_BEND, _SIGMAS * noise_bend)
    bend_level = np.maximum(bend_level, _MISFIT_BEND * noise.misfit)
    size = np.maximum(slope / slope_level[:, None], bend / bend_level[:, None])
    inside = departure.inside.copy()
    inside[:, :reach] = False
    angle, seen = _crossing(departure._replace(inside=inside), size, np.ones(len(size)))
    blurred = np.where(seen, angle - reach * step, np.nan)
    widened = bend_level / _CLOSING_BEND  # the level that noise asks for, over the least one
    return Event(blurred, np.hypot(1.2, reach * step / 2) * np.sqrt(np.minimum(widened, 100.0)))


def _half_width(white_noise: Floats, spacing: float) -> int:
    """Half width, in steps, over which the departure is smoothed: wider where noise asks for it."""
    known = white_noise[np.isfinite(white_noise)]
    wanted = float(np.sqrt(np.median(known) / _CLOSING_BEND)) if len(known) else 0.0
    return int(np.clip(round(wanted / spacing), 1, max(1, round(3.0 / spacing))))


def _local_parabola(value: Floats, reach: int) -> tuple[Floats, Floats]:
    """Slope and second derivative by step of a parabola through 2 reach + 1 running samples [1]_.

    References
    ----------
    .. [1] A. Savitzky and M. J. E. Golay, *Analytical Chemistry* 36 (1964) 1627.
    """
    offsets = np.arange(-reach, reach + 1.0)
    centred = offsets**2 - np.mean(offsets**2)
    padded = np.pad(value, ((0, 0), (reach, reach)), mode="edge")
    slope, bend = np.zeros_like(value), np.zeros_like(value)
    for place, (first, second) in enumerate(zip(offsets, centred)):
        part = padded[:, place : place + value.shape[1]]
        slope += first * part
        bend += second * part
    return slope / np.sum(offsets**2), 2 * bend / np.sum(centred**2)


def event_estimate(event: Event, name: str, inputs: int) -> Estimate:
    """An event as an estimate: it moves with the mark and has a reading of its own.

    Parameters
    ----------
    event : Event
    name : name of the input that stands for its reading
    inputs : number of inputs carried, 0 for none

    Returns
    -------
    angle : (cards,)
        In [0, 360). [deg]
    """
    angle = np.mod(event.crank_angle, 360.0)
    estimate = constant(angle, inputs).depending_on("dead_centre", -1.0)
    return estimate.depending_on(name, event.uncertainty)
