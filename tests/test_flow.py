import csv
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from pvcard import flow

ROWS = {
    row["id"]: row
    for row in csv.DictReader(
        (Path(__file__).parent / "data/check_values_cycle.csv").read_text().splitlines()
    )
}


def expected(name: str) -> float:
    return float(ROWS[name]["expected"])


def test_choked_nozzle_flow_of_a_textbook() -> None:
    # SOURCE: Moran and Shapiro, Fundamentals of Engineering Thermodynamics, example 9.14(a)
    # [LEK-01].
    density = 1e6 / (8314.5 / 28.97 * 360)
    found = flow.nozzle_flow(1e-3, 1e6, density, 5e5, 1.4)
    assert_allclose(found, expected("LEK-01"), atol=0.002)


def test_subcritical_nozzle_flow_of_a_textbook() -> None:
    # SOURCE: Moran and Shapiro, example 9.14(b), value recomputed [LEK-02].
    density = 1e6 / (8314.5 / 28.97 * 360)
    found = flow.nozzle_flow(1e-3, 1e6, density, 7.84e5, 1.4)
    assert_allclose(found, expected("LEK-02"), atol=0.002)


def test_leak_through_one_square_millimetre() -> None:
    # LAW: choked nozzle of an ideal gas, computed from first principles [LEK-03].
    found = flow.nozzle_flow(1e-6, 30e5, 30e5 / (518.3 * 390), 10e5, 1.305)
    assert_allclose(found * 1e3, expected("LEK-03"), rtol=1e-5)


def test_labyrinth_flow() -> None:
    # SOURCE: H. M. Martin, Engineering 1908, formula evaluated, from memory [LEK-04].
    found = flow.labyrinth_flow(20e-6, 5, 30e5, 30e5 / (518.3 * 390), 10e5)
    assert_allclose(found * 1e3, expected("LEK-04"), rtol=1e-5)


def test_valve_drop_and_critical_ratios() -> None:
    # LAW: orifice equation and critical ratio, computed from first principles [VLV-03..05].
    drop = flow.incompressible_pressure_drop(0.25, 8.0, 30e-4)
    assert_allclose(drop / 1e3, expected("VLV-03"), rtol=1e-6)
    assert_allclose(flow.critical_ratio(1.3), expected("VLV-04"), atol=1e-6)
    assert_allclose(flow.critical_ratio(1.4), expected("VLV-05"), atol=1e-6)


def test_expansibility_of_an_orifice_plate() -> None:
    # SOURCE: ISO 5167-2:2003, formula from memory [VLV-06].
    assert_allclose(flow.orifice_expansibility(0.6, 0.9, 1.3), expected("VLV-06"), atol=1e-6)


def test_nozzle_tends_to_the_incompressible_law() -> None:
    # LIMIT: m = A sqrt(2 rho dp) for small drops.
    found = flow.nozzle_flow(1e-4, 10e5, 8.0, 10e5 - 10, 1.3)
    assert_allclose(found, 1e-4 * np.sqrt(2 * 8.0 * 10), rtol=2e-5)


def test_no_flow_against_the_pressure() -> None:
    assert flow.nozzle_flow(1e-4, 1e5, 1.0, 2e5, 1.4) == 0  # LAW: no difference, no flow
    assert flow.labyrinth_flow(1e-4, 4, 1e5, 1.0, 2e5) == 0  # LAW: as above


@pytest.mark.parametrize("exponent", [1.05, 1.2, 1.4, 1.67, 1.8])
def test_series_replaces_the_powers(exponent: float) -> None:
    drop = np.linspace(1e-9, 1 - float(flow.critical_ratio(exponent)), 500)
    series = flow.nozzle_series(np.array([exponent]))
    found = np.sqrt(drop * flow.series_value(drop[:, None], series)[:, 0])
    # LAW: the law itself, with its powers.
    assert_allclose(found, flow.nozzle_function(1 - drop, exponent), rtol=2e-6, atol=1e-12)


def test_area_undoes_flow() -> None:
    area = np.array([1e-6, 5e-6])
    mass = flow.nozzle_flow(area, 30e5, 15.0, np.array([10e5, 25e5]), 1.3)
    # LAW: the inverse of the flow law.
    found = flow.nozzle_area(mass, 30e5, 15.0, np.array([10e5, 25e5]), 1.3)
    assert_allclose(found, area, rtol=1e-12)
    assert np.isnan(flow.nozzle_area(1.0, 1e5, 1.0, 2e5, 1.4))


def test_slot_is_half_the_difference_of_squares() -> None:
    # LAW: laminar flow between plates, w s^3 / (12 mu L) times mean density times pressure drop.
    conductance = flow.slot_conductance(0.5, 20e-6, 0.01, 1.2e-5)
    by_hand = 0.5 * 20e-6**3 / (12 * 1.2e-5 * 0.01)
    mean_density = 20.0 * 1.5e6 / 2e6
    assert_allclose(
        flow.slot_flow(conductance, 2e6, 20.0, 1e6), by_hand * mean_density * 1e6, rtol=1e-12
    )
