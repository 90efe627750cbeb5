"""Every other site beside the one logged, and when a difference is shown."""

import numpy as np
import pytest

from engine.batch import one_row
from engine.columns import CHOICE_SITES, words_of
from engine.evidence import circuit
from engine.physics.balance import alternatives, balance
from engine.physics.sites import SITES_OF

GENERATORS = words_of("generator")[:-1]


def delivered_at(found, site, end=""):
    return found[f"delivered_at_{site}{end}_frac"]


@pytest.mark.parametrize("generator", GENERATORS)
def test_each_site_gives_what_a_treatment_logged_there_is_given(changed, generator):
    """At the usual distance, and dose for dose the same as its balance."""
    usual_cm = float(circuit.DEFAULT_DISTANCE_CM)
    found = alternatives(changed(generator=generator, site="wye"))
    for site in SITES_OF[generator]:
        at_site = 0.0 if site == "airway_side" else usual_cm
        logged = balance(
            changed(generator=generator, site=site, distance_from_wye_cm=at_site)
        )
        for end in ("", "_low", "_high"):
            assert delivered_at(found, site, end)[0] == pytest.approx(
                logged[f"delivered{end}_frac"][0], rel=1e-4, abs=1e-6
            ), (site, end)


@pytest.mark.parametrize("generator", GENERATORS)
def test_a_site_the_generator_may_not_use_has_no_figure(changed, generator):
    found = alternatives(changed(generator=generator, site="wye"))
    for site in CHOICE_SITES:
        has_figure = bool(np.isfinite(delivered_at(found, site)[0]))
        assert has_figure == (site in SITES_OF[generator]), site


def test_sites_at_a_humidifier_need_one(changed):
    found = alternatives(changed(humidification="hme", hme_state="removed"))
    assert np.isnan(delivered_at(found, "humidifier_inlet")[0])
    assert np.isnan(delivered_at(found, "humidifier_outlet")[0])
    assert np.isfinite(delivered_at(found, "ventilator_outlet")[0])


def test_the_logged_distance_is_kept_where_the_generator_sits(changed):
    found = alternatives(changed(distance_from_wye_cm=[15.0, 60.0]))
    logged = balance(changed(distance_from_wye_cm=[15.0, 60.0]))
    np.testing.assert_allclose(
        delivered_at(found, "inspiratory_limb"), logged["delivered_frac"], rtol=1e-4
    )


def varied(changed):
    rng = np.random.default_rng(4)
    n = 60
    return changed(
        generator=list(rng.choice(GENERATORS, n)),
        site=list(rng.choice(CHOICE_SITES, n)),
        bias_flow_lpm=[None if x < 2 else float(x) for x in rng.uniform(0, 10, n)],
        tidal_volume_ml=list(rng.uniform(150, 800, n)),
        expiratory_filter=list(rng.choice(["present", "absent"], n)),
        hme_state=[str(x) for x in rng.choice(["none", "in_line"], n)],
        synchrony=list(rng.choice(["continuous", "inspiration_synchronised"], n)),
    )


def test_the_best_site_delivers_most_and_what_is_forgone_is_the_difference(changed):
    rows = varied(changed)
    found = alternatives(rows)
    everywhere = np.array([delivered_at(found, site) for site in CHOICE_SITES])
    best = np.nanmax(everywhere, axis=0)
    np.testing.assert_allclose(found["best_delivered_frac"], best)
    names = np.array(words_of("site"))[found["best_site"]]
    for i, site in enumerate(names):
        assert delivered_at(found, site)[i] == best[i]
    here = balance(rows)["delivered_frac"]
    shown = found["difference_shown"] == 1
    np.testing.assert_allclose(
        found["forgone_frac"], np.where(shown, best - here, 0.0), atol=1e-5
    )
    assert shown.any()
    assert not shown.all()


def test_no_difference_is_shown_below_the_ratio_benches_differ_by(changed):
    found = alternatives(varied(changed))
    close = found["best_ratio"] <= float(circuit.SHOWN_DIFFERENCE_RATIO)
    assert close.any()
    assert not np.any(found["difference_shown"][close] == 1)


def test_no_difference_is_shown_where_a_bias_flow_tried_turns_it_round(changed):
    """Unknown bias flow is 0, 2 or 5 L/min: at 0 the Y is as good as any site."""
    known = alternatives(changed(site="wye", bias_flow_lpm=2.0))
    unknown = alternatives(changed(site="wye", bias_flow_lpm=None))
    none = alternatives(changed(site="wye", bias_flow_lpm=0.0))
    assert known["difference_shown"][0] == 1
    assert none["difference_shown"][0] == 0
    best = words_of("site")[known["best_site"][0]]
    at_y, at_best = delivered_at(none, "wye")[0], delivered_at(none, best)[0]
    assert (unknown["difference_shown"][0] == 1) == (at_best > at_y)


def test_every_figure_lies_in_its_band(changed):
    found = alternatives(varied(changed))
    for site in CHOICE_SITES:
        frac, low, high = (
            delivered_at(found, site, end) for end in ("", "_low", "_high")
        )
        known = np.isfinite(frac)
        assert np.array_equal(known, np.isfinite(low) & np.isfinite(high))
        assert np.all((low <= frac) & (frac <= high), where=known)
        assert np.all((low >= 0) & (high <= 1), where=known)


def test_a_refused_treatment_has_no_other_site_either(changed):
    found = alternatives(changed(tidal_volume_ml=[40.0, None]))
    assert list(found["best_site"]) == [-1, -1]
    assert list(found["difference_shown"]) == [-1, -1]
    for name in ("best_delivered_frac", "best_ratio", "forgone_frac"):
        assert np.all(np.isnan(found[name])), name


def test_a_single_row_gives_what_it_gives_in_a_batch(changed):
    rows = varied(changed)
    together = alternatives(rows)
    for i in range(0, 60, 7):
        for name, values in alternatives(one_row(rows, i)).items():
            np.testing.assert_allclose(
                together[name][i], values[0], atol=1e-6, rtol=1e-5, err_msg=name
            )


def test_a_jet_without_bias_flow_wants_tubing_before_the_y(changed):
    """Common practice, no source: the driving gas fills a reservoir in the limb."""
    found = balance(
        changed(
            generator="jet",
            site=["wye", "inspiratory_limb"],
            distance_from_wye_cm=[0.0, 50.0],
            bias_flow_lpm=0.0,
            respiratory_rate_bpm=22.0,
        )
    )
    assert found["delivered_frac"][1] > 1.4 * found["delivered_frac"][0]


def test_bias_flow_moves_the_best_distance_towards_the_ventilator(changed):
    distances = list(np.linspace(5, 145, 29))
    best = [
        distances[
            int(
                np.argmax(
                    balance(
                        changed(distance_from_wye_cm=distances, bias_flow_lpm=bias_lpm)
                    )["delivered_frac"]
                )
            )
        ]
        for bias_lpm in (0.5, 2.0, 5.0)
    ]
    assert best == sorted(best)
    assert best[0] < best[-1]
