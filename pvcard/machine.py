"""Machine descriptions: the front of this room, and the choice among several of them.

The parts stand in `machine_parts`, the keys of machine.toml in `machine_keys`, reading in
`machine_document`, `machine_values` and `machine_reader`, checks of the whole in `machine_checks`.
"""

from __future__ import annotations

from collections.abc import Sequence
from datetime import UTC, datetime
from itertools import pairwise
from pathlib import Path

from pvcard.errors import MachineError
from pvcard.machine_checks import nearest
from pvcard.machine_document import load_document
from pvcard.machine_keys import TOP_TABLES
from pvcard.machine_parts import (
    END_STATES,
    Cylinder,
    CylinderEnd,
    EndName,
    EndState,
    GasDescription,
    LoadStep,
    LoadStepEnd,
    Machine,
    Stage,
    Valves,
)
from pvcard.machine_reader import (
    build_machine,
    moment_of,
    read_machine,
    read_machine_text,
    standard_atmosphere_pressure,
)
from pvcard.machine_settings import Cost, Costs, Limits, Reference, Uncertainty

__all__ = [
    "END_STATES",
    "Cost",
    "Costs",
    "Cylinder",
    "CylinderEnd",
    "EndName",
    "EndState",
    "GasDescription",
    "Limits",
    "LoadStep",
    "LoadStepEnd",
    "Machine",
    "Reference",
    "Stage",
    "Uncertainty",
    "Valves",
    "read_machine",
    "read_machine_text",
    "read_machines",
    "select_machine",
    "standard_atmosphere_pressure",
]


def read_machines(path: str | Path) -> list[Machine]:
    """Read a description, or all of a folder.

    Parameters
    ----------
    path : a TOML file, or a folder of them; files in it that hold none of the tables of a machine
        description (a columns.toml) are passed over

    Returns
    -------
    machines : by name, then by `valid_from`
    """
    folder = Path(path)
    if not folder.is_dir():
        return [read_machine(path)]
    files = sorted(file for file in folder.iterdir() if file.suffix.lower() == ".toml")
    documents = [load_document(file) for file in files]
    machines = [build_machine(d) for d in documents if d.data.keys() & TOP_TABLES.keys()]
    if not machines:
        raise MachineError(
            "there is no machine description in this folder",
            file=str(path),
            expected="one or more TOML files with a table [machine]",
        )
    machines.sort(key=lambda machine: (machine.name, moment_of(machine)))
    for earlier, later in pairwise(machines):
        if earlier.name == later.name and moment_of(earlier) == moment_of(later):
            raise MachineError(
                f"two descriptions of {later.name!r} hold from the same moment",
                file=later.source,
                place="machine.valid_from",
                found=f"the same as in {earlier.source}",
                advice='Tell them apart, for example by valid_from = "2024-03-01"',
            )
    return machines


def select_machine(
    machines: Sequence[Machine], name: str | None = None, time: datetime | None = None
) -> Machine:
    """Choose the description that holds for a recording.

    Parameters
    ----------
    machines : as from `read_machines`
    name : the metadata key `machine` of the recording; None where it has none
    time : of the recording, with time zone (one without is taken as UTC); None where it has none

    Returns
    -------
    machine : the latest one of that name whose `valid_from` is not after `time`

    Raises
    ------
    MachineError : none or several fit
    """
    names = list(dict.fromkeys(machine.name for machine in machines))
    chosen = _chosen_name(names, name)
    versions = sorted((m for m in machines if m.name == chosen), key=moment_of)
    if len(versions) == 1 and (time is None or versions[0].valid_from is None):
        return versions[0]
    if time is None:
        raise MachineError(
            f"{len(versions)} descriptions of {chosen!r} hold from different moments, and the "
            "recording has no time",
            expected="the metadata key `time`, for example # time: 2024-03-01T10:00:00",
        )
    moment = time if time.tzinfo else time.replace(tzinfo=UTC)
    valid = [machine for machine in versions if moment_of(machine) <= moment]
    if not valid:
        first = versions[0]
        raise MachineError(
            f"no description of {chosen!r} holds at the time of the recording",
            file=first.source or None,
            found=f"{moment.astimezone(UTC):%Y-%m-%d %H:%M} UTC",
            expected=f"from {first.valid_from:%Y-%m-%d} on (valid_from)",
            advice="Add the description that held before, or correct valid_from",
        )
    return valid[-1]


def _chosen_name(names: list[str], name: str | None) -> str:
    if name is None:
        if len(names) == 1:
            return names[0]
        raise MachineError(
            "several machines are described, and the recording does not say which it is of",
            expected="the metadata key `machine`, one of " + ", ".join(names) or "none",
        )
    plain = name.casefold().strip()
    same = [known for known in names if known == name] or [
        known for known in names if known.casefold().strip() == plain
    ]
    if len(same) == 1:
        return same[0]
    near = nearest(name, names)
    raise MachineError(
        "no machine of this name is described",
        found=repr(name),
        expected="one of " + ", ".join(names) if names else None,
        advice=f'Did you mean "{near}"?' if near else None,
    )
