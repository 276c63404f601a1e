"""Which turn each row of an export belongs to, and where in it.

The angle is believed, the order of rows is not: rows are sorted by angle within their turn. Where
there is no angle, the once-per-turn pulse marks the turns and the angle runs evenly between them.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np

from pvcard.errors import ExportError
from pvcard.ingest.recording import Trace
from pvcard.types import Booleans, Floats, Integers

TOLERANCE = 1e-6  # deg; angles closer than this are the same
FEWEST_SAMPLES = 12  # of a turn; below, no card is worth drawing
WITHIN_TURN_UNCERTAINTY = 0.3  # deg, of an angle counted evenly between pulses
_WIDEST_GAP = 4.2  # of the usual step: three samples missing


@dataclass
class Rows:
    """Rows of one trace in order of turn and angle."""

    order: Integers  # (rows,) numbers of rows of the trace
    position: Floats  # (rows,) deg, 360 times the turn plus the angle after `start`
    turn: Integers  # (rows,) from 0
    start: float  # deg, export angle at which turns begin
    notes: list[str] = field(default_factory=list)
    repairs: list[dict[str, Any]] = field(default_factory=list)
    speed: float | None = None  # rev/s
    turn_speed: Floats | None = None  # (turns,) rev/s
    angle_uncertainty: float = 0.0  # deg
    even: bool = False  # whether the angle was counted evenly in time

    @property
    def turns(self) -> int:
        """Number of turns."""
        return int(self.turn[-1]) + 1 if len(self.turn) else 0

    def counts(self) -> Integers:
        """Samples of each turn, (turns,)."""
        return np.bincount(self.turn, minlength=self.turns)

    def keep(self, turns: Booleans) -> Booleans:
        """Keep some turns, renumber them; returns which rows stay, (rows,)."""
        if turns.all():
            return np.ones(len(self.turn), dtype=bool)
        rows: Booleans = turns[self.turn]
        number = np.cumsum(turns) - 1
        old = self.turn[rows]
        self.turn = number[old]
        self.position = self.position[rows] + 360.0 * (self.turn - old)
        self.order = self.order[rows]
        if self.turn_speed is not None:
            self.turn_speed = self.turn_speed[turns]
        return rows


def rows_of_trace(trace: Trace, source: str) -> Rows:
    """Complete turns of one trace.

    Parameters
    ----------
    trace : the rows of one file
    source : named in errors

    Returns
    -------
    rows : at least one complete turn
    """
    if trace.crank_angle is not None:
        return _rows_by_angle(trace.crank_angle, trace.cycle, trace.seconds, source)
    if trace.seconds is None or trace.once_per_turn is None:
        raise ExportError("there is neither a crank angle nor a once-per-turn pulse", file=source)
    return _rows_by_pulse(trace.seconds, trace.once_per_turn, source)


# --- by angle -------------------------------------------------------------------------------------


def _rows_by_angle(
    angle: Floats, cycle: Floats | None, seconds: Floats | None, source: str
) -> Rows:
    """Turns from the crank angle, and the cycle column where there is one."""
    notes: list[str] = []
    usable = np.isfinite(angle) if cycle is None else np.isfinite(angle) & np.isfinite(cycle)
    if not usable.all():
        notes.append(f"{np.count_nonzero(~usable)} row(s) without angle or cycle were left out")
    usable &= _not_repeated(angle, usable, notes)
    order = np.flatnonzero(usable)
    angle = angle[order]
    if len(angle) < FEWEST_SAMPLES:
        raise _no_turn(source, angle)
    rows = None
    if cycle is not None:
        turn = _turns_by_cycle(angle, cycle[order])
        rows = None if turn is None else _sorted(order, angle, turn, list(notes))
        if rows is None or not _keep_complete(rows):
            notes.append("the cycle column does not part whole turns; the angle parts them")
            rows = None
    if rows is None:
        turn, more = _turns_by_angle(angle)
        rows = _sorted(order, angle, turn, notes + more)
        if not _keep_complete(rows):
            raise _no_turn(source, angle)
    if seconds is not None:
        rows.speed = _speed_of(rows, seconds)
    return rows


def _not_repeated(angle: Floats, usable: Booleans, notes: list[str]) -> Booleans:
    """False for rows at the closing angle of a turn that repeats its first sample, as 0 ... 360."""
    lowest, highest = angle[usable].min(initial=np.inf), angle[usable].max(initial=-np.inf)
    turns = (highest - lowest) / 360.0
    if not 0.5 < turns < np.inf or abs(turns - round(turns)) * 360.0 > TOLERANCE:
        return np.ones_like(usable)
    repeated: Booleans = usable & (angle > highest - TOLERANCE)
    notes.append(
        f"the sample at {highest:g} deg repeats the one at {lowest:g} deg and was left out"
        + (f" ({np.count_nonzero(repeated)} times)" if np.count_nonzero(repeated) > 1 else "")
    )
    return ~repeated


def _turns_by_cycle(angle: Floats, cycle: Floats) -> Integers | None:
    """Turn of each row; None when a cycle holds turns that the angle does not tell apart."""
    number = _numbered(cycle)
    within = np.floor(np.round(angle - angle.min(), 7) / 360.0).astype(np.int64)
    turn = number * (int(within.max()) + 1) + within
    place = turn * 360.0 + np.mod(np.round(angle - angle.min(), 7), 360.0)
    steps = np.diff(place)
    if not (steps >= 0).all():
        steps = np.diff(np.sort(place))
    return turn if np.count_nonzero(steps > TOLERANCE) + 1 > 0.75 * len(place) else None


def _turns_by_angle(angle: Floats) -> tuple[Integers, list[str]]:
    """Turn of each row from the falls of the angle at the end of a turn."""
    low, high = np.percentile(angle, (0.5, 99.5))  # a stray angle does not count
    period = 360.0 * max(np.ceil(round(float(high - low) / 360.0, 9)), 1.0)
    step = np.diff(angle, prepend=angle[0])
    falls, rises = step < -period / 2, step > period / 2
    small = step[~falls & ~rises]
    up, down = np.count_nonzero(small > 0), np.count_nonzero(small < 0)
    if min(up, down) > 0.1 * len(angle):
        return _turns_by_occurrence(angle), [
            "the rows are not in order of angle; they were sorted, each angle once a turn"
        ]
    notes = ["the angle falls from row to row; the rows were sorted by it"] if down > up else []
    if 0 < down < up:
        notes.append(f"{down} row(s) are out of order; they were sorted by angle")
    unwrapped = angle + period * (np.cumsum(falls) - np.cumsum(rises))
    begin = unwrapped.min()
    return np.floor(np.round(unwrapped - begin, 7) / 360.0).astype(np.int64), notes


def _turns_by_occurrence(angle: Floats) -> Integers:
    """Turn of each row as the number of times its angle came before."""
    phase = np.mod(np.round(angle, 6), 360.0)
    order = np.argsort(phase, kind="stable")
    first = np.concatenate(([True], np.diff(phase[order]) > TOLERANCE))
    starts = np.flatnonzero(first)
    rank = np.arange(len(phase)) - np.repeat(starts, np.diff(np.append(starts, len(phase))))
    turn = np.empty(len(phase), dtype=np.int64)
    turn[order] = rank
    return turn


def _numbered(values: Floats | Integers) -> Integers:
    """Number of each value among the different ones, from 0."""
    steps = np.diff(values)
    if (steps >= 0).all():
        return np.concatenate(([0], np.cumsum(steps > 0)))
    return np.unique(values, return_inverse=True)[1]


def _sorted(order: Integers, angle: Floats, turn: Integers, notes: list[str]) -> Rows:
    """Rows in order of turn and angle."""
    turn = _numbered(turn)
    start = float(angle.min())
    phase = np.mod(np.round(angle - start, 7), 360.0)
    position = np.asarray(360.0 * turn + phase, dtype=np.float64)
    if not (np.diff(position) > 0).all():
        sorting = np.argsort(position, kind="stable")
        order, turn, position = order[sorting], turn[sorting], position[sorting]
    return Rows(order, position, turn, start, notes)


def _speed_of(rows: Rows, seconds: Floats) -> float | None:
    """Mean speed from the times of the rows."""
    time = seconds[rows.order]
    good = np.isfinite(time)
    if np.count_nonzero(good) < 2 or rows.turns < 2:
        return None
    moved, elapsed = np.ptp(rows.position[good]) / 360.0, np.ptp(time[good])
    return float(moved / elapsed) if elapsed > 0 else None


# --- by pulse -------------------------------------------------------------------------------------


def _rows_by_pulse(seconds: Floats, pulse: Floats, source: str) -> Rows:
    """Turns between pulses, the angle even in time between them."""
    notes: list[str] = []
    order = np.flatnonzero(np.isfinite(seconds) & np.isfinite(pulse))
    if len(order) < len(seconds):
        notes.append(f"{len(seconds) - len(order)} row(s) without time or pulse were left out")
    if not (np.diff(seconds[order]) > 0).all():
        _, first = np.unique(seconds[order], return_index=True)
        notes.append("the rows are not in order of time; they were sorted")
        order = order[first]
    time, level = seconds[order], pulse[order]
    low, high = _pulse_edges(time, level, notes)
    if len(high) < 2:
        raise ExportError(
            "no complete turn between two pulses",
            file=source,
            place="once_per_turn",
            found=f"{len(high)} rise(s) of the pulse in {np.ptp(time) if len(time) else 0.0:.4g} s",
            expected="at least two",
            advice="Record at least two turns, and check the column of the pulse",
        )
    marks, mark_uncertainty = _marks(low, high)
    turn = np.searchsorted(marks, time, side="right") - 1
    inside = (turn >= 0) & (turn < len(marks) - 1)
    turn, duration = turn[inside], np.diff(marks)
    fraction = (time[inside] - marks[turn]) / duration[turn]
    rows = Rows(order[inside], 360.0 * (turn + fraction), turn, 0.0, notes, even=True)
    rows.turn_speed = 1.0 / duration
    usual = float(np.median(duration))
    regular = np.abs(duration / usual - 1) < 0.1
    if not regular.all():
        notes.append(
            f"{np.count_nonzero(~regular)} turn(s) between pulses last more than 10 % longer or "
            "shorter than usual and were left out; a pulse may be missing"
        )
    if not _keep_complete(rows, regular):
        raise _no_turn(source, rows.position)
    step = float(np.median(np.diff(time)))
    _note_speed(rows, step, mark_uncertainty / usual * 360.0)
    return rows


def _pulse_edges(time: Floats, level: Floats, notes: list[str]) -> tuple[Floats, Floats]:
    """Times of the last low and the first high sample of each pulse."""
    if len(level) < 2 or np.ptp(level) == 0:
        return np.empty(0), np.empty(0)
    high = level > (level.min() + level.max()) / 2
    rises = np.flatnonzero(high[1:] & ~high[:-1])
    if len(rises) > 2:
        between = np.diff(time[rises])
        usual = float(np.median(between[between > 0.3 * between.max()]))
        kept = [0]
        for number in range(1, len(rises)):
            if time[rises[number]] - time[rises[kept[-1]]] > 0.5 * usual:
                kept.append(number)
        if len(kept) < len(rises):
            notes.append(
                f"{len(rises) - len(kept)} pulse(s) too soon after another were passed over"
            )
        rises = rises[kept]
    return time[rises], time[rises + 1]


def _marks(low: Floats, high: Floats) -> tuple[Floats, float]:
    """Moments of crank angle 0, and their common uncertainty in seconds.

    Each lies between a last low and a first high sample. Where one even speed passes through all
    of these gaps, it is taken, which places them more finely than half a sample.
    """
    middle = (low + high) / 2
    number = np.arange(len(middle))
    width = float(np.median(high - low))
    if len(middle) > 3:
        period = float(np.polyfit(number, middle, 1)[0])
        earliest = float((low - period * number).max())
        latest = float((high - period * number).min())
        if latest > earliest:
            marks = np.asarray((earliest + latest) / 2 + period * number, dtype=np.float64)
            return marks, (latest - earliest) / 12.0**0.5
    return np.asarray(middle), width / (12.0 * len(middle)) ** 0.5


def _note_speed(rows: Rows, step: float, mark_uncertainty: float) -> None:
    """Speed from the pulses, with what it rests on."""
    assert rows.turn_speed is not None
    speed = float(1.0 / np.mean(1.0 / rows.turn_speed))
    elapsed = rows.turns / speed
    uncertainty = speed * step / 6.0**0.5 / elapsed  # two marks, each even within a sample
    rows.speed = speed
    rows.angle_uncertainty = float(np.hypot(WITHIN_TURN_UNCERTAINTY, mark_uncertainty))
    text = (
        f"{rows.turns} turns between pulses in {elapsed:.4f} s; the speed within a turn is taken "
        f"as even, which leaves the angle uncertain by {rows.angle_uncertainty:.2f} deg"
    )
    rows.notes.append("crank angle counted from the pulses: " + text)
    rows.repairs.append(
        {
            "kind": "speed_from_pulse",
            "cylinder": None,
            "end": None,
            "value": speed * 60.0,
            "unit": "rpm",
            "u": uncertainty * 60.0,
            "applied": True,
            "evidence": [
                {"name": "turns", "value": rows.turns, "unit": "", "u": None, "text": text},
            ],
        }
    )


# --- complete turns -------------------------------------------------------------------------------


def _keep_complete(rows: Rows, allowed: Booleans | None = None) -> bool:
    """Keep the turns whose samples go all the way round; False when there is none."""
    if rows.turns == 0:
        return False
    last = np.append(np.flatnonzero(np.diff(rows.turn)), len(rows.turn) - 1)
    first = np.concatenate(([0], last[:-1] + 1))
    steps = np.diff(rows.position, append=0.0)
    steps[last] = rows.position[first] + 360.0 - rows.position[last]
    counts = np.zeros(rows.turns, dtype=np.int64)
    widest = np.full(rows.turns, np.inf)
    present = rows.turn[first]
    counts[present] = last - first + 1
    widest[present] = np.maximum.reduceat(steps, first)
    moved = steps[steps > TOLERANCE]
    usual = max(np.median(moved), np.percentile(moved, 95)) if len(moved) else 360.0
    complete = (counts >= FEWEST_SAMPLES) & (widest <= _WIDEST_GAP * usual)
    part = ~complete & (counts > 1)
    if allowed is not None:
        part &= allowed
        complete &= allowed
    if complete.any() and part.any():
        rows.notes.append(
            f"{np.count_nonzero(part)} incomplete turn(s) of {len(counts)} were left out "
            f"({int(counts[part].sum())} rows)"
        )
    rows.keep(complete)
    return bool(complete.any())


def _no_turn(source: str, angle: Floats) -> ExportError:
    """Error for a recording that holds no complete turn."""
    found = f"{len(angle)} samples"
    if len(angle):
        found += f" from {angle.min():g} to {angle.max():g} deg"
    return ExportError(
        "no complete turn",
        file=source,
        place="crank angle",
        found=found,
        expected=f"at least one turn of {FEWEST_SAMPLES} or more samples, without a wide gap",
        advice="Record at least one whole turn; two are needed with a pulse",
    )
