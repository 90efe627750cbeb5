"""How often the flags on filters, sensors and faults are right, on made departments.

Run   python tests/bench/detection.py [departments] [first seed]
Writes engine/evidence/detection.csv, which the Evidence screen prints as it stands.

The departments are made here, by rules of our own that know nothing of the methods:
filters that keep their level, that load straight or ever faster, that cross the limit,
that are changed without an entry; sensors that keep their level or drift; faults with
a cause that leaves a record or none. Seeds are the department numbers. The table kept
is of seeds 500 to 999: on those before them the grades were looked at and tightened.
"""

from __future__ import annotations

import csv
import sys
import tempfile
from collections import Counter
from datetime import datetime
from pathlib import Path

import numpy as np
from made_faults import CAUSES, made, moment
from scipy.stats import beta

from engine.log import open_log
from engine.log.schema import write_log
from engine.policy import load_policy
from engine.replay import replay
from engine.reviews.incident import Incident, review_incident
from engine.stats.drift import drift_of
from engine.stats.filter_life import life_of

OUT = Path(__file__).parents[2] / "engine" / "evidence" / "detection.csv"
POLICY = load_policy("common_practice")
FLAGGED = {"rising", "near_limit", "over_limit"}
FILTERS_EACH = 4  # of every sort, in each department
DAY_H = 24.0


def main(departments: int = 500, first: int = 500) -> None:
    tally: Counter[str] = Counter()
    for seed in range(first, first + departments):
        rng = np.random.default_rng(seed)
        filters(rng, tally, seed)
        sensors(rng, tally)
        with tempfile.TemporaryDirectory() as folder:
            fault(seed, tally, Path(folder))
    seeds = f"{first} to {first + departments - 1}"
    rows = [row(tally, seeds, *asked) for asked in ASKED]
    write(rows)
    for line in rows:
        print(
            f"{line['question']:<66} {line['right_count']:>6} / {line['of_count']:<6}"
            f" {line['share']:>6} ({line['low']} to {line['high']})"
            f"  {line['target'] or '-':<14} {line['met']}"
        )


def filters(rng: np.random.Generator, tally: Counter[str], seed: int) -> None:
    limits = POLICY.filters

    def life(hours, resistance):
        return life_of(
            hours,
            resistance,
            limits.limit_cmh2o_per_lps,
            limits.near_limit_frac,
            limits.readings_for_a_trend_count,
            limits.rising_p,
            limits.unlogged_change_p,
            seed,
        )

    for _ in range(FILTERS_EACH):
        new, scatter = rng.uniform(2.0, 2.5), rng.choice([0.05, 0.08, 0.15])
        steady = read(
            rng, lambda t, new=new: new + 0 * t, rng.uniform(72, 200), scatter
        )
        if len(steady[0]) >= 8:
            done = life(*steady)
            tally["steady"] += 1
            tally["steady flagged"] += done.state in FLAGGED
            tally["level unchanged"] += 1
            tally["level called changed"] += done.suspected_change_h is not None
        crossing(rng, tally, life, new, scatter, limits.limit_cmh2o_per_lps)
        loading(rng, tally, life, new, scatter)


def crossing(rng, tally, life, new, scatter, limit) -> None:
    """A filter that will cross the limit, read until just before it does."""
    at = rng.uniform(30, 160)
    shape = rng.choice(["straight", "speeding", "late"])
    course = {
        "straight": lambda t: new + (limit - new) * t / at,
        "speeding": lambda t: new * (limit / new) ** (t / at),
        "late": lambda t: new + (limit - new) * np.maximum(0, 2 * t / at - 1),
    }[shape]
    hours, resistance = read(rng, course, at, scatter)
    flagged = len(hours) > 0 and life(hours, resistance).state in FLAGGED
    tally[f"crossing {shape}"] += 1
    tally[f"crossing {shape} flagged"] += flagged
    tally["crossing"] += 1
    tally["crossing flagged"] += flagged
    if len(hours) >= 8:
        tally["crossing 8"] += 1
        tally["crossing 8 flagged"] += flagged


def loading(rng, tally, life, new, scatter) -> None:
    """Filters that load below the limit, unchanged and changed without an entry."""
    per_h = rng.uniform(0.1, 0.6) / DAY_H
    span = rng.uniform(72, 160)
    for name, course in (
        ("straight", lambda t: new + per_h * t),
        ("speeding", lambda t: new + per_h * t * t / 100),
    ):
        hours, resistance = read(rng, course, span, scatter)
        if len(hours) >= 8:
            found = life(hours, resistance).suspected_change_h
            tally[f"{name} unchanged"] += 1
            tally[f"{name} called changed"] += found is not None
    at = rng.uniform(48, 110)
    hours, resistance = read(
        rng,
        lambda t: new + per_h * np.where(t > at, t - at, t),
        at + rng.uniform(24, 72),
        scatter,
    )
    if len(hours) >= 8 and (hours > at).sum() >= 2:
        found = life(hours, resistance).suspected_change_h
        drop = "large" if per_h * at >= 1.0 else "small"
        tally[f"changed {drop}"] += 1
        tally[f"changed {drop} found"] += found is not None
        if found is not None:
            first_after = hours[hours > at][0]
            tally["changed located of"] += 1
            place = np.searchsorted(hours, found) - np.searchsorted(hours, first_after)
            tally["changed located"] += abs(place) <= 1


def read(rng, course, span_h, scatter) -> tuple[np.ndarray, np.ndarray]:
    """Readings every shift or so, a fifth missed, to one decimal as people write."""
    planned = np.arange(rng.uniform(0, 8), span_h, 8.0)
    hours = np.sort(planned + rng.normal(0, 1, len(planned)))
    hours = hours[(rng.random(len(hours)) > 0.2) & (hours > 0) & (hours < span_h)]
    noisy = course(hours) + rng.normal(0, scatter, len(hours))
    return hours, np.round(noisy, 1)


def sensors(rng: np.random.Generator, tally: Counter[str]) -> None:
    """Four ventilators: level, drifting, level with a calibration, wild checks."""
    rules = POLICY.sensors
    every = rng.choice([12.0, 24.0, 48.0, 72.0])
    for kind in ("level", "drifting", "calibrated", "wild"):
        hours = np.arange(0, 150 * DAY_H, every)
        hours = hours + rng.uniform(0, every / 4, len(hours))
        scatter = rng.uniform(0.01, 0.02)
        ratio = 1 + rng.normal(0, 0.03) + rng.normal(0, scatter, len(hours))
        start = rng.uniform(60, 120) * DAY_H
        calibrated = np.zeros(len(hours), bool)
        if kind == "drifting":
            span = rng.uniform(14, 28) * DAY_H
            ratio -= 0.15 * np.clip((hours - start) / span, 0, 1)
            kept = hours <= start + span
            hours, ratio, calibrated = hours[kept], ratio[kept], calibrated[kept]
        if kind == "calibrated":
            calibrated[np.searchsorted(hours, start)] = True
            ratio[hours > start] += rng.normal(0, 0.05)
        if kind == "wild":
            ratio[rng.random(len(hours)) < 0.01] -= 0.12
        done = drift_of(
            hours,
            ratio,
            rules.drift_weight,
            rules.drift_limit_sd,
            calibrated=calibrated,
        )
        if kind == "drifting":
            tally["drifting"] += 1
            tally["drifting found"] += bool(done.drifting)
            if done.drifting:
                tally["drift start of"] += 1
                away = abs(done.started_h - start) / DAY_H
                tally["drift start within"] += away <= 3
                inside = done.started_low_h <= start <= done.started_high_h
                tally["drift start inside"] += inside
        else:
            tally["no drift"] += 1
            tally["no drift called"] += bool(done.drifting)


def fault(seed: int, tally: Counter[str], folder: Path) -> None:
    """One whole log with one fault, reviewed; was its cause put first?"""
    cause, tables, truth = made(seed)
    write_log(folder / "log.duckdb", tables, "Etc/UTC", datetime(2026, 6, 1))
    with open_log(folder / "log.duckdb") as log:
        done = replay(log, POLICY)
        review = review_incident(done, "INC")
        done.close()
    recorded = cause != "none"
    right = leads(review, cause) if recorded else nothing_fits(review)
    tally["recorded" if recorded else "unrecorded"] += 1
    tally["recorded first" if recorded else "unrecorded none"] += right
    tally[f"{cause} fault"] += 1
    tally[f"{cause} first"] += right
    tally["faults"] += 1
    tally["supported"] += any(e.grade == "supported" for e in review.explanations)
    if truth["drift_day"] is not None:
        tally["film drift of"] += 1
        if review.drift_started_at is not None:
            away = review.drift_started_at - moment(truth["drift_day"])
            tally["film drift within"] += abs(away.total_seconds()) <= 3 * 86400


def leads(review: Incident, cause: str) -> bool:
    """Whether the true cause stands first, alone or tied."""
    first = review.explanations[0]
    own = next(e for e in review.explanations if e.id == cause)
    return own.grade == first.grade == "consistent" and own.weight == first.weight


def nothing_fits(review: Incident) -> bool:
    """Whether no explanation is called consistent where nothing was recorded."""
    return all(e.grade in {"no record", "against"} for e in review.explanations)


# question, right, of, target, how the target is met
ASKED: tuple[tuple[str, str, str, str], ...] = (
    (
        "crossing filters flagged before they cross, 8 readings or more",
        "crossing 8 flagged",
        "crossing 8",
        ">= 0.95",
    ),
    (
        "crossing filters flagged before they cross, all",
        "crossing flagged",
        "crossing",
        ">= 0.95",
    ),
    (
        "  of these, rising straight",
        "crossing straight flagged",
        "crossing straight",
        "",
    ),
    ("  of these, ever faster", "crossing speeding flagged", "crossing speeding", ""),
    ("  of these, only late", "crossing late flagged", "crossing late", ""),
    (
        "steady filters flagged falsely, 8 readings or more",
        "steady flagged",
        "steady",
        "<= 0.05",
    ),
    (
        "unchanged level filters called changed (asked for .05)",
        "level called changed",
        "level unchanged",
        "0.03 to 0.07",
    ),
    (
        "unchanged filters loading straight called changed (asked for .05)",
        "straight called changed",
        "straight unchanged",
        "0.03 to 0.07",
    ),
    (
        "unchanged filters loading ever faster called changed (asked for .05)",
        "speeding called changed",
        "speeding unchanged",
        "0.03 to 0.07",
    ),
    (
        "unlogged changes found, drop of 1 cmH2O/(L/s) or more",
        "changed large found",
        "changed large",
        "",
    ),
    (
        "unlogged changes found, smaller drop",
        "changed small found",
        "changed small",
        "",
    ),
    ("  found within one reading", "changed located", "changed located of", ""),
    ("drifting sensors found", "drifting found", "drifting", ""),
    (
        "start of the drift within 3 days",
        "drift start within",
        "drift start of",
        ">= 0.80",
    ),
    (
        "start of the drift inside its interval",
        "drift start inside",
        "drift start of",
        "",
    ),
    ("level sensors called drifting, 150 days", "no drift called", "no drift", ""),
    (
        "faults that leave a record: true cause first or tied first",
        "recorded first",
        "recorded",
        ">= 0.80",
    ),
    *(
        (
            f"  of these, {cause.replace('_', ' ')}",
            f"{cause} first",
            f"{cause} fault",
            "",
        )
        for cause in CAUSES
        if cause != "none"
    ),
    (
        "faults that leave no record: nothing called consistent",
        "unrecorded none",
        "unrecorded",
        ">= 0.80",
    ),
    (
        "film faults: start of the drift within 3 days",
        "film drift within",
        "film drift of",
        ">= 0.80",
    ),
    (
        "faults without an examination called supported",
        "supported",
        "faults",
        "<= 0.00",
    ),
)


def row(
    tally: Counter[str],
    seeds: str,
    question: str,
    right: str,
    of: str,
    target: str,
) -> dict[str, object]:
    n, k = tally[of], tally[right]
    share = k / n if n else float("nan")
    low = float(beta.ppf(0.025, k, n - k + 1)) if k else 0.0
    high = float(beta.ppf(0.975, k + 1, n - k)) if k < n else 1.0
    return {
        "question": question,
        "seeds": seeds,
        "right_count": k,
        "of_count": n,
        "share": f"{share:.3f}",
        "low": f"{low:.3f}",
        "high": f"{high:.3f}",
        "target": target,
        "met": met(share, target),
    }


def met(share: float, target: str) -> str:
    if not target:
        return ""
    if target.startswith(">="):
        return "yes" if share >= float(target[2:]) else "no"
    if target.startswith("<="):
        return "yes" if share <= float(target[2:]) else "no"
    low, high = map(float, target.split(" to "))
    return "yes" if low <= share <= high else "no"


def write(rows: list[dict[str, object]]) -> None:
    with OUT.open("w", newline="", encoding="utf-8") as file:
        writer = csv.DictWriter(file, list(rows[0]), lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


if __name__ == "__main__":
    main(*map(int, sys.argv[1:3]))
