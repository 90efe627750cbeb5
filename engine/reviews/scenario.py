"""What if: the same log replayed under changed facts or a changed policy."""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import dataclass
from importlib import resources
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from engine.columns import TREATMENT
from engine.errors import NothingToReview, ScenarioInvalid
from engine.log import Log
from engine.policy import Policy
from engine.replay import Replay, Scenario, load_scenario, replay
from engine.replay.run import Progress
from engine.replay.scenario import in_words
from engine.reviews import scenario_rows as rows
from engine.reviews.figures import (
    PER_CENT,
    inside,
    month_words,
    percent_range,
    significant,
)
from engine.reviews.wording import counted, listed
from engine.rules import ALL_RULES
from engine.rules.wording import label_of, setting, shown, word
from engine.stats.changes import filters_needed

Period = tuple[str | None, str | None]

CAUTIONS = (
    "A model estimate from bench work: it tells which way and roughly how far, not what"
    " a patient would have received.",
    "People, supplies and alarms are not in it. A changed setup changes other things.",
    "The band takes the same unknowns on both sides, so the difference is surer than"
    " either figure alone.",
    "Local policy and licensed practice decide.",
)


@dataclass(frozen=True, kw_only=True)
class Outcome:
    """A share of the nominal dose before and after, each with its band.

    The mean over treatments, each counting the same, so that a drug given in grams does
    not drown one given in micrograms. ``before_where`` and ``after_where`` are means of
    those treatments only that would differ.
    """

    id: str
    title: str
    before: float
    before_low: float
    before_high: float
    after: float
    after_low: float
    after_high: float
    difference_low: float
    difference_high: float
    before_where: float
    after_where: float
    changed_count: int
    wanted: str
    says: str

    @property
    def difference(self) -> float:
        return self.after - self.before

    @property
    def moves(self) -> bool:
        """Whether both ends of the band move the same way."""
        return self.difference_low > 0 or self.difference_high < 0


@dataclass(frozen=True, kw_only=True)
class Comparison:
    """A scenario against what was logged.

    ``facts``      column, label, value, where, from_unknown, from_other, already
    ``settings``   policy settings changed: key, before, after
    ``rules``      rule_id, title, before, after, difference, unknown_before,
                   unknown_after; the most changed first
    ``filters``    one row a count: logged, needed when changed on time, before, after
    ``unchanged``  what it would not change, in words
    """

    scenario: Scenario
    sentence: str
    change: str
    since: str
    until: str
    treatments: int
    compared: int
    outcomes: tuple[Outcome, ...]
    facts: pd.DataFrame
    settings: pd.DataFrame
    rules: pd.DataFrame
    by_class: pd.DataFrame
    filters: dict[str, int]
    filters_sentence: str
    unchanged: tuple[str, ...]
    stamp: dict[str, Any]
    cautions: tuple[str, ...]

    def outcome(self, outcome_id: str) -> Outcome:
        return {each.id: each for each in self.outcomes}[outcome_id]


def ready_scenarios() -> tuple[Scenario, ...]:
    """The scenarios that come with the program, in order of their title."""
    folder = resources.files("engine.reviews").joinpath("scenarios")
    found = []
    for entry in folder.iterdir():
        if entry.name.endswith(".toml"):
            with resources.as_file(entry) as path:
                found.append(load_scenario(path))
    return tuple(sorted(found, key=lambda each: each.title))


def find_scenario(name_or_path: str | Path) -> Scenario:
    """A ready scenario by its name, or one's own by its path.

    Raises   ScenarioInvalid naming the ready ones, or what is wrong with the file.
    """
    ready = {each.name: each for each in ready_scenarios()}
    if str(name_or_path) in ready:
        return ready[str(name_or_path)]
    if not os.path.isfile(name_or_path):
        raise ScenarioInvalid(
            f"{name_or_path} is no scenario file; give a path, or one of"
            f" {', '.join(sorted(ready))}"
        )
    return load_scenario(name_or_path)


def compare_scenarios(
    log: Log,
    policy: Policy,
    scenario: Scenario,
    period: Period = (None, None),
    before: Replay | None = None,
    progress: Progress | None = None,
) -> Comparison:
    """The log as it was against the same log under a scenario.

    ``period``  first and last local month, either open
    ``before``  the replay without the scenario, where one stands already
    Raises      ScenarioInvalid; NothingToReview if the period has no treatments.
    """
    own = before is None
    was = replay(log, policy, progress=progress) if before is None else before
    try:
        then = replay(log, policy, scenario, progress)
        try:
            return compared(was, then, scenario, period)
        finally:
            then.close()
    finally:
        if own:
            was.close()


def compared(
    was: Replay, then: Replay, scenario: Scenario, period: Period = (None, None)
) -> Comparison:
    """Two replays of one log side by side, treatment by treatment."""
    asked = {"since": period[0], "until": period[1]}
    with was.log.cursor() as cursor, then.log.cursor() as other:
        cursor.register("other", other.sql(rows.OTHER).to_arrow_table())
        doses = cursor.execute(rows.DOSES, asked).df().iloc[0]
        cells = was.policy.cells
        few = {"fewest": cells.treatments_count, "patients": cells.patients_count}
        by_class = cursor.execute(rows.BY_CLASS, {**asked, **few}).df()
    if not doses["treatments"]:
        span = f"{period[0] or 'the start'} to {period[1] or 'the end'}"
        raise NothingToReview(f"no treatments from {span}")
    since, until = str(doses["first_month"]), str(doses["last_month"])
    outcomes = _outcomes(doses)
    rules = _rules(was, then, asked)
    filters = _filters(was, then, asked, since, until)
    facts = _facts(was, scenario, asked)
    return Comparison(
        scenario=scenario,
        sentence=_sentence(scenario, since, until, outcomes, filters),
        change=_change(scenario, facts),
        since=since,
        until=until,
        treatments=int(doses["treatments"]),
        compared=int(doses["compared"]),
        outcomes=outcomes,
        facts=facts,
        settings=_settings(was.policy, scenario),
        rules=rules,
        by_class=by_class,
        filters=filters,
        filters_sentence=_filters_sentence(filters),
        unchanged=_unchanged(doses, outcomes, rules),
        stamp=then.stamp,
        cautions=CAUTIONS,
    )


def _outcomes(doses: pd.Series) -> tuple[Outcome, ...]:
    """Each share before and after; none where no treatment could be compared."""
    if not doses["compared"]:
        return ()
    return (
        _outcome(doses, "delivered", "Share of the dose past the tube", "up"),
        _outcome(doses, "room", "Share to the room", "down"),
        _outcome(doses, "sensor_side", "Share to the expiratory sensors", "down"),
    )


def _outcome(doses: pd.Series, name: str, title: str, wanted: str) -> Outcome:
    def mean(end: str, side: str, where: str = "") -> float:
        value = doses[f"{name}{end}_{side}{where}"]
        return 0.0 if pd.isna(value) else float(value)

    ends = [mean(end, "after") - mean(end, "before") for end in ("_low", "", "_high")]
    values = {
        "before": mean("", "before"),
        "before_low": mean("_low", "before"),
        "before_high": mean("_high", "before"),
        "after": mean("", "after"),
        "after_low": mean("_low", "after"),
        "after_high": mean("_high", "after"),
        "difference_low": min(ends),
        "difference_high": max(ends),
        "before_where": mean("", "before", "_where"),
        "after_where": mean("", "after", "_where"),
    }
    count = int(doses[f"{name}_changed"])
    return Outcome(
        id=name,
        title=title,
        wanted=wanted,
        changed_count=count,
        says=_outcome_says(title, values, count),
        **values,
    )


def _outcome_says(title: str, values: Mapping[str, float], count: int) -> str:
    if not count:
        return f"{title}: unchanged, on average {percent_of(values['before'])}."
    band_before = percent_range(values["before_low"], values["before_high"])
    band_after = percent_range(values["after_low"], values["after_high"])
    before, after = apart(values["before"], values["after"])
    where = " to ".join(apart(values["before_where"], values["after_where"]))
    text = (
        f"{title}, on average: from {before} (band {band_before}) to {after}"
        f" ({band_after})"
    )
    if values["difference_low"] <= 0 <= values["difference_high"]:
        text += "; the band holds no difference too"
    return f"{text}. In the {counted(count, 'treatment')} that would differ: {where}."


def percent_of(share: float, digits: int = 2) -> str:
    """A share of the dose to so many digits."""
    return f"{significant(100 * share, digits)}{PER_CENT}"


def apart(before: float, after: float) -> tuple[str, str]:
    """Two shares with as many digits as it takes to tell them apart, three at most."""
    two = percent_of(before), percent_of(after)
    return two if two[0] != two[1] else (percent_of(before, 3), percent_of(after, 3))


def _rules(was: Replay, then: Replay, asked: dict[str, Any]) -> pd.DataFrame:
    before, after = (_answers(each, asked) for each in (was, then))
    table = pd.DataFrame(
        {
            "rule_id": [rule.id for rule in ALL_RULES],
            "title": [rule.title for rule in ALL_RULES],
            "strength": [rule.strength for rule in ALL_RULES],
            "before": [before.get((rule.id, "fires"), 0) for rule in ALL_RULES],
            "after": [after.get((rule.id, "fires"), 0) for rule in ALL_RULES],
            "unknown_before": [
                before.get((rule.id, "cannot_tell"), 0) for rule in ALL_RULES
            ],
            "unknown_after": [
                after.get((rule.id, "cannot_tell"), 0) for rule in ALL_RULES
            ],
        }
    )
    table["difference"] = table["after"] - table["before"]
    order = table["difference"].abs().sort_values(ascending=False, kind="stable").index
    return table.loc[order].reset_index(drop=True)


def _answers(done: Replay, asked: dict[str, Any]) -> dict[tuple[str, str], int]:
    found = done.frame(rows.ANSWERS, asked)
    return {
        (str(r["rule_id"]), str(r["answer"])): int(r["treatments"])
        for r in found.to_dict("records")
    }


def _facts(was: Replay, scenario: Scenario, asked: dict[str, Any]) -> pd.DataFrame:
    """What each changed fact was before."""
    made = []
    for fact in scenario.fact:
        parameters: dict[str, Any] = {**asked, "value": _text(fact.value)}
        clauses = []
        for number, (name, words) in enumerate(fact.where.items()):
            told = in_words(TREATMENT.column(name))
            clauses.append(f"list_contains($w{number}, {told})")
            parameters[f"w{number}"] = list(words)
        where = " AND ".join(["true", *clauses])
        found = was.frame(_FACT.format(column=fact.column, where=where), parameters)
        made.append(
            {
                "column": fact.column,
                "label": label_of(fact.column),
                "value": shown(fact.column, fact.value),
                "where": _where(fact.where),
                **{str(k): int(v) for k, v in found.iloc[0].items()},
            }
        )
    columns = "column label value where from_unknown from_other already"
    return pd.DataFrame(made, columns=columns.split())


_FACT = f"""
SELECT count(*) FILTER ({{column}} IS NULL) AS from_unknown,
       count(*) FILTER ({{column}}::VARCHAR <> $value) AS from_other,
       count(*) FILTER ({{column}}::VARCHAR = $value) AS already
FROM asked WHERE {{where}} AND {rows.PERIOD}
"""


def _text(value: Any) -> str:
    return str(value).lower() if isinstance(value, bool) else str(value)


def _where(where: Mapping[str, tuple[str, ...]]) -> str:
    parts = [
        f"{inside(label_of(name))} {listed([word(name, each) for each in words])}"
        for name, words in where.items()
    ]
    return listed(parts) if parts else "every treatment"


def _settings(policy: Policy, scenario: Scenario) -> pd.DataFrame:
    held = policy.model_dump(mode="python")
    made = []
    for dotted, value in scenario.policy.items():
        before: Any = held
        for part in dotted.split("."):
            before = before.get(part) if isinstance(before, dict) else None
        group = "filters_h" if "hours" in dotted else dotted
        made.append((dotted, setting(group, before), setting(group, value)))
    return pd.DataFrame(made, columns=["key", "before", "after"])


def _filters(
    was: Replay, then: Replay, asked: dict[str, Any], since: str, until: str
) -> dict[str, int]:
    """Filters it takes when each is changed on time; unknown filters apart."""
    counts = {}
    for name, done in (("before", was), ("after", then)):
        surely, at_most = _needed(done, asked)
        counts[name], counts[f"{name}_at_most"] = surely, at_most
    logged = was.frame(
        rows.FILTERS_LOGGED,
        {"zone": was.log.site_zone, "since": since, "until": until},
    )
    counts["logged"] = int(logged["filters"].iloc[0])
    return counts


def _needed(done: Replay, asked: dict[str, Any]) -> tuple[int, int]:
    found = done.frame(rows.FILTERED, asked)
    limits = done.policy.filters
    hours = found["drug_class"].map(limits.hours_by_drug_class).to_numpy(float)
    for drug, own in limits.hours_by_drug.items():
        holds = found["drug"].str.lower().str.contains(drug.lower(), regex=False)
        hours = np.where(holds, own, hours)
    found = found.assign(hours=hours)
    surely = at_most = 0
    for _, rows_of_one in found.groupby("ventilator_token", sort=False):
        at_most += filters_needed(rows_of_one["started_h"], rows_of_one["hours"])
        said = rows_of_one[~rows_of_one["unsaid"]]
        surely += filters_needed(said["started_h"], said["hours"])
    return surely, at_most


def _filters_sentence(filters: Mapping[str, int]) -> str:
    def told(name: str) -> str:
        least, most = filters[name], filters[f"{name}_at_most"]
        return f"{least:,}" if least == most else f"{least:,} to {most:,}"

    more = filters["after"] - filters["before"]
    same = filters["after_at_most"] == filters["before_at_most"]
    logged = f"{filters['logged']:,} filters are logged as installed in the period"
    if more == 0 and same:
        return (
            f"It takes no more filters: {told('before')} with every change on time;"
            f" {logged}."
        )
    return (
        f"Filters needed with every change on time: {told('after')} where it was"
        f" {told('before')}; {logged}."
    )


def _change(scenario: Scenario, facts: pd.DataFrame) -> str:
    parts = []
    for row in facts.to_dict("records"):
        changed = counted(row["from_other"], "treatment")
        text = (
            f"{row['label']}: {row['value']}, for {row['where']}. That changes"
            f" {changed}; {row['already']:,} had it so already"
        )
        if row["from_unknown"]:
            text += f"; {row['from_unknown']:,} were not recorded and are taken as so"
        parts.append(text)
    if scenario.policy:
        settings = counted(len(scenario.policy), "setting")
        parts.append(f"{settings} of the policy changed")
    return f"{'. '.join(parts)}." if parts else "Nothing is changed."


def _sentence(
    scenario: Scenario,
    since: str,
    until: str,
    outcomes: tuple[Outcome, ...],
    filters: Mapping[str, int],
) -> str:
    span = month_words(since)
    if since != until:
        span = f"{span} to {month_words(until)}"
    told = _moves(outcomes)
    extra = filters["after"] - filters["before"]
    cost = ""
    if extra > 0:
        cost = f" It takes {counted(extra, 'more filter', 'more filters')}."
    elif extra < 0:
        cost = f" It takes {counted(-extra, 'filter fewer', 'filters fewer')}."
    return f"{scenario.title}, {span}. {told}{cost}"


_GOES = {
    "delivered": "would pass the tube",
    "room": "would reach the room",
    "sensor_side": "would reach the expiratory sensors",
}


CANNOT_TELL = (
    "What it would do to the dose cannot be told: no treatment has an estimate before"
    " and after."
)


def _moves(outcomes: tuple[Outcome, ...]) -> str:
    """Where the dose would go instead; sensors are named only if the room is not."""
    if not outcomes:
        return CANNOT_TELL
    moved = [
        each
        for each in outcomes
        if each.changed_count and each.before_where != each.after_where
    ]
    if not moved:
        return "No estimated share of the dose would change."
    if len(moved) > 1:
        moved = [each for each in moved if each.id != "sensor_side"]
    parts = []
    for each in moved:
        before, after = apart(each.before_where, each.after_where)
        sure = "" if each.moves else " (within its band)"
        parts.append(
            f"{after} of the dose {_GOES[each.id]} where it was {before}{sure}"
        )
    count = counted(max(each.changed_count for each in moved), "treatment")
    return f"By the estimate, in the {count} it touches, {listed(parts)}."


def _unchanged(
    doses: pd.Series, outcomes: tuple[Outcome, ...], rules: pd.DataFrame
) -> tuple[str, ...]:
    """What it would not change; said as plainly as what it would."""
    told = []
    still = [inside(each.title) for each in outcomes if not each.changed_count]
    if still:
        told.append(f"Unchanged by the estimate: {listed(still)}.")
    same = rules[(rules["difference"] == 0) & (rules["before"] > 0)]
    if len(same):
        most = same.sort_values("before", ascending=False).head(4)
        names = [
            f"{inside(row['title'])} ({row['before']:,})"
            for row in most.to_dict("records")
        ]
        rest = len(same) - len(most)
        more = f" and {counted(rest, 'other rule')}" if rest else ""
        told.append(f"Flags that stay as they are: {listed(names)}{more}.")
    blind = int(doses["treatments"] - doses["compared"])
    told.append(
        f"{doses['compared']:,.0f} of {counted(int(doses['treatments']), 'treatment')}"
        " could be compared"
        + (
            f"; {blind:,} lack what an estimate needs, before or after, and are left"
            " out of both sides."
            if blind
            else "."
        )
    )
    return tuple(told)


def scenario_record(scenario: Scenario) -> dict[str, Any]:
    """The scenario as the journal keeps it, whole."""
    held = scenario.model_dump(mode="json")
    return {name: value for name, value in held.items() if value not in ("", [], {})}
