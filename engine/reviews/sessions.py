"""Past sessions: what was taught, where, when, and what the weeks around it show.

A session is a journal note on ``session:<topic>`` with the day it was held, the units
taught and how many weeks to leave out while it spread; the week of the session always
is, for it lies on both sides.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import Any

import numpy as np
import pandas as pd

from engine.journal import Journal
from engine.replay import Replay
from engine.reviews import topic_rows as rows
from engine.reviews.figures import points
from engine.reviews.topic_catalogue import BY_ID, Topic
from engine.reviews.wording import listed
from engine.stats.series import Segmented, segmented

SAID_ALOUD = (
    "A topic is chosen in the month it stands highest, and what stands highest tends to"
    " fall without teaching. One series cannot tell the two apart; units not taught are"
    " shown beside it for that reason."
)
TOO_NARROW = (
    "Both intervals are too narrow on a series this short; read them as the least doubt"
    " there is."
)


@dataclass(frozen=True, kw_only=True)
class Session:
    """One session and its effect.

    ``weeks``     week, flagged, asked, share_frac, other_flagged, other_asked,
                  other_frac, after, left_out
    ``own``       the units taught; ``other`` the units not taught, as comparison;
                  ``difference`` the first less the second
    """

    seq: int
    topic: Topic
    held_on: pd.Timestamp
    units: tuple[str, ...]
    weeks: pd.DataFrame
    own: Segmented
    other: Segmented | None
    difference: Segmented | None
    sentence: str
    cautions: tuple[str, ...]


def sessions_of(replay: Replay, journal: Journal | None) -> tuple[Session, ...]:
    """Every session the journal holds for a topic that still exists, newest first."""
    found = []
    for entry in [] if journal is None else journal.standing("note"):
        if not entry.object.startswith("session:") or not isinstance(entry.new, dict):
            continue
        topic = BY_ID.get(entry.object.removeprefix("session:"))
        held_on = _day(entry.new.get("held_on"))
        if topic is None or held_on is None:
            continue
        units = tuple(str(unit) for unit in entry.new.get("units") or ())
        left_out = int(entry.new.get("weeks_left_out") or 1)
        found.append(session_effect(replay, topic, held_on, units, left_out, entry.seq))
    return tuple(sorted(found, key=lambda each: each.held_on, reverse=True))


def session_effect(
    replay: Replay,
    topic: Topic,
    held_on: pd.Timestamp,
    units: tuple[str, ...] = (),
    weeks_left_out: int = 1,
    seq: int = 0,
) -> Session:
    """The weekly flagged share before and after a session; no units means all."""
    weeks = _weeks(replay, topic, units, held_on, weeks_left_out)
    used = weeks[~weeks["left_out"]].reset_index(drop=True)
    first_after = int((~used["after"]).sum())
    asked = used["asked"].to_numpy(float)
    own = segmented(used["share_frac"], first_after, np.maximum(asked, 1e-9))
    other = difference = None
    if units and used["other_asked"].sum() > 0:
        other = segmented(
            used["other_frac"], first_after, np.maximum(used["other_asked"], 1e-9)
        )
        gap = used["share_frac"] - used["other_frac"]
        difference = segmented(gap, first_after)
    return Session(
        seq=seq,
        topic=topic,
        held_on=held_on,
        units=units,
        weeks=weeks,
        own=own,
        other=other,
        difference=difference,
        sentence=_sentence(topic, held_on, units, own, difference),
        cautions=(SAID_ALOUD, TOO_NARROW),
    )


def _day(text: Any) -> pd.Timestamp | None:
    try:
        return pd.Timestamp(datetime.fromisoformat(str(text))).tz_localize(None)
    except ValueError:
        return None


def _weeks(
    replay: Replay,
    topic: Topic,
    units: tuple[str, ...],
    held_on: pd.Timestamp,
    left_out: int,
) -> pd.DataFrame:
    found = replay.frame(
        rows.WEEKS,
        {"since": None, "until": None, "unit": None, "zone": replay.log.site_zone},
    )
    flagged, asked = found[f"{topic.id}_flagged"].fillna(0), found[f"{topic.id}_asked"]
    taught = found["unit_token"].isin(units) if units else found["week"].notna()
    parts = pd.DataFrame(
        {
            "week": pd.to_datetime(found["week"]),
            "flagged": flagged.where(taught, 0),
            "asked": asked.where(taught, 0),
            "other_flagged": flagged.where(~taught, 0),
            "other_asked": asked.where(~taught, 0),
        }
    )
    weeks = parts.groupby("week", as_index=False).sum()
    first = held_on.normalize() - pd.Timedelta(days=held_on.weekday())
    spread = first + pd.Timedelta(weeks=left_out)
    return weeks.assign(
        share_frac=weeks["flagged"] / weeks["asked"].where(weeks["asked"] > 0),
        other_frac=weeks["other_flagged"]
        / weeks["other_asked"].where(weeks["other_asked"] > 0),
        after=weeks["week"] >= spread,
        left_out=weeks["week"].between(first, spread, inclusive="left"),
    )


def _sentence(
    topic: Topic,
    held_on: pd.Timestamp,
    units: tuple[str, ...],
    own: Segmented,
    difference: Segmented | None,
) -> str:
    where = f" for {listed([f'unit {unit}' for unit in units])}" if units else ""
    opening = f"“{topic.title}”, taught{where} on {held_on:%d %B %Y}:"
    if own.refusal or own.level_change is None:
        return f"{opening} too short to say ({own.refusal} weeks)."
    change = own.level_change
    span = points(change.low_hac, change.high_hac)
    if abs(change.value) < 0.005:
        text = f"{opening} the flagged share did not move at once ({span})"
    else:
        way = "fell" if change.value < 0 else "rose"
        size = points(change.value)
        text = f"{opening} the flagged share {way} by {size} at once ({span})"
    if not own.tested:
        return f"{text}; too few weeks for a verdict."
    told = "beyond both intervals" if change.shown else "which could be chance"
    text = f"{text}, {told}."
    return text + _beside(difference)


def _beside(difference: Any) -> str:
    if difference is None or difference.level_change is None:
        return " There is no comparison series."
    change = difference.level_change
    span = points(change.low_hac, change.high_hac)
    verdict = "holds" if change.shown else "does not hold"
    return f" Against the units not taught it {verdict} ({span})."
