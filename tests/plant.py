"""Small exports on the fly: ideal cards of an invented machine, written as a user's file would
be."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from tests.cards import ideal_pressure

MACHINE = """
[machine]
name = "Test stand 1"
rated_speed = "600 rpm"
rated_power = "400 kW"
mechanical_efficiency = "95 %"
barometric_pressure = "1.0 bar"
time_zone = "UTC"

[gas]
composition = { nitrogen = 1.0 }

[[cylinder]]
name = "C1"
bore = "250 mm"
stroke = "200 mm"
connecting_rod_length = "500 mm"
piston_rod_diameter = "50 mm"
dead_centre = "0 deg"
discharge_temperature_limit = "200 degC"
[cylinder.head_end]
clearance = "12 %"
[cylinder.crank_end]
clearance = "14 %"
"""
STEPS = """
[[load_step]]
name = "full"
[[load_step]]
name = "pocket"
head_end = { added_clearance = "20 %" }
[[load_step]]
name = "half"
crank_end = { state = "suction_valves_held_open" }
"""
FACTS = {
    "machine": "Test stand 1",
    "time": "2024-03-05T10:00:00Z",
    "speed": "600 rpm",
    "C1 suction pressure": "10 bar(a)",
    "C1 discharge pressure": "30 bar(a)",
    "C1 suction temperature": "27 degC",
    "C1 discharge temperature": "140 degC",
}
EXPONENT = 1.424  # mean volume exponent of nitrogen between the pressures, so that no heat is seen


def traces(head: float = 0.12, crank: float = 0.14, samples: int = 720) -> dict[str, np.ndarray]:
    """Crank angle and both pressures in bar."""
    grid = np.arange(samples) * 360.0 / samples
    one = ideal_pressure(grid, 0.2, 1.0, head, 10e5, 30e5, EXPONENT) / 1e5
    two = ideal_pressure(grid, 0.2, -1.0, crank, 10e5, 30e5, EXPONENT) / 1e5
    return {
        "crank_angle [deg]": grid,
        "C1 head end [bar(a)]": one,
        "C1 crank end [bar(a)]": np.roll(two, samples // 2),
    }


def write_machine(folder: Path, text: str = MACHINE, name: str = "machine.toml") -> Path:
    """Write a machine description."""
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def write_export(
    folder: Path,
    columns: dict[str, np.ndarray] | None = None,
    facts: dict[str, str] | None = None,
    name: str = "export.csv",
) -> Path:
    """Write an export; by default the healthy one of the test stand."""
    table = traces() if columns is None else columns
    known = FACTS if facts is None else facts
    lines = [f"# {key}: {value}" for key, value in known.items()]
    lines.append(",".join(table))
    lines += [
        ",".join(f"{value:.6g}" for value in row) for row in zip(*table.values(), strict=True)
    ]
    path = folder / name
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def without(key: str) -> dict[str, str]:
    """Facts of the export less one."""
    return {name: value for name, value in FACTS.items() if name != key}
