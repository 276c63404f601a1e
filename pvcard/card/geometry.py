"""Dimensions of the ends as estimates."""

from __future__ import annotations

from typing import NamedTuple

from pvcard.card_set import CardSet
from pvcard.uncertainty import Estimate, constant


class Geometry(NamedTuple):
    """Dimensions as estimates; each (cards,)."""

    area: Estimate  # m2
    swept_volume: Estimate  # m3
    speed: Estimate  # rev/s


def geometry(cards: CardSet, inputs: int) -> Geometry:
    """Dimensions of the ends as estimates.

    Parameters
    ----------
    cards : CardSet
    inputs : number of inputs carried, 0 for none

    Returns
    -------
    Geometry
    """
    area = constant(cards.piston_area, inputs)
    area = area.depending_on("bore", cards.piston_area * cards.area_by_bore)
    stroke = constant(cards.stroke, inputs).depending_on("stroke", cards.stroke)
    speed = constant(cards.speed, inputs).depending_on("speed", cards.speed)
    return Geometry(area, area * stroke, speed)
