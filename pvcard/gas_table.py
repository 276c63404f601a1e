"""Polynomials of a gas over a range of pressure and temperature, so that batches are fast.

A table holds two charts. The first is the reduced Gibbs energy ``F(ln p, ln T)`` of
`pvcard.gas_gibbs`: its derivatives are all properties at known pressure and temperature. The second
answers the question a card asks, where pressure and density are known: compressibility, entropy and
internal energy over ``ln p`` and ``tau = ln(p / (rho R)) = ln(Z T)``, computed from the first. What
an ideal gas of constant heat capacity would have is a straight line in both, so low degrees
suffice.

Both are interpolated at Chebyshev nodes [1]_ of a strip along ``ln p``. The strip is a rectangle
unless its cold corner would be liquid; then its lower edge rises with pressure. Beyond the strip
every result is NaN.

References
----------
.. [1] L. N. Trefethen, *Approximation Theory and Approximation Practice*, SIAM 2013, chapters 3, 4
   and 8.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple, Protocol

import numpy as np

from pvcard import gas_gibbs
from pvcard.gas_charts import ENERGY, ENTROPY, LN_Z, FirstChart, SecondChart
from pvcard.gas_gibbs import Gibbs, logarithm
from pvcard.types import Floats


class TableSource(Protocol):
    """What a gas must offer to be tabulated."""

    @property
    def name(self) -> str:
        """Name in messages."""

    @property
    def gas_constant(self) -> float:
        """Of one kilogram. [J/(kg K)]."""

    @property
    def inconsistency(self) -> float:
        """How far g, h and Z of its equation of state contradict one another. [-]."""

    def direct(self, pressure: Floats, temperature: Floats) -> Gibbs:
        """Reduced Gibbs energy of states (n,) from the equation of state."""

    def phase_problem(self, pressure: float, temperature: float) -> str | None:
        """Why a state is not a gas, or None."""


class TableError(NamedTuple):
    """Largest differences from direct evaluation over random states of the strip.

    Relative for density, temperature and volume exponent; entropy over R, enthalpy and internal
    energy over R T. `density` and `entropy` are the worse of both charts, `temperature` and
    `internal_energy` belong to the second.
    """

    density: float
    entropy: float
    enthalpy: float
    volume_exponent: float
    temperature: float
    internal_energy: float


class TableState(NamedTuple):
    """Properties at pressure and temperature with their slopes by ``ln p`` (constant T) and T
    (constant p)."""

    density: Floats  # kg/m3
    enthalpy: Floats  # J/kg
    entropy: Floats  # J/(kg K)
    compressibility: Floats
    ln_density_by_ln_p: Floats
    ln_density_by_temperature: Floats  # 1/K
    enthalpy_by_ln_p: Floats  # J/kg
    enthalpy_by_temperature: Floats  # J/(kg K), cp
    entropy_by_ln_p: Floats  # J/(kg K)
    entropy_by_temperature: Floats  # J/(kg K2)


class EntropyAtDensity(NamedTuple):
    """Entropy [J/(kg K)] at pressure and density and its slopes by ``ln p`` and ``ln rho``."""

    entropy: Floats
    d_ln_p: Floats
    d_ln_rho: Floats


class TemperatureAtDensity(NamedTuple):
    """Temperature [K] at pressure and density and its slopes by ``ln p`` and ``ln rho``."""

    temperature: Floats
    d_ln_p: Floats
    d_ln_rho: Floats


class EnergyAtDensity(NamedTuple):
    """Internal energy [J/kg] at pressure and density and its slopes by ``ln p`` and ``ln rho``."""

    internal_energy: Floats
    d_ln_p: Floats
    d_ln_rho: Floats


class IsentropicSlopes(NamedTuple):
    """An isentropic change from (p1, T1) to p2 with its slopes.

    Each slope has a last axis of three: by ``ln p1``, by ``T1`` and by ``ln p2``.
    """

    temperature: Floats  # K, at the end
    density1: Floats  # kg/m3
    density2: Floats  # kg/m3
    enthalpy_rise: Floats  # J/kg
    volume_exponent: Floats
    temperature_exponent: Floats
    ln_density1_slopes: Floats
    ln_density2_slopes: Floats
    enthalpy_rise_slopes: Floats
    temperature_slopes: Floats


class GasTable:
    """Fast properties of one gas over a range; made by `pvcard.gas.gas_table`.

    Attributes
    ----------
    pressure, temperature : (2,)
        Range covered; with `clipped` the cold corner at high pressure is left out. [Pa], [K]
    error : TableError
        Largest differences from direct evaluation, found on building.
    degree, density_degree : int
        Of the first and the second chart in each variable.
    clipped : bool
        Whether part of the range is not gas or nearly critical; states there give NaN.
    notes : tuple of str
        What a user should know.
    """

    def __init__(
        self, source: TableSource, first: FirstChart, second: SecondChart, error: TableError
    ) -> None:
        """Take the two charts of a gas and their error."""
        self.gas_constant = source.gas_constant
        self.name = source.name
        self.error = error
        self.degree, self.density_degree = first.degree, second.degree
        self._ln_gas_constant = float(np.log(source.gas_constant))
        self._strip = strip = first.strip
        self._first = first
        self._second = second
        x, t = strip.plane(np.array([-1.0, 1.0, -1.0]), np.array([-1.0, -1.0, 1.0]))
        self.pressure = (float(np.exp(x[0])), float(np.exp(x[1])))
        self.temperature = (float(np.exp(t[0])), float(np.exp(t[2])))
        self.clipped = strip.rise > 0
        self.notes = self._notes()

    def _notes(self) -> tuple[str, ...]:
        if not self.clipped:
            return ()
        low, high = (float(self.lowest_temperature(np.array(p))) for p in self.pressure)
        bottom, top = (pressure / 1e5 for pressure in self.pressure)
        return (
            f"{self.name} is covered only above {low:.1f} K at {bottom:.4g} bar, rising to "
            f"{high:.1f} K at {top:.4g} bar; "
            "colder states are liquid, two-phase or nearly critical",
        )

    def lowest_temperature(self, pressure: Floats) -> Floats:
        """Lowest temperature covered at a pressure.

        Parameters
        ----------
        pressure : any shape
            [Pa]

        Returns
        -------
        temperature : same shape
            [K]
        """
        xi = (np.log(pressure) - self._strip.middle) / self._strip.half
        result: Floats = np.exp(self._strip.centre + self._strip.rise * xi - self._strip.width)
        return result

    def gibbs(self, pressure: Floats, temperature: Floats) -> Gibbs:
        """Reduced Gibbs energy and its slopes, from which `pvcard.gas_gibbs` takes any property.

        Parameters
        ----------
        pressure, temperature : shapes that broadcast
            [Pa], [K]

        Returns
        -------
        Gibbs
            NaN outside the range. [-]
        """
        return self._first.gibbs(logarithm(pressure), logarithm(temperature))

    def state(self, pressure: Floats, temperature: Floats) -> TableState:
        """Properties at pressure and temperature, with slopes.

        Parameters
        ----------
        pressure, temperature : shapes that broadcast
            [Pa], [K]

        Returns
        -------
        TableState
            NaN outside the range.
        """
        x, t = logarithm(pressure), np.asarray(temperature, dtype=np.float64)
        gibbs = self._first.gibbs(x, logarithm(t))
        z = gas_gibbs.compressibility(gibbs)
        by_x, by_t = gas_gibbs.ln_density_slopes(gibbs)
        cp = self.gas_constant * gas_gibbs.heat_capacity(gibbs)
        return TableState(
            density=pressure / (z * self.gas_constant * t),
            enthalpy=-self.gas_constant * t * gibbs.by_t,
            entropy=self.gas_constant * gas_gibbs.entropy(gibbs, x),
            compressibility=z,
            ln_density_by_ln_p=by_x,
            ln_density_by_temperature=by_t / t,
            enthalpy_by_ln_p=-self.gas_constant * t * gibbs.by_xt,
            enthalpy_by_temperature=cp,
            entropy_by_ln_p=-self.gas_constant * (z + gibbs.by_xt),
            entropy_by_temperature=cp / t,
        )

    def _tau(self, ln_p: Floats, ln_rho: Floats) -> Floats:
        result: Floats = np.asarray(ln_p, dtype=np.float64) - ln_rho - self._ln_gas_constant
        return result

    def entropy_from_density(self, ln_p: Floats, ln_rho: Floats) -> EntropyAtDensity:
        """Entropy at pressure and density.

        Parameters
        ----------
        ln_p, ln_rho : shapes that broadcast
            Logarithms of pressure in Pa and density in kg/m3. [-]

        Returns
        -------
        EntropyAtDensity
            Entropy and its slopes, the other variable held. NaN outside the range. [J/(kg K)]

        Notes
        -----
        The isentropic exponent is ``k_v = -d_ln_rho / d_ln_p``.
        """
        value, by_x, by_tau = self._second.evaluate(ENTROPY, ln_p, self._tau(ln_p, ln_rho))
        value -= ln_p
        by_x += by_tau
        by_x -= 1
        value *= self.gas_constant
        by_x *= self.gas_constant
        by_tau *= -self.gas_constant
        return EntropyAtDensity(value, by_x, by_tau)

    def temperature_from_density(self, ln_p: Floats, ln_rho: Floats) -> TemperatureAtDensity:
        """Temperature at pressure and density.

        Parameters
        ----------
        ln_p, ln_rho : shapes that broadcast
            Logarithms of pressure in Pa and density in kg/m3. [-]

        Returns
        -------
        TemperatureAtDensity
            Temperature and its slopes. NaN outside the range. [K]
        """
        tau = self._tau(ln_p, ln_rho)
        value, by_x, by_tau = self._second.evaluate(LN_Z, ln_p, tau)
        temperature = np.exp(tau - value)
        by_x += by_tau
        by_tau -= 1
        by_tau *= temperature
        by_x -= 1
        by_x *= -temperature
        return TemperatureAtDensity(temperature, by_x, by_tau)

    def internal_energy_from_density(self, ln_p: Floats, ln_rho: Floats) -> EnergyAtDensity:
        """Internal energy at pressure and density.

        Parameters
        ----------
        ln_p, ln_rho : shapes that broadcast
            Logarithms of pressure in Pa and density in kg/m3. [-]

        Returns
        -------
        EnergyAtDensity
            Internal energy and its slopes. NaN outside the range. [J/kg]
        """
        tau = self._tau(ln_p, ln_rho)
        value, by_x, by_tau = self._second.evaluate(ENERGY, ln_p, tau)
        scale = self.gas_constant * np.exp(tau)  # p / rho
        by_tau += value
        by_x += by_tau
        return EnergyAtDensity(scale * value, scale * by_x, -scale * by_tau)

    def gruneisen(self, ln_p: Floats, ln_rho: Floats) -> Floats:
        """Pressure gained per energy put into a closed volume, ``v (dp/du)_v``.

        Parameters
        ----------
        ln_p, ln_rho : shapes that broadcast
            Logarithms of pressure in Pa and density in kg/m3. [-]

        Returns
        -------
        ratio : broadcast shape
            ``k - 1`` for an ideal gas. NaN outside the range. [-]
        """
        value, by_x, by_tau = self._second.evaluate(ENERGY, ln_p, self._tau(ln_p, ln_rho))
        result: Floats = 1 / (value + by_x + by_tau)
        return result

    def isentropic(
        self, pressure1: Floats, temperature1: Floats, pressure2: Floats
    ) -> IsentropicSlopes:
        """Isentropic change to another pressure, with slopes.

        Parameters
        ----------
        pressure1, temperature1 : shapes that broadcast
            State at the start. [Pa], [K]
        pressure2 : shape that broadcasts
            Pressure at the end. [Pa]

        Returns
        -------
        IsentropicSlopes
            NaN where a state lies outside the range.

        Notes
        -----
        From ``dh = T ds + dp / rho``: with ``ds`` the change of the start's entropy,
        ``d(h2 - h1) = (T2 - T1) ds + (p2 / rho2) d ln p2 - (p1 / rho1) d ln p1``.
        """
        x1, t1, x2 = np.broadcast_arrays(
            logarithm(pressure1), logarithm(temperature1), logarithm(pressure2)
        )
        start = self._first.gibbs(x1, t1)
        t2, end = isentropic_end(self._first.gibbs, x1, t1, x2, start)
        return _with_slopes(self.gas_constant, (x1, t1, start), (x2, t2, end))


def isentropic_end(
    gibbs_of: Callable[[Floats, Floats], Gibbs], x1: Floats, t1: Floats, x2: Floats, start: Gibbs
) -> tuple[Floats, Gibbs]:
    """Find the logarithm of temperature after an isentropic change, by Newton's rule.

    Parameters
    ----------
    gibbs_of : callable
        Reduced Gibbs energy at ``(ln p, ln T)``.
    x1, t1, x2 : (cards,)
        ``ln p`` and ``ln T`` at the start, ``ln p`` at the end. [-]
    start : Gibbs
        At the start.

    Returns
    -------
    t2 : (cards,)
        ``ln T`` at the end. [-]
    end : Gibbs
        There.
    """
    wanted = gas_gibbs.entropy(start, x1)
    t2 = t1 + gas_gibbs.isentropic_slope(start) * (x2 - x1)
    for _ in range(40):
        end = gibbs_of(x2, t2)
        step = (wanted - gas_gibbs.entropy(end, x2)) / gas_gibbs.heat_capacity(end)
        t2 = t2 + np.clip(step, -0.2, 0.2)
        if not np.any(np.abs(step) > 1e-9):
            break
    return t2, gibbs_of(x2, t2)


def _with_slopes(
    gas_constant: float,
    first: tuple[Floats, Floats, Gibbs],
    second: tuple[Floats, Floats, Gibbs],
) -> IsentropicSlopes:
    (x1, t1, start), (x2, t2, end) = first, second
    temperature1, temperature2 = np.exp(t1), np.exp(t2)
    z1, z2 = gas_gibbs.compressibility(start), gas_gibbs.compressibility(end)
    cp1, cp2 = gas_gibbs.heat_capacity(start), gas_gibbs.heat_capacity(end)
    zero = np.zeros_like(z1)
    # Slopes by (ln p1, T1, ln p2); entropy over R.
    entropy = np.stack([-(z1 + start.by_xt), cp1 / temperature1, zero], axis=-1)
    last = np.stack([zero, zero, np.ones_like(z1)], axis=-1)
    ln_t2 = (entropy + (z2 + end.by_xt)[..., None] * last) / cp2[..., None]
    by_x1, by_t1 = gas_gibbs.ln_density_slopes(start)
    by_x2, by_t2 = gas_gibbs.ln_density_slopes(end)
    density2 = by_x2[..., None] * last + by_t2[..., None] * ln_t2
    rise = (temperature2 - temperature1)[..., None] * entropy
    rise[..., 2] += z2 * temperature2
    rise[..., 0] -= z1 * temperature1
    ln_rho1 = x1 - np.log(z1 * gas_constant * temperature1)
    ln_rho2 = x2 - np.log(z2 * gas_constant * temperature2)
    exponents = path_exponents(x2 - x1, ln_rho2 - ln_rho1, t2 - t1, start)
    return IsentropicSlopes(
        temperature2,
        np.exp(ln_rho1),
        np.exp(ln_rho2),
        gas_constant * (temperature1 * start.by_t - temperature2 * end.by_t),
        *exponents,
        np.stack([by_x1, by_t1 / temperature1, zero], axis=-1),
        density2,
        gas_constant * rise,
        temperature2[..., None] * ln_t2,
    )


def path_exponents(
    pressure_step: Floats, density_step: Floats, temperature_step: Floats, start: Gibbs
) -> tuple[Floats, Floats]:
    """Mean volume and temperature exponents of an isentropic path.

    Parameters
    ----------
    pressure_step, density_step, temperature_step : (cards,)
        Differences of the logarithms between its ends. [-]
    start : Gibbs
        Whose local exponents hold where the pressures are equal.

    Returns
    -------
    tuple of arrays
        ``d ln p / d ln rho`` and ``1 / (1 - d ln T / d ln p)`` over the whole path. [-]
    """
    still = np.abs(pressure_step) < 1e-9
    safe = np.where(still, 1.0, pressure_step)
    volume = safe / np.where(still, 1.0, density_step)
    heat = 1 / (1 - temperature_step / safe)
    return (
        np.where(still, gas_gibbs.volume_exponent(start), volume),
        np.where(still, gas_gibbs.temperature_exponent(start), heat),
    )
