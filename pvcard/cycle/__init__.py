"""The forward cylinder model: what a card should look like, from first principles.

`Cylinders` describes a batch, `steady_state` computes its periodic cycles, `valve_motion` and
`card_figures` read them, `declared_cylinder` makes the description from a machine.
"""

from pvcard.cycle.answers import CardFigures, ValveMotion, card_figures, valve_motion
from pvcard.cycle.declared import Declared, declared_cylinder
from pvcard.cycle.description import (
    CycleError,
    Cylinders,
    Leak,
    Leaks,
    Pulsation,
    ValveSide,
    Wall,
)
from pvcard.cycle.fluid import Fluid
from pvcard.cycle.result import Cycles
from pvcard.cycle.steady import DEFAULT_STEP, fluid_for, steady_state

__all__ = [
    "DEFAULT_STEP",
    "CardFigures",
    "CycleError",
    "Cycles",
    "Cylinders",
    "Declared",
    "Fluid",
    "Leak",
    "Leaks",
    "Pulsation",
    "ValveMotion",
    "ValveSide",
    "Wall",
    "card_figures",
    "declared_cylinder",
    "fluid_for",
    "steady_state",
    "valve_motion",
]
