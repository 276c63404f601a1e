"""The periodic cycles of a batch, and the sums and samples they are collected from."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Any

import numpy as np

from pvcard.cycle.gas_step import StepFlows
from pvcard.types import Booleans, Floats, Integers


@dataclass(frozen=True)
class Cycles:
    """Periodic cycles of a batch; masses [kg] and energies [J] are per turn."""

    ends: tuple[str, ...]
    crank_angle: Floats  # (samples,) deg from the head-end dead centre
    volume: Floats  # (cards, ends, samples) m3
    pressure: Floats  # (cards, ends, samples) Pa
    temperature: Floats  # (cards, ends, samples) K
    mass: Floats  # (cards, ends, samples) kg
    suction_lift: Floats  # (cards, ends, samples) over full lift
    discharge_lift: Floats  # (cards, ends, samples)
    swept_volume: Floats  # (cards, ends) m3
    work: Floats  # (cards, ends) J taken in by the gas
    heat: Floats  # (cards, ends) J into the gas
    drawn: Floats  # (cards, ends) net through the suction valves, their leak included
    delivered: Floats  # (cards, ends) net through the discharge valves, their leak included
    suction_backflow: Floats  # (cards, ends) returned through the open suction valve
    discharge_backflow: Floats  # (cards, ends) returned through the open discharge valve
    suction_leak: Floats  # (cards, ends) out to the suction line, gross
    discharge_leak: Floats  # (cards, ends) in from the discharge line, gross
    ring_leak: Floats  # (cards,) both directions added
    packing_leak: Floats  # (cards,) out, gross
    discharge_temperature: Floats  # (cards,) K, mean of the delivered gas
    ideal_discharge_temperature: Floats  # (cards,) K, isentropic
    wall_temperature: Floats  # (cards,) K
    suction_seat_impact: Floats  # (cards, ends) m/s, hardest of the turn
    suction_guard_impact: Floats
    discharge_seat_impact: Floats
    discharge_guard_impact: Floats
    mass_imbalance: Floats  # (cards,) of the gas drawn
    energy_imbalance: Floats  # (cards,) of the work
    turns: Integers  # (cards,) turns needed
    converged: Booleans  # (cards,)

    def take(self, cards: Any) -> Cycles:
        """Return the cycles of some cards."""
        return Cycles(
            **{
                item.name: getattr(self, item.name)
                if item.name in ("ends", "crank_angle")
                else getattr(self, item.name)[cards]
                for item in fields(self)
            }
        )


@dataclass
class Sums:
    """Totals of one turn, (ends, cards)."""

    net: list[Floats]
    suction_leak: Floats
    discharge_leak: Floats
    rings: Floats
    packing: Floats
    suction_backflow: Floats
    discharge_backflow: Floats

    def add(self, flows: StepFlows) -> None:
        """Add what passed in one step."""
        for total, value in zip(self.net, flows):
            total += value
        self.suction_leak += np.maximum(-flows.suction_leak, 0)
        self.discharge_leak += np.maximum(flows.discharge_leak, 0)
        self.rings += np.abs(flows.rings)
        self.packing += np.maximum(-flows.packing, 0)
        self.suction_backflow += np.maximum(-flows.suction, 0)
        self.discharge_backflow += np.maximum(flows.discharge, 0)


@dataclass
class Trace:
    """Samples of one turn, (steps, ends, cards)."""

    pressure: Floats
    temperature: Floats
    mass: Floats
    suction_lift: Floats
    discharge_lift: Floats


def joined(parts: list[Cycles]) -> Cycles:
    """Put the cycles of several batches after one another."""
    if len(parts) == 1:
        return parts[0]
    values: dict[str, Any] = {"ends": parts[0].ends, "crank_angle": parts[0].crank_angle}
    for item in fields(Cycles):
        if item.name not in values:
            values[item.name] = np.concatenate([getattr(part, item.name) for part in parts])
    return Cycles(**values)
