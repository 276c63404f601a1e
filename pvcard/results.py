"""What an analysis gives back: rows of quantities with their reasons, and arrays for plots."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from pvcard.card.view import CardView

Row = dict[str, Any]


@dataclass(frozen=True)
class RecordingResult:
    """One analysed recording: the JSON object of the contract plus arrays for plots.

    ``ends``, ``cylinders`` and ``totals`` are rows of quantities with units in their names; a
    missing value is None and the row's ``reason`` says why.
    """

    recording: Row  # machine, time, source, cycles, samples, load_step
    repairs: list[Row]
    ends: list[Row]
    cylinders: list[Row]
    totals: list[Row]
    findings: list[Row]
    notes: tuple[str, ...] = ()
    views: dict[tuple[str, str], CardView] = field(default_factory=dict)
    base_state: tuple[float, float] = (101325.0, 288.15)  # Pa, K, of standard flow

    def as_json(self) -> Row:
        """Return the object that stands in the list ``recordings`` of the JSON output."""
        names = ("recording", "repairs", "ends", "cylinders", "totals", "findings")
        return {name: getattr(self, name) for name in names}


@dataclass(frozen=True)
class Analysis:
    """Results of one call, in the order of the recordings handed in."""

    recordings: list[RecordingResult]
    version: str

    def as_json(self) -> Row:
        """Return the whole JSON document of ``pvcard analyse --format json``."""
        return {
            "schema": 1,
            "pvcard": self.version,
            "recordings": [one.as_json() for one in self.recordings],
        }
