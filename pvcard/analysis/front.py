"""The whole way from recordings to results, many recordings as one batch."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

import pvcard
from pvcard.analysis.batch import Job, Outcome, measure_jobs
from pvcard.analysis.end_traces import EndTrace, Gathered, gather
from pvcard.analysis.load_steps import Seen, StepChoice, choose_step, steps_of
from pvcard.analysis.rows import (
    Row,
    cylinder_row,
    end_row,
    estimate_of,
    explain_idle,
    open_row,
)
from pvcard.analysis.totals import total_rows
from pvcard.analysis.views import card_view
from pvcard.findings import findings_of
from pvcard.ingest import Recording
from pvcard.machine import Cylinder, Machine
from pvcard.repair.entry import repair_entry
from pvcard.results import Analysis, RecordingResult
from pvcard.uncertainty import INDEX

Progress = Callable[[str, float], None]
_IDLE_RISE = 0.5  # of the line pressure rise: an end whose trace stays below does not compress


@dataclass
class _Work:
    gathered: Gathered
    choices: dict[str, StepChoice]
    first: int  # number of its first job


def analyse(
    recordings: Sequence[Recording],
    machines: Machine | Sequence[Machine],
    *,
    with_uncertainty: bool = True,
    with_views: bool = False,
    progress: Progress | None = None,
) -> Analysis:
    """Analyse recordings of one machine or several as one batch.

    Parameters
    ----------
    recordings : sequence of Recording
        From `pvcard.read_export`.
    machines : Machine or sequence of Machine
        One for all recordings, or one for each.
    with_uncertainty : whether to carry uncertainties
    with_views : whether to keep the arrays that plots need
    progress : called with a text and the share done

    Returns
    -------
    Analysis
        Results in the order of the recordings.

    Raises
    ------
    InputError
        If a recording has no complete turn or no trace of an end that compresses.
    """
    own = [machines] * len(recordings) if isinstance(machines, Machine) else list(machines)
    work: list[_Work] = []
    jobs: list[Job] = []
    for recording, machine in zip(recordings, own, strict=True):
        gathered = gather(recording, machine)
        choices = {
            cylinder.name: _named(machine, cylinder, recording) for cylinder in machine.cylinders
        }
        work.append(_Work(gathered, choices, len(jobs)))
        jobs.extend(_job(machine, end, choices[end.cylinder.name].name) for end in gathered.ends)
    outcomes = measure_jobs(jobs, with_uncertainty=with_uncertainty, progress=progress)
    _settle_steps(work, jobs, outcomes, with_uncertainty)
    results = [_result(one, jobs, outcomes, with_views) for one in work]
    return Analysis(results, pvcard.__version__)


def _named(machine: Machine, cylinder: Cylinder, recording: Recording) -> StepChoice:
    named = recording.load_steps.get(cylinder.name) or recording.load_steps.get("")
    names = steps_of(machine, cylinder)
    if named is not None and named in names:
        return StepChoice(named, 1.0, named)
    return StepChoice(names[0] if names else named, 1.0, named if named in names else None)


def _job(machine: Machine, trace: EndTrace, step: str | None) -> Job:
    known = step if step in machine.load_step_names else None
    clearance = machine.clearance(trace.cylinder, trace.end, known)
    return Job(trace, machine, clearance, machine.uncertainty.clearance)


def _seen(job: Job, outcome: Outcome) -> Seen:
    """What a card shows of its clearance, the declared one taken out again."""
    measured = outcome.measured
    end = job.trace.end
    if measured is None or outcome.input_uncertainty is None:
        return Seen(end, True, np.nan, np.inf)
    row = outcome.row
    if not measured.closed[row]:
        return Seen(end, not _idle(job), np.nan, np.inf)
    alone, alone_u = (
        float(measured.fit.clearance_alone[row]),
        float(measured.fit.clearance_alone_u[row]),
    )
    estimate = estimate_of(outcome, "clearance_pct")
    if estimate is None or not estimate.slopes.shape[1]:
        return Seen(end, True, alone, alone_u)
    place = INDEX["clearance"]
    shares = estimate.contributions(outcome.input_uncertainty[None])[0].copy()
    own = 1 - float(estimate.slopes[0, place]) / 100
    shares[place] = 0
    spread = float(np.sqrt(np.sum(shares**2))) / 100
    return Seen(end, True, alone, max(alone_u, spread / max(own, 1e-3)))


def _idle(job: Job) -> bool:
    lines = job.trace.lines
    rise = lines.discharge_pressure - lines.suction_pressure
    low, high = job.trace.pressure.min(), job.trace.pressure.max()
    return bool(low > 0 and high < lines.suction_pressure + _IDLE_RISE * rise)


def _settle_steps(
    work: list[_Work], jobs: list[Job], outcomes: list[Outcome], with_uncertainty: bool
) -> None:
    """Find each cylinder's load step and measure again where its clearance was another."""
    again: list[int] = []
    for one in work:
        machine = one.gathered.machine
        numbers = range(one.first, one.first + len(one.gathered.ends))
        for cylinder in machine.cylinders:
            mine = [number for number in numbers if jobs[number].trace.cylinder is cylinder]
            if not mine or not steps_of(machine, cylinder):
                continue
            seen = [_seen(jobs[number], outcomes[number]) for number in mine]
            choice = choose_step(machine, cylinder, one.choices[cylinder.name].named, seen)
            one.choices[cylinder.name] = choice
            for number in mine:
                clearance = machine.clearance(cylinder, jobs[number].trace.end, choice.name)
                if clearance != jobs[number].clearance:
                    jobs[number] = replace(jobs[number], clearance=clearance)
                    again.append(number)
    renewed = measure_jobs([jobs[number] for number in again], with_uncertainty=with_uncertainty)
    for number, outcome in zip(again, renewed):
        outcomes[number] = outcome


def _result(
    one: _Work, jobs: list[Job], outcomes: list[Outcome], with_views: bool
) -> RecordingResult:
    gathered, machine = one.gathered, one.gathered.machine
    numbers = range(one.first, one.first + len(gathered.ends))
    ends: list[tuple[Row, Outcome | None]] = []
    repairs = list(gathered.repairs)
    idle: dict[tuple[str, str], str] = {}
    views = {}
    for number in numbers:
        job, outcome = jobs[number], outcomes[number]
        choice = one.choices[job.trace.cylinder.name]
        row = end_row(job, outcome, choice.name)
        ends.append((row, outcome))
        if _idle(job):
            why = _why_idle(machine, job, choice)
            idle[row["cylinder"], row["end"]] = why
            explain_idle(row, f"the end does not compress: {why}")
        repairs.extend(_repairs_of(job, outcome, row))
        if with_views:
            views[row["cylinder"], row["end"]] = card_view(job, outcome, row)
    for cylinder in machine.cylinders:
        repairs.extend(_step_repair(cylinder, one.choices[cylinder.name]))
    ends = _with_others(machine, one.choices, ends)
    rows = [row for row, _ in ends]
    totals = total_rows(machine, ends, set(idle))
    time = gathered.recording.time
    return RecordingResult(
        {
            "machine": machine.name,
            "time": time.isoformat() if time else None,
            "source": gathered.recording.source,
            "cycles": gathered.turn_count,
            "samples": gathered.samples,
            "load_step": _common_step(one.choices),
        },
        repairs,
        rows,
        [cylinder_row(name) for name in dict.fromkeys(row["cylinder"] for row in rows)],
        totals,
        findings_of(machine, rows, totals, idle),
        tuple(gathered.notes),
        views,
        (machine.base_pressure, machine.base_temperature),
    )


def _why_idle(machine: Machine, job: Job, choice: StepChoice) -> str:
    state = machine.end_state(job.trace.cylinder, job.trace.end, choice.name)
    high = job.trace.pressure.max() / 1e5
    wanted = job.trace.lines.discharge_pressure / 1e5
    text = f"its pressure reaches only {high:.4g} bar of {wanted:.4g} bar"
    if state in ("suction_valves_held_open", "suction_valves_removed"):
        return f"{text}, as the load step '{choice.name}' says ({state.replace('_', ' ')})"
    return f"{text}, although it is declared as loaded"


def _with_others(
    machine: Machine,
    choices: dict[str, StepChoice],
    ends: list[tuple[Row, Outcome | None]],
) -> list[tuple[Row, Outcome | None]]:
    """Add rows for ends that do not compress, or have no trace, in the order of the machine."""
    known = {(row["cylinder"], row["end"]): (row, outcome) for row, outcome in ends}
    result: list[tuple[Row, Outcome | None]] = []
    recorded = {name for name, _ in known}
    for cylinder in machine.cylinders:
        if cylinder.name not in recorded:
            continue
        for end in (cylinder.head_end, cylinder.crank_end):
            key = (cylinder.name, end.name)
            if key in known:
                result.append(known[key])
                continue
            reason = "the export has no trace of this end"
            if end.open_to:
                reason = f"this end is open to {end.open_to} and does not compress"
            row = open_row(
                cylinder.name, end.name, cylinder.stage, choices[cylinder.name].name, reason
            )
            _line_pressures(
                row, [item for (name, _), item in known.items() if name == cylinder.name]
            )
            result.append((row, None))
    return result


def _line_pressures(row: Row, twins: list[tuple[Row, Outcome | None]]) -> None:
    """Give an end without figures the line pressures of the other end of its cylinder."""
    for column in ("suction_pressure_bar", "discharge_pressure_bar"):
        if twins and twins[0][0][column] is not None:
            row[column], row[f"u_{column}"] = twins[0][0][column], twins[0][0][f"u_{column}"]
            row["reason"].pop(column, None)


def _common_step(choices: dict[str, StepChoice]) -> str | None:
    names = {choice.name for choice in choices.values()}
    return names.pop() if len(names) == 1 else None


def _repairs_of(job: Job, outcome: Outcome, row: Row) -> list[Row]:
    repairs: list[Row] = []
    where = {"cylinder": row["cylinder"], "end": row["end"]}
    fitted, u = row["clearance_pct"], row["u_clearance_pct"]
    declared = 100 * job.clearance
    measured = outcome.measured
    if fitted is not None and measured is not None and not measured.fit.prior_kept[outcome.row]:
        text = (
            f"the closed parts of the card fit a clearance of {fitted:.2f} %, declared are "
            f"{declared:.2f} %; beyond three standard uncertainties the declared value is left out"
        )
        figure = (fitted - declared, "points", u)
        repairs.append(repair_entry("clearance_mismatch", text, **where, figure=figure))
    power = row["indicated_power_kW"]
    if power is not None and power < -3 * (row["u_indicated_power_kW"] or 0.0):
        text = (
            "the loop gives work instead of taking it in: the angle runs against the rotation, or "
            "the ends are swapped; nothing was changed"
        )
        repairs.append(repair_entry("reversed_angle", text, **where, applied=False))
    return repairs


def _step_repair(cylinder: Cylinder, choice: StepChoice) -> list[Row]:
    if not choice.contradicted:
        return []
    text = (
        f"the export names the load step '{choice.named}', the cards fit '{choice.name}' with "
        f"probability {choice.probability:.3f}; the latter was taken"
    )
    return [repair_entry("load_step_mismatch", text, cylinder=cylinder.name)]
