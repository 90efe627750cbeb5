"""Treatments for the month, topic and scenario tests, built from one plain setup."""

import pandas as pd

PLAIN = {
    "status": "given",
    "unit_token": "Alder",
    "ventilator_token": "V1",
    "drug": "salbutamol",
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
    "mode_text": "VC",
    "spontaneous_breaths": False,
    "bias_flow_lpm": 2.0,
    "tidal_volume_ml": 450.0,
    "respiratory_rate_bpm": 16.0,
    "inspiratory_time_s": 1.0,
    "peak_inspiratory_flow_lpm": 50.0,
    "peep_cmh2o": 8.0,
    "expiratory_filter": "present",
}


def treatments(month, count, first=0, patients=None, days=27, **changed):
    """``count`` treatments spread over a month; ``patients`` shares them out in turn.

    A changed value may be a list, taken in turn.
    """
    begin = pd.Timestamp(f"{month}-01 06:00")
    step = pd.Timedelta(days=days) / max(count, 1)
    made = []
    for i in range(count):
        start = begin + i * step
        row = {
            **PLAIN,
            "treatment_id": f"{month}-T{first + i:04d}",
            "started_at": start,
            "ended_at": start + pd.Timedelta(minutes=12),
            "patient_token": f"P{month}-{i % (patients or count)}",
        }
        for name, value in changed.items():
            row[name] = value[i % len(value)] if isinstance(value, list) else value
        made.append(row)
    return made
