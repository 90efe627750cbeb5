"""Everything around one fault on one clock, in lanes, each row with its own id."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

LANES = ("treatments", "filters", "readings", "checks", "events", "fault")
COLUMNS = ["at", "lane", "mark", "text", "table", "row_id", "at_logged", "offset_s"]


@dataclass(frozen=True, kw_only=True)
class Clock:
    """What is known of a ventilator's clock: its measured offsets.

    ``offset_s`` is the latest, ventilator clock less site clock; None if never
    measured, and then nothing is moved.
    """

    measured: pd.DataFrame
    offset_s: float | None
    over_limit: bool
    sentence: str

    def at(self, times: pd.Series) -> np.ndarray:
        """The offset nearest before each time, else the first after; 0 if unknown."""
        if self.measured.empty:
            return np.zeros(len(times))
        moments = self.measured["measured_at"].to_numpy("datetime64[us]")
        offsets = self.measured["offset_s"].to_numpy(float)
        place = np.searchsorted(moments, times.to_numpy("datetime64[us]"), "right") - 1
        return offsets[np.maximum(place, 0)]


def clock_of(measured: pd.DataFrame, limit_s: float) -> Clock:
    """The ventilator's clock, with a sentence on what was done about it."""
    measured = measured.dropna(subset=["offset_s"]).reset_index(drop=True)
    if measured.empty:
        return Clock(
            measured=measured,
            offset_s=None,
            over_limit=False,
            sentence="This ventilator's clock was never compared with the site's: the"
            " order of its own events against the others is not sure.",
        )
    offset = float(measured["offset_s"].iloc[-1])
    over = bool((measured["offset_s"].abs() > limit_s).any())
    minutes = abs(offset) / 60
    way = "behind" if offset < 0 else "ahead of"
    text = f"This ventilator's clock ran {minutes:.0f} min {way} the site's"
    if minutes < 1:
        text = "This ventilator's clock agreed with the site's to within a minute"
    if not over:
        text += "; its own events are moved by that much."
    else:
        text += (
            ", more than the department allows. Its own events are moved by the offset"
            " measured nearest before them; both times are shown, and the order of"
            " entries closer together than the offset is not sure."
        )
    return Clock(measured=measured, offset_s=offset, over_limit=over, sentence=text)


def timeline_of(
    facts: dict[str, Any],
    from_at: pd.Timestamp,
    treatments: pd.DataFrame,
    filters: pd.DataFrame,
    readings: pd.DataFrame,
    checks: pd.DataFrame,
    events: pd.DataFrame,
    clock: Clock,
) -> pd.DataFrame:
    """One row an entry, oldest first, with the columns of COLUMNS.

    ``at`` is on the site's clock, ``at_logged`` as it stands in the log; they differ
    only for what the ventilator wrote itself, by ``offset_s``.
    """
    parts = [
        _treatments(treatments),
        _filters(filters, from_at, facts["happened_at"]),
        _readings(readings),
        _checks(checks[checks["checked_at"] >= from_at]),
        _events(events),
        _fault(facts),
    ]
    table = pd.concat([part for part in parts if not part.empty], ignore_index=True)
    return table.sort_values(["at", "lane", "row_id"], ignore_index=True)


def _lane(
    at: pd.Series, lane: str, mark: Any, text: pd.Series, table: str, ids: pd.Series
) -> pd.DataFrame:
    return pd.DataFrame(
        {
            "at": at,
            "lane": lane,
            "mark": mark,
            "text": text,
            "table": table,
            "row_id": ids,
            "at_logged": at,
            "offset_s": np.nan,
        },
        columns=COLUMNS,
    )


def _treatments(rows: pd.DataFrame) -> pd.DataFrame:
    drug = rows["drug"].fillna("drug not recorded")
    generator = rows["generator"].fillna("generator not recorded").str.replace("_", " ")
    text = drug + ", " + generator + ", filter " + rows["filter_state"]
    return _lane(
        rows["started_at"],
        "treatments",
        rows["filter_state"],
        text,
        "treatment",
        rows["treatment_id"],
    )


def _filters(
    rows: pd.DataFrame, from_at: pd.Timestamp, to_at: pd.Timestamp
) -> pd.DataFrame:
    put_in = rows[rows["installed_at"] >= from_at]
    taken = rows[rows["removed_at"].notna() & (rows["removed_at"] <= to_at)]
    return pd.concat(
        [
            _lane(
                put_in["installed_at"],
                "filters",
                "installed",
                "filter " + put_in["filter_id"] + " signed in",
                "filter_use",
                put_in["filter_id"],
            ),
            _lane(
                taken["removed_at"],
                "filters",
                "removed",
                "filter " + taken["filter_id"] + " signed out",
                "filter_use",
                taken["filter_id"],
            ),
        ],
        ignore_index=True,
    )


def _readings(rows: pd.DataFrame) -> pd.DataFrame:
    value = rows["resistance_cmh2o_per_lps"]
    shown = value.map("{:.2f} cmH2O/(L/s)".format)
    doubt = rows["doubt"].fillna("")
    text = shown.where(value.notna(), "not used: " + doubt)
    mark = np.where(value.notna(), "used", "doubted")
    return _lane(
        rows["read_at"], "readings", mark, text, "filter_reading", rows["reading_id"]
    )


def _checks(rows: pd.DataFrame) -> pd.DataFrame:
    outcome = rows["outcome"].astype(object).where(rows["outcome"].notna(), "unknown")
    ratio = rows["ratio"].map("exhaled / inspired {:.3f}".format)
    ratio = ratio.where(rows["ratio"].notna(), "volumes not recorded")
    text = outcome.where(outcome != "unknown", "outcome not recorded") + ", " + ratio
    return _lane(
        rows["checked_at"], "checks", outcome, text, "sensor_check", rows["check_id"]
    )


def _events(rows: pd.DataFrame) -> pd.DataFrame:
    kind = rows["kind"].fillna("event").str.replace("_", " ")
    code = (" " + rows["code"]).fillna("")
    note = (": " + rows["note"]).fillna("")
    made = _lane(
        rows["at"],
        "events",
        rows["kind"].fillna("event"),
        kind + code + note,
        "service_event",
        rows["event_id"],
    )
    return made.assign(at_logged=rows["happened_at"], offset_s=rows["offset_s"])


def _fault(facts: dict[str, Any]) -> pd.DataFrame:
    sensor = str(facts["sensor"]).replace("_", " ")
    note = f": {facts['note']}" if facts["note"] else ""
    return _lane(
        pd.Series([facts["happened_at"]]),
        "fault",
        "fault",
        pd.Series([f"fault of the {sensor} sensor{note}"]),
        "incident",
        pd.Series([facts["incident_id"] or ""]),
    )
