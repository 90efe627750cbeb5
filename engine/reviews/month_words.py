"""The month in sentences, written from its figures."""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np
import pandas as pd

from engine.evidence.review import BASELINE_POINTS_COUNT, RUN_POINTS_COUNT
from engine.reviews.figures import inside, month_words, percent, significant
from engine.reviews.month_journal import Confirmations
from engine.reviews.month_lines import Line
from engine.reviews.wording import counted, listed
from engine.stats.charts import g_limits

ROOM_AND_SENSOR = (
    "No exposure limit exists for most of these drugs: these two are for the trend."
)


def sentence(
    month: str,
    unit: str | None,
    treatments: int,
    patients: int,
    lines: Mapping[str, Line],
    filters: pd.DataFrame,
    whole: bool,
) -> str:
    where = f", unit {unit}" if unit else ""
    cut = "" if whole else " so far (the log ends inside the month)"
    parts = [
        f"{month_words(month)}{where}: {counted(treatments, 'treatment')} in"
        f" {counted(patients, 'patient')}{cut}."
    ]
    fitted = lines["I01"]
    if fitted.value is not None:
        unknown = percent(fitted.unknown_frac)
        told = fitted.indicator.sentence.format(value=percent(fitted.value))
        parts.append(f"{told} (unknown {unknown}).")
    elif fitted.unknown:
        parts.append("Whether filters were fitted cannot be told.")
    states = filters["state"].value_counts()
    near = [
        f"{counted(int(states[state]), 'filter')} {words}"
        for state, words in (
            ("over_limit", "went over the limit"),
            ("near_limit", "came near it"),
        )
        if state in states
    ]
    moved = [each for each in lines.values() if each.change_shown]
    shift = f"{counted(len(moved), 'indicator')} changed" if moved else ""
    rest = listed([*near, *([shift] if shift else [])])
    if rest:
        parts.append(f"{rest[0].upper()}{rest[1:]}.")
    return " ".join(parts)


EVENTS = "I19"  # flow-sensor events: too grave to wait for a limit


def happened(lines: tuple[Line, ...]) -> str:
    """What is to be looked at, and every month in which a flow sensor failed."""
    told = [each.says for each in lines if each.look and each.value is not None][:4]
    told += [
        each.says
        for each in lines
        if each.indicator.id == EVENTS and each.count > 0 and each.says not in told
    ]
    if not told:
        return "Nothing lies outside its limits or past the figure it is held against."
    return " ".join(told)


def changed(lines: tuple[Line, ...]) -> str:
    told = [
        f"{each.indicator.title}: {each.changed[0].lower()}{each.changed[1:]}"
        for each in lines
        if each.change_shown
    ]
    if all(each.change is None for each in lines):
        return "Nothing can be compared with the month before."
    if not told:
        return "No difference from the month before goes beyond its interval."
    return " ".join(told[:5])


def sure(lines: tuple[Line, ...]) -> str:
    dim = [
        f"{inside(each.indicator.title)} ({percent(each.unknown_frac)} unknown)"
        for each in lines
        if each.known + each.unknown and each.unknown_frac > 0.2
    ]
    if not dim:
        return "Every figure rests on records of which no more than a fifth is blank."
    return f"Least sure, because much is not recorded: {listed(dim[:5])}."


def to_decide(
    lines: tuple[Line, ...],
    filters: pd.DataFrame,
    sensors: pd.DataFrame,
    checked: Confirmations,
) -> tuple[str, ...]:
    asked = [
        f"{each.indicator.title}: {each.figure}, {_past(each)}. Is it the setup, the"
        " supply or the record?"
        for each in lines
        if each.look
    ]
    over = int((filters["state"] == "over_limit").sum())
    if over:
        asked.append(
            f"{counted(over, 'filter')} over the department's limit: is the change"
            " interval right?"
        )
    if len(sensors):
        asked.append(
            f"{counted(len(sensors), 'ventilator')} with a sensor to look at: is a"
            " check due?"
        )
    if checked.flags and not checked.reviewed:
        asked.append(
            f"None of {counted(checked.flags, 'flag')} has been reviewed: draw a sample"
            " before acting on them."
        )
    return tuple(asked[:6])


def _past(each: Line) -> str:
    if bool(each.months["outside"].iloc[-1]):
        return "outside the limits of earlier months"
    return f"{each.indicator.start_words} with its whole interval"


def dose_sentence(dose: Mapping[str, float]) -> str:
    told = dose["shown"] + dose["not_shown"]
    if not told:
        return "Whether another site would have given more cannot be told this month."
    text = (
        f"By the estimate another site of the same generator gives more, beyond the"
        f" band, in {counted(int(dose['shown']), 'treatment')} of {told:,.0f} that"
        f" could be estimated ({percent(dose['shown'] / told)})."
    )
    if dose["unknown"]:
        text += f" For {counted(int(dose['unknown']), 'treatment')} it cannot be told."
    return text


def exposure_sentence(dose: Mapping[str, float]) -> str:
    if not dose["estimated"]:
        return "What reached room and sensors cannot be told this month."

    def told(name: str) -> str:
        low, high = dose[f"{name}_low_mg"], dose[f"{name}_high_mg"]
        middle = significant(dose[f"{name}_mg"])
        return f"{middle} mg ({significant(low)} to {significant(high)})"

    return (
        f"By the estimate {told('room')} reached the room and {told('sensor')} the"
        f" expiratory sensors, from {counted(int(dose['estimated']), 'treatment')} of"
        f" {dose['treatments']:,.0f}. {ROOM_AND_SENSOR}"
    )


def rare_events(places: np.ndarray, treatments: float) -> str:
    """Flow-sensor events by treatments between them: a long gap is good.

    ``places``  how many treatments had been given at each event, in order
    """
    if not len(places):
        return (
            f"No flow-sensor event in {counted(int(treatments), 'treatment')} so far."
        )
    since = int(treatments - places[-1])
    opening = (
        f"{counted(len(places), 'flow-sensor event')} so far; the last one"
        f" {counted(since, 'treatment')} ago"
    )
    gaps = np.diff(places)
    needed = int(RUN_POINTS_COUNT)
    if len(gaps) < needed:
        return f"{opening}. Limits of the gaps need {needed + 1} events."
    limits = g_limits(gaps)
    if math.isnan(limits.high):
        return f"{opening}. They come too often for a chart of rare events."
    told = f"{opening}; {limits.mean:,.0f} lie between two on average"
    if since > limits.high:
        return f"{told}. So long a gap would be rare by chance: better than before."
    if gaps[-1] < limits.low:
        return f"{told}. So short a gap would be rare by chance."
    firm = "" if len(gaps) >= int(BASELINE_POINTS_COUNT) else " (provisional)"
    return f"{told}; up to {limits.high:,.0f} is chance{firm}."
