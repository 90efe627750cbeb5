"""The joint of the house: columns to physics to answers to findings."""

from engine.replay.run import Replay, replay, replay_to
from engine.replay.scenario import Scenario, load_scenario, scenario_from

__all__ = [
    "Replay",
    "Scenario",
    "load_scenario",
    "replay",
    "replay_to",
    "scenario_from",
]
