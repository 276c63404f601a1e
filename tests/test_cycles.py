"""Complete turns: whatever the layout of the angle, the same cards on the same grid."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from pvcard.errors import ExportError
from pvcard.ingest import Channel, Recording, Trace
from pvcard.repair import Turns, turns
from pvcard.repair.resampling import fill_gaps, local_cubic, resample_cards, round_count
from pvcard.types import Floats

STEP = 0.5
GRID = np.arange(0.0, 360.0, STEP)
HEAD = ("C1", "head", "cylinder")
CRANK = ("C1", "crank", "cylinder")


def pressure(angle: Floats, turn: Floats | float = 0.0) -> Floats:
    """A smooth closed trace in Pa that differs a little from turn to turn."""
    theta = np.radians(angle)
    return 20e5 + 9e5 * np.cos(theta - 0.4) + 3e5 * np.sin(3 * theta) + 1e3 * turn


def recording(
    angle: Floats | None,
    *channels: Floats,
    cycle: Floats | None = None,
    speed: float | None = 10.0,
    **others: Any,
) -> Recording:
    """A recording of one cylinder with a head end, and a crank end if there are two channels."""
    made = tuple(
        Channel("C1", end, "cylinder", values, "Pa", "absolute")
        for end, values in zip(("head", "crank"), channels, strict=False)
    )
    fields: dict[str, Any] = {
        "source": "export.csv",
        "machine_name": None,
        "time": None,
        "speed": speed,
        "load_steps": {},
        "barometric_pressure": 1e5,
        "recording_id": None,
        "crank_angle": angle,
        "seconds": None,
        "once_per_turn": None,
        "cycle": cycle,
        "channels": made,
        "lines": {},
    }
    return Recording(**(fields | others))


def check(result: Turns, count: int) -> None:
    """The cards are those of `pressure`, turn by turn, none of them interpolated."""
    assert_allclose(result.crank_angle, GRID, rtol=0, atol=1e-9)
    assert result.pressures[HEAD].shape == (count, len(GRID))
    expected = pressure(GRID, np.arange(count)[:, None])
    assert_allclose(result.pressures[HEAD], expected, rtol=1e-10)
    assert not result.interpolated


ONE = GRID
THREE = np.tile(GRID, 3)
NUMBER = np.repeat([0.0, 1.0, 2.0], len(GRID))


def layout(name: str) -> tuple[Floats, Floats, Floats | None, int]:
    """Angle as exported, number of the turn, cycle column and number of complete turns."""
    two = np.arange(0.0, 720.0, STEP)
    repeated = np.arange(0.0, 360.0 + STEP, STEP)
    later = np.tile(np.roll(GRID, -274), 3)
    match name:
        case "0 to 360":
            return THREE, NUMBER, None, 3
        case "0 to 360, cycles":
            return THREE, NUMBER, NUMBER + 1, 3
        case "one turn":
            return ONE, 0 * ONE, None, 1
        case "one turn, last sample repeated":
            return repeated, 0 * repeated, None, 1
        case "last samples repeated":
            return np.tile(repeated, 3), np.repeat([0.0, 1.0, 2.0], len(repeated)), None, 3
        case "last samples repeated, cycles":
            number = np.repeat([0.0, 1.0, 2.0], len(repeated))
            return np.tile(repeated, 3), number, number + 5, 3
        case "-180 to 180":
            return THREE - 180.0, NUMBER, None, 3
        case "-180 to 180, cycles":
            return THREE - 180.0, NUMBER, NUMBER, 3
        case "-180 to 180 inclusive":
            return repeated - 180.0, 0 * repeated, None, 1
        case "0 to 720":
            return np.tile(two, 2), np.repeat([0.0, 1.0, 2.0, 3.0], len(GRID)), None, 4
        case "0 to 720, one cycle":
            return two, np.floor(two / 360.0), 0 * two + 1, 2
        case "0 to 720 inclusive, cycles":
            both = np.append(two, 720.0)
            number = np.append(np.floor(two / 360.0), 1.0)
            angle = np.tile(both, 2)
            return angle, np.concatenate((number, number + 2)), np.repeat([1.0, 2.0], 1441), 4
        case "0 to 360 twice in one cycle":
            return np.tile(GRID, 2), NUMBER[:1440], 0 * NUMBER[:1440], 2
        case "angle goes on":
            return THREE + 360.0 * NUMBER, NUMBER, None, 3
        case "starts at 137":
            return later, NUMBER, None, 3
        case "starts at 137, one cycle":
            return later[:720], NUMBER[:720], 0 * NUMBER[:720], 1
        case "one cycle after another at 137":
            return later, NUMBER, NUMBER, 3
        case "falling":
            return THREE[::-1], NUMBER[::-1], None, 3
        case "starts negative":
            return THREE - 1e-9, NUMBER, None, 3
    raise AssertionError(name)


LAYOUTS = [
    "0 to 360",
    "0 to 360, cycles",
    "one turn",
    "one turn, last sample repeated",
    "last samples repeated",
    "last samples repeated, cycles",
    "-180 to 180",
    "-180 to 180, cycles",
    "-180 to 180 inclusive",
    "0 to 720",
    "0 to 720, one cycle",
    "0 to 720 inclusive, cycles",
    "0 to 360 twice in one cycle",
    "angle goes on",
    "starts at 137",
    "starts at 137, one cycle",
    "one cycle after another at 137",
    "falling",
    "starts negative",
]


@pytest.mark.parametrize("name", LAYOUTS)
def test_layouts_of_the_angle_give_the_same_cards(name: str) -> None:
    angle, number, cycle, count = layout(name)
    check(turns(recording(angle, pressure(angle, number), cycle=cycle)), count)


@pytest.mark.parametrize("name", LAYOUTS)
def test_order_of_rows_within_a_cycle_does_not_matter(name: str) -> None:
    angle, number, cycle, count = layout(name)
    if cycle is None or name == "0 to 360 twice in one cycle":
        cycle = number
        count = int(number.max()) + 1
    mixed = np.random.default_rng(1).permutation(len(angle))
    values = pressure(angle, number)
    check(turns(recording(angle[mixed], values[mixed], cycle=cycle[mixed])), count)


def test_rows_out_of_order_without_cycles() -> None:
    mixed = np.random.default_rng(2).permutation(len(GRID))
    result = turns(recording(GRID[mixed], pressure(GRID)[mixed]))
    check(result, 1)
    assert "not in order of angle" in result.notes[0]


def test_neighbours_that_changed_places_also_across_the_end_of_a_turn() -> None:
    order = np.arange(len(THREE))
    for first in (100, 719, 1500):
        order[[first, first + 1]] = order[[first + 1, first]]
    result = turns(recording(THREE[order], pressure(THREE, NUMBER)[order]))
    check(result, 3)


def test_the_recording_is_left_as_it_was() -> None:
    values = pressure(THREE, NUMBER)
    values[5] = np.nan
    before, angle = values.copy(), THREE.copy()
    turns(recording(angle, values, cycle=NUMBER))
    assert_array_equal(values, before)
    assert_array_equal(angle, THREE)


# --- what is left out -----------------------------------------------------------------------------


def test_a_partial_last_turn_is_left_out() -> None:
    part = slice(0, 2 * len(GRID) + 300)
    result = turns(recording(THREE[part], pressure(THREE, NUMBER)[part]))
    check(result, 2)
    assert result.notes == ("1 incomplete turn(s) of 3 were left out (300 rows)",)


def test_partial_turns_at_both_ends_of_numbered_cycles() -> None:
    part = slice(500, len(THREE) - 300)
    result = turns(recording(THREE[part], pressure(THREE, 0 * NUMBER)[part], cycle=NUMBER[part]))
    check(result, 1)
    # TRUTH: 720 - 500 rows of the first and 720 - 300 of the last cycle.
    assert result.notes == ("2 incomplete turn(s) of 3 were left out (640 rows)",)


def test_a_turn_parted_over_two_cycles_is_whole_by_its_angle() -> None:
    angle = np.roll(GRID, -274)
    result = turns(recording(angle, pressure(angle), cycle=np.where(angle >= 137.0, 1.0, 2.0)))
    check(result, 1)
    assert "the cycle column does not part whole turns" in result.notes[0]


def test_samples_at_the_same_angle_are_averaged() -> None:
    angle = np.insert(GRID, 10, GRID[10])
    values = np.insert(pressure(GRID), 10, pressure(GRID)[10] + 2e3)
    result = turns(recording(angle, values))
    # TRUTH: one of the two lies 2 kPa higher.
    assert result.pressures[HEAD][0, 10] == pytest.approx(pressure(GRID)[10] + 1e3)
    assert "1 sample(s) at an angle already there were averaged" in result.notes


def test_rows_without_an_angle_are_left_out() -> None:
    angle = np.append(GRID, np.nan)
    result = turns(recording(angle, np.append(pressure(GRID), 1.0)))
    check(result, 1)
    assert "1 row(s) without angle or cycle were left out" in result.notes


def test_no_complete_turn_is_an_error() -> None:
    with pytest.raises(ExportError) as caught:
        turns(recording(GRID[:600], pressure(GRID[:600]), cycle=np.ones(600)))
    assert str(caught.value) == (
        "export.csv: crank angle: no complete turn; found 600 samples from 0 to 299.5 deg; "
        "expected at least one turn of 12 or more samples, without a wide gap. "
        "Record at least one whole turn; two are needed with a pulse"
    )


def test_too_coarse_an_angle_is_an_error() -> None:
    angle = np.arange(0.0, 720.0, 45.0)
    with pytest.raises(ExportError, match="at least one turn of 12 or more samples"):
        turns(recording(angle, pressure(angle)))


# --- grids ----------------------------------------------------------------------------------------


def test_uneven_angles_shared_by_all_turns_stay_as_they_are() -> None:
    grid = np.concatenate((np.arange(0.0, 90.0, 0.25), np.arange(90.0, 360.0, 1.5)))
    angle, number = np.tile(grid, 2), np.repeat([0.0, 1.0], len(grid))
    values = pressure(angle, number)
    result = turns(recording(angle, values))
    assert not result.interpolated
    assert_allclose(result.crank_angle, grid, atol=1e-9)
    assert_array_equal(result.pressures[HEAD], values.reshape(2, -1))


def test_one_turn_on_other_angles_is_brought_onto_those_of_the_rest() -> None:
    angle = THREE.copy()
    angle[720:1440] += 0.2
    angle = np.delete(angle, 800)
    number = np.delete(NUMBER, 800)
    result = turns(recording(angle, pressure(angle), cycle=number))
    assert result.interpolated
    assert_allclose(result.crank_angle, GRID, atol=1e-9)
    for turn in (0, 2):
        assert_allclose(result.pressures[HEAD][turn], pressure(GRID), rtol=1e-12)
    # LIMIT: local cubics err by less than 0.0235 h**4 max|p''''|, h = 1 deg over the gap.
    bound = 0.0235 * np.radians(1.0) ** 4 * (9e5 + 81 * 3e5)
    assert np.abs(result.pressures[HEAD][1] - pressure(GRID)).max() < bound


def test_angles_that_differ_from_turn_to_turn_are_brought_onto_even_steps() -> None:
    rng = np.random.default_rng(3)
    continuous = np.arange(0.0, 1800.0, 0.5) + rng.uniform(-0.1, 0.1, 3600)
    continuous[0] = 0.0
    angle = np.mod(continuous, 360.0)
    result = turns(recording(angle, pressure(angle)))
    assert result.interpolated
    assert_allclose(result.crank_angle, GRID, atol=1e-9)
    bound = 0.0235 * np.radians(0.7) ** 4 * (9e5 + 81 * 3e5)  # LIMIT: steps of at most 0.7 deg
    assert np.abs(result.pressures[HEAD] - pressure(GRID)).max() < bound
    assert any("interpolated onto 720 even steps of 0.5 deg" in note for note in result.notes)


def test_files_on_different_angles_come_onto_the_finer_grid() -> None:
    coarse = np.arange(0.0, 360.0, 1.0)
    crank = Channel("C1", "crank", "cylinder", pressure(coarse), "Pa", "absolute", trace=1)
    head = Channel("C1", "head", "cylinder", pressure(THREE, NUMBER), "Pa", "absolute")
    result = turns(
        recording(THREE, channels=(head, crank), further_traces=(Trace(crank_angle=coarse),))
    )
    assert_allclose(result.crank_angle, GRID, atol=1e-9)
    assert result.pressures[HEAD].shape == result.pressures[CRANK].shape == (1, 720)
    bound = 0.0235 * np.radians(1.0) ** 4 * (9e5 + 81 * 3e5)  # LIMIT: steps of 1 deg
    assert np.abs(result.pressures[CRANK] - pressure(GRID)).max() < bound
    assert any("the first 1 of each are used" in note for note in result.notes)


def test_further_turns_of_the_same_channel_are_added() -> None:
    parts = [
        Channel("C1", "head", "cylinder", pressure(GRID, turn), "Pa", "absolute", trace=turn)
        for turn in (0, 1)
    ]
    check(
        turns(recording(GRID, channels=tuple(parts), further_traces=(Trace(crank_angle=GRID),))), 2
    )


# --- missing samples ------------------------------------------------------------------------------


def test_short_gaps_are_filled() -> None:
    values = pressure(THREE, 0 * NUMBER)
    values[[100, 101, 102, 719, 720, 2159]] = np.nan
    result = turns(recording(THREE, values, cycle=NUMBER))
    # LIMIT: local cubics over a gap of 2 deg; at the very end the last cubic is drawn on by a step.
    bound = np.radians(2.0) ** 4 * (9e5 + 81 * 3e5)
    assert np.abs(result.pressures[HEAD] - pressure(GRID)).max() < bound
    assert result.notes == (
        "C1 head end: 6 missing sample(s) in gaps of up to 3 were filled by interpolation",
    )


def test_a_turn_with_a_long_gap_is_left_out_for_all_channels() -> None:
    head, crank = pressure(THREE, NUMBER), pressure(THREE, NUMBER)
    crank[800:804] = np.nan
    result = turns(recording(THREE, head, crank))
    # TRUTH: the gap lies in the second of three turns.
    assert_allclose(result.pressures[HEAD], pressure(GRID, np.array([[0.0], [2.0]])), rtol=1e-14)
    assert result.pressures[CRANK].shape == (2, 720)
    assert np.isfinite(result.pressures[CRANK]).all()


def test_a_channel_that_is_blank_is_left_out() -> None:
    head, crank = pressure(THREE, NUMBER), pressure(THREE, NUMBER)
    crank[1::5] = crank[2::5] = crank[3::5] = crank[4::5] = np.nan
    result = turns(recording(THREE, head, crank))
    check(result, 3)
    assert list(result.pressures) == [HEAD]
    assert "C1 crank end is blank in most turns and was left out" in result.notes


def test_no_turn_without_a_gap_is_an_error() -> None:
    values = pressure(THREE)
    values[100::720] = values[101::720] = values[102::720] = values[103::720] = np.nan
    with pytest.raises(ExportError, match="more than 3 blank fields in a row in each of 3 turns"):
        turns(recording(THREE, values))


# --- time and pulse -------------------------------------------------------------------------------


def by_pulse(speed: Floats, step: float, offset: float = 0.3) -> tuple[Recording, Floats]:
    """A recording with a pulse: speeds of the turns, time step, and its true angle."""
    marks = offset * step + 0.01 + np.concatenate(([0.0], np.cumsum(1.0 / speed)))
    time = np.arange(0.0, marks[-1] + 0.01, step)
    number = np.arange(-1, len(speed) + 1)
    edges = np.concatenate(([marks[0] - 1 / speed[0]], marks))
    angle = 360.0 * np.interp(time, edges, number)
    angle[time > marks[-1]] = 360.0 * (
        len(speed) + (time[time > marks[-1]] - marks[-1]) * speed[-1]
    )
    pulse = np.where(np.mod(angle, 360.0) < 20.0, 5.0, 0.0)
    made = recording(None, pressure(angle), seconds=time, once_per_turn=pulse, speed=None)
    return made, angle


def test_angle_is_counted_between_pulses() -> None:
    made, _ = by_pulse(np.full(12, 10.013), 1 / 8765.0)
    result = turns(made)
    # TRUTH: 12 turns at 10.013 rev/s; the steps of 876 samples a turn come nearest to 900.
    assert result.pressures[HEAD].shape == (12, 900)
    assert result.speed == pytest.approx(10.013, rel=1e-5)
    (repair,) = result.repairs
    assert (repair["kind"], repair["unit"], repair["applied"]) == ("speed_from_pulse", "rpm", True)
    assert abs(repair["value"] - 600.78) < 3 * repair["u"]
    # LIMIT: an angle off by half a sample, 0.21 deg, would shift the trace by more than this.
    slope = np.abs(np.gradient(pressure(result.crank_angle), result.crank_angle)).max()
    error = np.abs(result.pressures[HEAD] - pressure(result.crank_angle)).max()
    assert error < 0.1 * slope
    assert result.angle_uncertainty_deg == pytest.approx(0.3, abs=0.02)


def test_marks_of_an_uneven_run_lie_within_half_a_sample() -> None:
    speed = 10.0 + np.array([0.0, 0.1, -0.1, 0.2, 0.0, -0.2, 0.1, 0.0])
    made, _ = by_pulse(speed, 1e-4)
    result = turns(made)
    assert result.turn_speed is not None
    # LIMIT: each mark is uncertain by half a sample, 0.05 ms in 100 ms.
    assert_allclose(result.turn_speed, speed, rtol=1.01e-3)
    slope = np.abs(np.gradient(pressure(result.crank_angle), result.crank_angle)).max()
    error = np.abs(result.pressures[HEAD] - pressure(result.crank_angle)).max()
    assert error < 0.19 * slope  # LIMIT: half a sample is 0.18 deg


def test_crank_angle_0_lies_between_the_last_low_and_the_first_high_sample() -> None:
    time = np.arange(40.0)
    pulse = np.zeros(40)
    pulse[[7, 8, 23, 24, 39]] = 1.0
    values = np.mod(time - 6.5, 16.0) * 22.5
    result = turns(recording(None, values, seconds=time, once_per_turn=pulse, speed=None))
    # TRUTH: rises between samples 6 and 7, 22 and 23, 38 and 39: 16 s a turn, 22.5 deg a sample.
    assert result.speed == pytest.approx(1 / 16)
    assert result.count == 2
    inner = (result.crank_angle > 60) & (result.crank_angle < 300)
    assert_allclose(result.pressures[HEAD][0, inner], result.crank_angle[inner], rtol=1e-12)


def test_a_missing_pulse_costs_its_turns() -> None:
    made, angle = by_pulse(np.full(10, 10.0), 1 / 7300.0)
    assert made.once_per_turn is not None
    pulse = np.where((angle > 1795) & (angle < 1825), 0.0, made.once_per_turn)
    result = turns(recording(None, pressure(angle), seconds=made.seconds, once_per_turn=pulse))
    # TRUTH: ten turns, of which the fifth and sixth run into each other.
    assert result.count == 8
    assert any("a pulse may be missing" in note for note in result.notes)
    assert result.speed == pytest.approx(10.0, rel=1e-4)


def test_a_pulse_that_bounces_counts_once() -> None:
    made, angle = by_pulse(np.full(10, 10.0), 1 / 7300.0)
    assert made.once_per_turn is not None
    pulse = made.once_per_turn.copy()
    inside = (np.mod(angle, 360.0) > 5) & (np.mod(angle, 360.0) < 6)
    pulse[inside] = 0.0
    result = turns(recording(None, pressure(angle), seconds=made.seconds, once_per_turn=pulse))
    assert result.count == 10  # TRUTH: ten turns
    assert any("too soon after another" in note for note in result.notes)


def test_a_named_speed_that_the_pulses_contradict_is_told() -> None:
    made, angle = by_pulse(np.full(6, 10.0), 1 / 7300.0)
    result = turns(
        recording(
            None,
            pressure(angle),
            seconds=made.seconds,
            once_per_turn=made.once_per_turn,
            speed=11.0,
        )
    )
    assert result.speed == pytest.approx(10.0, rel=1e-4)  # TRUTH
    assert any("the pulses are believed" in note for note in result.notes)


def test_rows_out_of_order_of_time_are_sorted() -> None:
    made, angle = by_pulse(np.full(4, 10.0), 1 / 7300.0)
    assert made.seconds is not None
    assert made.once_per_turn is not None
    mixed = np.random.default_rng(4).permutation(len(angle))
    again = recording(
        None,
        pressure(angle)[mixed],
        seconds=made.seconds[mixed],
        once_per_turn=made.once_per_turn[mixed],
    )
    assert_array_equal(turns(again).pressures[HEAD], turns(made).pressures[HEAD])


def test_one_pulse_is_not_enough() -> None:
    time = np.arange(100.0) * 1e-3
    pulse = (time > 0.05).astype(float)
    with pytest.raises(ExportError) as caught:
        turns(recording(None, pressure(time), seconds=time, once_per_turn=pulse))
    assert str(caught.value) == (
        "export.csv: once_per_turn: no complete turn between two pulses; found 1 rise(s) of the "
        "pulse in 0.099 s; expected at least two. Record at least two turns, and check the column "
        "of the pulse"
    )


def test_speed_from_angle_and_time() -> None:
    seconds = np.arange(len(THREE)) * STEP / 360.0 / 7.5
    result = turns(recording(THREE, pressure(THREE, NUMBER), speed=None, seconds=seconds))
    check(result, 3)
    assert result.speed == pytest.approx(7.5)  # TRUTH


# --- tools ----------------------------------------------------------------------------------------


def test_local_cubic_draws_cubics_exactly() -> None:
    rng = np.random.default_rng(5)
    nodes = np.cumsum(rng.uniform(0.2, 1.0, 40))
    targets = rng.uniform(nodes[0], nodes[-1], 100)
    cubic = np.polynomial.Polynomial([1.0, -2.0, 0.5, 0.1])
    values = np.array([cubic(nodes), -cubic(nodes)])
    # LAW: four points determine a cubic.
    expected = [cubic(targets), -cubic(targets)]
    assert_allclose(local_cubic(nodes, values, targets), expected, rtol=1e-9, atol=1e-9)
    assert_array_equal(local_cubic(nodes, values, nodes), values)


def test_error_of_resampling_falls_with_the_fourth_power_of_the_step() -> None:
    errors = []
    for step in (4.0, 2.0, 1.0):
        grid = np.arange(0.0, 360.0, step)
        middle = grid + step / 2
        errors.append(
            np.abs(resample_cards(grid, pressure(grid)[None], middle) - pressure(middle)).max()
        )
    # LAW: Abramowitz and Stegun 25.2.14: the remainder goes with the step to the fourth power.
    assert_allclose(np.array(errors[:-1]) / errors[1:], 16.0, rtol=0.03)


def test_fill_gaps_tells_long_ones_from_short_ones() -> None:
    values = np.sin(np.radians(GRID))
    values[[3, 4, 5, 50, 51, 52, 53]] = np.nan
    filled, lost, short = fill_gaps(GRID, values)
    assert short == 3  # TRUTH: samples 3 to 5
    assert_array_equal(np.flatnonzero(lost), [50, 51, 52, 53])
    assert np.isfinite(filled).all()


@pytest.mark.parametrize(("samples", "count"), [(863, 900), (700, 720), (355, 360), (20000, 7200)])
def test_round_count(samples: float, count: int) -> None:
    # TRUTH: nearest in proportion of the round numbers of samples.
    assert round_count(samples) == count
