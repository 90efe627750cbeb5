"""Chart checks: a random sample of flagged and unflagged treatments, read blind.

A sample is drawn once from a stored seed, in strata of flagged or not and unit, and
kept in the journal as a note on ``sample:2026-10``. Each reviewer then says of each
chart, without seeing flags or the other's word, whether something in it is to be acted
on: a verdict on ``<treatment>:chart``.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import combinations
from typing import Any

import numpy as np
import pandas as pd

from engine.errors import NothingToReview
from engine.journal import Journal
from engine.replay import Replay
from engine.reviews.figures import month_words, percent, percent_range
from engine.reviews.wording import counted
from engine.stats.agreement import Agreement, agreement
from engine.stats.rates import clopper_pearson, none_found_upper
from engine.stats.sampling import Estimate, allotted, drawn, stratified_share

CHART = "chart"
FEWEST_A_STRATUM = 2

_CHARTS = """
SELECT treatment_id, coalesce(unit_token, 'unknown') AS unit_token,
       treatment_id IN (SELECT treatment_id FROM finding) AS flagged
FROM context JOIN treatment USING (treatment_id)
WHERE local_month = $month
"""


@dataclass(frozen=True, kw_only=True)
class Sample:
    """Which charts to read: ``charts`` has treatment_id, in an order that says nothing.

    ``strata``  flagged, unit_token, size, sampled
    """

    month: str
    seed: int
    charts: tuple[str, ...]
    strata: pd.DataFrame

    @property
    def record(self) -> dict[str, Any]:
        """The sample as the journal keeps it."""
        return {
            "seed": self.seed,
            "charts": list(self.charts),
            "strata": self.strata.to_dict("records"),
        }


@dataclass(frozen=True, kw_only=True)
class ChartCheck:
    """What the sampled charts say of the month's flags.

    ``confirmed``  share of flagged charts with something to act on
    ``missed``     share of unflagged charts with something to act on; None unless such
                   charts were read, for without them it is not known
    ``agreement``  of the two reviewers who read most charts together; None without two
    """

    sentence: str
    charts: tuple[str, ...]
    read_count: int
    confirmed: Estimate | None
    missed: Estimate | None
    agreement: Agreement | None
    table: pd.DataFrame  # reviewer one by reviewer two, where there are two


def draw_sample(replay: Replay, month: str, size: int, seed: int) -> Sample:
    """Charts of a month for review, flagged and unflagged, every unit.

    Raises   NothingToReview if the month has no treatments.
    """
    charts = replay.frame(_CHARTS, {"month": month})
    if charts.empty:
        raise NothingToReview(f"no treatments in {month_words(month)}")
    grouped = charts.groupby(["flagged", "unit_token"], sort=True)["treatment_id"]
    keys = list(grouped.groups)
    whole = grouped.size().to_numpy()
    wanted = allotted(whole, size, FEWEST_A_STRATUM)
    taken = [
        drawn(grouped.get_group(key).to_numpy(), int(n), seed + place)
        for place, (key, n) in enumerate(zip(keys, wanted, strict=True))
    ]
    everyone = np.concatenate(taken)
    mixed = np.random.default_rng(seed).permutation(everyone)
    strata = pd.DataFrame(keys, columns=["flagged", "unit_token"]).assign(
        size=whole, sampled=wanted
    )
    return Sample(
        month=month,
        seed=seed,
        charts=tuple(str(each) for each in mixed),
        strata=strata.astype({"flagged": bool, "size": int, "sampled": int}),
    )


def kept_sample(journal: Journal | None, month: str) -> tuple[str, ...]:
    """The charts of the month's sample; empty before one is drawn."""
    held = [
        entry.new
        for entry in ([] if journal is None else journal.standing("note"))
        if entry.object == f"sample:{month}" and isinstance(entry.new, dict)
    ]
    return tuple(str(each) for each in held[-1].get("charts", ())) if held else ()


def chart_check(replay: Replay, journal: Journal | None, month: str) -> ChartCheck:
    """What reviewers found in the month's sample so far."""
    charts = kept_sample(journal, month)
    verdicts = _verdicts(journal, charts)
    whole = replay.frame(_CHARTS, {"month": month})
    judged = _judged(verdicts).merge(whole, on="treatment_id")
    confirmed = _share(whole, judged, flagged=True)
    missed = _share(whole, judged, flagged=False)
    both = _together(verdicts)
    agreed = agreement(both.to_numpy()) if both.to_numpy().sum() else None
    return ChartCheck(
        sentence=_sentence(charts, judged, confirmed, missed, agreed),
        charts=charts,
        read_count=len(judged),
        confirmed=confirmed,
        missed=missed,
        agreement=agreed,
        table=both,
    )


def _verdicts(journal: Journal | None, charts: tuple[str, ...]) -> pd.DataFrame:
    """treatment_id, actor, to_act (true or false); what could not be told is left."""
    columns = ["treatment_id", "actor", "to_act"]
    if journal is None or not charts:
        return pd.DataFrame(columns=columns)
    found = journal.verdicts()
    found = found[found["finding_id"].str.endswith(f":{CHART}")]
    found = found[found["verdict"].isin(["confirmed", "dismissed"])]
    ids = found["finding_id"].str.removesuffix(f":{CHART}")
    told = pd.DataFrame(
        {
            "treatment_id": ids,
            "actor": found["actor"],
            "to_act": found["verdict"] == "confirmed",
        }
    )
    return told[told["treatment_id"].isin(charts)].reset_index(drop=True)


def _judged(verdicts: pd.DataFrame) -> pd.DataFrame:
    """One answer a chart; where reviewers differ it is not confirmed."""
    if verdicts.empty:
        return pd.DataFrame({"treatment_id": [], "to_act": []}).astype(
            {"treatment_id": "str", "to_act": "bool"}
        )
    return verdicts.groupby("treatment_id")["to_act"].min().reset_index()


def _share(whole: pd.DataFrame, judged: pd.DataFrame, flagged: bool) -> Estimate | None:
    """The share over strata of unit, each weighed by how many treatments it has."""
    read = judged[judged["flagged"] == flagged]
    if read.empty:
        return None
    sizes = whole[whole["flagged"] == flagged].groupby("unit_token").size()
    counts = read.groupby("unit_token")["to_act"].agg(["size", "sum"])
    own = sizes.reindex(counts.index).to_numpy()
    done = stratified_share(own, counts["size"], counts["sum"])
    n, x = int(counts["size"].sum()), int(counts["sum"].sum())
    if x in (0, n):
        # No spread was seen, which is not the same as none: the exact ends stand.
        low, high = clopper_pearson(x, n)
        return Estimate(mean=done.mean, se=done.se, low=float(low), high=float(high))
    return done


def _together(verdicts: pd.DataFrame) -> pd.DataFrame:
    """Answers of the two reviewers with most charts in common, as a square table."""
    empty = pd.DataFrame(np.zeros((2, 2), int), [True, False], [True, False])
    wide = verdicts.pivot(index="treatment_id", columns="actor", values="to_act")
    pairs = [wide[list(pair)].dropna() for pair in combinations(wide.columns, 2)]
    best = max(pairs, key=len, default=pd.DataFrame())
    if best.empty:
        return empty
    first, second = best.iloc[:, 0].astype(bool), best.iloc[:, 1].astype(bool)
    return pd.crosstab(first, second).reindex(
        index=[True, False], columns=[True, False], fill_value=0
    )


def _sentence(
    charts: tuple[str, ...],
    judged: pd.DataFrame,
    confirmed: Estimate | None,
    missed: Estimate | None,
    agreed: Agreement | None,
) -> str:
    if not charts:
        return "No charts have been drawn for checking this month."
    parts = [
        f"{len(judged):,} of {counted(len(charts), 'chart')} drawn have been read."
    ]
    if confirmed is not None:
        parts.append(f"Of flagged charts {_told(confirmed)} held something to act on.")
    if missed is not None:
        n = int((~judged["flagged"].astype(bool)).sum())
        none = missed.mean == 0
        most = percent(float(none_found_upper(n)))
        parts.append(
            f"Of unflagged charts none of {n:,} did; up to {most} would fit that."
            if none
            else f"Of unflagged charts {_told(missed)} did."
        )
    elif len(judged):
        parts.append("What the rules miss is not known: no unflagged chart was read.")
    if agreed is not None:
        parts.append(
            f"Two reviewers agreed on {percent(agreed.agreed_frac)} of"
            f" {counted(agreed.charts_count, 'chart')}" + _coefficients(agreed)
        )
    return " ".join(parts)


def _coefficients(agreed: Agreement) -> str:
    if agreed.refusal:
        return "; too few for a coefficient."
    if not math.isfinite(agreed.kappa):
        return (
            f" (AC1 {agreed.ac1:.2f}; kappa cannot be worked out, all answers are"
            " alike)."
        )
    return f" (kappa {agreed.kappa:.2f}, AC1 {agreed.ac1:.2f})."


def _told(share: Estimate) -> str:
    return f"{percent(share.mean)} ({percent_range(share.low, share.high)})"
