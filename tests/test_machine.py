"""machine.toml: every key in SI, every mistake answered in words an engineer can act on."""

from __future__ import annotations

import contextlib
import dataclasses
import hashlib
import math
import subprocess
import sys
from datetime import UTC, date, datetime
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from pvcard.errors import MachineError
from pvcard.machine import (
    Cylinder,
    CylinderEnd,
    GasDescription,
    LoadStepEnd,
    Machine,
    Uncertainty,
    read_machine,
    read_machine_text,
    read_machines,
    select_machine,
    standard_atmosphere_pressure,
)
from pvcard.machine_document import line_of
from pvcard.machine_keys import TABLES

FULL = """\
[machine]
name = "North 2"
rated_speed = "742 rpm"
rated_power = "1200 hp"
mechanical_efficiency = "94 %"
auxiliary_power = "12 kW"
rotating_inertia = "85 kg m2"
barometric_pressure = "985 mbar"
time_zone = "America/Denver"
base_pressure = "14.696 psi"
base_temperature = "60 degF"
valid_from = "2023-07-01"

[gas]
composition = { methane = 0.90, ethane = 0.06, N2 = 0.04 }
water_saturated = true
hazards = ["H2S"]
analysis_date = "2023-06-15"

[[stage]]
number = 1
suction_temperature = "77 degF"

[[stage]]
number = 2
cooler_outlet_temperature = "45 degC"
side_stream = "720 kg/h"
condensate = "36 kg/h"
[stage.gas]
isentropic_exponent = 1.25
compressibility = 0.9
discharge_compressibility = 0.88
molar_mass = "18 g/mol"

[[cylinder]]
name = "A"
stage = 1
throw = 1
bore = "12 in"
stroke = "6 in"
connecting_rod_length = "15 in"
piston_rod_diameter = "2.5 in"
tail_rod_diameter = "1.5 in"
dead_centre = "-90 deg"
reciprocating_mass = "400 lb"
gas_load_limit_compression = "40000 lbf"
gas_load_limit_tension = "38000 lbf"
combined_load_limit_compression = "180 kN"
combined_load_limit_tension = "170 kN"
reversal_minimum = "15 deg"
reversal_minimum_pct = "3 %"
discharge_temperature_limit = "300 degF"
maximum_pressure = "60 bar(g)"
[cylinder.head_end]
clearance = "18 %"
discharge_valves = { count = 3, flow_area = "10 cm2" }
[cylinder.head_end.suction_valves]
count = 3
flow_area = "11 cm2"
lift = "2.2 mm"
moving_mass = "150 g"
spring_rate = "6 N/mm"
spring_preload = "25 N"
port_area = "16 cm2"
damping = "4 N s/m"
seat_restitution = 0.3
guard_restitution = "20 %"
impact_speed_limit = "5 m/s"
[cylinder.crank_end]
clearance = "21 %"

[[cylinder]]
name = "B"
stage = 2
bore = "200 mm"
stroke = "152.4 mm"
connecting_rod_length = "381 mm"
piston_rod_diameter = "63.5 mm"
dead_centre = "90 deg"
gas = { composition = { air = 1.0 } }
[cylinder.head_end]
clearance = "20 %"
[cylinder.crank_end]
open_to = "suction"

[[load_step]]
name = "pocket"
head_end = { added_clearance = "30 %" }
cylinders = ["A"]

[[load_step]]
name = "low"
crank_end = { state = "suction_valves_held_open" }
cylinders = ["A"]

[[load_step]]
name = "low"
head_end = { state = "closing_delayed", closing_angle = "250 deg" }
cylinders = ["B"]

[uncertainty]
dead_centre = "0.2 deg"
clearance = "1.5 points"
line_temperature = "0.9 degF"

[limits]
watch_leak = "2 %"

[costs]
energy_price = "0.09 EUR/kWh"
gas_value = "200 EUR/1000 m3"
stop_cost = "25000 EUR"

[reference]
speed = "700 rpm"
suction_pressure = "9 bar(g)"
discharge_pressure = "400 psia"
suction_temperature = "20 degC"
"""

SMALL = """\
[machine]
name = "S"
rated_speed = "590 rpm"
barometric_pressure = "1 bar"

[gas]
composition = { methane = 1.0 }

[[cylinder]]
name = "C1"
bore = "280 mm"
stroke = "150 mm"
connecting_rod_length = "400 mm"
piston_rod_diameter = "57 mm"
dead_centre = "0 deg"
[cylinder.head_end]
clearance = "15 %"
suction_valves = { count = 2, flow_area = "14 cm2", lift = "2 mm" }
[cylinder.crank_end]
clearance = "16 %"

[[load_step]]
name = "half"
crank_end = { state = "suction_valves_held_open" }
"""

LB, INCH = 0.45359237, 0.0254  # SOURCE: international pound and inch of 1959, exact
LBF = LB * 9.80665  # SOURCE: standard gravity, exact
PSI = LBF / INCH**2


@pytest.fixture(scope="module")
def full() -> Machine:
    return read_machine_text(FULL, source="north2.toml")


# --- right values --------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("key", "expected"),
    [  # SOURCE: definitions of the units, by hand
        ("rated_speed", 742 / 60),
        ("rated_power", 1200 * 550 * 0.3048 * LBF),
        ("mechanical_efficiency", 0.94),
        ("auxiliary_power", 12e3),
        ("rotating_inertia", 85.0),
        ("barometric_pressure", 98500.0),
        ("base_pressure", 14.696 * PSI),
        ("base_temperature", 288.705555555556),
    ],
)
def test_machine_table_in_si(full: Machine, key: str, expected: float) -> None:
    assert_allclose(getattr(full, key), expected, rtol=1e-12)


@pytest.mark.parametrize(
    ("key", "expected"),
    [  # SOURCE: definitions of the units, by hand
        ("bore", 12 * INCH),
        ("stroke", 6 * INCH),
        ("connecting_rod_length", 15 * INCH),
        ("piston_rod_diameter", 2.5 * INCH),
        ("tail_rod_diameter", 1.5 * INCH),
        ("dead_centre", 270.0),
        ("reciprocating_mass", 400 * LB),
        ("gas_load_limit_compression", 40000 * LBF),
        ("gas_load_limit_tension", 38000 * LBF),
        ("combined_load_limit_compression", 180e3),
        ("combined_load_limit_tension", 170e3),
        ("reversal_minimum", 15.0),
        ("reversal_minimum_pct", 3.0),
        ("discharge_temperature_limit", (300 + 459.67) / 1.8),
        ("maximum_pressure", 60e5 + 98500.0),
    ],
)
def test_cylinder_table_in_si(full: Machine, key: str, expected: float) -> None:
    assert_allclose(getattr(full.cylinder("A"), key), expected, rtol=1e-12)


def test_valves_in_si(full: Machine) -> None:
    valves = full.cylinder("A").head_end.suction_valves
    assert valves is not None
    # SOURCE: SI prefixes
    expected = {
        "count": 3,
        "flow_area": 11e-4,
        "lift": 2.2e-3,
        "moving_mass": 0.150,
        "spring_rate": 6e3,
        "spring_preload": 25.0,
        "port_area": 16e-4,
        "damping": 4.0,
        "seat_restitution": 0.3,
        "guard_restitution": 0.2,
        "impact_speed_limit": 5.0,
    }
    for key, value in expected.items():
        assert_allclose(getattr(valves, key), value, rtol=1e-12, err_msg=key)
    assert_allclose(valves.total_flow_area, 33e-4, rtol=1e-12)


def test_stages_costs_and_reference_in_si(full: Machine) -> None:
    # SOURCE: definitions of the units, by hand
    assert_allclose(full.stage(1).suction_temperature, 298.15)
    assert_allclose(full.stage(2).cooler_outlet_temperature, 318.15)
    assert_allclose(full.stage(2).side_stream, 0.2)
    assert_allclose(full.stage(2).condensate, 0.01)
    energy, gas, stop = full.costs.energy_price, full.costs.gas_value, full.costs.stop_cost
    assert energy is not None
    assert gas is not None
    assert stop is not None
    assert_allclose(energy.value, 0.09 / 3.6e6)
    assert_allclose(gas.value, 0.2)
    assert (energy.per, gas.per, stop.per) == ("J", "m3", "")
    assert (stop.value, stop.currency) == (25000.0, "EUR")
    assert_allclose(full.reference.speed, 700 / 60)
    assert_allclose(full.reference.suction_pressure, 9e5 + 98500.0)
    assert_allclose(full.reference.discharge_pressure, 400 * PSI)
    assert_allclose(full.reference.suction_temperature, 293.15)


def test_valid_from_is_local_midnight(full: Machine) -> None:
    # SOURCE: Denver keeps UTC-6 in July
    assert full.valid_from == datetime(2023, 7, 1, 6, tzinfo=UTC)
    assert full.gas is not None
    assert full.gas.analysis_date == date(2023, 6, 15)


def test_gas_of_cylinder_then_stage_then_machine(full: Machine) -> None:
    gas = full.gas_of("A")
    assert gas.composition is not None
    assert_allclose(sorted(gas.composition.values()), [0.04, 0.06, 0.90])  # TRUTH: as written
    assert set(gas.composition) == {"methane", "ethane", "nitrogen"}
    assert gas.water_saturated
    assert gas.hazards == ("H2S",)
    air = full.gas_of("B").composition
    assert air is not None
    assert 0.78 < air["nitrogen"] < 0.782  # SOURCE: ISO 2533, nitrogen of dry air 78.084 %
    bare = dataclasses.replace(
        full, cylinders=tuple(dataclasses.replace(c, gas=None) for c in full.cylinders)
    )
    second = bare.gas_of("B")
    assert second.isentropic_exponent == 1.25  # TRUTH: as written
    assert second.molar_mass == pytest.approx(0.018)


def test_uncertainties_of_the_contract() -> None:
    # SOURCE: the defaults promised to users in docs of machine.toml
    assert read_machine_text(SMALL).uncertainty == Uncertainty(
        dead_centre=0.5,
        pressure_level=0.01,
        pressure_gain=0.003,
        line_pressure=0.002,
        line_temperature=1.0,
        bore=0.0005,
        stroke=0.0005,
        connecting_rod_length=0.002,
        clearance=0.02,
        gas_exponent=0.002,
        speed=0.001,
    )


def test_uncertainties_given_replace_the_defaults(full: Machine) -> None:
    # TRUTH: 0.9 degF is 0.5 K, the rest as written
    given = full.uncertainty
    assert_allclose([given.dead_centre, given.clearance, given.line_temperature], [0.2, 0.015, 0.5])
    assert given.pressure_level == Uncertainty().pressure_level
    assert (full.limits.watch_leak, full.limits.act_leak) == (0.02, 0.05)
    assert full.limits.watch_power == 0.005


# --- geometry and load steps ---------------------------------------------------------------------


def test_areas_leave_out_the_rods(full: Machine) -> None:
    cylinder = full.cylinder("a")
    head = math.pi / 4 * ((12 * INCH) ** 2 - (1.5 * INCH) ** 2)  # LAW: ring area
    crank = math.pi / 4 * ((12 * INCH) ** 2 - (2.5 * INCH) ** 2)
    assert_allclose([cylinder.area("head"), cylinder.area("crank")], [head, crank], rtol=1e-12)
    assert_allclose(cylinder.swept_volume(cylinder.crank_end), crank * 6 * INCH, rtol=1e-12)


def test_open_end_does_not_compress(full: Machine) -> None:
    cylinder = full.cylinder("B")
    assert [end.name for end in cylinder.ends] == ["head"]
    assert full.end_state("B", "crank") == "open"
    with pytest.raises(MachineError, match="crank_end: this end does not compress"):
        full.clearance("B", "crank")


def test_load_steps_act_on_their_cylinders_only(full: Machine) -> None:
    assert full.load_step_names == ("pocket", "low")
    # TRUTH: declared 18 % and 20 %, pocket 30 % at A
    assert_allclose(full.clearance("A", "head"), 0.18)
    assert_allclose(full.clearance("A", "head", "pocket"), 0.48)
    assert_allclose(full.clearance("A", "crank", "pocket"), 0.21)
    assert_allclose(full.clearance("B", "head", "Pocket "), 0.20)
    assert full.end_state("A", "crank", "low") == "suction_valves_held_open"
    assert full.end_state("A", "head", "low") == "loaded"
    assert full.step_end("B", "head", "low") == LoadStepEnd(0.0, "closing_delayed", 250.0)


def test_unknown_names_are_answered_with_the_nearest(full: Machine) -> None:
    with pytest.raises(MachineError, match='no load step of this name.*Did you mean "pocket"'):
        full.clearance("A", "head", "pockt")
    with pytest.raises(MachineError, match=r"no cylinder of this name.*'Z'.*one of A, B"):
        full.cylinder("Z")
    with pytest.raises(MachineError, match="no end of this name.*'top'.*head, crank"):
        full.cylinder("A").area("top")


def test_throws_not_given_are_each_their_own() -> None:
    text = SMALL.split("[[load_step]]")[0]
    one = text[text.index("[[cylinder]]") :]
    text += one.replace("C1", "C2").replace('bore = "', 'throw = 1\nbore = "') + one.replace(
        "C1", "C3"
    )
    machine = read_machine_text(text)
    assert [c.throw for c in machine.cylinders] == [2, 1, 3]  # TRUTH: C2 took 1


def test_single_acting_needs_no_rod() -> None:
    text = SMALL.split("[[load_step]]")[0].replace('clearance = "16 %"', 'open_to = "atmosphere"')
    cylinder = read_machine_text(text.replace('piston_rod_diameter = "57 mm"', "")).cylinder("C1")
    assert cylinder.piston_rod_diameter == 0.0
    assert [end.name for end in cylinder.ends] == ["head"]


# --- barometer and notes -------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("altitude", "pressure"),
    [  # SOURCE: ISO 2533:1975 / ICAO Doc 7488, table of pressure against geopotential altitude
        (0.0, 101325.0),
        (500.0, 95461.0),
        (1000.0, 89874.6),
        (2000.0, 79495.2),
        (5000.0, 54019.9),
    ],
)
def test_standard_atmosphere(altitude: float, pressure: float) -> None:
    assert_allclose(standard_atmosphere_pressure(altitude), pressure, rtol=1e-5)


def test_barometric_pressure_says_where_it_comes_from(full: Machine) -> None:
    assert full.barometric_pressure_from == "declared"
    high = read_machine_text(
        SMALL.replace('barometric_pressure = "1 bar"', 'site_altitude = "1000 m"')
    )
    assert high.barometric_pressure_from == "site_altitude"
    assert_allclose(high.barometric_pressure, 89874.6, rtol=1e-5)  # SOURCE: ISO 2533:1975
    none = read_machine_text(SMALL.replace('barometric_pressure = "1 bar"', ""))
    assert none.barometric_pressure_from == "assumed"
    assert none.barometric_pressure == 101325.0  # SOURCE: standard atmosphere, exact
    assert "1.01325 bar is assumed" in none.notes[0]


def test_what_is_odd_but_possible_becomes_a_note() -> None:
    machine = read_machine_text(
        SMALL.replace("methane = 1.0", "methane = 0.95, ethane = 0.04")
        .replace('clearance = "15 %"', 'clearance = "0.15 %"')
        .replace('"400 mm"', '"90 mm"')
    )
    text = " | ".join(machine.notes)
    for fragment in ("gas: ", "0.99", "connecting rod / crank radius is 1.2", "unusually small"):
        assert fragment in text


# --- every wrong thing ---------------------------------------------------------------------------

EDITS = [
    # numbers without units, and wrong units
    ('"280 mm"', "280", ["line 11, cylinder C1: bore", "bare number", '"280 mm"']),
    ('"280 mm"', "0.28", ["cylinder C1: bore", "bare number", 'bore = "0.28 m"']),
    ('"280 mm"', '"280"', ["bore", "no unit", "found 280"]),
    ('"280 mm"', '"280 mn"', ["bore", "unknown unit", "'mn'", 'Did you mean "mm"']),
    ('"280 mm"', '"280 kg"', ["bore", "unit of a mass, not of a length"]),
    ('"280 mm"', '"280 m"', ["bore", "not plausible", "between 8 mm and 3 m", '"280 mm"']),
    ('"280 mm"', '"-280 mm"', ["bore", "not plausible", "-280 mm"]),
    ('"280 mm"', '"0 mm"', ["bore", "not plausible"]),
    ('"280 mm"', '"1,280 mm"', ["bore", "more than one way"]),
    ('"280 mm"', "true", ["bore", "not a length", "true or false"]),
    ('"280 mm"', "[280]", ["bore", "not a length", "a list"]),
    ('"280 mm"', "2024-03-01", ["bore", "not a length", "date"]),
    ('"280 mm"', '"wide"', ["bore", "not a length", "'wide'"]),
    ('"280 mm"', "280 mm", ["line 11", "not valid TOML", "280 mm", "in quotes"]),
    ('"280 mm"', '"280 mm', ["line 11", "not valid TOML", "quotation mark is missing"]),
    ('"590 rpm"', "590", ["machine.rated_speed", 'rated_speed = "590 rpm"']),
    ('"590 rpm"', '"590 Hz"', ["machine.rated_speed", "not plausible", '"590 rpm"']),
    ('"590 rpm"', '"3 m/s"', ["machine.rated_speed", "velocity", '"590 rpm"']),
    ('"15 %"', "0.15", ["head_end.clearance", "bare number", 'clearance = "15 %" if', "0.15 %"]),
    ('"15 %"', "15", ["head_end.clearance", "bare number", 'clearance = "15 %"']),
    ('"15 %"', '"350 %"', ["head_end.clearance", "not plausible", "300 %"]),
    ('"15 %"', '"0 %"', ["head_end.clearance", "not plausible"]),
    ('"15 %"', '"15 points"', ["head_end.clearance", "not of a fraction", "per cent"]),
    ('"1 bar"', '"1013 bar"', ["barometric_pressure", "not plausible", '"1013 mbar(a)"']),
    ('"1 bar"', '"0 bar(g)"', ["barometric_pressure", "gauge pressure", "absolute"]),
    ('"1 bar"', "101325", ["barometric_pressure", "bare number", '"101325 Pa(a)"']),
    # keys
    ("bore =", "boer =", ["unknown key", "boer", 'Did you mean "bore"']),
    ("bore =", "diameter_of_piston =", ["unknown key", "one of name, stage, throw, bore"]),
    ('bore = "280 mm"', "", ["cylinder C1: bore", "missing key", 'bore = "280 mm"']),
    ('stroke = "150 mm"', "", ["cylinder C1: stroke", "missing key"]),
    ('dead_centre = "0 deg"', "", ["dead_centre", "missing key", '"0 deg"']),
    ('name = "C1"', "", ["cylinder number 1: name", "missing key"]),
    ('name = "C1"', 'name = ""', ["cylinder number 1: name", "text in quotes"]),
    ('name = "C1"', "name = 1", ["name", "text in quotes", "found 1"]),
    ('name = "S"', "", ["machine.name", "missing key"]),
    ('rated_speed = "590 rpm"', "", ["machine.rated_speed", "missing key", '"590 rpm"']),
    ('clearance = "15 %"', "", ["head_end.clearance", "missing key", "open_to"]),
    ('[cylinder.crank_end]\nclearance = "16 %"', "", ["crank_end", "missing key", "clearance"]),
    ('clearance = "15 %"', 'clearance = "15 %"\nthrow = 1', ["throw belongs to [[cylinder]]"]),
    ("[gas]", "[gass]", ["gass", "unknown table", "[gas]"]),
    ("[machine]", "", ["name", "in no table", "below a line [machine]"]),
    ("[machine]", "[[machine]]", ["line 1, machine", "write [machine]"]),
    ("[[cylinder]]", "[cylinder]", ["cylinder", "write [[cylinder]]"]),
    # geometry
    ('"400 mm"', '"70 mm"', ["line 13", "connecting_rod_length", "'70 mm'", "0.075 m"]),
    ('"57 mm"', '"300 mm"', ["piston_rod_diameter", "does not fit", "0.28 m"]),
    ('"57 mm"', '"0 mm"', ["piston_rod_diameter", "crank end needs", "open_to"]),
    ('piston_rod_diameter = "57 mm"', "", ["piston_rod_diameter", "crank end needs"]),
    ("bore =", 'tail_rod_diameter = "290 mm"\nbore =', ["tail_rod_diameter", "does not fit"]),
    ("bore =", "throw = 0\nbore =", ["throw", "not plausible", "between 1 and 24"]),
    ("bore =", 'throw = "1"\nbore =', ["throw", "whole number without quotes"]),
    ("bore =", "throw = 1.5\nbore =", ["throw", "whole number"]),
    ("bore =", "stage = 2\nbore =", ["cylinder C1: stage", "not declared", "number = 2"]),
    ("bore =", 'maximum_pressure = "60 bar"\nbore =', ["absolute or gauge", '"60 bar(a)"']),
    ("bore =", 'reversal_minimum_pct = "130 %"\nbore =', ["reversal_minimum_pct", "plausible"]),
    ("bore =", 'gas_load_limit_tension = "9 lb"\nbore =', ["gas_load_limit_tension", '"lbf"']),
    ('"16 %"', '"16 %"\nopen_to = "atmosphere"', ["crank_end.clearance", "does not compress"]),
    ('clearance = "16 %"', 'open_to = "air"', ["open_to", "unknown word", "atmosphere, suction"]),
    # valves
    ("count = 2", "count = 0", ["suction_valves.count", "not plausible", "between 1 and 64"]),
    ("count = 2, ", "", ["line 18", "head_end.suction_valves.count", "missing key", "count = 2"]),
    ('"14 cm2"', '"14 m2"', ["suction_valves.flow_area", "not plausible", '"14 cm2"']),
    ('"14 cm2"', '"400 cm2"', ["flow_area", "larger than the piston", "615.8 cm2"]),
    ('"2 mm"', "2", ["suction_valves.lift", "bare number", '"2 mm"']),
    ("lift =", "seat_restitution = 1.3, lift =", ["seat_restitution", "between 0 and 1"]),
    ("lift =", "lft =", ["unknown key", 'Did you mean "lift"']),
    ('{ count = 2, flow_area = "14 cm2", lift = "2 mm" }', "2", ["suction_valves", "a table"]),
    # load steps
    ('name = "half"', 'name = "half"\ncylinders = ["C9"]', ["load_step half: cylinders", "'C9'"]),
    ('name = "half"', 'name = "half"\ncylinders = "C1"', ["cylinders", "list of texts"]),
    ('name = "half"', "", ["load_step number 1: name", "missing key"]),
    ('"suction_valves_held_open"', '"held_open"', ["load_step half: crank_end.state", "loaded"]),
    ('"suction_valves_held_open"', '"closing_delayed"', ["closing_angle", "missing", '"240 deg"']),
    (
        '"suction_valves_held_open"',
        '"closing_delayed", closing_angle = "60 deg"',
        ["crank_end.closing_angle", "not plausible", "between 180 deg and 360 deg"],
    ),
    (
        'state = "suction_valves_held_open"',
        'closing_angle = "200 deg"',
        ["closing_angle", "delayed closing only"],
    ),
    (
        'state = "suction_valves_held_open"',
        'added_clearance = "-5 %"',
        ["crank_end.added_clearance", "not plausible"],
    ),
    # gas
    ("methane = 1.0", "methan = 1.0", ["gas.composition.methan", "methan"]),
    ("methane = 1.0", "unobtainium = 1.0", ["gas.composition", "unobtainium"]),
    ("methane = 1.0", "methane = 0.5", ["gas.composition", "0.5"]),
    ("methane = 1.0", 'methane = "much"', ["gas.composition.methane", "'much'"]),
    ("methane = 1.0", "methane = true", ["gas.composition.methane", "number"]),
    ("composition = { methane = 1.0 }", "", ["gas.composition", "not described"]),
    ("composition = { methane = 1.0 }", 'molar_mass = "16 g/mol"', ["gas", "not described"]),
    ("[gas]", "[gas]\nisentropic_exponent = 1.3", ["isentropic_exponent", "both given"]),
    ("[gas]", '[gas]\nmolar_mass = "16 g/mol"', ["molar_mass", "both given"]),
    ("[gas]", '[gas]\nisentropic_exponent = "1.3"', ["isentropic_exponent", "plain number"]),
    ("[gas]", '[gas]\nbasis = "volume"', ["gas.basis", "mole, mass"]),
    ("[gas]", '[gas]\nwater_saturated = "yes"', ["water_saturated", "true or false"]),
    (
        "[gas]",
        '[gas]\nwater_saturated = true\nrelative_humidity = "60 %"',
        ["relative_humidity", "both given"],
    ),
    ("[gas]", '[gas]\nanalysis_date = "last week"', ["gas.analysis_date", "year-month-day"]),
    ("[gas]\ncomposition = { methane = 1.0 }", "", ["cylinder C1: gas", "no gas", "[gas]"]),
    # machine
    ('name = "S"', 'name = "S"\ntime_zone = "Europe/Pragu"', ["time_zone", "Europe/Prague"]),
    ('name = "S"', 'name = "S"\nvalid_from = "01.03.2024"', ["valid_from", "year-month-day"]),
    ('name = "S"', 'name = "S"\nsite_altitude = "9 m"', ["site_altitude", "both given"]),
    ('name = "S"', 'name = "S"\nmechanical_efficiency = "950 %"', ["mechanical_efficiency"]),
    ('name = "S"', 'name = "S"\nbase_temperature = "15 K"', ["base_temperature", '"15 degC"']),
]

ADDED = [
    ("[uncertainty]\nbore = 0.05", ["uncertainty.bore", "bare number", '"5 %"']),
    ('[uncertainty]\nbore = "0.1 mm"', ["uncertainty.bore", "relative to the value"]),
    ('[uncertainty]\nbore = "0 %"', ["uncertainty.bore", "not plausible"]),
    ('[uncertainty]\nclearance = "2 %"', ["uncertainty.clearance", '"2 points"']),
    ('[uncertainty]\npressure_gain = "-1 %"', ["uncertainty.pressure_gain", "not plausible"]),
    ('[uncertainty]\npresure_gain = "1 %"', ["unknown key", '"pressure_gain"']),
    ('[limits]\nwatch_leak = "9 %"', ["limits.watch_leak", "'9 %'", "act_leak"]),
    ("[limits]\nwatch_leak = 1", ["limits.watch_leak", "bare number", '"1 %"']),
    ('[costs]\nenergy_price = "0.09 EUR"', ["costs.energy_price", "per energy"]),
    ("[costs]\nenergy_price = 0.09", ["costs.energy_price", '"0.09 EUR/kWh"']),
    ('[costs]\nenergy_price = "0.09 EUR/m3"', ["costs.energy_price", "not of an energy"]),
    ('[costs]\nstop_cost = "40,000 EUR"', ["costs.stop_cost", "more than one way"]),
    ('[costs]\nstop_cost = "-4 EUR"', ["costs.stop_cost", "negative"]),
    ('[costs]\nstop_cost = "4 EUR/d"', ["costs.stop_cost", "not per anything"]),
    ('[costs]\nstop_cost = "a lot"', ["costs.stop_cost", "not an amount of money"]),
    (
        '[costs]\nstop_cost = "4 USD"\ngas_value = "2 EUR/m3"',
        ["costs.stop_cost", "two currencies", "USD and EUR"],
    ),
    ('[reference]\nsuction_pressure = "10 bar"', ["suction_pressure", "absolute or gauge"]),
    (
        '[reference]\nsuction_pressure = "9 bar(a)"\ndischarge_pressure = "7 bar(g)"',
        ["reference.discharge_pressure", "not above the suction pressure"],
    ),
    ('[[stage]]\nnumber = "1"', ["stage", "number", "whole number"]),
    ("[[stage]]\nnumber = 1\n[[stage]]\nnumber = 1", ["stage 1: number", "each once"]),
    ('[[stage]]\nsuction_temperature = "5 degC"', ["stage number 1: number", "missing key"]),
    ('[[stage]]\nnumber = 1\nside_stream = "5 kg"', ["side_stream", "not of a mass flow"]),
    ("[[stage]]\nnumber = 1\ngas = { methane = 1 }", ["stage 1: gas.methane", "unknown key"]),
    ('[[load_step]]\nname = "half"', ["load_step half: name", "twice", "C1"]),
    ("[machine]\n", ["line", "not valid TOML", "twice"]),
]


def failure_of(text: str) -> str:
    with pytest.raises(MachineError) as caught:
        read_machine_text(text, source="k.toml")
    return str(caught.value)


@pytest.mark.parametrize(("old", "new", "fragments"), EDITS)
def test_a_wrong_edit_is_answered(old: str, new: str, fragments: list[str]) -> None:
    assert old in SMALL
    message = failure_of(SMALL.replace(old, new, 1))
    assert message.startswith("k.toml: ")
    for fragment in fragments:
        assert fragment in message, message


@pytest.mark.parametrize(("added", "fragments"), ADDED)
def test_a_wrong_table_is_answered(added: str, fragments: list[str]) -> None:
    message = failure_of(SMALL + added)
    assert message.startswith("k.toml: ")
    for fragment in fragments:
        assert fragment in message, message


@pytest.mark.parametrize(
    ("name", "change", "fragments"),
    [
        ("C1", ("", ""), ["name", "two cylinders have the same name"]),
        ("c1", ("", ""), ["two cylinders have the same name"]),
        ("C2", ("150 mm", "160 mm"), ["cylinder C2: stroke", "share a rod", "its own throw"]),
        ("C2", ('"0 deg"', '"180 deg"'), ["cylinder C2: dead_centre", "share a rod", "C1"]),
    ],
)
def test_two_cylinders_that_clash(name: str, change: tuple[str, str], fragments: list[str]) -> None:
    one = SMALL[SMALL.index("[[cylinder]]") : SMALL.index("[[load_step]]")]
    one = one.replace("bore =", "throw = 1\nbore =")
    start = SMALL[: SMALL.index("[[cylinder]]")]
    message = failure_of(start + one + one.replace("C1", name).replace(*change))
    for fragment in fragments:
        assert fragment in message, message


def test_every_key_is_read_and_every_bare_number_refused() -> None:
    """Each key with a unit, put down as a bare number, names itself and says what to write."""
    headers = {
        "[machine]": "machine",
        "[uncertainty]": "uncertainty",
        "[limits]": "limits",
        "[reference]": "reference",
    }
    kinds = {"text", "flag", "date", "texts", "cost"}
    for header, table in headers.items():
        for name, key in TABLES[header].items():
            if key.kind in kinds:
                continue
            text = SMALL.replace('rated_speed = "590 rpm"', "").replace(
                'barometric_pressure = "1 bar"', ""
            )
            if table == "machine":
                text = text.replace('name = "S"', f'name = "S"\n{name} = 7', 1)
            else:
                text = text.replace('name = "S"', 'name = "S"\nrated_speed = "590 rpm"', 1)
                text += f"[{table}]\n{name} = 7\n"
            if name != "rated_speed" and table == "machine":
                text = text.replace('name = "S"', 'name = "S"\nrated_speed = "590 rpm"', 1)
            message = failure_of(text)
            assert f"{table}.{name}: " in message, message
            assert f'{name} = "7 ' in message, message


@given(st.data())
@settings(max_examples=150, deadline=None)
def test_a_mangled_line_never_ends_in_a_traceback(data: st.DataObject) -> None:
    lines = FULL.splitlines()
    row = data.draw(st.integers(0, len(lines) - 1))
    start = lines[row].split("=")[0]
    junk = [
        "",
        "1",
        "true",
        "[]",
        "{}",
        "[{}]",
        '""',
        '"x"',
        "nan",
        '"-1 kPa"',
        "2024-01-01",
        '"%"',
    ]
    lines[row] = data.draw(st.sampled_from([f"{start}= {word}" for word in junk] + ["", start]))
    with contextlib.suppress(MachineError):
        assert read_machine_text("\n".join(lines)).cylinders


# --- files ---------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "encoded",
    [
        SMALL.encode(),
        b"\xef\xbb\xbf" + SMALL.encode(),
        ("# Kühler, 20 °C\r\n" + SMALL.replace("\n", "\r\n")).encode("latin-1"),
        SMALL.encode("utf-16"),
    ],
    ids=["utf-8", "byte-order mark", "latin-1, dos lines", "utf-16"],
)
def test_encodings_are_tolerated(tmp_path: Path, encoded: bytes) -> None:
    file = tmp_path / "machine.toml"
    file.write_bytes(encoded)
    machine = read_machine(file)
    assert machine.name == "S"
    assert machine.sha256 == hashlib.sha256(encoded).hexdigest()
    assert read_machine_text(machine.text).cylinders == machine.cylinders


@pytest.mark.parametrize(
    ("content", "fragments"),
    [
        (b"\x89HDF\r\n\x1a\n\x00\x00", ["not a text file", "machine.toml"]),
        (b"# machine: S\ncrank_angle [deg];C1 head end [bar(a)]\n0;1\n", ["export given instead"]),
        (b"cycle,crank_angle [deg]\n1,0.0\n", ["not valid TOML", "export given instead"]),
        (b"", ["[machine] is missing"]),
        (b'[angle]\ncolumn = "Deg"\n', ["unknown table", "angle"]),
        (b'name = "S"\n', ["name belongs below a line [machine]"]),
    ],
)
def test_other_files_are_refused(tmp_path: Path, content: bytes, fragments: list[str]) -> None:
    file = tmp_path / "thing.csv"
    file.write_bytes(content)
    with pytest.raises(MachineError) as caught:
        read_machine(file)
    for fragment in ("thing.csv", *fragments):
        assert fragment in str(caught.value)


def test_missing_file_and_folder(tmp_path: Path) -> None:
    (tmp_path / "k3.toml").write_text(SMALL)
    with pytest.raises(MachineError, match=r"k4.toml: there is no such file.*k3.toml"):
        read_machine(tmp_path / "k4.toml")
    with pytest.raises(MachineError, match="this is a folder"):
        read_machine(tmp_path)
    with pytest.raises(MachineError, match="no machine description in this folder"):
        read_machines(_made(tmp_path / "empty"))


def _made(folder: Path) -> Path:
    folder.mkdir()
    return folder


@pytest.fixture
def fleet(tmp_path: Path) -> list[Machine]:
    texts = {
        "s_old.toml": SMALL,
        "s_new.toml": SMALL.replace('name = "S"', 'name = "S"\nvalid_from = "2024-03-01"'),
        "t.TOML": SMALL.replace('name = "S"', 'name = "T-1"\nvalid_from = 2024-03-01'),
        "columns.toml": '[angle]\ncolumn = "Deg"\n',
        "notes.txt": "not a description",
    }
    for name, text in texts.items():
        (tmp_path / name).write_text(text)
    return read_machines(tmp_path)


def test_folder_is_read_in_order(fleet: list[Machine]) -> None:
    assert [Path(m.source).name for m in fleet] == ["s_old.toml", "s_new.toml", "t.TOML"]


@pytest.mark.parametrize(
    ("name", "time", "file"),
    [
        ("S", datetime(2024, 2, 29, 23, 59, tzinfo=UTC), "s_old.toml"),
        ("s", datetime(2024, 3, 1, tzinfo=UTC), "s_new.toml"),
        ("S", datetime(2025, 1, 1), "s_new.toml"),
        ("T-1", None, "t.TOML"),
    ],
)
def test_selection(fleet: list[Machine], name: str, time: datetime | None, file: str) -> None:
    assert Path(select_machine(fleet, name, time).source).name == file


@pytest.mark.parametrize(
    ("name", "time", "fragments"),
    [
        ("S", None, ["2 descriptions of 'S'", "no time"]),
        ("T1", None, ["no machine of this name", "'T1'", "S, T-1", 'Did you mean "T-1"']),
        (None, None, ["several machines", "one of S, T-1"]),
        ("T-1", datetime(2020, 1, 1, tzinfo=UTC), ["t.TOML", "2020-01-01", "from 2024-03-01"]),
    ],
)
def test_selection_that_fails(
    fleet: list[Machine], name: str | None, time: datetime | None, fragments: list[str]
) -> None:
    with pytest.raises(MachineError) as caught:
        select_machine(fleet, name, time)
    for fragment in fragments:
        assert fragment in str(caught.value)


def test_two_descriptions_from_the_same_moment(tmp_path: Path) -> None:
    (tmp_path / "a.toml").write_text(SMALL)
    (tmp_path / "b.toml").write_text(SMALL)
    with pytest.raises(MachineError, match=r"b.toml: machine.valid_from: two descriptions of 'S'"):
        read_machines(tmp_path)


# --- the parts by themselves ---------------------------------------------------------------------


def test_parts_refuse_nonsense_without_a_file() -> None:
    with pytest.raises(MachineError, match="connecting_rod_length: .*more than half the stroke"):
        Cylinder(
            name="C1",
            bore=0.3,
            stroke=0.2,
            connecting_rod_length=0.1,
            head_end=CylinderEnd("head", 0.1),
            crank_end=CylinderEnd("crank", open_to="atmosphere"),
        )
    with pytest.raises(MachineError, match="open_to: neither end compresses"):
        Cylinder(
            name="C1",
            bore=0.3,
            stroke=0.2,
            connecting_rod_length=0.5,
            head_end=CylinderEnd("head", open_to="atmosphere"),
            crank_end=CylinderEnd("crank", open_to="atmosphere"),
        )
    with pytest.raises(MachineError, match="not described"):
        GasDescription()
    with pytest.raises(MachineError, match="no cylinder is declared"):
        Machine(name="S", rated_speed=10.0, cylinders=())


def test_line_of_follows_tables() -> None:
    text = "[a]\nx = 1\n[[b]]\nx = 1\n[b.c]\ny = 1\n[[b]]\nx = 2\nd = { y = 1 }\n"
    # TRUTH: counted by eye
    assert line_of(text, ("a", "x")) == 2
    assert line_of(text, ("b", 0, "c", "y")) == 6
    assert line_of(text, ("b", 1, "x")) == 8
    assert line_of(text, ("b", 1, "d", "y")) == 9
    assert line_of(text, ("b", 1, "missing")) == 7
    assert line_of(text, ("z",)) is None


def test_reading_a_machine_does_not_load_pint() -> None:
    code = (
        "import sys\nfrom pvcard.machine import read_machine_text\n"
        f"read_machine_text({FULL!r})\n"
        "heavy = {'pint', 'matplotlib', 'pandas', 'h5py', 'CoolProp', 'pyaga8'}\n"
        "print(sorted(heavy & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
