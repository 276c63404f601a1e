"""Units: every spelling users type, checked against pint, scipy.constants and the definitions."""

from __future__ import annotations

import contextlib
import math
import subprocess
import sys
import time
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy import constants

from pvcard.errors import ExportError, InputError
from pvcard.unit_tables import DIMENSIONS
from pvcard.units import (
    Reference,
    display_unit,
    parse_pressure,
    parse_pressure_unit,
    parse_quantity,
    parse_unit,
    split_quantity,
)


@pytest.fixture(scope="module")
def registry() -> Any:
    import pint

    return pint.UnitRegistry()


# --- quantities -----------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "dimension", "expected"),
    [  # SOURCE: international inch, pound and standard gravity, exact; the rest SI prefixes
        ("280 mm", "length", 0.280),
        ("280mm", "length", 0.280),
        ("  280   mm ", "length", 0.280),
        ("2,8 cm", "length", 0.028),
        ("9.84 in", "length", 9.84 * 0.0254),
        ('9.84"', "length", 9.84 * 0.0254),
        ("2.8e2 mm", "length", 0.280),
        (".5 m", "length", 0.5),
        ("14 cm2", "area", 14e-4),
        ("14 cm²", "area", 14e-4),
        ("14 cm^2", "area", 14e-4),
        ("14 cm**2", "area", 14e-4),
        ("2 sq in", "area", 2 * 0.0254**2),
        ("2.5 L", "volume", 2.5e-3),
        ("10 in3", "volume", 10 * 0.0254**3),
        ("180 kg", "mass", 180.0),
        ("100 lb", "mass", 45.359237),
        ("0.5 deg", "angle", 0.5),
        ("0.5°", "angle", 0.5),
        ("3.141592653589793 rad", "angle", 180.0),
        ("590 rpm", "speed", 590 / 60),
        ("590 1/min", "speed", 590 / 60),
        ("590 min-1", "speed", 590 / 60),
        ("590 min⁻¹", "speed", 590 / 60),
        ("10 Hz", "speed", 10.0),
        ("10 1/s", "speed", 10.0),
        ("6.283185307179586 rad/s", "speed", 1.0),
        ("25 degC", "temperature", 298.15),
        ("25 °C", "temperature", 298.15),
        ("25 ℃", "temperature", 298.15),
        ("−40 degF", "temperature", 233.15),
        ("298.15 K", "temperature", 298.15),
        ("491.67 degR", "temperature", 273.15),
        ("1 K", "temperature_difference", 1.0),
        ("1 degC", "temperature_difference", 1.0),
        ("1.8 degF", "temperature_difference", 1.0),
        ("900 kW", "power", 9e5),
        ("1 hp", "power", 550 * 0.3048 * 0.45359237 * 9.80665),
        ("1 PS", "power", 75 * 9.80665),
        ("150 kN", "force", 150e3),
        ("1000 lbf", "force", 453.59237 * 9.80665),
        ("1 kgf", "force", 9.80665),
        ("120 kg m2", "moment_of_inertia", 120.0),
        ("120 kg·m²", "moment_of_inertia", 120.0),
        ("120 kg*m^2", "moment_of_inertia", 120.0),
        ("1 lb ft2", "moment_of_inertia", 0.45359237 * 0.3048**2),
        ("500 kg/h", "mass_flow", 500 / 3600),
        ("1 lb/min", "mass_flow", 0.45359237 / 60),
        ("3600 m3/h", "volume_flow", 1.0),
        ("4 N/mm", "spring_rate", 4000.0),
        ("5 N s/m", "damping", 5.0),
        ("5 N*s/m", "damping", 5.0),
        ("4 m/s", "velocity", 4.0),
        ("10 ft/s", "velocity", 3.048),
        ("15 %", "fraction", 0.15),
        ("15%", "fraction", 0.15),
        ("2 points", "points", 0.02),
        ("0.5 points of %", "points", 0.005),
        ("1 percentage point", "points", 0.01),
        ("17.2 g/mol", "molar_mass", 0.0172),
        ("17.2 kg/kmol", "molar_mass", 0.0172),
        ("0.2 bar", "pressure_difference", 2e4),
        ("1 kWh", "energy", 3.6e6),
        ("20 ms", "time", 0.02),
        ("10 bar(a)", "pressure", 1e6),
        ("101.325 kPa", "pressure", 101325.0),
    ],
)
def test_quantity_in_si(text: str, dimension: str, expected: float) -> None:
    assert_allclose(parse_quantity(text, dimension), expected, rtol=1e-12)


def test_static_table_agrees_with_pint(registry: Any) -> None:
    """Every unit that pint spells alike has the same size."""
    # SOURCE: pint 0.23 and later, its own definitions
    targets = {name: kind.pint_unit for name, kind in DIMENSIONS.items() if kind.pint_unit}
    compared = 0
    for dimension, target in targets.items():
        for spelling, size in DIMENSIONS[dimension].units.items():
            if not spelling.replace("/", "").isalpha():
                continue
            try:
                theirs = registry.Quantity(1.0, spelling).to(target).magnitude
            except Exception:  # pint does not know this spelling
                continue
            assert_allclose(size, theirs, rtol=2e-5, err_msg=f"{dimension}: {spelling}")
            compared += 1
    assert compared > 80


@pytest.mark.parametrize(
    ("text", "dimension", "unit", "target"),
    [
        ("3 yard", "length", "yard", "meter"),
        ("3 furlong", "length", "furlong", "meter"),
        ("5 dyn", "force", "dyne", "newton"),
        ("5 mW", "power", "milliwatt", "watt"),
        ("3 yd2", "area", "yard**2", "meter**2"),
        ("3 kg dm2", "moment_of_inertia", "kilogram*decimeter**2", "kilogram*meter**2"),
        ("3 dyn/cm2", "pressure", "dyne/centimeter**2", "pascal"),
    ],
)
def test_other_units_go_to_pint(
    registry: Any, text: str, dimension: str, unit: str, target: str
) -> None:
    number = float(text.split()[0])
    expected = registry.Quantity(number, unit).to(target).magnitude  # SOURCE: pint
    assert_allclose(parse_quantity(text, dimension), expected, rtol=1e-12)


@given(st.floats(-1e9, 1e9), st.sampled_from(["mm", "in", "ft", "µm", "m"]))
def test_any_number_survives(number: float, unit: str) -> None:
    size = parse_unit(unit, "length").size
    assert_allclose(parse_quantity(f"{number!r} {unit}", "length"), number * size, rtol=1e-12)


@given(st.text(max_size=20), st.sampled_from(sorted(DIMENSIONS)))
def test_any_text_gives_a_number_or_an_input_error(text: str, dimension: str) -> None:
    with contextlib.suppress(InputError):
        assert math.isfinite(parse_quantity(text, dimension))


@pytest.mark.parametrize("spelling", ["KW", "kw", "Kw", "KWH", "Mm"])
def test_capitals_are_forgiven_but_never_between_milli_and_mega(spelling: str) -> None:
    # TRUTH: kilo whatever the capitals; "Mm" is a megametre, not a millimetre
    dimension = {"KWH": "energy", "Mm": "length"}.get(spelling, "power")
    expected = {"KWH": 3.6e6, "Mm": 1e6}.get(spelling, 1e3)
    assert_allclose(parse_quantity(f"1 {spelling}", dimension), expected)


# --- quantities that cannot be read -------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "dimension", "fragments"),
    [
        (280, "length", ["bare number", "found 280", '"280 mm"']),
        (0.28, "length", ["bare number", '"0.28 mm" if it is in mm']),
        ("280", "length", ["bare number", '"280 mm"']),
        ("0.15", "fraction", ["bare number", "%"]),
        (None, "length", ["not a length", "none"]),
        (True, "length", ["not a length", "true"]),
        ("", "length", ["not a length", '"280 mm"']),
        ("mm", "length", ["not a length"]),
        ("nan mm", "length", ["not a length"]),
        ("1e999 mm", "length", ["too large"]),
        ("280 mn", "length", ["unknown unit", "'mn'", 'Did you mean "mm"']),
        ("280 kg", "length", ["unit of a mass, not of a length"]),
        ("5 lb", "force", ["a mass", 'write "lbf"']),
        ("2 %", "points", ["unit of a fraction", '"2 points"']),
        ("2 points", "fraction", ["points of %, not of a fraction", "per cent"]),
        ("1,500 rpm", "speed", ["more than one way", "thousands"]),
        ("1 500 rpm", "speed", ["more than one way"]),
        ("1.234,5 mm", "length", ["more than one way"]),
        ("1,234.5 mm", "length", ["more than one way"]),
        ("-300 degC", "temperature", ["below absolute zero", "'-300 degC'"]),
        ("5 bar(a)", "pressure_difference", ["no reference", "Leave out"]),
        ("9 bar(g)", "pressure", ["needs the barometric pressure", "'9 bar(g)'"]),
        ("-1 bar(a)", "pressure", ["below vacuum", "gauge pressure? Then write (g)"]),
        ("5 psid", "pressure", ["pressure difference", "psi(g)"]),
        ("5 bor", "pressure", ["unknown unit", 'Did you mean "bar"']),
        ("3 m9**9**9", "length", ["unknown unit"]),
        ("3 " + "m*" * 100, "length", ["unknown unit"]),
    ],
)
def test_message(text: object, dimension: str, fragments: list[str]) -> None:
    with pytest.raises(ExportError) as caught:
        parse_quantity(text, dimension, file="x.csv", place="line 3", error=ExportError)
    message = str(caught.value)
    assert message.startswith("x.csv: line 3: ")
    for fragment in fragments:
        assert fragment in message, message


def test_decimal_mark_of_the_file_settles_the_comma() -> None:
    # TRUTH: the same digits with either mark
    assert_allclose(parse_quantity("1,013 bar", "pressure", decimal=","), 101300.0)
    assert_allclose(parse_quantity("1.013 bar", "pressure", decimal="."), 101300.0)
    assert_allclose(parse_quantity("0,125 mm", "length"), 125e-6)
    with pytest.raises(InputError, match="more than one way"):
        parse_quantity("1,0 bar", "pressure", decimal=".")


def test_split_keeps_the_unit_as_typed() -> None:
    assert split_quantity("9,8 kg / cm2 g", "pressure") == (9.8, "kg / cm2 g")


# --- pressures -----------------------------------------------------------------

PASCALS = {  # SOURCE: NIST SP 811 (2008), appendix B.8
    "Pa": 1.0,
    "kPa": 1e3,
    "MPa": 1e6,
    "bar": 1e5,
    "mbar": 100.0,
    "psi": 6894.757,
    "atm": 101325.0,
    "at": 98066.5,
    "kg/cm2": 98066.5,
    "kgf/cm2": 98066.5,
    "inHg": 3386.389,
    "mmHg": 133.3224,
    "inH2O": 249.0889,
}
SUFFIXES: list[tuple[str, Reference]] = [
    ("", "unknown"),
    ("(a)", "absolute"),
    ("(g)", "gauge"),
    (" (a)", "absolute"),
    (" ( g )", "gauge"),
    ("a", "absolute"),
    ("g", "gauge"),
    (" a", "absolute"),
    (" g", "gauge"),
    ("(abs)", "absolute"),
    (" abs", "absolute"),
    (" abs.", "absolute"),
    (" absolute", "absolute"),
    (" gauge", "gauge"),
    (" gage", "gauge"),
    ("_g", "gauge"),
    ("[a]", "absolute"),
]


@pytest.mark.parametrize(("suffix", "reference"), SUFFIXES)
@pytest.mark.parametrize("unit", sorted(PASCALS))
def test_pressure_unit(unit: str, suffix: str, reference: Reference) -> None:
    for spelling in (unit + suffix, (unit + suffix).lower(), (unit + suffix).upper()):
        found = parse_pressure_unit(spelling)
        assert found.reference == reference, spelling
        assert_allclose(found.pascal_per_unit, PASCALS[unit], rtol=2e-7, err_msg=spelling)


@pytest.mark.parametrize(
    ("spelling", "pascal", "reference"),
    [  # SOURCE: as above
        ("barg", 1e5, "gauge"),
        ("bara", 1e5, "absolute"),
        ("psig", 6894.757, "gauge"),
        ("PSIA", 6894.757, "absolute"),
        ("kPag", 1e3, "gauge"),
        ("ata", 98066.5, "absolute"),
        ("atg", 98066.5, "gauge"),
        ("kg/cm²", 98066.5, "unknown"),
        ("kg/cm²(g)", 98066.5, "gauge"),
        ("kg/cm^2 g", 98066.5, "gauge"),
        ("kgf/cm2g", 98066.5, "gauge"),
        ("kp/cm2", 98066.5, "unknown"),
        ("in. Hg", 3386.389, "unknown"),
        ("in H₂O", 249.0889, "unknown"),
        ("mm Hg (a)", 133.3224, "absolute"),
        ("lbf/in2", 6894.757, "unknown"),
        ("N/mm2", 1e6, "unknown"),
        ("hPa", 100.0, "unknown"),
    ],
)
def test_spellings_of_pressure(spelling: str, pascal: float, reference: str) -> None:
    found = parse_pressure_unit(spelling)
    assert found.reference == reference
    assert_allclose(found.pascal_per_unit, pascal, rtol=2e-7)


def test_columns_of_mercury_and_water_agree_with_pint(registry: Any) -> None:
    for unit, count, theirs in (("mmHg", 1, "mmHg"), ("inHg", 1, "inHg"), ("inH2O", 2.54, "cmH2O")):
        size = registry.Quantity(count, theirs).to("pascal").magnitude  # SOURCE: pint
        assert_allclose(parse_pressure_unit(unit).pascal_per_unit, size, rtol=1e-4)


def test_gauge_pressure_adds_the_barometer() -> None:
    # LAW: absolute is gauge plus barometric
    pressure = parse_pressure("9 bar(g)", barometric_pressure=95000.0)
    assert_allclose(pressure.pascal, 995000.0)
    assert pressure.reference == "gauge"
    assert_allclose(parse_quantity("-0.5 bar(g)", "pressure", barometric_pressure=1e5), 5e4)


def test_bare_unit_is_kept_as_if_absolute_and_said_so() -> None:
    # TRUTH: the number as typed
    pressure = parse_pressure("9 bar", barometric_pressure=95000.0)
    assert (pressure.pascal, pressure.reference) == (9e5, "unknown")


def test_millipascal_is_not_taken_for_megapascal() -> None:
    # SOURCE: SI prefixes
    assert_allclose(parse_pressure_unit("mPa").pascal_per_unit, 1e-3)
    assert_allclose(parse_pressure_unit("Mpa").pascal_per_unit, 1e6)


# --- whole columns -----------------------------------------------------------------


def test_scale_of_a_column() -> None:
    scale = parse_unit("degF", "temperature")
    column = scale.zero + scale.size * np.array([-40.0, 32.0, 212.0])
    assert_allclose(column, [233.15, 273.15, 373.15])  # SOURCE: fixed points of the scale
    assert parse_unit("rad", "angle") == (180 / math.pi, 0.0)
    assert_allclose(parse_unit("psig", "pressure").size, constants.psi)  # SOURCE: scipy.constants


# --- showing -----------------------------------------------------------------


@pytest.mark.parametrize(
    ("unit", "label", "value", "shown"),
    [  # SOURCE: NIST SP 811 (2008), appendix B.8, and fixed points of the thermometers
        ("bar", "psia", 1.01325, 14.69595),
        ("degC", "degF", 100.0, 212.0),
        ("K", "degF", 10.0, 18.0),
        ("kW", "hp", 0.7456999, 1.0),
        ("kJ", "ft lbf", 1.355818e-3, 1.0),
        ("kg/h", "lb/h", 0.45359237, 1.0),
        ("cm2", "in2", 6.4516, 1.0),
        ("mm2", "in2", 645.16, 1.0),
        ("mm", "in", 25.4, 1.0),
        ("kN", "lbf", 4.448222e-3, 1.0),
        ("kNm", "lbf ft", 1.355818e-3, 1.0),
        ("m/s", "ft/s", 0.3048, 1.0),
        ("m_s", "ft/s", 0.3048, 1.0),
        ("deg", "deg", 12.0, 12.0),
        ("pct", "%", 12.0, 12.0),
        ("rpm", "rpm", 590.0, 590.0),
    ],
)
def test_customary_units(unit: str, label: str, value: float, shown: float) -> None:
    display = display_unit(unit, "us")
    assert display.label == label
    assert_allclose(display.value(value), shown, rtol=1e-6)


def test_a_difference_of_pressure_is_psi_and_an_uncertainty_has_no_offset() -> None:
    assert display_unit("bar", "us", difference=True).label == "psi"
    # LAW: the offset of a scale drops out of a difference
    assert_allclose(display_unit("degC", "us").uncertainty(1.0), 1.8)


def test_million_standard_cubic_feet() -> None:
    # SOURCE: 1 ft3 = 0.028316846592 m3; ideal gas, 1.01325 bar 15 degC to 14.696 psia 60 degF
    flow = display_unit("m3/h", "us")
    expected = 1000 * 24 / 0.028316846592 / 1e6 * (101325 / 101325.353) * (288.705556 / 288.15)
    assert flow.label == "MMscfd"
    assert_allclose(flow.value(1000.0), expected, rtol=1e-6)
    normal = display_unit("m3/h", "us", base_temperature=273.15)
    assert_allclose(normal.scale / flow.scale, 288.15 / 273.15)  # LAW: ideal gas


def test_specific_power_follows_power_and_flow() -> None:
    power, flow = display_unit("kW", "us"), display_unit("m3/h", "us")
    specific = display_unit("kWh_per_1000_m3", "us")
    # LAW: 100 kW for 1000 m3/h is 100 kWh per 1000 m3
    assert_allclose(specific.value(100.0), power.value(100.0) / flow.value(1000.0))
    assert specific.label == "hp/MMscfd"


def test_si_is_shown_as_it_is() -> None:
    for unit in ("bar", "degC", "kW", "m3_h", "pct"):
        assert display_unit(unit).value(3.5) == 3.5  # TRUTH: unchanged
    with pytest.raises(InputError, match="unknown system"):
        display_unit("bar", "imperial")


# --- cost -----------------------------------------------------------------


def test_usual_units_do_not_load_pint() -> None:
    code = (
        "import sys\nfrom pvcard.units import DIMENSIONS, parse_quantity\n"
        "for name, kind in DIMENSIONS.items():\n"
        "    parse_quantity(kind.example, name)\n"
        "assert 'pint' not in sys.modules\n"
        "parse_quantity('3 furlong', 'length')\n"
        "assert 'pint' in sys.modules\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    assert done.returncode == 0, done.stderr


def test_a_thousand_quantities_take_little_time() -> None:
    start = time.perf_counter()
    for _ in range(1000):
        parse_quantity("177.015 psi(a)", "pressure")
    assert time.perf_counter() - start < 1.0  # LIMIT: some 15 ms on an ordinary computer
