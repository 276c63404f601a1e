import csv
import json
from dataclasses import replace
from datetime import datetime
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from pvcard.cycle import Leak, Leaks
from pvcard.errors import InputError
from pvcard.machine import Machine, read_machine
from pvcard.simulate import CylinderSituation, Simulated, Situation, simulate_recordings
from pvcard.simulate_export import Layout, export_text, write_simulated
from pvcard.simulate_plant import make_plant
from pvcard.simulate_sensor import (
    Sensor,
    as_read,
    cavity_frequency,
    closed_tube_frequency,
    passage_frequency,
    passage_response,
    through_passage,
    travel_lag,
)

HERE = Path(__file__).parent
EXAMPLES = HERE.parent / "example_data"
ROWS = {
    row["id"]: float(row["expected"])
    for row in csv.DictReader((HERE / "data/check_values_cycle.csv").read_text().splitlines())
}


def test_resonances_of_a_passage() -> None:
    # LAW: acoustics of a passage, computed from first principles [CHN-01..06].
    assert_allclose(closed_tube_frequency(0.15, 430.0), ROWS["CHN-01"], atol=0.01)
    assert_allclose(cavity_frequency(0.15, 6e-3, 2e-6, 430.0), ROWS["CHN-02"], atol=0.01)
    corrected = cavity_frequency(0.15, 6e-3, 2e-6, 430.0, passage_share=1 / 3)
    assert_allclose(corrected, ROWS["CHN-03"], atol=0.01)
    assert_allclose(passage_frequency(0.15, 6e-3, 2e-6, 430.0), ROWS["CHN-04"], atol=0.01)
    assert_allclose(travel_lag(0.15, 430.0, 1000 / 60), ROWS["CHN-05"], atol=1e-4)
    assert_allclose(abs(passage_response(0.1, 1.0, 0.0)), ROWS["CHN-06"], atol=1e-6)


def test_passage_delays_a_slow_wave_by_its_lag() -> None:
    sensor, speed = Sensor(700.0, 0.2), 12.0
    angle = np.arange(1440) * 0.25
    wave = 10e5 + 1e5 * np.sin(np.radians(2 * angle))
    found = through_passage(wave, sensor, speed, refine=1)
    # LIMIT: far below the resonance a passage is a delay of 2 zeta / omega_0.
    late = 10e5 + 1e5 * np.sin(np.radians(2 * (angle - sensor.lag(speed))))
    assert_allclose(found, late, atol=1e5 * 2e-3)
    assert_allclose(sensor.lag(speed), 360 * 12 * 0.4 / (2 * np.pi * 700))  # LAW: 2 zeta / omega_0


def test_shift_and_refinement_keep_the_wave() -> None:
    angle = np.arange(720) * 0.5
    wave = np.cos(np.radians(3 * angle))
    found = through_passage(wave, Sensor(), 10.0, shift=7.3, refine=4)
    fine = np.arange(2880) * 0.125
    # LAW: a wave moved to larger angles by 7.3 deg.
    assert_allclose(found, np.cos(np.radians(3 * (fine - 7.3))), atol=1e-10)


def test_reading_adds_what_the_sensor_does_wrong() -> None:
    rng = np.random.default_rng(0)
    sensor = Sensor(zero=500.0, gain=0.01, drift=200.0, quantum=100.0)
    found = as_read(np.array([1e6, 1e6]), sensor, np.array([0.0, 0.5]), rng)
    # LAW: gain, zero, half the drift, then rounding to 100 Pa.
    assert_array_equal(found, [1010500.0, 1010600.0])


@pytest.fixture(scope="module")
def machine() -> Machine:
    return read_machine(EXAMPLES / "N-3" / "machine.toml")


def situation(**changes: object) -> Situation:
    way = CylinderSituation(
        20e5,
        48e5,
        295.0,
        leaks=Leaks(suction=Leak(orifice=np.array([[6e-6, 0.0]]))),
        clearance_error=(0.01, 0.0),
    )
    plain = replace(way, leaks=Leaks(), clearance_error=())
    values = {
        "time": datetime(2024, 3, 12, 9, 30),
        "speed": 735 / 60,
        "cylinders": {"C1": way, "C2": plain},
        "encoder_offset": 0.5,
    }
    return Situation(**(values | changes))  # type: ignore[arg-type]


@pytest.fixture(scope="module")
def recordings(machine: Machine) -> list[Simulated]:
    by_angle = situation(wander=0.0)
    turns = situation(turns=3, averaged=False, angle_step=1.0, wander=0.001, speed_ripple=(0.003,))
    in_time = situation(turns=3, sampling_rate=12e3)
    return simulate_recordings(machine, [by_angle, turns, in_time], step=0.5)


def test_truth_states_what_was_put_in(recordings: list[Simulated]) -> None:
    truth = recordings[0].truth
    head = truth["cylinders"][0]["ends"][0]
    # TRUTH: declared clearance 15.5 % plus one point, an orifice of 6 mm2, a mark 0.5 deg off.
    assert_allclose(head["clearance_pct"], 16.5)
    assert_allclose(head["suction_leak_mm2"], 6.0, rtol=0.02)
    assert truth["dead_centre_offset_deg"] == 0.5
    assert 1.0 < head["suction_leak_pct"] < 3.0
    crank, healthy = truth["cylinders"][0]["ends"][1], truth["cylinders"][1]["ends"][0]
    assert crank["suction_leak_pct"] == 0
    assert healthy["suction_leak_pct"] == 0
    # LAW: a leaking suction valve flattens the compression and steepens the expansion line.
    assert head["compression_exponent"] < healthy["compression_exponent"]
    assert head["expansion_exponent"] > healthy["expansion_exponent"]
    assert head["leak_power_kW"] > 0


def test_work_of_the_export_is_that_of_the_truth(
    machine: Machine, recordings: list[Simulated]
) -> None:
    one = recordings[0]
    assert one.crank_angle is not None
    for number, cylinder in enumerate(machine.cylinders):
        radius, rod = cylinder.stroke / 2, cylinder.connecting_rod_length
        # TRUTH: export angle minus encoder offset minus the cylinder's own dead centre.
        theta = np.radians(one.crank_angle - 0.5 - cylinder.dead_centre)
        travel = (
            radius * (1 - np.cos(theta)) + rod - np.sqrt(rod**2 - (radius * np.sin(theta)) ** 2)
        )
        for end, name in enumerate(("head", "crank")):
            sign = 1 if name == "head" else -1
            volume = sign * cylinder.area(name) * travel
            pressure = one.pressure[cylinder.name, name]
            work = -((pressure + np.roll(pressure, -1)) / 2 * (np.roll(volume, -1) - volume)).sum()
            stated = one.truth["cylinders"][number]["ends"][end]["indicated_work_kJ"]
            assert_allclose(work / 1e3, stated, rtol=1e-3)  # LAW: closed integral of p dV


def test_single_turns_differ_by_the_wander_alone(recordings: list[Simulated]) -> None:
    one = recordings[1]
    turns = one.pressure["C2", "head"].reshape(3, 360)
    ratio = turns[1:] / turns[0]
    # TRUTH: one factor a turn, standard deviation 0.1 %, no noise.
    assert_allclose(ratio, ratio[:, :1] * np.ones((1, 360)), rtol=1e-12)
    assert 0 < np.abs(ratio - 1).max() < 0.006
    assert one.cycle is not None
    assert_array_equal(np.unique(one.cycle), [1, 2, 3])


def test_pulse_rises_where_the_export_angle_is_zero(recordings: list[Simulated]) -> None:
    one = recordings[2]
    assert one.seconds is not None
    assert one.pulse is not None
    rises = one.seconds[1:][np.diff(one.pulse) > 0]
    # TRUTH: one turn between the rises, to one sample of 1/12000 s.
    assert_allclose(np.diff(rises), 60 / 735, atol=1.1 / 12e3)


def test_batch_does_not_change_a_recording(machine: Machine, recordings: list[Simulated]) -> None:
    alone = simulate_recordings(machine, [situation(wander=0.0)], step=0.5)[0]
    for key, pressure in alone.pressure.items():
        # LAW: the same situation gives the same trace in whatever company.
        assert_allclose(pressure, recordings[0].pressure[key], rtol=1e-5)


def test_export_in_other_units_and_columns(machine: Machine, recordings: list[Simulated]) -> None:
    layout = Layout("psi(g)", "degF", ";", ",", names={"crank_angle [deg]": "Deg"})
    lines = export_text(recordings[0], layout).splitlines()
    assert "# machine: Tarnwick N-3" in lines
    header = next(number for number, line in enumerate(lines) if not line.startswith("#"))
    assert lines[header].split(";")[0] == "Deg"
    cells = lines[header + 1].replace(",", ".").split(";")
    bar = recordings[0].pressure["C1", "head"][0] / 1e5
    # LAW: psi(g) is absolute less the barometer, 1 bar = 14.5037738 psi.
    assert_allclose(
        float(cells[1]), (bar - machine.barometric_pressure / 1e5) * 14.5037738, atol=2e-3
    )


def test_situation_must_name_the_cylinders(machine: Machine) -> None:
    lonely = situation()
    lonely = replace(lonely, cylinders={"C1": lonely.cylinders["C1"]})
    with pytest.raises(InputError, match="C1, C2"):
        simulate_recordings(machine, [lonely])


def test_files_are_written_whole(tmp_path: Path, recordings: list[Simulated]) -> None:
    write_simulated(recordings[0], tmp_path / "a" / "x.csv", tmp_path / "b" / "x.json")
    truth = json.loads((tmp_path / "b" / "x.json").read_text())
    assert truth["machine"] == "Tarnwick N-3"
    assert not list(tmp_path.rglob("*.part"))


def test_example_plant_is_what_its_script_makes(tmp_path: Path) -> None:
    # TRUTH: the committed files; the smallest machine stands for all.
    folder = tmp_path / "A-4"
    folder.mkdir()
    (folder / "machine.toml").write_text((EXAMPLES / "A-4" / "machine.toml").read_text())
    made = make_plant(tmp_path, ["A-4"])
    assert len(made) == 2
    for path in made:
        committed = EXAMPLES / path.relative_to(tmp_path)
        ours, theirs = path.read_text().splitlines(), committed.read_text().splitlines()
        first = next(number for number, line in enumerate(ours) if line.startswith("time [s]"))
        assert ours[first] == theirs[first]
        assert_allclose(
            np.array([line.split(",") for line in ours[first + 1 :]], dtype=float),
            np.array([line.split(",") for line in theirs[first + 1 :]], dtype=float),
            rtol=1e-3,
        )
