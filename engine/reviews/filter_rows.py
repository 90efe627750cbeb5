"""The questions the filter review asks of a replay, in SQL."""

from __future__ import annotations

# What a filter caught by then: the balance's share of the fill, in mL of liquid. An
# inhaler brings no liquid to speak of. Unknown fill stays unknown and is counted.
CAPTURED_ML = """
CASE WHEN generator = 'pmdi_spacer' THEN 0.0 ELSE filter_frac * fill_volume_ml END
"""

# Whether the gas that reached the filter was humid: 1, 0 or NULL where not recorded.
HUMID = """
CASE WHEN humidification = 'heated_humidifier'
       THEN CASE WHEN heated_humidifier_on THEN 1.0
                 WHEN NOT heated_humidifier_on THEN 0.0 END
     WHEN humidification IN ('hme', 'hmef', 'none') THEN 0.0 END
"""

# The last moment the log knows of; "still in use" means then.
AS_AT = """
SELECT max(at_time) AS as_at FROM (
  SELECT max(started_at) AS at_time FROM treatment
  UNION ALL SELECT max(read_at) FROM filter_reading
  UNION ALL SELECT max(installed_at) FROM filter_use
  UNION ALL SELECT max(checked_at) FROM sensor_check
  UNION ALL SELECT max(happened_at) FROM service_event)
"""

_ON_FILTER = f"""
SELECT a.filter_in_use_id AS filter_id, a.treatment_id, a.started_at, a.drug,
       a.drug_class::VARCHAR AS drug_class, a.generator::VARCHAR AS generator,
       a.humidification::VARCHAR AS humidification, a.patient_token,
       a.ventilator_token, a.filter_frac,
       {CAPTURED_ML} AS captured_ml, {HUMID} AS humid
FROM asked a WHERE a.filter_in_use_id IS NOT NULL
"""

TREATMENTS_OF = f"""
SELECT o.*, date_diff('second', u.installed_at, o.started_at) / 3600.0 AS hours_h
FROM ({_ON_FILTER}) o JOIN filter_use u USING (filter_id)
WHERE o.filter_id = $filter_id
ORDER BY o.started_at, o.treatment_id
"""


def _most_often(column: str) -> str:
    """The word logged most often; unknown where two come equally often."""
    counts = f"histogram({column}::VARCHAR)"
    most = f"list_max(map_values({counts}))"
    at_most = f"list_filter(map_entries({counts}), lambda e: e.value = {most})"
    return f"CASE WHEN len({at_most}) = 1 THEN ({at_most})[1].key END"


# Each life with what was treated through it, and what about it cannot be trusted.
LIVES = f"""
WITH treated AS (
  SELECT filter_id, count(*) AS treatments_count,
         count(DISTINCT patient_token) AS patients_count,
         sum(captured_ml) AS captured_ml,
         count(*) FILTER (captured_ml IS NULL) AS captured_unknown_count,
         count(*) FILTER (humid IS NULL) AS humid_unknown_count,
         {_most_often("drug_class")} AS drug_class,
         {_most_often("humidification")} AS humidification,
         bool_or(o.ventilator_token <> u.ventilator_token) AS elsewhere
  FROM ({_ON_FILTER}) o JOIN filter_use u USING (filter_id) GROUP BY filter_id
),
overlap AS (
  SELECT DISTINCT a.filter_id FROM filter_use a JOIN filter_use b
    ON a.ventilator_token = b.ventilator_token AND a.filter_id <> b.filter_id
   AND a.installed_at < coalesce(b.removed_at, TIMESTAMP '9999-01-01')
   AND b.installed_at < coalesce(a.removed_at, TIMESTAMP '9999-01-01')
),
read_off AS (
  SELECT r.filter_id, count(*) AS all_readings_count,
         count(*) FILTER (resistance_cmh2o_per_lps IS NULL) AS doubted_count,
         max(read_at) AS last_read_at,
         bool_or(r.ventilator_token <> u.ventilator_token) AS elsewhere
  FROM reading r JOIN filter_use u USING (filter_id) GROUP BY r.filter_id
)
SELECT l.*, u.removal_reason, u.new_resistance_cmh2o_per_lps,
       u.removed_at IS NULL AS in_use,
       date_diff('second', u.installed_at, coalesce(u.removed_at, $as_at)) / 3600.0
         AS in_use_h,
       coalesce(t.treatments_count, 0) AS treatments_count,
       coalesce(t.patients_count, 0) AS patients_count, t.captured_ml,
       coalesce(t.captured_unknown_count, 0) AS captured_unknown_count,
       coalesce(t.humid_unknown_count, 0) AS humid_unknown_count,
       t.drug_class, t.humidification,
       coalesce(d.all_readings_count, 0) AS all_readings_count,
       coalesce(d.doubted_count, 0) AS doubted_count, d.last_read_at,
       o.filter_id IS NOT NULL AS overlaps,
       coalesce(t.elsewhere, false) OR coalesce(d.elsewhere, false) AS elsewhere
FROM filter_life l JOIN filter_use u USING (filter_id)
LEFT JOIN treated t USING (filter_id) LEFT JOIN overlap o USING (filter_id)
LEFT JOIN read_off d USING (filter_id)
ORDER BY l.filter_id
"""

READINGS = """
SELECT filter_id, reading_id, read_at, flow_lpm, pressure_drop_cmh2o,
       resistance_cmh2o_per_lps, doubt,
       date_diff('second', u.installed_at, r.read_at) / 3600.0 AS hours_h
FROM reading r JOIN filter_use u USING (filter_id)
WHERE list_contains($filters, filter_id)
ORDER BY filter_id, read_at, reading_id
"""

# What had gathered on a filter at each reading. Between two treatments the humidity
# of the last one is taken to go on; before the first, that of the first.
GATHERED = f"""
WITH o AS ({_ON_FILTER}),
step AS (
  SELECT o.*, u.installed_at,
         row_number() OVER each AS place,
         lead(o.started_at) OVER each AS next_at
  FROM o JOIN filter_use u USING (filter_id)
  WHERE o.started_at >= u.installed_at
  WINDOW each AS (PARTITION BY filter_id ORDER BY o.started_at, o.treatment_id)
),
gathered AS (
  SELECT filter_id, started_at, humid,
         sum(coalesce(captured_ml, 0)) OVER upto AS captured_ml,
         count(*) FILTER (captured_ml IS NULL) OVER upto AS captured_unknown_count,
         count(*) FILTER (humid IS NULL) OVER upto AS humid_unknown_count,
         count(*) OVER upto AS treatments_count,
         sum(CASE WHEN place = 1 THEN coalesce(humid, 0) *
               date_diff('second', installed_at, started_at) / 3600.0 ELSE 0 END)
           OVER upto
         + coalesce(sum(coalesce(humid, 0) *
               date_diff('second', started_at, next_at) / 3600.0) OVER earlier, 0)
           AS humid_h
  FROM step
  WINDOW upto AS (PARTITION BY filter_id ORDER BY place
                  ROWS UNBOUNDED PRECEDING),
         earlier AS (PARTITION BY filter_id ORDER BY place
                     ROWS BETWEEN UNBOUNDED PRECEDING AND 1 PRECEDING)
)
SELECT r.filter_id, r.reading_id, r.read_at,
       date_diff('second', u.installed_at, r.read_at) / 3600.0 AS hours_h,
       r.resistance_cmh2o_per_lps, g.treatments_count,
       coalesce(g.captured_ml, 0) AS captured_ml,
       coalesce(g.captured_unknown_count, 0) AS captured_unknown_count,
       coalesce(g.humid_unknown_count, 0) AS humid_unknown_count,
       g.humid_h + coalesce(g.humid, 0) *
         date_diff('second', g.started_at, r.read_at) / 3600.0 AS humid_h
FROM reading r JOIN filter_use u USING (filter_id)
ASOF LEFT JOIN gathered g
  ON g.filter_id = r.filter_id AND r.read_at >= g.started_at
WHERE r.resistance_cmh2o_per_lps IS NOT NULL AND r.read_at >= u.installed_at
ORDER BY r.filter_id, r.read_at, r.reading_id
"""

# When each filter reached the limit, or how long it was watched without.
ENDINGS = """
WITH first_over AS (
  SELECT r.filter_id,
         min(r.read_at) FILTER (r.resistance_cmh2o_per_lps > $limit) AS over_at,
         max(r.read_at) AS last_at
  FROM reading r WHERE r.resistance_cmh2o_per_lps IS NOT NULL GROUP BY r.filter_id
)
SELECT u.filter_id, f.over_at IS NOT NULL AS reached,
       date_diff('second', u.installed_at, coalesce(f.over_at, f.last_at)) / 3600.0
         AS watched_h
FROM filter_use u JOIN first_over f USING (filter_id)
"""

DOUBT_COUNTS = """
SELECT coalesce(doubt, '') AS doubt, count(*) AS readings_count,
       count(*) FILTER (filter_id IS NULL) AS without_filter_count
FROM reading GROUP BY 1 ORDER BY readings_count DESC, doubt
"""
