"""Arrays of one measured card for plots."""

from __future__ import annotations

import numpy as np

from pvcard.analysis.batch import Job, Outcome
from pvcard.analysis.rows import Row
from pvcard.card.ideal import ideal_loop
from pvcard.card.losses import Span
from pvcard.card.measure import Measured
from pvcard.card.view import CardView
from pvcard.closed_lines import COMPRESSION, EXPANSION, start_clearance
from pvcard.kinematics import motion
from pvcard.types import Floats

_NONE = np.zeros(0)
_EXTENSION = 8  # points by which a fitted line is drawn on to the line pressures


def card_view(job: Job, outcome: Outcome, row: Row) -> CardView:
    """Arrays that a plot of one end needs.

    Parameters
    ----------
    job, outcome, row
        Of one end.

    Returns
    -------
    CardView
    """
    trace, lines = job.trace, job.trace.lines
    cylinder, measured = trace.cylinder, outcome.measured
    swept = cylinder.swept_volume(trace.end)
    closed = measured is not None and bool(measured.closed[outcome.row])
    clearance = job.clearance if np.isfinite(job.clearance) else 0.15
    if closed and row["clearance_pct"] is not None:
        clearance = row["clearance_pct"] / 100
    ratio = cylinder.stroke / 2 / cylinder.connecting_rod_length
    travel = motion(trace.crank_angle, ratio, trace.rod_sign).travel
    ideal = _ideal(outcome, clearance)
    fitted = _fitted(measured, outcome.row, swept) if closed and measured else (_NONE,) * 4
    return CardView(
        cylinder=cylinder.name,
        end=trace.end,
        crank_angle=trace.crank_angle,
        volume=(clearance + travel) * swept,
        pressure=trace.pressure,
        swept_volume=swept,
        suction_pressure=lines.suction_pressure,
        discharge_pressure=lines.discharge_pressure,
        ideal_volume=ideal[0],
        ideal_pressure=ideal[1],
        compression_volume=fitted[0],
        compression_pressure=fitted[1],
        expansion_volume=fitted[2],
        expansion_pressure=fitted[3],
        compression_window=_window(measured, outcome.row, COMPRESSION) if closed else None,
        expansion_window=_window(measured, outcome.row, EXPANSION) if closed else None,
        suction_span=_span(measured.suction_span, outcome.row) if closed and measured else None,
        discharge_span=_span(measured.discharge_span, outcome.row) if closed and measured else None,
        suction_line=trace.suction_line,
        discharge_line=trace.discharge_line,
    )


def _ideal(outcome: Outcome, clearance: float) -> tuple[Floats, Floats]:
    if outcome.cards is None:
        return _NONE, _NONE
    one = outcome.cards.part(outcome.row, outcome.row + 1)
    guess = np.full_like(start_clearance(one), clearance)
    volume, pressure = ideal_loop(guess, one.swept_volume, one)
    if not np.isfinite(volume).all():
        return _NONE, _NONE
    return volume[0], pressure[0]


def _fitted(measured: Measured, row: int, swept: float) -> tuple[Floats, Floats, Floats, Floats]:
    """Both fitted lines with their extensions to the line pressures."""
    case, fit, at = measured.case, measured.fit, measured.crossings
    cards = case.cards
    low, high = float(cards.suction_pressure[row]), float(cards.discharge_pressure[row])
    ends = (
        (at.compression_start, low, at.compression_end, high),
        (at.expansion_start, high, at.expansion_end, low),
    )
    result: list[Floats] = []
    for part, (first, start, last, end) in zip((COMPRESSION, EXPANSION), ends):
        volume = np.exp(fit.linear.ln_volume[row, part])
        pressure = np.exp(case.ln_pressure[row, part] - fit.linear.residual[row, part])
        before = _between(float(first.volume.value[row]), volume[0], start, pressure[0])
        after = _between(volume[-1], float(last.volume.value[row]), pressure[-1], end)
        result.append(np.concatenate([before[0], volume, after[0]]) * swept)
        result.append(np.concatenate([before[1], pressure, after[1]]))
    return result[0], result[1], result[2], result[3]


def _between(v1: float, v2: float, p1: float, p2: float) -> tuple[Floats, Floats]:
    share = np.linspace(0, 1, _EXTENSION)
    return v1 * (v2 / v1) ** share, p1 * (p2 / p1) ** share


def _window(measured: Measured | None, row: int, part: slice) -> tuple[float, float] | None:
    if measured is None:
        return None
    angle = measured.case.crank_angle[row, part]
    return float(angle[0]), float(angle[-1])


def _span(span: Span, row: int) -> tuple[float, float] | None:
    first, last = float(span.first_angle[row]), float(span.last_angle[row])
    if not (np.isfinite(first) and np.isfinite(last)):
        return None
    return first, last + (360.0 if last < first else 0.0)
