"""Plots of a card: each draws what it is handed on the Axes it is given, and returns them."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes

from pvcard.card.view import CardView
from pvcard.report.scales import Scales
from pvcard.report.style import (
    DISCHARGE_LOSS,
    END_COLOURS,
    IDEAL,
    INK,
    LINE,
    REST,
    SUCTION_LOSS,
    THEORY,
)
from pvcard.types import Floats

Row = dict[str, Any]
_EVENTS = (
    ("suction_opening_deg", "suction opens", "^"),
    ("suction_closing_deg", "suction closes", "v"),
    ("discharge_opening_deg", "discharge opens", ">"),
    ("discharge_closing_deg", "discharge closes", "<"),
)


def draw_pressure_volume(ax: Axes, view: CardView, scales: Scales) -> Axes:
    """Draw the card of one end with the theoretical card and both valve losses shaded.

    Parameters
    ----------
    ax : Axes
    view : CardView
    scales : units of the axes

    Returns
    -------
    Axes
    """
    volume, pressure = scales.volume * view.volume, scales.pressure * view.pressure
    colour = END_COLOURS.get(view.end, INK)
    _shade(ax, view, scales)
    if len(view.ideal_volume):
        loop = np.append(np.arange(len(view.ideal_volume)), 0)
        ax.plot(
            scales.volume * view.ideal_volume[loop],
            scales.pressure * view.ideal_pressure[loop],
            color=THEORY,
            lw=1.3,
            ls=(0, (4, 2)),
            zorder=4,
            label="theoretical card",
        )
    ax.plot(_closed(volume), _closed(pressure), color=colour, lw=1.6, label="measured")
    for level in (view.suction_pressure, view.discharge_pressure):
        if np.isfinite(level):
            ax.axhline(scales.pressure * level, color=LINE, lw=0.8, ls=":")
    ax.set(
        xlabel=f"Gas volume [{scales.volume_label}]",
        ylabel=f"Pressure [{scales.pressure_label}]",
        title=f"{view.cylinder} {view.end} end: pressure and volume",
    )
    ax.set_xlim(left=0)
    ax.legend(loc="upper right")
    return ax


def _shade(ax: Axes, view: CardView, scales: Scales) -> None:
    """Fill between the trace and the line pressures over the spans of the losses."""
    sides = (
        (view.suction_span, view.suction_pressure, SUCTION_LOSS, "////", "suction valve loss"),
        (
            view.discharge_span,
            view.discharge_pressure,
            DISCHARGE_LOSS,
            "\\\\\\\\",
            "discharge valve loss",
        ),
    )
    for span, level, colour, hatch, label in sides:
        if span is None or not np.isfinite(level):
            continue
        angle = np.concatenate([view.crank_angle, view.crank_angle + 360])
        inside = (angle >= span[0]) & (angle <= span[1])
        volume = np.concatenate([view.volume, view.volume])[inside] * scales.volume
        pressure = np.concatenate([view.pressure, view.pressure])[inside] * scales.pressure
        ax.fill(
            np.concatenate([volume, volume[::-1]]),
            np.concatenate([pressure, np.full(len(volume), level * scales.pressure)]),
            facecolor=colour,
            edgecolor=INK,
            hatch=hatch,
            lw=0,
            alpha=0.75,
            label=label,
        )


def draw_log_lines(ax: Axes, views: Sequence[CardView], scales: Scales) -> Axes:
    """Draw cards on logarithmic axes with the fitted closed lines.

    Parameters
    ----------
    ax : Axes
    views : ends of one cylinder
    scales : units of the axes

    Returns
    -------
    Axes
    """
    for view in views:
        colour = END_COLOURS.get(view.end, INK)
        relative = view.volume / view.swept_volume * 100
        pressure = scales.pressure * view.pressure
        positive = np.where(pressure > 0, pressure, np.nan)
        ax.plot(_closed(relative), _closed(positive), color=colour, lw=1.0, alpha=0.55)
        label = f"{view.end} end, fitted"
        for v, p in (
            (view.compression_volume, view.compression_pressure),
            (view.expansion_volume, view.expansion_pressure),
        ):
            if len(v):
                x, y = v / view.swept_volume * 100, scales.pressure * p
                ax.plot(x, y, color=colour, lw=2.2, ls="--", label=label)
                label = "_"
    ax.set(
        xscale="log",
        yscale="log",
        xlabel="Gas volume [% of swept volume]",
        ylabel=f"Pressure [{scales.pressure_label}]",
        title=f"{views[0].cylinder}: closed lines",
    )
    _plain_ticks(ax, views, scales)
    if any(len(view.compression_volume) for view in views):
        ax.legend(loc="lower right", bbox_to_anchor=(1.0, 0.99), ncols=2)
    return ax


def _plain_ticks(ax: Axes, views: Sequence[CardView], scales: Scales) -> None:
    """A few round numbers instead of powers of ten."""
    low = min(float(view.pressure.min()) for view in views) * scales.pressure
    high = max(float(view.pressure.max()) for view in views) * scales.pressure
    steps = [m * 10.0**e for e in range(-2, 5) for m in (1, 1.5, 2, 3, 4, 5, 7)]
    shown = [step for step in steps if low * 0.95 <= step <= high * 1.05]
    ax.set_yticks(shown, [f"{step:g}" for step in shown])
    volumes = (3, 5, 7, 10, 15, 20, 30, 50, 70, 100, 130)
    least = min(float((view.volume / view.swept_volume).min()) for view in views) * 100
    shown_volumes = [step for step in volumes if step >= least * 0.9]
    ax.set_xticks(shown_volumes, [f"{step:g}" for step in shown_volumes])
    ax.minorticks_off()


def draw_crank_angle(
    ax: Axes, views: Sequence[CardView], rows: Sequence[Row], scales: Scales
) -> Axes:
    """Draw the pressure of both ends against crank angle with the valve events marked.

    Parameters
    ----------
    ax : Axes
    views, rows : ends of one cylinder and their rows of quantities
    scales : units of the axes

    Returns
    -------
    Axes
        Angle from the head-end dead centre.
    """
    for view, row in zip(views, rows):
        colour = END_COLOURS.get(view.end, INK)
        shift = 0.0 if view.end == "head" else 180.0
        angle = np.mod(view.crank_angle + shift, 360.0)
        order = np.argsort(angle)
        pressure = scales.pressure * view.pressure
        ax.plot(angle[order], pressure[order], color=colour, lw=1.5, label=f"{view.end} end")
        for column, _, marker in _EVENTS:
            if row.get(column) is None:
                continue
            at = float(row[column])
            height = float(np.interp(at, view.crank_angle, pressure, period=360))
            ax.plot(
                (at + shift) % 360, height, marker=marker, color=colour, mec="white", ms=8, ls=""
            )
    for level in (views[0].suction_pressure, views[0].discharge_pressure):
        if np.isfinite(level):
            ax.axhline(scales.pressure * level, color=LINE, lw=0.8, ls=":")
    for _, text, marker in _EVENTS:
        ax.plot([], [], marker=marker, color=THEORY, ls="", label=text)
    ax.set(
        xlim=(0, 360),
        xticks=range(0, 361, 45),
        xlabel="Crank angle after head-end dead centre [deg]",
        ylabel=f"Pressure [{scales.pressure_label}]",
        title=f"{views[0].cylinder}: pressure and crank angle",
    )
    ax.set_ylim(top=ax.get_ylim()[1] * 1.28)
    ax.legend(loc="upper center", ncols=3)
    return ax


def draw_power_split(ax: Axes, rows: Sequence[Row], scales: Scales) -> Axes:
    """Draw indicated power of each end as theoretical power, valve losses and the rest.

    Parameters
    ----------
    ax : Axes
    rows : rows of ends
    scales : units of the axes

    Returns
    -------
    Axes
        A rest below zero is drawn to the left of zero.
    """
    parts = (
        ("ideal_power_kW", "theoretical card", IDEAL, ""),
        ("suction_valve_loss_kW", "suction valve loss", SUCTION_LOSS, "////"),
        ("discharge_valve_loss_kW", "discharge valve loss", DISCHARGE_LOSS, "\\\\\\\\"),
        ("other_loss_kW", "rest: heat, leaks, late valves", REST, ".."),
    )
    names = [f"{row['cylinder']} {row['end']}" for row in rows]
    place = np.arange(len(rows))
    right, left = np.zeros(len(rows)), np.zeros(len(rows))
    for column, label, colour, hatch in parts:
        size = np.array([row[column] or 0.0 for row in rows]) * scales.power
        start = np.where(size >= 0, right, left)
        ax.barh(
            place,
            size,
            left=start,
            height=0.6,
            color=colour,
            hatch=hatch,
            edgecolor="white",
            lw=0.4,
            label=label,
        )
        right, left = right + np.maximum(size, 0), left + np.minimum(size, 0)
    measured = np.array([row["indicated_power_kW"] or np.nan for row in rows]) * scales.power
    u = np.array([row["u_indicated_power_kW"] or 0.0 for row in rows]) * scales.power
    ax.errorbar(
        measured,
        place,
        xerr=u,
        fmt="D",
        color=INK,
        ms=4,
        capsize=3,
        lw=1.2,
        label="indicated, with standard uncertainty",
    )
    ax.set_yticks(place, names)
    ax.invert_yaxis()
    ax.axvline(0, color=LINE, lw=0.8)
    ax.set(xlabel=f"Power [{scales.power_label}]", title="Where the indicated power goes")
    _legend_below(ax)
    return ax


def _legend_below(ax: Axes) -> None:
    """Put the legend under the label of the axis, however tall the axes are."""
    figure = ax.figure
    tall = (
        ax.get_position().height * figure.get_figheight() if hasattr(figure, "get_figheight") else 1
    )
    ax.legend(loc="upper center", bbox_to_anchor=(0.45, -0.42 / tall), ncols=3)


def _closed(values: Floats) -> Floats:
    return np.append(values, values[:1])
