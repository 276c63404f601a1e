"""The usual units as plain numbers: what `units.py` looks up before it asks pint.

Each table maps a spelling, written without blanks, dots and multiplication signs, to the size of
that unit in SI. Every number is built from the exact definitions of scipy.constants (CODATA, NIST
SP 811), or stands here once with its source.
"""

from __future__ import annotations

from typing import NamedTuple

from scipy import constants as const

POUND_FORCE = const.lbf  # N, lb times standard gravity
TECHNICAL_ATMOSPHERE = const.kgf / const.centi**2  # Pa, 98066.5: one kilogram-force per cm2
# Conventional columns at standard gravity (NIST SP 811, appendix B.8): mercury of 13 595.1 kg/m3,
# water of 1000 kg/m3.
MERCURY_MILLIMETRE = 13595.1 * const.g * const.milli  # Pa
WATER_MILLIMETRE = 1000.0 * const.g * const.milli  # Pa
FOOT_POUND = const.foot * const.lbf  # J
METRIC_HORSEPOWER = 75.0 * const.kgf  # W, 75 kgf m/s (NIST SP 811, appendix B.8)
LITRE = const.liter
CUBIC_FOOT = const.foot**3
CUBIC_INCH = const.inch**3


class Dimension(NamedTuple):
    """What is known of one kind of quantity."""

    article: str  # for messages: "a length"
    example: str  # what to write
    pint_unit: str  # SI unit for the fallback; empty where only the table counts
    units: dict[str, float]  # SI per unit


_TIMES = {
    "s": 1.0,
    "ms": 1e-3,
    "us": 1e-6,
    "µs": 1e-6,
    "min": const.minute,
    "h": const.hour,
    "hr": const.hour,
    "d": const.day,
    "day": const.day,
    "days": const.day,
    "sec": 1.0,
    "seconds": 1.0,
    "hours": const.hour,
}
_LENGTHS = {
    "m": 1.0,
    "mm": 1e-3,
    "cm": 1e-2,
    "dm": 0.1,
    "km": 1e3,
    "um": 1e-6,
    "µm": 1e-6,
    "in": const.inch,
    "inch": const.inch,
    "inches": const.inch,
    '"': const.inch,
    "″": const.inch,
    "ft": const.foot,
    "foot": const.foot,
    "feet": const.foot,
    "mil": const.mil,
    "thou": const.mil,
}
_AREAS = {
    "m2": 1.0,
    "dm2": 1e-2,
    "cm2": 1e-4,
    "mm2": 1e-6,
    "in2": const.inch**2,
    "sqin": const.inch**2,
    "ft2": const.foot**2,
    "sqft": const.foot**2,
}
_VOLUMES = {
    "m3": 1.0,
    "dm3": LITRE,
    "l": LITRE,
    "L": LITRE,
    "litre": LITRE,
    "liter": LITRE,
    "ml": 1e-6,
    "mL": 1e-6,
    "cm3": 1e-6,
    "cc": 1e-6,
    "mm3": 1e-9,
    "in3": CUBIC_INCH,
    "cuin": CUBIC_INCH,
    "ft3": CUBIC_FOOT,
    "cuft": CUBIC_FOOT,
}
_MASSES = {
    "kg": 1.0,
    "g": 1e-3,
    "mg": 1e-6,
    "t": 1e3,
    "lb": const.lb,
    "lbs": const.lb,
    "lbm": const.lb,
    "oz": const.oz,
    "slug": const.slug,
}
_FORCES = {
    "N": 1.0,
    "kN": 1e3,
    "MN": 1e6,
    "lbf": POUND_FORCE,
    "klbf": 1e3 * POUND_FORCE,
    "kip": 1e3 * POUND_FORCE,
    "kgf": const.kgf,
    "kp": const.kgf,
    "tf": 1e3 * const.kgf,
}
_ANGLES = {
    "deg": 1.0,
    "°": 1.0,
    "degree": 1.0,
    "degrees": 1.0,
    "degCA": 1.0,
    "°CA": 1.0,
    "rad": 180.0 / const.pi,
    "mrad": 0.18 / const.pi,
    "rev": 360.0,
    "turn": 360.0,
    "turns": 360.0,
}
_SPEEDS = {
    "rpm": 1.0 / 60.0,
    "r/min": 1.0 / 60.0,
    "rev/min": 1.0 / 60.0,
    "1/min": 1.0 / 60.0,
    "min-1": 1.0 / 60.0,
    "U/min": 1.0 / 60.0,
    "tr/min": 1.0 / 60.0,
    "Hz": 1.0,
    "1/s": 1.0,
    "s-1": 1.0,
    "rps": 1.0,
    "rev/s": 1.0,
    "r/s": 1.0,
    "rad/s": 0.5 / const.pi,
    "deg/s": 1.0 / 360.0,
}
_PRESSURES = {
    "Pa": 1.0,
    "hPa": 1e2,
    "kPa": 1e3,
    "MPa": 1e6,
    "bar": const.bar,
    "mbar": 1e-3 * const.bar,
    "psi": const.psi,
    "ksi": 1e3 * const.psi,
    "lbf/in2": const.psi,
    "lb/in2": const.psi,
    "atm": const.atm,
    "at": TECHNICAL_ATMOSPHERE,
    "kg/cm2": TECHNICAL_ATMOSPHERE,
    "kgf/cm2": TECHNICAL_ATMOSPHERE,
    "kg(f)/cm2": TECHNICAL_ATMOSPHERE,
    "kp/cm2": TECHNICAL_ATMOSPHERE,
    "N/mm2": 1e6,
    "N/cm2": 1e4,
    "N/m2": 1.0,
    "Torr": const.torr,
    "mmHg": MERCURY_MILLIMETRE,
    "inHg": 25.4 * MERCURY_MILLIMETRE,
    "mmH2O": WATER_MILLIMETRE,
    "inH2O": 25.4 * WATER_MILLIMETRE,
    "inWC": 25.4 * WATER_MILLIMETRE,
    "inWG": 25.4 * WATER_MILLIMETRE,
}
_POWERS = {
    "W": 1.0,
    "kW": 1e3,
    "MW": 1e6,
    "hp": const.hp,
    "bhp": const.hp,
    "PS": METRIC_HORSEPOWER,
    "CV": METRIC_HORSEPOWER,
    "hp(M)": METRIC_HORSEPOWER,
    "Btu/h": const.Btu / const.hour,
}
_ENERGIES = {
    "J": 1.0,
    "kJ": 1e3,
    "MJ": 1e6,
    "GJ": 1e9,
    "Wh": const.hour,
    "kWh": 1e3 * const.hour,
    "MWh": 1e6 * const.hour,
    "hph": const.hp * const.hour,
    "Btu": const.Btu,
    "MMBtu": 1e6 * const.Btu,
    "ftlbf": FOOT_POUND,
}
_INERTIAS = {
    "kgm2": 1.0,
    "kgcm2": 1e-4,
    "lbft2": const.lb * const.foot**2,
    "lbmft2": const.lb * const.foot**2,
    "lbin2": const.lb * const.inch**2,
    "lbfts2": const.lbf * const.foot,
    "lbffts2": const.lbf * const.foot,
    "lbfins2": const.lbf * const.inch,
    "slugft2": const.slug * const.foot**2,
}
_SPRING_RATES = {
    "N/m": 1.0,
    "N/cm": 1e2,
    "N/mm": 1e3,
    "kN/m": 1e3,
    "kN/mm": 1e6,
    "lbf/in": const.lbf / const.inch,
    "lbf/ft": const.lbf / const.foot,
    "kgf/mm": const.kgf * 1e3,
}
_DAMPINGS = {
    "Ns/m": 1.0,
    "kg/s": 1.0,
    "Ns/mm": 1e3,
    "lbfs/in": const.lbf / const.inch,
    "lbfs/ft": const.lbf / const.foot,
}
_VELOCITIES = {
    "m/s": 1.0,
    "ms-1": 1.0,
    "mm/s": 1e-3,
    "cm/s": 1e-2,
    "km/h": const.kmh,
    "ft/s": const.foot,
    "ft/min": const.foot / const.minute,
    "in/s": const.inch,
}
_TEMPERATURE_DIFFERENCES = {
    "K": 1.0,
    "degC": 1.0,
    "°C": 1.0,
    "C": 1.0,
    "degF": 5.0 / 9.0,
    "°F": 5.0 / 9.0,
    "F": 5.0 / 9.0,
    "degR": 5.0 / 9.0,
    "°R": 5.0 / 9.0,
}
_POINTS = dict.fromkeys(
    (
        *("points", "point", "pointsof%", "percentagepoints", "percentagepoint"),
        *("%-points", "%points", "%-point", "pts", "pp"),
    ),
    0.01,
)


def _flows(amounts: dict[str, float]) -> dict[str, float]:
    times = {"s": 1.0, "min": const.minute, "h": const.hour, "hr": const.hour, "d": const.day}
    return {f"{a}/{t}": amounts[a] / times[t] for a in amounts for t in times}


# Kelvin at zero of each thermometer; K = zero + size * reading.
TEMPERATURE_ZEROS = {
    **dict.fromkeys(("degC", "°C", "C", "oC", "Celsius"), const.zero_Celsius),
    **dict.fromkeys(("degF", "°F", "F", "oF", "Fahrenheit"), const.zero_Celsius - 160.0 / 9.0),
    **dict.fromkeys(("K", "kelvin", "degR", "°R", "R", "Rankine"), 0.0),
}
_TEMPERATURES = {
    **dict.fromkeys(("degC", "°C", "C", "oC", "Celsius", "K", "kelvin"), 1.0),
    **dict.fromkeys(("degF", "°F", "F", "oF", "Fahrenheit", "degR", "°R", "R", "Rankine"), 5 / 9),
}

DIMENSIONS: dict[str, Dimension] = {
    "time": Dimension("a time", "0.5 s", "second", _TIMES),
    "length": Dimension("a length", "280 mm", "meter", _LENGTHS),
    "area": Dimension("an area", "14 cm2", "meter**2", _AREAS),
    "volume": Dimension("a volume", "2.5 L", "meter**3", _VOLUMES),
    "mass": Dimension("a mass", "180 kg", "kilogram", _MASSES),
    "force": Dimension("a force", "150 kN", "newton", _FORCES),
    "angle": Dimension("an angle", "0.5 deg", "", _ANGLES),
    "speed": Dimension("a speed of rotation", "590 rpm", "", _SPEEDS),
    "pressure": Dimension("a pressure", "10 bar(a)", "pascal", _PRESSURES),
    "pressure_difference": Dimension("a pressure difference", "0.2 bar", "pascal", _PRESSURES),
    "temperature": Dimension("a temperature", "40 degC", "", _TEMPERATURES),
    "temperature_difference": Dimension(
        "a temperature difference", "1 K", "", _TEMPERATURE_DIFFERENCES
    ),
    "power": Dimension("a power", "900 kW", "watt", _POWERS),
    "energy": Dimension("an energy", "1 kWh", "joule", _ENERGIES),
    "moment_of_inertia": Dimension(
        "a moment of inertia", "120 kg m2", "kilogram*meter**2", _INERTIAS
    ),
    "mass_flow": Dimension(
        "a mass flow",
        "500 kg/h",
        "kilogram/second",
        _flows({k: _MASSES[k] for k in ("kg", "g", "t", "lb", "lbm")}),
    ),
    "volume_flow": Dimension(
        "a volume flow",
        "500 m3/h",
        "meter**3/second",
        _flows({k: _VOLUMES[k] for k in ("m3", "dm3", "l", "L", "ft3", "cuft")})
        | {"cfm": CUBIC_FOOT / const.minute},
    ),
    "spring_rate": Dimension("a spring rate", "4 N/mm", "newton/meter", _SPRING_RATES),
    "damping": Dimension("a damping", "5 N s/m", "newton*second/meter", _DAMPINGS),
    "velocity": Dimension("a velocity", "4 m/s", "meter/second", _VELOCITIES),
    "fraction": Dimension(
        "a fraction", "15 %", "", {"%": 0.01, "percent": 0.01, "pct": 0.01, "‰": 1e-3, "ppm": 1e-6}
    ),
    "points": Dimension("points of %", "2 points", "", _POINTS),
    "molar_mass": Dimension(
        "a molar mass",
        "17.2 g/mol",
        "kilogram/mole",
        {"g/mol": 1e-3, "kg/kmol": 1e-3, "kg/mol": 1.0, "lb/lbmol": 1e-3, "lbm/lbmol": 1e-3},
    ),
}

# What people write for something else: (dimension, spelling) -> what to write instead.
SLIPS: dict[tuple[str, str], str] = {
    ("force", "lb"): 'a pound is a mass; for a force write "lbf"',
    ("force", "lbs"): 'a pound is a mass; for a force write "lbf"',
    ("force", "kg"): 'a kilogram is a mass; for a force write "kN", "N" or "kgf"',
    ("force", "t"): 'a tonne is a mass; for a force write "kN" or "tf"',
    ("spring_rate", "lb/in"): 'for a spring rate write "lbf/in"',
    ("points", "%"): 'a per cent of what? For points of per cent write for example "2 points"',
    ("fraction", "points"): 'write a share in per cent, for example "2 %"',
    ("speed", "m/s"): 'this is a speed of rotation, for example "590 rpm"',
}
