"""How fast the balance runs: rows a second, and against one row at a time.

    python tests/bench/physics_speed.py [rows]

Prints; asserts nothing, since no time is promised on a shared machine.
"""

from __future__ import annotations

import resource
import sys
import time
from collections.abc import Callable

import numpy as np

from engine.batch import from_values, one_row
from engine.columns import words_of
from engine.physics.balance import alternatives, balance

SINGLE_ROWS = 200


def department(n: int, seed: int = 1) -> dict[str, np.ndarray]:
    """n invented treatments of a mixed department, a fifth without a bias flow."""
    rng = np.random.default_rng(seed)
    rows = {name: np.repeat(values, n) for name, values in from_values().items()}

    def words(column: str, **shares: float) -> None:
        names = list(shares)
        chosen = rng.choice(len(names), n, p=np.array(list(shares.values())))
        codes = [-1 if w == "unknown" else words_of(column).index(w) for w in names]
        rows[column] = np.array(codes, np.int8)[chosen]

    words(
        "generator",
        jet=0.3,
        vibrating_mesh=0.45,
        pmdi_spacer=0.15,
        ultrasonic=0.05,
        breath_enhanced_jet=0.05,
    )
    words(
        "site",
        ventilator_outlet=0.1,
        humidifier_inlet=0.2,
        humidifier_outlet=0.1,
        inspiratory_limb=0.3,
        wye=0.15,
        airway_side=0.15,
    )
    words("circuit", dual_limb=0.93, single_limb=0.07)
    words("humidification", heated_humidifier=0.65, hme=0.1, hmef=0.2, unknown=0.05)
    words("hme_state", none=0.65, in_line=0.1, removed=0.15, unknown=0.1)
    words("synchrony", continuous=0.8, inspiration_synchronised=0.1, unknown=0.1)
    words("airway", endotracheal=0.8, tracheostomy=0.2)
    words("expiratory_filter", present=0.6, absent=0.28, unknown=0.12)
    rows["heated_humidifier_on"] = rng.choice(
        np.array([1, 0, -1], np.int8), n, p=[0.8, 0.1, 0.1]
    )
    bias = rng.choice([0.0, 0.5, 2.0, 3.0, 5.0], n)
    rows["bias_flow_lpm"] = np.where(rng.random(n) < 0.2, np.nan, bias)
    rows["tidal_volume_ml"] = rng.uniform(250, 700, n)
    rows["respiratory_rate_bpm"] = rng.uniform(10, 26, n)
    rows["inspiratory_time_s"] = rng.uniform(0.7, 1.4, n)
    rows["tube_id_mm"] = rng.choice([7.0, 7.5, 8.0, 8.5], n)
    rows["peak_inspiratory_flow_lpm"] = np.where(
        rng.random(n) < 0.5, rng.uniform(30, 70, n), np.nan
    )
    rows["inspiratory_pause_s"] = np.where(rng.random(n) < 0.25, 0.2, np.nan)
    return rows


def timed(work: Callable[[], object]) -> tuple[float, float]:
    """Wall and processor seconds of one call."""
    wall, processor = time.perf_counter(), time.process_time()
    work()
    return time.perf_counter() - wall, time.process_time() - processor


def main(n: int) -> None:
    rows = department(n)
    balance(one_row(rows, 0))
    total = 0.0
    for name, work in (("balance", balance), ("alternatives", alternatives)):
        wall, processor = timed(lambda work=work: work(rows))
        total += wall
        print(
            f"{name}: {n / wall:,.0f} rows/s ({wall:.2f} s, {processor:.2f} s of "
            f"processor)"
        )
    print(f"both: {n / total:,.0f} rows/s, {1e6 * total / n:.1f} s a million")
    single = [one_row(rows, i) for i in range(SINGLE_ROWS)]
    wall, _ = timed(lambda: [(balance(row), alternatives(row)) for row in single])
    print(f"one row at a time: {SINGLE_ROWS / wall:,.0f} rows/s", end="; ")
    print(f"in batches {n / total / (SINGLE_ROWS / wall):,.0f} times as fast")
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(f"largest memory {peak:,.0f} MB")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 100_000)
