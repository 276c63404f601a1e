"""Heat between gas and wall of a cylinder by published correlations.

All lead to a heat transfer coefficient in W/(m2 K). They were found for other machines (engines,
small refrigeration and air compressors) and scatter by a factor of two; whoever uses them keeps a
free multiplier.
"""

from __future__ import annotations

import numpy as np

from pvcard.types import Floats


def annand_nusselt(reynolds: Floats | float, coefficient: Floats | float = 0.5) -> Floats:
    """Nusselt number of the convective part of Annand's correlation.

    Parameters
    ----------
    reynolds : any shape
        With bore and mean piston speed. [-]
    coefficient : any shape
        0.35 to 0.8 by intensity of motion. [-]

    Returns
    -------
    nusselt : broadcast shape
        With the bore. [-]

    Notes
    -----
    ``Nu = a Re^0.7`` [1]_; the radiation term of the source, meant for flames, is left out.

    References
    ----------
    .. [1] W. J. D. Annand, *Proc. Inst. Mech. Engrs* 177 (1963) 973 (from memory of the
       publication).

    Examples
    --------
    >>> annand_nusselt(5e4, 0.7).round(1)
    np.float64(1362.6)
    """
    nusselt: Floats = coefficient * np.power(np.asarray(reynolds, dtype=np.float64), 0.7)
    return nusselt


def adair_nusselt(reynolds: Floats | float, prandtl: Floats | float) -> Floats:
    """Nusselt number of Adair, Qvale and Pearson for reciprocating compressors.

    Parameters
    ----------
    reynolds : any shape
        With the equivalent diameter and the swirl speed of `adair_swirl_speed`. [-]
    prandtl : any shape
        [-]

    Returns
    -------
    nusselt : broadcast shape
        With the equivalent diameter, six times volume over wall area. [-]

    Notes
    -----
    ``Nu = 0.053 Re^0.8 Pr^0.6`` [1]_.

    References
    ----------
    .. [1] R. P. Adair, E. B. Qvale and J. T. Pearson, "Instantaneous heat transfer to the cylinder
       wall in reciprocating compressors", Purdue Compressor Technology Conference, 1972 (from
       memory).

    Examples
    --------
    >>> adair_nusselt(5e4, 0.7).round(2)
    np.float64(245.76)
    """
    nusselt: Floats = (
        0.053 * np.power(np.asarray(reynolds, dtype=np.float64), 0.8) * np.power(prandtl, 0.6)
    )
    return nusselt


def adair_swirl_speed(crank_angle_deg: Floats, speed: Floats | float) -> Floats:
    """Angular speed of the gas in the correlation of Adair, Qvale and Pearson.

    Parameters
    ----------
    crank_angle_deg : (samples,)
        From the dead centre of that end. [deg]
    speed : () or (cards, 1)
        Revolutions per second. [1/s]

    Returns
    -------
    swirl : broadcast shape
        [rad/s]

    Notes
    -----
    ``2 w (1.04 + cos 2t)`` in the half turn around the dead centre, ``w (1.04 + cos 2t)`` in the
    other [1]_.

    References
    ----------
    .. [1] As for `adair_nusselt` (from memory).

    Examples
    --------
    >>> adair_swirl_speed(np.array([0.0, 180.0]), 10.0).round(1)
    array([256.4, 128.2])
    """
    angle = np.radians(crank_angle_deg)
    factor = np.where(np.cos(angle) > 0, 2.0, 1.0)
    swirl: Floats = 2 * np.pi * speed * factor * (1.04 + np.cos(2 * angle))
    return swirl


def woschni_coefficient(
    bore: Floats | float,
    pressure: Floats | float,
    temperature: Floats | float,
    gas_velocity: Floats | float,
) -> Floats:
    """Heat transfer coefficient of Woschni.

    Parameters
    ----------
    bore : any shape
        [m]
    pressure : any shape
        Absolute. [Pa]
    temperature : any shape
        [K]
    gas_velocity : any shape
        2.28 times the mean piston speed with the valves shut, 6.18 times during gas exchange. [m/s]

    Returns
    -------
    coefficient : broadcast shape
        [W/(m2 K)]

    Notes
    -----
    ``3.26 B^-0.2 p^0.8 T^-0.55 w^0.8`` with the pressure in kPa [1]_. Found for air and combustion
    gas; for another gas its density and conductivity are not in it.

    References
    ----------
    .. [1] G. Woschni, SAE 670931, 1967, in the form of J. B. Heywood, *Internal Combustion Engine
       Fundamentals*, 1988 (from memory).

    Examples
    --------
    >>> woschni_coefficient(0.3, 2e6, 350.0, 2.28 * 4).round(1)
    np.float64(424.0)
    """
    kilopascal = np.asarray(pressure, dtype=np.float64) / 1e3
    coefficient: Floats = (
        3.26
        * np.power(bore, -0.2)
        * np.power(kilopascal, 0.8)
        * np.power(temperature, -0.55)
        * np.power(gas_velocity, 0.8)
    )
    return coefficient
