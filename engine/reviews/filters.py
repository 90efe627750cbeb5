"""Every filter's life, most urgent first, and what its rise goes along with."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from engine.errors import UnknownId
from engine.evidence.filter import NEW_FILTER_CMH2O_PER_LPS, POOLED_FILTERS_COUNT
from engine.evidence.stickiness import stickiness_of
from engine.replay import Replay
from engine.reviews import filter_rows as rows
from engine.reviews.wording import counted, listed
from engine.stats.filter_life import FilterLife, life_of
from engine.stats.lifetimes import Lives, kaplan_meier, log_rank
from engine.stats.loading import CANNOT_TELL, Loading, loading_shares
from engine.stats.trends import Slope, theil_sen

STATE_WORDS = {
    "over_limit": "over the limit",
    "near_limit": "near the limit",
    "rising": "rising",
    "too_few_readings": "too few readings",
    "steady": "steady",
}
RISING_STATES = ("rising", "near_limit", "over_limit")
ONLY_AEROSOL = "no humid hours on it: nothing else on record to set against the aerosol"
ONLY_WATER = "no catch on it: nothing else on record to set against the humid hours"
SHOWN_FILTERS = 2000  # rows of the table; the most urgent come first
DRAWN_FILTERS = 24  # small multiples whose readings leave the engine

LIMIT_IS_LOCAL = (
    "No published bedside level exists for filter resistance: the limit is this "
    "department's own."
)
PUBLISHED_NEW = (
    f"For scale: breathing-circuit filters never used had a median of"
    f" {float(NEW_FILTER_CMH2O_PER_LPS):g} cmH2O/(L/s), quartiles"
    f" {NEW_FILTER_CMH2O_PER_LPS.low:g} to {NEW_FILTER_CMH2O_PER_LPS.high:g}, at a flow"
    f" the source does not give ({NEW_FILTER_CMH2O_PER_LPS.source.key})."
)
POINTS_ONLY = (
    "The share that points to aerosol is an association across filters, worked out "
    "from a model estimate of what each filter caught. It points; it does not prove."
)


@dataclass(frozen=True, kw_only=True)
class Filters:
    """What the department's filters say.

    ``lives``     one row a filter, most urgent first
    ``drawn``     readings of the first of them, with their segment
    ``segments``  their straight stretches, for drawing
    ``groups``    Kaplan-Meier by kind, drug class and humidification
    ``curves``    their curves
    ``doubts``    readings by why they are not used; the empty word is used
    """

    sentence: str
    limit_cmh2o_per_lps: float
    near_cmh2o_per_lps: float
    reference_flow_lpm: float
    as_at: pd.Timestamp | None
    lives: pd.DataFrame
    counts: dict[str, int]
    drawn: pd.DataFrame
    segments: pd.DataFrame
    loading: Loading
    groups: pd.DataFrame
    curves: pd.DataFrame
    doubts: pd.DataFrame
    cautions: tuple[str, ...]


@dataclass(frozen=True, kw_only=True)
class OneFilter:
    """One filter in depth, on hours in use and on what it has caught."""

    sentence: str
    facts: dict[str, Any]
    life: FilterLife
    readings: pd.DataFrame
    gathered: pd.DataFrame
    treatments: pd.DataFrame
    drugs: pd.DataFrame  # what is on record of the drugs given through it
    per_ml: Slope
    share: float | None
    share_low: float | None
    share_high: float | None
    verdict: str
    verdict_reason: str
    cautions: tuple[str, ...]


def review_filters(replay: Replay) -> Filters:
    """Every filter of the log, most urgent first.

    A log without filters gives an empty review whose sentence says so.
    """
    limits = replay.policy.filters
    as_at = replay.frame(rows.AS_AT)["as_at"].iloc[0]
    lives = replay.frame(rows.LIVES, {"as_at": as_at})
    gathered = _gathered(replay)
    loading = _loading(gathered, _changes(lives))
    lives = _with_shares(lives, loading, gathered, replay)
    lives = _most_urgent_first(lives)
    counts = lives["state"].value_counts().to_dict()
    drawn, segments = _drawn(replay, lives["filter_id"].head(DRAWN_FILTERS).tolist())
    groups, curves = _survival(replay, lives)
    return Filters(
        sentence=_sentence(lives, limits.limit_cmh2o_per_lps),
        limit_cmh2o_per_lps=limits.limit_cmh2o_per_lps,
        near_cmh2o_per_lps=limits.near_limit_frac * limits.limit_cmh2o_per_lps,
        reference_flow_lpm=limits.reference_flow_lpm,
        as_at=None if pd.isna(as_at) else as_at,
        lives=lives.head(SHOWN_FILTERS),
        counts={str(state): int(n) for state, n in counts.items()},
        drawn=drawn,
        segments=segments,
        loading=loading,
        groups=groups,
        curves=curves,
        doubts=replay.frame(rows.DOUBT_COUNTS),
        cautions=(LIMIT_IS_LOCAL, PUBLISHED_NEW, POINTS_ONLY),
    )


def one_filter(
    replay: Replay, filter_id: str, review: Filters | None = None
) -> OneFilter:
    """One filter in depth.

    Raises   UnknownId if the log has no filter of that id.
    """
    review = review_filters(replay) if review is None else review
    found = review.lives[review.lives["filter_id"] == filter_id]
    if found.empty:
        raise UnknownId(f"no filter {filter_id} in the log")
    facts = {str(name): value for name, value in found.iloc[0].items()}
    readings = replay.frame(rows.READINGS, {"filters": [filter_id]})
    gathered = _gathered(replay)
    gathered = gathered[gathered["filter_id"] == filter_id].reset_index(drop=True)
    life = _life(replay, readings)
    last = life.segments[-1].from_h if life.segments else 0.0
    since = gathered[gathered["hours_h"] >= last]
    per_ml = theil_sen(
        since["captured_ml"].to_numpy(), since["resistance_cmh2o_per_lps"].to_numpy()
    )
    treatments = replay.frame(rows.TREATMENTS_OF, {"filter_id": filter_id})
    return OneFilter(
        sentence=_one_sentence(filter_id, facts, life, review),
        facts=facts,
        life=life,
        readings=readings,
        gathered=gathered,
        treatments=treatments,
        drugs=_drugs(treatments),
        per_ml=per_ml,
        share=_or_none(facts["share"]),
        share_low=_or_none(facts["share_low"]),
        share_high=_or_none(facts["share_high"]),
        verdict=facts["verdict"],
        verdict_reason=facts["verdict_reason"],
        cautions=(*_cautions_of(facts), *review.cautions),
    )


def _gathered(replay: Replay) -> pd.DataFrame:
    return replay.frame(rows.GATHERED)


def _changes(lives: pd.DataFrame) -> dict[str, float]:
    known = lives.dropna(subset=["suspected_change_h"])
    return dict(
        zip(known["filter_id"], known["suspected_change_h"].astype(float), strict=True)
    )


def _loading(gathered: pd.DataFrame, changes: dict[str, float]) -> Loading:
    """Shares pooled over filters; a suspected change starts a new segment."""
    changed = gathered["filter_id"].map(changes).astype(float)
    later = (gathered["hours_h"] >= changed).astype(int)
    segment = pd.factorize(gathered["filter_id"])[0] * 2 + later.to_numpy()
    treated = gathered["treatments_count"].notna()
    return loading_shares(
        segment,
        gathered["filter_id"].to_numpy(dtype=object).astype(str),
        gathered["resistance_cmh2o_per_lps"].to_numpy(dtype=float),
        gathered["captured_ml"].where(treated).to_numpy(dtype=float),
        gathered["humid_h"].where(treated).to_numpy(dtype=float),
    )


def _with_shares(
    lives: pd.DataFrame, loading: Loading, gathered: pd.DataFrame, replay: Replay
) -> pd.DataFrame:
    """Adds share, ends, verdict and, where it cannot tell, the reason."""
    table = pd.DataFrame(
        {
            "filter_id": loading.filters,
            "share": loading.share,
            "share_low": loading.low,
            "share_high": loading.high,
            "verdict": loading.verdict,
        }
    )
    lives = lives.merge(table, on="filter_id", how="left")
    lives["verdict"] = lives["verdict"].fillna(CANNOT_TELL)
    most = replay.policy.records.unknown_share_caution_frac
    n = lives["treatments_count"].clip(lower=1)
    blurred_dose = lives["captured_unknown_count"] / n > most
    blurred_water = lives["humid_unknown_count"] / n > most
    rises = lives["state"].isin(RISING_STATES)
    reasons = np.select(
        [
            ~rises,
            np.full(len(lives), bool(loading.refusal)),
            lives["treatments_count"] == 0,
            blurred_dose,
            blurred_water,
            lives["share"].isna(),
            lives["verdict"] == CANNOT_TELL,
        ],
        [
            "it is not shown to rise",
            loading.refusal,
            "no treatment is recorded on this filter",
            "too many of its treatments lack what is needed to estimate the catch",
            "too many of its treatments do not say whether the gas was humid",
            "no rise beyond the scatter of its readings",
            "the interval reaches to both sides of a half or is too wide",
        ],
        default="",
    )
    hidden = reasons != ""
    lives["verdict_reason"] = reasons
    lives.loc[hidden, "verdict"] = CANNOT_TELL
    silent = blurred_dose | blurred_water | ~rises
    lives.loc[silent, ["share", "share_low", "share_high"]] = math.nan
    gathered_of = gathered.groupby("filter_id")[["captured_ml", "humid_h"]].max()
    humid = lives["filter_id"].map(gathered_of["humid_h"]).fillna(0.0)
    caught = lives["filter_id"].map(gathered_of["captured_ml"]).fillna(0.0)
    told = lives["verdict"] != CANNOT_TELL
    lives.loc[told & (humid <= 0), "verdict_reason"] = ONLY_AEROSOL
    lives.loc[told & (caught <= 0), "verdict_reason"] = ONLY_WATER
    return lives


def _most_urgent_first(lives: pd.DataFrame) -> pd.DataFrame:
    """By state, in use before removed, then by time to the limit.

    A filter that ran away and was taken out is looked back on before one that is in
    use and has too few readings to say anything of.
    """
    order = {state: place for place, state in enumerate(STATE_WORDS)}
    return (
        lives.assign(
            _state=lives["state"].map(order),
            _soon=lives["time_to_limit_h"].astype(float).fillna(math.inf),
            _high=-lives["last_cmh2o_per_lps"].astype(float).fillna(-math.inf),
        )
        .sort_values(
            ["_state", "in_use", "_soon", "_high", "filter_id"],
            ascending=[True, False, True, True, True],
        )
        .drop(columns=["_state", "_soon", "_high"])
        .reset_index(drop=True)
    )


def _life(replay: Replay, readings: pd.DataFrame) -> FilterLife:
    limits = replay.policy.filters
    return life_of(
        readings["hours_h"].to_numpy(dtype=float),
        readings["resistance_cmh2o_per_lps"].to_numpy(dtype=float),
        limits.limit_cmh2o_per_lps,
        limits.near_limit_frac,
        limits.readings_for_a_trend_count,
        limits.rising_p,
        limits.unlogged_change_p,
    )


def _drawn(replay: Replay, filters: list[str]) -> tuple[pd.DataFrame, pd.DataFrame]:
    readings = replay.frame(rows.READINGS, {"filters": filters})
    stretches = []
    for filter_id, own in readings.groupby("filter_id"):
        for number, segment in enumerate(_life(replay, own).segments):
            stretches.append(
                {
                    "filter_id": filter_id,
                    "segment": number,
                    "from_h": segment.from_h,
                    "to_h": segment.to_h,
                    "slope_per_h": segment.slope_per_h,
                    "slope_low": segment.slope_low,
                    "slope_high": segment.slope_high,
                    "begins_with": segment.begins_with,
                    **_middle(own, segment.from_h, segment.to_h),
                }
            )
    columns = "filter_id segment from_h to_h slope_per_h slope_low slope_high"
    columns += " begins_with middle_h middle_cmh2o_per_lps"
    return readings, pd.DataFrame(stretches, columns=columns.split())


def _middle(readings: pd.DataFrame, from_h: float, to_h: float) -> dict[str, float]:
    """The medians a segment's line passes through."""
    inside = readings[
        readings["hours_h"].between(from_h, to_h)
        & readings["resistance_cmh2o_per_lps"].notna()
    ]
    return {
        "middle_h": float(inside["hours_h"].median()),
        "middle_cmh2o_per_lps": float(inside["resistance_cmh2o_per_lps"].median()),
    }


_STATE_CLAUSES = {
    "over_limit": ("is", "are", "over the limit"),
    "near_limit": ("is", "are", "near it"),
    "rising": ("is", "are", "rising"),
    "too_few_readings": ("has", "have", "too few readings"),
}
_GROUPINGS = {
    "filter_kind": "filter kind",
    "drug_class": "drug class most often given",
    "humidification": "humidification most often used",
}


def _survival(replay: Replay, lives: pd.DataFrame) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Lives until the limit, by three groupings; groups too small are left to all."""
    limit = replay.policy.filters.limit_cmh2o_per_lps
    endings = replay.frame(rows.ENDINGS, {"limit": limit})
    endings = endings.merge(lives[["filter_id", *_GROUPINGS]], on="filter_id")
    hours = endings["watched_h"].to_numpy(dtype=float)
    reached = endings["reached"].to_numpy(dtype=bool)
    table, curves = [], []

    def add(by: str, group: str, done: Lives, p: float | None) -> None:
        table.append(
            {
                "by": by,
                "group": group,
                "lives_count": done.lives_count,
                "reached_count": done.ended_count,
                "median_h": done.median_h,
                "median_low_h": done.median_low_h,
                "median_high_h": done.median_high_h,
                "log_rank_p": p,
                "refusal": done.refusal,
            }
        )
        curves.append(done.curve.assign(by=by, group=group))

    add("all", "all filters", kaplan_meier(hours, reached), None)
    for column, by in _GROUPINGS.items():
        group = endings[column].astype(object).fillna("unknown").to_numpy()
        names, sizes = np.unique(group, return_counts=True)
        shown = np.isin(group, names[sizes >= int(POOLED_FILTERS_COUNT)])
        p = _or_none(log_rank(hours[shown], reached[shown], group[shown]).p)
        for name in sorted(set(group)):
            own = group == name
            if own.sum() < int(POOLED_FILTERS_COUNT):
                continue
            add(by, str(name), kaplan_meier(hours[own], reached[own]), p)
    return pd.DataFrame(table), pd.concat(curves, ignore_index=True)


def _sentence(lives: pd.DataFrame, limit: float) -> str:
    if lives.empty:
        return "The log holds no filters: nothing can be said of their resistance."
    used = lives[lives["in_use"]]
    states = used["state"].value_counts()
    parts = [
        f"{counted(int(states[state]), one, many)} {words}"
        for state, (one, many, words) in _STATE_CLAUSES.items()
        if state in states
    ]
    opening = (
        f"{counted(len(lives), 'filter')} in the log, {len(used):,} still in use at its"
        f" end."
    )
    if used.empty:
        middle = ""
    elif parts:
        middle = f" Of those, {listed(parts)}; the limit is {limit:g} cmH2O/(L/s)."
    else:
        middle = " All of those are steady."
    over = int(((lives["state"] == "over_limit") & ~lives["in_use"]).sum())
    before = (
        f" {counted(over, 'filter')} passed the limit before removal." if over else ""
    )
    n = int(lives["suspected_change_h"].notna().sum())
    change = (
        f" {counted(n, 'filter')} may have been changed without an entry." if n else ""
    )
    return f"{opening}{middle}{before}{change}{_pointing(lives)}"


def _pointing(lives: pd.DataFrame) -> str:
    rising = lives[lives["state"].isin(RISING_STATES)]
    if rising.empty:
        return ""
    verdicts = rising["verdict"].value_counts()
    aerosol, water = (int(verdicts.get(word, 0)) for word in ("aerosol", "water"))
    unsure = len(rising) - aerosol - water
    return (
        f" Of {counted(len(rising), 'filter')} that rose, the rise goes along with"
        f" captured aerosol in {aerosol:,}, with humid hours in {water:,}; in"
        f" {unsure:,} the record cannot tell."
    )


def _one_sentence(
    filter_id: str, facts: dict[str, Any], life: FilterLife, review: Filters
) -> str:
    kind = facts["filter_kind"]
    kind = "kind not recorded" if kind is None or pd.isna(kind) else str(kind)
    opening = (
        f"Filter {filter_id} ({kind}), {facts['in_use_h']:.0f} h in use,"
        f" {counted(life.readings_count, 'reading')} used:"
        f" {STATE_WORDS[life.state]}."
    )
    return f"{opening}{_change_words(life)}{_forecast_words(life, review)}"


def _change_words(life: FilterLife) -> str:
    if life.suspected_change_h is None or life.change_p is None:
        return ""
    return (
        f" Readings fell by {-(life.change_drop_cmh2o_per_lps or 0):.1f} before hour"
        f" {life.suspected_change_h:.0f}, as after a change nobody logged"
        f" (p {life.change_p:.3f})."
    )


def _forecast_words(life: FilterLife, review: Filters) -> str:
    if life.time_to_limit_h is None:
        return f" No date for the limit: {life.forecast_refusal}."
    high = life.time_to_limit_high_h
    end = (
        "beyond what may be forecast"
        if high is None or math.isinf(high)
        else f"{high:.0f} h"
    )
    return (
        f" At this pace it reaches {review.limit_cmh2o_per_lps:g} cmH2O/(L/s)"
        f" {life.time_to_limit_h:.0f} h after the last reading"
        f" ({life.time_to_limit_low_h or 0:.0f} h to {end})."
    )


def _drugs(treatments: pd.DataFrame) -> pd.DataFrame:
    """Each drug given, how often, and what has been reported of it."""
    found = []
    for drug, count in treatments["drug"].value_counts().items():
        known = stickiness_of(str(drug))
        found.append(
            {
                "drug": drug,
                "treatments_count": int(count),
                "reported": known.reported if known else "nothing found",
                "firmness": known.firmness if known else "",
                "source": known.source.key if known else "",
            }
        )
    columns = ["drug", "treatments_count", "reported", "firmness", "source"]
    return pd.DataFrame(found, columns=columns)


def _cautions_of(facts: dict[str, Any]) -> tuple[str, ...]:
    found = []
    if facts["overlaps"]:
        found.append(
            "Another filter is signed in on the same ventilator at the same time:"
            " which one a reading belongs to is as the entry says."
        )
    if facts["elsewhere"]:
        found.append("Entries name this filter on another ventilator as well.")
    if facts["doubted_count"]:
        n = counted(int(facts["doubted_count"]), "reading")
        found.append(f"{n} not used; each says why.")
    return tuple(found)


def _or_none(value: Any) -> float | None:
    return None if value is None or pd.isna(value) else float(value)
