"""How well the whole agrees with bench work nobody fitted, and how it is told.

The targets are those the project set before the fit; nothing here is loosened to pass.
"""

import numpy as np
import pytest
from scipy.special import logit

from engine.evidence import validation as targets
from engine.physics.bench import bench_rows, contrasts
from engine.physics.calibrate import calibration_rows
from engine.physics.validation import (
    Agreement,
    agreement,
    orders,
    results,
    strict_agreement,
    validation_table,
)


@pytest.fixture(scope="module")
def found():
    return results()


def test_the_targets_are_met_on_studies_that_were_not_fitted():
    strict = strict_agreement()
    assert strict.coverage_frac >= float(targets.TARGET_COVERAGE_FRAC)
    assert strict.rank_agreement >= float(targets.TARGET_ORDER_RATIO)
    assert strict.rms_logit <= float(targets.TARGET_ERROR_LOGIT)
    assert strict.missed == ()


def test_the_figures_are_worked_out_from_the_rows(found):
    """The same figures again, by hand from the rows themselves."""
    rows = [
        r
        for r in found
        if r.row.is_strict and r.row.kind == "validation" and np.isfinite(r.estimate)
    ]
    strict = strict_agreement()
    errors = [logit(r.estimate) - logit(r.row.observed_frac) for r in rows]
    assert strict.rows == len(rows)
    assert strict.inside == sum(r.low <= r.row.observed_frac <= r.high for r in rows)
    assert strict.rms_logit == pytest.approx(np.sqrt(np.mean(np.square(errors))))


def test_no_study_is_both_fitted_and_held_out():
    fitted = {row.study for row in bench_rows() if row.kind == "calibration"}
    held_out = {row.study for row in bench_rows() if row.kind == "validation"}
    assert fitted.isdisjoint(held_out)
    assert fitted
    assert held_out
    kinds = {contrast.study: contrast.kind for contrast in contrasts()}
    assert not {s for s, kind in kinds.items() if kind == "validation"} & fitted


def test_the_fit_reads_calibration_rows_only():
    used = {(row.study, row.kind) for row in calibration_rows()}
    assert {kind for _, kind in used} == {"calibration"}
    held_out = {row.study for row in bench_rows() if row.kind == "validation"}
    assert held_out.isdisjoint(study for study, _ in used)


def test_strict_figures_count_no_fitted_row(found):
    strict = [r for r in found if r.row.is_strict]
    assert {r.row.kind for r in strict} == {"validation"}


def test_every_bench_result_is_told_with_its_estimate_or_why_there_is_none():
    table = validation_table()
    assert len(table) == len(bench_rows())
    for line in table:
        if line["inside"] is None:
            assert line["why_not"]
            assert np.isnan(line["estimate"])
        else:
            assert 0 <= line["low"] <= line["estimate"] <= line["high"] <= 1
            inside = line["low"] <= line["observed_frac"] <= line["high"]
            assert line["inside"] == inside
        assert line["known"] in {"read", "from memory"}
        assert line["kind"] in {"calibration", "validation"}


def test_results_outside_their_band_are_shown(found):
    """Some are known to be: old devices, neonates, animals."""
    assert any(r.is_inside is False for r in found)


def test_an_order_is_right_wrong_or_tied():
    assert {order.verdict for order in orders()} <= {1, 0, -1}
    told = agreement([], orders())
    assert told.right + told.wrong <= told.pairs


def made(**changes):
    plain = {
        "rows": 20,
        "inside": 16,
        "rms_logit": 0.4,
        "bias_logit": 0.0,
        "pairs": 10,
        "right": 9,
        "wrong": 1,
    }
    return Agreement(**(plain | changes))


def test_a_target_that_is_missed_is_named():
    assert made().verdict == "Targets met."
    assert made(inside=12).missed == ("80% inside the band",)
    assert made(right=6, wrong=3).missed == ("rank agreement of 0.7",)
    assert made(rms_logit=0.5).verdict == ("Missed: root mean square error of 0.45.")


def test_a_band_that_holds_too_much_is_called_wide():
    assert made(inside=20).verdict == (
        "Targets met. A band of 80% should hold about 16 of these 20 results and "
        "holds 20: it is rather wide."
    )
