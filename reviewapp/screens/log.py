"""Log: where the data came from, rows in = used + refused, what nobody recorded."""

from __future__ import annotations

import pandas as pd
import streamlit as st

from engine.columns import BAD_ROW_CODES, RECORD_TABLES, TREATMENT, labels
from engine.log.dictionary import dictionary, template
from engine.reviews.incident_words import local
from reviewapp import data, entry, parts, tables
from reviewapp.drawings.log import unknown_svg

SHOWN = 500


def show() -> None:
    """The whole screen."""
    log = data.log()
    accounts = data.frame("FROM accounts LIMIT 100")
    total = accounts[["rows_in", "rows_used", "rows_refused"]].sum()
    parts.opening(
        f"{data.log_label()}: {total['rows_in']:,} rows in = "
        f"{total['rows_used']:,} used + {total['rows_refused']:,} refused. "
        "Nothing is dropped in silence."
    )
    parts.caution()
    info = data.frame("FROM log_info LIMIT 1")
    at = info["created_at"].iloc[0]
    written = local(at, log.site_zone) if pd.notna(at) else "unknown"
    st.markdown(
        parts.plain(
            f"Fingerprint {log.fingerprint}. Times of the site: {log.site_zone}. "
            f"Written {written}."
            f" Sources: {info['sources'].iloc[0] or 'not named'}."
        )
    )
    if log.ignored:
        st.caption(parts.plain(f"In the file but not read: {', '.join(log.ignored)}."))
    _accounts(accounts)
    _refused()
    _unknown()
    _clocks()
    _journal()
    _dictionary()


def _accounts(accounts: pd.DataFrame) -> None:
    st.subheader("Rows by table")
    named = {table.name: table.label for table in RECORD_TABLES}
    shown = pd.DataFrame(
        {
            "Table": [named.get(name, name) for name in accounts["table"]],
            "Rows in": accounts["rows_in"],
            "Used": accounts["rows_used"],
            "Refused": accounts["rows_refused"],
        }
    )
    st.dataframe(shown, hide_index=True, width="stretch")


def _refused() -> None:
    st.subheader("Refused rows")
    count = data.frame("SELECT count(*) AS n FROM refused")["n"].iloc[0]
    if not count:
        st.markdown("No row was refused.")
        return
    reasons = data.frame(
        'SELECT code, "table", "column", count(*) AS rows FROM refused '
        "GROUP BY ALL ORDER BY rows DESC, code LIMIT 200"
    )
    reasons.insert(1, "Why", [BAD_ROW_CODES.get(c, "") for c in reasons["code"]])
    st.dataframe(
        reasons.rename(columns=str.capitalize),
        hide_index=True,
        width="stretch",
    )
    with st.expander(f"The first {min(count, SHOWN)} of {count:,} refused rows"):
        rows = data.frame(
            'SELECT source, row, "table", "column", code, value, message '
            f"FROM refused LIMIT {SHOWN}"
        )
        st.dataframe(tables.labelled(rows), hide_index=True, width="stretch")
        st.download_button(
            "These rows as CSV",
            data=lambda: tables.csv_of(rows),
            file_name="refused.csv",
            mime="text/csv",
            on_click="ignore",
        )


def _unknown() -> None:
    st.subheader("What nobody recorded")
    names = [column.name for column in TREATMENT.columns if not column.required]
    asked = ", ".join(f'avg(("{name}" IS NULL)::INT) AS "{name}"' for name in names)
    shares = data.frame(
        f"SELECT {asked} FROM treatment WHERE status IS DISTINCT FROM 'not_given'"
    ).iloc[0]
    if shares.isna().all():
        parts.empty(
            "This log holds no treatments.",
            "Take in treatments with aerosol-review intake, then open it again.",
        )
        return
    st.caption("Share of treatments without the entry, by column; hatched is unknown.")
    listed = [(labels()[name], float(shares[name])) for name in names]
    listed.sort(key=lambda item: -item[1])
    st.markdown(unknown_svg(listed), unsafe_allow_html=True)


def _clocks() -> None:
    st.subheader("Ventilator clocks")
    limit = data.policy().sensors.clock_offset_limit_s
    clocks = data.frame(
        "SELECT ventilator_token, arg_max(offset_s, measured_at) AS offset_s,"
        " max(measured_at) AS measured_at FROM clock_offset GROUP BY 1"
        " ORDER BY abs(arg_max(offset_s, measured_at)) DESC, 1 LIMIT 500"
    )
    if clocks.empty:
        st.markdown("No clock offset was measured: the order of two records is unsure.")
        return
    off = int((clocks["offset_s"].abs() > limit).sum())
    st.markdown(
        f"{off} of {len(clocks)} clocks were off by more than {limit:g} s at their "
        "last measurement."
    )
    with st.expander("Every clock"):
        st.dataframe(tables.labelled(clocks), hide_index=True, width="stretch")


def _journal() -> None:
    st.subheader("Journal")
    journal = data.journal()
    entries = journal.entries()
    head = journal.head[:12] or "empty"
    st.markdown(
        parts.plain(
            f"{len(entries)} entries in {journal.path.name}; its chain holds; "
            f"head {head}."
        )
    )
    if not entries:
        return
    with st.expander("The last entries"):
        rows = [
            {
                "No.": each.seq,
                "At (UTC)": f"{each.at:%Y-%m-%d %H:%M}",
                "Action": each.action,
                "About": each.object,
                "By": f"{each.actor} ({each.role})",
                "Why": each.reason,
            }
            for each in entries[-100:][::-1]
        ]
        st.dataframe(pd.DataFrame(rows), hide_index=True, width="stretch")
    _take_back(
        {
            each.seq: f"{each.seq}: {each.action} on {each.object}"
            for each in journal.standing()
        }
    )


def _take_back(standing: dict[int, str]) -> None:
    with st.expander("Take an entry back"), entry.form("take_back"):
        st.caption("Nothing is erased: the entry and its withdrawal both stay.")
        latest_first = sorted(standing, reverse=True)
        seq = st.selectbox("Entry", latest_first, format_func=lambda one: standing[one])
        signed = entry.signature()
        if st.form_submit_button("Take it back") and seq is not None:
            entry.take_back(seq, signed)


def _dictionary() -> None:
    st.subheader("Data dictionary and import templates")
    with st.expander("Every column a log can hold"):
        st.dataframe(dictionary(), hide_index=True, width="stretch", height=420)
    named = {table.label: table for table in RECORD_TABLES}
    chosen = st.selectbox("Template of", list(named), key="template")
    st.download_button(
        "Empty CSV of this table",
        data=template(named[chosen]).encode("utf-8"),
        file_name=f"{named[chosen].name}.csv",
        mime="text/csv",
        on_click="ignore",
    )


show()
