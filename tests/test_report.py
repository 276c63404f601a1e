"""Report folders: what a page says, that it needs no other file, and what happens on disk."""

from __future__ import annotations

import re
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest
from matplotlib.figure import Figure

import pvcard
from pvcard.errors import InputError
from pvcard.quantities import QUANTITIES
from pvcard.report import plots, write_report
from pvcard.report.scales import scales_of
from pvcard.results import RecordingResult
from tests.plant import FACTS, MACHINE, traces, write_export, write_machine

VOID = {"meta", "link", "br", "img", "path", "use", "rect", "circle", "line", "polygon"}


class Balanced(HTMLParser):
    """Counts tags that are opened and never closed."""

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        if tag not in VOID:
            assert self.open.pop() == tag


def result(
    folder: Path, text: str = MACHINE, facts: dict[str, str] | None = None
) -> RecordingResult:
    """Analysed recording of the test stand, ready to be drawn."""
    machine = pvcard.read_machine(write_machine(folder, text))
    recordings = pvcard.read_export(write_export(folder, facts=facts), machine)
    return pvcard.analyse(recordings, machine, with_views=True).recordings[0]


@pytest.fixture(scope="module")
def stand(tmp_path_factory: pytest.TempPathFactory) -> RecordingResult:
    """One healthy recording."""
    return result(tmp_path_factory.mktemp("stand"))


def test_page_stands_alone(stand: RecordingResult, tmp_path: Path) -> None:
    # LAW: one file: nothing is fetched, every tag is closed, every plot has a text alternative.
    (page,) = write_report([stand], tmp_path / "r")
    text = page.read_text(encoding="utf-8")
    assert "http://" not in text
    assert "https://" not in text
    assert not re.search(r"<(script|link|img|iframe)", text)
    parser = Balanced()
    parser.feed(text)
    assert parser.open == []
    assert text.count('<svg role="img" aria-label="') == 5
    ids = re.findall(r'\bid="([^"]+)"', text)
    assert len(ids) == len(set(ids))


def test_page_shows_every_figure_with_its_uncertainty(
    stand: RecordingResult, tmp_path: Path
) -> None:
    # LAW: what is determined stands in the table, what is not is named with its reason.
    (page,) = write_report([stand], tmp_path / "r")
    text = page.read_text(encoding="utf-8")
    row = stand.ends[0]
    for column, quantity in QUANTITIES.items():
        if quantity.group != "identity" and row[column] is not None:
            assert quantity.label in text, column
    assert text.count("±") > 40
    assert "does not estimate leaks" not in text
    assert "Not part of this version of pvcard" in text
    assert "It does not clear a machine to run" in text.replace("\n", " ")


def test_us_units_on_page_and_plots(stand: RecordingResult, tmp_path: Path) -> None:
    # SOURCE: 1 bar = 14.5038 psi, 1 hp = 0.7457 kW (NIST SP 811).
    (page,) = write_report([stand], tmp_path / "r", units="us")
    text = page.read_text(encoding="utf-8")
    assert "psia" in text
    assert "[bar" not in text
    power = stand.ends[0]["indicated_power_kW"] / 0.745699872
    assert f"{power:.1f}"[:4] in text


def test_severity_is_a_word_and_caution_is_shown(tmp_path: Path) -> None:
    # LAW: no traffic light alone.
    hot = result(tmp_path, facts=FACTS | {"C1 discharge temperature": "240 degC"})
    (page,) = write_report([hot], tmp_path / "r")
    text = page.read_text(encoding="utf-8")
    assert "<span class=word>act</span>" in text
    assert "Caution: Hot gas" in text


def test_names_cannot_break_the_page_or_leave_the_folder(
    stand: RecordingResult, tmp_path: Path
) -> None:
    # LAW: names come from users' files.
    name = "../<script>alert(1)</script> & Co"
    evil = replace(stand, recording=stand.recording | {"machine": name})
    (page,) = write_report([evil], tmp_path / "r")
    assert page.parent == tmp_path / "r"
    text = page.read_text(encoding="utf-8")
    assert "<script" not in text
    assert "&lt;script&gt;" in text


def test_many_recordings_have_a_list(stand: RecordingResult, tmp_path: Path) -> None:
    # LAW: each page once, even of the same machine and time.
    pages = write_report([stand, stand], tmp_path / "r")
    assert pages[0].name == "index.html"
    assert len({page.name for page in pages}) == 3
    text = pages[0].read_text(encoding="utf-8")
    assert all(page.name in text for page in pages[1:])
    assert len(list((tmp_path / "r" / "plots").glob("*.png"))) == 10


def test_our_own_folder_is_replaced_and_nobody_elses(
    stand: RecordingResult, tmp_path: Path
) -> None:
    # LAW: nothing of others is overwritten, nothing half-written stays.
    write_report([stand], tmp_path / "r")
    write_report([stand], tmp_path / "r")
    other = tmp_path / "other"
    other.mkdir()
    (other / "thesis.txt").write_text("years of work", encoding="utf-8")
    with pytest.raises(InputError, match="not a report"):
        write_report([stand], other)
    assert [path.name for path in other.iterdir()] == ["thesis.txt"]
    assert sorted(path.name for path in tmp_path.iterdir()) == ["other", "r"]


def test_report_is_the_same_every_time(stand: RecordingResult, tmp_path: Path) -> None:
    # LAW: no dates, no chance: a changed page means changed figures.
    (one,) = write_report([stand], tmp_path / "a")
    (two,) = write_report([stand], tmp_path / "b")
    assert one.read_bytes() == two.read_bytes()


def test_plots_draw_on_the_axes_they_are_given(stand: RecordingResult) -> None:
    # LAW: a plot is a function of Axes and data, usable anywhere; it computes and shows nothing.
    scales = scales_of("si")
    views = list(stand.views.values())
    for draw in (
        lambda ax: plots.draw_pressure_volume(ax, views[0], scales),
        lambda ax: plots.draw_log_lines(ax, views, scales),
        lambda ax: plots.draw_crank_angle(ax, views, stand.ends, scales),
        lambda ax: plots.draw_power_split(ax, stand.ends, scales),
    ):
        ax = Figure().add_subplot()
        assert draw(ax) is ax
        assert ax.has_data()


def test_drawn_card_is_the_measured_one(stand: RecordingResult) -> None:
    # TRUTH: the trace of the export, in bar, and the volumes of the fitted clearance.
    view = stand.views["C1", "head"]
    np.testing.assert_allclose(view.pressure / 1e5, traces()["C1 head end [bar(a)]"], rtol=1e-5)
    least = stand.ends[0]["clearance_pct"] / 100 * view.swept_volume
    assert view.volume.min() == pytest.approx(least)
    assert view.compression_pressure[0] == pytest.approx(view.suction_pressure, rel=1e-3)
    assert view.compression_pressure[-1] == pytest.approx(view.discharge_pressure, rel=1e-3)
