"""What the cylinder model is told: geometry, valves, leaks, walls and running state of a batch of
cylinders.

Every number may be given once for all or one a card: fields marked (cards,) belong to the cylinder,
fields marked (cards, ends) to its ends - (ends,) is one value an end for all cards - and plain
numbers are spread over both. All in SI, pressures absolute.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, fields
from typing import Any

import numpy as np

from pvcard.errors import InputError
from pvcard.types import Floats

Number = Floats | float | Sequence[float]
_OF_CYLINDER = (
    "bore",
    "stroke",
    "connecting_rod_length",
    "speed",
    "suction_pressure",
    "discharge_pressure",
    "suction_temperature",
    "piston_rod_diameter",
    "tail_rod_diameter",
    "suction_heating",
    "packing_back_pressure",
)
_BY_END = ("clearance", "held_open_until")
HEAT_LAWS = ("none", "annand", "adair", "woschni")


class CycleError(InputError):
    """Parameters from which no cycle can be computed."""


@dataclass(frozen=True)
class ValveSide:
    """All suction or all discharge valves of an end; they move together. Fields (cards, ends)."""

    flow_area: Number  # m2, effective, all valves of the side at full lift
    lift: Number = 2e-3  # m
    moving_mass: Number = 0.1  # kg, of one valve, as are the following
    spring_rate: Number = 1e4  # N/m
    spring_preload: Number = 10.0  # N, at the seat
    port_area: Number = 3e-3  # m2, on which the pressure difference pushes
    damping: Number = 2.0  # N s/m
    seat_restitution: Number = 0.2  # speed after an impact over speed before
    guard_restitution: Number = 0.2
    stiction: Number = 0.0  # N, oil film that must be torn to leave the seat


@dataclass(frozen=True)
class Leak:
    """One leak path by up to three laws of `pvcard.flow` at once; sizes of zero are left out."""

    orifice: Number = 0.0  # m2, effective area of an ideal nozzle
    slot: Number = 0.0  # m3/(Pa s), conductance of a laminar slot
    labyrinth: Number = 0.0  # m2
    throttlings: Number = 4.0  # of the labyrinth


@dataclass(frozen=True)
class Leaks:
    """Leak paths; valves (cards, ends), rings and packing (cards,)."""

    suction: Leak = Leak()
    discharge: Leak = Leak()
    rings: Leak = Leak()
    packing: Leak = Leak()


@dataclass(frozen=True)
class Wall:
    """Heat between gas and wall by one law for the whole batch; fields (cards,)."""

    law: str = "none"
    multiplier: Number = 1.0
    annand_coefficient: Number = 0.5
    position: Number = 0.5  # wall temperature between suction (0) and ideal discharge (1)
    viscosity: Number = 1.2e-5  # Pa s
    conductivity: Number = 0.035  # W/(m K)
    prandtl: Number = 0.72


@dataclass(frozen=True)
class Pulsation:
    """Prescribed pressure waves in the lines: amplitude over mean pressure, for orders 1, 2, ... of
    the speed.

    Complex amplitudes (cards, ends, orders) of ``Re(a exp(i order theta))``, theta the crank angle
    from the head-end dead centre.
    """

    suction: Any = None
    discharge: Any = None


@dataclass(frozen=True)
class Cylinders:
    """A batch of cylinders at given running states; checked by `checked`."""

    bore: Number  # (cards,) m
    stroke: Number
    connecting_rod_length: Number
    clearance: Number  # (cards, ends), fraction of the swept volume of that end, pockets included
    speed: Number  # (cards,) 1/s
    suction_pressure: Number  # (cards,) Pa
    discharge_pressure: Number
    suction_temperature: Number  # (cards,) K
    suction_valves: ValveSide
    discharge_valves: ValveSide
    piston_rod_diameter: Number = 0.0
    tail_rod_diameter: Number = 0.0
    ends: tuple[str, ...] = ("head", "crank")
    discharge_temperature: Number | None = None  # of the line; None: what the cylinder delivers
    suction_heating: Number = 0.0  # K, warming in the passage before the valve
    leaks: Leaks = field(default_factory=Leaks)
    wall: Wall = field(default_factory=Wall)
    pulsation: Pulsation = field(default_factory=Pulsation)
    speed_ripple: Any = None  # (cards, orders) complex, relative: as in Pulsation
    held_open_until: Number | None = None  # (cards, ends) deg of own angle, 360: always, NaN: free
    ring_back_pressure: Number | None = None  # (cards,) Pa, behind the piston of one working end
    packing_back_pressure: Number = 101325.0  # (cards,) Pa


@dataclass(frozen=True)
class Spread:
    """`Cylinders` with every field spread to arrays: (cards,) or (ends, cards)."""

    described: Cylinders
    cards: int
    ends: int
    cylinder: dict[str, Floats]  # (cards,)
    end: dict[str, Floats]  # (ends, cards)
    suction: dict[str, Floats]  # (ends, cards)
    discharge: dict[str, Floats]
    leaks: dict[str, dict[str, Floats]]
    wall: dict[str, Floats]  # (cards,)


def _bad(name: str, problem: str, found: object, expected: str, advice: str | None = None) -> None:
    raise CycleError(problem, place=name, found=str(found), expected=expected, advice=advice)


def _as_cards(name: str, value: Number, cards: int) -> Floats:
    array = np.asarray(value, dtype=np.float64)
    if array.ndim > 1 or (array.ndim == 1 and array.size not in (1, cards)):
        _bad(
            name,
            "cannot be spread over the cards",
            f"shape {array.shape}",
            f"one number or ({cards},)",
        )
    return np.broadcast_to(array, (cards,)).copy()


def _as_ends(name: str, value: Number, cards: int, ends: int) -> Floats:
    array = np.asarray(value, dtype=np.float64)
    try:
        return np.ascontiguousarray(np.broadcast_to(array, (cards, ends)).T)
    except ValueError:
        _bad(name, "cannot be spread over the ends", f"shape {array.shape}", f"({cards}, {ends})")
        raise


def _numbers(described: Cylinders) -> Iterator[tuple[Any, bool]]:
    """Every field that holds numbers, and whether it is one of the ends."""
    for item in fields(described):
        value = getattr(described, item.name)
        if not isinstance(value, (tuple, ValveSide, Leaks, Wall, Pulsation)):
            yield value, item.name in _BY_END
    groups = (
        (described.suction_valves, True),
        (described.discharge_valves, True),
        (described.leaks.suction, True),
        (described.leaks.discharge, True),
        (described.leaks.rings, False),
        (described.leaks.packing, False),
        (described.wall, False),
        (described.pulsation, True),
    )
    for group, by_end in groups:
        for item in fields(group):
            yield getattr(group, item.name), by_end


def _is_number(value: Any) -> bool:
    return value is not None and not isinstance(value, str)


def _count_cards(described: Cylinders) -> int:
    sizes = {1}
    for value, by_end in _numbers(described):
        if _is_number(value) and np.ndim(value) > int(by_end):
            sizes.add(len(value))
    sizes.discard(1)
    if len(sizes) > 1:
        _bad(
            "cards",
            "fields disagree in their number of cards",
            sorted(sizes),
            "one number of cards",
        )
    return sizes.pop() if sizes else 1


def spread(described: Cylinders) -> Spread:
    """Check a description and spread it over cards and ends.

    Parameters
    ----------
    described : Cylinders

    Returns
    -------
    Spread
        Arrays (cards,) and (ends, cards).

    Notes
    -----
    Raises `CycleError` naming the field, what was found and what is possible.
    """
    cards, ends = _count_cards(described), len(described.ends)
    if described.ends not in (("head",), ("crank",), ("head", "crank")):
        _bad("ends", "unknown ends", described.ends, "('head', 'crank'), ('head',) or ('crank',)")
    if described.wall.law not in HEAT_LAWS:
        _bad("wall.law", "unknown heat law", described.wall.law, ", ".join(HEAT_LAWS))
    cylinder = {name: _as_cards(name, getattr(described, name), cards) for name in _OF_CYLINDER}
    end = {"clearance": _as_ends("clearance", described.clearance, cards, ends)}
    held = np.nan if described.held_open_until is None else described.held_open_until
    end["held_open_until"] = _as_ends("held_open_until", held, cards, ends)
    back = described.ring_back_pressure
    if back is not None:
        cylinder["ring_back_pressure"] = _as_cards("ring_back_pressure", back, cards)
    if described.discharge_temperature is not None:
        cylinder["discharge_temperature"] = _as_cards(
            "discharge_temperature", described.discharge_temperature, cards
        )
    sides = [
        {
            item.name: _as_ends(f"{side}.{item.name}", getattr(valves, item.name), cards, ends)
            for item in fields(valves)
        }
        for side, valves in (
            ("suction_valves", described.suction_valves),
            ("discharge_valves", described.discharge_valves),
        )
    ]
    leaks = {path: _leak(path, getattr(described.leaks, path), cards, ends) for path in _PATHS}
    wall = {
        item.name: _as_cards(f"wall.{item.name}", getattr(described.wall, item.name), cards)
        for item in fields(described.wall)
        if item.name != "law"
    }
    result = Spread(described, cards, ends, cylinder, end, sides[0], sides[1], leaks, wall)
    _check(result)
    return result


_PATHS = ("suction", "discharge", "rings", "packing")


def _leak(path: str, leak: Leak, cards: int, ends: int) -> dict[str, Floats]:
    if path in ("suction", "discharge"):
        return {
            item.name: _as_ends(f"leaks.{path}.{item.name}", getattr(leak, item.name), cards, ends)
            for item in fields(leak)
        }
    return {
        item.name: _as_cards(f"leaks.{path}.{item.name}", getattr(leak, item.name), cards)
        for item in fields(leak)
    }


def _require(
    name: str, good: Any, values: Floats, expected: str, advice: str | None = None
) -> None:
    good = np.asarray(good)
    if not good.all():
        place = np.argwhere(~good)[0]
        card = int(place[-1])
        _bad(name, f"card {card} cannot be computed", f"{values[tuple(place)]:g}", expected, advice)


def _check(batch: Spread) -> None:
    for name, values in (*batch.cylinder.items(), *batch.wall.items()):
        _require(name, np.isfinite(values), values, "a finite number")
    for name in ("bore", "stroke", "speed", "suction_pressure", "suction_temperature"):
        _require(name, batch.cylinder[name] > 0, batch.cylinder[name], "more than zero")
    for name in ("piston_rod_diameter", "tail_rod_diameter", "packing_back_pressure"):
        _require(name, batch.cylinder[name] >= 0, batch.cylinder[name], "zero or more")
    bore = batch.cylinder["bore"]
    for name in ("piston_rod_diameter", "tail_rod_diameter"):
        _require(name, batch.cylinder[name] < bore, batch.cylinder[name], "less than the bore")
    _require(
        "connecting_rod_length",
        batch.cylinder["connecting_rod_length"] > batch.cylinder["stroke"] / 2,
        batch.cylinder["connecting_rod_length"],
        "more than half the stroke",
    )
    _require(
        "discharge_pressure",
        batch.cylinder["discharge_pressure"] > 1.01 * batch.cylinder["suction_pressure"],
        batch.cylinder["discharge_pressure"],
        "more than 1.01 times the suction pressure",
        "Are the two pressures swapped, or is one of them a gauge pressure?",
    )
    clearance = batch.end["clearance"]
    _require(
        "clearance",
        clearance >= 0.005,
        clearance,
        "0.5 % of the swept volume or more",
        "Clearance is a fraction: 0.12 is 12 %.",
    )
    _require(
        "clearance", clearance < 5, clearance, "below 5", "Clearance is a fraction: 0.12 is 12 %."
    )
    _check_valves(batch)
    for path, leak in batch.leaks.items():
        for name, values in leak.items():
            _require(
                f"leaks.{path}.{name}", np.isfinite(values) & (values >= 0), values, "zero or more"
            )
        _require(
            f"leaks.{path}.throttlings", leak["throttlings"] >= 1, leak["throttlings"], "1 or more"
        )


def _check_valves(batch: Spread) -> None:
    positive = ("flow_area", "lift", "moving_mass", "port_area")
    for side, valves in (("suction_valves", batch.suction), ("discharge_valves", batch.discharge)):
        for name, values in valves.items():
            place = f"{side}.{name}"
            good = np.isfinite(values) & (values > 0 if name in positive else values >= 0)
            _require(place, good, values, "more than zero" if name in positive else "zero or more")
        for name in ("seat_restitution", "guard_restitution"):
            _require(f"{side}.{name}", valves[name] < 1, valves[name], "0 up to below 1")


def stacked(descriptions: Sequence[Cylinders]) -> Cylinders:
    """Put several descriptions into one batch, in their order.

    Parameters
    ----------
    descriptions : Cylinders, with the same ends and the same heat law
        Either all or none with a given discharge temperature, ring back pressure.

    Returns
    -------
    Cylinders
        Cards of the first, then of the second, and so on.
    """
    parts = [spread(described) for described in descriptions]
    first = parts[0].described
    if any(
        (part.described.ends, part.described.wall.law, set(part.cylinder))
        != (first.ends, first.wall.law, set(parts[0].cylinder))
        for part in parts
    ):
        raise CycleError("only cylinders of one kind can be computed in one batch")

    def joined(groups: Sequence[dict[str, Floats]], *, ends: bool) -> dict[str, Any]:
        values = {name: [group[name] for group in groups] for name in groups[0]}
        return {
            name: np.concatenate([value.T for value in value_list])
            if ends
            else np.concatenate(value_list)
            for name, value_list in values.items()
        }

    leaks = {
        path: Leak(
            **joined([part.leaks[path] for part in parts], ends=path in ("suction", "discharge"))
        )
        for path in _PATHS
    }
    return Cylinders(
        **joined([part.cylinder for part in parts], ends=False),
        **joined([part.end for part in parts], ends=True),
        suction_valves=ValveSide(**joined([part.suction for part in parts], ends=True)),
        discharge_valves=ValveSide(**joined([part.discharge for part in parts], ends=True)),
        ends=first.ends,
        leaks=Leaks(**leaks),
        wall=Wall(first.wall.law, **joined([part.wall for part in parts], ends=False)),
        pulsation=Pulsation(
            _joined_waves([part.described.pulsation.suction for part in parts], parts, ends=True),
            _joined_waves([part.described.pulsation.discharge for part in parts], parts, ends=True),
        ),
        speed_ripple=_joined_waves(
            [part.described.speed_ripple for part in parts], parts, ends=False
        ),
    )


def _joined_waves(waves: Sequence[Any], parts: Sequence[Spread], *, ends: bool) -> Any:
    """Amplitudes of all cards, zero where a description has none; None where none has any."""
    orders = max((np.shape(wave)[-1] for wave in waves if wave is not None), default=0)
    if orders == 0:
        return None
    blocks = []
    for wave, part in zip(waves, parts):
        shape = (part.cards, part.ends) if ends else (part.cards,)
        block = np.zeros((*shape, orders), dtype=np.complex128)
        if wave is not None:
            block[..., : np.shape(wave)[-1]] = np.asarray(wave)
        blocks.append(block)
    return np.concatenate(blocks)
