"""Sums over ends for each cylinder, stage and the machine, honouring what the ends share."""

from __future__ import annotations

import numpy as np

from pvcard.analysis.batch import Outcome
from pvcard.analysis.rows import Row, estimate_of
from pvcard.machine import Machine
from pvcard.quantities import TOTAL_QUANTITIES
from pvcard.types import Floats
from pvcard.uncertainty import sum_uncertainty

_TORQUE = "this version of pvcard does not compute rod loads and torque"
_SUMMED = {
    "indicated_power_kW": "indicated_power_kW",
    "ideal_power_kW": "ideal_power_kW",
    "discharge_flow_kg_h": "discharge_flow_kg_h",
    "standard_flow_m3_h": "discharge_flow_kg_h",
}
_MECHANICAL_EFFICIENCY_U = 0.01  # of a declared mechanical efficiency (common practice, no source)


def total_rows(
    machine: Machine, ends: list[tuple[Row, Outcome | None]], idle: set[tuple[str, str]]
) -> list[Row]:
    """Rows of sums for every cylinder, every stage and the machine.

    Parameters
    ----------
    machine : Machine
    ends : rows of the recorded ends with their outcomes
    idle : ends that are unloaded or open and deliver nothing

    Returns
    -------
    list of dict
        The machine's flow is that of its last stage.
    """
    rows = []
    cylinders = list(dict.fromkeys(row["cylinder"] for row, _ in ends))
    stages = sorted({row["stage"] for row, _ in ends})
    for name in cylinders:
        part = [one for one in ends if one[0]["cylinder"] == name]
        rows.append(_row(machine, "cylinder", name, part, part, idle))
    for number in stages:
        part = [one for one in ends if one[0]["stage"] == number]
        rows.append(_row(machine, "stage", str(number), part, part, idle))
    last = [one for one in ends if one[0]["stage"] == stages[-1]] if stages else []
    rows.append(_row(machine, "machine", machine.name, ends, last, idle))
    return rows


def _row(
    machine: Machine,
    scope: str,
    name: str,
    ends: list[tuple[Row, Outcome | None]],
    delivering: list[tuple[Row, Outcome | None]],
    idle: set[tuple[str, str]],
) -> Row:
    row: Row = {"scope": scope, "name": name}
    reasons: dict[str, str] = {}
    for column in TOTAL_QUANTITIES:
        row[column] = None
        row[f"u_{column}"] = None
    for column, source in _SUMMED.items():
        part = delivering if "flow" in column else ends
        total = _sum(part, column, source, idle)
        if isinstance(total, str):
            reasons[column] = total
            continue
        row[column], row[f"u_{column}"] = total
    _specific(row, reasons, ends, delivering, idle)
    if scope == "machine":
        _driver(machine, row, reasons)
    else:
        reasons["driver_load_pct"] = "the driver's load belongs to the machine as a whole"
    for column in TOTAL_QUANTITIES:
        if column.startswith("torque"):
            reasons[column] = _TORQUE
    row["reason"] = reasons
    return row


def _active(
    ends: list[tuple[Row, Outcome | None]], column: str, idle: set[tuple[str, str]]
) -> list[tuple[Row, Outcome | None]]:
    """Ends that take part: an idle end has power, yet neither delivers nor has a theoretical
    card."""
    if column == "indicated_power_kW":
        return [one for one in ends if one[1] is not None]
    return [
        one
        for one in ends
        if one[1] is not None and (one[0]["cylinder"], one[0]["end"]) not in idle
    ]


def _shares(ends: list[tuple[Row, Outcome | None]], column: str, source: str) -> Floats | None:
    """Signed contributions of every input to every term of a sum."""
    shares = []
    for row, outcome in ends:
        estimate = estimate_of(outcome, source) if outcome else None
        if estimate is None or outcome is None or outcome.input_uncertainty is None:
            return None
        if not estimate.slopes.shape[1]:
            return None
        own = row[source]
        scale = row[column] / own if own else 1.0
        shares.append(estimate.contributions(outcome.input_uncertainty[None])[0] * scale)
    return np.array(shares)


def _sum(
    ends: list[tuple[Row, Outcome | None]], column: str, source: str, idle: set[tuple[str, str]]
) -> tuple[float, float | None] | str:
    part = _active(ends, column, idle)
    if not part:
        return "no end of it was recorded that could be summed"
    missing = [row for row, _ in part if row[column] is None]
    if missing:
        names = ", ".join(f"{row['cylinder']} {row['end']}" for row in missing)
        return f"not determined for {names}"
    total = float(sum(row[column] for row, _ in part))
    shares = _shares(part, column, source)
    if shares is None:
        return total, None
    u = sum_uncertainty(shares, [row["cylinder"] for row, _ in part])
    return total, u if np.isfinite(u) else None


def _specific(
    row: Row,
    reasons: dict[str, str],
    ends: list[tuple[Row, Outcome | None]],
    delivering: list[tuple[Row, Outcome | None]],
    idle: set[tuple[str, str]],
) -> None:
    """Power over standard flow, from both sums; what they share cancels."""
    column = "specific_power_kWh_per_1000_m3"
    power, flow = row["indicated_power_kW"], row["standard_flow_m3_h"]
    if power is None or not flow:
        reasons[column] = reasons.get("standard_flow_m3_h") or reasons.get(
            "indicated_power_kW", "no gas is delivered"
        )
        return
    row[column] = value = 1000 * power / flow
    first = _active(ends, "indicated_power_kW", idle)
    second = _active(delivering, "standard_flow_m3_h", idle)
    one = _shares(first, "indicated_power_kW", "indicated_power_kW")
    two = _shares(second, "standard_flow_m3_h", "discharge_flow_kg_h")
    if one is None or two is None:
        return
    names = [end["cylinder"] for end, _ in first]
    combined = one / power
    for end, share in zip(second, two / flow):
        for place, own in enumerate(first):
            if own[0] is end[0]:
                combined[place] = combined[place] - share
    row[f"u_{column}"] = abs(value) * sum_uncertainty(combined, names)


def _driver(machine: Machine, row: Row, reasons: dict[str, str]) -> None:
    column = "driver_load_pct"
    power, u = row["indicated_power_kW"], row["u_indicated_power_kW"]
    efficiency, rated = machine.mechanical_efficiency, machine.rated_power
    if rated is None or efficiency is None:
        reasons[column] = "needs rated_power and mechanical_efficiency of the machine"
        return
    if power is None:
        reasons[column] = reasons.get("indicated_power_kW", "power is not determined")
        return
    auxiliary = getattr(machine, "auxiliary_power", None) or 0.0
    shaft = power * 1e3 / efficiency
    row[column] = 100 * (shaft + auxiliary) / rated
    if u is not None:
        relative = np.hypot(u / power if power else 0.0, _MECHANICAL_EFFICIENCY_U)
        row[f"u_{column}"] = float(abs(100 * shaft / rated) * relative)
