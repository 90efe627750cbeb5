"""One report as a file, from the command line or a script."""

from __future__ import annotations

from collections.abc import Callable
from datetime import datetime
from pathlib import Path

from engine.errors import (
    OutputUnwritable,
    ScenarioInvalid,
    SharingRefused,
    UnknownId,
)
from engine.journal import Journal, open_journal
from engine.log import open_log
from engine.policy import load_policy
from engine.replay import Replay, Scenario, replay
from engine.replay.run import Progress
from engine.reviews.filters import review_filters
from engine.reviews.incident import incidents, review_incident
from engine.reviews.incident_scenario import other_history
from engine.reviews.month import Month, last_whole_month, review_month
from engine.reviews.month_units import Units, every_units
from engine.reviews.scenario import Comparison, compare_scenarios
from engine.reviews.sessions import sessions_of
from engine.reviews.topics import Example, review_topics
from reviewapp.drawings.circuit import circuit_svg, drawing_of
from reviewapp.drawings.svg import LIGHT
from reviewapp.paper.files import check_ending, file_of
from reviewapp.report import Report, banner_of
from reviewapp.reports.filters import filter_report
from reviewapp.reports.incident import incident_report
from reviewapp.reports.month import month_marks, month_report
from reviewapp.reports.scenario import scenario_report
from reviewapp.reports.shared import (
    shared_banner,
    shared_month_report,
    shared_scenario_report,
    shared_topic_report,
)
from reviewapp.reports.topics import Draw, topic_report


def write_report(
    kind: str,
    log_path: Path,
    out: Path,
    *,
    made_at: datetime,
    policy: str = "common_practice",
    scenario: Scenario | None = None,
    month: str | None = None,
    incident_id: str | None = None,
    journal: Path | None = None,
    shared: bool = False,
    progress: Progress | None = None,
) -> None:
    """Writes the report of that kind.

    ``shared``  a copy without dates, devices, patients and small groups

    Raises   an EngineError in one line: a log, policy, scenario, month or incident that
             is not there, or an ending of ``out`` that no report has.
    """
    ending = out.suffix.lower()
    check_ending(ending)
    if not out.parent.is_dir() or out.is_dir():
        raise OutputUnwritable(f"{out} cannot be written: not a file in a folder")
    if shared and kind not in _SHARED:
        raise SharingRefused(
            f"a report on {kind} names devices and days: there is no copy for sharing;"
            f" there is one of {', '.join(_SHARED)}"
        )
    if journal is not None and not journal.exists():
        raise UnknownId(f"there is no journal {journal}")
    beside = log_path.with_name(f"{log_path.name}.journal.jsonl")
    book = open_journal(journal or beside)
    with open_log(log_path) as log:
        done = replay(log, load_policy(policy), _as_facts(kind, scenario), progress)
        try:
            report = (_SHARED if shared else _REPORTS)[kind](
                done, book, month=month, incident_id=incident_id, scenario=scenario
            )
            banner = banner_of(done, log_path.name, made_at, book.head)
            if shared:
                banner = shared_banner(banner)
        finally:
            done.close()
    made = file_of(report, banner, ending)
    try:
        building = out.with_name(f".{out.name}.building")
        building.write_bytes(made)
        building.replace(out)
    except OSError as problem:
        raise OutputUnwritable(f"{out} cannot be written: {problem}") from None


def _as_facts(kind: str, scenario: Scenario | None) -> Scenario | None:
    """A scenario report compares; every other kind is written under the scenario."""
    return None if kind == "scenario" else scenario


def _month(done: Replay, book: Journal, **asked) -> Report:
    review, units = _month_asked(done, book, asked["month"])
    return month_report(review, units, month_marks(sessions_of(done, book)))


def _shared_month(done: Replay, book: Journal, **asked) -> Report:
    return shared_month_report(done, *_month_asked(done, book, asked["month"]))


def _month_asked(
    done: Replay, book: Journal, month: str | None
) -> tuple[Month, dict[str, Units]]:
    name = last_whole_month(done) if month is None else month
    return review_month(done, name, book), every_units(done, name)


def _topics(done: Replay, book: Journal, **asked) -> Report:
    month = asked["month"]
    return topic_report(review_topics(done, month, month, book), _drawn(done))


def _shared_topics(done: Replay, book: Journal, **asked) -> Report:
    month = asked["month"]
    review = review_topics(done, month, month, book)
    return shared_topic_report(done, review, _drawn(done))


def _drawn(done: Replay) -> Draw:
    def draw(example: Example) -> str:
        return circuit_svg(drawing_of(example.row, done.policy), LIGHT, compact=True)

    return draw


def _filters(done: Replay, book: Journal, **asked) -> Report:
    return filter_report(review_filters(done))


def _incident(done: Replay, book: Journal, **asked) -> Report:
    named = asked["incident_id"]
    if named is None:
        known = ", ".join(incidents(done)["incident_id"].head(20)) or "none"
        raise UnknownId(f"name an incident with --incident; the log has {known}")
    review = review_incident(done, named, book)
    limit = done.policy.filters.limit_cmh2o_per_lps
    return incident_report(review, limit, other_history(done, review))


def _scenario(done: Replay, book: Journal, **asked) -> Report:
    return scenario_report(_compared(done, asked["scenario"], asked["month"]))


def _shared_scenario(done: Replay, book: Journal, **asked) -> Report:
    compared = _compared(done, asked["scenario"], asked["month"])
    return shared_scenario_report(done, compared)


def _compared(done: Replay, scenario: Scenario | None, month: str | None) -> Comparison:
    if scenario is None:
        raise ScenarioInvalid("name a scenario with --scenario")
    period = (month, month)
    return compare_scenarios(done.log, done.policy, scenario, period, before=done)


_REPORTS: dict[str, Callable[..., Report]] = {
    "month": _month,
    "topics": _topics,
    "filters": _filters,
    "incident": _incident,
    "scenario": _scenario,
}

_SHARED: dict[str, Callable[..., Report]] = {
    "month": _shared_month,
    "topics": _shared_topics,
    "scenario": _shared_scenario,
}
