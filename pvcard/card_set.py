"""A batch of cards of one gas on one grid of crank angles: the unit of all computing.

Angles are counted from each end's own dead centre of least volume, so that head and crank ends
share one grid and one set of formulas.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import NamedTuple

import numpy as np

from pvcard.gas import Gas
from pvcard.gas_table import GasTable
from pvcard.kinematics import Place, curvature_from_sine, place_from_sine
from pvcard.types import Floats, Integers


@dataclass(frozen=True, eq=False)
class CardSet:
    """Calibrated cards with what was declared and read beside them; SI, all but the grid
    (cards,)."""

    crank_angle: Floats  # (samples,) deg from the own dead centre, ascending in [0, 360)
    pressure: Floats  # (cards, samples) Pa absolute
    rod_sign: Floats  # +1 head end, -1 crank end
    rod_ratio: Floats  # crank radius over rod length
    bore: Floats  # m
    stroke: Floats  # m
    piston_area: Floats  # m2, of this end
    area_by_bore: Floats  # relative change of that area per relative change of bore
    clearance: Floats  # declared, fraction of swept volume; NaN where not known
    suction_pressure: Floats  # Pa
    discharge_pressure: Floats  # Pa
    suction_temperature: Floats  # K
    discharge_temperature: Floats  # K, NaN where not recorded
    speed: Floats  # rev/s
    gas: Gas
    table: GasTable

    @property
    def swept_volume(self) -> Floats:
        """Swept volume of each end. (cards,) [m3]."""
        return self.piston_area * self.stroke

    def part(self, first: int, last: int) -> CardSet:
        """Return cards `first` to `last - 1` as a set of their own."""
        cut = {
            one.name: getattr(self, one.name)[first:last]
            for one in fields(self)
            if one.name not in ("crank_angle", "gas", "table")
        }
        return CardSet(crank_angle=self.crank_angle, gas=self.gas, table=self.table, **cut)

    def rows(self, rows: Integers) -> CardSet:
        """Return some cards without their traces."""
        cut = {
            one.name: getattr(self, one.name)[rows]
            for one in fields(self)
            if one.name not in ("crank_angle", "pressure", "gas", "table")
        }
        pressure = self.pressure[rows, :0]
        return CardSet(self.crank_angle[:0], pressure, gas=self.gas, table=self.table, **cut)


class Turning(NamedTuple):
    """Motion of every card on the grid and the angle each sample stands for."""

    motion: Place  # each (cards, samples)
    sine: Floats  # (samples,)
    cosine: Floats  # (samples,)
    weight: Floats  # (samples,) rad
    half: int  # number of samples on the way out, before 180 degrees


def turning(cards: CardSet) -> Turning:
    """Piston motion of each card at the samples.

    Parameters
    ----------
    cards : CardSet

    Returns
    -------
    Turning
        Motion (cards, samples); weights are those of the trapezoid rule over the closed turn. [rad]
    """
    angle = np.radians(cards.crank_angle)
    sine, cosine = np.sin(angle), np.cos(angle)
    motion = place_from_sine(
        sine[None, :], cosine[None, :], cards.rod_ratio[:, None], cards.rod_sign[:, None]
    )
    return Turning(motion, sine, cosine, turn_weights(angle), _first_half(cards.crank_angle))


def curvature(cards: CardSet, turn: Turning) -> Floats:
    """Second derivative of the travel of each card at the samples.

    Parameters
    ----------
    cards, turn
        Of one batch.

    Returns
    -------
    curvature : (cards, samples)
        [1/rad2]
    """
    return curvature_from_sine(
        turn.sine, turn.cosine, cards.rod_ratio[:, None], cards.rod_sign[:, None]
    )


def turn_weights(angle: Floats) -> Floats:
    """Angle that each sample stands for in a sum over the closed turn.

    Parameters
    ----------
    angle : (samples,)
        Ascending within one turn. [rad]

    Returns
    -------
    weight : (samples,)
        Half the distance between both neighbours; their sum is one turn. [rad]
    """
    following = np.append(angle[1:], angle[0] + 2 * np.pi)
    preceding = np.insert(angle[:-1], 0, angle[-1] - 2 * np.pi)
    weight: Floats = (following - preceding) / 2
    return weight


def _first_half(crank_angle: Floats) -> int:
    return int(np.searchsorted(crank_angle, 180.0))
