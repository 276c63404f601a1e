"""Viscosity and heat conductivity of a thin gas, good to some 5-10 %.

They only scale the wall-heat coefficient, whose multiplier is fitted anyway.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from pvcard.gas_data import COMPONENTS, DIPOLE_MOMENT, Component
from pvcard.types import Floats

# Association constant of Chung et al.; from memory. Zero for gases without hydrogen bonds.
_ASSOCIATION = {"water": 0.076, "methanol": 0.215, "ethanol": 0.175}


def _collision_integral(reduced_temperature: Floats) -> Floats:
    """Neufeld, Janzen and Aziz (1972), as in Poling et al., equation 9-4.3; constants from
    memory."""
    t = reduced_temperature
    result: Floats = (
        1.16145 * t**-0.14874 + 0.52487 * np.exp(-0.77320 * t) + 2.16178 * np.exp(-2.43787 * t)
    )
    return result


def component_viscosity(component: Component, temperature: Floats) -> Floats:
    """Viscosity of one thin gas by corresponding states.

    Parameters
    ----------
    component : Component
        With critical temperature and volume, acentric factor.
    temperature : any shape
        [K]

    Returns
    -------
    viscosity : same shape
        Within 5 % for ordinary gases, 10 % for hydrogen and helium. [Pa s]

    Notes
    -----
    ``40.785 Fc sqrt(M T) / (Vc^(2/3) Omega)`` micropoise, Vc in cm3/mol and M in g/mol [1]_;
    constants from memory.

    References
    ----------
    .. [1] T. H. Chung et al. (1984, 1988), in B. E. Poling, J. M. Prausnitz and J. P. O'Connell,
       *The Properties of Gases and Liquids*, 5th edition 2001, equations 9-4.10 and 9-4.11.
    """
    volume = component.critical_volume * 1e6
    dipole = DIPOLE_MOMENT.get(component.name, 0.0)
    reduced_dipole = 131.3 * dipole / np.sqrt(volume * component.critical_temperature)
    shape = 1 - 0.2756 * component.acentric_factor + 0.059035 * reduced_dipole**4
    shape += _ASSOCIATION.get(component.name, 0.0)
    integral = _collision_integral(1.2593 * temperature / component.critical_temperature)
    root = np.sqrt(component.molar_mass * 1e3 * temperature)
    result: Floats = 40.785e-7 * shape * root / (volume ** (2 / 3) * integral)
    return result


def mixture_viscosity(fractions: Mapping[str, float], temperature: Floats) -> Floats:
    """Viscosity of a thin gas mixture.

    Parameters
    ----------
    fractions : mapping of str to float
        Mole fractions under canonical names.
    temperature : any shape
        [K]

    Returns
    -------
    viscosity : same shape
        Within some 5 %. [Pa s]

    Notes
    -----
    Rule of Wilke [1]_ over the components' viscosities.

    References
    ----------
    .. [1] C. R. Wilke, *J. Chem. Phys.* 18 (1950) 517; Poling et al., 5th edition, equations
       9-5.13, 9-5.14.
    """
    parts = [COMPONENTS[name] for name in fractions]
    share = np.array(list(fractions.values()))
    mass = np.array([part.molar_mass for part in parts])
    each = np.array([component_viscosity(part, temperature) for part in parts])
    ratio = (mass[None, :] / mass[:, None])[(...,) + (None,) * np.ndim(temperature)]
    root = np.sqrt(each[:, None] / each[None, :])
    weight = (1 + root * ratio**0.25) ** 2 / np.sqrt(8 * (1 + 1 / ratio))
    crowd = np.einsum("j,ij...->i...", share, weight)
    result: Floats = np.einsum("i,i...->...", share, each / crowd)
    return result


def conductivity(viscosity: Floats, specific_heat_cv: Floats, gas_constant: float) -> Floats:
    """Heat conductivity of a thin gas from its viscosity.

    Parameters
    ----------
    viscosity, specific_heat_cv : any shape
        [Pa s], ideal-gas cv [J/(kg K)]
    gas_constant : ()
        [J/(kg K)]

    Returns
    -------
    conductivity : same shape
        Within some 10 %. [W/(m K)]

    Notes
    -----
    Modified Eucken relation ``k M / (eta cv) = 1.32 + 1.77 R / cv`` (molar cv) [1]_; constants from
    memory.

    References
    ----------
    .. [1] Poling, Prausnitz and O'Connell, 5th edition, section 10-3-1.
    """
    result: Floats = viscosity * (1.32 * specific_heat_cv + 1.77 * gas_constant)
    return result
