"""Water vapour carried by a gas that was in touch with water, or has a known relative humidity."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from pvcard.errors import GasError
from pvcard.types import Floats

# Wagner and Pruss, J. Phys. Chem. Ref. Data 22 (1993) 783-787, equation 1 (IAPWS SR1-86(1992)).
_CRITICAL_TEMPERATURE, _CRITICAL_PRESSURE = 647.096, 22.064e6  # K, Pa
_FACTORS = (-7.85951783, 1.84408259, -11.7866497, 22.6807411, -15.9618719, 1.80122502)
_POWERS = (1.0, 1.5, 3.0, 3.5, 4.0, 7.5)


def saturation_pressure(temperature: Floats) -> Floats:
    """Vapour pressure of liquid water.

    Parameters
    ----------
    temperature : any shape
        From the triple point 273.16 K to the critical point 647.096 K. [K]

    Returns
    -------
    pressure : same shape
        Within 0.1 %; below the triple point that of supercooled water, continued. [Pa]

    Notes
    -----
    ``ln(p / pc) = Tc / T (a1 d + a2 d^1.5 + a3 d^3 + a4 d^3.5 + a5 d^4 + a6 d^7.5)``, ``d = 1 - T /
    Tc`` [1]_.

    References
    ----------
    .. [1] W. Wagner and A. Pruss, *J. Phys. Chem. Ref. Data* 22 (1993) 783-787, equation 1.

    Examples
    --------
    >>> round(float(saturation_pressure(np.array(373.1243))))
    101325
    """
    distance = 1 - np.asarray(temperature, dtype=np.float64) / _CRITICAL_TEMPERATURE
    terms = sum(a * distance**power for a, power in zip(_FACTORS, _POWERS, strict=True))
    result: Floats = _CRITICAL_PRESSURE * np.exp(_CRITICAL_TEMPERATURE / temperature * terms)
    return result


def with_water(
    fractions: Mapping[str, float], humidity: float, pressure: float, temperature: float
) -> tuple[dict[str, float], str]:
    """Mole fractions of a gas that carries water vapour.

    Parameters
    ----------
    fractions : mapping of str to float
        Mole fractions; water among them is replaced.
    humidity : ()
        Partial pressure of water over its saturation pressure, 1 for a saturated gas. [-]
    pressure, temperature : ()
        Of the suction line. [Pa], [K]

    Returns
    -------
    fractions : dict of str to float
        Dry part and water, adding up to one.
    note : str
        How much water was added.

    Notes
    -----
    ``y = humidity psat(T) / p``: partial pressures of ideal gases. By GERG-2008 methane with 5 % of
    ethane holds 6 % more water than that at 10 bar and 313 K, 33 % more at 50 bar: 0.05 % of the
    gas.
    """
    if not 0 <= humidity <= 1:
        raise GasError(
            "relative humidity out of range", found=f"{humidity:g}", expected="0 to 1 (0 to 100 %)"
        )
    share = humidity * float(saturation_pressure(np.array(temperature))) / pressure
    if share > 0.95:
        raise GasError(
            "the gas would be nothing but steam",
            found=f"water saturated at {temperature:.2f} K and {pressure / 1e5:.4g} bar",
            advice="Check suction temperature and pressure unit (gauge or absolute)",
        )
    dry = {name: value for name, value in fractions.items() if name != "water"}
    total = sum(dry.values())
    if not total > 0:
        raise GasError(
            "a relative humidity needs a gas beside the water",
            found="water alone",
            advice="Leave water_saturated and relative_humidity out for steam",
        )
    wet = {name: value / total * (1 - share) for name, value in dry.items()}
    if share > 0:
        wet["water"] = share
    return wet, (
        f"{100 * share:.3g} % water vapour added ({100 * humidity:.3g} % relative humidity at "
        f"{temperature - 273.15:.1f} degC and {pressure / 1e5:.4g} bar)"
    )
