"""Units for people: how tables and pages show columns whose unit is fixed by their name."""

from __future__ import annotations

from typing import Any, NamedTuple

from scipy import constants as const

from pvcard.errors import InputError


class DisplayUnit(NamedTuple):
    """How a column of `contract` units is shown: shown = offset + scale * value."""

    label: str
    scale: float
    offset: float
    note: str

    def value(self, number: Any) -> Any:
        """Shown value of a number or array in the column's own unit."""
        return self.offset + self.scale * number

    def uncertainty(self, number: Any) -> Any:
        """Shown standard uncertainty: the scale without the offset."""
        return self.scale * number


US_BASE_PRESSURE = 14.696 * const.psi  # Pa
US_BASE_TEMPERATURE = const.zero_Celsius + (60.0 - 32.0) * 5.0 / 9.0  # K

_US_LABELS: dict[str, tuple[str, float]] = {
    "K": ("degF", 1.8),
    "kW": ("hp", 1e3 / const.hp),
    "kJ": ("ft lbf", 1e3 / (const.foot * const.lbf)),
    "kg/h": ("lb/h", 1.0 / const.lb),
    "kg/s": ("lb/s", 1.0 / const.lb),
    "kg": ("lb", 1.0 / const.lb),
    "cm2": ("in2", 1e-4 / const.inch**2),
    "mm2": ("in2", 1e-6 / const.inch**2),
    "mm": ("in", 1e-3 / const.inch),
    "m": ("ft", 1.0 / const.foot),
    "kN": ("lbf", 1e3 / const.lbf),
    "kNm": ("lbf ft", 1e3 / (const.lbf * const.foot)),
    "m/s": ("ft/s", 1.0 / const.foot),
    "m_s": ("ft/s", 1.0 / const.foot),
    "kg_h": ("lb/h", 1.0 / const.lb),
}


def display_unit(
    unit: str,
    system: str = "si",
    *,
    difference: bool = False,
    base_pressure: float = const.atm,
    base_temperature: float = 288.15,
) -> DisplayUnit:
    """How to show a column whose unit is `unit` in a system of units.

    Parameters
    ----------
    unit : as in the column names, "bar", "degC", "K", "kW", "m3/h", "kWh/1000 m3", "pct" ...
    system : "si" (as it is) or "us"
    difference : True for a bar that is a difference or a mean effective pressure: psi, not psia
    base_pressure : of standard flow [Pa]
    base_temperature : of standard flow [K]

    Returns
    -------
    display : label, scale and offset; a unit without a customary counterpart is shown as it is

    Notes
    -----
    Standard flow goes to MMscfd at 14.696 psia and 60 degF with the ideal-gas ratio of the two base
    states, ``(p_b / p_us) (T_us / T_b)``. The ratio of the compressibilities at the two states is
    left out: 0.05 % for methane from 0 degC, nothing where the base states agree.

    Examples
    --------
    >>> display_unit("degC", "us").value(100.0)
    212.0
    """
    if system not in ("si", "us"):
        raise InputError("unknown system of units", found=repr(system), expected='"si" or "us"')
    label = {"pct": "%", "m3_h": "m3/h", "kg_h": "kg/h", "m_s": "m/s"}.get(unit, unit)
    if system == "si":
        return DisplayUnit(label, 1.0, 0.0, "")
    if unit == "bar":
        return DisplayUnit("psi" if difference else "psia", const.bar / const.psi, 0.0, "")
    if unit == "degC":
        return DisplayUnit("degF", 1.8, 32.0, "")
    volume_ratio = (base_pressure / US_BASE_PRESSURE) * (US_BASE_TEMPERATURE / base_temperature)
    million_feet_a_day = 24.0 / (1e6 * const.foot**3) * volume_ratio
    note = "MMscfd at 14.696 psia and 60 degF, ideal-gas ratio of the base states"
    if unit in ("m3/h", "m3_h"):
        return DisplayUnit("MMscfd", million_feet_a_day, 0.0, note)
    if unit in ("kWh/1000 m3", "kWh_per_1000_m3"):
        return DisplayUnit("hp/MMscfd", 1.0 / const.hp / million_feet_a_day, 0.0, note)
    if unit in _US_LABELS:
        return DisplayUnit(*_US_LABELS[unit], 0.0, "")
    return DisplayUnit(label, 1.0, 0.0, "")
