"""Whether each ventilator's exhaled / inspired volume ratio drifts, as a table.

``sensor_drift``  one row a ventilator that has sensor checks
"""

from __future__ import annotations

import duckdb
import pandas as pd

from engine.policy import Policy
from engine.stats.drift import drift_of

# External gas adds to what passes the expiratory sensor, so such checks are left out.
_CHECKS = """
SELECT c.ventilator_token, c.checked_at, c.outcome::VARCHAR AS outcome,
       c.exhaled_volume_ml / c.inspired_volume_ml AS ratio,
       coalesce(gas.ended_at >= c.checked_at, false) AS external_gas
FROM sensor_check c
ASOF LEFT JOIN (FROM treatment WHERE gas_source = 'external') gas
  ON gas.ventilator_token = c.ventilator_token AND c.checked_at >= gas.started_at
WHERE c.sensor = 'expiratory_flow'
ORDER BY c.ventilator_token, c.checked_at, c.check_id
"""

_COLUMNS = {
    "ventilator_token": "VARCHAR",
    "drifting": "BOOLEAN",
    "drift_started_at": "TIMESTAMP",
    "drift_ended_at": "TIMESTAMP",
    "last_change_frac": "DOUBLE",
    "falling": "BOOLEAN",
    "checks_used_count": "BIGINT",
    "refusal": "VARCHAR",
}


def read_sensors(cursor: duckdb.DuckDBPyConnection, policy: Policy) -> None:
    """Makes the table ``sensor_drift`` on this connection."""
    checks = cursor.execute(_CHECKS).df()
    rows = [
        _drift(str(name), own, policy)
        for name, own in checks.groupby("ventilator_token", sort=True)
    ]
    columns = ", ".join(f"{name} {kind}" for name, kind in _COLUMNS.items())
    cursor.execute(f"CREATE TABLE sensor_drift ({columns})")
    if rows:
        cursor.register("drift_rows", pd.DataFrame(rows, columns=list(_COLUMNS)))
        cursor.execute("INSERT INTO sensor_drift FROM drift_rows")
        cursor.unregister("drift_rows")


def _drift(ventilator_token: str, checks: pd.DataFrame, policy: Policy) -> list:
    begin = checks["checked_at"].iloc[0]
    done = drift_of(
        (checks["checked_at"] - begin).dt.total_seconds().to_numpy(float) / 3600,
        checks["ratio"].to_numpy(float),
        policy.sensors.drift_weight,
        policy.sensors.drift_limit_sd,
        calibrated=checks["outcome"].isin(["recalibrated", "replaced"]).to_numpy(),
        left_out=checks["external_gas"].to_numpy(bool),
    )

    def at(hours: float | None) -> pd.Timestamp | None:
        return None if hours is None else begin + pd.Timedelta(hours=hours)

    return [
        ventilator_token,
        done.drifting,
        at(done.started_h),
        at(done.ended_h),
        done.last_change_frac,
        done.falling,
        done.used_count,
        done.refusal,
    ]
