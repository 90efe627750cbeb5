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

if TYPE_CHECKING:
    from engine.journal import open_journal
    from engine.log import open_log
    from engine.policy import load_policy
    from engine.replay import load_scenario, replay
    from engine.reviews.filters import review_filters
    from engine.reviews.incident import review_incident
    from engine.reviews.month import review_month
    from engine.reviews.scenario import compare_scenarios
    from engine.reviews.topics import review_topics

# Loaded when first asked for: a word of the columns must not cost the whole house.
_FACE = {
    "open_log": "engine.log",
    "open_journal": "engine.journal",
    "load_policy": "engine.policy",
    "load_scenario": "engine.replay",
    "replay": "engine.replay",
    "review_month": "engine.reviews.month",
    "review_topics": "engine.reviews.topics",
    "review_incident": "engine.reviews.incident",
    "review_filters": "engine.reviews.filters",
    "compare_scenarios": "engine.reviews.scenario",
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
    if name not in _FACE:
        raise AttributeError(f"module 'engine' has no attribute {name!r}")
    return getattr(import_module(_FACE[name]), name)
