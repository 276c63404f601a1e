"""The command line beyond the everyday of test_command: matching of machines, orders, streams, and
every kind of input that cannot be used."""

from __future__ import annotations

import csv
import io
import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
import pytest

from pvcard.cli import DONE, UNUSABLE, WITH_FINDINGS, main
from pvcard.quantities import CYLINDER_QUANTITIES, END_COLUMNS, TOTAL_QUANTITIES
from tests.plant import FACTS, MACHINE, STEPS, traces, without, write_export, write_machine

EXAMPLES = Path(__file__).parents[1] / "example_data"


class Said(NamedTuple):
    """What a command gave back."""

    status: int
    out: str
    err: str

    @property
    def recordings(self) -> list[dict[str, Any]]:
        """Recordings of the JSON on standard output; NaN and infinity are no JSON."""
        found: list[dict[str, Any]] = json.loads(self.out, parse_constant=pytest.fail)["recordings"]
        return found


class Stand:
    """A folder with a machine and exports, and the command over it."""

    def __init__(self, folder: Path, capture: pytest.CaptureFixture[str]) -> None:
        self.folder = folder
        self.machine = write_machine(folder)
        self.export = write_export(folder)
        self._capture = capture

    def run(self, *words: object) -> Said:
        """Run a command."""
        self._capture.readouterr()
        try:
            status = main([str(word) for word in words])
        except SystemExit as error:  # argparse, before anything is read
            status = int(str(error.code))
        return Said(status, *self._capture.readouterr())

    def analyse(self, *words: object, machine: Path | None = None) -> Said:
        """Run `analyse` over some exports, the one of the stand by default."""
        exports = [word for word in words if isinstance(word, Path)] or [self.export]
        options = [word for word in words if not isinstance(word, Path)]
        return self.run("analyse", *exports, "--machine", machine or self.machine, *options)

    def json(self, *words: object, machine: Path | None = None) -> list[dict[str, Any]]:
        """Recordings of the JSON of `analyse`."""
        said = self.analyse(*words, "--format", "json", machine=machine)
        assert said.status == DONE, said.err
        return said.recordings


@pytest.fixture
def stand(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> Stand:
    return Stand(tmp_path, capsys)


# --- What is written where. ---


def test_document_has_the_promised_shape(stand: Stand) -> None:
    # LAW: contract of the output, schema 1: these keys, no others.
    said = stand.analyse("--format", "json")
    document = json.loads(said.out)
    assert list(document) == ["schema", "pvcard", "recordings"]
    assert document["schema"] == 1
    assert document["pvcard"].count(".") == 2
    (one,) = document["recordings"]
    assert list(one) == ["recording", "repairs", "ends", "cylinders", "totals", "findings"]
    assert list(one["recording"]) == [
        "machine",
        "time",
        "source",
        "cycles",
        "samples",
        "load_step",
    ]
    assert one["recording"]["machine"] == "Test stand 1"
    assert one["recording"]["time"] == "2024-03-05T10:00:00+00:00"
    assert (one["recording"]["cycles"], one["recording"]["samples"]) == (1, 720)
    scopes = [(row["scope"], row["name"]) for row in one["totals"]]
    assert scopes == [("cylinder", "C1"), ("stage", "1"), ("machine", "Test stand 1")]


FINDING = {
    "id",
    "kind",
    "cylinder",
    "end",
    "severity",
    "probability",
    "group_probability",
    "alternatives",
    "size",
    "unit",
    "u",
    "cost",
    "text",
    "evidence",
    "caution",
}
REPAIR = {"kind", "cylinder", "end", "value", "unit", "u", "applied", "evidence"}


def test_findings_and_repairs_have_the_promised_shape(stand: Stand) -> None:
    # LAW: contract: keys of both; the text is a sentence; evidence is a list of figures.
    columns = traces()
    columns["C1 crank end [bar(a)]"] = 10 + 0.2 * np.sin(np.radians(columns["crank_angle [deg]"]))
    export = write_export(stand.folder, columns, facts=without("speed"), name="odd.csv")
    (one,) = stand.json(export)
    assert one["findings"]
    assert one["repairs"]
    for finding in one["findings"]:
        assert set(finding) == FINDING
        assert finding["severity"] in ("note", "watch", "act")
        assert 0 <= finding["probability"] <= finding["group_probability"] <= 1
        assert finding["text"].endswith(".")
        for item in finding["evidence"]:
            assert set(item) == {"name", "value", "unit", "u", "text"}
    for repair in one["repairs"]:
        assert set(repair) == REPAIR
        assert isinstance(repair["applied"], bool)
        assert all(set(item) >= {"text"} for item in repair["evidence"])
    assert len({finding["id"] for finding in one["findings"]}) == len(one["findings"])


def test_result_and_messages_go_separate_ways(stand: Stand) -> None:
    # LAW: contract: the result to standard output, messages to standard error.
    columns = traces() | {"cooling water [degC]": np.full(720, 31.0)}
    said = stand.analyse(write_export(stand.folder, columns, name="more.csv"), "--format", "json")
    assert said.recordings
    assert said.err.count("cooling water") == 1


def test_with_output_nothing_goes_to_standard_output(stand: Stand) -> None:
    # LAW: contract: the same text, in the file.
    plain = stand.analyse("--format", "csv")
    kept = stand.analyse("--format", "csv", "--output", f"{stand.folder}/r.csv")
    assert (kept.status, kept.out) == (DONE, "")
    assert (stand.folder / "r.csv").read_text(encoding="utf-8") == plain.out


def test_csv_holds_the_figures_of_the_json(stand: Stand) -> None:
    # LAW: one result in two forms; what is null there is empty here.
    (one,) = stand.json()
    rows = list(csv.DictReader(io.StringIO(stand.analyse("--format", "csv").out)))
    assert len(rows) == len(one["ends"])
    for text, row in zip(rows, one["ends"], strict=True):
        assert text["machine"] == "Test stand 1"
        assert text["recording"] == one["recording"]["source"]
        for column in END_COLUMNS:
            assert text[column] == ("" if row[column] is None else str(row[column]))


def test_csv_of_every_table(stand: Stand) -> None:
    # LAW: contract: four files beside the first, the same columns as in the JSON, in front of
    # them where they come from.
    stand.analyse("--format", "csv", "--output", f"{stand.folder}/r.csv")
    for name, columns in (("cylinders", CYLINDER_QUANTITIES), ("totals", TOTAL_QUANTITIES)):
        text = (stand.folder / f"r.{name}.csv").read_text(encoding="utf-8")
        header = text.splitlines()[0].split(",")
        assert header[:3] == ["recording", "machine", "time"]
        assert set(columns) <= set(header)
        assert "nan" not in text.lower()


def test_running_twice_gives_the_same_bytes(stand: Stand) -> None:
    # LAW: a result depends on its input alone.
    for form in ("json", "csv", "table"):
        first, second = (stand.analyse("--format", form).out for _ in range(2))
        assert first == second


def test_an_old_result_is_replaced_whole_or_kept(stand: Stand) -> None:
    # LAW: contract: files are written aside and renamed; a failing run leaves the old one.
    out = stand.folder / "r.json"
    out.write_text("old", encoding="utf-8")
    bad = stand.analyse(stand.folder / "none.csv", "--output", str(out), "--format", "json")
    assert bad.status == UNUSABLE
    assert out.read_text(encoding="utf-8") == "old"
    assert stand.analyse("--output", str(out), "--format", "json").status == DONE
    assert json.loads(out.read_text(encoding="utf-8"))["recordings"]
    assert sorted(path.name for path in stand.folder.iterdir()) == [
        "export.csv",
        "machine.toml",
        "r.json",
    ]


def test_us_units_change_the_table_alone(stand: Stand) -> None:
    # LAW: contract: CSV and JSON are SI in any case.
    for form in ("json", "csv"):
        si, us = (stand.analyse("--format", form, "--units", one).out for one in ("si", "us"))
        assert si == us
    text = stand.analyse("--units", "us").out
    for unit in ("[psia]", "[degF]", "[hp]", "[MMscfd]"):
        assert unit in text
    # SOURCE: 27 degC = 80.6 degF; 1 hp = 0.745699872 kW (NIST SP 811).
    assert "80.6 " in text
    power = stand.json()[0]["ends"][0]["indicated_power_kW"] / 0.745699872
    assert f"{power:.1f}" in text


@pytest.mark.parametrize(
    ("limit", "temperature", "status"),
    [
        ("never", "240 degC", DONE),
        ("note", "240 degC", WITH_FINDINGS),
        ("watch", "240 degC", WITH_FINDINGS),
        ("act", "240 degC", WITH_FINDINGS),
        ("note", "199 degC", WITH_FINDINGS),  # within one of its uncertainties below the limit
        ("watch", "199 degC", DONE),
        ("note", "140 degC", DONE),
    ],
)
def test_fail_on_compares_severities(
    stand: Stand, limit: str, temperature: str, status: int
) -> None:
    # LAW: contract: 1 with findings at or above the limit; the limit of the cylinder is 200 degC.
    export = write_export(
        stand.folder, facts=FACTS | {"C1 discharge temperature": temperature}, name="x.csv"
    )
    said = stand.analyse(export, "--fail-on", limit)
    assert said.status == status
    assert said.out  # the result is there all the same


# --- Many recordings, many machines. ---


def test_recordings_keep_the_order_of_the_exports(stand: Stand) -> None:
    # LAW: contract: rows in the order of the exports, whatever machine and time they are of.
    machines = stand.folder / "machines"
    machines.mkdir()
    for number in (1, 2):
        text = MACHINE.replace("Test stand 1", f"Test stand {number}")
        write_machine(machines, text, name=f"{number}.toml")
    exports = [
        write_export(
            stand.folder,
            traces(head=0.1 + 0.01 * number),
            facts=FACTS
            | {
                "machine": f"Test stand {1 + number % 2}",
                "time": f"2024-03-0{6 - number}T10:00:00Z",
            },
            name=f"{name}.csv",
        )
        for number, name in enumerate("dacb")
    ]
    found = stand.json(*exports, machine=machines)
    assert [one["recording"]["source"] for one in found] == [str(path) for path in exports]
    assert [one["recording"]["machine"][-1] for one in found] == ["1", "2", "1", "2"]
    # TRUTH: clearances of 10, 11, 12 and 13 %.
    clearances = [one["ends"][0]["clearance_pct"] for one in found]
    assert clearances == pytest.approx([10, 11, 12, 13], abs=0.4)


@pytest.fixture
def seasons(stand: Stand) -> Path:
    """Descriptions of one machine before and after a new cylinder in June."""
    folder = stand.folder / "seasons"
    folder.mkdir()
    for month, bore in (("01", "250 mm"), ("06", "260 mm")):
        text = MACHINE.replace("time_zone", f'valid_from = "2024-{month}-01"\ntime_zone')
        write_machine(folder, text.replace("250 mm", bore), name=f"{month}.toml")
    return folder


def test_description_of_the_day_is_taken(stand: Stand, seasons: Path) -> None:
    # TRUTH: same trace; power goes with the area of the piston, 260 mm from June on.
    late, early = (
        write_export(stand.folder, facts=FACTS | {"time": time}, name=f"{time[:7]}.csv")
        for time in ("2024-07-05T10:00:00Z", "2024-05-31T23:00:00Z")
    )
    found = stand.json(late, early, machine=seasons)
    power = [one["ends"][0]["indicated_power_kW"] for one in found]
    assert power[0] / power[1] == pytest.approx((260 / 250) ** 2)


@pytest.mark.parametrize(
    ("facts", "said"),
    [
        (FACTS | {"time": "2023-12-31T10:00:00Z"}, "valid_from"),
        (without("time"), "time"),
        (FACTS | {"machine": "Test stand 9"}, "Test stand 1"),
    ],
    ids=["before the first", "no time", "no such machine"],
)
def test_no_description_fits(stand: Stand, seasons: Path, facts: dict[str, str], said: str) -> None:
    # LAW: contract: exit 2, what was found and expected.
    export = write_export(stand.folder, facts=facts, name="x.csv")
    result = stand.analyse(export, machine=seasons)
    assert (result.status, result.out) == (UNUSABLE, "")
    assert said in result.err


def test_export_must_name_its_machine_among_several(stand: Stand) -> None:
    # LAW: never guessed.
    machines = stand.folder / "machines"
    machines.mkdir()
    write_machine(machines, name="1.toml")
    write_machine(machines, MACHINE.replace("stand 1", "stand 2"), name="2.toml")
    export = write_export(stand.folder, facts=without("machine"), name="x.csv")
    result = stand.analyse(export, machine=machines)
    assert result.status == UNUSABLE
    assert "Test stand 1, Test stand 2" in result.err


def test_one_description_that_names_another_machine_is_said(stand: Stand) -> None:
    # LAW: one description was given, so it is taken; that the names differ is said.
    export = write_export(stand.folder, facts=FACTS | {"machine": "Other"}, name="x.csv")
    result = stand.analyse(export)
    assert result.status == DONE
    assert "Other" in result.err


def test_a_broken_reading_leaves_the_others_alone(stand: Stand) -> None:
    # LAW: one bad card never stops the batch: gauge readings taken as absolute fall below zero.
    columns = traces()
    columns["C1 head end [bar(a)]"] = columns["C1 head end [bar(a)]"] - 11
    bad = write_export(stand.folder, columns, name="bad.csv")
    (alone,) = stand.json()
    good, broken = stand.json(stand.export, bad)
    for one, two in zip(alone["ends"], good["ends"], strict=True):
        assert one["clearance_pct"] == pytest.approx(two["clearance_pct"], rel=1e-6)
    head, crank = broken["ends"]
    assert head["clearance_pct"] is None
    assert head["u_clearance_pct"] is None
    assert "gauge" in head["reason"]["clearance_pct"]
    assert crank["clearance_pct"] is not None
    assert broken["totals"][-1]["ideal_power_kW"] is None
    assert "C1 head" in broken["totals"][-1]["reason"]["ideal_power_kW"]
    assert broken["findings"] == []


# --- Steps, references, what is missing. ---


@pytest.mark.parametrize("key", ["load step", "C1 load step"])
def test_named_step_is_kept_where_the_card_agrees(stand: Stand, key: str) -> None:
    # LAW: contract: the named one unless the card contradicts it.
    write_machine(stand.folder, MACHINE + STEPS)
    export = write_export(stand.folder, traces(head=0.32), FACTS | {key: "pocket"}, name="x.csv")
    (one,) = stand.json(export)
    assert {row["load_step"] for row in one["ends"]} == {"pocket"}
    assert one["repairs"] == []


def test_step_of_the_cylinder_goes_before_that_of_the_machine(stand: Stand) -> None:
    # LAW: contract: `C1 load step` goes before `load step`.
    write_machine(stand.folder, MACHINE + STEPS)
    facts = FACTS | {"load step": "full", "C1 load step": "pocket"}
    (one,) = stand.json(write_export(stand.folder, traces(head=0.32), facts, name="x.csv"))
    assert {row["load_step"] for row in one["ends"]} == {"pocket"}
    assert one["repairs"] == []


def test_unknown_step_is_an_error_that_names_the_nearest(stand: Stand) -> None:
    # LAW: contract: exit 2 with file, key, found and expected.
    write_machine(stand.folder, MACHINE + STEPS)
    result = stand.analyse(
        write_export(stand.folder, facts=FACTS | {"load step": "poket"}, name="x.csv")
    )
    assert result.status == UNUSABLE
    for part in ("x.csv", "load step", "poket", "Did you mean 'pocket'"):
        assert part in result.err


@pytest.mark.parametrize("bare", ["trace", "lines", "both"])
def test_bare_units_are_decided_and_reported(stand: Stand, bare: str) -> None:
    # LAW: contract: a bare unit is not guessed silently. TRUTH: everything is absolute, 12 %.
    columns, facts = traces(), dict(FACTS)
    if bare != "lines":
        columns = {name.replace("(a)", ""): value for name, value in columns.items()}
    if bare != "trace":
        facts = {name: value.replace("(a)", "") for name, value in facts.items()}
    export = write_export(stand.folder, columns, facts, name="bare.csv")
    said = stand.analyse(export, "--format", "json")
    (one,) = said.recordings
    assert one["ends"][0]["clearance_pct"] == pytest.approx(12.0, abs=0.3)
    assert "absolute or gauge" in said.err
    if bare != "lines":
        offsets = [own for own in one["repairs"] if own["kind"] == "pressure_level_offset"]
        assert [own["value"] for own in offsets] == [0.0, 0.0]
        assert not any(own["applied"] for own in offsets)


def test_bare_line_pressures_follow_a_trace_that_says_what_it_is(stand: Stand) -> None:
    # TRUTH: lines in gauge, 1 bar below the absolute traces.
    facts = FACTS | {"C1 suction pressure": "9 bar", "C1 discharge pressure": "29 bar"}
    (one,) = stand.json(write_export(stand.folder, facts=facts, name="x.csv"))
    assert one["ends"][0]["suction_pressure_bar"] == pytest.approx(10.0)
    assert one["ends"][0]["discharge_pressure_bar"] == pytest.approx(30.0)


def test_pressures_not_given_are_read_off_the_trace_with_their_own_doubt(stand: Stand) -> None:
    # LAW: contract: estimated where that is honest, and the result says so, once a cylinder.
    facts = {name: value for name, value in FACTS.items() if "pressure" not in name}
    (one,) = stand.json(write_export(stand.folder, facts=facts, name="x.csv"))
    texts = [own["evidence"][0]["text"] for own in one["repairs"]]
    assert len(texts) == 2
    for side, text in zip(("suction", "discharge"), texts, strict=True):
        assert f"no {side} pressure" in text
    (given,) = stand.json()
    for row, known in zip(one["ends"], given["ends"], strict=True):
        assert row["u_suction_pressure_bar"] > 5 * known["u_suction_pressure_bar"]
        assert row["u_suction_valve_loss_kW"] > 2 * known["u_suction_valve_loss_kW"]


@pytest.mark.parametrize("where", ["atmosphere", "suction"])
def test_open_ends_take_no_part_in_totals(stand: Stand, where: str) -> None:
    # LAW: contract: a row with identity, pressures and reason; the totals are those of the other.
    text = MACHINE.replace('clearance = "14 %"', f'open_to = "{where}"')
    write_machine(stand.folder, text)
    columns = traces()
    del columns["C1 crank end [bar(a)]"]
    (one,) = stand.json(write_export(stand.folder, columns, name="x.csv"))
    head, crank = one["ends"]
    assert crank["discharge_pressure_bar"] == head["discharge_pressure_bar"]
    empty = [name for name in END_COLUMNS if crank[name] is None]
    assert len(empty) == len(END_COLUMNS) - 2
    assert all(where in crank["reason"][name] for name in empty)
    power = one["totals"][-1]["indicated_power_kW"]
    assert power == pytest.approx(head["indicated_power_kW"])


def test_end_without_a_trace_is_listed_and_said(stand: Stand) -> None:
    # LAW: every end of a recorded cylinder has a row.
    columns = traces()
    del columns["C1 crank end [bar(a)]"]
    (one,) = stand.json(write_export(stand.folder, columns, name="x.csv"))
    crank = one["ends"][1]
    assert crank["indicated_power_kW"] is None
    assert "no trace" in crank["reason"]["indicated_power_kW"]


def test_a_load_of_the_driver_is_never_negative_by_a_reversed_angle(stand: Stand) -> None:
    # LAW: a loop that gives work is reported as such; it overloads no driver.
    columns = traces()
    columns["crank_angle [deg]"] = (360 - columns["crank_angle [deg]"]) % 360
    (one,) = stand.json(write_export(stand.folder, columns, name="x.csv"))
    assert {own["kind"] for own in one["repairs"]} == {"reversed_angle"}
    assert not any(own["kind"] == "over_rated_power" for own in one["findings"])
    assert one["totals"][-1]["u_driver_load_pct"] > 0


def test_a_flat_trace_is_idle_not_reversed(stand: Stand) -> None:
    # LAW: work that cannot be told from nothing has no sign.
    columns = {name: np.full(720, 10.0) for name in traces()}
    columns["crank_angle [deg]"] = traces()["crank_angle [deg]"]
    (one,) = stand.json(write_export(stand.folder, columns, name="x.csv"))
    assert one["repairs"] == []
    assert {own["kind"] for own in one["findings"]} == {"unloaded_end"}


# --- Input that cannot be used. ---

BAD_FACTS = [
    ("speed", "0 rpm"),
    ("speed", "fast"),
    ("speed", "600"),
    ("C1 suction pressure", "-2 bar(g)"),
    ("C1 suction pressure", "10 furlong"),
    ("C1 suction temperature", "-300 degC"),
    ("C1 suction temperature", "27 bar"),
    ("time", "yesterday"),
    ("barometric pressure", "1013"),
]


@pytest.mark.parametrize(("key", "value"), BAD_FACTS, ids=lambda one: str(one))
def test_values_that_cannot_be_are_named_with_their_line(
    stand: Stand, key: str, value: str
) -> None:
    # LAW: contract: the message names file, line and what was found.
    export = write_export(stand.folder, facts=FACTS | {key: value}, name="x.csv")
    result = stand.analyse(export, "--output", f"{stand.folder}/out.txt")
    assert (result.status, result.out) == (UNUSABLE, "")
    assert "x.csv" in result.err
    assert key in result.err
    assert value.split()[-1] in result.err
    assert not (stand.folder / "out.txt").exists()


BAD_WORDS = [
    ("no command", []),
    ("unknown command", ["guess"]),
    ("no export", ["analyse", "--machine", "m"]),
    ("no machine", ["analyse", "x.csv"]),
    ("unknown format", ["analyse", "x.csv", "--machine", "m", "--format", "xml"]),
    ("unknown units", ["analyse", "x.csv", "--machine", "m", "--units", "imperial"]),
    ("unknown limit", ["analyse", "x.csv", "--machine", "m", "--fail-on", "panic"]),
    ("unknown option", ["analyse", "x.csv", "--machine", "m", "--fast"]),
    ("report without folder", ["report", "x.csv", "--machine", "m"]),
]


@pytest.mark.parametrize(("name", "words"), BAD_WORDS, ids=[one[0] for one in BAD_WORDS])
def test_words_that_are_no_command(stand: Stand, name: str, words: list[str]) -> None:
    # LAW: contract: exit 2, and what the command would have understood.
    result = stand.run(*words)
    assert result.status == UNUSABLE, name
    assert "usage: pvcard" in result.err


def narrow(stand: Stand, name: str, text: str | bytes) -> Path:
    """A file of the stand with some content."""
    path = stand.folder / name
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return path


def test_files_that_are_not_what_they_should_be(stand: Stand) -> None:
    # LAW: contract: exit 2, a message that names the file, no traceback, nothing written.
    before = {path.name for path in stand.folder.iterdir()}
    cases = {
        "folder.csv": (stand.folder / "folder.csv", None, None),
        "bytes.toml": (stand.export, narrow(stand, "bytes.toml", b"\xff\xfe\x00\x01"), None),
        "empty.toml": (stand.export, narrow(stand, "empty.toml", ""), None),
        "void": (stand.export, stand.folder / "void", None),
        "none.toml": (stand.export, None, stand.folder / "none.toml"),
        "rows.csv": (narrow(stand, "rows.csv", "1,2,3\n4,5,6\n"), None, None),
        "head.csv": (
            narrow(stand, "head.csv", "crank_angle [deg],C1 head end [bar(a)]\n"),
            None,
            None,
        ),
        "odd.csv": (
            narrow(stand, "odd.csv", "crank_angle [deg],C1 head end [stone]\n0,1\n1,1\n"),
            None,
            None,
        ),
        "text.csv": (narrow(stand, "text.csv", "Dear all,\nplease find attached\n"), None, None),
    }
    (stand.folder / "folder.csv").mkdir()
    (stand.folder / "void").mkdir()
    for name, (export, machine, columns) in cases.items():
        words: list[object] = [export, "--output", f"{stand.folder}/out.txt"]
        if columns is not None:
            words += ["--columns", str(columns)]
        result = stand.analyse(*words, machine=machine)
        assert (result.status, result.out) == (UNUSABLE, ""), name
        assert name in result.err
        assert "Traceback" not in result.err
    after = {path.name for path in stand.folder.iterdir()}
    assert after == before | set(cases) - {"none.toml"}


@pytest.mark.skipif(
    not hasattr(os, "geteuid") or os.geteuid() == 0, reason="an administrator may write anywhere"
)
def test_folder_that_may_not_be_written_to(stand: Stand) -> None:
    # LAW: contract: exit 2, nothing written.
    folder = stand.folder / "locked"
    folder.mkdir(mode=0o500)
    result = stand.analyse("--output", f"{folder}/r.json", "--format", "json")
    assert result.status == UNUSABLE
    assert "cannot be written" in result.err


def test_the_command_itself(stand: Stand) -> None:
    # LAW: contract: exit status and streams of the process, not only of the function.
    call = [sys.executable, "-m", "pvcard", "analyse", str(stand.export)]
    call += ["--machine", str(stand.machine), "--format", "json"]
    done = subprocess.run(call, capture_output=True, text=True, check=False)
    assert done.returncode == DONE
    assert json.loads(done.stdout)["recordings"]
    stand.export.unlink()
    done = subprocess.run(call, capture_output=True, text=True, check=False)
    assert (done.returncode, done.stdout) == (UNUSABLE, "")
    assert done.stderr.startswith("pvcard: ")
    assert "Traceback" not in done.stderr


@pytest.mark.parametrize("name", ["N-3", "H-1", "F-2", "A-4"])
def test_example_plant_can_be_analysed(stand: Stand, name: str) -> None:
    # TRUTH: the simulated machine; passages and marks of the example leave 4 % in the power.
    folder = EXAMPLES / name
    exports = sorted((folder / "exports").iterdir())[:2]
    words: list[object] = [*exports]
    if (folder / "columns.toml").exists():
        words += ["--columns", str(folder / "columns.toml")]
    found = stand.json(*words, machine=folder / "machine.toml")
    assert len(found) == len(exports)
    for export, one in zip(exports, found, strict=True):
        truth = json.loads((folder / "truth" / f"{export.stem}.json").read_text(encoding="utf-8"))
        true = {
            (end["cylinder"], end["end"]): end["indicated_power_kW"]
            for cylinder in truth["cylinders"]
            for end in cylinder["ends"]
        }
        rows = {(row["cylinder"], row["end"]): row for row in one["ends"]}
        for key, power in true.items():
            row = rows[key]
            assert row["indicated_power_kW"] == pytest.approx(power, rel=0.04), key
            assert abs(row["indicated_power_kW"] - power) < 3 * row["u_indicated_power_kW"]
