"""Filter readings on one footing, and the life of every filter, as two tables.

``reading``      one row a reading: resistance at the reference flow, or why it is
                 doubted
``filter_life``  one row a filter: state, slope, forecast, suspected change
"""

from __future__ import annotations

from dataclasses import fields

import duckdb
import numpy as np
import pandas as pd

from engine.evidence.filter import NEW_FILTER_WITHIN_H
from engine.policy import Policy
from engine.stats.filter_life import FilterLife
from engine.stats.filter_lives import KEPT, lives_of
from engine.stats.footing import (
    DOUBTS,
    at_reference_flow,
    k2_from_sittings,
    with_doubts_in_place,
)

# A reading that names no filter belongs to the one mounted on that ventilator then.
_READINGS = """
WITH placed AS (
  SELECT r.* EXCLUDE (filter_id), coalesce(r.filter_id, CASE
           WHEN mounted.removed_at IS NULL OR mounted.removed_at > r.read_at
           THEN mounted.filter_id END) AS filter_id
  FROM filter_reading r
  ASOF LEFT JOIN filter_use mounted
    ON mounted.ventilator_token = r.ventilator_token
   AND r.read_at >= mounted.installed_at
)
SELECT placed.reading_id, placed.filter_id, placed.ventilator_token, placed.read_at,
       placed.flow_lpm, placed.pressure_drop_cmh2o,
       coalesce(placed.reading_source = 'ventilator', false) AS off_ventilator,
       u.filter_kind::VARCHAR AS filter_kind,
       date_diff('second', u.installed_at, placed.read_at) / 3600.0 AS hours_h,
       date_diff('second', u.installed_at, u.removed_at) / 3600.0 AS removed_h
FROM placed LEFT JOIN filter_use u USING (filter_id)
ORDER BY placed.filter_id, placed.read_at, placed.reading_id
"""

_LIVES = """
CREATE TABLE filter_life AS
SELECT life.*, u.ventilator_token, u.filter_kind::VARCHAR AS filter_kind,
       u.installed_at, u.removed_at,
       u.installed_at + to_seconds(rising_since_h * 3600) AS rising_since_at,
       u.installed_at + to_seconds(suspected_change_h * 3600) AS suspected_change_at
FROM life JOIN filter_use u USING (filter_id)
"""

_KEPT = [f for f in fields(FilterLife) if f.name in KEPT]


def read_filters(cursor: duckdb.DuckDBPyConnection, policy: Policy) -> None:
    """Makes the tables ``reading`` and ``filter_life`` on this connection."""
    readings = _on_one_footing(cursor.execute(_READINGS).df(), policy)
    cursor.register("reading_rows", readings)
    cursor.execute(
        "CREATE TABLE reading AS SELECT reading_id::VARCHAR AS reading_id,"
        " filter_id::VARCHAR AS filter_id, ventilator_token::VARCHAR AS"
        " ventilator_token, read_at::TIMESTAMP AS read_at, flow_lpm::DOUBLE AS"
        " flow_lpm, pressure_drop_cmh2o::DOUBLE AS pressure_drop_cmh2o,"
        " hours_h::DOUBLE AS hours_h, doubt::VARCHAR AS doubt,"
        " CASE WHEN NOT isnan(resistance) THEN resistance END"
        " AS resistance_cmh2o_per_lps FROM reading_rows"
    )
    cursor.unregister("reading_rows")
    _keep_lives(cursor, readings, policy)


def _on_one_footing(readings: pd.DataFrame, policy: Policy) -> pd.DataFrame:
    limits = policy.filters
    flow = readings["flow_lpm"].to_numpy(float)
    drop = readings["pressure_drop_cmh2o"].to_numpy(float)
    hours = readings["hours_h"].to_numpy(float)
    removed = readings["removed_h"].to_numpy(float)
    code = pd.factorize(readings["filter_id"])[0]
    reference = (limits.reference_flow_lpm, limits.same_flow_within_frac)
    measured = at_reference_flow(flow, drop, *reference)["measured_cmh2o_per_lps"]
    k2 = k2_from_sittings(
        code,
        hours,
        flow,
        measured,
        pd.factorize(readings["filter_kind"])[0],
        float(NEW_FILTER_WITHIN_H),
    )["k2_cmh2o_per_lps2"]
    read = with_doubts_in_place(
        code,
        hours,
        at_reference_flow(flow, drop, *reference, k2),
        readings["off_ventilator"].to_numpy(bool),
        np.where(np.isnan(removed), np.inf, removed),
    )
    return readings.assign(
        resistance=read["resistance_cmh2o_per_lps"],
        doubt=np.array(DOUBTS, dtype=object)[read["doubt"]],
    )


def _keep_lives(
    cursor: duckdb.DuckDBPyConnection, readings: pd.DataFrame, policy: Policy
) -> None:
    limits = policy.filters
    filters = cursor.execute("SELECT filter_id FROM filter_use").df()["filter_id"]
    lives = lives_of(
        pd.Index(filters).get_indexer(readings["filter_id"]),
        len(filters),
        readings["hours_h"].to_numpy(float),
        readings["resistance"].to_numpy(float),
        limits.limit_cmh2o_per_lps,
        limits.near_limit_frac,
        limits.readings_for_a_trend_count,
        limits.rising_p,
        limits.unlogged_change_p,
    )
    columns = ", ".join(f"{f.name} {_sql_type(str(f.type))}" for f in _KEPT)
    cursor.execute(f"CREATE TABLE life (filter_id VARCHAR, {columns})")
    if len(filters):
        cursor.register("life_rows", pd.DataFrame({"filter_id": filters, **lives}))
        cursor.execute("INSERT INTO life BY NAME FROM life_rows")
        cursor.unregister("life_rows")
    cursor.execute(_LIVES)


def _sql_type(annotation: str) -> str:
    if annotation.startswith("float"):
        return "DOUBLE"
    return {"int": "BIGINT", "str": "VARCHAR"}[annotation]
