"""The page of one recording and the list of many: plain HTML, everything inside one file."""

from __future__ import annotations

from collections.abc import Sequence
from html import escape
from typing import Any

from pvcard.quantities import QUANTITIES, TOTAL_QUANTITIES, Quantity
from pvcard.report.figures import Drawing, inline
from pvcard.report.style import CSS
from pvcard.results import RecordingResult
from pvcard.tables import GROUPS, Display, figure_text, shown_unit

Row = dict[str, Any]
_SEVERITY_ORDER = ("act", "watch", "note")
_LATER = "this version of pvcard"
_CAUTIONS = (
    "Indicator valves open to live process gas: hot, under pressure, possibly toxic or flammable. "
    "Fitting and removing a sensor is permit work for competent people, after the site's own "
    "procedures.",
    "pvcard computes indications from the readings and values it was given. It does not clear a "
    "machine to run: the maker's limits, local codes and a competent, licensed person decide.",
)


def page(
    one: RecordingResult, drawings: dict[str, list[Drawing]], split: Drawing | None, units: str
) -> str:
    """HTML page of one recording.

    Parameters
    ----------
    one : RecordingResult
    drawings : plots by cylinder
    split : the plot of power, if there is one
    units : "si" or "us"

    Returns
    -------
    str
        A whole document that needs no other file.
    """
    display = Display(units, *one.base_state)
    facts = one.recording
    body = [
        f"<h1>{escape(facts['machine'])}</h1>",
        f"<p class=soft>Cylinder pressure reading of {escape(_time(facts['time']))}</p>",
        _facts(one, display),
        "<h2>In short</h2>",
        *_findings(one.findings),
        "<div class=ends>",
        *[_end_summary(one, row, display) for row in one.ends],
        "</div>",
        *_handling(one),
    ]
    for cylinder, plots in drawings.items():
        body.append(f"<h2>Cylinder {escape(cylinder)}</h2><div class=plots>")
        body += [f"<figure>{inline(plot)}</figure>" for plot in plots]
        body.append("</div>")
    if split:
        body.append(f"<h2>Power</h2><figure class=wide>{inline(split)}</figure>")
    body += _tables(one, display)
    body += _missing(one)
    body.append("<h2>Cautions</h2><div class=caution>")
    body += [f"<p>{escape(text)}</p>" for text in _CAUTIONS]
    body.append("</div>")
    return document(f"{facts['machine']} {_time(facts['time'])}", "\n".join(body))


def document(title: str, body: str) -> str:
    """Frame of a page.

    Parameters
    ----------
    title, body : text and HTML

    Returns
    -------
    str
    """
    return (
        '<!DOCTYPE html>\n<html lang="en"><head><meta charset="utf-8">'
        '<meta name="viewport" content="width=device-width,initial-scale=1">'
        f"<title>{escape(title)}</title><style>{CSS}</style></head>\n"
        f"<body><main>\n{body}\n</main></body></html>\n"
    )


def index(entries: Sequence[tuple[RecordingResult, str]], units: str) -> str:
    """List of several recordings.

    Parameters
    ----------
    entries : each recording with the file name of its page
    units : "si" or "us"

    Returns
    -------
    str
    """
    power, flow = TOTAL_QUANTITIES["indicated_power_kW"], TOTAL_QUANTITIES["standard_flow_m3_h"]
    specific = TOTAL_QUANTITIES["specific_power_kWh_per_1000_m3"]
    shown = (power, flow, specific)
    head = "".join(f"<th>{escape(_titled(one, Display(units)))}</th>" for one in shown)
    lines = [
        "<h1>Recordings</h1><div class=scroll><table><thead><tr><th>Machine and time</th>"
        f"{head}<th>Findings</th></tr></thead><tbody>"
    ]
    for one, name in entries:
        total = next((row for row in one.totals if row["scope"] == "machine"), {})
        display = Display(units, *one.base_state)
        cells = "".join(f"<td>{_cell(total, quantity, display)}</td>" for quantity in shown)
        title = f"{one.recording['machine']}, {_time(one.recording['time'])}"
        lines.append(
            f'<tr><td><a href="{escape(name, quote=True)}">{escape(title)}</a></td>{cells}'
            f"<td>{escape(worst_word(one))}</td></tr>"
        )
    lines.append("</tbody></table></div><p class=soft>Figures with standard uncertainty.</p>")
    return document("Recordings", "\n".join(lines))


def worst_word(one: RecordingResult) -> str:
    """Worst severity of a recording as a word.

    Parameters
    ----------
    one : RecordingResult

    Returns
    -------
    str
    """
    found = {finding["severity"] for finding in one.findings}
    return next((word for word in _SEVERITY_ORDER if word in found), "none")


def _time(time: str | None) -> str:
    return time.replace("T", " ").replace("+00:00", " UTC") if time else "an unknown time"


def _titled(quantity: Quantity, display: Display) -> str:
    label = shown_unit(quantity, display).label
    return f"{quantity.label} [{label}]" if label else quantity.label


def _cell(row: Row, quantity: Quantity, display: Display) -> str:
    value, u = row.get(quantity.column), row.get(f"u_{quantity.column}")
    if value is None:
        return "not determined"
    if isinstance(value, str):
        return escape(value)
    unit = shown_unit(quantity, display)
    return figure_text(unit.value(value), None if u is None else unit.uncertainty(u))


def _facts(one: RecordingResult, display: Display) -> str:
    facts = one.recording
    turns = facts["cycles"]
    items = [
        f"{turns} turn{'s' if turns != 1 else ''} of {facts['samples']} samples",
        f"load step {facts['load_step']}" if facts["load_step"] else "",
        f"source {facts['source']}",
    ]
    first = next((row for row in one.ends if row["speed_rpm"] is not None), None)
    if first:
        items.insert(0, f"{first['speed_rpm']:.1f} rpm")
    total = next((row for row in one.totals if row["scope"] == "machine"), None)
    for column in ("indicated_power_kW", "standard_flow_m3_h", "driver_load_pct"):
        if total and total[column] is not None:
            quantity = TOTAL_QUANTITIES[column]
            unit = shown_unit(quantity, display).label
            label = quantity.label.lower()
            items.append(f"{label} of the machine {_cell(total, quantity, display)} {unit}")
    listed = "".join(f"<li>{escape(item)}</li>" for item in items if item)
    return f"<ul class=facts>{listed}</ul>"


def _findings(findings: Sequence[Row]) -> list[str]:
    lines = []
    for one in findings:
        caution = f"<p class=soft>Caution: {escape(one['caution'])}</p>" if one["caution"] else ""
        sure = f"{100 * one['group_probability']:.0f} % sure"
        lines.append(
            f'<div class="finding {escape(one["severity"])}"><p><span class=word>'
            f"{escape(one['severity'])}</span>{escape(one['text'])} "
            f"<span class=soft>({sure})</span></p>{caution}</div>"
        )
    return lines or ["<p class=soft>No findings from the declared limits.</p>"]


def _end_summary(one: RecordingResult, row: Row, display: Display) -> str:
    """What an engineer says of an end in a breath."""
    name = escape(f"{row['cylinder']} {row['end']} end")
    kind = escape(row["end"])
    if row["indicated_power_kW"] is None:
        reason = next(iter(row["reason"].values()), "not determined")
        text = f"No figures: {escape(row['reason'].get('indicated_power_kW', reason))}."
        return f'<div class="end {kind}"><h3>{name}</h3><p>{text}</p></div>'

    def said(column: str) -> str:
        quantity = QUANTITIES[column]
        unit = shown_unit(quantity, display).label
        return f"{_cell(row, quantity, display)} {unit}".strip()

    big = f"<b class=big>{escape(said('indicated_power_kW'))}</b>"
    if row["ideal_power_kW"] is None:
        reason = escape(row["reason"].get("ideal_power_kW", ""))
        return f'<div class="end {kind}"><h3>{name}</h3>{big}<p>indicated; {reason}.</p></div>'
    above = 100 * (row["indicated_power_kW"] / row["ideal_power_kW"] - 1)
    words = "above" if above >= 0 else "below"
    sentence = (
        f"indicated, {abs(above):.1f} % {words} the theoretical card. "
        f"It delivers {said('discharge_flow_kg_h')} at an isentropic efficiency of "
        f"{said('isentropic_efficiency_pct')}. Valves take {said('suction_valve_loss_pct')} of the "
        f"power on the suction and {said('discharge_valve_loss_pct')} on the discharge side. "
        f"Clearance fits {said('clearance_pct')}."
    )
    mismatch = [
        item["evidence"][0]["text"]
        for item in one.repairs
        if item["kind"] == "clearance_mismatch"
        and (item["cylinder"], item["end"]) == (row["cylinder"], row["end"])
    ]
    extra = f"<p>{escape(mismatch[0][0].upper() + mismatch[0][1:])}.</p>" if mismatch else ""
    return f'<div class="end {kind}"><h3>{name}</h3>{big}<p>{escape(sentence)}</p>{extra}</div>'


def _handling(one: RecordingResult) -> list[str]:
    """What was assumed, repaired or remarked."""
    lines = []
    for repair in one.repairs:
        where = " ".join(str(repair[key]) for key in ("cylinder", "end") if repair[key])
        text = "; ".join(item["text"] for item in repair["evidence"])
        done = "" if repair["applied"] else " (not applied)"
        kind = repair["kind"].replace("_", " ")
        lines.append(f"<li><b>{escape(kind)}</b>{done} {escape(where)}: {escape(text)}</li>")
    lines += [f"<li>{escape(note)}</li>" for note in one.notes]
    if not lines:
        return []
    return ["<h2>What was assumed or repaired</h2><ul>", *lines, "</ul>"]


def _tables(one: RecordingResult, display: Display) -> list[str]:
    rows = [row for row in one.ends if row["indicated_power_kW"] is not None]
    if not rows:
        return []
    head = "".join(f"<th>{escape(row['cylinder'])} {escape(row['end'])}</th>" for row in rows)
    lines = [
        "<h2>Every quantity</h2><p class=soft>Value with its standard uncertainty (68 % of cases "
        "lie within it); pressures are absolute; angles count from each end's own dead centre of "
        "least volume.</p><div class=scroll><table><thead><tr><th></th>"
        + head
        + "</tr></thead><tbody>"
    ]
    for group, title in GROUPS:
        block = []
        for quantity in QUANTITIES.values():
            if quantity.group != group or all(row[quantity.column] is None for row in rows):
                continue
            cells = "".join(f"<td>{_cell(row, quantity, display)}</td>" for row in rows)
            label = escape(_titled(quantity, display))
            hint = escape(quantity.definition, quote=True)
            block.append(f'<tr><td title="{hint}">{label}</td>{cells}</tr>')
        if block:
            lines.append(f"<tr class=group><th colspan={len(rows) + 1}>{title}</th></tr>")
            lines += block
    lines.append("</tbody></table></div>")
    return lines + _total_table(one.totals, display)


def _total_table(totals: Sequence[Row], display: Display) -> list[str]:
    shown = [
        quantity
        for quantity in TOTAL_QUANTITIES.values()
        if any(row[quantity.column] is not None for row in totals)
    ]
    head = "".join(f"<th>{escape(_titled(one, display))}</th>" for one in shown)
    lines = [
        f"<h2>Sums</h2><div class=scroll><table><thead><tr><th></th>{head}</tr></thead><tbody>"
    ]
    for row in totals:
        cells = "".join(f"<td>{_cell(row, quantity, display)}</td>" for quantity in shown)
        name = row["name"] if row["scope"] == "machine" else f"{row['scope']} {row['name']}"
        lines.append(f"<tr><td>{escape(name)}</td>{cells}</tr>")
    return [*lines, "</tbody></table></div>"]


def _missing(one: RecordingResult) -> list[str]:
    """Why something is missing: each reason once, with the ends and quantities it concerns."""
    reasons: dict[str, dict[str, list[str]]] = {}
    for row in one.ends:
        for column, reason in row["reason"].items():
            end = f"{row['cylinder']} {row['end']}"
            reasons.setdefault(reason, {}).setdefault(QUANTITIES[column].label, []).append(end)
    if not reasons:
        return []
    lines = ["<h2>Not determined</h2>"]
    later = [name for reason, names in reasons.items() if _LATER in reason for name in names]
    for reason, names in reasons.items():
        if _LATER in reason:
            continue
        ends = ", ".join(dict.fromkeys(end for where in names.values() for end in where))
        lines.append(
            f"<details><summary>{escape(reason[0].upper() + reason[1:])} ({escape(ends)})</summary>"
            f"<p class=soft>{escape('; '.join(names))}</p></details>"
        )
    if later:
        lines.append(
            "<details><summary>Not part of this version of pvcard</summary><p class=soft>"
            f"{escape('; '.join(dict.fromkeys(later)))}</p></details>"
        )
    return lines
