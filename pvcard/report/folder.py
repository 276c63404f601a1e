"""Writes a report folder: everything aside first, then renamed; none is seen half-written."""

from __future__ import annotations

import re
import shutil
import tempfile
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

from pvcard.card.view import CardView
from pvcard.errors import InputError
from pvcard.report import plots
from pvcard.report.figures import Drawing, drawing
from pvcard.report.page import index, page
from pvcard.report.scales import Scales, scales_of
from pvcard.results import RecordingResult

_MARK = ".pvcard-report"  # tells our folders from those of others
Progress = Callable[[str, float], None]


def write_report(
    results: Sequence[RecordingResult],
    folder: str | Path,
    *,
    units: str = "si",
    progress: Progress | None = None,
) -> list[Path]:
    """Write pages and plots of recordings.

    Parameters
    ----------
    results : sequence of RecordingResult
        Analysed with ``with_views=True``.
    folder : to be written; a report written here before is replaced
    units : "si" or "us"
    progress : called with a text and the share done

    Returns
    -------
    list of Path
        Pages; the first one is the one to open.

    Raises
    ------
    InputError
        If the folder holds something else or cannot be written.
    """
    target = Path(folder)
    _check(target)
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        aside = Path(tempfile.mkdtemp(prefix=f".{target.name}.", dir=target.parent))
    except OSError as error:
        raise _unwritable(target, error) from error
    try:
        names = _write_all(results, aside, units, progress)
        aside.chmod(0o755)
        if target.exists():
            old = aside.with_name(f"{aside.name}.old")
            target.rename(old)
            aside.rename(target)
            shutil.rmtree(old)
        else:
            aside.rename(target)
    except OSError as error:
        raise _unwritable(target, error) from error
    finally:
        shutil.rmtree(aside, ignore_errors=True)
    return [target / name for name in names]


def _check(target: Path) -> None:
    if not target.exists():
        return
    if not target.is_dir():
        raise InputError(
            "the report is a folder, and this is a file",
            file=str(target),
            advice="Name another folder with --output",
        )
    if any(target.iterdir()) and not (target / _MARK).exists():
        raise InputError(
            "the folder holds something that is not a report",
            file=str(target),
            expected="an empty or new folder, or a report written before",
            advice="Name another folder with --output",
        )


def _unwritable(target: Path, error: OSError) -> InputError:
    return InputError(
        "the report cannot be written",
        file=str(target),
        found=error.strerror,
        expected="a place that may be written to, with room on the disk",
    )


def _write_all(
    results: Sequence[RecordingResult], folder: Path, units: str, progress: Progress | None
) -> list[str]:
    (folder / _MARK).write_text("A report of pvcard; may be replaced.\n", encoding="utf-8")
    (folder / "plots").mkdir()
    names: list[str] = []
    for number, one in enumerate(results):
        name = _file_name(one, names)
        names.append(name)
        drawings, split = _drawings(one, scales_of(units), name)
        every = [plot for group in drawings.values() for plot in group]
        for plot in [*every, *([split] if split else [])]:
            (folder / "plots" / f"{plot.name}.svg").write_text(plot.svg, encoding="utf-8")
            (folder / "plots" / f"{plot.name}.png").write_bytes(plot.png)
        text = page(one, drawings, split, units)
        (folder / f"{name}.html").write_text(text, encoding="utf-8")
        if progress:
            progress("writing pages", (number + 1) / len(results))
    pages = [f"{name}.html" for name in names]
    if len(results) == 1:
        return pages
    listed = index(list(zip(results, pages, strict=True)), units)
    (folder / "index.html").write_text(listed, encoding="utf-8")
    return ["index.html", *pages]


def _safe(text: str) -> str:
    """Letters and digits for a file name and for an id."""
    return re.sub(r"[^A-Za-z0-9]+", "-", text).strip("-").lower()[:60] or "recording"


def _file_name(one: RecordingResult, taken: list[str]) -> str:
    time = (one.recording["time"] or "").split("+")[0]
    base = _safe(f"{one.recording['machine']} {time}")
    name, number = base, 2
    while name in taken or name == "index":
        name, number = f"{base}-{number}", number + 1
    return name


def _drawings(
    one: RecordingResult, scales: Scales, name: str
) -> tuple[dict[str, list[Drawing]], Drawing | None]:
    rows = {(row["cylinder"], row["end"]): row for row in one.ends}
    cylinders = list(dict.fromkeys(cylinder for cylinder, _ in one.views))
    result: dict[str, list[Drawing]] = {}
    for number, cylinder in enumerate(cylinders):
        views = [view for (own, _), view in one.views.items() if own == cylinder]
        own_rows = [rows[cylinder, view.end] for view in views]
        result[cylinder] = _of_cylinder(
            views, own_rows, scales, f"{name}-{number}-{_safe(cylinder)}"
        )
    shown = [row for row in one.ends if row["ideal_power_kW"] is not None]
    if not shown:
        return result, None
    height = 1.6 + 0.42 * len(shown)
    split = drawing(
        f"{name}-power",
        "Indicated power of each end as theoretical power, valve losses and the rest",
        lambda ax: plots.draw_power_split(ax, shown, scales),
        size=(8.6, height),
        frame=(0.14, 1.05 / height, 0.83, 1 - 1.4 / height),
    )
    return result, split


def _of_cylinder(
    views: list[CardView], rows: list[dict[str, Any]], scales: Scales, name: str
) -> list[Drawing]:
    cylinder = views[0].cylinder
    result = [_of_end(view, scales, name) for view in views]
    result.append(
        drawing(
            f"{name}-log",
            f"Pressure against volume of {cylinder}, logarithmic, with the fitted closed lines",
            lambda ax: plots.draw_log_lines(ax, views, scales),
        )
    )
    result.append(
        drawing(
            f"{name}-angle",
            f"Pressure against crank angle of {cylinder} with the valve events",
            lambda ax: plots.draw_crank_angle(ax, views, rows, scales),
        )
    )
    return result


def _of_end(view: CardView, scales: Scales, name: str) -> Drawing:
    return drawing(
        f"{name}-{view.end}-pv",
        f"Pressure against volume of the {view.end} end of {view.cylinder}, with the theoretical "
        "card and the valve losses shaded",
        lambda ax: plots.draw_pressure_volume(ax, view, scales),
    )
