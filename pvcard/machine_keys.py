"""Every key of machine.toml: what it takes, whether it is needed, which values are plausible.

The reader works from these tables alone; a key that is not here is unknown.
"""

from __future__ import annotations

from typing import NamedTuple


class Key(NamedTuple):
    """One key of one table."""

    kind: str  # a dimension of units.py, or text, number, integer, flag, date, texts, cost, table
    example: str  # as to be written, for messages
    required: bool = False
    between: tuple[str, str] | None = None  # lowest and highest plausible value, with units
    words: tuple[str, ...] = ()  # the only texts allowed
    reference_free: bool = False  # a pressure that is absolute by its meaning


_PRESSURES = ("0.01 bar", "5000 bar")
_TEMPERATURES = ("-180 degC", "400 degC")
_FORCES = ("0.01 kN", "20 MN")
_AREAS = ("0.5 mm2", "5000 cm2")
_SHARES = ("0 %", "100 %")
_PRIORS = ("0.0001 %", "100 %")

MACHINE: dict[str, Key] = {
    "name": Key("text", '"K-3"', required=True),
    "rated_speed": Key("speed", '"590 rpm"', required=True, between=("5 rpm", "6000 rpm")),
    "rated_power": Key("power", '"900 kW"', between=("0.05 kW", "100 MW")),
    "mechanical_efficiency": Key("fraction", '"95 %"', between=("20 %", "100 %")),
    "auxiliary_power": Key("power", '"12 kW"', between=("0 kW", "10 MW")),
    "rotating_inertia": Key(
        "moment_of_inertia", '"120 kg m2"', between=("0.0001 kg m2", "1000000 kg m2")
    ),
    "barometric_pressure": Key(
        "pressure", '"1.01325 bar"', between=("0.45 bar", "1.1 bar"), reference_free=True
    ),
    "site_altitude": Key("length", '"320 m"', between=("-450 m", "6000 m")),
    "time_zone": Key("text", '"Europe/Prague"'),
    "base_pressure": Key(
        "pressure", '"1.01325 bar"', between=("0.8 bar", "1.2 bar"), reference_free=True
    ),
    "base_temperature": Key("temperature", '"15 degC"', between=("-20 degC", "40 degC")),
    "valid_from": Key("date", '"2024-03-01"'),
}
GAS: dict[str, Key] = {
    "composition": Key("table", "{ methane = 0.95, ethane = 0.05 }"),
    "basis": Key("text", '"mole"', words=("mole", "mass")),
    "water_saturated": Key("flag", "true"),
    "relative_humidity": Key("fraction", '"60 %"', between=_SHARES),
    "hazards": Key("texts", '["H2S"]'),
    "analysis_date": Key("date", '"2024-02-10"'),
    "isentropic_exponent": Key("number", "1.27", between=("1.001", "6")),
    "compressibility": Key("number", "0.95", between=("0.05", "4")),
    "discharge_compressibility": Key("number", "0.94", between=("0.05", "4")),
    "molar_mass": Key("molar_mass", '"17.2 g/mol"', between=("1.5 g/mol", "500 g/mol")),
}
STAGE: dict[str, Key] = {
    "number": Key("integer", "1", required=True, between=("1", "12")),
    "cooler_outlet_temperature": Key("temperature", '"40 degC"', between=_TEMPERATURES),
    "suction_temperature": Key("temperature", '"25 degC"', between=_TEMPERATURES),
    "side_stream": Key("mass_flow", '"500 kg/h"', between=("-10000 t/h", "10000 t/h")),
    "condensate": Key("mass_flow", '"20 kg/h"', between=("0 kg/h", "1000 t/h")),
    "gas": Key("table", "{ composition = { methane = 1.0 } }"),
}
CYLINDER: dict[str, Key] = {
    "name": Key("text", '"C1"', required=True),
    "stage": Key("integer", "1", between=("1", "12")),
    "throw": Key("integer", "1", between=("1", "24")),
    "bore": Key("length", '"280 mm"', required=True, between=("8 mm", "3 m")),
    "stroke": Key("length", '"150 mm"', required=True, between=("5 mm", "2 m")),
    "connecting_rod_length": Key("length", '"400 mm"', required=True, between=("10 mm", "8 m")),
    "piston_rod_diameter": Key("length", '"57 mm"', between=("0 mm", "600 mm")),
    "tail_rod_diameter": Key("length", '"0 mm"', between=("0 mm", "600 mm")),
    "dead_centre": Key("angle", '"0 deg"', required=True, between=("-360 deg", "720 deg")),
    "reciprocating_mass": Key("mass", '"180 kg"', between=("0.01 kg", "20 t")),
    "gas_load_limit_compression": Key("force", '"150 kN"', between=_FORCES),
    "gas_load_limit_tension": Key("force", '"150 kN"', between=_FORCES),
    "combined_load_limit_compression": Key("force", '"160 kN"', between=_FORCES),
    "combined_load_limit_tension": Key("force", '"160 kN"', between=_FORCES),
    "reversal_minimum": Key("angle", '"15 deg"', between=("0 deg", "180 deg")),
    "reversal_minimum_pct": Key("fraction", '"3 %"', between=_SHARES),
    "discharge_temperature_limit": Key(
        "temperature", '"150 degC"', between=("-100 degC", "400 degC")
    ),
    "maximum_pressure": Key("pressure", '"60 bar(a)"', between=_PRESSURES),
    "head_end": Key("table", '{ clearance = "15 %" }', required=True),
    "crank_end": Key("table", '{ clearance = "16 %" }', required=True),
    "gas": Key("table", "{ composition = { methane = 1.0 } }"),
}
END: dict[str, Key] = {
    "clearance": Key("fraction", '"15 %"', between=("0.01 %", "300 %")),
    "open_to": Key("text", '"atmosphere"', words=("atmosphere", "suction")),
    "suction_valves": Key("table", '{ count = 2, flow_area = "14 cm2", lift = "2 mm" }'),
    "discharge_valves": Key("table", '{ count = 2, flow_area = "14 cm2", lift = "2 mm" }'),
}
VALVES: dict[str, Key] = {
    "count": Key("integer", "2", required=True, between=("1", "64")),
    "flow_area": Key("area", '"14 cm2"', required=True, between=_AREAS),
    "lift": Key("length", '"2 mm"', between=("0.05 mm", "40 mm")),
    "moving_mass": Key("mass", '"120 g"', between=("0.01 g", "20 kg")),
    "spring_rate": Key("spring_rate", '"4 N/mm"', between=("0.1 N/m", "10000 N/mm")),
    "spring_preload": Key("force", '"30 N"', between=("0 N", "100 kN")),
    "port_area": Key("area", '"20 cm2"', between=_AREAS),
    "damping": Key("damping", '"5 N s/m"', between=("0 N s/m", "1000000 N s/m")),
    "seat_restitution": Key("ratio", "0.3", between=("0", "1")),
    "guard_restitution": Key("ratio", "0.2", between=("0", "1")),
    "impact_speed_limit": Key("velocity", '"4 m/s"', between=("0.05 m/s", "100 m/s")),
}
LOAD_STEP: dict[str, Key] = {
    "name": Key("text", '"pocket open"', required=True),
    "cylinders": Key("texts", '["C1"]'),
    "head_end": Key("table", '{ added_clearance = "22 %" }'),
    "crank_end": Key("table", '{ state = "suction_valves_held_open" }'),
}
LOAD_STEP_END: dict[str, Key] = {
    "added_clearance": Key("fraction", '"22 %"', between=("0 %", "300 %")),
    "state": Key(
        "text",
        '"suction_valves_held_open"',
        words=("loaded", "suction_valves_held_open", "suction_valves_removed", "closing_delayed"),
    ),
    "closing_angle": Key("angle", '"240 deg"', between=("180 deg", "360 deg")),
}
UNCERTAINTY: dict[str, Key] = {
    "dead_centre": Key("angle", '"0.5 deg"', between=("0.0001 deg", "90 deg")),
    "pressure_level": Key("fraction", '"1 %"', between=_PRIORS),
    "pressure_gain": Key("fraction", '"0.3 %"', between=_PRIORS),
    "line_pressure": Key("fraction", '"0.2 %"', between=_PRIORS),
    "line_temperature": Key("temperature_difference", '"1 K"', between=("0.0001 K", "100 K")),
    "bore": Key("fraction", '"0.05 %"', between=_PRIORS),
    "stroke": Key("fraction", '"0.05 %"', between=_PRIORS),
    "connecting_rod_length": Key("fraction", '"0.2 %"', between=_PRIORS),
    "clearance": Key("points", '"2 points"', between=("0.0001 points", "100 points")),
    "gas_exponent": Key("fraction", '"0.2 %"', between=_PRIORS),
    "speed": Key("fraction", '"0.1 %"', between=_PRIORS),
}
LIMITS: dict[str, Key] = {
    "watch_leak": Key("fraction", '"1 %"', between=_PRIORS),
    "act_leak": Key("fraction", '"5 %"', between=_PRIORS),
    "watch_power": Key("fraction", '"0.5 %"', between=_PRIORS),
}
COSTS: dict[str, Key] = {
    "energy_price": Key("cost", '"0.09 EUR/kWh"', words=("energy",)),
    "gas_value": Key("cost", '"0.20 EUR/m3"', words=("volume",)),
    "stop_cost": Key("cost", '"40000 EUR"'),
}
REFERENCE: dict[str, Key] = {
    "speed": Key("speed", '"590 rpm"', between=("5 rpm", "6000 rpm")),
    "suction_pressure": Key("pressure", '"10 bar(a)"', between=_PRESSURES),
    "discharge_pressure": Key("pressure", '"30 bar(a)"', between=_PRESSURES),
    "suction_temperature": Key("temperature", '"25 degC"', between=_TEMPERATURES),
}

TABLES: dict[str, dict[str, Key]] = {
    "[machine]": MACHINE,
    "[gas]": GAS,
    "[[stage]]": STAGE,
    "[[cylinder]]": CYLINDER,
    "[cylinder.head_end] or [cylinder.crank_end]": END,
    "suction_valves or discharge_valves": VALVES,
    "[[load_step]]": LOAD_STEP,
    "head_end or crank_end of a [[load_step]]": LOAD_STEP_END,
    "[uncertainty]": UNCERTAINTY,
    "[limits]": LIMITS,
    "[costs]": COSTS,
    "[reference]": REFERENCE,
}
# The tables at the top of the file; True where there may be several, in double brackets.
TOP_TABLES: dict[str, bool] = {
    "machine": False,
    "gas": False,
    "stage": True,
    "cylinder": True,
    "load_step": True,
    "uncertainty": False,
    "limits": False,
    "costs": False,
    "reference": False,
}

# Units to try where a number is implausible in the unit it was given: the likely slip.
LIKELY_UNITS: dict[str, tuple[str, ...]] = {
    "length": ("mm", "in", "cm", "m", "ft"),
    "area": ("cm2", "mm2", "in2", "m2"),
    "mass": ("kg", "g", "lb"),
    "speed": ("rpm", "1/s"),
    "power": ("kW", "W", "hp", "MW"),
    "force": ("kN", "N", "lbf"),
    "pressure": ("bar(a)", "mbar(a)", "kPa(a)", "MPa(a)", "psi(a)", "Pa(a)"),
    "temperature": ("degC", "K", "degF"),
    "mass_flow": ("kg/h", "lb/h", "kg/s"),
    "moment_of_inertia": ("kg m2",),
    "spring_rate": ("N/mm", "N/m"),
    "velocity": ("m/s",),
    "molar_mass": ("g/mol", "kg/kmol"),
    "angle": ("deg", "rad"),
}
