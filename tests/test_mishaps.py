"""What can go wrong around an analysis, and must not hurt: outputs over inputs, a spike, odd bases.

LAW throughout: nothing is lost or half-written, one bad reading leaves its neighbours alone, a
figure is shown in the unit and at the base state it claims.
"""

import json

import pytest

from pvcard.cli import main
from tests.plant import MACHINE, traces, write_export, write_machine


def js(folder, capsys, *exports, machine=None):
    capsys.readouterr()
    assert (
        main(
            [
                "analyse",
                *map(str, exports),
                "--machine",
                str(machine or folder / "machine.toml"),
                "--format",
                "json",
            ]
        )
        == 0
    )
    return json.loads(capsys.readouterr().out)["recordings"]


def test_a_spike_in_one_reading_leaves_other_readings_alone(tmp_path, capsys):
    write_machine(tmp_path)
    good = write_export(tmp_path)
    columns = traces()
    columns["C1 head end [bar(a)]"][100] = 9000.0
    bad = write_export(tmp_path, columns, name="spike.csv")
    found = js(tmp_path, capsys, good, bad)
    assert found[0]["ends"][0]["clearance_pct"] is not None


@pytest.mark.parametrize("name", ["export.csv", "machine.toml"])
def test_output_never_overwrites_an_input(tmp_path, name):
    write_machine(tmp_path)
    write_export(tmp_path)
    before = (tmp_path / name).read_bytes()
    status = main(
        [
            "analyse",
            str(tmp_path / "export.csv"),
            "--machine",
            str(tmp_path / "machine.toml"),
            "--output",
            str(tmp_path / name),
        ]
    )
    assert (tmp_path / name).read_bytes() == before
    assert status == 2


def test_nothing_is_written_when_one_of_five_files_cannot_be(tmp_path):
    write_machine(tmp_path)
    write_export(tmp_path)
    (tmp_path / "r.csv").mkdir()
    before = sorted(p.name for p in tmp_path.iterdir())
    assert (
        main(
            [
                "analyse",
                str(tmp_path / "export.csv"),
                "--machine",
                str(tmp_path / "machine.toml"),
                "--format",
                "csv",
                "--output",
                str(tmp_path / "r.csv"),
            ]
        )
        == 2
    )
    assert sorted(p.name for p in tmp_path.iterdir()) == before


def test_standard_flow_in_us_units_knows_the_base_state(tmp_path, capsys):
    write_machine(tmp_path, MACHINE.replace("time_zone", 'base_temperature = "0 degC"\ntime_zone'))
    export = write_export(tmp_path)
    flow = js(tmp_path, capsys, export)[0]["totals"][-1]["standard_flow_m3_h"]
    main(["analyse", str(export), "--machine", str(tmp_path / "machine.toml"), "--units", "us"])
    text = capsys.readouterr().out
    line = next(x for x in text.splitlines() if x.strip().startswith("machine "))
    shown = float(line.split("Standard flow ")[1].split()[0])
    # LAW: (p_b / 14.696 psia) (288.706 K / 273.15 K)
    assert shown == pytest.approx(flow * 24 * 35.3146667e-6 * (288.7056 / 273.15), rel=5e-3)


def test_coarse_grid_says_so(tmp_path, capsys):
    write_machine(tmp_path)
    row = js(tmp_path, capsys, write_export(tmp_path, traces(samples=36)))[0]["ends"][0]
    assert row["clearance_pct"] is not None or "sample" in row["reason"]["clearance_pct"]


def test_unwritable_folder_names_the_file_asked_for(tmp_path, capsys):
    write_machine(tmp_path)
    write_export(tmp_path)
    main(
        [
            "analyse",
            str(tmp_path / "export.csv"),
            "--machine",
            str(tmp_path / "machine.toml"),
            "--output",
            str(tmp_path / "no" / "x.json"),
        ]
    )
    assert f"{tmp_path}/no/x.json" in capsys.readouterr().err
