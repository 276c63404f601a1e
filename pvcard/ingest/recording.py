"""What an export holds once it has been read: raw traces as measured, readings and notes.

A `Recording` keeps the rows of the export as they are. Nothing is calibrated, sorted or left out
here, except that units have become SI and gauge pressure has become absolute. Taking it apart into
turns is the work of `pvcard.repair`.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from datetime import datetime

from pvcard.types import Floats

CYLINDER_PRESSURE = "cylinder"
SUCTION_LINE = "suction_line"
DISCHARGE_LINE = "discharge_line"


@dataclass(frozen=True, eq=False)
class Channel:
    """One measured pressure trace.

    `reference` says how the unit was written: `absolute`, `gauge` (turned absolute here with the
    barometric pressure) or `unknown` (a bare unit: the value is kept as if absolute, and the level
    check decides later).
    `trace` is the number of the rows it belongs to, see `Recording.traces`.
    """

    cylinder: str
    end: str  # "head" or "crank"
    kind: str  # "cylinder", "suction_line" or "discharge_line"
    pressure: Floats  # (rows,) Pa, NaN where the export left it blank
    unit: str  # as written
    reference: str  # "absolute", "gauge" or "unknown"
    transducer: str | None = None
    column: str = ""  # name of the column in the export
    trace: int = 0

    @property
    def key(self) -> tuple[str, str, str]:
        """Cylinder, end and kind: what the trace measures."""
        return self.cylinder, self.end, self.kind


@dataclass(frozen=True, eq=False)
class Trace:
    """What one file says about where its rows lie; each array is (rows,) or missing."""

    crank_angle: Floats | None = None  # deg, as exported
    seconds: Floats | None = None  # s
    once_per_turn: Floats | None = None  # level of the pulse, as exported
    cycle: Floats | None = None  # number of the cycle, as exported


@dataclass(frozen=True)
class LineReadings:
    """Line values of one cylinder from the metadata; None where the export does not give them.

    The references of the two pressures read like `Channel.reference`; gauge values are absolute
    here.
    """

    suction_pressure: float | None = None  # Pa
    discharge_pressure: float | None = None  # Pa
    suction_temperature: float | None = None  # K
    discharge_temperature: float | None = None  # K
    suction_pressure_reference: str | None = None
    discharge_pressure_reference: str | None = None


@dataclass(frozen=True)
class Evidence:
    """A reading that helps to judge, such as a cap temperature, a flow or the driver power."""

    kind: str  # "cap temperature", "packing vent flow", "measured flow" or "driver power"
    value: float  # SI of its dimension
    dimension: str  # "temperature", "mass_flow", "volume_flow" or "power"
    text: str  # as written
    cylinder: str | None = None
    end: str | None = None
    side: str | None = None  # "suction" or "discharge"
    valve: int | None = None  # number of the valve, from 1


@dataclass(frozen=True, eq=False)
class Recording:
    """One recording of one machine: all that one export says, or several that belong together.

    Files of one recording that lie on other rows than the first one keep their own in
    `further_traces`; `Channel.trace` counts through `traces`.
    """

    source: str
    machine_name: str | None
    time: datetime | None  # UTC
    speed: float | None  # rev/s
    load_steps: dict[str, str]  # cylinder, or "" for all, to name of the load step
    barometric_pressure: float | None  # Pa, as used for gauge readings
    recording_id: str | None
    crank_angle: Floats | None  # (rows,) deg, as exported
    seconds: Floats | None  # (rows,) s
    once_per_turn: Floats | None  # (rows,)
    cycle: Floats | None  # (rows,)
    channels: tuple[Channel, ...]
    lines: dict[str, LineReadings]
    evidence: dict[str, Evidence] = field(default_factory=dict)
    metadata: dict[str, str] = field(default_factory=dict)  # as written
    notes: tuple[str, ...] = ()
    further_traces: tuple[Trace, ...] = ()

    @property
    def traces(self) -> tuple[Trace, ...]:
        """The rows of the first file, then those of further files that lie elsewhere."""
        first = Trace(self.crank_angle, self.seconds, self.once_per_turn, self.cycle)
        return (first, *self.further_traces)

    def channels_of(self, trace: int) -> Iterator[Channel]:
        """Channels that lie on the rows of `traces[trace]`."""
        return (channel for channel in self.channels if channel.trace == trace)
