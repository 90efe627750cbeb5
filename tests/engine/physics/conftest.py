"""A whole treatment, and the same with some columns changed."""

import pytest

from engine.batch import from_values

WHOLE = {
    "generator": "vibrating_mesh",
    "site": "inspiratory_limb",
    "distance_from_wye_cm": 15.0,
    "circuit": "dual_limb",
    "synchrony": "continuous",
    "humidification": "heated_humidifier",
    "heated_humidifier_on": True,
    "hme_state": "none",
    "airway": "endotracheal",
    "tube_id_mm": 8.0,
    "mode": "vcv",
    "spontaneous_breaths": False,
    "mmad_um": 4.5,
    "gsd": 2.0,
    "generator_gas_lpm": 6.0,
    "bias_flow_lpm": 2.0,
    "tidal_volume_ml": 480.0,
    "respiratory_rate_bpm": 16.0,
    "inspiratory_time_s": 1.0,
    "expiratory_filter": "present",
    "filter_kind": "pleated",
}


@pytest.fixture(scope="session")
def changed():
    """``changed(bias_flow_lpm=[0, 2])``: one treatment for each value listed."""

    def made(**columns):
        return from_values(**(WHOLE | columns))

    return made
