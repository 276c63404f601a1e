"""Real gas from a composition: density, exponents, enthalpy, entropy, and tables for batches.

GERG-2008 [1]_ where every component belongs to it, the optional CoolProp otherwise, or a gas known
by exponent, compressibility and molar mass alone; all behind `Gas`.

References
----------
.. [1] O. Kunz and W. Wagner, *J. Chem. Eng. Data* 57 (2012) 3032-3091. Normal range 90-450 K and up
   to 35 MPa; extended range 60-700 K and up to 70 MPa.

Examples
--------
>>> gas = gas_from_composition({"methane": 1.0})
>>> float(gas.compressibility(50e5, 300.0).round(4))
0.9196
>>> path = gas.isentropic(10e5, 300.0, 30e5)
>>> float(path.temperature.round(1)), float(path.volume_exponent.round(3))
(385.0, 1.295)
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache
from typing import Protocol

import numpy as np

from pvcard.errors import GasError
from pvcard.gas_components import canonical_component, normalise_composition, pseudo_critical
from pvcard.gas_data import GERG_COMPONENTS
from pvcard.gas_exponent import ExponentGas
from pvcard.gas_gerg import GergGas
from pvcard.gas_models import Gas, IsentropicPath
from pvcard.gas_table import (
    EnergyAtDensity,
    EntropyAtDensity,
    GasTable,
    IsentropicSlopes,
    TableError,
    TableState,
    TemperatureAtDensity,
)
from pvcard.gas_water import saturation_pressure, with_water

__all__ = [
    "Description",
    "EnergyAtDensity",
    "EntropyAtDensity",
    "ExponentGas",
    "Gas",
    "GasError",
    "GasTable",
    "GergGas",
    "IsentropicPath",
    "IsentropicSlopes",
    "TableError",
    "TableState",
    "TemperatureAtDensity",
    "canonical_component",
    "check_gas_phase",
    "gas_for",
    "gas_from_composition",
    "gas_table",
    "normalise_composition",
    "pseudo_critical",
    "saturation_pressure",
]

# Gases that are kept with their tables.
_KEPT_GASES = 64


class Description(Protocol):
    """What a machine description says about its gas; see `gas_for`."""

    @property
    def composition(self) -> Mapping[str, float] | None:
        """Mole fractions under canonical names."""

    @property
    def isentropic_exponent(self) -> float | None:
        """Volume exponent at mean conditions. [-]."""

    @property
    def compressibility(self) -> float | None:
        """At suction. [-]."""

    @property
    def discharge_compressibility(self) -> float | None:
        """At discharge. [-]."""

    @property
    def molar_mass(self) -> float | None:
        """[kg/mol]."""

    @property
    def water_saturated(self) -> bool:
        """Whether the gas is saturated with water at suction."""

    @property
    def relative_humidity(self) -> float | None:
        """Of the suction gas, 0 to 1. [-]."""


def gas_for(
    description: Description,
    *,
    suction: tuple[float, float] | None = None,
    discharge_pressure: float | None = None,
) -> Gas:
    """Gas of a description, with its water if it carries some.

    Parameters
    ----------
    description : Description
        Composition, or exponent, compressibility and molar mass.
    suction : (2,), optional
        Pressure and temperature of the suction line, needed for a humid gas and for a gas given by
        compressibilities. [Pa], [K]
    discharge_pressure : (), optional
        Where `discharge_compressibility` holds. [Pa]

    Returns
    -------
    Gas
        The same object for the same composition, so that tables are kept.

    Notes
    -----
    Raises `GasError`, also when a component needs CoolProp and it is not installed. Whether a state
    is gas at all is not asked here; see `check_gas_phase`.
    """
    if description.composition is None:
        return _declared_gas(description, suction, discharge_pressure)
    fractions = dict(description.composition)
    notes: tuple[str, ...] = ()
    humidity = description.relative_humidity
    if description.water_saturated:
        humidity = 1.0
    if humidity is not None:
        if suction is None:
            raise GasError(
                "a humid gas needs suction pressure and temperature",
                found="neither",
                expected="both in the recording",
                advice="Without them give water as a component",
            )
        fractions, note = with_water(fractions, humidity, *suction)
        notes = (note,)
    return gas_from_composition(fractions, notes=notes)


def gas_from_composition(composition: Mapping[str, float], *, notes: tuple[str, ...] = ()) -> Gas:
    """Gas of a composition.

    Parameters
    ----------
    composition : mapping of str to float
        As `normalise_composition` takes it.
    notes : tuple of str
        What was assumed so far.

    Returns
    -------
    Gas
        GERG-2008 if it has every component, else CoolProp.
    """
    fractions, more = normalise_composition(composition)
    return _kept_gas(tuple(sorted(fractions.items())), (*notes, *more))


@lru_cache(maxsize=_KEPT_GASES)
def _kept_gas(fractions: tuple[tuple[str, float], ...], notes: tuple[str, ...]) -> Gas:
    if all(name in GERG_COMPONENTS for name, _ in fractions):
        return GergGas(dict(fractions), notes)
    from pvcard.gas_coolprop import CoolPropGas

    return CoolPropGas(dict(fractions), notes)


def _declared_gas(
    description: Description,
    suction: tuple[float, float] | None,
    discharge_pressure: float | None,
) -> Gas:
    exponent, mass = description.isentropic_exponent, description.molar_mass
    if exponent is None or mass is None:
        missing = "isentropic_exponent" if exponent is None else "molar_mass"
        raise GasError(
            f"the gas has neither a composition nor {missing}",
            expected="a composition, or isentropic_exponent, compressibility and molar_mass",
        )
    if not 1 < exponent < 2:
        raise GasError(
            "impossible isentropic exponent", found=f"{exponent:g}", expected="between 1 and 2"
        )
    notes = ["gas given by exponent, compressibility and molar mass alone"]
    z1 = description.compressibility
    if z1 is None:
        z1 = 1.0
        notes.append("compressibility not given, 1 assumed")
    z2, slope, ratio = description.discharge_compressibility, 0.0, 1.0
    if z2 is not None and suction is not None and discharge_pressure is not None:
        ratio = discharge_pressure / suction[0]
        slope = float(np.log(z2 / z1) / np.log(ratio)) if ratio > 1.01 else 0.0
    elif z2 is not None:
        notes.append("discharge_compressibility not used: discharge pressure not known")
    return ExponentGas(
        exponent,
        z1,
        mass,
        compressibility_slope=slope,
        suction_pressure=suction[0] if suction else 101325.0,
        pressure_ratio=max(ratio, 1.0),
        notes=tuple(notes),
    )


def gas_table(
    gas: Gas, *, pressure: tuple[float, float], temperature: tuple[float, float]
) -> GasTable:
    """Polynomials of a gas over a range, for batches.

    Parameters
    ----------
    gas : Gas
        The gas; it keeps its tables.
    pressure, temperature : (2,)
        Lowest and highest value to be covered. [Pa], [K]

    Returns
    -------
    GasTable
        Its range is widened to round steps. NaN outside of it, and where the gas would be liquid.
    """
    for name, (low, high) in (("pressure", pressure), ("temperature", temperature)):
        if not 0 < low <= high < np.inf:
            raise GasError(
                f"impossible range of {name} for a gas table",
                found=f"{low:g} to {high:g}",
                expected="a positive low and a higher high value",
            )
    return gas.table(pressure, temperature)


def check_gas_phase(gas: Gas, pressure: float, temperature: float) -> None:
    """Raise `GasError` when a state is liquid or two-phase.

    Parameters
    ----------
    gas : Gas
        The gas; one given by exponent alone is never anything else.
    pressure, temperature : ()
        [Pa], [K]
    """
    problem = gas.phase_problem(float(pressure), float(temperature))
    if problem is not None:
        raise GasError(
            f"{gas.name} is {problem} at {pressure / 1e5:.4g} bar absolute and "
            f"{temperature - 273.15:.2f} degC ({temperature:.2f} K)",
            expected="a gas",
            advice="Check the temperature, the pressure unit (gauge or absolute) "
            "and the gas analysis",
        )
