"""The register of quantities against what `analyse` gives back, and against itself."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

import pvcard
from pvcard.quantities import (
    CYLINDER_QUANTITIES,
    END_COLUMNS,
    END_IDENTITY,
    QUANTITIES,
    TOTAL_QUANTITIES,
    Quantity,
)
from pvcard.results import RecordingResult
from pvcard.tables import GROUPS, shown_unit
from tests.plant import traces, write_export, write_machine

REGISTERS: dict[str, dict[str, Quantity]] = {
    "ends": QUANTITIES,
    "cylinders": CYLINDER_QUANTITIES,
    "totals": TOTAL_QUANTITIES,
}
# Ends of a column's name by unit.
SUFFIXES = {
    "rpm": "_rpm",
    "bar": "_bar",
    "degC": "_degC",
    "K": "_K",
    "kW": "_kW",
    "kJ": "_kJ",
    "%": "_pct",
    "deg": "_deg",
    "cm2": "_cm2",
    "mm2": "_mm2",
    "m/s": "_m_s",
    "kg/h": "_kg_h",
    "m3/h": "_m3_h",
    "kN": "_kN",
    "kNm": "_kNm",
    "kWh/1000 m3": "_kWh_per_1000_m3",
}


@pytest.fixture(scope="module")
def result(tmp_path_factory: pytest.TempPathFactory) -> RecordingResult:
    """Analysis of the healthy export of the test stand."""
    folder = tmp_path_factory.mktemp("stand")
    machine = pvcard.read_machine(write_machine(folder))
    recordings = pvcard.read_export(write_export(folder, traces()), machine)
    return pvcard.analyse(recordings, machine).recordings[0]


@pytest.mark.parametrize(
    ("name", "identity"),
    [("ends", END_IDENTITY), ("cylinders", ("cylinder",)), ("totals", ("scope", "name"))],
)
def test_rows_hold_the_registered_columns_and_no_others(
    result: RecordingResult, name: str, identity: tuple[str, ...]
) -> None:
    # LAW: one register: what is reported stands in it, what stands in it is reported.
    known = set(identity) | {"reason"}
    for column, quantity in REGISTERS[name].items():
        if column not in identity:
            known |= {column, f"u_{column}"} if quantity.has_uncertainty else {column}
    rows = getattr(result, name)
    assert rows
    for row in rows:
        assert set(row) == known
        order = [column for column in row if column in REGISTERS[name]]
        assert order == list(REGISTERS[name])


@pytest.mark.parametrize("name", REGISTERS)
def test_unit_of_a_column_is_the_end_of_its_name(name: str) -> None:
    # LAW: column name = quantity + unit.
    for column, quantity in REGISTERS[name].items():
        assert quantity.column == column
        assert quantity.scope == name
        assert quantity.label
        assert quantity.definition
        if quantity.unit:
            assert column.endswith(SUFFIXES[quantity.unit]), column
        else:
            assert not any(column.endswith(suffix) for suffix in SUFFIXES.values()), column


# The columns of the output as users know them: they do not change.
PROMISED = """
speed_rpm suction_pressure_bar discharge_pressure_bar suction_temperature_degC
discharge_temperature_degC pressure_ratio isentropic_exponent indicated_power_kW indicated_work_kJ
mean_effective_pressure_bar clearance_pct compression_exponent expansion_exponent
suction_opening_deg suction_closing_deg discharge_opening_deg discharge_closing_deg
suction_closing_late_deg discharge_closing_late_deg suction_volumetric_efficiency_pct
discharge_volumetric_efficiency_pct suction_valve_loss_kW discharge_valve_loss_kW
suction_valve_loss_pct discharge_valve_loss_pct suction_passage_loss_kW discharge_passage_loss_kW
suction_flow_area_cm2 discharge_flow_area_cm2 suction_flutter_count discharge_flutter_count
suction_impact_speed_m_s discharge_impact_speed_m_s ideal_power_kW ideal_discharge_temperature_degC
ideal_suction_volumetric_efficiency_pct ideal_discharge_volumetric_efficiency_pct other_loss_kW
isentropic_efficiency_pct suction_flow_kg_h discharge_flow_kg_h flow_ratio standard_flow_m3_h
discharge_temperature_excess_K suction_leak_pct discharge_leak_pct ring_leak_pct packing_leak_pct
suction_leak_mm2 discharge_leak_mm2 ring_leak_mm2 packing_leak_mm2 suction_leak_probability
discharge_leak_probability ring_leak_probability packing_leak_probability
detectable_suction_leak_pct detectable_discharge_leak_pct detectable_ring_leak_pct leak_power_kW
pressure_max_bar pressure_min_bar
"""
PROMISED_CYLINDERS = """
gas_load_tension_max_kN gas_load_compression_max_kN combined_load_tension_max_kN
combined_load_compression_max_kN reversal_deg reversal_pct reversal_margin_deg
reversal_margin_discharge_bar crosshead_side_force_max_kN frame_opening_force_kN torque_mean_kNm
torque_peak_kNm
"""
PROMISED_TOTALS = """
indicated_power_kW ideal_power_kW discharge_flow_kg_h standard_flow_m3_h
specific_power_kWh_per_1000_m3 driver_load_pct torque_mean_kNm torque_peak_kNm
torque_irregularity_pct
"""


def test_promised_columns_are_there() -> None:
    # SOURCE: the list of quantities promised to users (docs, reference of the output).
    assert set(END_COLUMNS) == set(PROMISED.split())
    assert set(CYLINDER_QUANTITIES) == set(PROMISED_CYLINDERS.split())
    assert set(TOTAL_QUANTITIES) == set(PROMISED_TOTALS.split())


@pytest.mark.parametrize("units", ["si", "us"])
@pytest.mark.parametrize("name", REGISTERS)
def test_every_column_can_be_shown(name: str, units: str) -> None:
    # LAW: the unit shown is one a reader knows; a standard uncertainty keeps its sign and size
    # whatever zero the scale has.
    for quantity in REGISTERS[name].values():
        if quantity.column in END_IDENTITY:
            continue
        unit = shown_unit(quantity, units)
        assert bool(unit.label) == bool(quantity.unit), quantity.column
        assert unit.uncertainty(0.0) == pytest.approx(0.0, abs=1e-12)
        step = unit.value(11.0) - unit.value(10.0)
        assert unit.uncertainty(1.0) == pytest.approx(abs(step), rel=1e-6)


def test_groups_of_the_table_hold_every_column() -> None:
    # LAW: a column of a group nobody prints would be lost without a word.
    printed = {name for name, _ in GROUPS}
    assert {one.group for one in QUANTITIES.values() if one.column in END_COLUMNS} == printed


def test_names_are_words() -> None:
    # LAW: style of the house: small letters and underscores, the unit in its own spelling.
    for register in REGISTERS.values():
        for column, quantity in register.items():
            stem = column
            if quantity.unit:
                stem = column.removesuffix(SUFFIXES[quantity.unit])
            assert re.fullmatch(r"[a-z]+(_[a-z]+)*", stem), column


def test_register_reads_without_the_rest_of_the_house() -> None:
    # LAW: the register is data: it needs no other room.
    text = (Path(pvcard.__file__).parent / "quantities.py").read_text(encoding="utf-8")
    assert "import pvcard" not in text
    assert "from pvcard" not in text


def test_no_metric_unit_is_left_in_us_tables() -> None:
    # LAW: US customary tables: every unit with a customary counterpart is shown in it.
    customary = {"rpm", "%", "deg", ""}
    for name, register in REGISTERS.items():
        for quantity in register.values():
            shown = shown_unit(quantity, "us").label
            assert shown in customary or shown != quantity.unit, f"{name} {quantity.column}"
