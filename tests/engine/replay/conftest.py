"""Small logs written for one question each."""

import pandas as pd
import pytest

from engine.log import open_log, write_log

WRITTEN = pd.Timestamp("2026-11-01")
STARTED = pd.Timestamp("2026-07-01 06:30")

GOOD_SETUP = {
    "status": "given",
    "unit_token": "north",
    "patient_token": "p1",
    "ventilator_token": "v1",
    "drug": "albuterol",
    "drug_class": "bronchodilator",
    "nominal_dose_mg": 2.5,
    "fill_volume_ml": 3.0,
    "generator": "vibrating_mesh",
    "synchrony": "continuous",
    "gas_source": "none",
    "circuit": "dual_limb",
    "site": "humidifier_inlet",
    "humidification": "heated_humidifier",
    "heated_humidifier_on": True,
    "hme_state": "none",
    "airway": "endotracheal",
    "tube_id_mm": 8.0,
    "mode": "vcv",
    "bias_flow_lpm": 2.0,
    "tidal_volume_ml": 450.0,
    "respiratory_rate_bpm": 16.0,
    "inspiratory_time_s": 1.0,
    "peak_inspiratory_flow_lpm": 50.0,
    "peep_cmh2o": 5.0,
    "expiratory_filter": "present",
}


def treatments(count=1, every_h=4.0, **changed):
    """``count`` treatments, one each ``every_h`` hours; lists give one value each."""
    rows = []
    for n in range(count):
        start = STARTED + pd.Timedelta(hours=every_h * n)
        row = {
            **GOOD_SETUP,
            "treatment_id": f"t{n}",
            "started_at": start,
            "ended_at": start + pd.Timedelta(minutes=10),
        }
        for name, value in changed.items():
            row[name] = value[n] if isinstance(value, list) else value
        rows.append(row)
    return rows


@pytest.fixture
def logged(tmp_path):
    """Writes tables of rows as a log and opens it."""
    opened = []

    def write(site_zone="Europe/Dublin", **tables):
        path = tmp_path / f"log{len(opened)}.duckdb"
        frames = {name: pd.DataFrame(rows) for name, rows in tables.items() if rows}
        write_log(path, frames, site_zone=site_zone, created_at=WRITTEN, sources="test")
        opened.append(open_log(path))
        return opened[-1]

    yield write
    for log in opened:
        log.close()
