"""The circuit drawing says what was logged, to scale, and hatches what was not."""

import re
from xml.etree import ElementTree

import numpy as np
import pytest

from engine.batch import from_values
from engine.columns import FRACTIONS, words_of
from engine.physics.balance import alternatives, balance
from engine.policy import load_policy
from reviewapp.drawings.circuit import SCALE, circuit_svg, drawing_of
from reviewapp.drawings.svg import DARK, LIGHT

SETUP = {
    "generator": "vibrating_mesh",
    "synchrony": "continuous",
    "circuit": "dual_limb",
    "site": "wye",
    "humidification": "heated_humidifier",
    "heated_humidifier_on": True,
    "airway": "endotracheal",
    "tube_id_mm": 8.0,
    "mode": "vcv",
    "bias_flow_lpm": 2.0,
    "tidal_volume_ml": 450.0,
    "respiratory_rate_bpm": 16.0,
    "inspiratory_time_s": 1.0,
    "expiratory_filter": "absent",
}


def drawn(**changed):
    setup = {**SETUP, **changed}
    rows = from_values(**setup)
    found = {**balance(rows), **alternatives(rows)}
    row = {**setup, **{name: values[0] for name, values in found.items()}}
    best = int(row["best_site"])
    row["best_site"] = words_of("site")[best] if best >= 0 else None
    return drawing_of(row, load_policy())


def svg(**changed):
    return circuit_svg(drawn(**changed), LIGHT)


CASES = {
    "good": {"site": "humidifier_inlet", "expiratory_filter": "present"},
    "poor": {},
    "HME in line": {
        "site": "inspiratory_limb",
        "humidification": "hmef",
        "heated_humidifier_on": None,
        "hme_state": "in_line",
    },
    "filter unknown": {"expiratory_filter": None},
    "single limb": {"circuit": "single_limb", "site": "airway_side"},
    "nothing logged": dict.fromkeys(SETUP),
}


@pytest.mark.parametrize("colours", [LIGHT, DARK], ids=["light", "dark"])
@pytest.mark.parametrize("name", CASES)
def test_the_drawing_is_well_formed_and_says_itself_in_words(name, colours):
    text = circuit_svg(drawn(**CASES[name]), colours)
    root = ElementTree.fromstring(text)
    assert root.get("role") == "img"
    assert root.get("aria-label").startswith("Circuit: ")
    assert "nan" not in text


def test_parts_take_the_keyboard_and_say_their_figure():
    labels = re.findall(r'tabindex="0" role="img" aria-label="([^"]+)"', svg())
    assert any(label.startswith("Expiratory flow sensor: ") for label in labels)
    assert any(label.startswith("Logged: vibrating mesh at the Y") for label in labels)
    assert any("to scale" not in label and "%" in label for label in labels)


def test_the_ribbon_at_the_generator_is_the_emitted_share_to_scale():
    one = drawn(site="humidifier_inlet", expiratory_filter="present")
    first = re.search(r'<polygon points="([^"]+)"', circuit_svg(one, LIGHT)).group(1)
    points = [tuple(map(float, p.split(","))) for p in first.split()]
    width = abs(points[0][1] - points[3][1])
    emitted = 1 - one.frac("generator_residual")
    assert width == pytest.approx(emitted * SCALE, abs=0.15)


def test_what_is_drawn_adds_to_the_whole_dose():
    one = drawn(site="humidifier_inlet", expiratory_filter="present")
    assert one.frac(*FRACTIONS) == pytest.approx(1.0, abs=1e-9)


def test_an_unknown_filter_is_hatched_and_not_called_absent():
    text = svg(expiratory_filter=None)
    assert "filter not logged" in text
    assert "no filter<" not in text


def test_the_table_and_the_estimate_are_outlined_where_they_differ():
    text = svg()
    assert 'stroke-dasharray="4 3"' in text
    assert "table" in text


def test_no_estimate_says_why_in_words():
    text = svg(tidal_volume_ml=None)
    assert "No estimate: the tidal volume is not logged" in text
    assert np.all([f"{name}" not in text for name in ("nan", "None")])
