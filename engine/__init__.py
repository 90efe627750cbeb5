"""Aerosol Treatment Review without a screen: open a log, replay it, ask the reviews.

    from engine import load_policy, open_log, replay, review_month
    month = review_month(replay(open_log("log.duckdb"), load_policy()), "2026-10")
    print(month.sentence)

Everything here looks back on past treatments. Findings need clinical confirmation;
local policy and licensed practice decide.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

from engine.journal import open_journal
from engine.log import open_log
from engine.policy import load_policy
from engine.replay import load_scenario, replay

if TYPE_CHECKING:
    from engine.reviews.filters import review_filters
    from engine.reviews.incident import review_incident
    from engine.reviews.month import review_month
    from engine.reviews.scenario import compare_scenarios
    from engine.reviews.topics import review_topics

# Reviews are loaded when first asked for; statistics take a while to load.
_REVIEWS = {
    "review_month": "month",
    "review_topics": "topics",
    "review_incident": "incident",
    "review_filters": "filters",
    "compare_scenarios": "scenario",
}

__all__ = [
    "compare_scenarios",
    "load_policy",
    "load_scenario",
    "open_journal",
    "open_log",
    "replay",
    "review_filters",
    "review_incident",
    "review_month",
    "review_topics",
]


def __getattr__(name: str) -> Any:
    if name not in _REVIEWS:
        raise AttributeError(f"module 'engine' has no attribute {name!r}")
    return getattr(import_module(f"engine.reviews.{_REVIEWS[name]}"), name)
