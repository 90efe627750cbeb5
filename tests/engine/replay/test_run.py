"""The replay judges every treatment once, whatever the batches."""

import json

import numpy as np
import pandas as pd
import pytest

from engine.columns import ANSWERS, FRACTIONS
from engine.policy import load_policy
from engine.replay import replay, replay_to
from engine.rules import ALL_RULES

from .conftest import treatments

POLICY = load_policy()


def mixed(count):
    kinds = ["vibrating_mesh", "jet", "pmdi_spacer", None]
    sites = ["wye", "humidifier_inlet", "inspiratory_limb", None]
    return treatments(
        count,
        generator=[kinds[n % 4] for n in range(count)],
        site=[sites[n % 3] if n % 5 else None for n in range(count)],
        tidal_volume_ml=[300.0 + 7 * n if n % 7 else None for n in range(count)],
        expiratory_filter=[("present", "absent", None)[n % 3] for n in range(count)],
    )


@pytest.fixture
def replayed(logged):
    done = []

    def run(rows, **keywords):
        done.append(replay(logged(treatment=rows), POLICY, **keywords))
        return done[-1]

    yield run
    for one in done:
        one.close()


def test_each_given_treatment_is_judged_once_by_every_rule(replayed):
    rows = treatments(3, status=["given", "not_given", None])
    one = replayed(rows)
    answers = one.frame("FROM answer ORDER BY treatment_id")
    assert answers["treatment_id"].tolist() == ["t0", "t2"]
    assert set(answers.columns[1:]) == {rule.id for rule in ALL_RULES}
    assert set(answers.iloc[:, 1:].to_numpy().ravel()) <= set(ANSWERS)


@pytest.mark.parametrize("batch_rows", [1, 7, 1000])
def test_the_batch_size_changes_nothing(replayed, batch_rows):
    rows = mixed(60)
    whole, cut = replayed(rows), replayed(rows, batch_rows=batch_rows)
    for table in ("answer", "balance"):
        one = whole.frame(f"FROM {table} ORDER BY treatment_id")
        two = cut.frame(f"FROM {table} ORDER BY treatment_id")
        pd.testing.assert_frame_equal(one, two, rtol=1e-12)


def test_the_fractions_add_to_one_wherever_there_is_an_estimate(replayed):
    balance = replayed(mixed(60)).frame("FROM balance")
    total = balance[[f"{name}_frac" for name in FRACTIONS]].sum(axis=1, skipna=False)
    estimated = balance["refusal"] == 0
    assert estimated.any()
    assert (~estimated).any()
    np.testing.assert_allclose(total[estimated], 1.0, atol=1e-9)
    assert total[~estimated].isna().all()


def test_a_finding_is_a_rule_that_fired(replayed):
    one = replayed(mixed(40))
    answers = one.frame("FROM answer").melt("treatment_id", var_name="rule_id")
    fired = answers[answers["value"] == "fires"]
    wanted = set(fired["treatment_id"] + ":" + fired["rule_id"])
    found = one.frame("FROM finding")["finding_id"]
    assert set(found) == wanted
    assert found.is_unique


def test_an_empty_log_replays_to_empty_tables(replayed):
    one = replayed([])
    assert one.stamp["treatments"] == 0
    for table in ("answer", "balance", "finding", "asked"):
        assert one.frame(f"FROM {table}").empty


def test_the_files_hold_what_the_replay_holds(logged, tmp_path):
    log = logged(treatment=mixed(30))
    stamp = replay_to(log, POLICY, tmp_path / "out", batch_rows=8)
    whole = replay(log, POLICY)
    for name, table in (
        ("balance", "balance"),
        ("answers", "answer"),
        ("findings", "finding"),
    ):
        written = pd.read_parquet(tmp_path / "out" / f"{name}.parquet")
        key = "finding_id" if table == "finding" else "treatment_id"
        held = whole.frame(f"FROM {table} ORDER BY {key}")
        pd.testing.assert_frame_equal(
            written.sort_values(key, ignore_index=True),
            held,
            check_dtype=False,
            rtol=1e-12,
        )
    assert json.loads((tmp_path / "out" / "run.json").read_text()) == stamp
    whole.close()


def test_the_stamp_names_engine_log_policy_and_rows(replayed):
    one = replayed(treatments(2))
    assert one.stamp["policy_hash"] == POLICY.hash
    assert one.stamp["log_fingerprint"] == one.log.fingerprint
    assert one.stamp["rows_in"] == (one.stamp["rows_used"] + one.stamp["rows_refused"])


def test_progress_grows_to_one(replayed):
    seen = []
    replayed(mixed(20), batch_rows=5, progress=lambda share, what: seen.append(share))
    assert seen == sorted(seen)
    assert seen[-1] == 1.0
