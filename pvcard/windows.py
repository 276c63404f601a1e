"""Where on a card both valves are shut: the spans from which lines are fitted.

The spans are read from the trace itself, between two pressures that lie inside the ratio of the
line pressures. Seen in the direction of rotation the expansion ends where the trace first falls
below the lower one, and compression begins where it leaves it for the last time before it first
passes the upper one; pulsation and ripple while a valve is open do not disturb that.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.types import Booleans, Floats, Integers

LOWER_SHARE, UPPER_SHARE = 0.06, 0.94  # of the rise from suction to discharge pressure
FEWEST_SAMPLES = 5
NODES = 12  # per span


class Windows(NamedTuple):
    """First and last sample of both closed spans of each card; `found` where both exist."""

    compression_first: Integers  # (cards,)
    compression_last: Integers
    expansion_first: Integers
    expansion_last: Integers
    found: Booleans

    def rows(self, rows: Integers) -> Windows:
        """Return those of some cards."""
        return Windows(
            self.compression_first[rows],
            self.compression_last[rows],
            self.expansion_first[rows],
            self.expansion_last[rows],
            self.found[rows],
        )


def closed_windows(
    pressure: Floats, suction_pressure: Floats, discharge_pressure: Floats, half: int
) -> Windows:
    """Find the closed spans of each card.

    Parameters
    ----------
    pressure : (cards, samples)
        Over one turn from the dead centre of least volume. [Pa]
    suction_pressure, discharge_pressure : (cards,)
        Line pressures. [Pa]
    half : number of samples before the other dead centre

    Returns
    -------
    Windows
        `found` is false where the trace does not run between the two pressures on both strokes or a
        span has fewer than five samples.

    Notes
    -----
    The limits are 6 and 94 % of the rise: the ends near the dead centres carry much of what tells
    leaks, heat and clearance apart, the last parts belong to valves about to open.
    """
    rise = discharge_pressure - suction_pressure
    low = (suction_pressure + LOWER_SHARE * rise)[:, None]
    high = (suction_pressure + UPPER_SHARE * rise)[:, None]
    out, back = pressure[:, :half], pressure[:, half:]
    below = out < low
    e_stop = np.argmax(below, axis=-1)
    above = out > high
    e_start = _last_before(above, e_stop)
    over = back > high
    c_stop = np.argmax(over, axis=-1)
    under = back < low
    c_start = _last_before(under, c_stop)
    found = below.any(-1) & over.any(-1) & (e_start >= 0) & (c_start >= 0) & (rise > 0)
    first_e, last_e = e_start + 1, e_stop - 1
    first_c, last_c = c_start + 1 + half, c_stop - 1 + half
    found &= (last_e - first_e + 1 >= FEWEST_SAMPLES) & (last_c - first_c + 1 >= FEWEST_SAMPLES)
    safe = np.where
    return Windows(
        safe(found, first_c, half),
        safe(found, last_c, half + FEWEST_SAMPLES),
        safe(found, first_e, 0),
        safe(found, last_e, FEWEST_SAMPLES),
        found,
    )


def _last_before(mask: Booleans, stop: Integers) -> Integers:
    """Index of the last true sample before `stop`, -1 where there is none."""
    samples = mask.shape[-1]
    inside = mask & (np.arange(samples) < stop[:, None])
    backward = np.argmax(inside[:, ::-1], axis=-1)
    return np.where(inside.any(-1), samples - 1 - backward, -1)


class Bins(NamedTuple):
    """Equal parts of each span and the means of the trace over them."""

    crank_angle: Floats  # (cards, 2 nodes) deg, middle of each part
    mean: Floats  # (cards, 2 nodes)
    width: Floats  # (cards, 2) samples per part


def span_means(flat: Floats, crank_angle: Floats, windows: Windows) -> Bins:
    """Means over equal parts of each span, compression first.

    Parameters
    ----------
    flat : (cards, samples)
        Something nearly level over the spans, so that a mean stands for the middle. Any unit.
    crank_angle : (samples,)
        [deg]
    windows : Windows

    Returns
    -------
    Bins
        (cards, 2 nodes): compression, then expansion.

    Notes
    -----
    Parts may cut samples: each sample stands for the cell around it. That is exact for a trace
    which is straight over a part.
    """
    cards, samples = flat.shape
    running = np.zeros((cards, samples + 1))
    np.cumsum(flat, axis=-1, out=running[:, 1:])
    first = np.stack([windows.compression_first, windows.expansion_first], axis=-1)
    last = np.stack([windows.compression_last, windows.expansion_last], axis=-1)
    count = (last - first + 1).astype(np.float64)
    share = np.linspace(0.0, 1.0, NODES + 1)
    edges = first[..., None] + count[..., None] * share  # (cards, 2, nodes + 1), in cells
    sums = _running_at(running, edges.reshape(cards, -1)).reshape(edges.shape)
    width = count / NODES
    mean = np.diff(sums, axis=-1) / width[..., None]
    middle = (edges[..., :-1] + edges[..., 1:]) / 2 - 0.5  # a sample sits in the middle of its cell
    angle = np.interp(middle.ravel(), np.arange(samples), crank_angle)
    return Bins(angle.reshape(cards, -1), mean.reshape(cards, -1), width)


def _running_at(running: Floats, position: Floats) -> Floats:
    whole = np.minimum(position.astype(np.int64), running.shape[-1] - 2)
    low = np.take_along_axis(running, whole, axis=-1)
    high = np.take_along_axis(running, whole + 1, axis=-1)
    result: Floats = low + (position - whole) * (high - low)
    return result
