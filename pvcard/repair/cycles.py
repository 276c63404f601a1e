"""From a recording to complete turns, every channel on one ascending grid of crank angles.

Where all turns lie on the same angles nothing is interpolated. What was left out, filled or moved
is said in the notes. Dead centre, level and passage are not touched here.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from pvcard.errors import ExportError
from pvcard.ingest.recording import Channel, Recording
from pvcard.repair.resampling import (
    LONGEST_GAP,
    closed,
    common_grid,
    fill_gaps,
    local_cubic,
    resample_cards,
    round_count,
)
from pvcard.repair.turn_rows import TOLERANCE, Rows, rows_of_trace
from pvcard.types import Floats, Integers

ChannelKey = tuple[str, str, str]  # cylinder, end, kind


@dataclass(frozen=True, eq=False)
class Turns:
    """Complete turns of one recording.

    `crank_angle` is the angle of the export, modulo 360; no dead centre has been taken off.
    """

    crank_angle: Floats  # (samples,) deg, ascending in [0, 360)
    pressures: dict[ChannelKey, Floats]  # each (turns, samples), Pa
    speed: float | None  # rev/s
    notes: tuple[str, ...] = ()
    repairs: tuple[dict[str, Any], ...] = ()
    angle_uncertainty_deg: float = 0.0  # standard, beyond that of the dead centre mark
    interpolated: bool = False  # whether samples were moved onto the grid
    turn_speed: Floats | None = field(default=None)  # (turns,) rev/s, where pulses tell it

    @property
    def count(self) -> int:
        """Number of turns."""
        return len(next(iter(self.pressures.values())))


@dataclass
class _Part:
    """Turns of one trace."""

    crank_angle: Floats
    pressures: dict[ChannelKey, Floats]
    rows: Rows
    interpolated: bool


def turns(recording: Recording) -> Turns:
    """Take a recording apart into complete turns.

    Parameters
    ----------
    recording : raw traces as exported

    Returns
    -------
    turns : pressures (turns, samples) on one grid for all channels

    Notes
    -----
    Angles 0 to 360, -180 to 180 or 0 to 720, any start, even or not. Rows are sorted by angle
    within their turn, since the angle is believed and the order of rows is not. A turn begins at
    the lowest angle of the export, so that the turns of a recording follow each other in time.
    """
    parts = [
        _part(
            rows_of_trace(trace, recording.source), list(recording.channels_of(number)), recording
        )
        for number, trace in enumerate(recording.traces)
    ]
    notes = [note for part in parts for note in part.rows.notes]
    first = max(parts, key=lambda part: len(part.crank_angle))
    pressures, moved = _merged(parts, first.crank_angle, notes)
    speeds = [part.rows.speed for part in parts if part.rows.speed is not None]
    counted = [part.rows for part in parts if part.rows.even]
    speed = speeds[0] if speeds and (counted or recording.speed is None) else recording.speed
    if counted and recording.speed and speed and abs(recording.speed / speed - 1) > 5e-3:
        notes.append(
            f"the export names {recording.speed * 60:.2f} rpm, its pulses {speed * 60:.2f} rpm; "
            "the pulses are believed"
        )
    return Turns(
        crank_angle=first.crank_angle,
        pressures=pressures,
        speed=speed,
        notes=tuple(dict.fromkeys(notes)),
        repairs=tuple(repair for part in parts for repair in part.rows.repairs),
        angle_uncertainty_deg=max(part.rows.angle_uncertainty for part in parts),
        interpolated=moved or any(part.interpolated for part in parts),
        turn_speed=parts[0].rows.turn_speed if len(parts) == 1 else None,
    )


def _part(rows: Rows, channels: list[Channel], recording: Recording) -> _Part:
    """Turns of one trace on a grid of its own."""
    starts = _distinct(rows)
    keys = [channel.key for channel in channels]
    values = np.array([_gathered(channel.pressure[rows.order], starts) for channel in channels])
    if len(starts) < len(rows.order):
        rows.notes.append(
            f"{len(rows.order) - len(starts)} sample(s) at an angle already there were averaged"
        )
        rows.order, rows.turn = rows.order[starts], rows.turn[starts]
        rows.position = rows.position[starts]
    keys, values = _without_gaps(rows, keys, values, recording.source)
    angle, cards, interpolated = _on_grid(rows, values)
    return _Part(angle, dict(zip(keys, cards, strict=True)), rows, interpolated)


def _distinct(rows: Rows) -> Integers:
    """First row of each angle."""
    return np.flatnonzero(np.diff(rows.position, prepend=-np.inf) > TOLERANCE)


def _gathered(values: Floats, starts: Integers) -> Floats:
    """Mean of the known samples of each angle, NaN where there is none; a copy."""
    if len(starts) == len(values):
        return values
    known = np.isfinite(values)
    number = np.add.reduceat(known.astype(np.float64), starts)
    total = np.add.reduceat(np.where(known, values, 0.0), starts)
    mean: Floats = np.divide(total, number, out=np.full(len(starts), np.nan), where=number > 0)
    return mean


def _without_gaps(
    rows: Rows, keys: list[ChannelKey], values: Floats, source: str
) -> tuple[list[ChannelKey], Floats]:
    """Fill short gaps; leave out turns with long ones, and channels with hardly a whole turn."""
    if np.isfinite(values).all():
        return keys, values
    whole = np.ones((len(keys), rows.turns), dtype=bool)
    filled = np.empty_like(values)
    for number, (key, trace) in enumerate(zip(keys, values, strict=True)):
        filled[number], lost, short = fill_gaps(rows.position, trace)
        whole[number, rows.turn[lost]] = False
        if short:
            rows.notes.append(
                f"{_name(key)}: {short} missing sample(s) in gaps of up to {LONGEST_GAP} were "
                "filled by interpolation"
            )
    kept = whole.mean(axis=1) > 0.5
    if not kept.any():
        kept = whole.mean(axis=1) == whole.mean(axis=1).max()
    for key in (key for key, keep in zip(keys, kept, strict=True) if not keep):
        rows.notes.append(f"{_name(key)} is blank in most turns and was left out")
    good = whole[kept].all(axis=0)
    if not good.any():
        raise ExportError(
            "no turn without a gap in its samples",
            file=source,
            found=f"more than {LONGEST_GAP} blank fields in a row in each of {rows.turns} turns",
            expected="at least one turn with all its samples",
        )
    if not good.all():
        rows.notes.append(
            f"{np.count_nonzero(~good)} turn(s) with more than {LONGEST_GAP} samples missing in a "
            "row were left out"
        )
    stay = rows.keep(good)
    return [key for key, keep in zip(keys, kept, strict=True) if keep], filled[kept][:, stay]


def _on_grid(rows: Rows, values: Floats) -> tuple[Floats, Floats, bool]:
    """Grid (samples,), cards (channels, turns, samples), and whether samples were moved."""
    counts = rows.counts()
    grid, sharing = (None, 0) if rows.even else common_grid(rows.position, counts, TOLERANCE)
    if grid is not None and sharing == len(counts):
        cards = values.reshape(len(values), len(counts), len(grid))
        return *_ascending(np.mod(np.round(grid + rows.start, 7), 360.0), cards), False
    if grid is not None:
        angle = np.mod(np.round(grid + rows.start, 7), 360.0)
        rows.notes.append(
            f"{len(counts) - sharing} turn(s) of {len(counts)} lie on other angles than the rest "
            f"and were interpolated onto the {len(grid)} angles of those"
        )
    else:
        angle = np.arange(samples := round_count(float(np.median(counts)))) * (360.0 / samples)
        grid = np.mod(angle - rows.start, 360.0)
        rows.notes.append(
            f"samples were interpolated onto {samples} even steps of {360.0 / samples:g} deg "
            f"(the export has about {np.median(counts):.0f} a turn)"
        )
        order = np.argsort(grid)
        angle, grid = angle[order], grid[order]
    nodes, known = closed(rows.position, values, 360.0 * len(counts))
    known[:, :2] = values[:, rows.turn == 0][:, -2:]
    nodes[:2] = rows.position[rows.turn == 0][-2:] - 360.0
    last = rows.turn == len(counts) - 1
    known[:, -2:] = values[:, last][:, :2]
    nodes[-2:] = rows.position[last][:2] + 360.0
    targets = (360.0 * np.arange(len(counts))[:, None] + grid).ravel()
    cards = local_cubic(nodes, known, targets).reshape(len(values), len(counts), len(grid))
    return *_ascending(angle, cards), True


def _ascending(angle: Floats, cards: Floats) -> tuple[Floats, Floats]:
    """Turn the samples so that the angle grows from its lowest value."""
    if (np.diff(angle) > 0).all():
        return angle, cards
    first = int(np.argmin(angle))
    return np.roll(angle, -first), np.roll(cards, -first, axis=-1)


def _merged(
    parts: Iterable[_Part], grid: Floats, notes: list[str]
) -> tuple[dict[ChannelKey, Floats], bool]:
    """Channels of all parts on one grid, with as many turns as the shortest of them."""
    gathered: dict[ChannelKey, list[Floats]] = {}
    moved = False
    for part in parts:
        same = len(part.crank_angle) == len(grid) and np.allclose(
            part.crank_angle, grid, rtol=0.0, atol=TOLERANCE
        )
        for key, cards in part.pressures.items():
            if not same:
                cards = resample_cards(part.crank_angle, cards, grid)
                moved = True
            gathered.setdefault(key, []).append(np.ascontiguousarray(cards))
    if moved:
        notes.append("the files of this recording have different angles; brought onto one grid")
    pressures = {
        key: cards[0] if len(cards) == 1 else np.concatenate(cards)
        for key, cards in gathered.items()
    }
    fewest = min(len(cards) for cards in pressures.values())
    if any(len(cards) > fewest for cards in pressures.values()):
        notes.append(
            f"channels have different numbers of turns; the first {fewest} of each are used"
        )
        pressures = {key: cards[:fewest] for key, cards in pressures.items()}
    return pressures, moved


def _name(key: ChannelKey) -> str:
    cylinder, end, kind = key
    return f"{cylinder} {end} end" + ("" if kind == "cylinder" else f" {kind.replace('_', ' ')}")
