"""One report as a file, from the command line or a script."""

from __future__ import annotations

from collections.abc import Callable
from datetime import datetime
from pathlib import Path

from engine.errors import ScenarioInvalid, SourceUnreadable, UnknownId
from engine.journal import Journal, open_journal
from engine.log import open_log
from engine.policy import load_policy
from engine.replay import Replay, Scenario, replay
from engine.replay.run import Progress
from engine.reviews.figures import month_words
from engine.reviews.filters import review_filters
from engine.reviews.incident import incidents, review_incident
from engine.reviews.incident_scenario import other_history
from engine.reviews.month import last_whole_month, review_month
from engine.reviews.month_units import every_units
from engine.reviews.scenario import compare_scenarios
from engine.reviews.sessions import sessions_of
from engine.reviews.topics import Example, review_topics
from reviewapp.circuit_drawing import circuit_svg, drawing_of
from reviewapp.report import Sections, banner_of, page
from reviewapp.reports.filters import filter_sections
from reviewapp.reports.incident import incident_sections
from reviewapp.reports.month import month_marks, month_sections
from reviewapp.reports.scenario import scenario_sections
from reviewapp.reports.topics import topic_sections
from reviewapp.svg import LIGHT


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
    progress: Progress | None = None,
) -> None:
    """Writes the report of that kind.

    Raises   an EngineError in one line: a log, policy, scenario, month or incident that
             is not there, or an ending of ``out`` that no report has.
    """
    _check_ending(out)
    beside = log_path.with_name(f"{log_path.name}.journal.jsonl")
    book = open_journal(journal or beside)
    with open_log(log_path) as log:
        done = replay(log, load_policy(policy), _as_facts(kind, scenario), progress)
        try:
            title, sections = _SECTIONS[kind](
                done, book, month=month, incident_id=incident_id, scenario=scenario
            )
            banner = banner_of(done, log_path.name, made_at, book.head)
        finally:
            done.close()
    out.write_text(page(title, banner, sections), "utf-8")


def _check_ending(out: Path) -> None:
    if out.suffix.lower() not in {".html", ".htm"}:
        raise SourceUnreadable(
            f"{out}: a report is written as .html; print that page for a PDF"
        )


def _as_facts(kind: str, scenario: Scenario | None) -> Scenario | None:
    """A scenario report compares; every other kind is written under the scenario."""
    return None if kind == "scenario" else scenario


def _month(done: Replay, book: Journal, **asked) -> tuple[str, Sections]:
    name = asked["month"] or last_whole_month(done)
    review = review_month(done, name, book)
    marks = month_marks(sessions_of(done, book))
    sections = month_sections(review, every_units(done, name), marks)
    return f"Month report, {month_words(name)}", sections


def _topics(done: Replay, book: Journal, **asked) -> tuple[str, Sections]:
    month = asked["month"]
    review = review_topics(done, month, month, book)

    def draw(example: Example) -> str:
        return circuit_svg(drawing_of(example.row, done.policy), LIGHT, compact=True)

    return "Topics", topic_sections(review, draw)


def _filters(done: Replay, book: Journal, **asked) -> tuple[str, Sections]:
    return "Expiratory filters", filter_sections(review_filters(done))


def _incident(done: Replay, book: Journal, **asked) -> tuple[str, Sections]:
    named = asked["incident_id"]
    if named is None:
        known = ", ".join(incidents(done)["incident_id"].head(20)) or "none"
        raise UnknownId(f"name an incident with --incident; the log has {known}")
    review = review_incident(done, named, book)
    limit = done.policy.filters.limit_cmh2o_per_lps
    return (
        f"Incident {named}",
        incident_sections(review, limit, other_history(done, review)),
    )


def _scenario(done: Replay, book: Journal, **asked) -> tuple[str, Sections]:
    scenario, month = asked["scenario"], asked["month"]
    if scenario is None:
        raise ScenarioInvalid("name a scenario with --scenario")
    compared = compare_scenarios(
        done.log, done.policy, scenario, (month, month), before=done
    )
    return f"What if: {scenario.title}", scenario_sections(compared)


_SECTIONS: dict[str, Callable[..., tuple[str, Sections]]] = {
    "month": _month,
    "topics": _topics,
    "filters": _filters,
    "incident": _incident,
    "scenario": _scenario,
}
