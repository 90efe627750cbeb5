"""The questions the incident review asks of a replay, in SQL.

Events the ventilator wrote itself carry its own clock; what people typed carries the
site's. ``own_clock`` tells them apart, and only the former are moved by the offset.
"""

from __future__ import annotations

from engine.reviews.filter_rows import HUMID

RESTORED = "('passed', 'recalibrated', 'replaced')"
OWN_CLOCK = "('alarm', 'fault', 'self_test')"

# Liquid that went past the filter position to the sensors, in mL; see CAPTURED_ML.
_ML = "CASE WHEN generator = 'pmdi_spacer' THEN 0.0 ELSE {share} * fill_volume_ml END"
SENSOR_ML = _ML.format(share="sensor_side_frac")
SENSOR_LOW_ML = _ML.format(share="sensor_side_low_frac")
SENSOR_HIGH_ML = _ML.format(share="sensor_side_high_frac")

INCIDENT = """
SELECT incident_id, ventilator_token, happened_at, sensor::VARCHAR AS sensor,
       harm::VARCHAR AS harm, note
FROM incident WHERE incident_id = $incident_id
"""

INCIDENTS = """
SELECT incident_id, ventilator_token, happened_at, sensor::VARCHAR AS sensor,
       harm::VARCHAR AS harm, note
FROM incident ORDER BY happened_at DESC, incident_id
"""

REACH = """
SELECT min(at_time) AS first_at, max(at_time) AS last_at FROM (
  SELECT started_at AS at_time FROM treatment WHERE ventilator_token = $ventilator
  UNION ALL SELECT installed_at FROM filter_use WHERE ventilator_token = $ventilator
  UNION ALL SELECT checked_at FROM sensor_check WHERE ventilator_token = $ventilator
  UNION ALL SELECT happened_at FROM service_event
            WHERE ventilator_token = $ventilator)
"""

LAST_CHECK = f"""
SELECT check_id, checked_at, outcome::VARCHAR AS outcome
FROM sensor_check
WHERE ventilator_token = $ventilator AND sensor::VARCHAR = $sensor
  AND outcome IN {RESTORED} AND checked_at < $at
ORDER BY checked_at DESC, check_id LIMIT 1
"""

CHECKS = """
SELECT check_id, checked_at, outcome::VARCHAR AS outcome, inspired_volume_ml,
       exhaled_volume_ml,
       CASE WHEN inspired_volume_ml > 0
            THEN exhaled_volume_ml / inspired_volume_ml END AS ratio,
       EXISTS (SELECT 1 FROM treatment t
               WHERE t.ventilator_token = c.ventilator_token
                 AND t.gas_source = 'external' AND t.started_at <= c.checked_at
                 AND coalesce(t.ended_at, t.started_at + $gas_near)
                     >= c.checked_at) AS external_gas
FROM sensor_check c
WHERE ventilator_token = $ventilator AND sensor::VARCHAR = $sensor
ORDER BY checked_at, check_id
"""

OFFSETS = """
SELECT measured_at, offset_s FROM clock_offset
WHERE ventilator_token = $ventilator ORDER BY measured_at
"""

TREATMENTS = f"""
SELECT treatment_id, started_at, ended_at, patient_token, unit_token, drug,
       drug_class::VARCHAR AS drug_class, generator::VARCHAR AS generator,
       coalesce(expiratory_filter::VARCHAR, 'unknown') AS filter_state,
       gas_source::VARCHAR AS gas_source,
       humidification::VARCHAR AS humidification, {HUMID} AS humid,
       filter_in_use_id, sensor_side_frac, {SENSOR_ML} AS sensor_ml,
       {SENSOR_LOW_ML} AS sensor_low_ml, {SENSOR_HIGH_ML} AS sensor_high_ml,
       nominal_dose_mg * sensor_side_frac AS sensor_mg
FROM asked
WHERE ventilator_token = $ventilator AND started_at > $from AND started_at <= $to
ORDER BY started_at, treatment_id
"""

READINGS = """
SELECT r.reading_id, r.filter_id, r.read_at, r.resistance_cmh2o_per_lps, r.doubt
FROM reading r LEFT JOIN filter_use u USING (filter_id)
WHERE coalesce(r.ventilator_token, u.ventilator_token) = $ventilator
  AND r.read_at > $from AND r.read_at <= $to
ORDER BY r.read_at, r.reading_id
"""

FILTERS = """
SELECT filter_id, installed_at, removed_at, filter_kind::VARCHAR AS filter_kind
FROM filter_use
WHERE ventilator_token = $ventilator AND installed_at <= $to
  AND (removed_at IS NULL OR removed_at >= $from)
ORDER BY installed_at, filter_id
"""

EVENTS = f"""
SELECT event_id, happened_at, kind::VARCHAR AS kind, code, note,
       kind IN {OWN_CLOCK} AS own_clock
FROM service_event
WHERE ventilator_token = $ventilator AND happened_at > $from AND happened_at <= $to
ORDER BY happened_at, event_id
"""

KINDS_EVER = """
SELECT kind::VARCHAR AS kind, count(*) AS events_count FROM service_event
WHERE ventilator_token = $ventilator AND kind IS NOT NULL GROUP BY 1
"""

# Every ventilator, each since its own last passed check before the same moment.
BURDENS = f"""
WITH since AS (
  SELECT ventilator_token, max(checked_at) AS checked_at FROM sensor_check
  WHERE sensor::VARCHAR = $sensor AND outcome IN {RESTORED} AND checked_at < $at
  GROUP BY 1
),
treated AS (
  SELECT a.*, s.checked_at, {SENSOR_ML} AS sensor_ml,
         {SENSOR_LOW_ML} AS sensor_low_ml, {SENSOR_HIGH_ML} AS sensor_high_ml
  FROM asked a LEFT JOIN since s USING (ventilator_token)
  WHERE a.started_at <= $at AND a.ventilator_token IS NOT NULL
    AND (s.checked_at IS NULL OR a.started_at > s.checked_at)
),
known AS (
  SELECT ventilator_token FROM since
  UNION SELECT ventilator_token FROM asked WHERE ventilator_token IS NOT NULL
                                            AND started_at <= $at
)
SELECT k.ventilator_token, any_value(s.checked_at) AS checked_at,
       count(t.treatment_id) AS treatments_count,
       count(*) FILTER (t.expiratory_filter = 'present') AS present_count,
       count(*) FILTER (t.expiratory_filter = 'absent') AS absent_count,
       count(t.treatment_id) FILTER (t.expiratory_filter IS NULL) AS unknown_count,
       count(DISTINCT t.patient_token) AS patients_count,
       coalesce(sum(t.sensor_ml), 0) AS sensor_ml,
       coalesce(sum(t.sensor_low_ml), 0) AS sensor_low_ml,
       coalesce(sum(t.sensor_high_ml), 0) AS sensor_high_ml,
       count(t.treatment_id) FILTER (t.sensor_ml IS NULL) AS not_estimated_count
FROM known k LEFT JOIN since s USING (ventilator_token)
LEFT JOIN treated t USING (ventilator_token)
GROUP BY k.ventilator_token
ORDER BY sensor_ml DESC, absent_count DESC, k.ventilator_token
"""

# Windows of equal length counted back from the moment; 0 is the one before the fault.
WINDOWS = """
SELECT floor(date_diff('second', started_at, $at) / ($window_h * 3600.0))::BIGINT
         AS back,
       CASE WHEN bool_or(expiratory_filter = 'absent') THEN 1
            WHEN bool_or(expiratory_filter IS NULL) THEN -1 ELSE 0 END AS exposed,
       count(*) AS treatments_count, list(treatment_id) AS treatment_ids
FROM asked
WHERE ventilator_token = $ventilator AND started_at <= $at
GROUP BY 1 ORDER BY 1
"""

# Faults of the sensor anywhere in the log; those within one window of each other on
# one ventilator are one.
FAULTS = """
WITH all_faults AS (
  SELECT ventilator_token, happened_at AS at_time FROM incident
  WHERE sensor::VARCHAR = $sensor
  UNION ALL
  SELECT ventilator_token, checked_at FROM sensor_check
  WHERE sensor::VARCHAR = $sensor AND outcome = 'failed'
  UNION ALL
  SELECT ventilator_token, happened_at FROM service_event WHERE kind = 'fault'
),
spaced AS (
  SELECT *, lag(at_time) OVER (PARTITION BY ventilator_token ORDER BY at_time)
    AS before_at
  FROM all_faults
)
SELECT ventilator_token, at_time FROM spaced
WHERE before_at IS NULL
   OR date_diff('second', before_at, at_time) > $window_h * 3600.0
ORDER BY at_time, ventilator_token
"""

# For each fault: was an unfiltered treatment given in the window before it, and in
# the nearest earlier window of the same ventilator in which a treatment was given?
PAIRS = f"""
WITH fault AS ({FAULTS}),
placed AS (
  SELECT f.ventilator_token, f.at_time,
         floor(date_diff('second', a.started_at, f.at_time) / ($window_h * 3600.0))
           AS back,
         CASE WHEN bool_or(a.expiratory_filter = 'absent') THEN 1
              WHEN bool_or(a.expiratory_filter IS NULL) THEN -1 ELSE 0 END AS exposed
  FROM fault f JOIN asked a
    ON a.ventilator_token = f.ventilator_token AND a.started_at <= f.at_time
   AND a.started_at > f.at_time - to_hours(($window_h * $windows)::BIGINT)
  GROUP BY ALL
)
SELECT ventilator_token, at_time,
       max(exposed) FILTER (back = 0) AS hazard,
       arg_min(exposed, back) FILTER (back > 0) AS control
FROM placed GROUP BY ALL ORDER BY at_time, ventilator_token
"""

SENSOR_AGES = """
SELECT ventilator_token, check_id,
       date_diff('second', checked_at, $at) / 3600.0 AS age_h
FROM (SELECT *, row_number() OVER (PARTITION BY ventilator_token
                                   ORDER BY checked_at DESC) AS place
      FROM sensor_check
      WHERE sensor::VARCHAR = $sensor AND outcome = 'replaced' AND checked_at < $at)
WHERE place = 1
"""

PATIENTS = """
SELECT patient_token, count(*) AS treatments_count,
       count(*) FILTER (expiratory_filter = 'absent') AS absent_count,
       count(*) FILTER (expiratory_filter IS NULL) AS unknown_count,
       min(started_at) AS first_at, max(started_at) AS last_at
FROM asked
WHERE ventilator_token = $ventilator AND started_at > $from AND started_at <= $to
  AND patient_token IS NOT NULL
GROUP BY 1 ORDER BY first_at, patient_token
"""

# Since the sensor was last put right or cleaned, so far as the log says.
UNFILTERED_SINCE_RESET = """
WITH reset AS (
  SELECT max(at_time) AS at_time FROM (
    SELECT checked_at AS at_time FROM sensor_check
    WHERE ventilator_token = $ventilator AND sensor::VARCHAR = $sensor
      AND outcome IN ('recalibrated', 'replaced') AND checked_at < $onset
    UNION ALL
    SELECT happened_at FROM service_event
    WHERE ventilator_token = $ventilator AND kind = 'cleaning' AND happened_at < $onset)
)
SELECT min(started_at) FILTER (expiratory_filter = 'absent') AS first_at,
       count(*) FILTER (expiratory_filter IS NULL) AS unknown_count,
       count(*) AS treatments_count
FROM asked, reset
WHERE ventilator_token = $ventilator AND started_at <= $at
  AND (reset.at_time IS NULL OR started_at > reset.at_time)
"""
