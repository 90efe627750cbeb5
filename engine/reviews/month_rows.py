"""The questions the month review asks of a replay, in SQL, for all months at once.

Treatments are counted once into ``indicator_cell``, one row for each month, unit,
patient and indicator; every figure of every month, unit and interval is a sum over it.
"""

from __future__ import annotations

import threading
from collections.abc import Sequence

import pandas as pd

from engine.evidence.review import FELL_CMH2O_PER_LPS, FELL_FRAC
from engine.replay import Replay
from engine.reviews.indicators import OF_TREATMENTS

_MAKING = threading.Lock()

EVERYONE = "all"  # the line that counts every treatment


def make_cells(replay: Replay) -> None:
    """Makes the table ``indicator_cell`` beside the replay, once."""
    with _MAKING:
        replay.log.cursor().execute(_CELLS)


def _counts() -> str:
    parts = []
    for each in OF_TREATMENTS:
        inside, hit = f"({each.asked})", f"({each.hit})"
        parts += [
            f"count(*) FILTER ({inside} AND {hit}) AS {each.id}_hit",
            f"count(*) FILTER ({inside} AND {hit} IS NOT NULL) AS {each.id}_known",
            f"count(*) FILTER ({inside} AND {hit} IS NULL) AS {each.id}_unknown",
        ]
    return ", ".join(parts)


def _unfolded() -> str:
    one = "{{'indicator': '{0}', 'hit': {1}, 'known': {2}, 'unknown': {3}}}"
    parts = [one.format(EVERYONE, "n", "n", "0")]
    parts += [
        one.format(each.id, f"{each.id}_hit", f"{each.id}_known", f"{each.id}_unknown")
        for each in OF_TREATMENTS
    ]
    return "[" + ", ".join(parts) + "]"


_CELLS = f"""
CREATE TABLE IF NOT EXISTS indicator_cell AS
WITH told AS (
  SELECT local_month, coalesce(unit_token, 'unknown') AS unit_token,
         coalesce(patient_token, treatment_id) AS patient,
         patient_token IS NOT NULL AS named, count(*) AS n, {_counts()}
  FROM asked JOIN answer USING (treatment_id)
  GROUP BY 1, 2, 3, 4
),
unfolded AS (
  SELECT local_month, unit_token, patient, named, unnest({_unfolded()}) AS cell
  FROM told
)
SELECT local_month, unit_token, patient, named, cell.indicator AS indicator,
       cell.hit AS hit, cell.known AS known, cell.unknown AS unknown
FROM unfolded WHERE cell.known + cell.unknown > 0
"""

# A patient seen in two units is one patient of the department.
_SERIES = """
WITH one AS (
  SELECT {by}, indicator, patient, bool_or(named) AS named, sum(hit) AS x,
         sum(known) AS k, sum(unknown) AS u
  FROM indicator_cell
  WHERE ($unit IS NULL OR unit_token = $unit)
    AND ($month IS NULL OR local_month = $month)
  GROUP BY ALL
)
SELECT {by}, indicator, sum(x)::DOUBLE AS count, sum(k)::DOUBLE AS known,
       sum(u)::DOUBLE AS unknown,
       count(*) FILTER (k > 0 AND named) AS patients,
       count(*) FILTER (k > 0) AS clusters,
       sum(k * k)::DOUBLE AS n2,
       coalesce(sum(x * x / k) FILTER (k > 0), 0)::DOUBLE AS x2
FROM one GROUP BY ALL ORDER BY ALL
"""


def treatment_series(replay: Replay, unit: str | None) -> pd.DataFrame:
    """Counts by month and indicator."""
    return replay.history(
        _SERIES.format(by="local_month"), {"unit": unit, "month": None}
    )


def unit_counts(replay: Replay, month: str) -> pd.DataFrame:
    """Counts of one month by unit and indicator."""
    return replay.frame(_SERIES.format(by="unit_token"), {"unit": None, "month": month})


MONTHS = """
SELECT local_month, count(*) AS treatments,
       count(DISTINCT patient_token) AS patients
FROM context JOIN treatment USING (treatment_id) GROUP BY 1 ORDER BY 1
"""

UNITS = """
SELECT unit_token, count(*) AS treatments, count(DISTINCT patient_token) AS patients
FROM asked WHERE unit_token IS NOT NULL GROUP BY 1 ORDER BY 1
"""

# A month is whole when the log goes on after it.
LAST_RECORD = """
SELECT max(timezone($zone, started_at AT TIME ZONE 'UTC')) AS last_at FROM treatment
"""

_MONTH_OF = "strftime(timezone($zone, {at} AT TIME ZONE 'UTC'), '%Y-%m')"

NOT_GIVEN = f"""
SELECT {_MONTH_OF.format(at="started_at")} AS local_month,
       coalesce(patient_token, treatment_id) AS patient,
       count(*) FILTER (status = 'not_given') AS x,
       count(*) FILTER (status IS NOT NULL) AS k,
       count(*) FILTER (status IS NULL) AS u,
       bool_or(patient_token IS NOT NULL) AS named
FROM treatment WHERE ($unit IS NULL OR unit_token = $unit) GROUP BY ALL
"""

FALLS = f"""
WITH pair AS (
  SELECT filter_id, ventilator_token, read_at, resistance_cmh2o_per_lps AS r,
         lag(resistance_cmh2o_per_lps) OVER one AS before
  FROM reading WHERE resistance_cmh2o_per_lps IS NOT NULL AND filter_id IS NOT NULL
  WINDOW one AS (PARTITION BY filter_id ORDER BY read_at, reading_id)
)
SELECT {_MONTH_OF.format(at="read_at")} AS local_month, filter_id AS patient,
       count(*) FILTER (before - r >= {float(FELL_CMH2O_PER_LPS)}
                        AND before - r >= {float(FELL_FRAC)} * before) AS x,
       count(*) AS k, 0 AS u, false AS named
FROM pair WHERE before IS NOT NULL GROUP BY ALL
"""

OVER_COUNT = """
WITH most AS (
  SELECT local_month, ventilator_token,
         max(unfiltered_since_check_count) AS highest
  FROM asked
  WHERE ventilator_token IS NOT NULL AND ($unit IS NULL OR unit_token = $unit)
  GROUP BY ALL
)
SELECT local_month, ventilator_token AS patient,
       (highest >= $limit)::INTEGER AS x,
       (highest IS NOT NULL)::INTEGER AS k, (highest IS NULL)::INTEGER AS u,
       false AS named
FROM most
"""

# One fault told twice on one day is one event.
SENSOR_EVENTS = f"""
WITH event AS (
  SELECT ventilator_token, checked_at AS at_time FROM sensor_check
  WHERE sensor = 'expiratory_flow' AND outcome IN ('failed', 'replaced')
  UNION ALL SELECT ventilator_token, happened_at FROM service_event
            WHERE kind = 'fault'
  UNION ALL SELECT ventilator_token, happened_at FROM incident
            WHERE sensor = 'expiratory_flow'
)
SELECT local_month, count(*) AS events FROM (
  SELECT DISTINCT ventilator_token,
         timezone($zone, at_time AT TIME ZONE 'UTC')::DATE AS on_day,
         {_MONTH_OF.format(at="at_time")} AS local_month
  FROM event)
GROUP BY 1
"""

# Treatments given up to each event; two events of one ventilator on one day are one.
EVENT_PLACES = """
WITH event AS (
  SELECT DISTINCT ventilator_token, date_trunc('day', at_time) AS on_day FROM (
    SELECT ventilator_token, checked_at AS at_time FROM sensor_check
    WHERE sensor = 'expiratory_flow' AND outcome IN ('failed', 'replaced')
    UNION ALL SELECT ventilator_token, happened_at FROM service_event
              WHERE kind = 'fault'
    UNION ALL SELECT ventilator_token, happened_at FROM incident
              WHERE sensor = 'expiratory_flow')
),
numbered AS (
  SELECT started_at, row_number() OVER (ORDER BY started_at, treatment_id) AS n
  FROM asked
)
SELECT e.on_day, coalesce(t.n, 0)::DOUBLE AS place
FROM event e ASOF LEFT JOIN numbered t ON e.on_day >= t.started_at
ORDER BY 1
"""

GIVEN_UNTIL = """
SELECT count(*) AS n FROM treatment WHERE started_at < $until
  AND status IS DISTINCT FROM 'not_given'
"""

PERCENTILES = [i / 100 for i in range(1, 100)]

DELIVERED = f"""
SELECT local_month, count(delivered_frac) AS known,
       count(*) - count(delivered_frac) AS unknown,
       count(DISTINCT patient_token) FILTER (delivered_frac IS NOT NULL) AS patients,
       quantile_cont(delivered_frac, {PERCENTILES}) AS levels
FROM asked WHERE ($unit IS NULL OR unit_token = $unit)
GROUP BY 1 ORDER BY 1
"""

ABOVE_MEDIAN = """
WITH middle AS (
  SELECT local_month, median(delivered_frac) AS m FROM asked
  WHERE ($unit IS NULL OR unit_token = $unit) GROUP BY 1
)
SELECT local_month, coalesce(patient_token, treatment_id) AS patient,
       count(*) FILTER (delivered_frac > m) AS x, count(*) AS k, 0 AS u,
       true AS named
FROM asked JOIN middle USING (local_month)
WHERE delivered_frac IS NOT NULL AND ($unit IS NULL OR unit_token = $unit)
GROUP BY ALL
"""

# Sums by patient, so that an interval can allow for patients who come back.
_BY_PATIENT = """
WITH one AS (
  SELECT local_month, coalesce(patient_token, treatment_id) AS patient,
         bool_or(patient_token IS NOT NULL) AS named,
         sum({amount}) AS y, count({amount}) AS k, count(*) - count({amount}) AS u
  FROM asked WHERE ($unit IS NULL OR unit_token = $unit) AND ({among})
  GROUP BY 1, 2
)
SELECT local_month, coalesce(sum(y), 0) AS total, sum(k)::DOUBLE AS known,
       sum(u)::DOUBLE AS unknown,
       count(*) FILTER (k > 0 AND named) AS patients,
       count(*) FILTER (k > 0) AS clusters,
       coalesce(sum(y * y), 0) AS y2, coalesce(sum(y * k), 0) AS yk,
       sum(k * k)::DOUBLE AS k2
FROM one GROUP BY 1 ORDER BY 1
"""
PERSON_MINUTES = _BY_PATIENT.format(
    among="generator IS DISTINCT FROM 'pmdi_spacer'",
    amount="CASE expiratory_filter WHEN 'present' THEN 0.0 WHEN 'absent'"
    " THEN people_count * CASE WHEN duration_min >= 0 THEN duration_min END END",
)
ROOM_UG = _BY_PATIENT.format(among="true", amount="1000 * nominal_dose_mg * room_frac")

# The Theil-Sen slope of each filter against how many treatments had gone through it:
# the median over pairs of readings. A filter belongs to the month of its last reading;
# of a filter read more often than that, the last readings count.
MOST_READINGS = 120
_RISES = f"""
CREATE TABLE IF NOT EXISTS filter_rise AS
WITH through AS (
  SELECT filter_in_use_id AS filter_id, started_at,
         row_number() OVER (PARTITION BY filter_in_use_id
                            ORDER BY started_at, treatment_id) AS n
  FROM asked WHERE filter_in_use_id IS NOT NULL
),
read AS (
  SELECT r.filter_id, r.read_at, r.reading_id,
         r.resistance_cmh2o_per_lps AS resistance, coalesce(t.n, 0)::DOUBLE AS n
  FROM (FROM reading WHERE resistance_cmh2o_per_lps IS NOT NULL
        AND filter_id IS NOT NULL) r
  ASOF LEFT JOIN through t ON t.filter_id = r.filter_id AND r.read_at >= t.started_at
  QUALIFY row_number() OVER (PARTITION BY r.filter_id
            ORDER BY r.read_at DESC, r.reading_id) <= {MOST_READINGS}
),
counted AS (
  SELECT filter_id, count(*) AS readings, max(read_at) AS last_at
  FROM read GROUP BY 1
),
sloped AS (
  SELECT a.filter_id, median((b.resistance - a.resistance) / (b.n - a.n)) AS slope
  FROM read a JOIN read b ON a.filter_id = b.filter_id AND b.n > a.n
  JOIN counted c ON c.filter_id = a.filter_id AND c.readings >= $enough
  GROUP BY 1
)
SELECT c.filter_id, c.readings, s.slope,
       {_MONTH_OF.format(at="c.last_at")} AS local_month
FROM counted c LEFT JOIN sloped s USING (filter_id)
"""

RISES = """
SELECT local_month, slope FROM filter_rise ORDER BY local_month, filter_id
"""


def make_rises(replay: Replay) -> None:
    """Makes the table ``filter_rise`` beside the replay, once."""
    enough = replay.policy.filters.readings_for_a_trend_count
    asked = {"enough": enough, "zone": replay.log.site_zone}
    with _MAKING:
        replay.log.cursor().execute(_RISES, asked)


FLAGS = """
SELECT rule_id, count(*) AS flags, count(DISTINCT treatment_id) AS treatments
FROM finding JOIN context USING (treatment_id)
JOIN treatment USING (treatment_id)
WHERE local_month = $month AND ($unit IS NULL OR unit_token = $unit)
GROUP BY 1 ORDER BY 1
"""

FLAG_MONTHS = """
SELECT finding_id, rule_id, local_month, unit_token
FROM finding JOIN context USING (treatment_id) JOIN treatment USING (treatment_id)
WHERE finding_id IN (SELECT unnest($ids::VARCHAR[]))
"""

DOSE_OF_MONTH = """
SELECT sum(nominal_dose_mg * delivered_frac) AS delivered_mg,
       sum(nominal_dose_mg * best_delivered_frac)
         FILTER (delivered_frac IS NOT NULL) AS best_mg,
       sum(nominal_dose_mg * forgone_frac) FILTER (difference_shown = 1)
         AS forgone_mg,
       count(*) FILTER (difference_shown = 1) AS shown,
       count(*) FILTER (difference_shown = 0) AS not_shown,
       count(*) FILTER (difference_shown IS NULL OR difference_shown < 0) AS unknown,
       sum(nominal_dose_mg) FILTER (delivered_frac IS NOT NULL) AS nominal_mg,
       sum(nominal_dose_mg * room_frac) AS room_mg,
       sum(nominal_dose_mg * room_low_frac) AS room_low_mg,
       sum(nominal_dose_mg * room_high_frac) AS room_high_mg,
       sum(nominal_dose_mg * sensor_side_frac) AS sensor_mg,
       sum(nominal_dose_mg * sensor_side_low_frac) AS sensor_low_mg,
       sum(nominal_dose_mg * sensor_side_high_frac) AS sensor_high_mg,
       count(nominal_dose_mg * room_frac) AS estimated, count(*) AS treatments
FROM asked
WHERE local_month = $month AND ($unit IS NULL OR unit_token = $unit)
"""

FORGONE = """
SELECT drug_class::VARCHAR AS drug_class, generator::VARCHAR AS generator,
       site::VARCHAR AS site, best_site AS best_site, count(*) AS treatments,
       count(DISTINCT patient_token) AS patients,
       median(delivered_frac) AS delivered_frac,
       median(best_delivered_frac) AS best_delivered_frac,
       median(best_ratio) AS best_ratio
FROM asked
WHERE local_month = $month AND ($unit IS NULL OR unit_token = $unit)
  AND difference_shown = 1
GROUP BY ALL HAVING count(*) >= $fewest AND count(DISTINCT patient_token) >= $patients
ORDER BY treatments DESC, generator, site LIMIT 8
"""

FILTERS_TO_LOOK_AT = """
SELECT filter_id, ventilator_token, filter_kind, state, installed_at, removed_at,
       readings_count, slope_per_h, time_to_limit_h, suspected_change_at
FROM filter_life
WHERE installed_at < $until AND coalesce(removed_at, $until) >= $since
  AND (state IN ('over_limit', 'near_limit', 'rising')
       OR suspected_change_at BETWEEN $since AND $until)
ORDER BY CASE state WHEN 'over_limit' THEN 0 WHEN 'near_limit' THEN 1
                    WHEN 'rising' THEN 2 ELSE 3 END,
         filter_id
LIMIT 200
"""

SENSORS_TO_LOOK_AT = """
WITH last AS (
  SELECT ventilator_token, max(unfiltered_since_check_count) AS unfiltered_count
  FROM asked WHERE local_month = $month GROUP BY 1
),
failed AS (
  SELECT ventilator_token, count(*) AS failed_count FROM sensor_check
  WHERE sensor = 'expiratory_flow' AND outcome = 'failed'
    AND checked_at >= $since AND checked_at < $until GROUP BY 1
)
SELECT coalesce(d.ventilator_token, l.ventilator_token, f.ventilator_token)
         AS ventilator_token,
       coalesce(d.drifting AND d.drift_started_at < $until
         AND coalesce(d.drift_ended_at, $until) > $since, false) AS drifting,
       d.drift_started_at, d.last_change_frac, l.unfiltered_count,
       coalesce(f.failed_count, 0) AS failed_count
FROM sensor_drift d
FULL JOIN last l ON l.ventilator_token = d.ventilator_token
FULL JOIN failed f
  ON f.ventilator_token = coalesce(d.ventilator_token, l.ventilator_token)
WHERE coalesce(d.drifting AND d.drift_started_at < $until
        AND coalesce(d.drift_ended_at, $until) > $since, false)
   OR l.unfiltered_count >= $limit OR f.failed_count > 0
ORDER BY 1 LIMIT 200
"""


def summed(parts: pd.DataFrame, by: Sequence[str] = ("local_month",)) -> pd.DataFrame:
    """Per-cluster counts (x, k, u) added up to one row a group, as ``_SERIES``."""
    known = parts[parts["k"] > 0]
    squares = known.assign(
        n2=known["k"].astype(float) ** 2,
        x2=known["x"].astype(float) ** 2 / known["k"],
        clusters=1,
        patients=known["named"].astype(int),
    )
    keys = list(by)
    columns = ["n2", "x2", "clusters", "patients"]
    sums = parts.groupby(keys)[["x", "k", "u"]].sum()
    sums.columns = pd.Index(["count", "known", "unknown"])
    more = squares.groupby(keys)[columns].sum()
    return sums.join(more).fillna(0.0).astype(float).reset_index()
