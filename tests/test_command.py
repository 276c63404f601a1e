"""The command as a user types it: results, messages, exit status, and what is left on disk."""

from __future__ import annotations

import csv
import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from pvcard.cli import DONE, UNUSABLE, WITH_FINDINGS, main
from pvcard.quantities import CYLINDER_QUANTITIES, END_COLUMNS, QUANTITIES, TOTAL_QUANTITIES
from tests.plant import FACTS, MACHINE, STEPS, traces, without, write_export, write_machine


def analysed(folder: Path, *words: str, status: int = DONE) -> dict[str, Any]:
    """JSON of `analyse` over the export of a folder, first recording."""
    out = folder / "out.json"
    call = ["analyse", str(folder / "export.csv"), "--machine", str(folder / "machine.toml")]
    assert main([*call, "--format", "json", "--output", str(out), *words]) == status
    document = json.loads(out.read_text(encoding="utf-8"), parse_constant=pytest.fail)
    assert document["schema"] == 1
    result: dict[str, Any] = document["recordings"][0]
    return result


@pytest.fixture
def stand(tmp_path: Path) -> Path:
    """A folder with the export and description of the test stand."""
    write_machine(tmp_path)
    write_export(tmp_path)
    return tmp_path


def test_power_and_clearance_of_an_ideal_machine(stand: Path) -> None:
    # LAW: n/(n-1) ps Vs (1 + C - C r^(1/n)) (r^((n-1)/n) - 1) per turn (closed form, PWR-05).
    n, ratio = 1.424, 3.0
    rows = {row["end"]: row for row in analysed(stand)["ends"]}
    for end, area, clearance in (("head", 0.25**2, 0.12), ("crank", 0.25**2 - 0.05**2, 0.14)):
        swept = np.pi / 4 * area * 0.2
        volume = 1 + clearance - clearance * ratio ** (1 / n)
        work = n / (n - 1) * 10e5 * swept * volume * (ratio ** ((n - 1) / n) - 1)
        assert rows[end]["indicated_power_kW"] == pytest.approx(work * 10 / 1e3, rel=2e-4)
        assert rows[end]["clearance_pct"] == pytest.approx(100 * clearance, abs=0.3)
        assert abs(rows[end]["suction_valve_loss_kW"]) < 0.002 * rows[end]["indicated_power_kW"]
        efficiency = 100 * (1 + clearance - clearance * ratio ** (1 / n))
        assert rows[end]["suction_volumetric_efficiency_pct"] == pytest.approx(efficiency, abs=0.3)


def test_every_column_stands_there_with_its_uncertainty_or_a_reason(stand: Path) -> None:
    # LAW: contract of the output: null with a reason, and its uncertainty null too.
    result = analysed(stand)
    known = {
        "ends": (result["ends"], END_COLUMNS),
        "cylinders": (result["cylinders"], CYLINDER_QUANTITIES),
        "totals": (result["totals"], TOTAL_QUANTITIES),
    }
    for rows, columns in known.values():
        assert rows
        for row in rows:
            for column in columns:
                assert (row[column] is None) == (column in row["reason"]), column
                if row[column] is None:
                    assert row.get(f"u_{column}") is None
                elif column not in QUANTITIES or QUANTITIES[column].has_uncertainty:
                    assert row[f"u_{column}"] >= 0, column


def test_parts_of_the_power_add_up(stand: Path) -> None:
    # LAW: indicated = theoretical + suction loss + discharge loss + rest.
    for row in analysed(stand)["ends"]:
        parts = ("ideal_power_kW", "suction_valve_loss_kW", "discharge_valve_loss_kW")
        total = sum(row[name] for name in parts) + row["other_loss_kW"]
        assert total == pytest.approx(row["indicated_power_kW"], rel=1e-9)


def test_totals_are_sums(stand: Path) -> None:
    # LAW: sums over ends; specific power is power over flow; load is shaft power over rated.
    result = analysed(stand)
    machine = result["totals"][-1]
    power = sum(row["indicated_power_kW"] for row in result["ends"])
    assert machine["scope"] == "machine"
    assert machine["indicated_power_kW"] == pytest.approx(power)
    assert machine["driver_load_pct"] == pytest.approx(power / 0.95 / 400 * 100)
    flow = machine["standard_flow_m3_h"]
    assert machine["specific_power_kWh_per_1000_m3"] == pytest.approx(1000 * power / flow)
    u = [row["u_indicated_power_kW"] for row in result["ends"]]
    assert np.hypot(*u) < machine["u_indicated_power_kW"] <= sum(u) * (1 + 1e-9)


def test_csv_goes_into_five_files(stand: Path) -> None:
    # LAW: contract: NAME.csv and four tables beside it, recording, machine and time in front.
    call = ["analyse", str(stand / "export.csv"), "--machine", str(stand / "machine.toml")]
    assert main([*call, "--format", "csv", "--output", str(stand / "r.csv")]) == DONE
    names = {path.name for path in stand.glob("r*.csv")}
    parts = ("cylinders", "totals", "findings", "repairs")
    assert names == {"r.csv", *[f"r.{part}.csv" for part in parts]}
    rows = list(csv.DictReader((stand / "r.csv").read_text(encoding="utf-8").splitlines()))
    assert [row["end"] for row in rows] == ["head", "crank"]
    assert list(rows[0])[:3] == ["recording", "machine", "time"]
    assert float(rows[0]["indicated_power_kW"]) > 0


def test_us_units_in_the_table(stand: Path, capsys: pytest.CaptureFixture[str]) -> None:
    # SOURCE: 1 bar = 14.5038 psi (NIST SP 811).
    call = ["analyse", str(stand / "export.csv"), "--machine", str(stand / "machine.toml")]
    assert main([*call, "--units", "us"]) == DONE
    text = capsys.readouterr().out
    assert "[psia]" in text
    assert "145.04" in text
    assert "[hp]" in text


def test_findings_set_the_exit_status(stand: Path) -> None:
    # LAW: contract: 1 with findings at or above --fail-on, else 0.
    hot = FACTS | {"C1 discharge temperature": "240 degC"}
    write_export(stand, facts=hot)
    result = analysed(stand, "--fail-on", "act", status=WITH_FINDINGS)
    (finding,) = result["findings"]
    assert finding["kind"] == "high_discharge_temperature"
    assert finding["severity"] == "act"
    assert finding["caution"]
    analysed(stand, "--fail-on", "never")


@pytest.mark.parametrize(("clearance", "step"), [(0.12, "full"), (0.32, "pocket")])
def test_load_step_is_told_by_the_card(tmp_path: Path, clearance: float, step: str) -> None:
    # TRUTH: the pocket adds 20 % to a clearance of 12 %.
    write_machine(tmp_path, MACHINE + STEPS)
    write_export(tmp_path, traces(head=clearance))
    result = analysed(tmp_path)
    assert {row["load_step"] for row in result["ends"]} == {step}
    head = result["ends"][0]
    assert head["clearance_pct"] == pytest.approx(100 * clearance, abs=0.5)


def test_load_step_that_contradicts_the_card_is_reported(tmp_path: Path) -> None:
    # TRUTH: the export names the pocket, the card has none.
    write_machine(tmp_path, MACHINE + STEPS)
    write_export(tmp_path, facts=FACTS | {"load step": "pocket"})
    result = analysed(tmp_path)
    assert {row["load_step"] for row in result["ends"]} == {"full"}
    assert "load_step_mismatch" in {repair["kind"] for repair in result["repairs"]}


def test_idle_end_is_recognised(tmp_path: Path) -> None:
    # TRUTH: the crank end stays near suction pressure.
    write_machine(tmp_path, MACHINE + STEPS)
    columns = traces()
    angle = np.radians(columns["crank_angle [deg]"])
    columns["C1 crank end [bar(a)]"] = 10 + 0.2 * np.sin(angle)
    write_export(tmp_path, columns)
    result = analysed(tmp_path)
    crank = result["ends"][1]
    assert crank["load_step"] == "half"
    assert crank["ideal_power_kW"] is None
    assert crank["indicated_power_kW"] is not None
    assert "does not compress" in crank["reason"]["ideal_power_kW"]
    assert [finding["kind"] for finding in result["findings"]] == ["unloaded_end"]
    flow = result["ends"][0]["discharge_flow_kg_h"]
    assert result["totals"][-1]["discharge_flow_kg_h"] == pytest.approx(flow)


def test_clearance_far_from_the_declared_one_is_reported(tmp_path: Path) -> None:
    # TRUTH: 12 % stands in the card, 24 % in the description, believed to 0.5 points.
    text = MACHINE.replace('clearance = "12 %"', 'clearance = "24 %"')
    write_machine(
        tmp_path, text + '[uncertainty]\nclearance = "0.5 points"\ndead_centre = "0.05 deg"\n'
    )
    write_export(tmp_path)
    result = analysed(tmp_path)
    (repair,) = (one for one in result["repairs"] if one["kind"] == "clearance_mismatch")
    assert repair["value"] == pytest.approx(-12, abs=0.6)
    assert (repair["cylinder"], repair["end"]) == ("C1", "head")


@pytest.mark.parametrize(
    ("key", "kind"),
    [
        ("speed", "rated speed"),
        ("C1 suction pressure", "no suction pressure"),
        ("C1 discharge pressure", "no discharge pressure"),
    ],
)
def test_a_missing_value_is_estimated_and_said(tmp_path: Path, key: str, kind: str) -> None:
    # LAW: contract: estimated where that is honest, and the result says so.
    write_machine(tmp_path)
    write_export(tmp_path, facts=without(key))
    result = analysed(tmp_path)
    (repair,) = (one for one in result["repairs"] if one["kind"] == "assumed_value")
    assert kind in repair["evidence"][0]["text"]
    assert result["ends"][0]["indicated_power_kW"] is not None


def test_without_suction_temperature_power_stays_and_the_rest_says_why(tmp_path: Path) -> None:
    # LAW: nothing is guessed: without it neither gas state nor theoretical card is known.
    write_machine(tmp_path)
    write_export(tmp_path, facts=without("C1 suction temperature"))
    row = analysed(tmp_path)["ends"][0]
    assert row["ideal_power_kW"] is None
    assert "suction temperature is not known" in row["reason"]["ideal_power_kW"]
    write_export(tmp_path)
    whole = analysed(tmp_path)["ends"][0]
    for column in ("indicated_power_kW", "pressure_max_bar", "discharge_temperature_degC"):
        assert row[column] == pytest.approx(whole[column])
        assert row[f"u_{column}"] > 0


def test_bare_pressure_unit_is_decided_by_its_level(tmp_path: Path) -> None:
    # TRUTH: the trace is gauge, one bar below the absolute line pressure.
    write_machine(tmp_path)
    columns = {name.replace("(a)", ""): value for name, value in traces().items()}
    for name in columns:
        if "end" in name:
            columns[name] = columns[name] - 1.0
    write_export(tmp_path, columns)
    result = analysed(tmp_path)
    offsets = [one for one in result["repairs"] if one["kind"] == "pressure_level_offset"]
    assert [one["value"] for one in offsets] == pytest.approx([-1.0, -1.0])
    assert result["ends"][0]["pressure_max_bar"] == pytest.approx(30.0, abs=0.01)


def test_end_open_to_atmosphere_has_a_row_and_a_reason(tmp_path: Path) -> None:
    # LAW: contract: identity, pressures and reason, all else null.
    text = MACHINE.replace('clearance = "14 %"', 'open_to = "atmosphere"')
    write_machine(tmp_path, text)
    columns = traces()
    del columns["C1 crank end [bar(a)]"]
    write_export(tmp_path, columns)
    crank = analysed(tmp_path)["ends"][1]
    assert crank["end"] == "crank"
    assert crank["suction_pressure_bar"] == pytest.approx(10.0)
    assert crank["indicated_power_kW"] is None
    assert "open to atmosphere" in crank["reason"]["indicated_power_kW"]


def test_folder_of_machines_is_matched_by_name(tmp_path: Path) -> None:
    # TRUTH: two descriptions, each export names its own.
    machines = tmp_path / "machines"
    machines.mkdir()
    write_machine(machines, name="one.toml")
    write_machine(machines, MACHINE.replace("Test stand 1", "Test stand 2"), name="two.toml")
    first = write_export(tmp_path, name="a.csv", facts=FACTS | {"machine": "Test stand 2"})
    second = write_export(tmp_path, name="b.csv")
    out = tmp_path / "o.json"
    call = ["analyse", str(first), str(second), "--machine", str(machines), "--format", "json"]
    assert main([*call, "--output", str(out)]) == DONE
    found = json.loads(out.read_text(encoding="utf-8"))["recordings"]
    assert [one["recording"]["machine"] for one in found] == ["Test stand 2", "Test stand 1"]


BAD = [
    ("missing export", lambda f: (f / "export.csv").unlink(), "export.csv"),
    ("missing machine", lambda f: (f / "machine.toml").unlink(), "machine.toml"),
    ("empty export", lambda f: (f / "export.csv").write_bytes(b""), "empty"),
    (
        "picture",
        lambda f: (f / "export.csv").write_bytes(b"\x89PNG\r\n\x1a\n" + bytes(99)),
        "picture",
    ),
    (
        "export as machine",
        lambda f: (f / "machine.toml").write_text((f / "export.csv").read_text()),
        "machine.toml",
    ),
    (
        "unknown cylinder",
        lambda f: write_export(f, {k.replace("C1", "C7"): v for k, v in traces().items()}),
        "C7",
    ),
    (
        "text among numbers",
        lambda f: (f / "export.csv").write_text(
            (f / "export.csv").read_text().replace("\n90,", "\nninety,")
        ),
        "ninety",
    ),
    ("no unit", lambda f: write_machine(f, MACHINE.replace('"250 mm"', "250")), "bore"),
    ("unknown key", lambda f: write_machine(f, MACHINE.replace("bore =", "boer =")), "bore"),
    (
        "unknown gas",
        lambda f: write_machine(f, MACHINE.replace("nitrogen", "nitrogne")),
        "nitrogen",
    ),
    ("time that is none", lambda f: write_export(f, facts=FACTS | {"time": "05/03/24"}), "time"),
]


@pytest.mark.parametrize(("name", "spoil", "said"), BAD, ids=[one[0] for one in BAD])
def test_bad_input_ends_in_a_message_and_writes_nothing(
    stand: Path, capsys: pytest.CaptureFixture[str], name: str, spoil: Any, said: str
) -> None:
    # LAW: contract: exit 2, the place and what was found, nothing written.
    spoil(stand)
    before = sorted(stand.iterdir())
    call = ["analyse", str(stand / "export.csv"), "--machine", str(stand / "machine.toml")]
    assert main([*call, "--output", str(stand / "out.txt")]) == UNUSABLE, name
    message = capsys.readouterr().err
    assert said in message
    assert "Traceback" not in message
    assert sorted(stand.iterdir()) == before


@pytest.mark.parametrize(
    ("facts", "said"),
    [
        ({"C1 suction pressure": "40 bar(a)"}, "not above the suction pressure"),
        ({"C1 suction temperature": "-190 degC"}, "two-phase|liquid"),
    ],
)
def test_impossible_conditions_give_reasons(
    tmp_path: Path, facts: dict[str, str], said: str
) -> None:
    # LAW: what cannot be computed is null with the reason.
    write_machine(tmp_path)
    write_export(tmp_path, facts=FACTS | facts)
    row = analysed(tmp_path)["ends"][0]
    assert row["ideal_power_kW"] is None
    assert any(part in row["reason"]["ideal_power_kW"] for part in said.split("|"))


def test_result_that_cannot_be_written_is_said(
    stand: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    # LAW: a folder that does not exist: exit 2 and a message.
    call = ["analyse", str(stand / "export.csv"), "--machine", str(stand / "machine.toml")]
    assert main([*call, "--output", str(stand / "no" / "where.txt")]) == UNUSABLE
    assert "cannot be written" in capsys.readouterr().err


def test_other_readings_do_not_change_a_result(stand: Path) -> None:
    # LAW: batch equals one by one: what else is analysed in the same call does not matter.
    alone = analysed(stand)["ends"]
    other = write_export(stand, traces(head=0.15), name="other.csv")
    out = stand / "both.json"
    call = ["analyse", str(stand / "export.csv"), str(other), "--format", "json"]
    call += ["--machine", str(stand / "machine.toml"), "--output", str(out)]
    assert main(call) == DONE
    both = json.loads(out.read_text(encoding="utf-8"))["recordings"][0]["ends"]
    for one, two in zip(alone, both, strict=True):
        for column in END_COLUMNS:
            if one[column] is not None:
                assert two[column] == pytest.approx(one[column], rel=1e-6), column
