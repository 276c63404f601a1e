"""Measured columns of one end as a row: values, uncertainties, and a reason for each that is
missing."""

from __future__ import annotations

from typing import Any

import numpy as np

from pvcard.analysis.batch import Job, Outcome
from pvcard.analysis.end_traces import EndTrace
from pvcard.card.measure import Measured
from pvcard.quantities import CYLINDER_QUANTITIES, END_COLUMNS, QUANTITIES
from pvcard.uncertainty import Estimate

Row = dict[str, Any]

_LATER = {
    "leak": "this version of pvcard does not estimate leaks",
    "late_deg": "this version of pvcard does not read how late valves close",
    "flutter": "this version of pvcard does not read valve flutter",
    "impact": "this version of pvcard does not compute plate speeds",
}
_RUNNING_GEAR = "this version of pvcard does not compute rod loads and torque"
_FLAT = (
    "the trace does not run from suction to discharge pressure and back: the end does not "
    "compress, or a line pressure or unit is wrong"
)
_FEWEST = 90  # samples a turn
_COARSE = (
    f"too few samples a turn for the closed parts of the card: they need {_FEWEST} or more; or the "
    "end does not compress"
)
# Line readings that are shown even where nothing could be measured against them.
_READ = (
    "suction_pressure_bar",
    "discharge_pressure_bar",
    "suction_temperature_degC",
    "discharge_temperature_degC",
)
# Columns that need both closed spans of the card.
_CLOSED = (
    "clearance_pct",
    "compression_exponent",
    "expansion_exponent",
    "opening_deg",
    "closing_deg",
    "volumetric_efficiency_pct",
    "flow",
    "valve_loss",
    "ideal_power",
    "other_loss",
    "isentropic_efficiency",
)


def end_row(job: Job, outcome: Outcome, load_step: str | None) -> Row:
    """Row of one end.

    Parameters
    ----------
    job, outcome
        What was measured.
    load_step : step found, or None

    Returns
    -------
    dict
        All columns of the contract with ``u_`` beside them, and ``reason``.
    """
    trace = job.trace
    row = _identity(trace, load_step)
    reasons: dict[str, str] = {}
    measured = outcome.measured
    for column in END_COLUMNS:
        value, u = None, None
        if column in outcome.columns:
            value, u = _figure(outcome, column)
        elif measured is None and column in _READ:
            value, u = _plain(trace, column)
        put(row, column, value, u)
        if value is None:
            reasons[column] = _reason(column, outcome)
    if measured is not None:
        _passage(row, reasons, trace, outcome, measured)
        _standard_flow(row, reasons, job, measured)
    row["reason"] = reasons
    return row


def open_row(cylinder: str, end: str, stage: int, load_step: str | None, reason: str) -> Row:
    """Row of an end without figures.

    Parameters
    ----------
    cylinder, end : names
    stage : number
    load_step : step found, or None
    reason : why there are no figures

    Returns
    -------
    dict
    """
    row: Row = {"cylinder": cylinder, "end": end, "stage": stage, "load_step": load_step}
    for column in END_COLUMNS:
        put(row, column, None, None)
    row["reason"] = dict.fromkeys(END_COLUMNS, reason)
    return row


def explain_idle(row: Row, reason: str) -> None:
    """Say of an idle end why it lacks figures.

    Parameters
    ----------
    row : dict
        Changed in place: rows are made here.
    reason : one sentence
    """
    for column, text in row["reason"].items():
        if text == _FLAT:
            row["reason"][column] = reason


def put(row: Row, column: str, value: float | None, u: float | None) -> None:
    """Set a column and its uncertainty; None for anything that is not a finite number.

    Parameters
    ----------
    row : dict
        Changed in place: rows are made here.
    column : name
    value, u : figure and standard uncertainty, or None
    """
    good = value is not None and np.isfinite(value)
    row[column] = float(value) if good and value is not None else None
    if column not in QUANTITIES or QUANTITIES[column].has_uncertainty:
        row[f"u_{column}"] = float(u) if good and u is not None and np.isfinite(u) else None


def _identity(trace: EndTrace, load_step: str | None) -> Row:
    return {
        "cylinder": trace.cylinder.name,
        "end": trace.end,
        "stage": trace.cylinder.stage,
        "load_step": load_step,
    }


def _plain(trace: EndTrace, column: str) -> tuple[float, float]:
    """Line readings as they are."""
    name, unit = column.rsplit("_", 1)
    value, u = getattr(trace.lines, name), getattr(trace.lines, f"{name}_u")
    return (value / 1e5, u / 1e5) if unit == "bar" else (value - 273.15, u)


def estimate_of(outcome: Outcome, column: str) -> Estimate | None:
    """Estimate behind a column, one card long.

    Parameters
    ----------
    outcome : Outcome
    column : name

    Returns
    -------
    Estimate or None
        None where the column was not measured.
    """
    if column not in outcome.columns:
        return None
    whole = outcome.columns[column]
    return Estimate(
        whole.value[outcome.row : outcome.row + 1], whole.slopes[outcome.row : outcome.row + 1]
    )


def _figure(outcome: Outcome, column: str) -> tuple[float | None, float | None]:
    estimate, measured = estimate_of(outcome, column), outcome.measured
    if estimate is None or outcome.input_uncertainty is None:
        return None, None
    closed = measured is None or bool(measured.closed[outcome.row])
    if not closed and any(part in column for part in _CLOSED):
        return None, None
    value = float(estimate.value[0])
    if not np.isfinite(value):
        return None, None
    if not estimate.slopes.shape[1]:
        return value, None
    u = float(estimate.uncertainty(outcome.input_uncertainty[None])[0])
    return (value, u) if np.isfinite(u) else (None, None)


def _reason(column: str, outcome: Outcome) -> str:
    for part, text in _LATER.items():
        if part in column:
            return text
    if outcome.problem:
        return outcome.problem
    if "passage" in column:
        return "the export has no trace of this line"
    if column in ("discharge_temperature_degC", "discharge_temperature_excess_K"):
        return "the export gives no discharge temperature"
    measured = outcome.measured
    if measured is not None and not measured.case.windows.found[outcome.row]:
        return _COARSE if len(measured.case.cards.crank_angle) < _FEWEST else _FLAT
    if measured is not None and not measured.closed[outcome.row]:
        return (
            "the closed parts of the card fit no state of the gas near the line values: the trace "
            "rings, or pressures, clearance or gas are wrong"
        )
    if column.endswith(("opening_deg", "closing_deg")):
        return "the trace shows no such event within reach of the closed parts"
    if column.endswith("flow_area_cm2"):
        return "the trace shows no loss in this valve from which an area could be told"
    return "this recording does not determine it"


def _passage(
    row: Row, reasons: dict[str, str], trace: EndTrace, outcome: Outcome, measured: Measured
) -> None:
    """Losses against traces of the lines, where there are such."""
    from pvcard.analysis.passages import passage_loss

    for side, line in (("suction", trace.suction_line), ("discharge", trace.discharge_line)):
        column = f"{side}_passage_loss_kW"
        if line is None or not measured.closed[outcome.row]:
            continue
        value, u = passage_loss(outcome, side, line)
        put(row, column, value, u)
        if row[column] is not None:
            reasons.pop(column, None)


def _standard_flow(row: Row, reasons: dict[str, str], job: Job, measured: Measured) -> None:
    flow = row["discharge_flow_kg_h"]
    column = "standard_flow_m3_h"
    if flow is None:
        reasons[column] = reasons.get("discharge_flow_kg_h", _FLAT)
        return
    base = job.machine
    gas = measured.case.cards.gas
    density = float(gas.density(np.array(base.base_pressure), np.array(base.base_temperature)))
    if not np.isfinite(density):
        reasons[column] = "the gas is not a gas at the base state"
        return
    u = row["u_discharge_flow_kg_h"]
    put(row, column, flow / density, None if u is None else u / density)
    reasons.pop(column, None)


def cylinder_row(name: str) -> Row:
    """Row of a cylinder's running gear, which is not computed yet.

    Parameters
    ----------
    name : of the cylinder

    Returns
    -------
    dict
    """
    row: Row = {"cylinder": name}
    for column in CYLINDER_QUANTITIES:
        row[column] = None
        row[f"u_{column}"] = None
    row["reason"] = dict.fromkeys(CYLINDER_QUANTITIES, _RUNNING_GEAR)
    return row
