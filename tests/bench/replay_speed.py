"""How fast a whole log is replayed: all rules, the balance, every other site.

Run   python tests/bench/replay_speed.py [treatments] [folder]
Prints rows a second and the largest memory of the process. Nothing here fails on time.
"""

from __future__ import annotations

import resource
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import pandas as pd

from engine import load_policy, open_log
from engine.log import write_log
from engine.replay import replay_to

UNITS, VENTILATORS, PATIENTS = 3, 200, 5000


def department(count: int) -> dict[str, pd.DataFrame]:
    """Treatments of every generator, site and state of record, times of one year."""
    rng = np.random.default_rng(0)

    def one_of(*words: str | None) -> np.ndarray:
        return rng.choice(np.array(words, dtype=object), count)

    seconds = np.sort(rng.integers(0, 365 * 86400, count))
    started = pd.Timestamp("2026-01-01") + pd.to_timedelta(seconds, unit="s")
    ventilator = rng.integers(VENTILATORS, size=count)
    return {
        "treatment": pd.DataFrame(
            {
                "treatment_id": [f"t{n}" for n in range(count)],
                "status": "given",
                "started_at": started,
                "ended_at": started + pd.to_timedelta(900, unit="s"),
                "unit_token": np.char.add("u", (ventilator % UNITS).astype(str)),
                "ventilator_token": np.char.add("v", ventilator.astype(str)),
                "patient_token": np.char.add(
                    "p", rng.integers(PATIENTS, size=count).astype(str)
                ),
                "drug_class": one_of("bronchodilator", "steroid", "anti_infective"),
                "nominal_dose_mg": 2.5,
                "fill_volume_ml": 3.0,
                "generator": one_of(
                    "jet", "vibrating_mesh", "ultrasonic", "pmdi_spacer", None
                ),
                "synchrony": one_of("continuous", "inspiration_synchronised"),
                "gas_source": "none",
                "circuit": "dual_limb",
                "site": one_of(
                    "ventilator_outlet", "humidifier_inlet", "inspiratory_limb", "wye"
                ),
                "humidification": one_of("heated_humidifier", "hme", None),
                "heated_humidifier_on": True,
                "airway": "endotracheal",
                "tube_id_mm": 8.0,
                "mode": one_of("vcv", "pcv", "psv"),
                "bias_flow_lpm": rng.choice([0.0, 2.0, 5.0, np.nan], count),
                "tidal_volume_ml": rng.integers(300, 650, count).astype(float),
                "respiratory_rate_bpm": 16.0,
                "inspiratory_time_s": 1.0,
                "expiratory_filter": one_of("present", "absent", None),
            }
        )
    }


def main(count: int = 100_000, folder: str | None = None) -> None:
    with tempfile.TemporaryDirectory(dir=folder) as scratch:
        path = Path(scratch) / "log.duckdb"
        write_log(
            path,
            department(count),
            site_zone="Etc/UTC",
            created_at=pd.Timestamp("2027-01-01"),
            sources="made for this benchmark",
        )
        begun = time.perf_counter()
        log = open_log(path)
        opened = time.perf_counter()
        replay_to(log, load_policy(), Path(scratch) / "out")
        done = time.perf_counter()
        log.close()
    peak_mb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(
        f"{count:,} treatments: opened in {opened - begun:.1f} s, replayed in "
        f"{done - opened:.1f} s ({count / (done - opened):,.0f} a second), "
        f"largest memory {peak_mb:,.0f} MB (making the log included)"
    )


if __name__ == "__main__":
    main(*(int(a) if a.isdigit() else a for a in sys.argv[1:3]))  # type: ignore[arg-type]
