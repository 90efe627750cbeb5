"""The questions a comparison asks of two replays of one log, in SQL.

``other`` is the table of the changed replay, put beside the replay as it was.
"""

from __future__ import annotations

OUTCOMES = ("delivered", "room", "sensor_side")

OTHER = """
SELECT treatment_id, generator::VARCHAR AS generator, site::VARCHAR AS site,
       synchrony::VARCHAR AS synchrony, hme_state::VARCHAR AS hme_state,
       expiratory_filter::VARCHAR AS expiratory_filter, nominal_dose_mg,
       delivered_frac, delivered_low_frac, delivered_high_frac, room_frac,
       room_low_frac, room_high_frac, sensor_side_frac, sensor_side_low_frac,
       sensor_side_high_frac
FROM asked
"""

PERIOD = """
  ($since IS NULL OR local_month >= $since)
  AND ($until IS NULL OR local_month <= $until)
"""


def _sums(name: str) -> str:
    """Mean share of the dose, each treatment counting the same: of all compared, and of
    those that would differ."""
    parts = []
    differs = f"in_both AND abs(a.{name}_frac - b.{name}_frac) > 1e-9"
    for end in ("", "_low", "_high"):
        for side, of in (("before", "a"), ("after", "b")):
            value = f"{of}.{name}{end}_frac"
            parts += [
                f"avg({value}) FILTER (in_both) AS {name}{end}_{side}",
                f"avg({value}) FILTER ({differs}) AS {name}{end}_{side}_where",
            ]
    parts.append(f"count(*) FILTER ({differs}) AS {name}_changed")
    return ", ".join(parts)


DOSES = f"""
WITH paired AS (
  SELECT a, b,
         a.delivered_frac IS NOT NULL AND b.delivered_frac IS NOT NULL AS in_both
  FROM asked a JOIN other b USING (treatment_id) WHERE {PERIOD}
)
SELECT count(*) AS treatments, count(*) FILTER (in_both) AS compared,
       count(DISTINCT a.patient_token) AS patients,
       count(*) FILTER (a.delivered_frac IS NULL AND b.delivered_frac IS NOT NULL)
         AS became_known,
       count(*) FILTER (a.delivered_frac IS NOT NULL AND b.delivered_frac IS NULL)
         AS became_unknown,
       min(a.local_month) AS first_month, max(a.local_month) AS last_month,
       median(a.delivered_frac) FILTER (in_both) AS median_before_frac,
       median(b.delivered_frac) FILTER (in_both) AS median_after_frac,
       {", ".join(_sums(name) for name in OUTCOMES)}
FROM paired
"""

BY_CLASS = f"""
SELECT a.drug_class::VARCHAR AS drug_class, count(*) AS treatments,
       count(DISTINCT a.patient_token) AS patients,
       sum(a.nominal_dose_mg * a.delivered_frac) AS before_mg,
       sum(a.nominal_dose_mg * b.delivered_frac) AS after_mg,
       median(a.delivered_frac) AS before_frac,
       median(b.delivered_frac) AS after_frac
FROM asked a JOIN other b USING (treatment_id)
WHERE {PERIOD} AND a.delivered_frac IS NOT NULL AND b.delivered_frac IS NOT NULL
GROUP BY 1 HAVING count(*) >= $fewest AND count(DISTINCT a.patient_token) >= $patients
ORDER BY treatments DESC
"""

ANSWERS = f"""
SELECT rule_id, answer, count(*) AS treatments FROM (
  UNPIVOT (SELECT answer.* EXCLUDE (treatment_id)
           FROM answer JOIN context USING (treatment_id) WHERE {PERIOD})
  ON COLUMNS(*) INTO NAME rule_id VALUE answer)
GROUP BY 1, 2
"""

FILTERED = f"""
SELECT ventilator_token, epoch(started_at) / 3600.0 AS started_h,
       drug_class::VARCHAR AS drug_class, coalesce(drug, '') AS drug,
       expiratory_filter IS NULL AS unsaid
FROM asked
WHERE ventilator_token IS NOT NULL AND {PERIOD}
  AND (expiratory_filter = 'present' OR expiratory_filter IS NULL)
  AND circuit IS DISTINCT FROM 'single_limb'
ORDER BY ventilator_token, started_at, treatment_id
"""

FILTERS_LOGGED = """
SELECT count(*) AS filters FROM filter_use
WHERE strftime(timezone($zone, installed_at AT TIME ZONE 'UTC'), '%Y-%m')
      BETWEEN $since AND $until
"""
