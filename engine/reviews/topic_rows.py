"""The questions the topic review asks of a replay, in SQL."""

from __future__ import annotations

from engine.batch import COLUMNS
from engine.columns import FRACTIONS
from engine.reviews.topic_catalogue import TOPICS

PERIOD = """
  ($since IS NULL OR local_month >= $since)
  AND ($until IS NULL OR local_month <= $until)
  AND ($unit IS NULL OR unit_token = $unit)
"""

# One row for each patient and set of rules fired; how many treatments have it.
PATTERNS = f"""
WITH fired AS (
  SELECT treatment_id, string_agg(rule_id, '|' ORDER BY rule_id) AS rules
  FROM finding GROUP BY 1
)
SELECT coalesce(patient_token, treatment_id) AS patient, rules,
       count(*) AS treatments
FROM asked JOIN fired USING (treatment_id)
WHERE {PERIOD}
GROUP BY 1, 2
"""

TOTALS = f"""
SELECT count(*) AS treatments, count(DISTINCT patient_token) AS patients,
       min(local_month) AS first_month, max(local_month) AS last_month
FROM asked WHERE {PERIOD}
"""


def _any(rules: tuple[str, ...], word: str) -> str:
    return f"('{word}' IN ({', '.join(rules)}))"


def _states() -> str:
    """For each topic 1 where a rule of it fires, else -1 where one cannot be told, else
    0; NULL where none was asked."""
    parts = []
    for topic in TOPICS:
        fires, blurred, silent = (
            _any(topic.rules, word) for word in ("fires", "cannot_tell", "silent")
        )
        parts.append(
            f"CASE WHEN {fires} THEN 1 WHEN {blurred} THEN -1 WHEN {silent} THEN 0"
            f" END AS {topic.id}"
        )
    return ", ".join(parts)


def _sums() -> str:
    parts = []
    for topic in TOPICS:
        parts += [
            f"count(*) FILTER ({topic.id} = 1) AS {topic.id}_flagged",
            f"count(*) FILTER ({topic.id} = -1) AS {topic.id}_unknown",
            f"count({topic.id}) AS {topic.id}_asked",
            f"count(DISTINCT patient_token) FILTER ({topic.id} IS NOT NULL)"
            f" AS {topic.id}_patients",
        ]
    return ", ".join(parts)


_STATED = f"""
WITH stated AS (
  SELECT unit_token, shift::VARCHAR AS shift, patient_token, started_at, local_month,
         {_states()}
  FROM asked JOIN answer USING (treatment_id)
  WHERE {PERIOD}
)
"""

PLACES = f"""{_STATED}
SELECT coalesce(unit_token, 'unknown') AS unit_token, shift, {_sums()}
FROM stated GROUP BY 1, 2 ORDER BY 1, 2
"""

_WEEKLY = ", ".join(
    f"count(*) FILTER ({topic.id} = 1) AS {topic.id}_flagged,"
    f" count({topic.id}) AS {topic.id}_asked"
    for topic in TOPICS
)

WEEKS = f"""{_STATED}
SELECT date_trunc('week', timezone($zone, started_at AT TIME ZONE 'UTC'))::DATE
         AS week,
       coalesce(unit_token, 'unknown') AS unit_token, {_WEEKLY}
FROM stated GROUP BY 1, 2 ORDER BY 1, 2
"""

COUNTS = f"""
SELECT rule_id, count(*) AS flags, count(DISTINCT treatment_id) AS treatments,
       count(DISTINCT patient_token) AS patients
FROM finding JOIN asked USING (treatment_id)
WHERE {PERIOD} GROUP BY 1 ORDER BY 1
"""

# What an example may show: the setup and the estimate, nothing that says who or when.
EXAMPLE_COLUMNS = (
    *("drug", "drug_class", "nominal_dose_mg", "fill_volume_ml", "generator"),
    *("synchrony", "gas_source", "generator_gas_lpm", "actuations_count", "mmad_um"),
    *("gsd", "circuit", "site", "distance_from_wye_cm", "humidification"),
    *("heated_humidifier_on", "hme_state", "humidification_resumed", "airway"),
    *("tube_id_mm", "mode", "spontaneous_breaths", "bias_flow_lpm"),
    *("tidal_volume_ml", "respiratory_rate_bpm", "inspiratory_time_s"),
    *("inspiratory_pause_s", "peak_inspiratory_flow_lpm", "peep_cmh2o"),
    *("expiratory_filter", "shift", "duration_min", "filter_age_h"),
    *("filter_reading_cmh2o_per_lps", "filter_trend", "filter_reading_in_window"),
    *("filter_reading_has_flow", "sensor_last_outcome"),
    *("unfiltered_since_check_count", "volume_drifting"),
)
_ESTIMATES = ", ".join(
    f"{name}_frac, {name}_low_frac, {name}_high_frac" for name in FRACTIONS
)

_SHOWN = ", ".join(
    f"{name}::VARCHAR AS {name}" if COLUMNS[name].kind == "word" else name
    for name in EXAMPLE_COLUMNS
)

# Two setups that stand for many: the commonest flagged setup, then the commonest at
# another site or unit; never one that fewer patients share than a cell needs.
EXAMPLES = f"""
WITH flagged AS (
  SELECT DISTINCT treatment_id FROM finding
  WHERE list_contains($rules::VARCHAR[], rule_id)
),
own AS (
  SELECT a.*, count(*) OVER alike AS alike_count,
         count(DISTINCT patient_token) OVER alike AS alike_patients,
         row_number() OVER (
           PARTITION BY generator, site, humidification, hme_state,
                        expiratory_filter
           ORDER BY (delivered_frac IS NULL)::INTEGER,
                    abs(coalesce(tidal_volume_ml, 0) - $usual_ml), treatment_id
         ) AS place
  FROM asked a SEMI JOIN flagged USING (treatment_id)
  WHERE {PERIOD}
  WINDOW alike AS (PARTITION BY generator, site, humidification, hme_state,
                   expiratory_filter)
)
SELECT {_SHOWN},
       treatment_id, filter_in_use_id, alike_count, alike_patients, delivered_frac,
       delivered_low_frac, delivered_high_frac, best_site, best_delivered_frac,
       best_ratio, difference_shown, {_ESTIMATES}
FROM own WHERE place = 1 AND alike_patients >= $patients
ORDER BY alike_count DESC, generator, site LIMIT $most
"""

USUAL_VOLUME = f"""
SELECT median(tidal_volume_ml) AS usual_ml FROM asked WHERE {PERIOD}
"""
