"""All first-tier quantities of a batch of cards, in the units of the reported columns."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from pvcard.card import losses
from pvcard.card.capacity import capacity
from pvcard.card.geometry import Geometry, geometry
from pvcard.card.ideal import LineStates, ideal_card, line_states
from pvcard.card.lines import Crossings, crossings, polytropic_exponents
from pvcard.card.work import indicated_work, running_integral
from pvcard.card_set import CardSet, Turning, turning
from pvcard.closed_lines import PLACE, Problem, problem, references
from pvcard.events import Events, event_estimate, valve_events
from pvcard.line_fit import Fit, fit_lines
from pvcard.trace_noise import relative_noise
from pvcard.types import Booleans, Floats
from pvcard.uncertainty import INDEX, INPUTS, Estimate, constant
from pvcard.windows import closed_windows

Columns = dict[str, Estimate]
CHUNK = 1024  # cards worked on at once, so that a batch stays in the processor's cache
AREA_MODEL = 0.08  # relative: one constant area for a plate that moves (common practice, no source)
# Of line pressure: how far its mean at an open valve may lie off the mean of the line (no source).
PULSATION = 0.005
# Of a peak beyond line pressure: what the ringing of an unknown passage may add to it (no source).
RINGING = 0.2


@dataclass(frozen=True, eq=False)
class Measured:
    """Quantities of a batch and what they were made from."""

    columns: Columns
    closed: Booleans  # (cards,) whether both closed spans exist and lie within the gas's table
    fit: Fit
    crossings: Crossings
    events: Events
    case: Problem
    turn: Turning
    suction_span: losses.Span
    discharge_span: losses.Span
    white_noise: Floats  # (cards,) relative to pressure


def measure(
    cards: CardSet, input_uncertainty: Floats, *, with_uncertainty: bool = True
) -> Measured:
    """Compute every first-tier quantity of a batch.

    Parameters
    ----------
    cards : CardSet
        Calibrated.
    input_uncertainty : (cards, inputs)
        Standard uncertainty of every input in the order of `pvcard.uncertainty.INPUTS`.
    with_uncertainty : whether to carry derivatives

    Returns
    -------
    Measured
        A card that cannot be read in some respect has NaN there and leaves its neighbours alone.
    """
    inputs = len(INPUTS) if with_uncertainty else 0
    turn = turning(cards)
    windows = closed_windows(
        cards.pressure, cards.suction_pressure, cards.discharge_pressure, turn.half
    )
    known = references(cards)
    case = problem(cards, turn, windows, known)
    noise = relative_noise(cards, turn, windows, known.path.volume_exponent)
    with np.errstate(all="ignore"):
        fit = fit_lines(
            case,
            clearance_uncertainty=input_uncertainty[:, INDEX["clearance"]],
            white_noise=noise,
            with_uncertainty=with_uncertainty,
        )
        states = line_states(cards, known, inputs)
        at = crossings(case, fit, states.suction_pressure, states.discharge_pressure)
        events = valve_events(case, fit, turn, noise)
        closed = windows.found & np.isfinite(fit.state[:, 0]) & np.isfinite(at[0].travel)
        sides = losses.suction_span(at), losses.discharge_span(at)
        columns = _columns(cards, turn, case, fit, at, events, states, noise, inputs)
    return Measured(columns, closed, fit, at, events, case, turn, *sides, noise)


def measure_without_gas(cards: CardSet, *, with_uncertainty: bool = True) -> Columns:
    """Quantities that need neither gas nor line values: power, work and the peaks of the trace.

    Parameters
    ----------
    cards : CardSet
        Its gas and table are not looked at.
    with_uncertainty : whether to carry derivatives

    Returns
    -------
    dict
        Columns in their reported units.
    """
    inputs = len(INPUTS) if with_uncertainty else 0
    turn = turning(cards)
    size = geometry(cards, inputs)
    work = indicated_work(cards, turn, np.zeros(len(cards.pressure)), inputs)
    work = work.depending_on("turn_scatter", work.value)
    columns = {
        "speed_rpm": size.speed * 60,
        "indicated_power_kW": work * size.speed / 1e3,
        "indicated_work_kJ": work / 1e3,
        "mean_effective_pressure_bar": work / size.swept_volume / 1e5,
    }
    columns.update(_peaks(cards, np.zeros(len(cards.pressure)), inputs))
    return columns


def _columns(
    cards: CardSet,
    turn: Turning,
    case: Problem,
    fit: Fit,
    at: Crossings,
    events: Events,
    states: LineStates,
    noise: Floats,
    inputs: int,
) -> Columns:
    size = geometry(cards, inputs)
    work = indicated_work(cards, turn, noise, inputs)
    work = work.depending_on("turn_scatter", work.value)
    clearance = Estimate(fit.state[:, PLACE["clearance"]], fit.slopes[:, PLACE["clearance"]])
    ideal = ideal_card(clearance, size.swept_volume, states)
    columns = dict(_conditions(cards, states, size, inputs))
    columns.update(_peaks(cards, noise, inputs))
    power = work * size.speed / 1e3
    columns["indicated_power_kW"] = power
    columns["indicated_work_kJ"] = work / 1e3
    columns["mean_effective_pressure_bar"] = work / size.swept_volume / 1e5
    columns["ideal_power_kW"] = ideal.work * size.speed / 1e3
    columns["clearance_pct"] = clearance * 100
    compression, expansion = polytropic_exponents(case, fit)
    columns["compression_exponent"], columns["expansion_exponent"] = compression, expansion
    columns["ideal_discharge_temperature_degC"] = states.temperature - 273.15
    columns["ideal_suction_volumetric_efficiency_pct"] = ideal.suction_efficiency * 100
    columns["ideal_discharge_volumetric_efficiency_pct"] = ideal.discharge_efficiency * 100
    for name, event in zip(events._fields, events):
        columns[f"{name}_deg"] = event_estimate(event, f"noise_{name}", inputs)
    columns.update(_losses(cards, turn, at, events, states, noise, size, power, case))
    columns.update(capacity(cards, case, fit, at, states, size, work))
    gaps = ("suction_valve_loss_kW", "discharge_valve_loss_kW")
    columns["other_loss_kW"] = (
        power - columns["ideal_power_kW"] - columns[gaps[0]] - columns[gaps[1]]
    )
    return columns


def _conditions(
    cards: CardSet, states: LineStates, size: Geometry, inputs: int
) -> Iterator[tuple[str, Estimate]]:
    discharge = constant(cards.discharge_temperature, inputs)
    discharge = discharge.depending_on("discharge_temperature", 1.0)
    yield "speed_rpm", size.speed * 60
    yield "suction_pressure_bar", states.suction_pressure / 1e5
    yield "discharge_pressure_bar", states.discharge_pressure / 1e5
    yield "suction_temperature_degC", states.suction_temperature - 273.15
    yield "discharge_temperature_degC", discharge - 273.15
    yield "pressure_ratio", states.discharge_pressure / states.suction_pressure
    # The relative error of the exponent is an input of its own: it is not seen in the densities
    # alone.
    yield "isentropic_exponent", states.exponent
    yield "discharge_temperature_excess_K", discharge - states.temperature


def _peaks(cards: CardSet, noise: Floats, inputs: int) -> Iterator[tuple[str, Estimate]]:
    for name, value, line in (
        ("pressure_max_bar", cards.pressure.max(-1), cards.discharge_pressure),
        ("pressure_min_bar", cards.pressure.min(-1), cards.suction_pressure),
    ):
        estimate = constant(value, inputs).depending_on("pressure_level", -1.0)
        estimate = estimate.depending_on("pressure_gain", value)
        beyond = RINGING * np.abs(value - np.where(np.isfinite(line), line, value))
        yield name, estimate.depending_on("noise_peaks", np.hypot(noise * value, beyond)) / 1e5


def _losses(
    cards: CardSet,
    turn: Turning,
    at: Crossings,
    events: Events,
    states: LineStates,
    noise: Floats,
    size: Geometry,
    power: Estimate,
    case: Problem,
) -> Columns:
    running = running_integral(cards, turn)
    swept = cards.swept_volume
    white = noise * swept * np.sqrt(2.5 / len(cards.crank_angle))
    known, path = case.references.suction, case.references.path
    result: Columns = {}
    for side, span, pressure, opening, density, upstream in (
        (
            "suction",
            losses.suction_span(at),
            states.suction_pressure,
            events.suction_opening.crank_angle,
            known.density,
            cards.suction_pressure,
        ),
        (
            "discharge",
            losses.discharge_span(at),
            states.discharge_pressure,
            events.discharge_opening.crank_angle,
            path.density2,
            cards.discharge_pressure,
        ),
    ):
        loss = losses.valve_loss(
            cards, turn, running, span, pressure, (f"noise_{side}_loss", white * upstream)
        )
        result[f"{side}_valve_loss_kW"] = loss * size.speed / 1e3
        result[f"{side}_valve_loss_pct"] = result[f"{side}_valve_loss_kW"] / power * 100
        part = losses.open_part(cards, turn, running, opening, pressure)
        width = np.abs(span.last_travel - span.first_travel)
        area = losses.flow_area(cards, part, density, upstream, path.volume_exponent, width)
        doubt = PULSATION * upstream * swept * width / np.abs(part.loss.value) / 2
        size_u = area.value * np.hypot(AREA_MODEL, doubt)
        area = area.depending_on(f"{side}_area_model", size_u)
        result[f"{side}_flow_area_cm2"] = area * 1e4
    return result
