"""Filters: every life at a glance, most urgent first, and one filter in depth."""

from __future__ import annotations

from html import escape

import pandas as pd
import streamlit as st

from engine.errors import UnknownId
from engine.reviews.filters import STATE_WORDS, Filters, OneFilter
from reviewapp import data, parts, tables, theme
from reviewapp.drawings.filter import one_filter_svg, small_filter_svg, survival_svg
from reviewapp.reports.filters import figure, filter_report, share

SHOWN = 12  # small drawings before "show more"


def show() -> None:
    """The whole screen."""
    review = data.filters()
    parts.opening(review.sentence)
    parts.caution()
    if review.lives.empty:
        parts.empty(
            "This log holds no filters.",
            "Take in the filters in use and their readings, then open it again.",
        )
        return
    for line in review.cautions:
        st.caption(line)
    _small_multiples(review)
    _in_depth(review)
    _aerosol_or_water(review)
    _how_long(review)
    _readings_not_used(review)
    _report(review)


def _small_multiples(review: Filters) -> None:
    st.subheader("Most urgent first")
    drawn = review.drawn["filter_id"].unique()
    shown = [name for name in review.lives["filter_id"] if name in set(drawn)]
    if len(shown) > SHOWN and not st.toggle(
        f"Show all {len(shown)} drawn of {len(review.lives):,}", key="all_filters"
    ):
        shown = shown[:SHOWN]
    colours = theme.colours()
    top = _common_top(review, shown)
    cells = "".join(
        f'<a href="{escape(parts.address("filters", filter=name))}" target="_self"'
        ' style="text-decoration:none;color:inherit">'
        f"{small_filter_svg(review, name, colours, top)}</a>"
        for name in shown
    )
    grid = "display:grid;grid-template-columns:repeat(auto-fill,minmax(250px,1fr))"
    st.markdown(
        f'<div style="{grid};gap:22px 20px">{cells}</div>', unsafe_allow_html=True
    )
    st.caption(
        f"Resistance in cmH2O/(L/s) at {review.reference_flow_lpm:g} L/min against"
        " hours in use, all on one scale. Dashed: the department's limit. Band:"
        " forecast, to its horizon; a short bar where no date is given. Column: share"
        " of the rise that goes along with captured aerosol, hatched where it cannot be"
        " told."
    )
    with st.expander("All filters as a table"):
        st.dataframe(_table(review), hide_index=True, width="stretch")


def _common_top(review: Filters, shown: list[str]) -> float:
    values = review.drawn[review.drawn["filter_id"].isin(shown)]
    high = values["resistance_cmh2o_per_lps"].max()
    least = review.limit_cmh2o_per_lps * 1.15
    return least if pd.isna(high) else max(least, float(high) * 1.05)


def _table(review: Filters) -> pd.DataFrame:
    lives = review.lives
    return pd.DataFrame(
        {
            "Filter": lives["filter_id"],
            "Ventilator": lives["ventilator_token"],
            "State": lives["state"].map(STATE_WORDS),
            "In use": lives["in_use"].map({True: "yes", False: "removed"}),
            "Hours": lives["in_use_h"].round(0),
            "Readings": lives["readings_count"],
            "Not used": lives["doubted_count"],
            "Last, cmH2O/(L/s)": lives["last_cmh2o_per_lps"],
            "Slope a day": lives["slope_per_h"].astype(float) * 24,
            "To the limit, h": lives["time_to_limit_h"],
            "To aerosol": [share(row) for row in lives.to_dict("records")],
            "Treatments": lives["treatments_count"],
        }
    )


def _in_depth(review: Filters) -> None:
    st.subheader("One filter in depth")
    names = review.lives["filter_id"].tolist()
    asked = st.query_params.get("filter")
    if asked and asked not in names:
        parts.empty(f"The log has no filter {asked}.", "Choose one below.")
        asked = None
    chosen = st.selectbox(
        "Filter",
        names,
        index=names.index(asked) if asked else 0,
        key="filter_chosen",
        on_change=_remember,
    )
    try:
        one = data.one_filter(chosen)
    except UnknownId as problem:
        parts.empty(str(problem), "Choose another filter.")
        return
    st.markdown(f"**{escape(one.sentence)}**")
    st.markdown(one_filter_svg(review, one, theme.colours()), unsafe_allow_html=True)
    _verdict(one)
    for line in one.cautions[: len(one.cautions) - len(review.cautions)]:
        st.caption(line)
    _behind(one)


def _remember() -> None:
    st.query_params["filter"] = st.session_state["filter_chosen"]


def _verdict(one: OneFilter) -> None:
    words = {
        "aerosol": "The rise goes along with captured aerosol",
        "water": "The rise goes along with humid hours",
        "cannot_tell": "Aerosol or water: cannot tell",
    }[one.verdict]
    reason = f": {one.verdict_reason}" if one.verdict_reason else ""
    ends = ""
    if one.share is not None and one.share_low != one.share_high:
        ends = f" Share to aerosol {one.share:.0%} ({one.share_low:.0%} to"
        ends += f" {one.share_high:.0%})."
    slope = one.life.slope_per_h
    a_day = "" if slope is None else f" Slope {slope * 24:+.2f} cmH2O/(L/s) a day."
    per_ml = "" if one.per_ml.refusal else f" {one.per_ml.slope:+.2f} per mL caught."
    st.markdown(f"{words}{reason}.{ends}{a_day}{per_ml}")


def _behind(one: OneFilter) -> None:
    readings, treatments, drugs = st.tabs(
        [
            f"Readings ({len(one.readings)})",
            f"Treatments ({len(one.treatments)})",
            "What is on record of these drugs",
        ]
    )
    with readings:
        shown = one.readings[
            [
                "reading_id",
                "read_at",
                "hours_h",
                "flow_lpm",
                "pressure_drop_cmh2o",
                "resistance_cmh2o_per_lps",
                "doubt",
            ]
        ]
        st.dataframe(tables.labelled(shown), hide_index=True, width="stretch")
    with treatments:
        shown = one.treatments[
            [
                "treatment_id",
                "started_at",
                "drug",
                "generator",
                "humidification",
                "captured_ml",
            ]
        ]
        st.dataframe(tables.labelled(shown), hide_index=True, width="stretch")
    with drugs:
        if one.drugs.empty:
            st.caption("No drug is recorded through this filter.")
        else:
            st.dataframe(one.drugs, hide_index=True, width="stretch")


def _aerosol_or_water(review: Filters) -> None:
    st.subheader("Aerosol or water")
    loading = review.loading
    if loading.refusal:
        parts.empty(
            f"Cannot tell: {loading.refusal}.", "More filters with readings help."
        )
        return
    st.markdown(
        f"Pooled over {loading.filters_count:,} filters and {loading.readings_count:,}"
        " readings: resistance goes up by"
        f" **{loading.rate_per_dose:.2f}** ({loading.rate_per_dose_low:.2f} to"
        f" {loading.rate_per_dose_high:.2f}) cmH2O/(L/s) per mL caught, and by"
        f" **{loading.rate_per_humid_h * 24:.2f}**"
        f" ({loading.rate_per_humid_h_low * 24:.2f} to"
        f" {loading.rate_per_humid_h_high * 24:.2f}) per day of humid gas."
    )


def _how_long(review: Filters) -> None:
    st.subheader("How long they last")
    groups = review.groups
    by = st.radio("By", groups["by"].unique().tolist(), horizontal=True, key="lives_by")
    own = groups[groups["by"] == by]
    left, right = st.columns([1, 1], gap="large")
    with left:
        st.markdown(survival_svg(review, by, theme.colours()), unsafe_allow_html=True)
    with right:
        table = pd.DataFrame(
            {
                "Group": own["group"].str.replace("_", " "),
                "Filters": own["lives_count"],
                "Reached the limit": own["reached_count"],
                "Median, h": [figure(v, "{:.0f}") for v in own["median_h"]],
                "Note": own["refusal"],
            }
        )
        st.dataframe(table, hide_index=True, width="stretch")
        p = own["log_rank_p"].iloc[0]
        if p is not None and not pd.isna(p):
            st.caption(f"Log-rank between the groups: p {p:.3f}.")
    st.caption(
        "A filter changed before the limit counts as watched until then"
        " (Kaplan-Meier); groups of fewer than five are left out."
    )


def _readings_not_used(review: Filters) -> None:
    doubted = review.doubts[review.doubts["doubt"] != ""]
    if doubted.empty:
        return
    n = int(doubted["readings_count"].sum())
    with st.expander(f"{n:,} readings not used, by reason"):
        st.dataframe(
            doubted.rename(columns={"doubt": "Why", "readings_count": "Readings"})[
                ["Why", "Readings"]
            ],
            hide_index=True,
            width="stretch",
        )


def _report(review: Filters) -> None:
    parts.downloads("filters", lambda: filter_report(review))


show()
