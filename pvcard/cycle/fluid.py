"""The gas inside the cylinder as two polynomials, fast enough for a time-stepping loop.

The state of the model is mass and internal energy, so that both balances close to rounding; what is
needed back is pressure and temperature from density and specific energy. Both are smooth, so two
polynomials fitted to the equation of state replace it. The error of the fit is kept and bounded.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple, Protocol

import numpy as np

from pvcard.errors import GasError
from pvcard.types import Floats

# Powers of density and of energy tried in turn until the fit is good.
_DEGREES = ((1, 1), (2, 3), (3, 4), (4, 5), (5, 6), (6, 7), (8, 8))
_GOOD_FIT = 1e-6
_WORST_FIT = 1e-4
# How far beyond the line states the fit must reach: a cylinder undershoots and overshoots them.
_PRESSURE_MARGIN = (0.6, 1.7)
_COLDER, _HOTTER = 0.9, 1.15


class GasFace(Protocol):
    """What this room asks of a gas; `pvcard.gas` provides it."""

    def density(self, pressure: Floats, temperature: Floats) -> Floats:
        """Density. [kg/m3]."""

    def enthalpy(self, pressure: Floats, temperature: Floats) -> Floats:
        """Specific enthalpy. [J/kg]."""

    def volume_exponent(self, pressure: Floats, temperature: Floats) -> Floats:
        """Isentropic volume exponent. [-]."""


class LineState(NamedTuple):
    """Gas at rest in a line: density [kg/m3], enthalpy [J/kg, datum of the fluid], exponent [-]."""

    density: Floats
    enthalpy: Floats
    exponent: Floats


class Reach(NamedTuple):
    """Line states of a batch, (lowest, highest) or highest, in Pa and K."""

    suction_pressure: tuple[float, float]
    discharge_pressure: float
    suction_temperature: tuple[float, float]

    def exponent(self, gas: GasFace) -> float:
        """Isentropic volume exponent at suction. [-]."""
        pressure, temperature = self.suction_pressure[0], self.suction_temperature[1]
        return float(gas.volume_exponent(np.array([pressure]), np.array([temperature]))[0])


@dataclass(frozen=True)
class Fluid:
    """Pressure and temperature from density and specific energy; made by `fit_fluid`."""

    gas: GasFace
    coefficients: Floats  # (2 * density powers, energy powers)
    density_scale: tuple[float, float]  # kg/m3: centre, half width
    energy_scale: tuple[float, float]  # J/kg: centre, half width
    datum: float  # J/kg, energy of the gas where the fluid's is zero
    fit_error: float  # largest relative error over the fitted range

    def state(self, density: Floats, energy: Floats) -> tuple[Floats, Floats]:
        """Pressure and temperature of the gas.

        Parameters
        ----------
        density : any shape
            [kg/m3]
        energy : same shape
            Specific internal energy above the fluid's datum. [J/kg]

        Returns
        -------
        pressure, temperature : same shape
            [Pa], [K]
        """
        shape = density.shape
        across = (density.ravel() - self.density_scale[0]) / self.density_scale[1]
        along = (energy.ravel() - self.energy_scale[0]) / self.energy_scale[1]
        powers = np.empty((self.coefficients.shape[1], along.size))
        powers[0] = 1.0
        for power in range(1, len(powers)):
            np.multiply(powers[power - 1], along, out=powers[power])
        rows = (self.coefficients @ powers).reshape(2, -1, along.size)
        value = rows[:, -1]
        for power in range(rows.shape[1] - 2, -1, -1):
            value = value * across
            value += rows[:, power]
        return density * value[0].reshape(shape), value[1].reshape(shape)

    def line(self, pressure: Floats, temperature: Floats) -> LineState:
        """State of the gas in a line.

        Parameters
        ----------
        pressure, temperature : same shape
            Absolute [Pa] and [K].

        Returns
        -------
        LineState
            Each of that shape.
        """
        return LineState(
            self.gas.density(pressure, temperature),
            self.gas.enthalpy(pressure, temperature) - self.datum,
            self.gas.volume_exponent(pressure, temperature),
        )

    def state_of_enthalpy(self, pressure: Floats, enthalpy: Floats) -> tuple[Floats, Floats]:
        """Density and temperature of gas of known pressure and enthalpy.

        Parameters
        ----------
        pressure : any shape
            [Pa]
        enthalpy : same shape
            Above the fluid's datum. [J/kg]

        Returns
        -------
        density, temperature : same shape
            [kg/m3], [K]
        """
        # First guess p v = G u with the slope of the fit; then v from the polynomials, which
        # converges fast because p v hardly depends on density.
        slope = self._energy_slope()
        energy = enthalpy / (1 + slope)
        density = pressure / (slope * energy)
        for _ in range(6):
            found, temperature = self.state(density, energy)
            pressure_over_density = found / density
            energy = enthalpy - pressure_over_density
            density = pressure / pressure_over_density
        return density, temperature

    def _energy_slope(self) -> float:
        centre = np.array([self.density_scale[0]]), np.array([self.energy_scale[0]])
        pressure, _ = self.state(*centre)
        return float(pressure[0] / (self.density_scale[0] * self.energy_scale[0]))


def _fit(
    across: Floats, along: Floats, wanted: Floats, degrees: tuple[int, int]
) -> tuple[Floats, float]:
    terms = np.polynomial.polynomial.polyvander2d(across, along, degrees)
    weighted = terms[:, None, :] / wanted.T[:, :, None]
    coefficients = np.empty((2, (degrees[0] + 1), (degrees[1] + 1)))
    worst = 0.0
    for output in range(2):
        system = weighted[:, output]
        solution = np.linalg.lstsq(system, np.ones(len(system)), rcond=1e-15)[0]
        worst = max(worst, float(np.abs(system @ solution - 1).max()))
        coefficients[output] = solution.reshape(degrees[0] + 1, degrees[1] + 1)
    return coefficients.reshape(-1, degrees[1] + 1), worst


def _nodes(low: float, high: float, count: int) -> Floats:
    nodes: Floats = 0.5 * (low + high) - 0.5 * (high - low) * np.cos(
        np.pi * np.arange(count) / (count - 1)
    )
    return nodes


def _grid(gas: GasFace, reach: Reach) -> tuple[Floats, Floats]:
    """States to fit: from below the isentrope up to above the discharge temperature."""
    low, high = reach.suction_pressure[0], reach.discharge_pressure
    pressures = np.exp(
        _nodes(np.log(low * _PRESSURE_MARGIN[0]), np.log(high * _PRESSURE_MARGIN[1]), 22)
    )
    exponent = reach.exponent(gas)
    slope = (exponent - 1) / exponent
    coldest = reach.suction_temperature[0] * (pressures / reach.suction_pressure[1]) ** slope
    coldest = np.clip(coldest, 0.9 * reach.suction_temperature[0], None) * _COLDER
    hottest = reach.suction_temperature[1] * (high / low) ** slope
    hottest = np.maximum(hottest * _HOTTER, coldest * 1.05)
    share = _nodes(0.0, 1.0, 14)
    temperatures = coldest[:, None] + (hottest - coldest)[:, None] * share
    return np.repeat(pressures, len(share)), temperatures.ravel()


def fit_fluid(gas: GasFace, reach: Reach) -> Fluid:
    """Fit the two polynomials over the states a cylinder can reach.

    Parameters
    ----------
    gas : a gas of `pvcard.gas`
        Asked for density and enthalpy at some 300 states.
    reach : Reach
        Line states of all cylinders of the batch.

    Returns
    -------
    Fluid
        With the largest relative error of pressure and temperature.

    Notes
    -----
    ``p / rho`` and ``T`` as polynomials in density and specific energy, least squares on the
    relative error; the degree grows until the error is below 1e-6. Fitted from 0.6 times suction to
    1.7 times discharge pressure, from 10 % colder than the isentrope to 15 % above its end. The
    datum of energy is moved so that ``p v`` is in proportion to the energy as nearly as possible,
    which makes the linear guess of the integrator exact for a perfect gas.
    An error above 1e-4 (a state close to condensation) raises `GasError`.
    """
    pressures, temperatures = _grid(gas, reach)
    density = gas.density(pressures, temperatures)
    pressure_volume = pressures / density
    energy = gas.enthalpy(pressures, temperatures) - pressure_volume
    usable = np.isfinite(density) & np.isfinite(energy) & (density > 0)
    if not usable.all():
        raise _uneven(f"{int((~usable).sum())} of {usable.size} states undefined")
    line = np.polynomial.Polynomial.fit(energy, pressure_volume, 1).convert().coef
    datum = float(-line[0] / line[1])
    energy = energy - datum
    half = 0.5 * float(density.max())
    energy_scale = (
        0.5 * float(energy.max() + energy.min()),
        0.5 * float(energy.max() - energy.min()),
    )
    across, along = density / half - 1, (energy - energy_scale[0]) / energy_scale[1]
    wanted = np.vstack([pressure_volume, temperatures])
    best: tuple[Floats, float] | None = None
    for degrees in _DEGREES:
        tried = _fit(across, along, wanted, degrees)
        if best is None or tried[1] < best[1]:
            best = tried
        if tried[1] < _GOOD_FIT:
            break
    assert best is not None
    if best[1] > _WORST_FIT:
        raise _uneven(f"fit error {best[1]:.1e}")
    return Fluid(gas, best[0], (half, half), energy_scale, datum, best[1])


def _uneven(found: str) -> GasError:
    return GasError(
        "the states a cylinder passes are not all plain gas: too close to condensation",
        found=found,
        expected=f"states that polynomials follow within {_WORST_FIT:.0e}",
        advice="Check suction temperature, pressures and composition",
    )
