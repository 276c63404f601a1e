"""Files that carry the same `recording` become one recording.

An analyser often writes one file for each end or each cylinder. Their metadata add up; their rows
may differ, so each file keeps its own unless they are the same.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import fields, replace
from typing import Any

import numpy as np

from pvcard.errors import ExportError
from pvcard.ingest.recording import LineReadings, Recording, Trace
from pvcard.types import Floats


def join_recordings(recordings: Sequence[Recording]) -> list[Recording]:
    """Join recordings that name the same `recording`.

    Parameters
    ----------
    recordings : one for each file

    Returns
    -------
    joined : in the order in which each appears first; those without the key stay alone
    """
    joined: dict[object, Recording] = {}
    for number, recording in enumerate(recordings):
        key: object = recording.recording_id if recording.recording_id is not None else number
        joined[key] = _joined(joined[key], recording) if key in joined else recording
    return list(joined.values())


def _joined(first: Recording, second: Recording) -> Recording:
    """Two parts of one recording."""
    for name in ("machine_name", "load_steps"):
        _check_same(first, second, name)
    notes = [*first.notes, *(f"{second.source}: {note}" for note in second.notes)]
    notes.append(f"{second.source} belongs to the same recording '{first.recording_id}'")
    speed = first.speed or second.speed
    if first.speed and second.speed and abs(second.speed / first.speed - 1) > 1e-3:
        notes.append(
            f"{second.source} gives a speed of {second.speed * 60:.2f} rpm, "
            f"{first.source} {first.speed * 60:.2f} rpm; the first is used"
        )
    traces = list(first.traces)
    (own,) = second.traces
    place = next((k for k, trace in enumerate(traces) if _same_rows(trace, own)), len(traces))
    taken = {channel.key for channel in first.channels if channel.trace == place}
    if any(channel.key in taken for channel in second.channels):
        place = len(traces)  # further turns that happen to lie on equal rows
    if place == len(traces):
        traces.append(own)
    channels = [replace(channel, trace=place) for channel in second.channels]
    return replace(
        first,
        source=f"{first.source} + {second.source}",
        time=min((time for time in (first.time, second.time) if time), default=None),
        speed=speed,
        machine_name=first.machine_name or second.machine_name,
        load_steps=first.load_steps | second.load_steps,
        channels=first.channels + tuple(channels),
        lines=_lines(first, second, notes),
        evidence=second.evidence | first.evidence,
        metadata=second.metadata | first.metadata,
        notes=tuple(notes),
        further_traces=tuple(traces[1:]),
    )


def _check_same(first: Recording, second: Recording, name: str) -> None:
    """Files of one recording must not contradict each other."""
    ours, theirs = getattr(first, name), getattr(second, name)
    if isinstance(ours, dict):
        clash = any(ours[key] != theirs[key] for key in ours.keys() & theirs.keys())
    else:
        clash = ours is not None and theirs is not None and ours != theirs
    if clash:
        raise ExportError(
            f"carries recording '{second.recording_id}' like {first.source}, with another "
            + name.replace("_", " ").removesuffix("s"),
            file=second.source,
            found=str(theirs),
            expected=str(ours),
            advice="Give another recording its own name",
        )


def _lines(first: Recording, second: Recording, notes: list[str]) -> dict[str, LineReadings]:
    """Line readings of both; the first file counts where both have one."""
    lines = dict(first.lines)
    for cylinder, theirs in second.lines.items():
        ours = lines.get(cylinder, LineReadings())
        values: dict[str, Any] = {}
        for field in fields(LineReadings):
            mine, other = getattr(ours, field.name), getattr(theirs, field.name)
            if mine is None:
                values[field.name] = other
            elif isinstance(mine, float) and other is not None and abs(other / mine - 1) > 1e-3:
                notes.append(
                    f"{cylinder} {field.name.replace('_', ' ')} differs between the files; "
                    f"that of {first.source} is used"
                )
        lines[cylinder] = replace(ours, **values)
    return lines


def _same_rows(first: Trace, second: Trace) -> bool:
    """Whether two files lie on the same rows."""
    names = [field.name for field in fields(Trace)]
    return all(_equal(getattr(first, name), getattr(second, name)) for name in names)


def _equal(first: Floats | None, second: Floats | None) -> bool:
    if first is None or second is None:
        return first is second
    return np.array_equal(first, second, equal_nan=True)
