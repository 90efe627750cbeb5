"""The only cached calls: which log and policy are open, and what the engine says.

Everything is keyed on the log's stamp, the policy's hash and, where it matters, the
journal's head, so that a replaced log or a new entry is seen at the next look.
"""

from __future__ import annotations

import os
import tempfile
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pandas as pd
import streamlit as st

import cases
from engine.errors import EngineError
from engine.journal import Journal, open_journal
from engine.log import Log, open_log
from engine.log.open import stamp_of
from engine.policy import Policy, load_policy
from engine.replay import Replay, Scenario, scenario_from
from engine.replay import replay as replayed
from engine.reviews import chart_check as checking
from engine.reviews import filters as filter_review
from engine.reviews import incident as incident_review
from engine.reviews import month as month_review
from engine.reviews.incident_scenario import OtherHistory
from engine.reviews.incident_scenario import other_history as other
from engine.reviews.month_units import Units, every_units
from engine.reviews.scenario import Comparison, compare_scenarios
from engine.reviews.sessions import Session, sessions_of
from engine.reviews.topics import Topics, review_topics
from engine.simulate import write_department
from engine.version import VERSION
from reviewapp.report import Banner, banner_of
from reviewapp.serve import LOG_VARIABLE

DEMO = "demo"
CASE = "case-"
POLICIES = {"common_practice": "Common practice", "bench_2024": "Bench work 2024"}


# --- which log, which policy ------------------------------------------------------


def home() -> Path:
    """Where the invented department, the cases and their journals are kept."""
    base = os.environ.get("AEROSOL_REVIEW_HOME")
    if base:
        return Path(base)
    cache = os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache"
    return Path(cache) / "aerosol-treatment-review"


@st.cache_resource(show_spinner=False)
def _opened_paths() -> set[str]:
    """Logs somebody opened here by path; an address alone opens no other file."""
    named = os.environ.get(LOG_VARIABLE)
    return {named} if named else set()


def log_choices() -> dict[str, str]:
    """What can be opened: key and words."""
    own = {path: f"{Path(path).name} (your log)" for path in sorted(_opened_paths())}
    examples = {f"{CASE}{c.name}": f"Case: {c.title}" for c in cases.all_cases()}
    return {**own, DEMO: "Invented department", **examples}


def log_key() -> str:
    """The log asked for in the address or chosen before; else the first there is."""
    return _chosen("log", list(log_choices()))


def kept() -> dict[str, str]:
    """Log and policy as an address carries them; what is usual is left out."""
    usual = {"log": next(iter(log_choices())), "policy": next(iter(POLICIES))}
    now = {"log": log_key(), "policy": policy_key()}
    return {key: value for key, value in now.items() if value != usual[key]}


def remember() -> None:
    """Puts log and policy into the address, so that a link reopens the same view."""
    for key, value in kept().items():
        st.query_params[key] = value


def choose(key: str, value: str) -> None:
    """Another log or policy; what the address asked of the old one is dropped."""
    st.query_params.clear()
    st.session_state[f"kept_{key}"] = value


def _chosen(key: str, choices: list[str]) -> str:
    asked = st.query_params.get(key, st.session_state.get(f"kept_{key}"))
    chosen = asked if asked in choices else choices[0]
    st.session_state[f"kept_{key}"] = chosen
    return chosen


def add_log(text: str) -> str:
    """Opens a log by its path and remembers it; returns its key.

    Raises   LogUnreadable, as ``open_log``.
    """
    path = str(Path(text.strip()).expanduser().resolve())
    open_log(path).close()
    _opened_paths().add(path)
    return path


def log_path() -> Path:
    """The file behind the chosen log; built-in ones are written on first use."""
    key = log_key()
    if key == DEMO:
        return _built_in(f"invented-{VERSION}.duckdb", write_department)
    if key.startswith(CASE):
        name = key.removeprefix(CASE)
        return _built_in(
            f"case-{name}-{VERSION}.duckdb", lambda to: cases.write_case(name, to)
        )
    return Path(key)


def _built_in(file_name: str, write: Any) -> Path:
    folder = home()
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe = folder / ".writable"
        probe.touch()
        probe.unlink()
    except OSError:
        folder = Path(tempfile.gettempdir()) / f"aerosol-treatment-review-{os.getuid()}"
        folder.mkdir(parents=True, exist_ok=True)
    path = folder / file_name
    if not path.exists():
        with st.spinner("Writing the invented records; this happens once."):
            write(path)
    return path


def log_label() -> str:
    """The log's name as the reader chose it."""
    return log_choices()[log_key()]


def policy_key() -> str:
    """The policy asked for in the address or chosen before; else common practice."""
    return _chosen("policy", list(POLICIES))


def policy() -> Policy:
    """The policy in force."""
    return load_policy(policy_key())


# --- log, replay, journal -----------------------------------------------------------


@st.cache_resource(
    max_entries=2, show_spinner=False, on_release=lambda log: log.close()
)
def _log(path: str, stamp: Any) -> Log:
    return open_log(path)


def log() -> Log:
    """The chosen log, opened."""
    path = log_path()
    return _log(str(path), stamp_of(path))


@st.cache_resource(
    max_entries=3,
    show_spinner="Replaying every treatment through the rules and the balance ...",
    on_release=lambda one: one.close(),
)
def _replay(path: str, stamp: Any, policy_hash: str, _policy: Policy) -> Replay:
    with open_log(path) as opened:
        return replayed(opened, _policy)


def replay() -> Replay:
    """The chosen log replayed under the policy in force."""
    path, chosen = log_path(), policy()
    return _replay(str(path), stamp_of(path), chosen.hash, chosen)


def journal() -> Journal:
    """The journal beside the log."""
    path = log_path()
    return open_journal(path.with_name(f"{path.name}.journal.jsonl"))


def keep(
    *, action: str, object: str, new: Any, actor: str, role: str, reason: str
) -> None:
    """Writes one entry to the journal, at this moment.

    Raises   EntryRefused if the entry lacks what it needs; JournalBroken.
    """
    journal().append(
        at=_now(),
        actor=actor,
        role=role,
        action=action,
        object=object,
        new=new,
        reason=reason,
    )


def take_back(seq: int, actor: str, role: str) -> None:
    """Withdraws an entry of the journal; both stay on record."""
    journal().withdraw(seq, at=_now(), actor=actor, role=role, reason="taken back")


def banner() -> Banner:
    """What a report says of where its figures come from."""
    return banner_of(replay(), log_label(), _now(), journal().head)


def _now() -> datetime:
    return datetime.now(UTC).replace(tzinfo=None, microsecond=0)


# --- what the engine says ------------------------------------------------------------


@st.cache_resource(max_entries=128, show_spinner="Working it out ...")
def _asked(question: str, key: tuple, arguments: tuple, _ask: Any) -> Any:
    return _ask()


def _once(question: str, ask: Any, *arguments: Any, reads_journal: bool = False) -> Any:
    """The answer to a question, worked out once for this log, policy and journal."""
    path = log_path()
    head = journal().head if reads_journal else ""
    key = (str(path), stamp_of(path), policy().hash, head)
    return _asked(question, key, arguments, ask)


def frame(sql: str, params: dict[str, Any] | None = None) -> pd.DataFrame:
    """A few rows of the replay, to keep and change; the caller limits them."""
    listed = tuple(sorted((params or {}).items(), key=lambda item: item[0]))
    return _once(sql, lambda: replay().frame(sql, params), repr(listed)).copy()


def months() -> list[str]:
    """Local months that hold treatments."""
    table = _once("months", lambda: month_review.months_of(replay()))
    return [str(name) for name in table["local_month"]]


def last_whole_month() -> str:
    """The latest month the log covers to its end."""
    return _once("whole", lambda: month_review.last_whole_month(replay()))


def units() -> list[str]:
    """Units of the log, by name."""
    found = frame(
        "SELECT DISTINCT unit_token FROM asked WHERE unit_token IS NOT NULL "
        "ORDER BY 1 LIMIT 500"
    )
    return found["unit_token"].tolist()


def ventilators() -> list[str]:
    """Ventilators named anywhere in the log."""
    found = frame(
        "SELECT DISTINCT ventilator_token FROM (SELECT ventilator_token FROM treatment "
        "UNION ALL SELECT ventilator_token FROM sensor_check) "
        "WHERE ventilator_token IS NOT NULL ORDER BY 1 LIMIT 5000"
    )
    return found["ventilator_token"].tolist()


def last_moment() -> pd.Timestamp:
    """The last start of a treatment, or the day the log was written."""
    last = frame("SELECT max(started_at) AS last_at FROM treatment")["last_at"].iloc[0]
    if pd.isna(last):
        last = frame("SELECT max(created_at) AS at_time FROM log_info").iloc[0, 0]
    return pd.Timestamp(last)


def site_zone() -> str:
    """The time zone of the site."""
    return log().site_zone


def filter_limit() -> float:
    """The department's limit for filter resistance."""
    return policy().filters.limit_cmh2o_per_lps


def month(month: str, unit: str | None) -> month_review.Month:
    """The review of a month."""
    return _once(
        "month",
        lambda: month_review.review_month(replay(), month, journal(), unit),
        month,
        unit,
        reads_journal=True,
    )


def chart_check(month: str) -> checking.ChartCheck:
    """What reviewers found in the month's sample of charts."""
    return _once(
        "chart check",
        lambda: checking.chart_check(replay(), journal(), month),
        month,
        reads_journal=True,
    )


def month_units(month: str) -> dict[str, Units]:
    """Every indicator by unit, for that month."""
    return _once("units", lambda: every_units(replay(), month), month)


def sessions() -> tuple[Session, ...]:
    """Sessions the journal holds, with what followed them."""
    return _once(
        "sessions", lambda: sessions_of(replay(), journal()), reads_journal=True
    )


def topics(since: str, until: str, unit: str | None, k: int) -> Topics:
    """The review an educator asks for."""
    return _once(
        "topics",
        lambda: review_topics(replay(), since, until, journal(), unit, k),
        since,
        until,
        unit,
        k,
        reads_journal=True,
    )


def filters() -> filter_review.Filters:
    """Every filter, most urgent first."""
    return _once("filters", lambda: filter_review.review_filters(replay()))


def one_filter(filter_id: str) -> filter_review.OneFilter:
    """One filter in depth."""
    return _once(
        "one filter",
        lambda: filter_review.one_filter(replay(), filter_id, filters()),
        filter_id,
    )


def incidents() -> pd.DataFrame:
    """Incidents of the log, the latest first."""
    return _once("incidents", lambda: incident_review.incidents(replay()))


def incident(incident_id: str) -> incident_review.Incident:
    """The review of one logged incident."""
    return _once(
        "incident",
        lambda: incident_review.review_incident(replay(), incident_id, journal()),
        incident_id,
        reads_journal=True,
    )


def fault(facts: dict[str, Any]) -> incident_review.Incident:
    """The review of a fault entered by hand."""
    return _once(
        "fault",
        lambda: incident_review.review_fault(replay(), facts, journal()),
        repr(sorted(facts.items())),
        reads_journal=True,
    )


def other_history(incident: incident_review.Incident) -> OtherHistory:
    """The same history with filters on, or changed on time."""
    return _once(
        "other history",
        lambda: other(replay(), incident),
        repr(sorted(incident.facts.items(), key=lambda item: item[0])),
    )


def kept_scenarios() -> tuple[list[Scenario], list[str]]:
    """Scenarios kept in the journal, and why others of them cannot be read."""
    kept, refused = [], []
    for entry in journal().standing("scenario"):
        try:
            kept.append(scenario_from(entry.new, f"journal entry {entry.seq}"))
        except EngineError as problem:
            refused.append(str(problem))
    return kept, refused


def comparison(scenario: Scenario, since: str, until: str) -> Comparison:
    """The log as it was against the same log under a scenario."""
    return _once(
        "comparison",
        lambda: compare_scenarios(
            log(), policy(), scenario, (since, until), before=replay()
        ),
        scenario.model_dump_json(),
        since,
        until,
    )
