"""Losses against a measured trace of the line, pulsation taken out."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from pvcard.analysis.batch import Outcome
from pvcard.card.losses import Span, trace_integral
from pvcard.card.work import running_integral
from pvcard.types import Floats
from pvcard.uncertainty import INDEX


def passage_loss(outcome: Outcome, side: str, line: Floats) -> tuple[float, float]:
    """Power lost between the trace of a line and that of the cylinder.

    Parameters
    ----------
    outcome : Outcome
        Of a card with fitted lines.
    side : "suction" or "discharge"
    line : (samples,)
        Pressure of the line on the grid of the card. [Pa]

    Returns
    -------
    loss, u : float
        Signed as the valve loss. [kW]

    Notes
    -----
    Same stretch as the valve loss. The uncertainty adds the level of the line's transducer, taken
    as that of the cylinder's, to what both losses share.
    """
    measured, cards, row = outcome.measured, outcome.cards, outcome.row
    if measured is None or cards is None or outcome.input_uncertainty is None:
        return np.nan, np.nan
    one = cards.part(row, row + 1)
    whole: Span = measured.suction_span if side == "suction" else measured.discharge_span
    span = Span(*(part[row : row + 1] for part in whole))
    turn = measured.turn._replace(
        motion=type(measured.turn.motion)(*(part[row : row + 1] for part in measured.turn.motion))
    )
    own = trace_integral(one, turn, running_integral(one, turn), span)
    lined = replace(one, pressure=line[None, :])
    against = trace_integral(lined, turn, running_integral(lined, turn), span)
    swept, speed = float(one.swept_volume[0]), float(one.speed[0])
    loss = float((against - own)[0]) * swept * speed / 1e3
    unsure = outcome.input_uncertainty
    level = float(np.sqrt(2)) * unsure[INDEX["pressure_level"]]
    width = abs(float((span.last_travel - span.first_travel)[0]))
    gain = unsure[INDEX["pressure_gain"]] * abs(float(against[0])) * float(np.sqrt(2))
    u = np.hypot(level * width, gain) * swept * speed / 1e3
    return loss, float(u)
