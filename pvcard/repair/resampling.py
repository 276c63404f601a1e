"""Bringing samples onto another grid of crank angles, by cubics through the four nearest ones."""

from __future__ import annotations

import numpy as np

from pvcard.types import Booleans, Floats, Integers

LONGEST_GAP = 3  # missing samples in a row that are filled
_ROUND_COUNTS = np.array(
    [36, 60, 72, 90, 120, 180, 240, 360, 480, 720, 900, 1080, 1440, 1800, 2160, 2880, 3600, 7200]
)


def local_cubic(nodes: Floats, values: Floats, targets: Floats) -> Floats:
    """Interpolate with the cubic through the four nodes around each target.

    Parameters
    ----------
    nodes : (nodes,)
        Strictly ascending, at least four.
    values : (rows, nodes)
        What is known there.
    targets : (targets,)
        Where it is wanted, within the nodes.

    Returns
    -------
    interpolated : (rows, targets)
        The values themselves where a target is a node.

    Notes
    -----
    Lagrange's formula for four points [1]_; the error is of the fourth order in the spacing.

    References
    ----------
    .. [1] M. Abramowitz and I. A. Stegun, *Handbook of Mathematical Functions*, 1964, 25.2.1.

    Examples
    --------
    >>> x = np.array([0.0, 1.0, 3.0, 4.0, 6.0])
    >>> local_cubic(x, x[None, :] ** 3, np.array([2.0, 3.0]))
    array([[ 8., 27.]])
    """
    left = np.clip(np.searchsorted(nodes, targets, side="right") - 2, 0, len(nodes) - 4)
    places = left + np.arange(4)[:, None]
    around = nodes[places]  # (4, targets)
    result = np.zeros((len(values), len(targets)))
    for own in range(4):
        weight = np.ones_like(targets)
        for other in range(4):
            if other != own:
                weight *= (targets - around[other]) / (around[own] - around[other])
        result += weight * values[:, places[own]]
    return result


def closed(angles: Floats, values: Floats, period: float) -> tuple[Floats, Floats]:
    """Add two samples at each end of a closed sequence, taken from its other end.

    Parameters
    ----------
    angles : (samples,)
        Ascending, spanning less than `period`. [deg]
    values : (rows, samples)
        Samples of a closed curve.
    period : length of the curve [deg]

    Returns
    -------
    angles, values : (samples + 4,) and (rows, samples + 4)
    """
    longer = np.concatenate((angles[-2:] - period, angles, angles[:2] + period))
    return longer, np.concatenate((values[:, -2:], values, values[:, :2]), axis=1)


def resample_cards(angles: Floats, cards: Floats, grid: Floats) -> Floats:
    """Bring closed cards onto another grid.

    Parameters
    ----------
    angles : (samples,)
        Crank angle of the cards, ascending in [0, 360). [deg]
    cards : (cards, samples)
        One turn each.
    grid : (grid,)
        Wanted crank angles in [0, 360). [deg]

    Returns
    -------
    resampled : (cards, grid)
    """
    return local_cubic(*closed(angles, cards, 360.0), grid)


def fill_gaps(positions: Floats, values: Floats) -> tuple[Floats, Booleans, int]:
    """Fill missing samples of one trace.

    Parameters
    ----------
    positions : (samples,)
        Strictly ascending. [deg]
    values : (samples,)
        NaN where a sample is missing.

    Returns
    -------
    filled : (samples,)
        Without NaN; all NaN when fewer than four samples are known.
    lost : (samples,)
        Whether a sample lies in a gap of more than `LONGEST_GAP`; what is filled in there is a
        placeholder.
    short : number of samples filled in short gaps
    """
    missing = ~np.isfinite(values)
    if not missing.any():
        return values, missing, 0
    if len(values) - np.count_nonzero(missing) < 4:
        return np.full_like(values, np.nan), np.ones_like(missing), 0
    edges = np.diff(missing.astype(np.int8), prepend=0, append=0)
    starts, stops = np.flatnonzero(edges == 1), np.flatnonzero(edges == -1)
    lost = np.zeros_like(missing)
    for start, stop in zip(starts, stops, strict=True):
        lost[start:stop] = stop - start > LONGEST_GAP
    filled = values.copy()
    known = ~missing
    filled[lost] = np.interp(positions[lost], positions[known], values[known])
    short = missing & ~lost
    filled[short] = local_cubic(positions[known], values[None, known], positions[short])[0]
    return filled, lost, int(np.count_nonzero(short))


def round_count(samples: float) -> int:
    """Round number of samples a turn nearest to a measured one, in proportion.

    Examples
    --------
    >>> round_count(863.0)
    900
    """
    return int(_ROUND_COUNTS[np.argmin(np.abs(np.log(_ROUND_COUNTS / samples)))])


def common_grid(positions: Floats, counts: Integers, tolerance: float) -> tuple[Floats | None, int]:
    """Grid that most turns share.

    Parameters
    ----------
    positions : (samples,)
        360 times the number of the turn plus the angle within it, ascending. [deg]
    counts : (turns,)
        Samples of each turn.
    tolerance : by which equal angles may differ [deg]

    Returns
    -------
    grid : angles within a turn, None when less than half of the turns share one [deg]
    sharing : number of turns on it
    """
    usual = int(np.bincount(counts).argmax())
    turns = np.flatnonzero(counts == usual)
    first = np.cumsum(counts) - counts
    grids = positions[first[turns][:, None] + np.arange(usual)] - 360.0 * turns[:, None]
    grid = np.median(grids, axis=0) if len(turns) > 2 else grids[0]
    sharing = int(np.count_nonzero((np.abs(grids - grid) <= tolerance).all(axis=1)))
    return (grid, sharing) if 2 * sharing >= len(counts) else (None, sharing)
