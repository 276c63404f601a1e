"""Speed of pvcard on one core: ``python tests/benchmark/run.py --json`` prints one JSON object.

``--stream 1000000`` also streams that many cards and tells the greatest memory used.
"""

from __future__ import annotations

import argparse
import json
import os
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

for _name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(_name, "1")
ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT))

import numpy as np  # noqa: E402  (one core must be asked for before NumPy is loaded)

from pvcard.card.measure import CHUNK, measure  # noqa: E402
from pvcard.card_set import CardSet  # noqa: E402
from pvcard.types import Floats  # noqa: E402
from tests.benchmark import naive_card  # noqa: E402
from tests.benchmark.cards import SAMPLES, invented_cards  # noqa: E402
from tests.cards import uncertainties  # noqa: E402

BATCH, NAIVE, REPEATS = 4096, 300, 3


def best(work: Callable[[], None], repeats: int = REPEATS) -> float:
    """Least time of several runs. [s]."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return min(times)


def measure_all(cards: CardSet, unsure: Floats, *, with_uncertainty: bool) -> None:
    """All first-tier quantities, and their uncertainties where asked for."""
    for first in range(0, len(cards.pressure), CHUNK):
        part = slice(first, first + CHUNK)
        result = measure(
            cards.part(first, first + CHUNK), unsure[part], with_uncertainty=with_uncertainty
        )
        if with_uncertainty:
            for estimate in result.columns.values():
                estimate.uncertainty(unsure[part])


def naive_all(cards: CardSet, rows: list[int]) -> None:
    """The plain script, card by card."""
    grid = cards.crank_angle
    for row in rows:
        naive_card.analyse_card(
            grid,
            cards.pressure[row],
            float(cards.suction_pressure[row]),
            float(cards.discharge_pressure[row]),
            1.29,
            float(cards.bore[row]),
            float(cards.stroke[row]),
            float(cards.stroke[row] / 2 / cards.rod_ratio[row]),
            float(cards.clearance[row]),
            float(cards.speed[row] * 60),
        )


def first_tier() -> dict[str, float]:
    """Card ends per second, without and with uncertainties, and against the plain script."""
    cards = invented_cards(BATCH)
    unsure = uncertainties(cards)
    heads = np.flatnonzero(cards.rod_sign > 0)[:NAIVE].tolist()  # the plain script knows no others
    plain_time = best(lambda: naive_all(cards, heads), 2) / NAIVE
    bare = best(lambda: measure_all(cards, unsure, with_uncertainty=False)) / BATCH
    full = best(lambda: measure_all(cards, unsure, with_uncertainty=True)) / BATCH
    return {
        "first_tier_card_ends_per_s": 1 / bare,
        "first_tier_with_u_per_s": 1 / full,
        "first_tier_over_naive": plain_time / bare,
        "naive_cards_per_s": 1 / plain_time,
    }


def whole_process(words: list[str]) -> float:
    """Least wall time of a command as a process of its own. [s]."""

    def run() -> None:
        subprocess.run([sys.executable, "-m", "pvcard", *words], check=True, capture_output=True)

    run()
    return best(run, 3)


def commands() -> dict[str, float]:
    """Start-up of the help and a report of one export with eight ends."""
    result = {"help_s": whole_process(["--help"])}
    export = sorted((ROOT / "example_data" / "F-2" / "exports").glob("*.csv"))[0]
    with tempfile.TemporaryDirectory() as folder:
        words = ["report", str(export), "--machine", str(ROOT / "example_data/F-2/machine.toml")]
        result["report_8_ends_s"] = whole_process([*words, "--output", f"{folder}/report"])
    return result


def stream(count: int) -> dict[str, float]:
    """Greatest memory while `count` cards stream through in batches. [MB]."""
    start = time.perf_counter()
    done = 0
    while done < count:
        cards = invented_cards(2048, seed=done)
        measure_all(cards, uncertainties(cards), with_uncertainty=True)
        done += 2048
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    return {
        "stream_cards": done,
        "stream_peak_MB": peak,
        "stream_s": time.perf_counter() - start,
    }


def main() -> None:
    """Measure and print."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--json", action="store_true", help="one JSON object instead of lines")
    parser.add_argument("--stream", type=int, default=0, help="stream this many cards as well")
    options = parser.parse_args()
    result: dict[str, float] = {"samples": SAMPLES, **first_tier(), **commands()}
    if options.stream:
        result.update(stream(options.stream))
    if options.json:
        print(json.dumps(result))
    else:
        for name, value in result.items():
            print(f"{name:32s} {value:.4g}")


if __name__ == "__main__":
    main()
