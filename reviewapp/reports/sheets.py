"""The figures behind each report as whole tables, one a sheet of its workbook."""

from __future__ import annotations

from collections.abc import Mapping

import pandas as pd

from engine.reviews.filters import Filters
from engine.reviews.incident import Incident
from engine.reviews.month import Month
from engine.reviews.month_lines import Line
from engine.reviews.month_units import Units
from engine.reviews.scenario import Comparison
from engine.reviews.topics import Topics

Tables = dict[str, pd.DataFrame]


def month_tables(month: Month, units: Mapping[str, Units]) -> Tables:
    """Indicators of the month, their months and units, and what stands behind them."""
    return {
        "Indicators": pd.DataFrame([_indicator(each) for each in month.lines]),
        "Months": _each({line.indicator.id: line.months for line in month.lines}),
        "Units": _each({key: found.table for key, found in units.items()}),
        "Flags": month.confirmations.rules,
        "Filters": month.filters,
        "Sensors": month.sensors,
        "Dose forgone": month.forgone,
        "Decisions": month.decisions,
    }


def topic_tables(review: Topics) -> Tables:
    """The ranking, its weights, and where each chosen topic was seen."""
    return {
        "Ranking": review.ranking,
        "Weights": review.weights,
        "Places": _each({each.topic.title: each.places for each in review.sheets}),
        "Rules": _each({each.topic.title: each.rules for each in review.sheets}),
    }


def filter_tables(review: Filters) -> Tables:
    """Every filter, survival by group, and why readings were not used."""
    return {
        "Filters": review.lives,
        "How long they last": review.groups,
        "Readings": review.doubts,
    }


def incident_tables(incident: Incident) -> Tables:
    """The whole timeline and every row the grades rest on."""
    conditions = [
        {
            "explanation": each.title,
            "grade": each.grade,
            "asked": condition.text,
            "role": condition.role,
            "holds": {None: "no record", True: "yes", False: "no"}[condition.holds],
            "rows": ", ".join(name for _, name in condition.rows),
        }
        for each in incident.explanations
        for condition in each.conditions
    ]
    return {
        "Timeline": incident.timeline,
        "Explanations": pd.DataFrame(conditions),
        "Ventilators": incident.burden.ventilators,
        "Actions": incident.actions,
        "Harm": incident.harm,
    }


def scenario_tables(comparison: Comparison) -> Tables:
    """Before and after: doses, flags, classes of drug, what was changed."""
    outcomes = [vars(each) for each in comparison.outcomes]
    return {
        "Outcomes": pd.DataFrame(outcomes),
        "By drug class": comparison.by_class,
        "Flags": comparison.rules,
        "Facts changed": comparison.facts,
        "Policy changed": comparison.settings,
    }


def _indicator(line: Line) -> dict[str, object]:
    return {
        "id": line.indicator.id,
        "indicator": line.indicator.title,
        "unit": line.indicator.unit,
        "counted_among": line.indicator.of,
        "value": line.value,
        "low": line.low,
        "high": line.high,
        "count": line.count,
        "known": line.known,
        "unknown": line.unknown,
        "patients": line.patients,
        "design_effect": line.design_effect,
        "change": line.change,
        "change_low": line.change_low,
        "change_high": line.change_high,
        "look": line.look,
        "start": line.indicator.start_words,
        "says": line.says,
    }


def _each(tables: Mapping[str, pd.DataFrame]) -> pd.DataFrame:
    """Tables of one shape in one, each row with what it belongs to."""
    named = [table.assign(of=key)[["of", *table]] for key, table in tables.items()]
    return pd.concat(named, ignore_index=True) if named else pd.DataFrame()
