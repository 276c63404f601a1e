"""Mixtures of the 21 components of GERG-2008."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import pyaga8

from pvcard.gas_components import mean_molar_mass
from pvcard.gas_gibbs import MOLAR_GAS_CONSTANT, Gibbs, gibbs_from_density_slopes
from pvcard.gas_models import Gas, gas_name
from pvcard.gas_stability import gas_root_problem
from pvcard.types import Floats


class GergGas(Gas):
    """A mixture of GERG-2008 components."""

    def __init__(self, fractions: Mapping[str, float], notes: tuple[str, ...] = ()) -> None:
        """Take mole fractions under canonical names, and what was assumed so far."""
        super().__init__(gas_name(fractions), mean_molar_mass(fractions), fractions, notes)
        self._equation = gerg_equation(self.fractions)
        self.molar_mass = self._equation.mm * 1e-3
        self.gas_constant = MOLAR_GAS_CONSTANT / self.molar_mass

    def __reduce__(self) -> tuple[type, tuple[dict[str, float], tuple[str, ...]]]:
        """Pickle by composition; the equation of state is set up anew."""
        return GergGas, (self.fractions, self.notes)

    def direct(self, pressure: Floats, temperature: Floats) -> Gibbs:
        """As in `Gas.direct`: GERG-2008, gas root of the density."""
        rows = [
            self._one(p, t)
            for p, t in zip((pressure * 1e-3).tolist(), temperature.tolist(), strict=True)
        ]
        density, z, g, h, cp, by_density, by_temperature = np.array(rows).reshape(-1, 7).T
        energy = MOLAR_GAS_CONSTANT * temperature
        kilopascal = z * density * energy  # the pressure of the density found
        # The solver stops near the pressure asked for; g follows the rest of the way with dg = v
        # dp.
        reduced = g / energy - np.log(kilopascal * 1e3)
        reduced += (z - 1) * np.log(pressure * 1e-3 / kilopascal)
        return gibbs_from_density_slopes(
            reduced,
            z,
            h / energy,
            cp / MOLAR_GAS_CONSTANT,
            by_density * density / kilopascal,
            by_temperature * temperature / kilopascal,
        )

    def _one(self, kilopascal: float, temperature: float) -> tuple[float, ...]:
        equation = self._equation
        equation.pressure = kilopascal
        equation.temperature = temperature
        equation.d = 0.0
        try:
            equation.calc_density(0)
            equation.calc_properties()
        except RuntimeError:
            return (np.nan,) * 7
        e = equation
        return (e.d, e.z, e.g, e.h, e.cp, e.dp_dd, e.dp_dt)

    def _isochore(self, density: Floats, temperature: Floats) -> tuple[Floats, Floats]:
        equation, rows = self._equation, []
        pairs = zip((density * 1e-3 / self.molar_mass).tolist(), temperature.tolist(), strict=True)
        for molar, kelvin in pairs:
            equation.d, equation.temperature = molar, kelvin
            equation.calc_properties()
            rows.append((equation.z * molar * MOLAR_GAS_CONSTANT * kelvin, equation.dp_dt))
        pressure, slope = np.array(rows).reshape(-1, 2).T * 1e3
        return pressure, slope

    def phase_problem(self, pressure: float, temperature: float) -> str | None:
        """As in `Gas.phase_problem`, by the stability test of `pvcard.gas_stability`."""
        return gas_root_problem(self.fractions, pressure, temperature)


def gerg_equation(fractions: Mapping[str, float]) -> Any:
    """Set up GERG-2008 for mole fractions under canonical names."""
    composition = pyaga8.Composition()
    for name, share in fractions.items():
        setattr(composition, name, share)
    equation = pyaga8.Gerg2008()
    equation.set_composition(composition)
    equation.calc_molar_mass()
    return equation
