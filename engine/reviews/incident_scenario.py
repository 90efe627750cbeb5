"""The same history with a filter on every treatment, or with filters changed on time.

What the sensor would have met if the setups of the look-back had been different. The
first is worked out again by the balance, treatment by treatment; the second counts
treatments given through a filter past its limit or its hours.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pyarrow as pa

from engine.columns import code_of
from engine.physics.balance import balance
from engine.replay import Replay
from engine.replay.batches import batch_of
from engine.reviews.wording import counted

if TYPE_CHECKING:
    from engine.policy import Policy
    from engine.reviews.incident import Incident

_SETUPS = """
SELECT treatment.*, context.* EXCLUDE (treatment_id)
FROM treatment JOIN context USING (treatment_id)
WHERE treatment.ventilator_token = $ventilator
  AND treatment.started_at > $from AND treatment.started_at <= $to
ORDER BY treatment.started_at, treatment.treatment_id
"""


@dataclass(frozen=True, kw_only=True)
class OtherHistory:
    """The look-back as it was, and as it might have been.

    ``table`` has one row a history: sensor_ml with its ends, and what it would cost.
    """

    sentence: str
    table: pd.DataFrame
    past_limit_count: int
    past_hours_count: int
    extra_filters_count: int


def other_history(replay: Replay, incident: Incident) -> OtherHistory:
    """What filters on every treatment, or changes on time, would have altered.

    A treatment whose estimate was refused stays without one in both histories and is
    counted, so that the two are like for like.
    """
    cursor = replay.log.cursor()
    look = incident.look_back
    asked = {
        "ventilator": incident.facts["ventilator_token"],
        "from": look.from_at,
        "to": look.to_at,
    }
    arrow = cursor.sql(_SETUPS, params=asked).to_arrow_table().combine_chunks()
    if arrow.num_rows == 0:
        return _nothing()
    rows = batch_of(pa.RecordBatch.from_struct_array(arrow.to_struct_array().chunk(0)))
    fitted = dict(rows)
    present = code_of("expiratory_filter", "present")
    fitted["expiratory_filter"] = np.full_like(rows["expiratory_filter"], present)
    histories = {
        "as it was": balance(rows),
        "a filter on every treatment": balance(fitted),
    }
    known = _known(rows, histories)
    table = pd.DataFrame(
        [
            {"history": name, **_to_sensor(rows, done, known)}
            for name, done in histories.items()
        ]
    )
    limit, hours, extra = _late(rows, replay.policy)
    return OtherHistory(
        sentence=_sentence(table, limit, hours, extra),
        table=table,
        past_limit_count=limit,
        past_hours_count=hours,
        extra_filters_count=extra,
    )


def _liquid_ml(rows: dict[str, np.ndarray]) -> np.ndarray:
    inhaler = rows["generator"] == code_of("generator", "pmdi_spacer")
    return np.where(inhaler, 0.0, rows["fill_volume_ml"])


def _known(
    rows: dict[str, np.ndarray], histories: dict[str, dict[str, np.ndarray]]
) -> np.ndarray:
    """Treatments both histories have an estimate for."""
    good = np.isfinite(_liquid_ml(rows))
    for done in histories.values():
        good &= np.isfinite(done["sensor_side_frac"])
    return good


def _to_sensor(
    rows: dict[str, np.ndarray], done: dict[str, np.ndarray], known: np.ndarray
) -> dict[str, float]:
    liquid = _liquid_ml(rows)[known]
    sums = {
        f"sensor{end}_ml": float((liquid * done[f"sensor_side{end}_frac"][known]).sum())
        for end in ("", "_low", "_high")
    }
    return {
        **sums,
        "treatments_count": len(known),
        "not_estimated_count": int((~known).sum()),
    }


def _late(rows: dict[str, np.ndarray], policy: Policy) -> tuple[int, int, int]:
    """Treatments through a filter past its limit, past its hours, and extra changes."""
    over = rows["filter_trend"] == code_of("filter_trend", "over_limit")
    classes = policy.filters.hours_by_drug_class
    allowed = np.full(len(over), math.nan)
    for name, hours in classes.items():
        allowed[rows["drug_class"] == code_of("drug_class", name)] = hours
    with np.errstate(invalid="ignore"):
        late = rows["filter_age_h"] > allowed
        lives = np.floor(rows["filter_age_h"] / allowed)
    code, names = pd.factorize(rows["filter_in_use_id"])
    most = np.zeros(len(names))
    named = code >= 0
    np.maximum.at(most, code[named], np.nan_to_num(lives[named]))
    extra = int(most.sum())
    return int(over.sum()), int(late.sum()), extra


def _sentence(table: pd.DataFrame, limit: int, hours: int, extra: int) -> str:
    was, fitted = (row for _, row in table.iterrows())
    less = was["sensor_ml"] - fitted["sensor_ml"]
    apart = fitted["sensor_high_ml"] < was["sensor_low_ml"]
    shown = "" if apart else "; the bands overlap, so no difference is shown"
    first = (
        f"With a filter on every treatment {fitted['sensor_ml']:.1f} mL"
        f" ({fitted['sensor_low_ml']:.1f} to {fitted['sensor_high_ml']:.1f}) would have"
        f" reached the sensor instead of {was['sensor_ml']:.1f} mL, {less:.1f} mL"
        f" less{shown}."
    )
    if not limit and not hours:
        return f"{first} No treatment went through a filter past its limit or hours."
    return (
        f"{first} {counted(limit, 'treatment')} went through a filter past its limit,"
        f" {hours} through one past its hours; changing on time would have taken"
        f" {counted(extra, 'more filter', 'more filters')}."
    )


def _nothing() -> OtherHistory:
    columns = ["history", "sensor_ml", "sensor_low_ml", "sensor_high_ml"]
    columns += ["treatments_count", "not_estimated_count"]
    return OtherHistory(
        sentence="No treatment is recorded in the look-back: nothing to change.",
        table=pd.DataFrame(columns=columns),
        past_limit_count=0,
        past_hours_count=0,
        extra_filters_count=0,
    )
