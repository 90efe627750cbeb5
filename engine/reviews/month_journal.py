"""What the journal adds to the month: confirmations, decisions, signatures, baselines.

Objects   ``month:2026-10`` a month · ``month:2026-10:I01`` one indicator of it ·
          ``baseline:I01`` the months an indicator's limits stand on
"""

from __future__ import annotations

import re
from dataclasses import dataclass

import pandas as pd

from engine.evidence.review import CONFIRMED_START_FRAC
from engine.journal import Entry, Journal
from engine.replay import Replay
from engine.reviews import month_rows as rows
from engine.reviews.figures import month_after, percent, percent_range
from engine.reviews.incident_words import STRENGTHS
from engine.reviews.wording import counted
from engine.rules import RETIRED, rule_of
from engine.stats.rates import clopper_pearson

_JUDGED = ("confirmed", "dismissed")
_PARTS = ["local_month", "patient", "x", "k", "u", "named"]


@dataclass(frozen=True, kw_only=True)
class Confirmations:
    """What reviewers said of the month's flags.

    ``rules``   rule_id, title, flags, reviewed, confirmed, dismissed, needs_check,
                share_frac, low, high, needs_work
    """

    sentence: str
    flags: int
    reviewed: int
    confirmed: int
    rules: pd.DataFrame


def confirmations(
    replay: Replay,
    journal: Journal | None,
    month: str,
    unit: str | None,
    flags: pd.DataFrame,
) -> Confirmations:
    """Flagged, reviewed and confirmed, by rule.

    ``flags``  rule_id and flags of the month
    Two reviewers of one finding count once: confirmed only where none dismissed it.
    """
    judged = _judged(replay, journal)
    own = judged[judged["local_month"] == month]
    if unit is not None:
        own = own[own["unit_token"] == unit]
    table = flags[["rule_id", "flags"]].merge(_by_rule(own), on="rule_id", how="left")
    numbers = ["confirmed", "dismissed", "needs_check"]
    table[numbers] = table[numbers].fillna(0).astype(int)
    said = table["confirmed"] + table["dismissed"]
    low, high = clopper_pearson(table["confirmed"], said)
    share = table["confirmed"] / said.where(said > 0)
    enough = said >= replay.policy.cells.percent_needs_count
    table = table.assign(
        title=[_title(rule_id) for rule_id in table["rule_id"]],
        reviewed=said + table["needs_check"],
        share_frac=share.where(enough),
        low=low,
        high=high,
        needs_work=enough & (share < float(CONFIRMED_START_FRAC)),
    )
    total = int(table["flags"].sum())
    reviewed, confirmed = int(table["reviewed"].sum()), int(table["confirmed"].sum())
    return Confirmations(
        sentence=_sentence(total, reviewed, confirmed, int(said.sum())),
        flags=total,
        reviewed=reviewed,
        confirmed=confirmed,
        rules=table,
    )


def judged_series(
    replay: Replay, journal: Journal | None, unit: str | None
) -> pd.DataFrame:
    """Confirmed among judged by month, as per-cluster counts."""
    judged = _judged(replay, journal)
    if unit is not None:
        judged = judged[judged["unit_token"] == unit]
    judged = judged[judged["verdict"].isin(_JUDGED)]
    return pd.DataFrame(
        {
            "local_month": judged["local_month"],
            "patient": judged["finding_id"],
            "x": (judged["verdict"] == "confirmed").astype(int),
            "k": 1,
            "u": 0,
            "named": False,
        }
    )


def stronger_series(journal: Journal | None) -> pd.DataFrame:
    """Stronger and intermediate actions among all agreed, by month."""
    table = decisions(journal)
    actions = table[table["strength"].isin(STRENGTHS)]
    return pd.DataFrame(
        {
            "local_month": actions["month"],
            "patient": actions["seq"].astype(str),
            "x": (actions["strength"] != "weaker").astype(int),
            "k": 1,
            "u": 0,
            "named": False,
        },
        columns=_PARTS,
    )


def decisions(journal: Journal | None, month: str | None = None) -> pd.DataFrame:
    """Decisions and actions that stand: seq, month, indicator, text, strength,
    owner_role, measure, due, at, actor."""
    found = []
    for entry in _standing(journal, "decision"):
        place = re.fullmatch(r"month:(\d{4}-\d{2})(?::(\w+))?", entry.object)
        if place is None or (month is not None and place[1] != month):
            continue
        held = entry.new if isinstance(entry.new, dict) else {"text": entry.new}
        found.append(
            (
                entry.seq,
                place[1],
                place[2] or "",
                *(str(held.get(key) or "") for key in _DECISION_KEYS),
                entry.at_utc,
                entry.actor,
            )
        )
    columns = ["seq", "month", "indicator", *_DECISION_KEYS, "at", "actor"]
    return pd.DataFrame(found, columns=columns)


def open_decisions(journal: Journal | None, month: str) -> pd.DataFrame:
    """Decisions up to that month that nobody has called done, the oldest first.

    Columns  those of ``decisions``, and ``late``: its date lies before the month's end
    """
    every = decisions(journal)
    done = {
        entry.object.removeprefix(DECISION)
        for entry in _standing(journal, "note")
        if entry.object.startswith(DECISION) and entry.new == DONE
    }
    still = every[(every["month"] <= month) & ~every["seq"].astype(str).isin(done)]
    until = f"{month_after(month)}-01"
    late = (still["due"] != "") & (still["due"] < until)
    return still.assign(late=late).sort_values("seq", ignore_index=True)


DECISION, DONE = "decision:", {"done": True}  # how the journal says that one is done

_DECISION_KEYS = ("text", "strength", "owner_role", "measure", "due")


def baselines(journal: Journal | None) -> dict[str, tuple[str, str]]:
    """First and last month of each indicator's frozen baseline; the latest stands."""
    agreed = {}
    for entry in _standing(journal, "decision"):
        if entry.object.startswith("baseline:") and isinstance(entry.new, dict):
            since, until = entry.new.get("since"), entry.new.get("until")
            if isinstance(since, str) and isinstance(until, str):
                agreed[entry.object.removeprefix("baseline:")] = (since, until)
    return agreed


def _judged(replay: Replay, journal: Journal | None) -> pd.DataFrame:
    """One row a finding reviewed: rule_id, local_month, unit_token, verdict."""
    columns = ["finding_id", "rule_id", "local_month", "unit_token", "verdict"]
    verdicts = journal.verdicts() if journal is not None else pd.DataFrame()
    if verdicts.empty:
        return pd.DataFrame(columns=columns)
    ids = verdicts["finding_id"].unique().tolist()
    places = replay.frame(rows.FLAG_MONTHS, {"ids": ids})
    order = {"dismissed": 0, "needs_chart_check": 1, "confirmed": 2}
    firmest = (
        verdicts.assign(_order=verdicts["verdict"].map(order))
        .sort_values("_order")
        .drop_duplicates("finding_id")
    )
    return places.merge(firmest[["finding_id", "verdict"]], on="finding_id")[columns]


def _by_rule(judged: pd.DataFrame) -> pd.DataFrame:
    counts = {
        name: judged[judged["verdict"] == verdict].groupby("rule_id").size()
        for name, verdict in (
            ("confirmed", "confirmed"),
            ("dismissed", "dismissed"),
            ("needs_check", "needs_chart_check"),
        )
    }
    table = pd.DataFrame(counts).fillna(0).astype(int)
    return table.rename_axis("rule_id").reset_index()


def _title(rule_id: str) -> str:
    return rule_id if rule_id in RETIRED else rule_of(rule_id).title


def _sentence(flags: int, reviewed: int, confirmed: int, said: int) -> str:
    if not flags:
        return "No rule flagged anything this month."
    if not reviewed:
        return f"{counted(flags, 'flag')}; none reviewed yet."
    text = f"{counted(flags, 'flag')}, {reviewed:,} reviewed, {confirmed:,} confirmed"
    if said:
        low, high = clopper_pearson(confirmed, said)
        text += (
            f" ({percent(confirmed / said)} of those judged,"
            f" {percent_range(float(low), float(high))})"
        )
    return f"{text}. The share holds for the flags reviewed, this month."


def _standing(journal: Journal | None, action: str) -> list[Entry]:
    return [] if journal is None else journal.standing(action)
