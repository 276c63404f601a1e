"""Every property of a gas from one function: the reduced Gibbs energy in ln p and ln T.

With ``x = ln(p / Pa)``, ``t = ln(T / K)`` and ``F(x, t) = g / (R T) - x`` (g and R of one kilogram)
the identities of thermodynamics leave nothing to choose [1]_::

    Z = 1 + F_x        h = - R T F_t        s = - R (F_t + F + x)        cp = - R (F_t + F_tt)

so that a polynomial for F, or an equation of state that hands over these six numbers, gives all
properties and all their slopes, and they agree with one another exactly.

References
----------
.. [1] R. Span, *Multiparameter Equations of State*, Springer 2000, chapter 3: properties from a
   fundamental equation; here with the Gibbs energy in the place of the Helmholtz energy.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.types import Floats

# The molar gas constant of GERG-2008. SOURCE: Kunz and Wagner, J. Chem. Eng. Data 57 (2012)
# 3032-3091.
MOLAR_GAS_CONSTANT = 8.314472  # J/(mol K)


def logarithm(value: Floats) -> Floats:
    """Return the natural logarithm, without a warning where a reading is zero or negative."""
    with np.errstate(divide="ignore", invalid="ignore"):
        result: Floats = np.log(value)
    return result


class Gibbs(NamedTuple):
    """Reduced Gibbs energy ``F`` at some states with its slopes by ``x = ln p`` and ``t = ln
    T``."""

    value: Floats
    by_x: Floats
    by_t: Floats
    by_xx: Floats
    by_xt: Floats
    by_tt: Floats


def gibbs_from_density_slopes(
    gibbs_energy: Floats,
    compressibility: Floats,
    enthalpy: Floats,
    heat_capacity: Floats,
    density_slope: Floats,
    thermal_slope: Floats,
) -> Gibbs:
    """Collect the six numbers from what an equation of state in density and temperature gives.

    Parameters
    ----------
    gibbs_energy, enthalpy : any shape
        ``g / (R T) - ln p`` and ``h / (R T)``. [-]
    compressibility, heat_capacity : same shape
        ``Z`` and ``cp / R``. [-]
    density_slope, thermal_slope : same shape
        ``(rho / p) (dp/drho)_T`` and ``(T / p) (dp/dT)_rho``. [-]

    Returns
    -------
    Gibbs
        Of the same shape.
    """
    ln_density_by_x = 1 / density_slope
    ln_density_by_t = -thermal_slope / density_slope
    return Gibbs(
        gibbs_energy,
        compressibility - 1,
        -enthalpy,
        compressibility * (1 - ln_density_by_x),
        compressibility * (-1 - ln_density_by_t),
        enthalpy - heat_capacity,
    )


def compressibility(gibbs: Gibbs) -> Floats:
    """Return ``Z = p / (rho R T)``. [-]."""
    result: Floats = 1 + gibbs.by_x
    return result


def ln_density_slopes(gibbs: Gibbs) -> tuple[Floats, Floats]:
    """Return the slopes of ``ln rho`` by ``ln p`` at constant T and by ``ln T`` at constant p.
    [-]."""
    z = 1 + gibbs.by_x
    return 1 - gibbs.by_xx / z, -1 - gibbs.by_xt / z


def heat_capacity(gibbs: Gibbs) -> Floats:
    """Return ``cp / R``. [-]."""
    result: Floats = -(gibbs.by_t + gibbs.by_tt)
    return result


def heat_capacity_ratio(gibbs: Gibbs) -> Floats:
    """Return ``cp / cv``, the slope ``ln p - ln rho`` of the isentrope over that of the isotherm.
    [-]."""
    result: Floats = volume_exponent(gibbs) * ln_density_slopes(gibbs)[0]
    return result


def isentropic_slope(gibbs: Gibbs) -> Floats:
    """Return ``d ln T / d ln p`` at constant entropy, ``(Z + T dZ/dT) R / cp``. [-]."""
    result: Floats = (1 + gibbs.by_x + gibbs.by_xt) / heat_capacity(gibbs)
    return result


def volume_exponent(gibbs: Gibbs) -> Floats:
    """Return ``d ln p / d ln rho`` at constant entropy, equal to ``rho w^2 / p``. [-]."""
    by_x, by_t = ln_density_slopes(gibbs)
    result: Floats = 1 / (by_x + by_t * isentropic_slope(gibbs))
    return result


def temperature_exponent(gibbs: Gibbs) -> Floats:
    """Return ``1 / (1 - d ln T / d ln p)`` at constant entropy. [-]."""
    result: Floats = 1 / (1 - isentropic_slope(gibbs))
    return result


def entropy(gibbs: Gibbs, ln_pressure: Floats) -> Floats:
    """Return ``s / R``. [-]."""
    result: Floats = -(gibbs.by_t + gibbs.value + ln_pressure)
    return result


def speed_of_sound(gibbs: Gibbs, gas_constant: float, temperature: Floats) -> Floats:
    """Speed of sound, ``sqrt(k_v Z R T)``.

    Parameters
    ----------
    gibbs, temperature, gas_constant
        Reduced Gibbs energy there, any shape; [K]; of one kilogram [J/(kg K)].

    Returns
    -------
    speed : same shape
        [m/s]
    """
    square = volume_exponent(gibbs) * compressibility(gibbs) * gas_constant * temperature
    result: Floats = np.sqrt(square)
    return result
