"""Factors and labels of plot axes in either system of units."""

from __future__ import annotations

from typing import NamedTuple

from scipy import constants as const


class Scales(NamedTuple):
    """From SI (power: kW) to the unit of an axis."""

    pressure: float
    pressure_label: str
    volume: float
    volume_label: str
    power: float
    power_label: str


_SI = Scales(1e-5, "bar absolute", 1e3, "L", 1.0, "kW")
_US = Scales(
    1 / const.psi, "psia", 1 / const.inch**3, "in\N{SUPERSCRIPT THREE}", 1e3 / const.hp, "hp"
)


def scales_of(units: str) -> Scales:
    """Axes of a system of units.

    Parameters
    ----------
    units : "si" or "us"

    Returns
    -------
    Scales
    """
    return _US if units == "us" else _SI
