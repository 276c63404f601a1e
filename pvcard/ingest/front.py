"""`read_export`: from files to recordings.

Each file goes through the reader of its kind, its columns get their meaning, its metadata are
understood, and files that carry the same `recording` become one.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from pvcard.errors import ExportError
from pvcard.ingest.columns import Column, MatchedColumns, match_columns, recognised
from pvcard.ingest.columns_file import ColumnMap, read_columns
from pvcard.ingest.formats import Table, reader_for
from pvcard.ingest.joining import join_recordings
from pvcard.ingest.metadata import Readings, read_metadata
from pvcard.ingest.recording import CYLINDER_PRESSURE, Channel, Recording
from pvcard.ingest.roles import ANGLE, CYCLE, PRESSURE, PULSE, TIME
from pvcard.types import Floats

if TYPE_CHECKING:
    from pvcard.machine import Machine

# Readings beyond are no readings; some analysers write huge numbers for an overload.
LARGEST = {PRESSURE: 1e10, ANGLE: 1e9, TIME: 1e10, CYCLE: 1e9, PULSE: 1e30}  # Pa, deg, s, -, -

Progress = Callable[[str, float], None]


def read_export(
    paths: str | Path | Sequence[str | Path],
    machine: Machine,
    *,
    columns: str | Path | ColumnMap | None = None,
    progress: Progress | None = None,
) -> list[Recording]:
    """Read one or more exports of one machine.

    Parameters
    ----------
    paths : one file or several
    machine : the compressor they were taken on
    columns : a `columns.toml`, where the names of the columns do not describe themselves
    progress : called with the name of a file and the fraction of it that is read

    Returns
    -------
    recordings : one for each file, or for each `recording` that several files name, in the order
        of the files. Traces are as measured: SI, gauge pressure made absolute, else untouched.
    """
    files = [paths] if isinstance(paths, (str, Path)) else list(paths)
    if not files:
        raise ExportError("no export was named", expected="one or more files")
    column_map = columns if isinstance(columns, ColumnMap) else ColumnMap()
    if isinstance(columns, (str, Path)):
        column_map = read_columns(columns)
    recordings = [_read_file(Path(file), machine, column_map, progress) for file in files]
    return join_recordings(recordings)


def machine_name_in(path: str | Path, *, columns: ColumnMap | None = None) -> str | None:
    """Name of the machine that an export's metadata give, read before anything else of it.

    Parameters
    ----------
    path : of the export
    columns : the analyser's own names

    Returns
    -------
    name : str or None
        None where the export does not say.
    """
    column_map = columns or ColumnMap()
    table = reader_for(Path(path)).open(
        Path(path), column_map.layout, lambda names: recognised(names, column_map)
    )
    theirs = {own: key for key, own in column_map.metadata.items()}
    for key in ("machine", theirs.get("machine", "machine")):
        for name, entry in table.metadata.items():
            if name.strip().lower() == key.strip().lower():
                return entry.value.strip() or None
    return None


def _read_file(
    path: Path, machine: Machine, column_map: ColumnMap, progress: Progress | None
) -> Recording:
    """One file as a recording of its own."""
    file = str(path)
    table = reader_for(path).open(
        path, column_map.layout, lambda names: recognised(names, column_map)
    )
    matched = match_columns(table.names, column_map, machine, file=file, line=table.header_line)
    wanted = matched.all()
    report = None if progress is None else (lambda fraction: progress(file, fraction))
    arrays = table.read([column.position for column in wanted], report)
    values = {
        column.position: _checked(column, array, table, file)
        for column, array in zip(wanted, arrays, strict=True)
    }
    readings = read_metadata(
        table.metadata,
        column_map,
        machine,
        file=file,
        decimal="," if table.decimal_comma else None,
    )
    return _recording(file, table, matched, values, readings, machine)


def _recording(
    file: str,
    table: Table,
    matched: MatchedColumns,
    values: dict[int, Floats],
    readings: Readings,
    machine: Machine,
) -> Recording:
    """Put together what one file says."""
    barometric = readings.barometric_pressure or machine.barometric_pressure
    notes = [*table.notes, *matched.notes, *readings.notes]
    channels = _channels(matched, values, barometric, readings, notes)
    if not channels:
        raise ExportError("every pressure column is blank", file=file, expected="numbers in one")
    gauge = any(channel.reference == "gauge" for channel in channels)
    if gauge and readings.barometric_pressure is None:
        notes.append(
            f"gauge pressures were made absolute with {barometric / 1e5:.5g} bar, "
            "the barometric pressure of the machine description"
        )
    angle = _values_of(matched.angle, values)
    if matched.angle is not None and angle is not None:
        _check_angle(angle, matched.angle, file)
    return Recording(
        source=file,
        machine_name=readings.machine_name,
        time=readings.time,
        speed=readings.speed,
        load_steps=readings.load_steps,
        barometric_pressure=barometric,
        recording_id=readings.recording_id,
        crank_angle=angle,
        seconds=_values_of(matched.time, values),
        once_per_turn=_values_of(matched.pulse, values),
        cycle=_values_of(matched.cycle, values),
        channels=tuple(channels),
        lines=readings.lines,
        evidence=readings.evidence,
        metadata={key: entry.value for key, entry in table.metadata.items()},
        notes=tuple(notes),
    )


def _channels(
    matched: MatchedColumns,
    values: dict[int, Floats],
    barometric: float,
    readings: Readings,
    notes: list[str],
) -> list[Channel]:
    """Pressure columns that hold anything."""
    channels = []
    for column in matched.pressures:
        pressure = values[column.position]
        if np.isfinite(pressure).any():
            channels.append(_channel(column, pressure, barometric, readings, notes))
        else:
            notes.append(f"column '{column.name}' is blank and was left out")
    return channels


def _channel(
    column: Column, pressure: Floats, barometric: float, readings: Readings, notes: list[str]
) -> Channel:
    """One pressure column, absolute; the array is ours and is changed in place."""
    role = column.role
    if column.reference == "gauge":
        pressure += barometric
    elif column.reference == "unknown":
        notes.append(
            f"column '{column.name}': the unit '{column.unit}' does not say whether it is "
            "absolute or gauge; the level check decides"
        )
    own = role.kind == CYLINDER_PRESSURE
    return Channel(
        cylinder=role.cylinder,
        end=role.end,
        kind=role.kind,
        pressure=pressure,
        unit=column.unit,
        reference=column.reference,
        transducer=readings.transducers.get((role.cylinder, role.end)) if own else None,
        column=column.name,
    )


def _values_of(column: Column | None, values: dict[int, Floats]) -> Floats | None:
    return None if column is None else values[column.position]


def _checked(column: Column, array: Floats, table: Table, file: str) -> Floats:
    """Values in SI (angle in degrees); an error where one cannot be a reading."""
    limit = LARGEST[column.role.what] / column.size
    if np.fmax.reduce(array, initial=0.0) > limit or np.fmin.reduce(array, initial=0.0) < -limit:
        wrong = np.flatnonzero(np.abs(array) > limit)
        raise ExportError(
            "the number is too large to be a reading",
            file=file,
            place=table.place(column.position, int(wrong[0])),
            found=f"{array[wrong[0]]:g} {column.unit}".strip(),
            expected=f"a {column.role.what}, or nothing where it is missing",
            advice=f"{len(wrong)} value(s) like it in this column; some analysers write them for "
            "an overload",
        )
    if column.size != 1.0:
        array *= column.size  # the reader handed it over; in place spares large exports a copy
    return array


def _check_angle(angle: Floats, column: Column, file: str) -> None:
    """Whether the angle can be one of a crank in the unit it claims."""
    lowest, highest = float(np.fmin.reduce(angle)), float(np.fmax.reduce(angle))
    place = f"column '{column.name}'"
    if not highest > lowest:
        raise ExportError(
            "the crank angle does not change",
            file=file,
            place=place,
            found="blank fields only" if np.isnan(lowest) else f"{lowest:g} throughout",
            expected="angles over a whole turn",
        )
    span = (highest - lowest) / column.size
    likely = _likely_unit(span, column, len(angle))
    if likely is not None:
        word, unit, whole = likely
        raise ExportError(
            f"the crank angle looks like {word}",
            file=file,
            place=place,
            found=f"a span of {span:.4g} over the recording, named {column.unit}",
            expected=whole,
            advice=f"Write its unit as '{unit}': 'crank_angle [{unit}]', or [angle] unit in "
            "columns.toml",
        )


def _likely_unit(span: float, column: Column, rows: int) -> tuple[str, str, str] | None:
    """Another unit that fits the span better: its word, how to write it, what was expected."""
    if column.size == 1.0:
        whole = "a span of about 360 or more"
        if any(0.9 < span / (turns * 2 * np.pi) < 1.001 for turns in (1, 2)):
            return "radians", "rad", whole
        if 0.9 < span <= 1.0:
            return "fractions of a turn", "turn", whole
    elif column.unit.startswith("rad") and span > 300 and rows < 20 * span:
        return "degrees", "deg", "a span of about 6.28, and at least 20 samples a radian"
    return None
