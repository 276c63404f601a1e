"""What the valves did during a computed cycle: events, lateness, flutter, impacts, losses, and the
card's figures.

The definitions are those of the reported quantities, so that a computed cycle can be laid beside a
measured one; here they are read from the plates themselves instead of from the pressure.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.cycle.result import Cycles
from pvcard.types import Booleans, Floats, Integers

_SHUT = 0.01  # of full lift
_DIP = 0.1  # of full lift
# Part of the pressure rise between which a closed line is fitted.
_LINE_WINDOW = (0.06, 0.94)


class ValveMotion(NamedTuple):
    """Motion of one side, all (cards, ends); NaN where the valve never opens or never shuts."""

    opening: Floats  # deg of own angle
    closing: Floats  # deg of own angle
    closing_late: Floats  # deg after the dead centre at which it should close
    open_time: Floats  # s at mean speed
    flutter: Integers  # dips of a tenth of full lift followed by a rise
    full_lift: Floats  # largest lift over full lift
    seat_impact: Floats  # m/s
    guard_impact: Floats  # m/s
    backflow: Floats  # kg per turn through the open valve against its sense


class CardFigures(NamedTuple):
    """Figures of a computed card, all (cards, ends)."""

    work: Floats  # J
    suction_volumetric_efficiency: Floats
    discharge_volumetric_efficiency: Floats
    suction_loss: Floats  # J per turn
    discharge_loss: Floats  # J per turn
    compression_exponent: Floats
    expansion_exponent: Floats


def own_angles(cycles: Cycles) -> Floats:
    """Crank angle of each sample from the dead centre of each end, (ends, samples). [deg]."""
    shift = np.array([0.0 if end == "head" else 180.0 for end in cycles.ends])
    result: Floats = (cycles.crank_angle - shift[:, None]) % 360
    return result


def _longest_shut(lift: Floats) -> tuple[int, int] | None:
    """First sample and length of the longest circular span with the valve shut."""
    shut = lift <= _SHUT
    if shut.all() or not shut.any():
        return None
    first_open = int(np.flatnonzero(~shut)[0])
    turned = np.roll(shut, -first_open)
    edges = np.flatnonzero(np.diff(np.concatenate([[0], turned.astype(np.int8), [0]])))
    starts, stops = edges[::2], edges[1::2]
    longest = int(np.argmax(stops - starts))
    return int(starts[longest] + first_open), int(stops[longest] - starts[longest])


def _event(lift: Floats, before: int, angle: Floats, step: float) -> float:
    """Angle at which lift crosses the limit between sample ``before`` and the next one."""
    count = len(lift)
    one, two = float(lift[before % count]), float(lift[(before + 1) % count])
    share = (_SHUT - one) / (two - one) if two != one else 0.5
    return float((angle[before % count] + step * np.clip(share, 0, 1)) % 360)


def _flutter(lift: Floats, start: int, length: int) -> int:
    """Dips of at least a tenth of full lift, each followed by a rise as large."""
    trace = np.roll(lift, -start)[:length]
    dips, top, bottom = 0, float(trace[0]), np.inf
    for value in trace:
        if bottom == np.inf:
            top = max(top, value)
            if top - value >= _DIP:
                bottom = value
        else:
            bottom = min(bottom, value)
            if value - bottom >= _DIP:
                dips, top, bottom = dips + 1, value, np.inf
    return dips


def valve_motion(cycles: Cycles, side: str, *, speed: Floats | float) -> ValveMotion:
    """Events, flutter and impacts of one side.

    Parameters
    ----------
    cycles : Cycles
    side : "suction" or "discharge"
    speed : () or (cards,)
        [1/s]

    Returns
    -------
    ValveMotion
        Each (cards, ends).

    Notes
    -----
    Shut is a lift of at most 1 % of full lift. Opening is the end, closing the start of the longest
    span in which the valve is shut, so re-openings count as open. A suction valve should close at
    180, a discharge valve at 360 deg of the angle from the dead centre of smallest volume.
    """
    lifts = getattr(cycles, f"{side}_lift")
    shape = lifts.shape[:2]
    opening, closing = np.full(shape, np.nan), np.full(shape, np.nan)
    flutter = np.zeros(shape, dtype=np.int64)
    angles = own_angles(cycles)
    count = len(cycles.crank_angle)
    step = 360.0 / count
    for card, end in np.ndindex(*shape):
        lift = lifts[card, end]
        span = _longest_shut(lift)
        if span is None:
            continue
        first, length = span
        opening[card, end] = _event(lift, first + length - 1, angles[end], step)
        closing[card, end] = _event(lift, first - 1, angles[end], step)
        flutter[card, end] = _flutter(lift, first + length, count - length)
    due = 180.0 if side == "suction" else 360.0
    late = (closing - due + 180) % 360 - 180
    duration = (closing - opening) % 360 / 360 / np.broadcast_to(speed, shape[:1])[:, None]
    return ValveMotion(
        opening,
        closing,
        late,
        duration,
        flutter,
        lifts.max(axis=-1),
        getattr(cycles, f"{side}_seat_impact"),
        getattr(cycles, f"{side}_guard_impact"),
        getattr(cycles, f"{side}_backflow"),
    )


class _Line(NamedTuple):
    """A closed line: exponent, and volumes at which it meets both line pressures."""

    exponent: float
    at_suction: float
    at_discharge: float


def _closed_line(
    pressure: Floats, volume: Floats, closed: Booleans, limits: tuple[float, float]
) -> _Line:
    """Fit a closed line; volumes at line pressure by a parabola of ln V over ln p."""
    low, high = limits
    rise = high - low
    inside = closed & (pressure > low + _LINE_WINDOW[0] * rise)
    inside &= pressure < low + _LINE_WINDOW[1] * rise
    if inside.sum() < 8:
        return _Line(np.nan, np.nan, np.nan)
    middle = np.log(pressure[inside].mean())
    across = np.log(pressure[inside]) - middle
    along = np.log(volume[inside])
    slope = np.polyfit(along, across, 1)[0]
    bend = np.polyfit(across, along, 2)
    at = [float(np.exp(np.polyval(bend, np.log(value) - middle))) for value in limits]
    return _Line(float(-slope), at[0], at[1])


def card_figures(
    cycles: Cycles, *, suction_pressure: Floats | float, discharge_pressure: Floats | float
) -> CardFigures:
    """Work, volumetric efficiencies, valve losses and exponents of computed cards.

    Parameters
    ----------
    cycles : Cycles
    suction_pressure, discharge_pressure : () or (cards,)
        Line pressures. [Pa]

    Returns
    -------
    CardFigures
        Each (cards, ends); NaN where an end has no closed line that can be fitted.

    Notes
    -----
    Volumetric efficiencies: stroke volume between the points at which the lines fitted to the
    closed parts reach a line pressure, over swept volume. Losses: integral of ``(p_s - p) dV`` and
    ``(p - p_d)(-dV)`` between those points, trapezoids.
    """
    shape = cycles.work.shape
    low = np.broadcast_to(suction_pressure, shape[:1])
    high = np.broadcast_to(discharge_pressure, shape[:1])
    values = np.full((6, *shape), np.nan)
    angles = own_angles(cycles)
    for card, end in np.ndindex(*shape):
        limits = (float(low[card]), float(high[card]))
        pressure, volume = cycles.pressure[card, end], cycles.volume[card, end]
        closed = (cycles.suction_lift[card, end] <= 0) & (cycles.discharge_lift[card, end] <= 0)
        expanding = angles[end] < 180
        squeeze = _closed_line(pressure, volume, closed & ~expanding, limits)
        growth = _closed_line(pressure, volume, closed & expanding, limits)
        swept = cycles.swept_volume[card, end]
        values[0, card, end] = (squeeze.at_suction - growth.at_suction) / swept
        values[1, card, end] = (squeeze.at_discharge - growth.at_discharge) / swept
        # In the order of the end's own turn the suction span is one piece, the discharge span as
        # well.
        turned = np.argsort(angles[end], kind="stable")
        ordered = (pressure[turned], volume[turned], angles[end][turned])
        values[2, card, end] = _loss(ordered, (growth.at_suction, squeeze.at_suction), limits[0])
        values[3, card, end] = _loss(
            ordered, (growth.at_discharge, squeeze.at_discharge), limits[1]
        )
        values[4, card, end], values[5, card, end] = squeeze.exponent, growth.exponent
    return CardFigures(cycles.work, *values)


def _loss(
    ordered: tuple[Floats, Floats, Floats], volumes: tuple[float, float], line: float
) -> float:
    """Integral of (line - p) dV over that part of the turn beyond both volumes.

    ``volumes``: where the line is met while expanding and while compressing. For the suction line
    the part runs through the outer dead centre, for the discharge line through the inner one; in
    both the sign comes out by itself.
    """
    pressure, volume, angle = ordered
    if not np.isfinite(volumes).all():
        return np.nan
    expanding = angle < 180
    through_outer = np.where(expanding, volume > volumes[0], volume > volumes[1])
    suction = line < pressure.mean()
    inside = through_outer if suction else ~through_outer
    difference = np.where(inside, line - pressure, 0.0)
    change = np.roll(volume, -1) - volume
    middle = 0.5 * (difference + np.roll(difference, -1))
    return float((middle * change).sum())
