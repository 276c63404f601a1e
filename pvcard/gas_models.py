"""The face that every gas shows, whatever equation of state stands behind it."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from typing import NamedTuple

import numpy as np

from pvcard import gas_gibbs, gas_transport
from pvcard.errors import GasError
from pvcard.gas_fit import build_table
from pvcard.gas_gibbs import MOLAR_GAS_CONSTANT, Gibbs, logarithm
from pvcard.gas_table import GasTable, isentropic_end, path_exponents
from pvcard.types import Floats

# From this many states on an array goes through a table, below it state by state.
TABLE_FROM = 400
# Ranges of tables are widened to these steps, so that similar batches share one.
_LN_PRESSURE_STEP = 0.1
_TEMPERATURE_STEP = 10.0  # K


class IsentropicPath(NamedTuple):
    """An isentropic change between two pressures."""

    temperature: Floats  # K, at the end
    density1: Floats  # kg/m3
    density2: Floats  # kg/m3
    enthalpy_rise: Floats  # J/kg
    volume_exponent: Floats  # ln(p2 / p1) / ln(rho2 / rho1)
    temperature_exponent: Floats  # 1 / (1 - ln(T2 / T1) / ln(p2 / p1))


class Gas(ABC):
    """One gas: constants and properties at arrays of states; pressure absolute, everything SI.

    Arrays of some hundred states and more go through a table (`table`), whose largest error is
    below 0.02 % and usually below one part in a million; the rest, and states outside the table,
    are evaluated one by one. A state the equation of state cannot solve is NaN.

    Attributes
    ----------
    name : str
    fractions : dict of str to float
        Mole fractions under canonical names; empty if unknown.
    molar_mass : ()
        [kg/mol]
    gas_constant : ()
        Of one kilogram. [J/(kg K)]
    relative_exponent_uncertainty : ()
        Standard uncertainty of the isentropic exponent beyond that of the gas analysis, relative.
    notes : tuple of str
        What was assumed.
    """

    def __init__(
        self,
        name: str,
        molar_mass: float,
        fractions: Mapping[str, float],
        notes: tuple[str, ...] = (),
        relative_exponent_uncertainty: float = 0.0,
    ) -> None:
        """Take what every gas has; see the attributes."""
        self.name = name
        self.molar_mass = molar_mass
        self.fractions = dict(fractions)
        self.gas_constant = MOLAR_GAS_CONSTANT / molar_mass
        self.relative_exponent_uncertainty = relative_exponent_uncertainty
        self.notes = notes
        self.inconsistency = 0.0
        self._tables: dict[tuple[float, float, float, float], GasTable | GasError] = {}

    def __repr__(self) -> str:
        """Return kind and name."""
        return f"{type(self).__name__}({self.name!r})"

    @abstractmethod
    def direct(self, pressure: Floats, temperature: Floats) -> Gibbs:
        """Reduced Gibbs energy from the equation of state itself, state by state.

        Parameters
        ----------
        pressure, temperature : (states,)
            [Pa], [K]

        Returns
        -------
        Gibbs
            Of shape (states,); NaN where there is no solution. [-]
        """

    def phase_problem(self, pressure: float, temperature: float) -> str | None:
        """Say why a state is not a gas.

        Parameters
        ----------
        pressure, temperature : ()
            [Pa], [K]

        Returns
        -------
        problem : str or None
            None if it is one, or if this gas has no phases.
        """
        return None

    def table(self, pressure: tuple[float, float], temperature: tuple[float, float]) -> GasTable:
        """Return a table that covers a range, from memory if there is one.

        Parameters
        ----------
        pressure, temperature : (2,)
            Lowest and highest value to be covered. [Pa], [K]

        Returns
        -------
        GasTable
            Its range is widened to round steps.

        Notes
        -----
        Raises `GasError` when the range is not gas, or too close to the critical point.
        """
        step, degrees = _LN_PRESSURE_STEP, _TEMPERATURE_STEP
        low, high = np.log(pressure) / step
        key = (
            float(np.floor(low + 1e-6)) * step,
            float(max(np.ceil(high - 1e-6), np.floor(low + 1e-6) + 1)) * step,
            float(np.floor(temperature[0] / degrees + 1e-6)) * degrees,
            float(np.floor(temperature[1] / degrees + 1 - 1e-6)) * degrees,
        )
        if key not in self._tables:
            bounds = float(np.exp(key[0])), float(np.exp(key[1]))
            try:
                self._tables[key] = build_table(
                    self, bounds, (key[2], max(key[3], key[2] + degrees))
                )
            except GasError as problem:
                self._tables[key] = problem
        table = self._tables[key]
        if isinstance(table, GasError):
            raise table
        return table

    def gibbs(self, pressure: Floats, temperature: Floats) -> Gibbs:
        """Reduced Gibbs energy, from which `pvcard.gas_gibbs` takes any property.

        Parameters
        ----------
        pressure, temperature : shapes that broadcast
            [Pa], [K]

        Returns
        -------
        Gibbs
            Of the broadcast shape. [-]
        """
        p, t = np.broadcast_arrays(
            np.asarray(pressure, dtype=np.float64), np.asarray(temperature, dtype=np.float64)
        )
        shape, p, t = p.shape, p.ravel(), t.ravel()
        values = np.full((6, p.size), np.nan)
        valid = np.isfinite(p) & np.isfinite(t) & (p > 0) & (t > 0)
        if np.count_nonzero(valid) >= TABLE_FROM:
            values[:, valid] = self._from_table(p[valid], t[valid])
        missing = valid & np.isnan(values[0])
        if missing.any():
            values[:, missing] = self.direct(p[missing], t[missing])
        return Gibbs(*values.reshape(6, *shape))

    def _from_table(self, pressure: Floats, temperature: Floats) -> Floats:
        try:
            table = self.table(
                (float(pressure.min()), float(pressure.max())),
                (float(temperature.min()), float(temperature.max())),
            )
        except GasError:
            return np.full((6, pressure.size), np.nan)
        return np.array(table.gibbs(pressure, temperature))

    def compressibility(self, pressure: Floats, temperature: Floats) -> Floats:
        """Return ``Z = p / (rho R T)`` at pressures [Pa] and temperatures [K] that broadcast.
        [-]."""
        return gas_gibbs.compressibility(self.gibbs(pressure, temperature))

    def density(self, pressure: Floats, temperature: Floats) -> Floats:
        """Return the density at pressures [Pa] and temperatures [K] that broadcast. [kg/m3]."""
        z = self.compressibility(pressure, temperature)
        result: Floats = pressure / (z * self.gas_constant * temperature)
        return result

    def enthalpy(self, pressure: Floats, temperature: Floats) -> Floats:
        """Return the enthalpy, zero as the equation of state has it. [J/kg]."""
        result: Floats = -self.gas_constant * temperature * self.gibbs(pressure, temperature).by_t
        return result

    def entropy(self, pressure: Floats, temperature: Floats) -> Floats:
        """Return the entropy, zero as the equation of state has it. [J/(kg K)]."""
        gibbs = self.gibbs(pressure, temperature)
        result: Floats = self.gas_constant * gas_gibbs.entropy(gibbs, logarithm(pressure))
        return result

    def internal_energy(self, pressure: Floats, temperature: Floats) -> Floats:
        """Return ``h - p / rho``. [J/kg]."""
        gibbs = self.gibbs(pressure, temperature)
        result: Floats = (
            -self.gas_constant * temperature * (gibbs.by_t + gas_gibbs.compressibility(gibbs))
        )
        return result

    def heat_capacity(self, pressure: Floats, temperature: Floats) -> Floats:
        """Return cp. [J/(kg K)]."""
        gibbs = self.gibbs(pressure, temperature)
        result: Floats = self.gas_constant * gas_gibbs.heat_capacity(gibbs)
        return result

    def heat_capacity_ratio(self, pressure: Floats, temperature: Floats) -> Floats:
        """Return cp / cv; for a real gas neither of the isentropic exponents. [-]."""
        return gas_gibbs.heat_capacity_ratio(self.gibbs(pressure, temperature))

    def volume_exponent(self, pressure: Floats, temperature: Floats) -> Floats:
        """Return ``k_v = rho w^2 / p``, the slope of an isentrope in ln p over ln rho. [-]."""
        return gas_gibbs.volume_exponent(self.gibbs(pressure, temperature))

    def temperature_exponent(self, pressure: Floats, temperature: Floats) -> Floats:
        """Return ``k_T`` of ``(k_T - 1) / k_T = (p / T) (dT/dp)_s``. [-]."""
        return gas_gibbs.temperature_exponent(self.gibbs(pressure, temperature))

    def speed_of_sound(self, pressure: Floats, temperature: Floats) -> Floats:
        """Return the speed of sound. [m/s]."""
        gibbs = self.gibbs(pressure, temperature)
        return gas_gibbs.speed_of_sound(gibbs, self.gas_constant, np.asarray(temperature))

    def temperature_from_density(self, pressure: Floats, density: Floats) -> Floats:
        """Temperature at which the gas has a density, by Newton's rule along the isochore.

        Parameters
        ----------
        pressure, density : shapes that broadcast
            [Pa], [kg/m3]

        Returns
        -------
        temperature : broadcast shape
            NaN where there is none. [K]

        Notes
        -----
        State by state; many at once are faster through `GasTable.temperature_from_density`.
        """
        p, rho = np.broadcast_arrays(
            np.asarray(pressure, dtype=np.float64), np.asarray(density, dtype=np.float64)
        )
        shape, p, rho = p.shape, p.ravel(), rho.ravel()
        valid = np.isfinite(p) & np.isfinite(rho) & (p > 0) & (rho > 0)
        temperature = np.where(valid, 1.0, np.nan)
        temperature[valid] = self._along_isochore(p[valid], rho[valid])
        return temperature.reshape(shape)

    def _along_isochore(self, pressure: Floats, density: Floats) -> Floats:
        temperature = pressure / (density * self.gas_constant)
        for _ in range(60):
            found, slope = self._isochore(density, temperature)
            step = (pressure - found) / slope
            limit = 0.2 * temperature
            temperature = temperature + np.clip(step, -limit, limit)
            if not np.any(np.abs(step) > 1e-10 * temperature):
                break
        return temperature

    @abstractmethod
    def _isochore(self, density: Floats, temperature: Floats) -> tuple[Floats, Floats]:
        """Return pressure [Pa] and its slope by temperature at densities [kg/m3], state by
        state."""

    def isentropic(
        self, pressure1: Floats, temperature1: Floats, pressure2: Floats
    ) -> IsentropicPath:
        """Isentropic change from a state to another pressure.

        Parameters
        ----------
        pressure1, temperature1 : shapes that broadcast
            State at the start. [Pa], [K]
        pressure2 : shape that broadcasts
            Pressure at the end. [Pa]

        Returns
        -------
        IsentropicPath
            Of the broadcast shape.

        Notes
        -----
        ``s2 = s1`` is solved for T2; the exponents are the means of the path. With slopes, and
        faster for many: `GasTable.isentropic`.
        """
        p1, temperature, p2 = np.broadcast_arrays(
            *(np.asarray(a, dtype=np.float64) for a in (pressure1, temperature1, pressure2))
        )
        x1, t1, x2 = logarithm(p1), logarithm(temperature), logarithm(p2)
        start = self.gibbs(p1, temperature)
        t2, end = isentropic_end(self._gibbs_of_logarithms, x1, t1, x2, start)
        end_temperature = np.exp(t2)
        density1 = p1 / (gas_gibbs.compressibility(start) * self.gas_constant * temperature)
        density2 = p2 / (gas_gibbs.compressibility(end) * self.gas_constant * end_temperature)
        rise = self.gas_constant * (temperature * start.by_t - end_temperature * end.by_t)
        exponents = path_exponents(x2 - x1, np.log(density2 / density1), t2 - t1, start)
        return IsentropicPath(end_temperature, density1, density2, rise, *exponents)

    def _gibbs_of_logarithms(self, x: Floats, t: Floats) -> Gibbs:
        return self.gibbs(np.exp(x), np.exp(t))

    def viscosity(self, temperature: Floats) -> Floats:
        """Return the viscosity of the thin gas, good to some 5-10 %. [Pa s]."""
        return gas_transport.mixture_viscosity(self.fractions, np.asarray(temperature))

    def conductivity(self, temperature: Floats) -> Floats:
        """Return the heat conductivity of the thin gas, good to some 10 %. [W/(m K)]."""
        thin = np.full(np.shape(temperature), 100.0)
        specific_heat = self.heat_capacity(thin, temperature) - self.gas_constant
        return gas_transport.conductivity(
            self.viscosity(temperature), specific_heat, self.gas_constant
        )


def gas_name(fractions: Mapping[str, float]) -> str:
    """Return a short name of a mixture: its largest components.

    Examples
    --------
    >>> gas_name({"methane": 0.94, "ethane": 0.03, "nitrogen": 0.02, "carbon_dioxide": 0.01})
    'gas of 94 % methane, 3 % ethane, 2 % nitrogen and 1 more'
    """
    if len(fractions) == 1:
        return next(iter(fractions))
    largest = sorted(fractions.items(), key=lambda item: -item[1])
    text = ", ".join(f"{100 * share:.3g} % {name}" for name, share in largest[:3])
    more = f" and {len(largest) - 3} more" if len(largest) > 3 else ""
    return f"gas of {text}{more}"
