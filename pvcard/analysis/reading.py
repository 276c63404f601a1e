"""Exports with the machine description each belongs to."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path

from pvcard.errors import ExportError
from pvcard.ingest import ColumnMap, Recording, read_columns, read_export
from pvcard.ingest.front import machine_name_in
from pvcard.machine import Machine, read_machine, read_machines, select_machine

Progress = Callable[[str, float], None]


def read_with_machines(
    exports: Sequence[str | Path],
    machine: str | Path,
    *,
    columns: str | Path | None = None,
    progress: Progress | None = None,
) -> list[tuple[Recording, Machine]]:
    """Read exports, each with the description of its machine.

    Parameters
    ----------
    exports : files
    machine : a description, or a folder of them matched by the metadata key ``machine``
    columns : columns.toml or None
    progress : called with the name of a file and the share read

    Returns
    -------
    list of (Recording, Machine)
        In the order of the exports; files of one recording are one entry.
    """
    for export in exports:
        if Path(export).is_dir():
            raise ExportError(
                "this is a folder, not an export", file=str(export), expected="a file"
            )
    column_map = read_columns(columns) if columns else None
    if not Path(machine).is_dir():
        only = read_machine(machine)
        recordings = read_export(list(exports), only, columns=column_map, progress=progress)
        return [(recording, only) for recording in recordings]
    machines = read_machines(machine)
    groups: dict[str | None, list[str | Path]] = {}
    for export in exports:
        groups.setdefault(machine_name_in(export, columns=column_map), []).append(export)
    pairs: list[tuple[Recording, Machine]] = []
    for name, files in groups.items():
        pairs.extend(_of_one_machine(machines, name, files, column_map, progress))
    order = {str(export): place for place, export in enumerate(exports)}
    pairs.sort(key=lambda pair: order.get(pair[0].source, len(order)))
    return pairs


def _of_one_machine(
    machines: Sequence[Machine],
    name: str | None,
    files: list[str | Path],
    columns: ColumnMap | None,
    progress: Progress | None,
) -> list[tuple[Recording, Machine]]:
    """Recordings of one machine, each with the description that held at its time."""
    named = [one for one in machines if name is None or one.name == name]
    first = named[0] if len(named) > 1 else select_machine(machines, name)
    recordings = read_export(files, first, columns=columns, progress=progress)
    pairs = []
    for recording in recordings:
        chosen = select_machine(machines, name, recording.time)
        if chosen is first:
            pairs.append((recording, chosen))
            continue
        again = read_export([recording.source], chosen, columns=columns)
        pairs.extend((one, chosen) for one in again)
    return pairs
