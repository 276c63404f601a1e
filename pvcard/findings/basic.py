"""Findings that follow from the measured quantities and the declared limits alone."""

from __future__ import annotations

import math
from typing import Any

from pvcard.machine import Cylinder, Machine

Row = dict[str, Any]

_HOT = (
    "Hot gas and surfaces. The maker's limit, local codes and a competent, licensed person decide "
    "whether the machine may run on."
)
_LOAD = (
    "Overload can hurt driver and running gear. The maker's limits prevail over this estimate; a "
    "competent person decides."
)
_REVERSAL = (
    "An end that does not compress can take load reversal away from the crosshead pin. Have the "
    "rod load of this load step confirmed against the maker's limits."
)


def findings_of(
    machine: Machine, ends: list[Row], totals: list[Row], idle: dict[tuple[str, str], str]
) -> list[Row]:
    """Collect the findings of a recording.

    Parameters
    ----------
    machine : Machine
    ends, totals : rows of quantities
    idle : ends found not to compress, with the reason

    Returns
    -------
    list of dict
        Findings of the contract, worst first.
    """
    found = [
        _unloaded(row, idle[key]) for row in ends if (key := (row["cylinder"], row["end"])) in idle
    ]
    for row in ends:
        cylinder = machine.cylinder(row["cylinder"])
        found.extend(_hot(cylinder, row, found))
    found.extend(_overload(totals))
    order = {"act": 0, "watch": 1, "note": 2}
    found.sort(key=lambda one: order[one["severity"]])
    for number, one in enumerate(found, start=1):
        one["id"] = f"F{number}"
    return found


def _finding(
    kind: str, row: Row | None, severity: str, probability: float, text: str, **more: Any
) -> Row:
    return {
        "id": "",
        "kind": kind,
        "cylinder": row["cylinder"] if row else None,
        "end": row["end"] if row else None,
        "severity": severity,
        "probability": probability,
        "group_probability": probability,
        "alternatives": [],
        "size": more.get("size"),
        "unit": more.get("unit"),
        "u": more.get("u"),
        "cost": None,
        "text": text,
        "evidence": more.get("evidence", []),
        "caution": more.get("caution"),
    }


def probability_above(value: float, u: float | None, limit: float) -> float:
    """Probability that a quantity lies above a limit.

    Parameters
    ----------
    value, u : figure and its standard uncertainty, same unit
    limit : same unit

    Returns
    -------
    probability : float
        From the normal distribution. [-]
    """
    if not u:
        return float(value > limit)
    return 0.5 * math.erfc((limit - value) / (u * math.sqrt(2)))


def _unloaded(row: Row, why: str) -> Row:
    text = f"{row['cylinder']} {row['end']} end does not compress: {why}."
    return _finding(
        "unloaded_end",
        row,
        "note",
        0.99,
        text,
        evidence=[
            {
                "name": "pressure_max_bar",
                "value": row["pressure_max_bar"],
                "unit": "bar",
                "u": row["u_pressure_max_bar"],
                "text": "highest pressure in the cylinder, against the discharge line's "
                f"{row['discharge_pressure_bar'] or math.nan:.4g} bar",
            }
        ],
        caution=_REVERSAL,
    )


def _hot(cylinder: Cylinder, row: Row, found: list[Row]) -> list[Row]:
    limit = cylinder.discharge_temperature_limit
    value, u = row["discharge_temperature_degC"], row["u_discharge_temperature_degC"]
    known = any(
        one["kind"] == "high_discharge_temperature" and one["cylinder"] == cylinder.name
        for one in found
    )
    if limit is None or value is None or known:
        return []
    limit -= 273.15
    probability = probability_above(value, u, limit)
    if probability < 0.05:
        return []
    severity = "act" if probability >= 0.5 else "note"
    text = (
        f"{cylinder.name}: the discharge temperature of {value:.0f} degC is "
        f"{'above' if value > limit else 'near'} its limit of {limit:.0f} degC."
    )
    evidence = [
        {
            "name": "discharge_temperature_degC",
            "value": value,
            "unit": "degC",
            "u": u,
            "text": f"recorded, against the declared limit of {limit:.0f} degC",
        }
    ]
    one = _finding(
        "high_discharge_temperature",
        row,
        severity,
        probability,
        text,
        size=value - limit,
        unit="K",
        u=u,
        evidence=evidence,
        caution=_HOT,
    )
    one["end"] = None
    return [one]


def _overload(totals: list[Row]) -> list[Row]:
    machine = next((row for row in totals if row["scope"] == "machine"), None)
    load = machine["driver_load_pct"] if machine else None
    if machine is None or load is None:
        return []
    u = machine["u_driver_load_pct"]
    probability = probability_above(load, u, 100.0)
    if probability < 0.05:
        return []
    evidence = [
        {
            "name": "driver_load_pct",
            "value": load,
            "unit": "%",
            "u": u,
            "text": "indicated power over mechanical efficiency and auxiliaries, over rated power",
        }
    ]
    return [
        _finding(
            "over_rated_power",
            None,
            "act" if probability >= 0.5 else "note",
            probability,
            f"The driver is loaded to {load:.0f} % of its rated power.",
            size=load - 100,
            unit="%",
            u=u,
            evidence=evidence,
            caution=_LOAD,
        )
    ]
