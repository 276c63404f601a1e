"""Polynomials in two variables over a strip of the plane, interpolated at Chebyshev nodes [1]_.

References
----------
.. [1] L. N. Trefethen, *Approximation Theory and Approximation Practice*, SIAM 2013, chapters 3, 4
   and 8.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.polynomial import chebyshev

from pvcard.gas_gibbs import Gibbs
from pvcard.types import Floats

# States evaluated at a time: their powers and sums stay in the cache.
_CHUNK = 4096
# How far outside its strip a chart still answers, in half-widths; covers the rounding of its own
# edges.
_EDGE = 1 + 2e-3
# Functions of the second chart.
LN_Z, ENTROPY, ENERGY = 0, 1, 2


class Strip(NamedTuple):
    """The part of the plane ln p, ln T a chart covers: ``|xi| <= 1`` and ``|eta| <= 1``.

    ``xi = (x - middle) / half`` and ``eta = (t - centre - rise xi) / width``.
    """

    middle: float
    half: float
    centre: float
    rise: float
    width: float

    def local(self, x: Floats, t: Floats) -> tuple[Floats, Floats]:
        """Return xi and eta of ln p and ln T, NaN where xi leaves the strip."""
        xi = self.along(x)
        return xi, (t - self.centre - self.rise * xi) / self.width

    def along(self, x: Floats) -> Floats:
        """Return xi of ln p, NaN where it leaves the strip."""
        xi: Floats = (x - self.middle) / self.half
        xi[np.abs(xi) > _EDGE] = np.nan
        return xi

    def plane(self, xi: Floats, eta: Floats) -> tuple[Floats, Floats]:
        """Return ln p and ln T of xi and eta."""
        return self.middle + self.half * xi, self.centre + self.rise * xi + self.width * eta


@lru_cache
def nodes(count: int) -> Floats:
    """Return the Chebyshev nodes of the first kind, ascending from -1 to 1."""
    result: Floats = chebyshev.chebpts1(count)
    return result


@lru_cache
def interpolation(count: int) -> Floats:
    """Return the matrix from values at `count` Chebyshev nodes to Chebyshev coefficients."""
    share = np.full((count, 1), 2 / count)
    share[0] = 1 / count
    result: Floats = chebyshev.chebvander(nodes(count), count - 1).T * share
    return result


@lru_cache
def _slope_matrix(count: int) -> Floats:
    """Return the matrix from Chebyshev coefficients to those of the derivative."""
    result = np.zeros((count, count))
    if count > 1:
        result[:-1] = chebyshev.chebder(np.eye(count), axis=0)
    return result


@lru_cache
def _power_matrix(count: int) -> Floats:
    """Return the matrix from Chebyshev coefficients to those of plain powers."""
    result = np.zeros((count, count))
    for degree in range(count):
        powers = chebyshev.cheb2poly(np.eye(count)[degree])
        result[: len(powers), degree] = powers
    return result


class _Sums:
    """Several polynomials in xi and eta over one basis, evaluated together.

    Parameters
    ----------
    coefficients : (functions, degree_xi + 1, degree_eta + 1)
        Chebyshev coefficients.
    """

    def __init__(self, coefficients: Floats) -> None:
        self.functions, self.rows, self.columns = coefficients.shape
        powers = _power_matrix(self.rows) @ coefficients @ _power_matrix(self.columns).T
        ordered = powers.transpose(2, 0, 1)  # by power of eta, function, power of xi
        self._matrix = np.ascontiguousarray(ordered.reshape(-1, self.rows))

    def __call__(self, xi: Floats, eta: Floats) -> Floats:
        """Return (functions, n) at states (n,): powers in xi, then Horner's rule in eta."""
        powers = np.empty((self.rows, len(xi)))
        powers[0] = 1.0
        for degree in range(1, self.rows):
            np.multiply(powers[degree - 1], xi, out=powers[degree])
        inner = (self._matrix @ powers).reshape(self.columns, self.functions, len(xi))
        total: Floats = inner[-1]
        for degree in range(self.columns - 2, -1, -1):
            total *= eta
            total += inner[degree]
        return total


def _in_chunks(
    work: Callable[[Floats, Floats], Floats], functions: int, first: Floats, second: Floats
) -> Floats:
    """Return (functions, *shape) of a function of two broadcast arrays, a cacheful at a time."""
    first, second = np.broadcast_arrays(
        np.asarray(first, dtype=np.float64), np.asarray(second, dtype=np.float64)
    )
    shape = first.shape
    first, second = first.ravel(), second.ravel()
    if len(first) <= _CHUNK:
        return work(first, second).reshape(functions, *shape)
    result = np.empty((functions, len(first)))
    for start in range(0, len(first), _CHUNK):
        part = slice(start, start + _CHUNK)
        result[:, part] = work(first[part], second[part])
    return result.reshape(functions, *shape)


class FirstChart:
    """``F`` and its slopes over ln p and ln T."""

    def __init__(self, strip: Strip, coefficients: Floats) -> None:
        """Take the strip and Chebyshev coefficients (degree + 1, degree + 1) of ``F``."""
        self.strip = strip
        count = coefficients.shape[0]
        self.degree = count - 1
        slope = _slope_matrix(count)

        def by_eta(c: Floats, power: int = 1) -> Floats:
            for _ in range(power):
                c = c @ slope.T
            return c / strip.width**power

        def by_x(c: Floats) -> Floats:
            result: Floats = (slope @ c - strip.rise * by_eta(c)) / strip.half
            return result

        value = coefficients
        once, cross = by_x(value), by_x(by_eta(value))
        stack = [value, once, by_eta(value), by_x(once), cross, by_eta(value, 2)]
        self._sums = _Sums(np.array(stack))

    def _chunk(self, x: Floats, t: Floats) -> Floats:
        xi, eta = self.strip.local(x, t)
        eta[np.abs(eta) > _EDGE] = np.nan
        return self._sums(xi, eta)

    def gibbs(self, x: Floats, t: Floats) -> Gibbs:
        """Return the reduced Gibbs energy at ln p and ln T that broadcast, NaN outside."""
        return Gibbs(*_in_chunks(self._chunk, 6, x, t))


class SecondChart:
    """``ln Z``, ``s / R + x`` and ``u / (R Z T)`` over ln p and tau, each with its two slopes.

    The edges of the strip are curves here: ``eta = alpha(xi) tau + beta(xi)``.
    """

    def __init__(self, strip: Strip, edges: Floats, coefficients: Floats) -> None:
        """Take Chebyshev coefficients: edges (2, terms), functions (3, degree + 1, degree + 1)."""
        self._strip = strip
        self.degree = coefficients.shape[1] - 1
        slope_xi = _slope_matrix(coefficients.shape[1])
        slope = _slope_matrix(edges.shape[1])
        lines = np.stack([edges, edges @ slope.T]).reshape(4, -1)
        self._edges = _Sums(lines[:, :, None])  # alpha, beta and their slopes by xi
        # For each function its value and its slopes by xi and eta.
        self._sums = []
        for c in coefficients:
            self._sums.append(_Sums(np.array([c, slope_xi @ c, c @ slope_xi.T])))

    def _chunk(self, which: int, x: Floats, tau: Floats) -> Floats:
        xi = self._strip.along(x)
        alpha, beta, alpha_slope, beta_slope = self._edges(xi, xi)
        eta = alpha * tau + beta
        eta[np.abs(eta) > _EDGE] = np.nan
        sums = self._sums[which](xi, eta)
        alpha_slope *= tau
        alpha_slope += beta_slope
        alpha_slope *= sums[2]
        sums[1] += alpha_slope
        sums[1] /= self._strip.half
        sums[2] *= alpha
        return sums

    def evaluate(self, which: int, x: Floats, tau: Floats) -> Floats:
        """Return (3, *shape): value, slope by x at constant tau, slope by tau at constant x."""
        return _in_chunks(lambda a, b: self._chunk(which, a, b), 3, x, tau)
