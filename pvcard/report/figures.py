"""Figures as SVG text and PNG bytes: fixed frames, no global settings, always the same bytes."""

from __future__ import annotations

import io
import re
from collections.abc import Callable
from typing import NamedTuple

import matplotlib
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from pvcard.report.style import RC

_DPI = 120


class Drawing(NamedTuple):
    """One plot in both forms."""

    name: str
    label: str  # what it shows, for those who cannot see it
    svg: str
    png: bytes


def drawing(
    name: str,
    label: str,
    draw: Callable[[Axes], object],
    *,
    size: tuple[float, float] = (5.6, 4.0),
    frame: tuple[float, float, float, float] = (0.115, 0.13, 0.865, 0.79),
) -> Drawing:
    """Make a figure around one plot.

    Parameters
    ----------
    name : of the files
    label : text alternative
    draw : function that draws on the Axes it is given
    size : width and height [in]
    frame : left, bottom, width and height of the axes, shares of the figure

    Returns
    -------
    Drawing
    """
    with matplotlib.rc_context(RC):  # type: ignore[arg-type]  # its keys are spelled out as a type
        figure = Figure(figsize=size)
        draw(figure.add_axes(frame))
        text = io.StringIO()
        plain = {"Date": None, "Creator": None}
        figure.savefig(text, format="svg", metadata=plain)
        picture = io.BytesIO()
        figure.savefig(picture, format="png", dpi=_DPI, metadata={"Software": None})
    return Drawing(name, label, _tidy(text.getvalue(), name), picture.getvalue())


def _tidy(svg: str, name: str) -> str:
    """Leave the drawing alone and make its ids unique on a page that holds many."""
    body = svg[svg.index("<svg") :]
    body = re.sub(r"<metadata>.*?</metadata>", "", body, flags=re.DOTALL)
    body = re.sub(r'\b(id="|url\(#|href="#)', lambda found: f"{found.group(1)}{name}-", body)
    return body


def inline(one: Drawing) -> str:
    """SVG to stand in a page, with its text alternative.

    Parameters
    ----------
    one : Drawing

    Returns
    -------
    str
    """
    from html import escape

    body = re.sub(r'(<svg[^>]*?) width="[^"]*"', r"\1", one.svg, count=1)
    body = re.sub(r'(<svg[^>]*?) height="[^"]*"', r"\1", body, count=1)
    body = re.sub(r' xmlns(:xlink)?="[^"]*"', "", body, count=2)
    body = body.replace("xlink:href", "href")
    return body.replace("<svg", f'<svg role="img" aria-label="{escape(one.label, quote=True)}"', 1)
