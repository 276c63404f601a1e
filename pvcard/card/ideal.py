"""The theoretical card: isentropic real gas from the suction line state at the card's own
clearance."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.card_set import CardSet
from pvcard.closed_lines import References
from pvcard.types import Floats
from pvcard.uncertainty import Estimate, constant


class LineStates(NamedTuple):
    """States at the line pressures with what they rest on; each (cards,)."""

    suction_pressure: Estimate  # Pa
    discharge_pressure: Estimate  # Pa
    suction_temperature: Estimate  # K
    ln_suction_density: Estimate
    ln_density_ratio: Estimate  # of the isentropic end state over the suction state
    enthalpy_rise: Estimate  # J/kg
    temperature: Estimate  # K, isentropic end state
    exponent: Estimate  # mean volume exponent of the isentropic path


def line_states(cards: CardSet, known: References, inputs: int) -> LineStates:
    """Line readings and the isentropic path between them as estimates.

    Parameters
    ----------
    cards : CardSet
    known : References
    inputs : number of inputs carried, 0 for none

    Returns
    -------
    LineStates

    Notes
    -----
    Slopes by pressures and temperature are those of the gas table. An error of the exponent moves
    density, temperature and work of the path as it would for an ideal gas.
    """
    suction = constant(cards.suction_pressure, inputs).depending_on("suction_pressure", 1.0)
    discharge = constant(cards.discharge_pressure, inputs).depending_on("discharge_pressure", 1.0)
    temperature = constant(cards.suction_temperature, inputs)
    temperature = temperature.depending_on("suction_temperature", 1.0)
    path = known.path
    slopes = _Slopes(cards.suction_pressure, cards.discharge_pressure)
    ln_one = slopes.put(np.log(path.density1), path.ln_density1_slopes, inputs)
    ln_two = slopes.put(np.log(path.density2), path.ln_density2_slopes, inputs)
    rise = slopes.put(path.enthalpy_rise, path.enthalpy_rise_slopes, inputs)
    end = slopes.put(path.temperature, path.temperature_slopes, inputs)
    k, ln_ratio = path.volume_exponent, np.log(cards.discharge_pressure / cards.suction_pressure)
    share = (k - 1) / k
    grown = np.exp(share * ln_ratio)
    by_share = (share * grown * ln_ratio - grown + 1) / (share * (grown - 1))
    ln_two = ln_two.depending_on("gas_exponent", -ln_ratio / k)
    rise = rise.depending_on("gas_exponent", path.enthalpy_rise * by_share / k)
    end = end.depending_on("gas_exponent", path.temperature * ln_ratio / k)
    ratio = ln_two - ln_one
    exponent = (discharge / suction).log() / ratio
    return LineStates(suction, discharge, temperature, ln_one, ratio, rise, end, exponent)


class _Slopes(NamedTuple):
    suction: Floats
    discharge: Floats

    def put(self, value: Floats, slopes: Floats, inputs: int) -> Estimate:
        """Value with slopes by (ln p1, T1, ln p2) turned into slopes by the inputs."""
        estimate = constant(value, inputs)
        estimate = estimate.depending_on("suction_pressure", slopes[:, 0] / self.suction)
        estimate = estimate.depending_on("suction_temperature", slopes[:, 1])
        return estimate.depending_on("discharge_pressure", slopes[:, 2] / self.discharge)


class IdealCard(NamedTuple):
    """Figures of the theoretical card; each (cards,)."""

    work: Estimate  # J per revolution
    suction_efficiency: Estimate  # fraction of swept volume
    discharge_efficiency: Estimate


def ideal_card(clearance: Estimate, swept_volume: Estimate, at: LineStates) -> IdealCard:
    """Work and volumetric efficiencies of the theoretical card.

    Parameters
    ----------
    clearance : (cards,)
        Fraction of swept volume. [-]
    swept_volume : (cards,)
        [m3]
    at : LineStates

    Returns
    -------
    IdealCard

    Notes
    -----
    ``VE = 1 - C (rho_d / rho_s - 1)`` and work = mass drawn in times isentropic rise of enthalpy:
    for a closed isentropic card of a real gas the clearance gas takes and gives back the same work
    [1]_.

    References
    ----------
    .. [1] Mass and energy balance of the steady cycle; the form in specific volumes stands in D.
    A. Mooney,
       *Mechanical Engineering Thermodynamics*, chapter 19.
    """
    ratio = at.ln_density_ratio.exp()
    suction = 1 - clearance * (ratio - 1)
    discharge = (clearance + 1) / ratio - clearance
    work = at.ln_suction_density.exp() * swept_volume * suction * at.enthalpy_rise
    return IdealCard(work, suction, discharge)


def ideal_loop(
    clearance: Floats, swept_volume: Floats, cards: CardSet, points: int = 40
) -> tuple[Floats, Floats]:
    """Volume and pressure along the theoretical card, for drawing.

    Parameters
    ----------
    clearance, swept_volume : (cards,)
        [-], [m3]
    cards : CardSet
    points : per line

    Returns
    -------
    volume, pressure : (cards, 2 points)
        Expansion from discharge to suction pressure, then compression; the loop closes. [m3], [Pa]
    """
    low, high = cards.suction_pressure[:, None], cards.discharge_pressure[:, None]
    share = np.linspace(0.0, 1.0, points)
    rising = low * (high / low) ** share
    path = cards.table.isentropic(low, cards.suction_temperature[:, None], rising)
    relative = path.density1 / path.density2  # volume over that at suction pressure
    full = (clearance * swept_volume)[:, None]
    compression = (full + swept_volume[:, None]) * relative
    expansion = full * relative / relative[:, -1:]
    volume = np.concatenate([expansion[:, ::-1], compression], axis=-1)
    return volume, np.concatenate([rising[:, ::-1], rising], axis=-1)
