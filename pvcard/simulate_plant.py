"""The example plant: four machines of an invented works, and a year in their lives.

``python -m pvcard.simulate_plant example_data`` reads the four machine descriptions of that folder
and writes all exports and truths anew, always the same ones. The story is told in
example_data/README.md.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from datetime import datetime
from pathlib import Path
from typing import Any

import numpy as np

from pvcard.cycle import Leak, Leaks, Pulsation
from pvcard.errors import InputError
from pvcard.machine import read_machine
from pvcard.simulate import CylinderSituation, Situation, simulate_recordings
from pvcard.simulate_export import Layout, write_simulated
from pvcard.simulate_sensor import Sensor

_BAR = 1e5
_ZERO_CELSIUS = 273.15
_NO_WAVES = Pulsation()


@dataclass(frozen=True)
class Survey:
    """One recording of the story: file name, situation and layout."""

    name: str
    situation: Situation
    layout: Layout = field(default_factory=Layout)


def _by_end(head: float = 0.0, crank: float = 0.0) -> Leak:
    """Orifices at head and crank end, given in mm2."""
    return Leak(orifice=np.array([[head * 1e-6, crank * 1e-6]]))


def _fault(kind: str, cylinder: str, end: str | None) -> dict[str, Any]:
    return {"kind": kind, "cylinder": cylinder, "end": end}


# -- N-3: a suction valve going bad over a season -------------------------------------------------

# Date, suction and discharge pressure [bar], suction temperature [degC], speed [rpm], leak [mm2].
_N3_SURVEYS = (
    ("2024-03-12", 20.1, 47.8, 22.0, 735.2, 0.0),
    ("2024-04-16", 20.3, 48.5, 24.5, 734.8, 0.6),
    ("2024-05-21", 19.8, 47.1, 26.0, 735.0, 2.2),
    ("2024-06-25", 19.5, 48.9, 29.5, 735.5, 4.8),
    ("2024-07-30", 20.0, 49.3, 31.0, 734.6, 9.0),
    ("2024-09-03", 20.4, 48.2, 27.5, 735.1, 15.5),
    ("2024-09-24", 20.2, 48.0, 25.0, 735.0, 0.0),
    ("2024-10-29", 19.9, 47.5, 21.5, 734.9, 0.0),
)


def _n3_surveys() -> list[Survey]:
    passage = Sensor(780.0, 0.12, 0.012e5, 0.001, 0.004e5, 0.006e5, 0.001e5)
    sensors = (
        (passage, replace(passage, resonance=810.0, zero=-0.02e5, gain=-0.002)),
        (replace(passage, resonance=760.0, gain=0.002), replace(passage, zero=0.015e5)),
    )
    waves = Pulsation(
        np.array([[[0.003, 0.008j], [-0.003, 0.008j]]]),
        np.array([[[0.002j, 0.006], [-0.002j, 0.006]]]),
    )
    surveys = []
    for day, suction, discharge, warm, speed, leak in _N3_SURVEYS:
        common = CylinderSituation(
            suction * _BAR,
            discharge * _BAR,
            warm + _ZERO_CELSIUS,
            heat_multiplier=0.8,
            suction_heating=1.5,
            pulsation=waves,
            line_error=(0.001, -0.0005),
            temperature_error=(0.2, -0.1),
        )
        cylinders = {
            "C1": replace(
                common,
                leaks=Leaks(suction=_by_end(head=leak), rings=Leak(orifice=0.5e-6)),
                clearance_error=(0.006, -0.004),
                sensors=sensors[0],
            ),
            "C2": replace(
                common,
                leaks=Leaks(rings=Leak(orifice=0.7e-6)),
                clearance_error=(-0.008, 0.005),
                sensors=sensors[1],
            ),
        }
        situation = Situation(
            datetime.fromisoformat(day + "T09:30:00"),
            speed / 60,
            cylinders,
            encoder_offset=0.15,
            speed_ripple=(0.002, 0.004j),
            wander=0.0012,
            turns=24,
            story="healthy" if leak == 0 else "suction valve C1 head going bad",
            faults=(_fault("suction_valve_leak", "C1", "head"),) if leak else (),
        )
        surveys.append(Survey(day, situation))
    return surveys


# -- H-1: a worn ring set ------------------------------------------------------------------------

_H1_SURVEYS = (
    ("2024-01-23", 16.1, 37.6, 33.0, 327.0, 2.5),
    ("2024-04-09", 15.9, 38.2, 34.5, 326.8, 6.0),
    ("2024-07-02", 16.2, 38.8, 37.0, 327.3, 12.0),
    ("2024-09-10", 16.0, 38.1, 36.0, 327.1, 21.0),
    ("2024-10-08", 16.1, 38.0, 34.0, 327.0, 1.0),
)


def _h1_surveys() -> list[Survey]:
    flush = Sensor(None, 0.0, 0.03e5, 0.0015, 0.0, 0.004e5, 0.001e5)
    surveys = []
    for day, suction, discharge, warm, speed, rings in _H1_SURVEYS:
        common = CylinderSituation(
            suction * _BAR,
            discharge * _BAR,
            warm + _ZERO_CELSIUS,
            heat_law="adair",
            heat_multiplier=0.8,
            suction_heating=1.0,
            line_error=(-0.0005, 0.001),
            temperature_error=(-0.3, 0.2),
        )
        cylinders = {
            "C1": replace(
                common,
                leaks=Leaks(rings=Leak(slot=1.6e-10), packing=Leak(orifice=0.2e-6)),
                clearance_error=(0.004, 0.003),
                sensors=(flush, replace(flush, zero=-0.02e5)),
            ),
            "C2": replace(
                common,
                leaks=Leaks(rings=Leak(slot=rings * 1.6e-10), packing=Leak(orifice=0.2e-6)),
                clearance_error=(-0.005, 0.002),
                sensors=(replace(flush, gain=-0.001), replace(flush, zero=0.01e5)),
            ),
        }
        worn = rings > 5
        situation = Situation(
            datetime.fromisoformat(day + "T13:10:00"),
            speed / 60,
            cylinders,
            encoder_offset=-0.10,
            wander=0.0015,
            turns=6,
            averaged=False,
            angle_step=1.0,
            story="ring set of C2 wearing out" if worn else "healthy",
            faults=(_fault("piston_ring_leak", "C2", None),) if worn else (),
        )
        layout = Layout("kPa(g)", delimiter=";") if day == "2024-07-02" else Layout()
        surveys.append(Survey(day, situation, layout))
    return surveys


# -- F-2: eight ends, a mis-set encoder, pockets ---------------------------------------------------

_CONTRACTOR = {
    "crank_angle [deg]": "Deg",
    "C1 head end [psi(g)]": "P1H",
    "C1 crank end [psi(g)]": "P1C",
    "C2 head end [psi(g)]": "P2H",
    "C2 crank end [psi(g)]": "P2C",
    "C3 head end [psi(g)]": "P3H",
    "C3 crank end [psi(g)]": "P3C",
    "C4 head end [psi(g)]": "P4H",
    "C4 crank end [psi(g)]": "P4C",
}
# Date, pressures of suction, between the stages and of discharge [bar], encoder offset [deg], load
# step.
_F2_SURVEYS = (
    ("2024-05-14", 4.0, 10.35, 27.0, 0.05, "full load"),
    ("2024-06-18", 4.05, 10.45, 27.4, 0.85, "full load"),
    ("2024-06-20", 4.05, 10.45, 27.3, 0.05, "full load"),
    ("2024-08-06", 4.1, 9.85, 27.1, 0.05, "first stage pockets open"),
)


def _f2_surveys() -> list[Survey]:
    sensor = Sensor(650.0, 0.10, 0.006e5, 0.001, 0.002e5, 0.003e5, 0.0005e5)
    surveys = []
    for day, suction, between, discharge, offset, load_step in _F2_SURVEYS:
        first = CylinderSituation(
            suction * _BAR,
            between * _BAR,
            27.5 + _ZERO_CELSIUS,
            leaks=Leaks(rings=Leak(labyrinth=1.5e-6)),
            heat_multiplier=0.8,
            sensors=(sensor,),
            load_step=load_step,
            line_error=(0.001, 0.001),
        )
        second = replace(
            first,
            suction_pressure=(between - 0.15) * _BAR,
            discharge_pressure=discharge * _BAR,
            suction_temperature=40.0 + _ZERO_CELSIUS,
            sensors=(replace(sensor, resonance=720.0, zero=-0.015e5),),
        )
        cylinders = {
            "C1": replace(first, clearance_error=(0.005, -0.003)),
            "C2": replace(first, clearance_error=(-0.002, 0.004)),
            "C3": replace(second, clearance_error=(0.003, 0.006)),
            "C4": replace(second, clearance_error=(-0.006, 0.002)),
        }
        mis_set = offset > 0.5
        situation = Situation(
            datetime.fromisoformat(day + "T10:45:00"),
            720.4 / 60,
            cylinders,
            encoder_offset=offset,
            speed_ripple=(0.001, 0.002),
            wander=0.001,
            turns=16,
            first_angle=-180.0 if mis_set else 0.0,
            story="encoder mis-set" if mis_set else "healthy, " + load_step,
        )
        contractor = day.startswith("2024-06")
        layout = Layout("psi(g)", "degF", names=_CONTRACTOR) if contractor else Layout()
        surveys.append(Survey(day, situation, layout))
    return surveys


# -- single acting, sampled in time -----------------------------------------------------------


def _a4_surveys() -> list[Survey]:
    surveys = []
    for day, spring, warm in (("2024-03-05", 1.0, 19.0), ("2024-08-20", 0.08, 27.0)):
        weak = spring < 1
        changes = (
            {"suction": {"spring_rate": spring, "spring_preload": spring, "moving_mass": 2.0}}
            if weak
            else {}
        )
        cylinder = CylinderSituation(
            0.98 * _BAR,
            4.05 * _BAR,
            warm + _ZERO_CELSIUS,
            leaks=Leaks(rings=Leak(orifice=0.4e-6)),
            clearance_error=(0.003,),
            heat_multiplier=0.3,
            suction_heating=1.0,
            valve_changes=changes,
            sensors=(Sensor(900.0, 0.15, 0.002e5, 0.001, 0.001e5, 0.0008e5, 0.0002e5),),
        )
        situation = Situation(
            datetime.fromisoformat(day + "T07:55:00"),
            980.6 / 60,
            {"C1": cylinder},
            encoder_offset=0.2,
            speed_ripple=(0.004, 0.002j),
            wander=0.001,
            turns=8,
            sampling_rate=10e3,
            story="broken suction springs and heavier spare plates, the valve closes late"
            if weak
            else "healthy",
            faults=(_fault("late_suction_closing", "C1", "head"),) if weak else (),
        )
        surveys.append(Survey(day, situation))
    return surveys


_STORY = {"N-3": _n3_surveys, "H-1": _h1_surveys, "F-2": _f2_surveys, "A-4": _a4_surveys}


def make_plant(folder: Path, machines: Sequence[str] = tuple(_STORY)) -> list[Path]:
    """Write exports and truths of the example plant.

    Parameters
    ----------
    folder : Path
        Holds one folder a machine with its machine.toml.
    machines : names of these folders

    Returns
    -------
    list of Path
        The exports written.
    """
    written = []
    for name in machines:
        machine = read_machine(folder / name / "machine.toml")
        surveys = _STORY[name]()
        simulated = simulate_recordings(
            machine, [survey.situation for survey in surveys], seed=1000 + list(_STORY).index(name)
        )
        for survey, one in zip(surveys, simulated):
            export = folder / name / "exports" / f"{survey.name}.csv"
            truth = folder / name / "truth" / f"{survey.name}.json"
            write_simulated(one, export, truth, layout=survey.layout)
            written.append(export)
    return written


def main(arguments: Sequence[str] | None = None) -> int:
    """Run from the command line; see the module docstring."""
    parser = argparse.ArgumentParser(prog="python -m pvcard.simulate_plant", description=__doc__)
    parser.add_argument("folder", type=Path, help="folder with the machine descriptions")
    folder = parser.parse_args(arguments).folder
    try:
        for path in make_plant(folder):
            print(path)
    except (InputError, OSError) as problem:
        print(f"{problem}", file=sys.stderr)
        return 2
    return 0


if __name__ == "__main__":
    sys.exit(main())
