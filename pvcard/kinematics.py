"""Slider-crank motion of a piston with a finite connecting rod, seen from either cylinder end.

Angles are counted from the dead centre at which the volume of that end is smallest: for a crank
end 180 degrees after the head end's. Seen like this both ends obey one formula in which only the
sign of the rod's share differs: ``rod_sign`` is +1 for a head end and -1 for a crank end.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from pvcard.types import Floats

HEAD_END, CRANK_END = 1.0, -1.0


class Motion(NamedTuple):
    """Piston position as a fraction of the stroke and its derivatives by crank angle in radians."""

    travel: Floats
    slope: Floats
    curvature: Floats


def _rod_root(sine: Floats, ratio: Floats | float) -> Floats:
    root: Floats = np.sqrt(1 - np.square(ratio * sine))
    return root


class Place(NamedTuple):
    """Piston position as a fraction of the stroke and its first derivative by crank angle."""

    travel: Floats
    slope: Floats  # 1/rad


def motion(crank_angle_deg: Floats, ratio: Floats | float, rod_sign: Floats | float) -> Motion:
    """Fraction of the stroke travelled from an end's own dead centre, with two derivatives.

    Parameters
    ----------
    crank_angle_deg : (samples,) or (cards, samples)
        Crank angle from the dead centre of that end. [deg]
    ratio : () or (cards, 1)
        Crank radius over connecting rod length, below 1. [-]
    rod_sign : () or (cards, 1)
        +1 for a head end, -1 for a crank end. [-]

    Returns
    -------
    Motion
        ``travel`` from 0 to 1 [-], ``slope`` [1/rad] and ``curvature`` [1/rad2],
        each (samples,) or (cards, samples).

    Notes
    -----
    ``travel = (1 - cos t + sign (1 - q) / ratio) / 2`` with ``q = sqrt(1 - ratio^2 sin^2 t)``
    [1]_: exact for a rod of finite length. The two-term series is never used; it is wrong in
    volume by parts in a thousand.

    References
    ----------
    .. [1] R. S. Khurmi and J. K. Gupta, *Theory of Machines*, chapter 15: displacement, velocity
    and
       acceleration of the reciprocating parts, before the series is cut.

    Examples
    --------
    >>> motion(np.array([0.0, 90.0, 180.0]), 0.2, HEAD_END).travel.round(4)
    array([0.    , 0.5505, 1.    ])
    """
    angle = np.radians(crank_angle_deg)
    sine, cosine = np.sin(angle), np.cos(angle)
    return motion_from_sine(sine, cosine, ratio, rod_sign)


def motion_from_sine(
    sine: Floats, cosine: Floats, ratio: Floats | float, rod_sign: Floats | float
) -> Motion:
    """As `motion`, for sines and cosines that are already known.

    Parameters
    ----------
    sine, cosine : (samples,) or (cards, samples)
        Of the crank angle from the dead centre of that end. [-]
    ratio, rod_sign : () or (cards, 1)
        As in `motion`. [-]

    Returns
    -------
    Motion
        As in `motion`.
    """
    travel, slope = place_from_sine(sine, cosine, ratio, rod_sign)
    return Motion(travel, slope, curvature_from_sine(sine, cosine, ratio, rod_sign))


def place(crank_angle_deg: Floats, ratio: Floats | float, rod_sign: Floats | float) -> Place:
    """Travel and slope alone: `motion` without the second derivative.

    Parameters
    ----------
    crank_angle_deg, ratio, rod_sign
        As in `motion`.

    Returns
    -------
    Place
        Shape of the angle.
    """
    angle = np.radians(crank_angle_deg)
    return place_from_sine(np.sin(angle), np.cos(angle), ratio, rod_sign)


def place_from_sine(
    sine: Floats, cosine: Floats, ratio: Floats | float, rod_sign: Floats | float
) -> Place:
    """Travel and slope alone, for sines and cosines that are already known.

    Parameters
    ----------
    sine, cosine : (samples,) or (cards, samples)
        Of the crank angle from the dead centre of that end. [-]
    ratio, rod_sign : () or (cards, 1)
        As in `motion`. [-]

    Returns
    -------
    Place
        As in `motion`.
    """
    root = _rod_root(sine, ratio)
    half = 0.5 * rod_sign * ratio
    slope: Floats = (half / root * cosine + 0.5) * sine
    travel: Floats = half * np.square(sine) / (1 + root) + 0.5 * (1 - cosine)
    return Place(travel, slope)


def curvature_from_sine(
    sine: Floats, cosine: Floats, ratio: Floats | float, rod_sign: Floats | float
) -> Floats:
    """Second derivative of the travel by the crank angle.

    Parameters
    ----------
    sine, cosine : (samples,) or (cards, samples)
        Of the crank angle from the dead centre of that end. [-]
    ratio, rod_sign : () or (cards, 1)
        As in `motion`. [-]

    Returns
    -------
    curvature : shape of the angle
        [1/rad2]
    """
    root = _rod_root(sine, ratio)
    squares = np.square(cosine)
    bend = np.square(ratio * sine / root) * squares
    curvature: Floats = 0.5 * (cosine + rod_sign * ratio / root * (2 * squares - 1 + bend))
    return curvature


def travel_by_ratio(
    sine: Floats, cosine: Floats, ratio: Floats | float, rod_sign: Floats | float
) -> tuple[Floats, Floats]:
    """Change of travel and of its slope with the ratio of crank radius to rod length.

    Parameters
    ----------
    sine, cosine : (samples,) or (cards, samples)
        Of the crank angle from the dead centre of that end. [-]
    ratio, rod_sign : () or (cards, 1)
        As in `motion`. [-]

    Returns
    -------
    tuple of arrays
        ``d travel / d ratio`` [-] and ``d slope / d ratio`` [1/rad].

    Notes
    -----
    Derivatives of the formula of `motion`.
    """
    root = _rod_root(sine, ratio)
    squares = np.square(sine)
    travel = 0.5 * rod_sign * squares * (1 / root - 1 / (1 + root))
    slope = 0.5 * rod_sign * sine * cosine / root**3
    return travel, slope


def crank_angle_at(travel: Floats, ratio: Floats | float, rod_sign: Floats | float) -> Floats:
    """Crank angle at which a fraction of the stroke has been travelled, on the way out.

    Parameters
    ----------
    travel : (cards,)
        Fraction of the stroke from the end's own dead centre; clipped to 0 and 1. [-]
    ratio, rod_sign : () or (cards,)
        As in `motion`. [-]

    Returns
    -------
    crank_angle : (cards,)
        Between 0 and 180; on the way back it is 360 less this. [deg]

    Notes
    -----
    Law of cosines in the triangle of crank, rod and distance between crankshaft and crosshead pin:
    the inverse of `motion`, exact.

    Examples
    --------
    >>> crank_angle_at(np.array([0.5505102572]), 0.2, HEAD_END).round(6)
    array([90.])
    """
    position = np.clip(travel, 0.0, 1.0)
    from_head = np.where(np.asarray(rod_sign) > 0, position, 1 - position)
    distance = 1 + 1 / ratio - 2 * from_head  # in crank radii
    cosine = rod_sign * (1 + np.square(distance) - np.square(1 / ratio)) / (2 * distance)
    result: Floats = np.degrees(np.arccos(np.clip(cosine, -1.0, 1.0)))
    return result


def acceleration(
    crank_angle_deg: Floats, crank_radius: Floats | float, rod_length: Floats | float, speed: float
) -> Floats:
    """Acceleration of the crosshead toward the crank.

    Parameters
    ----------
    crank_angle_deg : (samples,) or (cards, samples)
        Crank angle from the head-end dead centre. [deg]
    crank_radius, rod_length : () or (cards, 1)
        Half the stroke and the connecting rod's length between centres. [m]
    speed : ()
        Revolutions per second. [1/s]

    Returns
    -------
    acceleration : same shape as the angle
        Positive toward the crank: greatest at the head-end dead centre. [m/s2]

    Notes
    -----
    ``r w^2 (cos t + m cos 2t / q + m^3 sin^2 t cos^2 t / q^3)`` with m the ratio of radius to rod:
    the second derivative of the exact travel, not the two-term series.

    Examples
    --------
    >>> round(float(acceleration(np.array(0.0), 0.1, 0.5, 1000 / 60)), 3)
    1315.947
    """
    turn = motion(np.asarray(crank_angle_deg), crank_radius / rod_length, HEAD_END)
    result: Floats = 2 * crank_radius * turn.curvature * (2 * np.pi * speed) ** 2
    return result
