"""What a plot of one card needs: plain arrays of one cylinder end, computed elsewhere."""

from __future__ import annotations

from dataclasses import dataclass

from pvcard.types import Floats

Span = tuple[float, float]


@dataclass(frozen=True)
class CardView:
    """One analysed card; angles in degrees from the end's own dead centre, SI otherwise.

    Lines that could not be fitted are empty arrays, spans that do not exist are None.
    """

    cylinder: str
    end: str
    crank_angle: Floats  # (samples,) deg, ascending within [0, 360)
    volume: Floats  # (samples,) m3
    pressure: Floats  # (samples,) Pa
    swept_volume: float  # m3
    suction_pressure: float  # Pa, NaN where unknown
    discharge_pressure: float  # Pa, NaN where unknown
    ideal_volume: Floats  # (points,) m3, a closed loop in time order
    ideal_pressure: Floats  # (points,) Pa
    compression_volume: Floats  # (nodes,) m3, the fitted line reaching from p_s to p_d
    compression_pressure: Floats  # (nodes,) Pa
    expansion_volume: Floats  # (nodes,) m3, from p_d to p_s
    expansion_pressure: Floats  # (nodes,) Pa
    compression_window: Span | None  # deg, where the compression line was fitted
    expansion_window: Span | None  # deg
    suction_span: Span | None  # deg, limits of the suction loss; may pass 180
    discharge_span: Span | None  # deg, limits of the discharge loss; may pass 360 (end > 360)
    suction_line: Floats | None = None  # (samples,) Pa, nozzle or chamber trace
    discharge_line: Floats | None = None  # (samples,) Pa
