"""The filter review on small logs whose truth is written into them."""

import numpy as np
import pandas as pd
import pytest

from engine.errors import UnknownId
from engine.reviews.filters import one_filter, review_filters

START = pd.Timestamp("2026-03-01 06:00")
NOISE = np.tile([0.03, -0.02, 0.01, -0.03, 0.02], 5)


def moment(hours):
    return START + pd.Timedelta(hours=float(hours))


def use(filter_id="F1", ventilator="V1", at=0, removed=None, kind="electrostatic"):
    return {
        "filter_id": filter_id,
        "ventilator_token": ventilator,
        "filter_kind": kind,
        "installed_at": moment(at),
        "removed_at": None if removed is None else moment(removed),
        "new_resistance_cmh2o_per_lps": 2.2,
    }


def readings(values, filter_id="F1", ventilator="V1", every=8.0, at=2.0, **changed):
    """Readings at 60 L/min, so that the drop is the resistance in cmH2O/(L/s)."""
    return [
        {
            "reading_id": f"{filter_id}-R{n:02d}",
            "filter_id": filter_id,
            "ventilator_token": ventilator,
            "read_at": moment(at + n * every),
            "flow_lpm": 60.0,
            "pressure_drop_cmh2o": float(value),
            "reading_source": "manometer",
            **changed,
        }
        for n, value in enumerate(values)
    ]


def treatments(hours, filter_id="F1", ventilator="V1", **changed):
    return [
        {
            "treatment_id": f"{filter_id}-T{n:03d}",
            "status": "given",
            "started_at": moment(at),
            "ended_at": moment(at + 0.3),
            "unit_token": "U1",
            "patient_token": "P1",
            "ventilator_token": ventilator,
            "drug": "salbutamol",
            "drug_class": "bronchodilator",
            "nominal_dose_mg": 2.5,
            "fill_volume_ml": 3.0,
            "generator": "vibrating_mesh",
            "circuit": "dual_limb",
            "site": "inspiratory_limb",
            "humidification": "heated_humidifier",
            "heated_humidifier_on": True,
            "mode": "vcv",
            "synchrony": "continuous",
            "distance_from_wye_cm": 40.0,
            "airway": "endotracheal",
            "tube_id_mm": 8.0,
            "bias_flow_lpm": 2.0,
            "tidal_volume_ml": 480.0,
            "respiratory_rate_bpm": 16.0,
            "inspiratory_time_s": 1.0,
            "expiratory_filter": "present",
            "filter_id": filter_id,
            **changed,
        }
        for n, at in enumerate(hours)
    ]


@pytest.fixture
def reviewed(replayed):
    def made(uses=(), read=(), treated=()):
        return replayed(filter_use=uses, filter_reading=read, treatment=treated)

    return made


def test_a_log_without_filters_says_so(reviewed):
    review = review_filters(reviewed())
    assert review.sentence == (
        "The log holds no filters: nothing can be said of their resistance."
    )
    assert review.lives.empty


def test_the_most_urgent_comes_first_and_of_a_state_the_one_in_use(reviewed):
    courses = {
        "STEADY": 2.2 + NOISE[:10],
        "RISING": 2.2 + 0.12 * np.arange(10) + NOISE[:10],
        "NEAR": 2.2 + 0.2 * np.arange(10) + NOISE[:10],
        "OVER": 2.2 + 0.4 * np.arange(10) + NOISE[:10],
        "FEW": [2.2, 2.3],
    }
    uses = [use(name, f"V-{name}") for name in courses]
    read = [
        row
        for name, values in courses.items()
        for row in readings(values, name, f"V-{name}")
    ]
    gone = use("GONE", "V-OVER", at=-200, removed=-100)
    old = readings([5.5, 6.0], "GONE", "V-OVER", at=-190)
    review = review_filters(reviewed([*uses, gone], [*read, *old]))
    assert review.lives["filter_id"].tolist() == [
        "OVER",
        "GONE",
        "NEAR",
        "RISING",
        "FEW",
        "STEADY",
    ]
    assert review.sentence.startswith(
        "6 filters in the log, 5 still in use at its end. Of those, 1 is over the"
        " limit, 1 is near it, 1 is rising and 1 has too few readings; the limit is"
        " 5 cmH2O/(L/s). 1 filter passed the limit before removal."
    )


def test_an_unlogged_change_is_named_with_its_place(reviewed):
    hours = np.arange(16) * 8.0
    values = 2.2 + 0.03 * np.where(hours < 64, hours, hours - 64) + NOISE[:16]
    review = review_filters(reviewed([use()], readings(values)))
    life = review.lives.iloc[0]
    assert life["suspected_change_h"] == pytest.approx(66)
    assert "1 filter may have been changed without an entry." in review.sentence
    own = review.segments["begins_with"].tolist()
    assert own == ["installation", "suspected change"]


def test_a_filter_in_depth_carries_its_readings_treatments_and_catch(reviewed):
    values = 2.2 + 0.1 * np.arange(10) + NOISE[:10]
    done = reviewed(
        [use()], readings(values), treatments([5, 15, 40], fill_volume_ml=3.0)
    )
    one = one_filter(done, "F1")
    assert len(one.readings) == 10
    assert len(one.treatments) == 3
    assert one.life.state == "rising"
    caught = one.gathered["captured_ml"]
    assert caught.is_monotonic_increasing
    fraction = one.treatments["filter_frac"].to_numpy()
    assert caught.iloc[-1] == pytest.approx(float((fraction * 3.0).sum()))


def test_what_is_on_record_of_a_drug_stands_beside_the_filter(reviewed):
    treated = treatments([5, 15]) + treatments(
        [30], treatment_id="other", drug="sodium chloride 0.9 %"
    )
    drugs = one_filter(reviewed([use()], readings([2.2]), treated), "F1").drugs
    assert drugs["firmness"].tolist() == ["one case, of an HME", ""]
    assert drugs["reported"].tolist()[1] == "nothing found"


def test_humid_hours_run_on_from_one_treatment_to_the_next(reviewed):
    """Humidifier on at hours 10 and 30, off at 50: humid until 50, dry after."""
    treated = treatments([10, 30], "F1") + treatments(
        [50], "F1", treatment_id="F1-off", heated_humidifier_on=False
    )
    done = reviewed([use()], readings([2.2, 2.3, 2.4], every=30, at=20), treated)
    humid = one_filter(done, "F1").gathered["humid_h"].tolist()
    assert humid == pytest.approx([20, 50, 50])


def test_an_unknown_filter_is_named(reviewed):
    with pytest.raises(UnknownId, match="no filter F9 in the log"):
        one_filter(reviewed([use()], readings([2.2])), "F9")


@pytest.mark.parametrize(
    ("uses", "read", "state", "note"),
    [
        (
            [use()],
            readings([2.3]),
            "too_few_readings",
            "one reading: nothing can be said of a trend",
        ),
        ([use()], readings([2.3] * 9), "steady", "every reading is the same"),
        ([use()], [], "too_few_readings", "no readings that can be used"),
        (
            [use()],
            readings([2.3, 2.4], at=-20, every=4.0),
            "too_few_readings",
            "no readings that can be used",
        ),
    ],
    ids=["one reading", "ties only", "no readings", "before installation"],
)
def test_a_life_that_cannot_speak_says_why(reviewed, uses, read, state, note):
    one = one_filter(reviewed(uses, read), "F1")
    assert one.life.state == state
    assert one.life.note == note
    assert one.facts["verdict"] == "cannot_tell"


def test_readings_before_installation_are_shown_with_their_reason(reviewed):
    done = reviewed([use()], readings([2.3, 2.4, 2.5], at=-10, every=8.0))
    one = one_filter(done, "F1")
    doubts = one.readings["doubt"].tolist()
    assert doubts[0] == doubts[1] == "taken before the filter was installed"
    assert not doubts[2]
    assert "2 readings not used; each says why." in one.cautions


def test_two_filters_at_once_on_one_ventilator_are_cautioned(reviewed):
    uses = [use("F1", at=0, removed=60), use("F2", at=40)]
    one = one_filter(reviewed(uses, readings([2.2, 2.3])), "F1")
    assert any("at the same time" in caution for caution in one.cautions)


def test_a_filter_on_two_ventilators_is_cautioned(reviewed):
    read = readings([2.2, 2.3]) + readings(
        [2.4], ventilator="V2", at=50, reading_id="elsewhere"
    )
    one = one_filter(reviewed([use()], read), "F1")
    assert any("on another ventilator" in caution for caution in one.cautions)


def test_readings_at_another_flow_are_not_mixed_in(reviewed):
    read = readings([2.2, 2.3]) + readings(
        [1.0], at=30, flow_lpm=30.0, reading_id="slow"
    )
    one = one_filter(reviewed([use()], read), "F1")
    slow = one.readings[one.readings["reading_id"] == "slow"].iloc[0]
    assert slow["doubt"].startswith("taken at another flow")
    assert one.life.readings_count == 2


def department(rate_per_ml, rate_per_humid_h, filters=24):
    """Filters loaded by liquid or by water alone; the catch is 3 mL times a share."""
    rng = np.random.default_rng(7)
    uses, read, treated = [], [], []
    for n in range(filters):
        name, ventilator = f"F{n:02d}", f"V{n:02d}"
        hours = np.arange(1, 13) * 8.0
        times = np.sort(rng.uniform(1, 96, rng.integers(2, 30)))
        humid = bool(rng.random() < 0.6)
        caught = np.array([(times < h).sum() for h in hours]) * 1.0
        values = 2.2 + rate_per_ml * caught + rate_per_humid_h * humid * hours
        values = values + rng.normal(0, 0.04, len(hours))
        uses.append(use(name, ventilator))
        read += readings(values.round(2), name, ventilator, every=8.0, at=8.0)
        state = "heated_humidifier" if humid else "hme"
        treated += treatments(
            times,
            name,
            ventilator,
            humidification=state,
            heated_humidifier_on=humid,
            hme_state=None if humid else "removed",
        )
    return uses, read, treated


@pytest.mark.parametrize(
    ("rates", "word", "other"),
    [((0.05, 0.0), "aerosol", "water"), ((0.0, 0.012), "water", "aerosol")],
)
def test_the_cause_of_the_rise_is_pointed_to(reviewed, rates, word, other):
    review = review_filters(reviewed(*department(*rates)))
    verdicts = review.lives["verdict"].value_counts()
    assert verdicts.get(word, 0) >= 8
    assert verdicts.get(other, 0) <= 2


def test_too_few_filters_cannot_tell_and_say_so(reviewed):
    values = 2.2 + 0.1 * np.arange(10) + NOISE[:10]
    done = reviewed([use()], readings(values), treatments([5, 15, 40]))
    life = review_filters(done).lives.iloc[0]
    assert life["verdict"] == "cannot_tell"
    assert life["verdict_reason"] == "too few filters to tell the two apart"


def test_lives_are_followed_to_the_limit_by_group(reviewed):
    uses, read = [], []
    for n in range(12):
        kind = "pleated" if n % 2 else "electrostatic"
        uses.append(use(f"F{n:02d}", f"V{n:02d}", kind=kind))
        pace = 0.2 if n % 2 else 0.6
        read += readings(2.2 + pace * np.arange(9), f"F{n:02d}", f"V{n:02d}")
    groups = review_filters(reviewed(uses, read)).groups
    kinds = groups[groups["by"] == "filter kind"].set_index("group")
    assert kinds.loc["electrostatic", "reached_count"] == 6
    assert kinds.loc["electrostatic", "median_h"] == pytest.approx(42)
    assert kinds.loc["pleated", "reached_count"] == 0
    assert kinds.loc["pleated", "refusal"] == "no life ended while watched"
