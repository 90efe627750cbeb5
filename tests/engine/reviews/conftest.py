"""Logs written from a few rows, opened and replayed, for the reviews to be asked."""

from datetime import datetime

import numpy as np
import pandas as pd
import pytest

from engine.log import open_log
from engine.log.schema import write_log
from engine.policy import load_policy

try:
    from engine.replay import replay
except ImportError:  # the joint is not yet in place: the tables made by hand
    replay = None


@pytest.fixture
def replayed(tmp_path):
    """``replayed(treatment=[...], incident=[...])``; closed when the test ends."""
    opened = []

    def made(**tables):
        path = tmp_path / "log.duckdb"
        frames = {name: pd.DataFrame(list(rows)) for name, rows in tables.items()}
        write_log(path, frames, "Etc/UTC", datetime(2026, 6, 1))
        log = open_log(path)
        policy = load_policy("common_practice")
        done = (replay or by_hand)(log, policy)
        opened.extend([done, log])
        return done

    yield made
    for each in opened:
        each.close()


class ByHand:
    """What a replay offers a review, its tables made here."""

    def __init__(self, log, policy):
        self.log, self.policy, self.scenario, self.stamp = log, policy, None, {}

    def frame(self, sql, params=None):
        return self.log.frame(sql, params)

    def close(self):
        self.log.close()


def by_hand(log, policy):
    from engine.columns import words_of
    from engine.log.context import build_context
    from engine.physics.balance import balance
    from engine.replay.batches import balance_arrow, batch_of

    own = log.reopened()
    cursor = own.cursor()
    for column in ("shift", "filter_trend"):
        words = ", ".join(f"'{word}'" for word in words_of(column))
        cursor.execute(f"CREATE TYPE {column}_words AS ENUM ({words})")
    _reading(cursor, policy)
    _filter_life(cursor, policy)
    _sensor_drift(cursor, policy)
    build_context(cursor, policy, own.site_zone)
    cursor.execute("CREATE TABLE balance (treatment_id VARCHAR)")
    both = (
        "SELECT treatment.*, context.* EXCLUDE (treatment_id)"
        " FROM treatment JOIN context USING (treatment_id)"
    )
    first = True
    for arrow in cursor.cursor().sql(both).to_arrow_reader(10_000):
        rows = batch_of(arrow)
        done = balance_arrow(rows["treatment_id"], balance(rows), [])
        cursor.register("block", done)
        verb = "CREATE OR REPLACE TABLE balance AS" if first else "INSERT INTO balance"
        cursor.execute(f"{verb} FROM block")
        first = False
    if first:
        names = ("filter", "sensor_side")
        columns = ", ".join(
            f"{name}{end}_frac DOUBLE"
            for name in names
            for end in ("", "_low", "_high")
        )
        cursor.execute(
            f"CREATE OR REPLACE TABLE balance (treatment_id VARCHAR, {columns})"
        )
    cursor.execute(
        "CREATE VIEW asked AS SELECT treatment.*, context.* EXCLUDE (treatment_id),"
        " balance.* EXCLUDE (treatment_id) FROM treatment"
        " JOIN context USING (treatment_id) JOIN balance USING (treatment_id)"
    )
    return ByHand(own, policy)


def _reading(cursor, policy):
    from engine.stats.footing import DOUBTS, at_reference_flow, with_doubts_in_place

    limits = policy.filters
    table = cursor.execute(
        """
        SELECT r.*, u.installed_at,
               date_diff('second', u.installed_at, r.read_at) / 3600.0 AS hours_h,
               date_diff('second', u.installed_at, u.removed_at) / 3600.0 AS removed_h
        FROM filter_reading r LEFT JOIN filter_use u USING (filter_id)
        """
    ).df()
    read = with_doubts_in_place(
        pd.factorize(table["filter_id"])[0],
        table["hours_h"].to_numpy(float),
        at_reference_flow(
            table["flow_lpm"].to_numpy(float),
            table["pressure_drop_cmh2o"].to_numpy(float),
            limits.reference_flow_lpm,
            limits.same_flow_within_frac,
        ),
        (table["reading_source"].astype(str) == "ventilator").to_numpy(),
        table["removed_h"].fillna(np.inf).to_numpy(float),
    )
    table["r"] = read["resistance_cmh2o_per_lps"]
    table["doubt"] = np.array(DOUBTS, dtype=object)[read["doubt"]].astype(str)
    cursor.register("read_rows", table)
    cursor.execute(
        "CREATE TABLE reading AS SELECT reading_id::VARCHAR AS reading_id,"
        " filter_id::VARCHAR AS filter_id, ventilator_token::VARCHAR"
        " AS ventilator_token, read_at::TIMESTAMP AS read_at, flow_lpm,"
        " pressure_drop_cmh2o, hours_h, doubt::VARCHAR AS doubt,"
        " CASE WHEN NOT isnan(r) THEN r END AS resistance_cmh2o_per_lps"
        " FROM read_rows"
    )


def _filter_life(cursor, policy):
    from engine.stats.filter_life import life_of

    limits = policy.filters
    readings = cursor.execute("FROM reading").df()
    lives = []
    for filter_id in cursor.execute("SELECT filter_id FROM filter_use").df()[
        "filter_id"
    ]:
        own = readings[readings["filter_id"] == filter_id]
        life = vars(
            life_of(
                own["hours_h"].to_numpy(float),
                own["resistance_cmh2o_per_lps"].to_numpy(float),
                limits.limit_cmh2o_per_lps,
                limits.near_limit_frac,
                limits.readings_for_a_trend_count,
                limits.rising_p,
                limits.unlogged_change_p,
            )
        )
        lives.append({"filter_id": filter_id, **life})
    some = life_of([], [], 5.0, 0.8, 6, 0.05, 0.05)
    texts = [n for n, v in vars(some).items() if isinstance(v, str)]
    counts = [n for n in vars(some) if n.endswith("_count")]
    numbers = [n for n, v in vars(some).items() if v is None]
    texts.append("filter_id")
    columns = [f"{n} DOUBLE" for n in numbers] + [f"{n} BIGINT" for n in counts]
    columns += [f"{n} VARCHAR" for n in texts]
    cursor.execute(f"CREATE TABLE life ({', '.join(columns)})")
    names = [*numbers, *counts, *texts]
    if lives:
        marks = ", ".join("?" * len(names))
        rows = [[life[name] for name in names] for life in lives]
        cursor.executemany(f"INSERT INTO life VALUES ({marks})", rows)
    cursor.execute(
        """
        CREATE TABLE filter_life AS
        SELECT life.*, u.ventilator_token, u.filter_kind::VARCHAR AS filter_kind,
               u.installed_at, u.removed_at,
               u.installed_at + to_seconds(rising_since_h * 3600) AS rising_since_at,
               u.installed_at + to_seconds(suspected_change_h * 3600)
                 AS suspected_change_at
        FROM life JOIN filter_use u USING (filter_id)
        """
    )


def _sensor_drift(cursor, policy):
    cursor.execute(
        "CREATE TABLE sensor_drift (ventilator_token VARCHAR, drifting BOOLEAN,"
        " drift_started_at TIMESTAMP, drift_ended_at TIMESTAMP)"
    )
