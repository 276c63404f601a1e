"""Build the table of a gas and find its error."""

from __future__ import annotations

from collections.abc import Callable
from functools import partial
from typing import NamedTuple

import numpy as np

from pvcard import gas_gibbs
from pvcard.errors import GasError
from pvcard.gas_charts import (
    ENERGY,
    ENTROPY,
    LN_Z,
    FirstChart,
    SecondChart,
    Strip,
    interpolation,
    nodes,
)
from pvcard.gas_gibbs import Gibbs
from pvcard.gas_table import GasTable, TableError, TableSource
from pvcard.types import Floats

# A table whose density or temperature is further off than this is refused (the promise made to
# users).
LARGEST_ERROR = 2e-4
_LARGEST_EXPONENT_ERROR = 1e-3
# What the choice of the degree aims at: density and temperature relative, entropy over R, energies
# over R T.
_AIMED_ERROR = 5e-7
# The volume exponent is a second derivative and may be further off by this factor.
_EXPONENT_SHARE = 20
# Numbers of nodes a side, tried one after the other.
_NODE_COUNTS = (9, 13, 17, 23)
_LOWEST_DEGREE = 4
_CHECKED_STATES = 60
# Slopes d ln rho / d ln p at constant T above which a state counts as nearly critical and is left
# out: the first that allows a table with an acceptable error is taken.
_STIFFEST = (2.5, 2.0, 1.7)
# Pressures at which the cold edge is examined at first, and if some of it is not gas; and how far
# the edge then stays above what was found there, in ln T.
_FEW_PRESSURES, _EXAMINED_PRESSURES = 4, 9
_COLD_MARGIN = 0.003
# Terms of the polynomials for the edges of the second chart; they need not be exact, only smooth.
_EDGE_TERMS = 7


def _is_usable(source: TableSource, stiffest: float, x: float, t: float) -> bool:
    pressure, temperature = float(np.exp(x)), float(np.exp(t))
    gibbs = source.direct(np.array([pressure]), np.array([temperature]))
    stiffness = gas_gibbs.ln_density_slopes(gibbs)[0][0]
    if not 0 < stiffness < stiffest:
        return False
    return source.phase_problem(pressure, temperature) is None


def _coldest_usable(
    usable: Callable[[float, float], bool], x: float, cold: float, hot: float
) -> float:
    """Return the lowest ln T from which the gas is usable at a pressure, by bisection."""
    if usable(x, cold):
        return cold
    if not usable(x, hot):
        return np.inf
    for _ in range(12):
        middle = (cold + hot) / 2
        if usable(x, middle):
            hot = middle
        else:
            cold = middle
    return hot + _COLD_MARGIN


def _line_above(xi: Floats, height: Floats) -> tuple[float, float]:
    """Return centre and rise of the lowest line through the first point that leaves none above it.

    So the cold suction gas at the low end stays covered; the edge is lifted only as pressure grows.
    """
    if not np.all(np.isfinite(height)):
        return np.inf, 0.0
    rise = max(0.0, float(((height[1:] - height[0]) / (xi[1:] - xi[0])).max()))
    return float(height[0]) + rise, rise


def gas_strip(
    source: TableSource,
    pressure: tuple[float, float],
    temperature: tuple[float, float],
    stiffest: float = _STIFFEST[0],
) -> Strip:
    """Find the part of a range that is gas.

    Parameters
    ----------
    source : TableSource
        The gas.
    pressure, temperature : (2,)
        Lowest and highest value asked for. [Pa], [K]
    stiffest : ()
        Slope ``d ln rho / d ln p`` at constant T from which a state is left out as nearly critical.
        [-]

    Returns
    -------
    Strip
        The whole range, or above an edge that rises with pressure where the cold part is liquid,
        two-phase or nearly critical.

    Notes
    -----
    Raises `GasError` when nothing is left.
    """
    (low, high), (cold, hot) = np.log(pressure), np.log(temperature)
    middle, half = (low + high) / 2, (high - low) / 2
    usable = partial(_is_usable, source, stiffest)
    few = np.linspace(1, -1, _FEW_PRESSURES)
    if all(usable(middle + half * at, cold) for at in few):
        return Strip(middle, half, (cold + hot) / 2, 0.0, (hot - cold) / 2)
    xi = np.linspace(-1, 1, _EXAMINED_PRESSURES)
    edge = [_coldest_usable(usable, middle + half * at, cold, hot + half) for at in xi]
    centre, rise = _line_above(xi, np.array(edge))
    width = (hot - (centre - rise)) / 2
    if not (np.isfinite(centre) and width > 0.01):
        raise GasError(
            f"{source.name} is not a gas between {pressure[0] / 1e5:.4g} and "
            f"{pressure[1] / 1e5:.4g} bar and {temperature[0]:.4g} to {temperature[1]:.4g} K",
            advice="Check temperature, pressure unit (gauge or absolute) and gas analysis",
        )
    return Strip(middle, half, centre + width, rise, width)


def _first_coefficients(source: TableSource, strip: Strip, count: int) -> Floats:
    """Return Chebyshev coefficients (count, count) of the reduced Gibbs energy."""
    xi, eta = (grid.ravel() for grid in np.meshgrid(nodes(count), nodes(count), indexing="ij"))
    x, t = strip.plane(xi, eta)
    value = source.direct(np.exp(x), np.exp(t)).value.reshape(count, count)
    matrix = interpolation(count)
    result: Floats = matrix @ value @ matrix.T
    return result


def _edges(strip: Strip, first: FirstChart, count: int) -> Floats:
    """Return Chebyshev coefficients (2, count) of alpha and beta: tau to eta of the second
    chart."""
    xi = nodes(count)
    x = strip.middle + strip.half * xi
    tau = []
    for side in (-1.0, 1.0):
        t = strip.plane(xi, np.full(count, side))[1]
        tau.append(t + np.log1p(first.gibbs(x, t).by_x))
    low, high = tau
    lines = np.array([2 / (high - low), -(high + low) / (high - low)])
    result: Floats = lines @ interpolation(count).T
    return result


def _second_values(strip: Strip, first: FirstChart, edges: Floats, count: int) -> Floats:
    """Return (3, count, count): ln Z, s / R + x and u / (R Z T) at the nodes of the second
    chart."""
    basis = np.polynomial.chebyshev.chebvander(nodes(count), edges.shape[1] - 1)
    alpha, beta = (basis @ edges.T).T
    tau = (nodes(count)[None, :] - beta[:, None]) / alpha[:, None]
    x = np.broadcast_to((strip.middle + strip.half * nodes(count))[:, None], tau.shape)
    t = tau.copy()
    for _ in range(30):
        xi, eta = strip.local(x, t)
        t = np.where(np.abs(eta) > 1, strip.plane(xi, np.clip(eta, -1, 1))[1], t)
        gibbs = first.gibbs(x, t)
        step = (tau - t - np.log1p(gibbs.by_x)) / -gas_gibbs.ln_density_slopes(gibbs)[1]
        t = t + np.clip(step, -0.2, 0.2)
        if np.abs(step).max() < 1e-10:
            break
    z = gas_gibbs.compressibility(gibbs)
    entropy = gas_gibbs.entropy(gibbs, x) + x
    return np.array([np.log(z), entropy, -gibbs.by_t / z - 1])


class _Check(NamedTuple):
    """Random states of a strip, evaluated directly, against which every degree is tried."""

    aimed: float
    x: Floats
    t: Floats
    direct: Gibbs

    def first(self, chart: FirstChart) -> tuple[float, float, float, float]:
        """Errors of density, entropy, enthalpy and volume exponent."""
        fast = chart.gibbs(self.x, self.t)
        z = gas_gibbs.compressibility(self.direct)
        exponent = gas_gibbs.volume_exponent(self.direct)
        return (
            _largest(gas_gibbs.compressibility(fast) / z - 1),
            _largest(gas_gibbs.entropy(fast, self.x) - gas_gibbs.entropy(self.direct, self.x)),
            _largest(fast.by_t - self.direct.by_t),
            _largest(gas_gibbs.volume_exponent(fast) / exponent - 1),
        )

    def second(self, chart: SecondChart) -> tuple[float, float, float]:
        """Errors of temperature, entropy and internal energy."""
        z = gas_gibbs.compressibility(self.direct)
        tau = self.t + np.log(z)
        entropy = gas_gibbs.entropy(self.direct, self.x) + self.x
        energy = -self.direct.by_t - z
        return (
            _largest(np.expm1(np.log(z) - chart.evaluate(LN_Z, self.x, tau)[0])),
            _largest(chart.evaluate(ENTROPY, self.x, tau)[0] - entropy),
            _largest(chart.evaluate(ENERGY, self.x, tau)[0] * z - energy),
        )


def _largest(difference: Floats) -> float:
    """Return the largest size, infinite where something is not a number."""
    size = np.abs(difference)
    return float(size.max()) if np.all(np.isfinite(size)) else np.inf


def _checked_states(source: TableSource, strip: Strip) -> _Check:
    rng = np.random.default_rng(20080)
    # Crowded toward the edges, where polynomials err most, and the corners themselves.
    corners = [[-1.0, -1.0, 1.0, 1.0], [-1.0, 1.0, -1.0, 1.0]]
    inner = np.cos(np.pi * rng.uniform(size=(2, _CHECKED_STATES)))
    xi, eta = np.concatenate([inner, corners], axis=1)
    x, t = strip.plane(xi, eta)
    aimed = max(_AIMED_ERROR, source.inconsistency)
    return _Check(aimed, x, t, source.direct(np.exp(x), np.exp(t)))


def _fit_first(source: TableSource, strip: Strip, check: _Check) -> tuple[FirstChart, FirstChart]:
    """Return the first chart at its full degree and at the lowest that is good enough.

    The full one is well below the error aimed at, as the second chart is made from it.
    """
    for count in _NODE_COUNTS:
        coefficients = _first_coefficients(source, strip, count)
        full = FirstChart(strip, coefficients)
        if _is_good(check.first(full), max(check.aimed / 10, source.inconsistency)):
            break
    for degree in range(_LOWEST_DEGREE, count):
        chart = FirstChart(strip, coefficients[: degree + 1, : degree + 1])
        if _is_good(check.first(chart), check.aimed):
            return full, chart
    return full, full


def _is_good(errors: tuple[float, float, float, float], aimed: float) -> bool:
    return max(errors[:3]) < aimed and errors[3] < aimed * _EXPONENT_SHARE


def _fit_second(strip: Strip, first: FirstChart, check: _Check) -> SecondChart:
    """Return the second chart at the lowest degree that is good enough, else at the full one."""
    count = first.degree + 1
    edges = _edges(strip, first, count)[:, :_EDGE_TERMS]
    matrix = interpolation(count)
    coefficients = matrix @ _second_values(strip, first, edges, count) @ matrix.T
    for degree in range(_LOWEST_DEGREE, count):
        chart = SecondChart(strip, edges, coefficients[:, : degree + 1, : degree + 1])
        if max(check.second(chart)) < check.aimed:
            return chart
    return chart


def build_table(
    source: TableSource, pressure: tuple[float, float], temperature: tuple[float, float]
) -> GasTable:
    """Tabulate a gas and check the table against fresh random states.

    Parameters
    ----------
    source : TableSource
        The gas.
    pressure, temperature : (2,)
        Lowest and highest value to be covered. [Pa], [K]

    Returns
    -------
    GasTable
        With its error; what is not gas in the range is left out and noted.

    Notes
    -----
    Raises `GasError` when the range is not gas at all, or so close to the critical point that the
    table would be further off than `LARGEST_ERROR`.
    """
    for stiffest in _STIFFEST:
        table = _attempt(source, gas_strip(source, pressure, temperature, stiffest))
        error = table.error
        if error.volume_exponent > _LARGEST_EXPONENT_ERROR:
            continue
        if max(error.density, error.temperature) < LARGEST_ERROR:
            return table
    raise GasError(
        f"{source.name} is too close to its critical point for a table between "
        f"{pressure[0] / 1e5:.4g} and {pressure[1] / 1e5:.4g} bar from {temperature[0]:.4g} K",
        advice="Ask for a narrower range or a higher lowest temperature",
    )


def _attempt(source: TableSource, strip: Strip) -> GasTable:
    """Tabulate one strip, however well that goes."""
    check = _checked_states(source, strip)
    full, first = _fit_first(source, strip, check)
    second = _fit_second(strip, full, check)
    density, entropy, enthalpy, exponent = check.first(first)
    temperature, entropy_again, energy = check.second(second)
    error = TableError(
        density, max(entropy, entropy_again), enthalpy, exponent, temperature, energy
    )
    return GasTable(source, first, second, error)
