"""Results as text: a table for people, CSV and JSON for machines, files written aside and
renamed."""

from __future__ import annotations

import csv
import io
import json
import math
import os
import tempfile
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any, NamedTuple

from pvcard.errors import InputError
from pvcard.quantities import END_IDENTITY, QUANTITIES, TOTAL_QUANTITIES, Quantity
from pvcard.results import Analysis, RecordingResult
from pvcard.unit_display import DisplayUnit
from pvcard.units import display_unit

Row = dict[str, Any]
_COLUMNS_ACROSS = 4
GROUPS = (
    ("conditions", "Conditions"),
    ("power", "Power"),
    ("card", "Card"),
    ("valves", "Valves"),
    ("capacity", "Capacity"),
    ("leaks", "Leaks"),
)
_DIFFERENCES = ("mean_effective_pressure_bar", "discharge_temperature_excess_K")


def as_json(analysis: Analysis) -> str:
    """Return the JSON document of an analysis.

    Parameters
    ----------
    analysis : Analysis

    Returns
    -------
    text : str
        A missing value is null, never NaN.
    """
    return json.dumps(analysis.as_json(), indent=1, allow_nan=False, ensure_ascii=False) + "\n"


def as_csv_files(analysis: Analysis) -> dict[str, str]:
    """Tables of an analysis as comma-separated text.

    Parameters
    ----------
    analysis : Analysis

    Returns
    -------
    dict
        Text by table: "" for the ends, then cylinders, totals, findings and repairs.
    """
    tables: dict[str, list[Row]] = {
        "": [],
        "cylinders": [],
        "totals": [],
        "findings": [],
        "repairs": [],
    }
    for one in analysis.recordings:
        front = {
            "recording": one.recording["source"],
            "machine": one.recording["machine"],
            "time": one.recording["time"],
        }
        for name in tables:
            for row in getattr(one, name or "ends"):
                tables[name].append({**front, **row})
    return {name: _csv(rows) for name, rows in tables.items()}


def _csv(rows: Iterable[Row]) -> str:
    kept = list(rows)
    names = list(dict.fromkeys(name for row in kept for name in row))
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(names)
    for row in kept:
        writer.writerow([_cell(row.get(name)) for name in names])
    return out.getvalue()


def _cell(value: Any) -> Any:
    if isinstance(value, (dict, list)):
        return json.dumps(value, ensure_ascii=False) if value else ""
    return "" if value is None else value


def write_text(files: Mapping[Path, str]) -> None:
    """Write files aside and rename them, so that none is ever seen half-written.

    Parameters
    ----------
    files : text by path

    Raises
    ------
    InputError
        If a folder cannot be written to; nothing is left behind then.
    """
    for path in files:
        if path.is_dir():
            raise InputError("the result cannot be written", file=str(path), found="a folder")
    waiting: list[tuple[str, Path]] = []
    target = next(iter(files))
    try:
        for target, text in files.items():
            handle, name = tempfile.mkstemp(prefix=f".{target.name}.", dir=target.parent or ".")
            waiting.append((name, target))
            with os.fdopen(handle, "w", encoding="utf-8", newline="") as file:
                file.write(text)
                file.flush()
                os.fsync(file.fileno())
            os.chmod(name, 0o644)
        while waiting:
            name, target = waiting[-1]
            os.replace(name, target)
            waiting.pop()
    except OSError as error:
        raise InputError(
            "the result cannot be written",
            file=str(target),
            found=error.strerror,
            expected="a folder that exists and may be written to",
        ) from error
    finally:
        for name, _ in waiting:
            Path(name).unlink(missing_ok=True)


def figure_text(value: float | None, u: float | None) -> str:
    """A figure with its standard uncertainty, both cut to two digits of the latter.

    Parameters
    ----------
    value, u : same unit; None where missing

    Returns
    -------
    text : str

    Examples
    --------
    >>> figure_text(644.17, 0.787)
    '644.17 ± 0.79'
    >>> figure_text(None, None)
    '-'
    """
    if value is None:
        return "-"
    if not u:
        return f"{value:.5g}"
    places = min(max(1 - math.floor(math.log10(u)), 0), 6)
    return f"{value:.{places}f} ± {u:.{places}f}"


def as_table(analysis: Analysis, units: str = "si") -> str:
    """Result as a table to read in a terminal.

    Parameters
    ----------
    analysis : Analysis
    units : "si" or "us"

    Returns
    -------
    text : str
        Values with standard uncertainties, the ends side by side.
    """
    return "\n".join(_recording_table(one, units) for one in analysis.recordings)


def _recording_table(one: RecordingResult, units: str) -> str:
    display = Display(units, *one.base_state)
    facts = one.recording
    head = [f"{facts['machine']}  {facts['time'] or 'no time'}  {facts['source']}"]
    head.append(
        f"{facts['cycles']} turn{'s' if facts['cycles'] != 1 else ''} of {facts['samples']} samples"
        + (f", load step {facts['load_step']}" if facts["load_step"] else "")
        + "; figures with standard uncertainty, '-' not determined"
    )
    lines = [*head, ""]
    rows = [
        row
        for row in one.ends
        if any(row[name] is not None for name in QUANTITIES if name not in END_IDENTITY)
    ]
    for first in range(0, len(rows), _COLUMNS_ACROSS):
        lines += _ends_block(rows[first : first + _COLUMNS_ACROSS], display)
    lines += _totals_block(one.totals, display)
    for finding in one.findings:
        lines.append(f"{finding['severity'].upper()}: {finding['text']}")
        if finding["caution"]:
            lines.append(f"  Caution: {finding['caution']}")
    for repair in one.repairs:
        where = " ".join(str(repair[key]) for key in ("cylinder", "end") if repair[key])
        text = "; ".join(item["text"] for item in repair["evidence"])
        lines.append(f"{repair['kind'].replace('_', ' ')}{f' ({where})' if where else ''}: {text}")
    lines += _reasons(one.ends)
    return "\n".join(lines) + "\n"


class Display(NamedTuple):
    """System of units of a table, with the base state of its standard flows."""

    units: str  # "si" or "us"
    base_pressure: float = 101325.0  # Pa
    base_temperature: float = 288.15  # K


def shown_unit(quantity: Quantity, display: Display | str) -> DisplayUnit:
    """Unit in which a column is shown.

    Parameters
    ----------
    quantity : from the register
    display : Display, or "si" or "us" for standard flows at the default base state

    Returns
    -------
    DisplayUnit
    """
    if isinstance(display, str):
        display = Display(display)
    difference = quantity.column in _DIFFERENCES or "margin" in quantity.column
    system = "us" if display.units == "us" else "si"
    return display_unit(
        quantity.unit,
        system,
        difference=difference,
        base_pressure=display.base_pressure,
        base_temperature=display.base_temperature,
    )


def _ends_block(rows: list[Row], display: Display) -> list[str]:
    width = 20
    label = 46
    titles = "".join(f"{row['cylinder']} {row['end']}"[: width - 1].rjust(width) for row in rows)
    lines = [" " * label + titles]
    for group, title in GROUPS:
        block = []
        for quantity in QUANTITIES.values():
            if quantity.group != group or all(row[quantity.column] is None for row in rows):
                continue
            unit = shown_unit(quantity, display)
            name = f"{quantity.label}{f' [{unit.label}]' if unit.label else ''}"
            cells = "".join(_shown(row, quantity, unit).rjust(width) for row in rows)
            block.append(f"  {name[: label - 3]:<{label - 2}}{cells}")
        if block:
            lines += [title, *block]
    return [*lines, ""]


def _shown(row: Row, quantity: Quantity, unit: DisplayUnit) -> str:
    value, u = row[quantity.column], row.get(f"u_{quantity.column}")
    if value is None:
        return "-"
    return figure_text(unit.value(value), None if u is None else unit.uncertainty(u))


def _totals_block(totals: list[Row], display: Display) -> list[str]:
    shown = [
        quantity
        for quantity in TOTAL_QUANTITIES.values()
        if not quantity.column.startswith("torque")
    ]
    lines = ["Totals"]
    for row in totals:
        parts = []
        for quantity in shown:
            if row[quantity.column] is None:
                continue
            unit = shown_unit(quantity, display)
            parts.append(f"{quantity.label} {_shown(row, quantity, unit)} {unit.label}".rstrip())
        lines.append(f"  {row['scope']} {row['name']}: {'; '.join(parts) or 'not determined'}")
    return [*lines, ""]


def _reasons(ends: list[Row]) -> list[str]:
    """Why something is missing, each reason once; parts that do not exist yet are left to the
    JSON."""
    said: dict[str, list[str]] = {}
    for row in ends:
        for reason in dict.fromkeys(row["reason"].values()):
            if not reason.startswith("this version") and "no trace of this line" not in reason:
                said.setdefault(reason, []).append(f"{row['cylinder']} {row['end']}")
    return [f"not determined ({', '.join(where)}): {reason}" for reason, where in said.items()]
