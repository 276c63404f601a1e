"""A gas given by exponent, compressibility and molar mass alone."""

from __future__ import annotations

import numpy as np

from pvcard import gas_transport
from pvcard.errors import GasError
from pvcard.gas_data import COMPONENTS
from pvcard.gas_gibbs import Gibbs
from pvcard.gas_models import Gas
from pvcard.types import Floats

# Relative standard uncertainty of an isentropic exponent that was declared, not computed. A
# judgement.
DECLARED_EXPONENT_UNCERTAINTY = 0.005


class ExponentGas(Gas):
    """A gas known by exponent, compressibility and molar mass alone.

    Parameters
    ----------
    exponent : ()
        Mean volume exponent of the isentropic path from suction to discharge. [-]
    compressibility : ()
        At suction pressure. [-]
    molar_mass : ()
        [kg/mol]
    compressibility_slope : ()
        ``d ln Z / d ln p``. [-]
    suction_pressure, pressure_ratio : ()
        Where `compressibility` holds [Pa], and the ratio over which `exponent` is the mean.
    notes : tuple of str
        What was assumed.

    Notes
    -----
    ``Z = Z1 (p / p1)^c`` does not depend on temperature. Then enthalpy and cp depend on temperature
    alone and ``ds = cp d ln T - R Z d ln p``: consistent, and closed to integrate. Along an
    isentrope ``ln(T2 / T1) = (R / cp) (Z2 - Z1) / c``; cp is the constant that gives the declared
    mean exponent. With Z constant this is the ideal gas with its volume times Z, ``cp = Z R k / (k
    - 1)``.
    """

    def __init__(
        self,
        exponent: float,
        compressibility: float,
        molar_mass: float,
        *,
        compressibility_slope: float = 0.0,
        suction_pressure: float = 101325.0,
        pressure_ratio: float = 1.0,
        notes: tuple[str, ...] = (),
    ) -> None:
        """Take the declared values; see the parameters."""
        super().__init__(
            f"gas of exponent {exponent:g}, compressibility {compressibility:g} and molar mass "
            f"{molar_mass * 1e3:g} g/mol",
            molar_mass,
            {},
            notes,
            DECLARED_EXPONENT_UNCERTAINTY,
        )
        self._z1, self._slope = compressibility, compressibility_slope
        self._ln_p1 = float(np.log(suction_pressure))
        step = max(float(np.log(pressure_ratio)), 1e-3)
        mean_z = float(self._z_integral(np.array(step))) / step
        self._cp = mean_z / (1 - compressibility_slope - 1 / exponent)  # over R
        if not self._cp > 1:
            raise GasError(
                "exponent and compressibilities do not fit together",
                found=f"exponent {exponent:g}, compressibility rising with pressure as "
                f"ln Z / ln p = {compressibility_slope:.3g}",
                expected="an exponent above 1 and similar compressibilities",
            )

    def _z_integral(self, step: Floats) -> Floats:
        """Integral of Z over ln p from the suction pressure over a step."""
        slope = self._slope
        result: Floats = self._z1 * (np.expm1(slope * step) / slope if slope else step)
        return result

    def _isochore(self, density: Floats, temperature: Floats) -> tuple[Floats, Floats]:
        # p = Z1 (p / p1)^c rho R T
        ideal = np.log(self._z1 * density * self.gas_constant * temperature)
        pressure = np.exp((ideal - self._slope * self._ln_p1) / (1 - self._slope))
        return pressure, pressure / temperature / (1 - self._slope)

    def direct(self, pressure: Floats, temperature: Floats) -> Gibbs:
        """As in `Gas.direct`, in closed form."""
        x, t = np.log(pressure), np.log(temperature)
        z = self._z1 * np.exp(self._slope * (x - self._ln_p1))
        flat = np.zeros_like(x + t)
        return Gibbs(
            self._cp * (1 - t) + self._z_integral(x - self._ln_p1) - x,
            z - 1 + flat,
            flat - self._cp,
            self._slope * z + flat,
            flat,
            flat,
        )

    def viscosity(self, temperature: Floats) -> Floats:
        """Return the viscosity of the common gas nearest in molar mass: a rough guess. [Pa s]."""
        common = ("hydrogen", "methane", "nitrogen", "carbon_dioxide", "n_butane")
        near = min(common, key=lambda name: abs(COMPONENTS[name].molar_mass - self.molar_mass))
        return gas_transport.component_viscosity(COMPONENTS[near], np.asarray(temperature))
