import csv
from pathlib import Path

import numpy as np
from numpy.testing import assert_allclose

from pvcard import heat

ROWS = {
    row["id"]: float(row["expected"])
    for row in csv.DictReader(
        (Path(__file__).parent / "data/check_values_cycle.csv").read_text().splitlines()
    )
}


def test_annand() -> None:
    # SOURCE: Annand, Proc. IMechE 1963, formula evaluated, from memory [HT-01].
    assert_allclose(heat.annand_nusselt(5e4, 0.7), ROWS["HT-01"], rtol=1e-5)


def test_adair() -> None:
    # SOURCE: Adair, Qvale and Pearson, Purdue 1972, formula evaluated, from memory [HT-02].
    assert_allclose(heat.adair_nusselt(5e4, 0.7), ROWS["HT-02"], rtol=1e-5)


def test_woschni() -> None:
    # SOURCE: Woschni, SAE 670931, as given by Heywood, formula evaluated, from memory [HT-03].
    found = heat.woschni_coefficient(0.3, 2e6, 350.0, 2.28 * 4)
    assert_allclose(found, ROWS["HT-03"], rtol=1e-4)


def test_swirl_is_twice_as_fast_around_the_dead_centre() -> None:
    # SOURCE: Adair, Qvale and Pearson, Purdue 1972, from memory: factor 2 in that half turn.
    near, far = heat.adair_swirl_speed(np.array([10.0, 190.0]), 10.0)
    assert_allclose(near, 2 * far)
    # LIMIT: 1.04 - 1 times the angular speed a quarter turn after the far dead centre.
    assert_allclose(heat.adair_swirl_speed(np.array([270.0 - 1e-6]), 10.0), 20 * np.pi * 0.04)
