"""What a machine description sets besides the machine: priors, limits, costs, reference state."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from pvcard.machine_checks import PartError


@dataclass(frozen=True)
class Uncertainty:
    """Standard uncertainties of what is declared; relative ones are fractions of the value."""

    dead_centre: float = 0.5  # deg
    pressure_level: float = 0.01  # of suction line pressure, before the level check
    pressure_gain: float = 0.003
    line_pressure: float = 0.002
    line_temperature: float = 1.0  # K
    bore: float = 0.0005
    stroke: float = 0.0005
    connecting_rod_length: float = 0.002
    clearance: float = 0.02  # of the swept volume: 2 points of %
    gas_exponent: float = 0.002
    speed: float = 0.001


@dataclass(frozen=True)
class Limits:
    """From which size on a finding is shown as `watch` or `act`."""

    watch_leak: float = 0.01
    act_leak: float = 0.05
    watch_power: float = 0.005

    def __post_init__(self) -> None:
        """Refuse what contradicts itself."""
        if self.watch_leak > self.act_leak:
            raise PartError(
                ("watch_leak",),
                "watching would begin after acting",
                found=f"{self.watch_leak:.3%}",
                expected=f"at most act_leak, {self.act_leak:.3%}",
            )


@dataclass(frozen=True)
class Cost:
    """An amount of money, per SI unit of something."""

    value: float
    currency: str
    per: Literal["", "J", "m3"] = ""  # m3 at the base state


@dataclass(frozen=True)
class Costs:
    """What energy, gas and a stop cost."""

    energy_price: Cost | None = None
    gas_value: Cost | None = None
    stop_cost: Cost | None = None


@dataclass(frozen=True)
class Reference:
    """The state to which a history is corrected; what is not given stays as recorded."""

    speed: float | None = None  # rev/s
    suction_pressure: float | None = None  # Pa
    discharge_pressure: float | None = None  # Pa
    suction_temperature: float | None = None  # K

    def __post_init__(self) -> None:
        """Refuse what contradicts itself."""
        low, high = self.suction_pressure, self.discharge_pressure
        if low is not None and high is not None and not high > low:
            raise PartError(
                ("discharge_pressure",),
                "the discharge pressure is not above the suction pressure",
                found=f"{high / 1e5:g} bar(a)",
                expected=f"more than {low / 1e5:g} bar(a)",
            )
