"""The register of every reported quantity: name, label, unit, meaning.

Tables, report labels and the glossary are made from it; other rooms look names up here. A column's
name is the quantity followed by its unit; ``u_`` in front of it is its standard uncertainty in the
same unit.
"""

from __future__ import annotations

from typing import NamedTuple


class Quantity(NamedTuple):
    """One reported column."""

    column: str
    label: str
    unit: str  # "" for identities and pure numbers
    definition: str
    scope: str  # "ends", "cylinders" or "totals"
    group: str
    has_uncertainty: bool = True


_IDENTITY = [
    ("cylinder", "Cylinder", "name of the cylinder"),
    ("end", "End", "head or crank"),
    ("stage", "Stage", "number of the stage"),
    ("load_step", "Load step", "load step found; none where none is declared"),
]

# column, label, unit, definition
_CONDITIONS = [
    ("speed_rpm", "Speed", "rpm", "mean speed of the recording"),
    ("suction_pressure_bar", "Suction line pressure", "bar", "absolute"),
    ("discharge_pressure_bar", "Discharge line pressure", "bar", "absolute"),
    ("suction_temperature_degC", "Suction line temperature", "degC", "as recorded"),
    ("discharge_temperature_degC", "Discharge line temperature", "degC", "as recorded"),
    ("pressure_ratio", "Pressure ratio", "", "discharge over suction line pressure"),
    (
        "isentropic_exponent",
        "Isentropic exponent of the gas",
        "",
        "volume exponent averaged over the isentropic path from suction to discharge pressure",
    ),
]
_POWER = [
    (
        "indicated_power_kW",
        "Indicated power",
        "kW",
        "area of the pressure-volume loop times speed; positive for work taken in",
    ),
    ("indicated_work_kJ", "Indicated work", "kJ", "area of the pressure-volume loop"),
    (
        "mean_effective_pressure_bar",
        "Mean effective pressure",
        "bar",
        "indicated work over swept volume (a pressure difference)",
    ),
    (
        "ideal_power_kW",
        "Power of the theoretical card",
        "kW",
        "isentropic compression of the real gas from the suction line state at this clearance",
    ),
    (
        "suction_valve_loss_kW",
        "Suction valve loss",
        "kW",
        "area between suction line pressure and the trace",
    ),
    (
        "discharge_valve_loss_kW",
        "Discharge valve loss",
        "kW",
        "area between the trace and discharge line pressure",
    ),
    (
        "other_loss_kW",
        "Remaining difference",
        "kW",
        "indicated less theoretical less both valve losses: heat, leaks, late valves; "
        "may be negative",
    ),
    (
        "suction_valve_loss_pct",
        "Suction valve loss of indicated",
        "%",
        "share of indicated power",
    ),
    (
        "discharge_valve_loss_pct",
        "Discharge valve loss of indicated",
        "%",
        "share of indicated power",
    ),
    (
        "suction_passage_loss_kW",
        "Suction loss against the line trace",
        "kW",
        "as the suction valve loss, against the pressure recorded in the nozzle or chamber",
    ),
    (
        "discharge_passage_loss_kW",
        "Discharge loss against the line trace",
        "kW",
        "as the discharge valve loss, against the pressure recorded in the nozzle or chamber",
    ),
    (
        "isentropic_efficiency_pct",
        "Isentropic efficiency",
        "%",
        "isentropic power of the gas delivered over indicated power",
    ),
]
_CARD = [
    ("clearance_pct", "Clearance fitted", "%", "clearance volume over swept volume, as recorded"),
    (
        "compression_exponent",
        "Exponent of compression",
        "",
        "polytropic exponent of the closed compression part at the fitted clearance",
    ),
    (
        "expansion_exponent",
        "Exponent of re-expansion",
        "",
        "polytropic exponent of the closed re-expansion part at the fitted clearance",
    ),
    ("pressure_max_bar", "Highest cylinder pressure", "bar", "absolute"),
    ("pressure_min_bar", "Lowest cylinder pressure", "bar", "absolute"),
]
_VALVES = [
    (
        "suction_opening_deg",
        "Suction valve opens",
        "deg",
        "after the dead centre of least volume of this end",
    ),
    ("suction_closing_deg", "Suction valve closes", "deg", "after the dead centre of least volume"),
    (
        "discharge_opening_deg",
        "Discharge valve opens",
        "deg",
        "after the dead centre of least volume",
    ),
    (
        "discharge_closing_deg",
        "Discharge valve closes",
        "deg",
        "after the dead centre of least volume",
    ),
    (
        "suction_closing_late_deg",
        "Suction closing after dead centre",
        "deg",
        "closing less the dead centre at which it should close",
    ),
    (
        "discharge_closing_late_deg",
        "Discharge closing after dead centre",
        "deg",
        "closing less the dead centre at which it should close",
    ),
    (
        "suction_flow_area_cm2",
        "Suction flow area",
        "cm2",
        "effective area that explains the flow loss over the open part, all valves of that side",
    ),
    (
        "discharge_flow_area_cm2",
        "Discharge flow area",
        "cm2",
        "effective area that explains the flow loss over the open part, all valves of that side",
    ),
    (
        "suction_flutter_count",
        "Suction valve flutter",
        "",
        "dips of at least a tenth of full lift, followed by a rise",
    ),
    (
        "discharge_flutter_count",
        "Discharge valve flutter",
        "",
        "dips of at least a tenth of full lift, followed by a rise",
    ),
    (
        "suction_impact_speed_m_s",
        "Suction plate speed at the seat",
        "m/s",
        "by the valve-motion model",
    ),
    (
        "discharge_impact_speed_m_s",
        "Discharge plate speed at the seat",
        "m/s",
        "by the valve-motion model",
    ),
]
_CAPACITY = [
    (
        "suction_volumetric_efficiency_pct",
        "Suction volumetric efficiency",
        "%",
        "stroke volume between the fitted lines at suction pressure over swept volume",
    ),
    (
        "discharge_volumetric_efficiency_pct",
        "Discharge volumetric efficiency",
        "%",
        "stroke volume between the fitted lines at discharge pressure over swept volume",
    ),
    (
        "ideal_suction_volumetric_efficiency_pct",
        "Suction volumetric efficiency, theoretical",
        "%",
        "of the theoretical card",
    ),
    (
        "ideal_discharge_volumetric_efficiency_pct",
        "Discharge volumetric efficiency, theoretical",
        "%",
        "of the theoretical card",
    ),
    ("suction_flow_kg_h", "Gas drawn in", "kg/h", "net, from the suction line"),
    ("discharge_flow_kg_h", "Gas delivered", "kg/h", "net, to the discharge line"),
    (
        "flow_ratio",
        "Suction over discharge flow",
        "",
        "from both volumetric efficiencies, before corrections for warming, leaks and late valves",
    ),
    ("standard_flow_m3_h", "Standard flow", "m3/h", "gas delivered, at the base state"),
    (
        "ideal_discharge_temperature_degC",
        "Discharge temperature, theoretical",
        "degC",
        "isentropic from the suction line state",
    ),
    (
        "discharge_temperature_excess_K",
        "Discharge temperature above theoretical",
        "K",
        "measured less theoretical",
    ),
]
_LEAKS = [
    entry
    for path, label in (
        ("suction", "Suction valve leak"),
        ("discharge", "Discharge valve leak"),
        ("ring", "Piston ring leak"),
        ("packing", "Rod packing leak"),
    )
    for entry in (
        (f"{path}_leak_pct", label, "%", "gross leakage over gas delivered without leaks"),
        (f"{path}_leak_mm2", f"{label}, area", "mm2", "ideal nozzle that would pass the same gas"),
        (
            f"{path}_leak_probability",
            f"{label}, probability",
            "",
            "that the leak is more than nothing",
        ),
    )
] + [
    (
        f"detectable_{path}_leak_pct",
        f"Smallest {path} leak this recording could show",
        "%",
        "95 % detection at 1 % false alarm",
    )
    for path in ("suction", "discharge", "ring")
]
_LEAKS.append(
    (
        "leak_power_kW",
        "Power lost to leaks",
        "kW",
        "specific work measured less specific work without leaks, times gas delivered",
    )
)
_WITHOUT_UNCERTAINTY = ("_probability", "detectable_", "_flutter_count")

_ROD = [
    ("gas_load_tension_max_kN", "Gas load, greatest tension", "kN", "magnitude"),
    ("gas_load_compression_max_kN", "Gas load, greatest compression", "kN", "magnitude"),
    ("combined_load_tension_max_kN", "Combined load, greatest tension", "kN", "at the pin"),
    ("combined_load_compression_max_kN", "Combined load, greatest compression", "kN", "at the pin"),
    ("reversal_deg", "Load reversal", "deg", "shorter of the longest spans of each sense"),
    ("reversal_pct", "Load reversal, size", "%", "smaller peak over larger peak"),
    ("reversal_margin_deg", "Reversal margin", "deg", "reversal above its limit"),
    (
        "reversal_margin_discharge_bar",
        "Reversal margin in discharge pressure",
        "bar",
        "rise of discharge pressure that takes reversal away",
    ),
    ("crosshead_side_force_max_kN", "Crosshead side force", "kN", "greatest"),
    ("frame_opening_force_kN", "Frame opening force", "kN", "carried by tie bars or spacers"),
    ("torque_mean_kNm", "Mean torque", "kNm", "of this throw"),
    ("torque_peak_kNm", "Peak torque", "kNm", "of this throw"),
]
_TOTALS = [
    ("indicated_power_kW", "Indicated power", "kW", "sum of the ends"),
    ("ideal_power_kW", "Power of the theoretical card", "kW", "sum of the ends"),
    ("discharge_flow_kg_h", "Gas delivered", "kg/h", "of a machine: by its last stage"),
    ("standard_flow_m3_h", "Standard flow", "m3/h", "of a machine: by its last stage"),
    (
        "specific_power_kWh_per_1000_m3",
        "Specific power",
        "kWh/1000 m3",
        "indicated power over standard flow",
    ),
    (
        "driver_load_pct",
        "Driver load",
        "%",
        "indicated power over mechanical efficiency, with auxiliaries, over rated power",
    ),
    ("torque_mean_kNm", "Mean torque", "kNm", "of the whole machine"),
    ("torque_peak_kNm", "Peak torque", "kNm", "of the whole machine"),
    ("torque_irregularity_pct", "Torque irregularity", "%", "swing over mean"),
]

_ENDS = [
    ("conditions", _CONDITIONS),
    ("power", _POWER),
    ("card", _CARD),
    ("valves", _VALVES),
    ("capacity", _CAPACITY),
    ("leaks", _LEAKS),
]

END_IDENTITY = tuple(name for name, _, _ in _IDENTITY)


def _register() -> dict[str, Quantity]:
    known = {
        name: Quantity(name, label, "", text, "ends", "identity", False)
        for name, label, text in _IDENTITY
    }
    for group, rows in _ENDS:
        for column, label, unit, text in rows:
            plain = not any(part in column for part in _WITHOUT_UNCERTAINTY)
            known[column] = Quantity(column, label, unit, text, "ends", group, plain)
    return known


QUANTITIES: dict[str, Quantity] = _register()
CYLINDER_QUANTITIES: dict[str, Quantity] = {
    column: Quantity(column, label, unit, text, "cylinders", "running gear")
    for column, label, unit, text in _ROD
}
TOTAL_QUANTITIES: dict[str, Quantity] = {
    column: Quantity(column, label, unit, text, "totals", "totals")
    for column, label, unit, text in _TOTALS
}
END_COLUMNS = tuple(name for name in QUANTITIES if name not in END_IDENTITY)
