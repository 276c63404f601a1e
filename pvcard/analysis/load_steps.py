"""Which declared load step a cylinder ran in, told by the clearances and states its cards show."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pvcard.machine import Cylinder, Machine

NAMED_ODDS = 0.9  # trust in a step that the export names (common practice, no source)
CONTRADICTED = 0.95  # probability from which another step is believed instead
_STATE_MISMATCH = (
    -12.0
)  # log likelihood of an end that compresses although held open, or the reverse
_STILL = ("suction_valves_held_open", "suction_valves_removed")


@dataclass(frozen=True)
class Seen:
    """What the card of one end shows."""

    end: str
    compresses: bool
    clearance: float  # fraction, from the trace alone; NaN where it cannot tell
    uncertainty: float


@dataclass(frozen=True)
class StepChoice:
    """The step believed, and how far."""

    name: str | None
    probability: float
    named: str | None  # what the export says
    contradicted: bool = False


def steps_of(machine: Machine, cylinder: Cylinder) -> list[str]:
    """Names of the load steps that concern a cylinder.

    Parameters
    ----------
    machine, cylinder
        As declared.

    Returns
    -------
    list of str
    """
    return list(
        dict.fromkeys(
            step.name
            for step in machine.load_steps
            if step.cylinders is None or cylinder.name in step.cylinders
        )
    )


def choose_step(
    machine: Machine, cylinder: Cylinder, named: str | None, seen: list[Seen]
) -> StepChoice:
    """Weigh every declared step against the cards of a cylinder.

    Parameters
    ----------
    machine, cylinder
        As declared.
    named : step the export names, or None
    seen : what each end shows

    Returns
    -------
    StepChoice
        The named one unless the cards contradict it.

    Notes
    -----
    Bayes' rule with Gaussian clearances: a pocket is told by the clearance it adds, an unloaded
    end by not compressing at all.
    """
    names = steps_of(machine, cylinder)
    if not names:
        return StepChoice(named, 1.0, named)
    score = np.array([_log_likelihood(machine, cylinder, name, seen) for name in names])
    prior = np.full(len(names), 1 / len(names))
    if named in names:
        others = max(len(names) - 1, 1)
        prior = np.array(
            [NAMED_ODDS if name == named else (1 - NAMED_ODDS) / others for name in names]
        )
    weight = np.exp(score - score.max()) * prior
    weight /= weight.sum()
    best = int(np.argmax(weight))
    if named in names and names[best] != named and weight[best] < CONTRADICTED:
        best = names.index(named)
    contradicted = named in names and names[best] != named
    return StepChoice(names[best], float(weight[best]), named, contradicted)


def _log_likelihood(machine: Machine, cylinder: Cylinder, step: str, seen: list[Seen]) -> float:
    total = 0.0
    for one in seen:
        still = machine.end_state(cylinder.name, one.end, step) in _STILL
        if still or not one.compresses:
            total += 0.0 if still != one.compresses else _STATE_MISMATCH
            continue
        if not np.isfinite(one.clearance):
            continue
        declared = machine.clearance(cylinder.name, one.end, step)
        if declared is None:
            continue
        spread = np.hypot(one.uncertainty, machine.uncertainty.clearance)
        # Beyond four deviations the declared value, not the step, is the likelier error.
        distance = min(abs(one.clearance - declared) / spread, 4.0)
        total -= distance**2 / 2
    return total
