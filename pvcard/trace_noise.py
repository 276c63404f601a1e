"""White noise of a trace, told from its fourth differences over the closed spans."""

from __future__ import annotations

import numpy as np

from pvcard.card_set import CardSet, Turning
from pvcard.closed_lines import start_clearance
from pvcard.types import Floats
from pvcard.windows import Windows

_SAMPLES = 40  # per span, at most


def relative_noise(cards: CardSet, turn: Turning, windows: Windows, exponent: Floats) -> Floats:
    """Standard deviation of single samples over their pressure.

    Parameters
    ----------
    cards, turn, windows
        Of one batch.
    exponent : (cards,)
        With which the trace is flattened before it is differenced. [-]

    Returns
    -------
    noise : (cards,)
        At least 1e-9. NaN where a trace is not positive. [-]

    Notes
    -----
    The fourth difference of white noise of variance ``v`` has variance ``70 v`` (sum of the
    squared binomial coefficients 1, 4, 6, 4, 1); anything smooth nearly vanishes in it.
    """
    row = np.arange(len(cards.pressure))[:, None]
    total = np.zeros(len(row))
    count = np.zeros(len(row))
    clearance = start_clearance(cards)[:, None]
    for first, last in (
        (windows.compression_first, windows.compression_last),
        (windows.expansion_first, windows.expansion_last),
    ):
        index = first[:, None] + np.arange(_SAMPLES)
        valid = (index <= last[:, None])[:, 4:]
        index = np.minimum(index, cards.pressure.shape[1] - 1)
        with np.errstate(invalid="ignore", divide="ignore"):
            flat = np.log(cards.pressure[row, index])
        flat = flat + exponent[:, None] * np.log(clearance + turn.motion.travel[row, index])
        difference = np.where(valid, np.diff(flat, n=4, axis=-1), 0.0)
        total += np.einsum("cs,cs->c", difference, difference)
        count += valid.sum(-1)
    noise: Floats = np.sqrt(total / np.maximum(70 * count, 1))
    return np.maximum(noise, 1e-9)
