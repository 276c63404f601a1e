"""Laws of flow through valves and leaks: nozzle, laminar slot, labyrinth.

Used forward by the cylinder model and inverse by the leak estimate. Everywhere the gas at rest
upstream is given by its absolute pressure and its density, so that a real gas enters by its density
and no compressibility factor is needed; the exponent is the isentropic *volume* exponent. All
arguments broadcast. Pressures in Pa, densities in kg/m3, areas in m2, flows in kg/s.

An "effective" area is that of an ideal nozzle: the discharge coefficient is inside it.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from pvcard.types import Floats

# Degree of the polynomial that stands for the nozzle law; see `nozzle_series`.
_SERIES_DEGREE = 5


def critical_ratio(exponent: Floats | float) -> Floats:
    """Pressure ratio below which a nozzle is choked.

    Parameters
    ----------
    exponent : any shape
        Isentropic volume exponent, above 1. [-]

    Returns
    -------
    ratio : same shape
        Downstream over upstream pressure. [-]

    Notes
    -----
    ``(2 / (k + 1)) ** (k / (k - 1))`` [1]_.

    References
    ----------
    .. [1] M. J. Moran and H. N. Shapiro, *Fundamentals of Engineering Thermodynamics*, chapter 9,
       flow in nozzles of an ideal gas with constant specific heats.

    Examples
    --------
    >>> critical_ratio(1.4).round(6)
    np.float64(0.528282)
    """
    k = np.asarray(exponent, dtype=np.float64)
    ratio: Floats = (2 / (k + 1)) ** (k / (k - 1))
    return ratio


def nozzle_function(pressure_ratio: Floats | float, exponent: Floats | float) -> Floats:
    """Mass flow of an ideal nozzle, freed of area, pressure and density.

    Parameters
    ----------
    pressure_ratio : any shape
        Downstream over upstream pressure, 0 to 1; above 1 the flow is zero. [-]
    exponent : any shape
        Isentropic volume exponent, above 1. [-]

    Returns
    -------
    flow : broadcast shape
        ``mass flow / (area * sqrt(upstream pressure * upstream density))``. [-]

    Notes
    -----
    ``sqrt(2 k / (k - 1) (r^(2/k) - r^((k+1)/k)))`` and constant below the critical ratio [1]_.

    References
    ----------
    .. [1] As for `critical_ratio`.

    Examples
    --------
    >>> nozzle_function(0.2, 1.4).round(4)
    np.float64(0.6847)
    """
    k = np.asarray(exponent, dtype=np.float64)
    ratio = np.clip(pressure_ratio, critical_ratio(k), 1.0)
    part = ratio ** (1 / k)
    flow: Floats = np.sqrt(2 * k / (k - 1) * part * np.maximum(part - ratio, 0.0))
    return flow


def nozzle_flow(
    area: Floats | float,
    upstream_pressure: Floats | float,
    upstream_density: Floats | float,
    downstream_pressure: Floats | float,
    exponent: Floats | float,
) -> Floats:
    """Mass flow through a nozzle or orifice, choked or not.

    Parameters
    ----------
    area : any shape
        Effective area. [m2]
    upstream_pressure, downstream_pressure : any shape
        Absolute. [Pa]
    upstream_density : any shape
        Of the gas at rest upstream. [kg/m3]
    exponent : any shape
        Isentropic volume exponent. [-]

    Returns
    -------
    flow : broadcast shape
        Zero where the downstream pressure is the higher one. [kg/s]

    Notes
    -----
    ``A sqrt(p1 rho1)`` times `nozzle_function`; for an ideal gas ``sqrt(p1 rho1) = p1 / sqrt(R
    T1)``.

    Examples
    --------
    >>> nozzle_flow(0.001, 1e6, 1e6 / (287.0 * 360), 5e5, 1.4).round(3)
    np.float64(2.13)
    """
    ratio = np.asarray(downstream_pressure) / upstream_pressure
    flow: Floats = (
        area * np.sqrt(upstream_pressure * upstream_density) * nozzle_function(ratio, exponent)
    )
    return flow


def nozzle_area(
    flow: Floats | float,
    upstream_pressure: Floats | float,
    upstream_density: Floats | float,
    downstream_pressure: Floats | float,
    exponent: Floats | float,
) -> Floats:
    """Area of the ideal nozzle that passes a given flow: `nozzle_flow` solved for the area.

    Parameters
    ----------
    flow : any shape
        Mass flow. [kg/s]
    upstream_pressure, upstream_density, downstream_pressure, exponent : any shape
        As in `nozzle_flow`.

    Returns
    -------
    area : broadcast shape
        NaN where no pressure difference drives a flow. [m2]

    Examples
    --------
    >>> float(nozzle_area(2.13, 1e6, 1e6 / (287.0 * 360), 5e5, 1.4).round(6))
    0.001
    """
    unit = nozzle_flow(1.0, upstream_pressure, upstream_density, downstream_pressure, exponent)
    area: Floats = np.divide(
        flow, unit, out=np.full(np.broadcast(flow, unit).shape, np.nan), where=unit > 0
    )
    return area


@lru_cache(maxsize=256)
def _series(exponent: float) -> tuple[float, ...]:
    drop_limit = 1 - float(critical_ratio(exponent))
    nodes = np.cos(np.pi * (np.arange(24) + 0.5) / 24)
    drop = 0.5 * drop_limit * (1 + nodes)
    wanted = nozzle_function(1 - drop, exponent) ** 2 / drop
    fit = np.polynomial.Polynomial.fit(drop, wanted, _SERIES_DEGREE).convert()
    return (*(float(value) for value in fit.coef), drop_limit)


def nozzle_series(exponent: Floats | float) -> Floats:
    """Coefficients that replace the powers of the nozzle law in a time-stepping loop.

    Parameters
    ----------
    exponent : (cards,) or ()
        Isentropic volume exponent, 1.02 to 2. [-]

    Returns
    -------
    coefficients : (7, cards) or (7,)
        Six coefficients of a polynomial in the relative pressure drop ``x = 1 - p2/p1``, rising
        powers, then the drop at which the nozzle chokes. [-]

    Notes
    -----
    The square of `nozzle_function` divided by ``x`` is smooth from 0 to the critical drop, so
    ``nozzle_function = sqrt(x P(x))`` with a polynomial of degree 5. Relative error below 2e-6 for
    exponents from 1.05 to 1.8 (tested), while two powers an evaluation are saved.

    Examples
    --------
    >>> nozzle_series(1.4)[0].round(4)
    np.float64(2.0)
    """
    values = np.asarray(exponent, dtype=np.float64)
    table = np.array([_series(round(float(value), 9)) for value in values.ravel()])
    coefficients: Floats = np.ascontiguousarray(np.moveaxis(table, 0, -1)).reshape(
        (_SERIES_DEGREE + 2, *values.shape)
    )
    return coefficients


def series_value(drop: Floats, coefficients: Floats) -> Floats:
    """Square of the nozzle function divided by the relative pressure drop, from `nozzle_series`.

    Parameters
    ----------
    drop : (..., cards)
        ``1 - p2/p1``, already limited to the critical drop. [-]
    coefficients : (7, cards)
        From `nozzle_series`.

    Returns
    -------
    value : (..., cards)
        Tends to 2, the incompressible law, as the drop tends to 0. [-]

    Examples
    --------
    >>> series_value(np.array([0.0]), nozzle_series(np.array([1.3]))).round(4)
    array([2.])
    """
    value: Floats = coefficients[_SERIES_DEGREE] * drop + coefficients[_SERIES_DEGREE - 1]
    for power in range(_SERIES_DEGREE - 2, -1, -1):
        value *= drop
        value += coefficients[power]
    return value


def slot_conductance(
    width: Floats | float, gap: Floats | float, length: Floats | float, viscosity: Floats | float
) -> Floats:
    """Conductance of a narrow slot with laminar flow, for `slot_flow`.

    Parameters
    ----------
    width : any shape
        Across the flow, a circumference for rings and packing. [m]
    gap : any shape
        Height of the slot. [m]
    length : any shape
        Along the flow. [m]
    viscosity : any shape
        Dynamic viscosity of the gas. [Pa s]

    Returns
    -------
    conductance : broadcast shape
        [m3/(Pa s)]

    Notes
    -----
    ``w s^3 / (12 mu L)``: flow between parallel plates, holding while the Reynolds number
    ``2 m / (w mu)`` stays below some 2000.

    Examples
    --------
    >>> float(slot_conductance(1.0, 1e-5, 0.01, 1e-5).round(13))
    8.333e-10
    """
    conductance: Floats = np.asarray(width * np.power(gap, 3) / (12 * viscosity * length))
    return conductance


def slot_flow(
    conductance: Floats | float,
    upstream_pressure: Floats | float,
    upstream_density: Floats | float,
    downstream_pressure: Floats | float,
) -> Floats:
    """Laminar flow of a gas through a narrow slot.

    Parameters
    ----------
    conductance : any shape
        From `slot_conductance`. [m3/(Pa s)]
    upstream_pressure, downstream_pressure : any shape
        Absolute. [Pa]
    upstream_density : any shape
        [kg/m3]

    Returns
    -------
    flow : broadcast shape
        Negative where the downstream pressure is the higher one (the density is then still
        that named upstream: the caller chooses the side). [kg/s]

    Notes
    -----
    Isothermal laminar flow, density in proportion to pressure along the slot:
    ``m = K (rho1 / p1) (p1^2 - p2^2) / 2``. It never chokes.

    Examples
    --------
    >>> float(slot_flow(1e-9, 2e6, 20.0, 1e6).round(6))
    0.015
    """
    difference = np.square(upstream_pressure) - np.square(downstream_pressure)
    flow: Floats = np.asarray(conductance * (upstream_density / upstream_pressure) * difference / 2)
    return flow


def labyrinth_flow(
    area: Floats | float,
    throttlings: Floats | float,
    upstream_pressure: Floats | float,
    upstream_density: Floats | float,
    downstream_pressure: Floats | float,
) -> Floats:
    """Flow through a row of throttlings, each of which destroys the velocity behind it.

    Parameters
    ----------
    area : any shape
        Flow area of one throttling, coefficient included. [m2]
    throttlings : any shape
        Their number, 1 or more. [-]
    upstream_pressure, downstream_pressure : any shape
        Absolute. [Pa]
    upstream_density : any shape
        [kg/m3]

    Returns
    -------
    flow : broadcast shape
        Zero where the downstream pressure is the higher one. [kg/s]

    Notes
    -----
    ``A sqrt((p1^2 - p2^2) (rho1 / p1) / (N + ln(p1 / p2)))`` [1]_, for an ideal gas with
    ``rho1 / p1 = 1 / (R T1)``. Choking of the last throttling is not in it: use it for three and
    more.

    References
    ----------
    .. [1] H. M. Martin, "Labyrinth packings", *Engineering*, 1908 (formula from memory of the
       publication).

    Examples
    --------
    >>> labyrinth_flow(20e-6, 5, 30e5, 30e5 / (518.3 * 390), 10e5).round(5)
    np.float64(0.05095)
    """
    high = np.maximum(upstream_pressure, downstream_pressure)
    difference = np.square(high) - np.square(downstream_pressure)
    resistance = throttlings + np.log(high / downstream_pressure)
    flow: Floats = area * np.sqrt(difference * (upstream_density / upstream_pressure) / resistance)
    return flow


def incompressible_pressure_drop(
    volume_flow: Floats | float, density: Floats | float, area: Floats | float
) -> Floats:
    """Pressure drop of a valve at small Mach number.

    Parameters
    ----------
    volume_flow : any shape
        [m3/s]
    density : any shape
        [kg/m3]
    area : any shape
        Effective area. [m2]

    Returns
    -------
    drop : broadcast shape
        [Pa]

    Notes
    -----
    ``rho / 2 (Q / A)^2``: the limit of `nozzle_flow` for small drops.

    Examples
    --------
    >>> float(incompressible_pressure_drop(0.25, 8.0, 30e-4).round(1))
    27777.8
    """
    drop: Floats = np.asarray(0.5 * density * np.square(np.asarray(volume_flow) / area))
    return drop


def orifice_expansibility(
    diameter_ratio: Floats | float, pressure_ratio: Floats | float, exponent: Floats | float
) -> Floats:
    """Expansibility factor of an orifice plate in a pipe.

    Parameters
    ----------
    diameter_ratio : any shape
        Orifice over pipe diameter. [-]
    pressure_ratio : any shape
        Downstream over upstream absolute pressure, 0.75 to 1. [-]
    exponent : any shape
        Isentropic volume exponent. [-]

    Returns
    -------
    factor : broadcast shape
        [-]

    Notes
    -----
    ``1 - (0.351 + 0.256 b^4 + 0.93 b^8) (1 - r^(1/k))`` [1]_.

    References
    ----------
    .. [1] ISO 5167-2:2003, expansibility factor (from memory of the standard; check before
       quoting).

    Examples
    --------
    >>> float(orifice_expansibility(0.6, 0.9, 1.3).round(5))
    0.96888
    """
    fourth = np.power(diameter_ratio, 4)
    shape = 0.351 + 0.256 * fourth + 0.93 * np.square(fourth)
    factor: Floats = np.asarray(1 - shape * (1 - np.power(pressure_ratio, 1 / exponent)))
    return factor
