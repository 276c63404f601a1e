"""Motion of valve plates between seat and guard, impacts solved in closed form.

A plate is a mass on a spring, pushed by the pressure difference across the valve. Within one step
the force is constant, so the flight is a parabola: the instant at which it meets seat or guard, the
speed there and the flight after the rebound follow exactly, and no step needs to be cut.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pvcard.types import Booleans, Floats


@dataclass(frozen=True)
class Plates:
    """Parameters of the plates of one side, (ends, cards); of one valve where several share it."""

    lift: Floats  # m
    mass: Floats  # kg
    spring_rate: Floats  # N/m
    spring_preload: Floats  # N
    port_area: Floats  # m2
    damping: Floats  # N s/m
    seat_restitution: Floats
    guard_restitution: Floats
    stiction: Floats  # N


@dataclass
class PlateState:
    """Position [m], speed [m/s, opening], hardest impacts [m/s] of the plates, (ends, cards)."""

    position: Floats
    speed: Floats
    seat_impact: Floats
    guard_impact: Floats


def resting(shape: tuple[int, ...]) -> PlateState:
    """Plates on their seats."""
    return PlateState(np.zeros(shape), np.zeros(shape), np.zeros(shape), np.zeros(shape))


def flight(
    position: Floats, speed: Floats, acceleration: Floats, duration: Floats
) -> tuple[Floats, Floats]:
    """Position and speed after a flight at constant acceleration.

    Parameters
    ----------
    position, speed, acceleration, duration : same shape
        [m], [m/s], [m/s2], [s]

    Returns
    -------
    position, speed : same shape
        [m], [m/s]

    Notes
    -----
    ``y + v t + a t^2 / 2``, ``v + a t``.
    """
    later = speed + acceleration * duration
    return position + 0.5 * (speed + later) * duration, later


def _rebound(
    distance: Floats, speed: Floats, acceleration: Floats, duration: Floats, restitution: Floats
) -> tuple[Floats, Floats, Floats]:
    """Meet a stop at ``distance`` ahead (>= 0), all counted toward the stop.

    Returns the distance to the stop and the speed at the end of the step, and the impact speed.
    A rebound that would be over within the step leaves the plate lying at the stop.
    """
    impact = np.sqrt(np.maximum(np.square(speed) + 2 * acceleration * distance, 0.0))
    mean = 0.5 * (speed + impact)
    reached = np.where(mean > 0, distance / np.where(mean > 0, mean, 1.0), 0.0)
    rest = np.clip(duration - reached, 0.0, None)
    leaving = -restitution * impact
    travelled, later = flight(np.zeros_like(distance), leaving, acceleration, rest)
    lying = travelled >= 0
    return np.where(lying, 0.0, -travelled), np.where(lying, 0.0, later), impact


def advance(state: PlateState, plates: Plates, opening_pressure: Floats, duration: Floats) -> None:
    """Move the plates over one step, in place.

    Parameters
    ----------
    state : PlateState
        Changed in place; its impact speeds keep the largest met so far.
    plates : Plates
    opening_pressure : (ends, cards)
        Pressure difference that opens the valve, in the middle of the step. [Pa]
    duration : (cards,)
        [s]

    Notes
    -----
    ``m y'' + c y' + k y = dp A - preload`` [1]_, by the implicit midpoint rule: second order
    in the step, stable for any spring. A plate on its seat stays until the force exceeds zero and
    the stiction.

    References
    ----------
    .. [1] M. Costagliola, "The theory of spring-loaded valves for reciprocating compressors", *J.
       Appl. Mech.* 17 (1950) 415 (from memory of the publication).
    """
    position, speed = state.position, state.speed
    force = (
        opening_pressure * plates.port_area - plates.spring_preload - plates.spring_rate * position
    )
    held = (position <= 0) & (speed <= 0) & (force <= plates.stiction)
    share = 0.5 * duration * (plates.damping + 0.5 * duration * plates.spring_rate) / plates.mass
    later = (speed * (1 - share) + duration * force / plates.mass) / (1 + share)
    later = np.where(held, 0.0, later)
    start_speed = np.where(held, 0.0, speed)
    reached = position + 0.5 * duration * (start_speed + later)
    low, high = reached < 0, reached > plates.lift
    if low.any() or high.any():
        acceleration = (later - start_speed) / duration
        reached, later = _stops(
            state, plates, (reached, later, low, high), (start_speed, acceleration), duration
        )
    state.position, state.speed = reached, later


def _stops(
    state: PlateState,
    plates: Plates,
    after: tuple[Floats, Floats, Booleans, Booleans],
    before: tuple[Floats, Floats],
    duration: Floats,
) -> tuple[Floats, Floats]:
    """Correct positions and speeds of those plates that met seat or guard during the step."""
    reached, later, low, high = after
    speed, acceleration = before
    if low.any():
        gap, toward, impact = _rebound(
            state.position, -speed, -acceleration, duration, plates.seat_restitution
        )
        reached = np.where(low, np.minimum(gap, plates.lift), reached)
        later = np.where(low, -toward, later)
        np.maximum(state.seat_impact, np.where(low, impact, 0.0), out=state.seat_impact)
    if high.any():
        gap, toward, impact = _rebound(
            plates.lift - state.position, speed, acceleration, duration, plates.guard_restitution
        )
        reached = np.where(high, np.maximum(plates.lift - gap, 0.0), reached)
        later = np.where(high, toward, later)
        np.maximum(state.guard_impact, np.where(high, impact, 0.0), out=state.guard_impact)
    return reached, later
