"""Topics: the few sessions that would help most, where, why, and did the last help?"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from engine.errors import NothingToReview
from engine.evidence.filter import INTERVAL_COVER_FRAC
from engine.evidence.review import (
    PATIENT_CAP_FRAC,
    TOPICS_COUNT,
    WEIGHT_CONTESTED_RATIO,
    WEIGHT_DEPARTMENT_RATIO,
    WEIGHT_MAJORITY_RATIO,
    WEIGHT_UNANIMOUS_RATIO,
)
from engine.evidence.shape import Number, Source
from engine.evidence.sources import OURS
from engine.journal import Journal
from engine.replay import Replay
from engine.reviews import topic_rows as rows
from engine.reviews.figures import inside, month_words, percent
from engine.reviews.sessions import Session, sessions_of
from engine.reviews.topic_catalogue import TOPIC_OF, TOPICS, Topic
from engine.reviews.wording import counted, listed
from engine.rules import ALL_RULES, rule_of
from engine.rules.phrases import batch_of_one
from engine.rules.placement import SITES, preferred_sites, rows_that_could_decide
from engine.rules.wording import cited, is_logged, published, word
from engine.stats.cells import hidden_cells
from engine.stats.rates import newcombe
from engine.stats.topics import Choice, best_topics, capped

SHIFTS = ("day", "evening", "night")
EXAMPLES_EACH = 2
CHOICES = (2, 3, 4, 5)  # how many topics can be asked for

_BY_STRENGTH = {
    "unanimous": WEIGHT_UNANIMOUS_RATIO,
    "majority": WEIGHT_MAJORITY_RATIO,
    "department": WEIGHT_DEPARTMENT_RATIO,
    "contested": WEIGHT_CONTESTED_RATIO,
}

CAUTIONS = (
    "Flags are unconfirmed. A topic is a subject to talk about, never a judgement of a"
    " unit, a shift or a person.",
    "What stands highest in one month tends to fall in the next without any"
    " teaching; compare with the topics ranked after it.",
    "Local policy and licensed practice decide.",
)


@dataclass(frozen=True, kw_only=True)
class Example:
    """A setup that stands for many, without who or when.

    ``row``        setup and estimate columns, for the drawing and the sentences
    ``says``       what each rule said of it
    ``instead``    sites the department's table prefers in this setup
    """

    row: dict[str, Any]
    alike_count: int
    sentence: str
    says: tuple[str, ...]
    instead: tuple[str, ...]
    table_note: str


@dataclass(frozen=True, kw_only=True)
class Sheet:
    """One chosen topic, ready for a handout.

    ``places``   unit_token, shift, flagged, unknown, asked, patients, share_frac,
                 hidden
    ``rules``    rule_id, title, question, flags, treatments, patients, strength
    """

    topic: Topic
    sentence: str
    seen: str
    where: str
    places: pd.DataFrame
    rules: pd.DataFrame
    evidence: tuple[str, ...]
    against: tuple[str, ...]
    table: str
    examples: tuple[Example, ...]
    alone_frac: float
    without_frac: float


@dataclass(frozen=True, kw_only=True)
class Topics:
    """The chosen topics of a period.

    ``weights``    rule_id, topic, severity, confirmed_frac (prior 1 and 1), weight
    ``ranking``    every topic with flags, treatments, patients, what it covers alone
    """

    sentence: str
    since: str
    until: str
    unit: str | None
    treatments: int
    patients: int
    choice: Choice
    sheets: tuple[Sheet, ...]
    runner_up: str
    weights: pd.DataFrame
    ranking: pd.DataFrame
    capped_patients: int
    sessions: tuple[Session, ...]
    cautions: tuple[str, ...]


def review_topics(
    replay: Replay,
    since: str | None = None,
    until: str | None = None,
    journal: Journal | None = None,
    unit: str | None = None,
    k: int | None = None,
    weights: Mapping[str, float] | None = None,
) -> Topics:
    """The k topics that cover most of what was flagged in a period of months.

    ``weights``  severity by rule id or family, before the policy's own and the
                 default by strength of evidence
    Raises   NothingToReview if the period has no treatments.
    """
    period = {"since": since, "until": until, "unit": unit}
    totals = replay.frame(rows.TOTALS, period).iloc[0]
    if not totals["treatments"]:
        span = f" from {since or 'the start'} to {until or 'the end'}"
        raise NothingToReview(
            f"no treatments{span}{f' in unit {unit}' if unit else ''}"
        )
    _refuse_small(replay, totals, unit)
    table = _weights(replay, journal, weights)
    choice, ranking, capped_count = _choose(replay, period, table, k)
    first, last = str(totals["first_month"]), str(totals["last_month"])
    chosen = [TOPICS[i] for i in choice.chosen if choice.alone[i] > 0]
    counts = replay.frame(rows.COUNTS, period).set_index("rule_id")
    places = replay.frame(rows.PLACES, period)
    sheets = tuple(
        _sheet(replay, topic, period, counts, places, ranking, choice)
        for topic in chosen
    )
    return Topics(
        sentence=_sentence(
            sheets, choice, first, last, unit, int(totals["treatments"])
        ),
        since=first,
        until=last,
        unit=unit,
        treatments=int(totals["treatments"]),
        patients=int(totals["patients"]),
        choice=choice,
        sheets=sheets,
        runner_up=_runner_up(choice),
        weights=table,
        ranking=ranking,
        capped_patients=capped_count,
        sessions=sessions_of(replay, journal),
        cautions=CAUTIONS,
    )


def _refuse_small(replay: Replay, totals: pd.Series, unit: str | None) -> None:
    cells = replay.policy.cells
    small = (
        totals["treatments"] < cells.treatments_count
        or totals["patients"] < cells.patients_count
    )
    if unit is not None and small:
        raise NothingToReview(
            f"unit {unit} has under {cells.treatments_count} treatments or"
            f" {cells.patients_count} patients in the period; so small a group is not"
            " shown"
        )


def _weights(
    replay: Replay, journal: Journal | None, given: Mapping[str, float] | None
) -> pd.DataFrame:
    """Severity times how often reviewers confirmed the rule, a half where unknown."""
    asked = {**replay.policy.weights, **(given or {})}
    verdicts = journal.verdicts() if journal is not None else pd.DataFrame()
    said = {}
    if not verdicts.empty:
        rule = verdicts["finding_id"].str.rsplit(":", n=1).str[-1]
        decided = verdicts["verdict"].isin(["confirmed", "dismissed"])
        yes = (verdicts["verdict"] == "confirmed")[decided].groupby(rule[decided])
        said = {name: (int(own.sum()), len(own)) for name, own in yes}
    made = []
    for each in ALL_RULES:
        default = float(_BY_STRENGTH[each.strength])
        severity = float(asked.get(each.id, asked.get(each.family, default)))
        confirmed, judged_count = said.get(each.id, (0, 0))
        share = (confirmed + 1) / (judged_count + 2)
        judged = (each.id, TOPIC_OF[each.id], severity, confirmed, judged_count)
        made.append((*judged, share, severity * share))
    columns = "rule_id topic severity confirmed judged confirmed_frac weight"
    return pd.DataFrame(made, columns=columns.split())


def _choose(
    replay: Replay, period: dict[str, Any], weights: pd.DataFrame, k: int | None
) -> tuple[Choice, pd.DataFrame, int]:
    patterns = replay.frame(rows.PATTERNS, period)
    weight = dict(zip(weights["rule_id"], weights["weight"], strict=True))
    column = {topic.id: i for i, topic in enumerate(TOPICS)}
    codes, unique = pd.factorize(patterns["rules"])
    worth = np.zeros((len(unique), len(TOPICS)))
    for i, text in enumerate(unique):
        for rule_id in str(text).split("|"):
            at = column[TOPIC_OF[rule_id]]
            worth[i, at] = max(worth[i, at], weight[rule_id])
    n = patterns["treatments"].to_numpy(float)
    patient = pd.factorize(patterns["patient"])[0]
    carried = n * worth.max(axis=1)[codes] if len(unique) else n
    by_patient = np.bincount(patient, weights=carried) if len(n) else np.array([])
    factor = capped(by_patient, float(PATIENT_CAP_FRAC))
    many = (
        np.bincount(codes, weights=n * factor[patient], minlength=len(unique))
        if len(n)
        else np.zeros(0)
    )
    choice = best_topics(worth, many, int(TOPICS_COUNT) if k is None else k)
    ranking = pd.DataFrame(
        {
            "topic": [topic.id for topic in TOPICS],
            "title": [topic.title for topic in TOPICS],
            "covers": choice.alone,
            "covers_frac": np.array(choice.alone) / (choice.total or math.nan),
            "chosen": [
                i in choice.chosen and choice.alone[i] > 0 for i in range(len(TOPICS))
            ],
        }
    ).sort_values("covers", ascending=False, ignore_index=True)
    return choice, ranking, int((factor < 1).sum())


def _sheet(
    replay: Replay,
    topic: Topic,
    period: dict[str, Any],
    counts: pd.DataFrame,
    places: pd.DataFrame,
    ranking: pd.DataFrame,
    choice: Choice,
) -> Sheet:
    at = TOPICS.index(topic)
    grid = _places(replay, topic, places)
    asked, flagged = int(grid["asked"].sum()), int(grid["flagged"].sum())
    own = _rules_of(topic, counts)
    without = choice.without[choice.chosen.index(at)]
    examples = _examples(replay, topic, period)
    return Sheet(
        topic=topic,
        sentence=_topic_sentence(topic, flagged, int(grid["unknown"].sum()), asked),
        seen=_seen(own),
        where=_where(grid, flagged, asked),
        places=grid,
        rules=own,
        evidence=_evidence(topic),
        against=_against(topic),
        table=_table(replay, topic),
        examples=examples,
        alone_frac=choice.alone[at] / choice.total if choice.total else 0.0,
        without_frac=without / choice.value if choice.value else 0.0,
    )


def _rules_of(topic: Topic, counts: pd.DataFrame) -> pd.DataFrame:
    found = counts.reindex(list(topic.rules)).fillna(0).astype(int).reset_index()
    told = [rule_of(rule_id) for rule_id in topic.rules]
    return found.assign(
        title=[rule.title for rule in told],
        question=[rule.question for rule in told],
        strength=[rule.strength for rule in told],
    ).sort_values("flags", ascending=False, ignore_index=True)


def _places(replay: Replay, topic: Topic, places: pd.DataFrame) -> pd.DataFrame:
    """Unit by shift; small cells and those that would give them away are hidden."""
    cells = replay.policy.cells
    units = sorted(places["unit_token"].unique())
    keys = pd.MultiIndex.from_product([units, SHIFTS], names=["unit_token", "shift"])
    own = places.set_index(["unit_token", "shift"])[
        [f"{topic.id}_{part}" for part in ("flagged", "unknown", "asked", "patients")]
    ]
    own.columns = pd.Index(["flagged", "unknown", "asked", "patients"])
    own = own.reindex(keys).fillna(0).astype(int)
    small = (own["asked"] < cells.treatments_count) | (
        own["patients"] < cells.patients_count
    )
    shape = (len(units), len(SHIFTS))
    hidden = hidden_cells(
        own["asked"].to_numpy().reshape(shape), small.to_numpy().reshape(shape)
    ).ravel()
    share = (own["flagged"] / own["asked"].where(own["asked"] > 0)).to_numpy(float)
    grid = own.assign(share_frac=np.where(hidden, np.nan, share), hidden=hidden)
    return grid.reset_index()


def _where(grid: pd.DataFrame, flagged: int, asked: int) -> str:
    """The unit and shift where it was seen most, if any stands out at all."""
    seen = grid[~grid["hidden"] & (grid["asked"] > 0)]
    if seen.empty or not flagged:
        return "Too few in every unit and shift to say where."
    top = seen.sort_values("share_frac", ascending=False).iloc[0]
    rest_asked = asked - top["asked"]
    if rest_asked <= 0:
        return "Seen in one unit and shift only, where all treatments were given."
    # The highest of many is picked after looking: its interval allows for all of them.
    cover = 1 - (1 - float(INTERVAL_COVER_FRAC)) / len(seen)
    rest_flagged = flagged - top["flagged"]
    _, low, _ = newcombe(top["flagged"], top["asked"], rest_flagged, rest_asked, cover)
    place = f"unit {top['unit_token']}, {top['shift']} shift"
    share = f"{percent(top['share_frac'])} of {int(top['asked']):,}"
    if low > 0:
        rest = percent(rest_flagged / rest_asked)
        return f"Most often in {place}: {share}, against {rest} elsewhere."
    return f"No unit and shift stands out; the highest is {place} ({share})."


def _topic_sentence(topic: Topic, flagged: int, unknown: int, asked: int) -> str:
    if not asked:
        return f"{topic.title}: none of its questions could be asked."
    text = (
        f"In {flagged:,} of {counted(asked, 'treatment')} ({percent(flagged / asked)})"
        f" {topic.seen}"
    )
    if not unknown:
        return f"{text}."
    return f"{text}; for {unknown:,} ({percent(unknown / asked)}) it cannot be told."


def _seen(own: pd.DataFrame) -> str:
    parts = [
        f"{inside(row['title'])} ({row['treatments']:,} in"
        f" {counted(int(row['patients']), 'patient')})"
        for row in own.to_dict("records")
        if row["flags"]
    ]
    return f"Flags: {listed(parts)}." if parts else "No flags."


def _evidence(topic: Topic) -> tuple[str, ...]:
    """What each rule rests on, with strength, figures and works."""
    return tuple(
        f"{rule.title} ({rule.strength}): {_cited(rule.evidence)}."
        for rule in map(rule_of, topic.rules)
    )


def _against(topic: Topic) -> tuple[str, ...]:
    told = []
    for rule in map(rule_of, topic.rules):
        if rule.against:
            told.append(f"{rule.title}: found otherwise by {_cited(rule.against)}.")
    return tuple(told)


def _cited(evidence: tuple[Number | Source, ...]) -> str:
    parts = []
    for each in evidence:
        if each is OURS or (not isinstance(each, Source) and each.source is OURS):
            parts.append("the department's and this project's own choice")
        elif isinstance(each, Source):
            parts.append(cited(each))
        else:
            where = each.where.split(";")[0].removeprefix("abstract: ")
            parts.append(f"{published(each)}: {where} ({cited(each.source)})")
    return "; ".join(dict.fromkeys(parts))


def _table(replay: Replay, topic: Topic) -> str:
    """What the department has written down about it."""
    policy = replay.policy
    hours = policy.filters.hours_by_drug_class
    spans = listed([f"{name.replace('_', ' ')} {h:g} h" for name, h in hours.items()])
    texts = {
        "site": f"The placement table {policy.title} has {len(policy.placement)} rows;"
        " each example below shows the row that decides.",
        "both_sides": f"{sum(r.strength == 'contested' for r in policy.placement)} rows"
        f" of the placement table {policy.title} are marked contested, with both"
        " sides.",
        "filter_change": f"Filters: limit {policy.filters.limit_cmh2o_per_lps:g}"
        f" cmH2O/(L/s); hours in use {spans}.",
        "filter_reading": f"A reading within {policy.filters.reading_window_h:g} h"
        f" before the start, at {policy.filters.reference_flow_lpm:g} L/min or near.",
        "filter": f"Room dose to look at from"
        f" {policy.exposure.room_dose_limit_mg:g} mg; hazardous drugs:"
        f" {listed(list(policy.exposure.hazardous_drugs))}.",
        "sensor": f"A check is due after {policy.sensors.unfiltered_since_check_count}"
        f" unfiltered treatments or {policy.sensors.check_interval_h:g} h.",
        "gas": f"Smallest jet fill {policy.generator_use.jet_smallest_fill_ml:g} mL.",
        "record": "Essential fields: "
        f"{listed([name.replace('_', ' ') for name in policy.records.essential])}.",
    }
    return texts.get(topic.id, "The policy holds no limit of its own for this.")


def _examples(
    replay: Replay, topic: Topic, period: dict[str, Any]
) -> tuple[Example, ...]:
    usual = replay.frame(rows.USUAL_VOLUME, period)["usual_ml"].iloc[0]
    found = replay.frame(
        rows.EXAMPLES,
        {
            **period,
            "rules": list(topic.rules),
            "patients": replay.policy.cells.patients_count,
            "most": EXAMPLES_EACH,
            "usual_ml": 0.0 if pd.isna(usual) else float(usual),
        },
    )
    return tuple(_example(replay, topic, row) for row in found.to_dict("records"))


def _example(replay: Replay, topic: Topic, row: dict[Any, Any]) -> Example:
    full = {str(name): _plain(value) for name, value in row.items()}
    treatment_id = full.pop("treatment_id")
    fired = replay.frame(
        "SELECT rule_id FROM finding WHERE treatment_id = $id", {"id": treatment_id}
    )["rule_id"]
    full["filter_in_use_id"] = None if full["filter_in_use_id"] is None else "in use"
    policy = replay.policy
    says = tuple(
        rule_of(rule_id).sentence(full, policy)
        for rule_id in topic.rules
        if rule_id in set(fired)
    )
    batch = batch_of_one(full)
    instead = tuple(
        str(site)
        for site, yes in zip(SITES, preferred_sites(batch, policy)[0], strict=True)
        if yes and site != full["site"]
    )
    deciding = rows_that_could_decide(batch, policy, 0)
    note = deciding[0].note if len(deciding) == 1 else ""
    return Example(
        row=full,
        alike_count=int(full["alike_count"]),
        sentence=_example_sentence(full),
        says=says,
        instead=instead,
        table_note=note,
    )


def _example_sentence(row: Mapping[str, Any]) -> str:
    def told(name: str, missing: str) -> str:
        value = row.get(name)
        return missing if value is None else word(name, str(value))

    humid = told("humidification", "humidification not recorded")
    generator = told("generator", "a generator nobody recorded")
    site = told("site", "at a site nobody recorded")
    filter_state = told("expiratory_filter", "not recorded")
    alike = counted(int(row["alike_count"]), "treatment")
    return (
        f"{generator[0].upper()}{generator[1:]} {site}, {humid},"
        f" expiratory filter {filter_state}; {alike} alike in the period."
    )


def _plain(value: Any) -> Any:
    if not is_logged(value):
        return None
    return value.item() if isinstance(value, np.generic) else value


def _runner_up(choice: Choice) -> str:
    """The next best set and what would be lost; a near tie is the educator's call."""
    if not choice.runner_up or choice.value == 0:
        return "There is no other set to choose."
    if any(choice.alone[i] == 0 for i in choice.chosen):
        return (
            "Everything that was flagged is covered: there is no other set to choose."
        )
    out = [TOPICS[i].title for i in choice.chosen if i not in choice.runner_up]
    into = [TOPICS[i].title for i in choice.runner_up if i not in choice.chosen]
    loss = choice.loss_frac
    close = " That is a near tie: the educator decides." if loss < 0.05 else ""
    return (
        f"Next best: {listed(into)} in place of {listed(out)}, at a loss of"
        f" {percent(loss)} of what the set covers.{close}"
    )


def _sentence(
    sheets: tuple[Sheet, ...],
    choice: Choice,
    since: str,
    until: str,
    unit: str | None,
    treatments: int,
) -> str:
    span = month_words(since)
    if since != until:
        span = f"{span} to {month_words(until)}"
    where = f", unit {unit}" if unit else ""
    opening = f"{span}{where}, {counted(treatments, 'treatment')}."
    if not sheets:
        return f"{opening} No rule flagged anything: there is no topic to choose."
    titles = listed([f"“{sheet.topic.title}”" for sheet in sheets])
    share = percent(choice.value / choice.total)
    verb = "covers" if len(sheets) == 1 else "cover"
    return f"{opening} {titles} {verb} {share} of what was flagged, by weight."
