"""What stood around each treatment: filter, sensor, clock, room, shift.

One SQL statement a question, joined into the table ``context``. Nothing here judges;
a question the records do not answer stays NULL, which the rules read as unknown.

Reads   the log's views and three tables the replay has put beside them:
        ``reading`` (filter readings on one footing), ``filter_life``, ``sensor_drift``
Writes  the table ``context``, one row for each treatment that was not withheld
"""

from __future__ import annotations

import duckdb

from engine.policy import Policy

# A check that passed, or work that put the sensor right, starts a new count.
_RESTORED = "('passed', 'recalibrated', 'replaced')"

_ASKED = """
CREATE TABLE treatment_asked AS
SELECT treatment_id, started_at, ended_at, unit_token, ventilator_token, filter_id,
       expiratory_filter, timezone($zone, started_at AT TIME ZONE 'UTC') AS local_at
FROM treatment WHERE status IS DISTINCT FROM 'not_given'
"""

_LOCAL = """
CREATE TABLE local_time AS
SELECT treatment_id, strftime(local_at, '%Y-%m') AS local_month,
       CASE WHEN clock >= $evening AND clock < $night THEN 'evening'
            WHEN clock >= $day AND clock < $evening THEN 'day'
            ELSE 'night' END AS shift,
       date_diff('second', started_at, ended_at) / 60.0 AS duration_min
FROM (SELECT *, strftime(local_at, '%H:%M') AS clock FROM treatment_asked)
"""

# The filter the entry names; without a name, the one in use on that ventilator. An
# entry that says "absent" is not overruled by a filter somebody forgot to sign out.
_FILTER = """
CREATE TABLE filter_in_use AS
WITH found AS (
  SELECT t.treatment_id, t.started_at,
         coalesce(named.filter_id, mounted.filter_id) AS filter_id
  FROM treatment_asked t
  LEFT JOIN filter_use named ON named.filter_id = t.filter_id
  ASOF LEFT JOIN filter_use mounted
    ON mounted.ventilator_token = t.ventilator_token
   AND t.started_at >= mounted.installed_at
  WHERE named.filter_id IS NOT NULL
     OR (t.expiratory_filter IS DISTINCT FROM 'absent'
         AND (mounted.removed_at IS NULL OR mounted.removed_at > t.started_at))
)
SELECT f.treatment_id, f.filter_id, f.started_at, u.filter_kind, u.installed_at,
       CASE WHEN f.started_at >= u.installed_at
            THEN date_diff('second', u.installed_at, f.started_at) / 3600.0
       END AS filter_age_h
FROM found f JOIN filter_use u USING (filter_id)
"""

_READINGS = """
CREATE TABLE reading_before AS
WITH numbered AS (
  SELECT filter_id, read_at, resistance_cmh2o_per_lps,
         count(resistance_cmh2o_per_lps)
           OVER (PARTITION BY filter_id ORDER BY read_at) AS usable_count
  FROM reading WHERE filter_id IS NOT NULL
),
usable AS (SELECT * FROM numbered WHERE resistance_cmh2o_per_lps IS NOT NULL)
SELECT f.treatment_id, f.filter_id, f.started_at,
       u.resistance_cmh2o_per_lps, u.usable_count,
       date_diff('second', u.read_at, f.started_at) / 3600.0 AS age_h,
       any_read.has_flow,
       coalesce(date_diff('second', any_read.read_at, f.started_at) / 3600.0
                <= $window_h, false) AS in_window
FROM filter_in_use f
ASOF LEFT JOIN usable u
  ON u.filter_id = f.filter_id AND f.started_at >= u.read_at
ASOF LEFT JOIN (SELECT filter_id, read_at, flow_lpm IS NOT NULL AS has_flow
                FROM reading WHERE filter_id IS NOT NULL) any_read
  ON any_read.filter_id = f.filter_id AND f.started_at >= any_read.read_at
"""

_TREND = """
CREATE TABLE trend_before AS
SELECT r.treatment_id,
       CASE WHEN r.resistance_cmh2o_per_lps > $limit THEN 'over_limit'
            WHEN r.resistance_cmh2o_per_lps >= $near THEN 'near_limit'
            WHEN r.usable_count IS NULL OR r.usable_count < $enough
              THEN 'too_few_readings'
            WHEN l.rising_since_at <= r.started_at THEN 'rising'
            ELSE 'steady' END AS filter_trend,
       CASE WHEN l.change_p IS NULL THEN NULL
            ELSE coalesce(
              r.started_at >= l.suspected_change_at
              AND row_number() OVER (
                PARTITION BY r.filter_id, r.started_at >= l.suspected_change_at
                ORDER BY r.started_at, r.treatment_id) = 1, false)
       END AS filter_change_suspected
FROM reading_before r LEFT JOIN filter_life l USING (filter_id)
"""

_CHECKS = f"""
CREATE TABLE check_before AS
WITH flow_check AS (
  SELECT * FROM sensor_check WHERE sensor = 'expiratory_flow'
),
restored AS (SELECT * FROM flow_check WHERE outcome IN {_RESTORED}),
found AS (
  SELECT t.treatment_id, t.ventilator_token, t.started_at, t.expiratory_filter,
         c.outcome, r.checked_at AS restored_at
  FROM treatment_asked t
  ASOF LEFT JOIN flow_check c
    ON c.ventilator_token = t.ventilator_token AND t.started_at >= c.checked_at
  ASOF LEFT JOIN restored r
    ON r.ventilator_token = t.ventilator_token AND t.started_at >= r.checked_at
),
counted AS (
  SELECT *, count(*) FILTER (expiratory_filter = 'absent') OVER since AS absent,
         count(*) FILTER (expiratory_filter IS NULL) OVER since AS unsaid
  FROM found
  WINDOW since AS (PARTITION BY ventilator_token, restored_at
                   ORDER BY started_at, treatment_id ROWS UNBOUNDED PRECEDING)
)
SELECT treatment_id, outcome AS sensor_last_outcome,
       date_diff('second', restored_at, started_at) / 3600.0
         AS hours_since_passed_check_h,
       -- A count that entries without a filter state, or a log without any check,
       -- might lift over the limit is not known to lie below it.
       CASE WHEN ventilator_token IS NULL THEN NULL
            WHEN absent >= $unfiltered THEN absent
            WHEN restored_at IS NOT NULL AND absent + unsaid < $unfiltered THEN absent
       END AS unfiltered_since_check_count
FROM counted
"""

_FAULTS = """
CREATE TABLE fault_after AS
WITH fault AS (
  SELECT ventilator_token, happened_at FROM service_event WHERE kind = 'fault'
  UNION ALL
  SELECT ventilator_token, checked_at FROM sensor_check
  WHERE sensor = 'expiratory_flow' AND outcome = 'failed'
  UNION ALL
  SELECT ventilator_token, happened_at FROM incident
  WHERE sensor = 'expiratory_flow'
),
last_record AS (
  SELECT ventilator_token, max(at_time) AS last_at FROM (
    SELECT ventilator_token, happened_at AS at_time FROM service_event
    UNION ALL SELECT ventilator_token, checked_at FROM sensor_check
    UNION ALL SELECT ventilator_token, happened_at FROM incident)
  GROUP BY ventilator_token
)
SELECT t.treatment_id,
       date_diff('second', t.started_at, f.happened_at) / 3600.0 AS hours_to_fault_h,
       CASE WHEN date_diff('second', t.started_at, f.happened_at) / 3600.0 <= $soon_h
              THEN true
            WHEN date_diff('second', t.started_at, k.last_at) / 3600.0 > $soon_h
              THEN false
       END AS fault_soon_after
FROM treatment_asked t
ASOF LEFT JOIN fault f
  ON f.ventilator_token = t.ventilator_token AND t.started_at <= f.happened_at
LEFT JOIN last_record k ON k.ventilator_token = t.ventilator_token
"""

_CLOCKS = """
CREATE TABLE clock_near AS
SELECT t.treatment_id, coalesce(b.offset_s, a.offset_s) AS clock_offset_s
FROM treatment_asked t
ASOF LEFT JOIN clock_offset b
  ON b.ventilator_token = t.ventilator_token AND t.started_at >= b.measured_at
ASOF LEFT JOIN clock_offset a
  ON a.ventilator_token = t.ventilator_token AND t.started_at <= a.measured_at
"""

_ALL = """
CREATE TABLE context AS
SELECT t.treatment_id, n.local_month, n.shift::shift_words AS shift, n.duration_min,
       f.filter_kind, f.filter_age_h,
       r.resistance_cmh2o_per_lps AS filter_reading_cmh2o_per_lps,
       r.age_h AS filter_reading_age_h, r.has_flow AS filter_reading_has_flow,
       r.in_window AS filter_reading_in_window,
       d.filter_trend::filter_trend_words AS filter_trend, d.filter_change_suspected,
       c.sensor_last_outcome, c.hours_since_passed_check_h,
       c.unfiltered_since_check_count,
       CASE WHEN NOT s.drifting THEN false
            WHEN s.drifting THEN t.started_at >= s.drift_started_at
              AND (s.drift_ended_at IS NULL OR t.started_at < s.drift_ended_at)
       END AS volume_drifting,
       h.hours_to_fault_h, h.fault_soon_after, k.clock_offset_s,
       m.volume_m3 AS room_volume_m3, m.air_changes_per_h AS room_air_changes_per_h,
       m.people_count, f.filter_id AS filter_in_use_id
FROM treatment_asked t
JOIN local_time n USING (treatment_id)
LEFT JOIN filter_in_use f USING (treatment_id)
LEFT JOIN reading_before r USING (treatment_id)
LEFT JOIN trend_before d USING (treatment_id)
LEFT JOIN check_before c USING (treatment_id)
LEFT JOIN fault_after h USING (treatment_id)
LEFT JOIN clock_near k USING (treatment_id)
LEFT JOIN sensor_drift s ON s.ventilator_token = t.ventilator_token
LEFT JOIN room m ON m.unit_token = t.unit_token
ORDER BY t.started_at, t.treatment_id
"""

_STEPS = (
    "treatment_asked",
    "local_time",
    "filter_in_use",
    "reading_before",
    "trend_before",
    "check_before",
    "fault_after",
    "clock_near",
)


def build_context(
    cursor: duckdb.DuckDBPyConnection, policy: Policy, site_zone: str
) -> None:
    """Makes the table ``context`` on this connection.

    The steps' own tables are dropped again, so that memory holds one row a treatment.
    """
    limits = policy.filters
    cursor.execute(_ASKED, {"zone": site_zone})
    cursor.execute(_LOCAL, policy.shifts.model_dump())
    cursor.execute(_FILTER)
    cursor.execute(_READINGS, {"window_h": limits.reading_window_h})
    cursor.execute(
        _TREND,
        {
            "limit": limits.limit_cmh2o_per_lps,
            "near": limits.near_limit_frac * limits.limit_cmh2o_per_lps,
            "enough": limits.readings_for_a_trend_count,
        },
    )
    cursor.execute(_CHECKS, {"unfiltered": policy.sensors.unfiltered_since_check_count})
    cursor.execute(_FAULTS, {"soon_h": policy.sensors.fault_soon_after_h})
    cursor.execute(_CLOCKS)
    cursor.execute(_ALL)
    for step in _STEPS:
        cursor.execute(f"DROP TABLE {step}")
