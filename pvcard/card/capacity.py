"""Gas drawn in and delivered, from the mass trapped in the closed spans."""

from __future__ import annotations

import numpy as np

from pvcard.card.geometry import Geometry
from pvcard.card.ideal import LineStates
from pvcard.card.lines import Crossings, stroke_fractions
from pvcard.card_set import CardSet
from pvcard.closed_lines import PLACE, Problem
from pvcard.line_fit import Fit
from pvcard.types import Floats
from pvcard.uncertainty import Estimate


def capacity(
    cards: CardSet,
    case: Problem,
    fit: Fit,
    at: Crossings,
    states: LineStates,
    size: Geometry,
    work: Estimate,
) -> dict[str, Estimate]:
    """Volumetric efficiencies, flows and isentropic efficiency.

    Parameters
    ----------
    cards, case, fit, at, states, size
        Of one batch.
    work : (cards,)
        Indicated work. [J]

    Returns
    -------
    dict
        Columns in their reported units.

    Notes
    -----
    Per turn the compression line holds ``rho(p_s, T_1) V_1`` and the expansion line ``rho(p_s,
    T_4) V_4``, both followed to suction pressure; their difference is delivered, if nothing leaks.
    ``T_1`` and
    ``T_4`` come out of the fit: warming by wall, valve loss and clearance gas. Nothing is read off
    the closing of a valve, which would mistake a late one for capacity.
    """
    lines = (cards.suction_pressure, cards.discharge_pressure)
    efficiency, delivery = stroke_fractions(case, fit, at, lines)
    by_temperature = case.references.suction.ln_density_by_temperature * cards.suction_temperature
    warm = states.suction_temperature + _state(fit, "warming")
    cold = warm + _state(fit, "clearance_gas")
    dense = states.ln_suction_density.exp()
    full = _density(dense, states.suction_temperature, warm, by_temperature)
    left = _density(dense, states.suction_temperature, cold, by_temperature)
    mass = (full * at.compression_start.volume - left * at.expansion_end.volume) * size.swept_volume
    flow = mass * size.speed * 3600
    ideal_discharge = states.ln_density_ratio.exp() * dense
    outlet = _discharge_density(cards, states, ideal_discharge)
    columns = {
        "suction_volumetric_efficiency_pct": efficiency * 100,
        "discharge_volumetric_efficiency_pct": delivery * 100,
        "suction_flow_kg_h": flow,
        "discharge_flow_kg_h": flow,
        "flow_ratio": dense * efficiency / (outlet * delivery),
        "isentropic_efficiency_pct": mass * states.enthalpy_rise / work * 100,
    }
    return columns


def _state(fit: Fit, name: str) -> Estimate:
    return Estimate(fit.state[:, PLACE[name]], fit.slopes[:, PLACE[name]])


def _density(
    line: Estimate, line_temperature: Estimate, temperature: Estimate, power: Floats
) -> Estimate:
    """Density at suction pressure and another temperature near that of the line."""
    return line * (temperature / line_temperature).log().__mul__(power).exp()


def _discharge_density(cards: CardSet, states: LineStates, ideal: Estimate) -> Estimate:
    """Density of the discharge line: at the measured temperature, else at the theoretical one."""
    measured = np.isfinite(cards.discharge_temperature)
    temperature = np.where(measured, cards.discharge_temperature, states.temperature.value)
    state = cards.table.state(cards.discharge_pressure, temperature)
    inputs = ideal.slopes.shape[1]
    if not inputs:
        return Estimate(state.density, ideal.slopes)
    at_line = Estimate(state.density, np.zeros_like(ideal.slopes))
    at_line = at_line.depending_on(
        "discharge_pressure", state.density * state.ln_density_by_ln_p / cards.discharge_pressure
    )
    at_line = at_line.depending_on(
        "discharge_temperature", state.density * state.ln_density_by_temperature
    )
    slopes = np.where(measured[:, None], at_line.slopes, ideal.slopes)
    return Estimate(state.density, slopes)
