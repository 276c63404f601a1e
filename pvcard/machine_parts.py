"""A compressor as declared: frozen dataclasses, SI, fields named as the keys of machine.toml.

They describe and check, they compute no physics. Every check raises `PartError`, which carries the
path of the key within its part, so that the reader can say in which line of which file it stands.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from datetime import UTC, date, datetime, tzinfo
from typing import Literal
from zoneinfo import ZoneInfo

from pvcard.errors import MachineError
from pvcard.machine_checks import PartError, check_machine, pick
from pvcard.machine_settings import Costs, Limits, Reference, Uncertainty

EndName = Literal["head", "crank"]
EndState = Literal[
    "loaded", "suction_valves_held_open", "suction_valves_removed", "closing_delayed"
]

END_STATES: tuple[EndState, ...] = (
    "loaded",
    "suction_valves_held_open",
    "suction_valves_removed",
    "closing_delayed",
)


@dataclass(frozen=True)
class GasDescription:
    """What is declared of a gas: its composition, or an exponent with compressibilities."""

    composition: dict[str, float] | None = None  # mole fractions, canonical names, sum 1
    isentropic_exponent: float | None = None  # volume exponent at mean conditions
    compressibility: float | None = None  # at suction
    discharge_compressibility: float | None = None
    molar_mass: float | None = None  # kg/mol
    water_saturated: bool = False  # at suction; the composition is then that of the dry gas
    relative_humidity: float | None = None  # fraction, at suction
    hazards: tuple[str, ...] = ()
    analysis_date: date | None = None
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        """Refuse what contradicts itself."""
        if self.composition is None and self.isentropic_exponent is None:
            raise PartError(
                ("composition",),
                "the gas is not described",
                expected="a composition, or isentropic_exponent and molar_mass",
                advice="Write for example composition = { methane = 0.95, ethane = 0.05 }",
            )
        if self.composition is not None:
            self._check_composition_alone()
        if self.water_saturated and self.relative_humidity is not None:
            raise PartError(
                ("relative_humidity",),
                "water_saturated and relative_humidity are both given",
                advice="Keep one of them",
            )

    def _check_composition_alone(self) -> None:
        own = ("isentropic_exponent", "compressibility", "discharge_compressibility", "molar_mass")
        for key in own:
            if getattr(self, key) is not None:
                raise PartError(
                    (key,),
                    f"composition and {key} are both given, and would contradict each other",
                    found=f"{getattr(self, key):g}",
                    advice=f"Keep the composition and leave out {key}, or the other way round",
                )


@dataclass(frozen=True)
class Valves:
    """The valves of one side of one cylinder end, all alike; values are per valve."""

    count: int
    flow_area: float  # m2, effective, at full lift
    lift: float | None = None  # m
    moving_mass: float | None = None  # kg
    spring_rate: float | None = None  # N/m
    spring_preload: float | None = None  # N, springs at the closed valve
    port_area: float | None = None  # m2, on which the pressure difference acts
    damping: float | None = None  # N s/m
    seat_restitution: float | None = None
    guard_restitution: float | None = None
    impact_speed_limit: float | None = None  # m/s

    def __post_init__(self) -> None:
        """Refuse what contradicts itself."""
        if self.count < 1:
            raise PartError(("count",), "a side needs at least one valve", found=str(self.count))
        if not self.flow_area > 0:
            raise PartError(
                ("flow_area",), "the flow area must be positive", found=f"{self.flow_area:g} m2"
            )

    @property
    def total_flow_area(self) -> float:
        """Effective flow area of all valves of the side. [m2]"""
        return self.count * self.flow_area


@dataclass(frozen=True)
class CylinderEnd:
    """One end of a cylinder: it compresses, or it is open to something."""

    name: EndName
    clearance: float | None = None  # fraction of the swept volume of this end
    open_to: Literal["atmosphere", "suction"] | None = None
    suction_valves: Valves | None = None
    discharge_valves: Valves | None = None

    def __post_init__(self) -> None:
        """Refuse what contradicts itself."""
        if self.open_to is None and self.clearance is None:
            raise PartError(
                ("clearance",),
                "missing key",
                expected="the clearance volume / swept volume of this end",
                advice='Write clearance = "15 %", or open_to = "atmosphere" for an end '
                "that does not compress",
            )
        if self.open_to is None:
            return
        for key in ("clearance", "suction_valves", "discharge_valves"):
            if getattr(self, key) is not None:
                raise PartError(
                    (key,),
                    f"an end with open_to does not compress and has no {key}",
                    advice=f"Leave out either open_to or {key}",
                )

    @property
    def compresses(self) -> bool:
        """Whether this end has valves and compresses gas."""
        return self.open_to is None


@dataclass(frozen=True)
class Cylinder:
    """One cylinder as declared."""

    name: str
    bore: float  # m
    stroke: float  # m
    connecting_rod_length: float  # m
    head_end: CylinderEnd
    crank_end: CylinderEnd
    stage: int = 1
    throw: int = 1
    piston_rod_diameter: float = 0.0  # m
    tail_rod_diameter: float = 0.0  # m
    dead_centre: float = 0.0  # deg, export angle of the head-end dead centre, in [0, 360)
    reciprocating_mass: float | None = None  # kg
    gas_load_limit_compression: float | None = None  # N
    gas_load_limit_tension: float | None = None  # N
    combined_load_limit_compression: float | None = None  # N
    combined_load_limit_tension: float | None = None  # N
    reversal_minimum: float | None = None  # deg
    reversal_minimum_pct: float | None = None  # per cent, as its name says
    discharge_temperature_limit: float | None = None  # K
    maximum_pressure: float | None = None  # Pa, absolute
    gas: GasDescription | None = None

    def __post_init__(self) -> None:
        """Refuse what contradicts itself."""
        for key in ("bore", "stroke", "connecting_rod_length"):
            if not getattr(self, key) > 0:
                raise PartError((key,), "must be positive", found=f"{getattr(self, key):g} m")
        if not self.connecting_rod_length > self.stroke / 2:
            raise PartError(
                ("connecting_rod_length",),
                "the connecting rod is not longer than the crank",
                found=f"{self.connecting_rod_length:g} m",
                expected=f"more than half the stroke, {self.stroke / 2:g} m",
                advice="It is counted from pin to pin, usually two to three times the stroke",
            )
        self._check_rods()
        if not self.ends:
            raise PartError(
                ("head_end", "open_to"),
                "neither end compresses",
                expected="a clearance for at least one end",
            )

    def _check_rods(self) -> None:
        for key in ("piston_rod_diameter", "tail_rod_diameter"):
            diameter = getattr(self, key)
            if not 0 <= diameter < self.bore:
                raise PartError(
                    (key,),
                    "the rod does not fit into the bore",
                    found=f"{diameter:g} m",
                    expected=f"less than the bore, {self.bore:g} m",
                )
        if self.piston_rod_diameter == 0 and self.crank_end.open_to != "atmosphere":
            raise PartError(
                ("piston_rod_diameter",),
                "the crank end needs the diameter of the piston rod",
                expected="a diameter above 0",
                advice='Write for example piston_rod_diameter = "57 mm"; where the crank end does '
                'not compress, write open_to = "atmosphere" for it',
            )

    @property
    def ends(self) -> tuple[CylinderEnd, ...]:
        """The ends that compress, head end first."""
        return tuple(end for end in (self.head_end, self.crank_end) if end.compresses)

    def end(self, end: str | CylinderEnd) -> CylinderEnd:
        """Return the end called "head" or "crank"."""
        if isinstance(end, CylinderEnd):
            return end
        return self.head_end if pick(end, ("head", "crank"), "end") == "head" else self.crank_end

    def area(self, end: str | CylinderEnd) -> float:
        """Piston area of an end, less the rod that passes through it. [m2]"""
        head = self.end(end).name == "head"
        rod = self.tail_rod_diameter if head else self.piston_rod_diameter
        return math.pi / 4 * (self.bore**2 - rod**2)

    def swept_volume(self, end: str | CylinderEnd) -> float:
        """Piston area of an end times the stroke. [m3]"""
        return self.area(end) * self.stroke


@dataclass(frozen=True)
class Stage:
    """One stage: what enters it and leaves it besides its cylinders."""

    number: int = 1
    cooler_outlet_temperature: float | None = None  # K
    suction_temperature: float | None = None  # K
    side_stream: float | None = None  # kg/s, added before this stage
    condensate: float | None = None  # kg/s, removed before this stage
    gas: GasDescription | None = None


@dataclass(frozen=True)
class LoadStepEnd:
    """What a load step does to one end."""

    added_clearance: float = 0.0  # fraction of the swept volume of that end
    state: EndState = "loaded"
    closing_angle: float | None = None  # deg after the dead centre of smallest volume

    def __post_init__(self) -> None:
        """Refuse what contradicts itself."""
        if self.state == "closing_delayed" and self.closing_angle is None:
            raise PartError(
                ("closing_angle",),
                "missing key: a delayed closing needs its angle",
                expected="an angle between 180 and 360 deg",
                advice='Write for example closing_angle = "240 deg", counted from the dead centre '
                "where the volume of that end is smallest",
            )
        if self.state != "closing_delayed" and self.closing_angle is not None:
            raise PartError(
                ("closing_angle",),
                "a closing angle belongs to a delayed closing only",
                found=f'state = "{self.state}"',
                advice='Write state = "closing_delayed", or leave out closing_angle',
            )


@dataclass(frozen=True)
class LoadStep:
    """A named setting of pockets and unloaders; the same name may stand for several cylinders."""

    name: str
    cylinders: tuple[str, ...] | None = None  # None: all
    head_end: LoadStepEnd = LoadStepEnd()
    crank_end: LoadStepEnd = LoadStepEnd()

    def covers(self, cylinder: str) -> bool:
        """Whether the step sets something at this cylinder."""
        return self.cylinders is None or cylinder in self.cylinders


@dataclass(frozen=True)
class Machine:
    """One compressor as declared, from `valid_from` on."""

    name: str
    rated_speed: float  # rev/s
    cylinders: tuple[Cylinder, ...]
    gas: GasDescription | None = None
    stages: tuple[Stage, ...] = (Stage(),)
    load_steps: tuple[LoadStep, ...] = ()
    rated_power: float | None = None  # W, driver
    mechanical_efficiency: float | None = None  # fraction
    auxiliary_power: float | None = None  # W
    rotating_inertia: float | None = None  # kg m2
    barometric_pressure: float = 101325.0  # Pa
    barometric_pressure_from: Literal["declared", "site_altitude", "assumed"] = "assumed"
    time_zone: str | None = None  # IANA name; None: UTC
    base_pressure: float = 101325.0  # Pa
    base_temperature: float = 288.15  # K
    valid_from: datetime | None = None  # UTC
    uncertainty: Uncertainty = field(default_factory=Uncertainty)
    limits: Limits = field(default_factory=Limits)
    costs: Costs = field(default_factory=Costs)
    reference: Reference = field(default_factory=Reference)
    notes: tuple[str, ...] = ()
    source: str = ""  # path of the file
    sha256: str = ""  # of the file as it lies on disk
    text: str = field(default="", repr=False)  # of the file

    def __post_init__(self) -> None:
        """Refuse what contradicts itself."""
        check_machine(self)

    @property
    def zone(self) -> tzinfo:
        """Time zone of times without an offset."""
        return ZoneInfo(self.time_zone) if self.time_zone else UTC

    @property
    def load_step_names(self) -> tuple[str, ...]:
        """Names of the load steps, each once, as declared."""
        return tuple(dict.fromkeys(step.name for step in self.load_steps))

    def cylinder(self, name: str) -> Cylinder:
        """Return the cylinder of this name, capitals forgiven; an error names the nearest."""
        names = [cylinder.name for cylinder in self.cylinders]
        return self.cylinders[names.index(pick(name, names, "cylinder"))]

    def stage(self, number: int) -> Stage:
        """Return the stage of this number."""
        numbers = [str(stage.number) for stage in self.stages]
        return self.stages[numbers.index(pick(str(number), numbers, "stage"))]

    def gas_of(self, cylinder: str | Cylinder) -> GasDescription:
        """Gas of a cylinder: its own, else that of its stage, else that of the machine."""
        own = self.cylinder(cylinder) if isinstance(cylinder, str) else cylinder
        gas = own.gas or self.stage(own.stage).gas or self.gas
        if gas is None:
            raise MachineError("no gas is declared", file=self.source, place=f"cylinder {own.name}")
        return gas

    def step_end(
        self, cylinder: str | Cylinder, end: str | CylinderEnd, load_step: str | None = None
    ) -> LoadStepEnd:
        """Return what a load step does to an end; without a step, or untouched by it: loaded."""
        own = self.cylinder(cylinder) if isinstance(cylinder, str) else cylinder
        if load_step is None:
            return LoadStepEnd()
        name = pick(load_step, self.load_step_names, "load step")
        for step in self.load_steps:
            if step.name == name and step.covers(own.name):
                return step.head_end if own.end(end).name == "head" else step.crank_end
        return LoadStepEnd()

    def end_state(
        self, cylinder: str | Cylinder, end: str | CylinderEnd, load_step: str | None = None
    ) -> EndState | Literal["open"]:
        """State of an end in a load step; "open" where it does not compress at all."""
        own = self.cylinder(cylinder) if isinstance(cylinder, str) else cylinder
        if not own.end(end).compresses:
            return "open"
        return self.step_end(own, end, load_step).state

    def clearance(
        self, cylinder: str | Cylinder, end: str | CylinderEnd, load_step: str | None = None
    ) -> float:
        """Declared clearance of an end with what the load step adds. [fraction of swept volume]"""
        own = self.cylinder(cylinder) if isinstance(cylinder, str) else cylinder
        declared = own.end(end).clearance
        if declared is None:
            raise MachineError(
                "this end does not compress and has no clearance",
                file=self.source or None,
                place=f"cylinder {own.name}: {own.end(end).name}_end",
            )
        return declared + self.step_end(own, end, load_step).added_clearance
