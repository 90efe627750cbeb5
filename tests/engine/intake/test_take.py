"""Every row of an export is used or refused, and the log says which and why."""

import csv
import hashlib
import json
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from engine.columns import RECORD_TABLES
from engine.errors import SourceUnreadable
from engine.intake import take_in
from engine.log import open_log, write_log
from engine.log.dictionary import template

CREATED = datetime(2026, 12, 1)
HEAD = "treatment_id,started_at,mode,tidal_volume_ml"


def one_value(log, column):
    return log.cursor().execute(f"SELECT {column} FROM treatment").fetchone()[0]


def test_a_file_with_our_column_names_comes_in_as_it_stands(export, taken):
    path = export(
        "treatment.csv",
        "treatment_id,started_at,generator,bias_flow_lpm,actuations_count,"
        "spontaneous_breaths,note",
        "T1,2026-01-05T08:00Z,Vibrating_Mesh,2.5,4,Yes,seen",
        'T2,2026-01-05T09:00Z,,,,unknown,"a, b and\nc"',
    )
    report, log, refused = taken(path)
    rows = log.cursor().execute(
        "SELECT treatment_id, started_at, generator::VARCHAR, bias_flow_lpm, "
        "actuations_count, spontaneous_breaths, note FROM treatment ORDER BY 1"
    )
    at = datetime(2026, 1, 5, 8)
    assert rows.fetchall() == [
        ("T1", at, "vibrating_mesh", 2.5, 4, True, "seen"),
        ("T2", at + timedelta(hours=1), None, None, None, None, "a, b and\nc"),
    ]
    assert refused.empty
    assert report.repaired.empty
    unknown = report.unknown.set_index("column")
    assert unknown.loc["generator", "unknown_frac"] == 0.5
    assert unknown.loc["treatment_id", "unknown_frac"] == 0
    assert unknown.loc["filter_id", "unknown_frac"] == 1


def test_the_log_names_its_sources_with_their_fingerprint(export, taken):
    path = export("treatment.csv", HEAD, "T1,2026-01-05T08:00Z,vcv,450")
    _, log, _ = taken(path)
    digest = hashlib.sha256(path.read_bytes()).hexdigest()[:12]
    info = log.frame("SELECT * FROM log_info").iloc[0]
    assert info["sources"] == f"treatment.csv {digest}"
    assert info["created_at"] == CREATED
    assert log.site_zone == "Europe/Berlin"


def test_bad_rows_keep_their_row_their_cells_and_their_reason(export, taken):
    path = export(
        "treatment.csv",
        HEAD,
        "T1,2026-01-05T08:00Z,vcv,450",
        "T2,2026-01-05T08:00Z,VC+,450",
        "T3,2026-01-05T08:00Z,vcv,4500",
        ",2026-01-05T08:00Z,vcv,450",
        "T5,,vcv,450",
        "T6,2026-01-05T08:00Z,vcv,abc",
        "T1,2026-01-05T08:00Z,vcv,450",
        "T8,2026-01-05T08:00Z,vcv",
        "T9,2026-01-05T08:00Z,vcv,450,,",
    )
    report, log, refused = taken(path)
    assert list(
        zip(refused["row"], refused["code"], refused["message"], strict=True)
    ) == [
        (
            3,
            "unknown_word",
            "mode must be one of vcv, pcv, prvc, psv, simv, aprv, cpap, other, "
            "unknown; got VC+ (treatment T2)",
        ),
        (
            4,
            "out_of_range",
            "tidal_volume_ml must be at most 3000; got 4500 (treatment T3)",
        ),
        (5, "missing", "treatment_id must be given; got nothing (treatment row 5)"),
        (6, "missing", "started_at must be given; got nothing (treatment T5)"),
        (7, "unreadable", "tidal_volume_ml must be a number; got abc (treatment T6)"),
        (
            8,
            "duplicate",
            "treatment_id must stand in one row only; got T1 again (treatment T1)",
        ),
        (9, "unreadable", "a row must have 4 cells; got 3 (treatment row 9)"),
        (10, "unreadable", "a row must have 4 cells; got 6 (treatment row 10)"),
    ]
    assert json.loads(refused["raw"].iloc[0]) == {
        "treatment_id": "T2",
        "started_at": "2026-01-05T08:00Z",
        "mode": "VC+",
        "tidal_volume_ml": "450",
    }
    assert refused["raw"].iloc[7] == "T9,2026-01-05T08:00Z,vcv,450,,"
    assert tuple(report.tables.iloc[0]) == ("treatment", 9, 1, 8)
    assert tuple(log.accounts().iloc[0]) == ("treatment", 9, 1, 8)
    assert "treatment: 9 rows in = 1 used + 8 refused" in report.text().splitlines()


def test_an_id_that_stands_in_two_files_is_used_once(export, taken):
    march = export("treatment_march.csv", HEAD, "T1,2026-03-05T08:00Z,vcv,450")
    april = export("treatment_april.csv", HEAD, "T1,2026-04-05T08:00Z,vcv,450")
    _, log, refused = taken(march, april)
    assert one_value(log, "started_at") == datetime(2026, 3, 5, 8)
    assert list(refused["source"]) == ["treatment_april.csv"]


def test_two_drugs_at_one_time_are_two_treatments(export, taken):
    path = export(
        "treatment.csv",
        "treatment_id,started_at,patient_token,drug",
        "T1,2026-01-05T08:00Z,P1,albuterol",
        "T2,2026-01-05T08:00Z,P1,ipratropium",
    )
    assert taken(path)[2].empty


def test_files_of_several_tables_are_told_by_name_or_by_columns(export, taken):
    named = export(
        "filter_use_2026.csv",
        "filter_id,ventilator_token,installed_at",
        "F1,V1,2026-01-05T08:00Z",
    )
    by_columns = export(
        "march.csv",
        "reading_id,read_at,flow_lpm,pressure_drop_cmh2o",
        "R1,2026-01-05T08:00Z,60,2.5",
    )
    clocks = export(
        "offsets.csv",
        "ventilator_token,measured_at,offset_s",
        "V1,2026-01-05T08:00Z,-1440",
        "V1,2026-01-05T08:00Z,-1440",
    )
    report, log, refused = taken(named, by_columns, clocks)
    assert list(report.sources["table"]) == [
        "filter_use",
        "filter_reading",
        "clock_offset",
    ]
    assert list(refused["message"]) == [
        "a row must not repeat another; got the same values again (clock offsets row 3)"
    ]
    assert log.frame("SELECT offset_s FROM clock_offset").iloc[0, 0] == -1440


@pytest.mark.parametrize("table", RECORD_TABLES, ids=lambda table: table.name)
def test_an_empty_template_comes_in_as_a_table_of_no_rows(tmp_path, taken, table):
    path = tmp_path / f"{table.name}.csv"
    path.write_text(template(table))
    report, log, _ = taken(path)
    assert tuple(report.tables.iloc[0]) == (table.name, 0, 0, 0)
    assert log.accounts()["rows_in"].sum() == 0
    assert report.unknown["unknown_frac"].isna().all()


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "cp1252"])
def test_windows_and_unicode_files_read_alike(export, taken, encoding, end):
    path = export(
        "treatment.csv",
        "treatment_id,started_at,note",
        "T1,2026-01-05T08:00Z,Gerät gewechselt – 22 µm",
        encoding=encoding,
        end=end,
    )
    report, log, _ = taken(path)
    assert one_value(log, "note") == "Gerät gewechselt – 22 µm"
    told = {"utf-8": "utf-8", "utf-8-sig": "utf-8", "cp1252": "cp1252"}[encoding]
    assert report.sources["encoding"].iloc[0] == told


@pytest.mark.parametrize("delimiter", [",", ";", "\t", "|"])
def test_the_delimiter_is_taken_from_the_head(export, taken, delimiter):
    lines = [HEAD, "T1,2026-01-05T08:00Z,vcv,450"]
    path = export("treatment.txt", *(line.replace(",", delimiter) for line in lines))
    assert one_value(taken(path)[1], "tidal_volume_ml") == 450


def test_a_parquet_file_comes_in_with_its_own_types(tmp_path, taken):
    path = tmp_path / "treatment.parquet"
    pd.DataFrame(
        {
            "treatment_id": ["T1", "T2"],
            "started_at": pd.to_datetime(["2026-07-05 08:00"] * 2),
            "charted_at": pd.to_datetime(["2026-07-05 08:00+02:00"] * 2),
            "mode": pd.Categorical(["vcv", "nonsense"]),
            "bias_flow_lpm": [2.0, None],
            "heated_humidifier_on": [True, False],
        }
    ).to_parquet(path)
    _, log, refused = taken(path)
    assert list(refused["row"]) == [2]
    # Without an offset it is summer time in Berlin, two hours ahead of UTC.
    assert one_value(log, "started_at") == datetime(2026, 7, 5, 6)
    assert one_value(log, "charted_at") == datetime(2026, 7, 5, 6)
    assert one_value(log, "heated_humidifier_on") is True


# ISO 8601; Berlin is one hour ahead of UTC in winter, two in summer, and its clocks
# went from 03:00 back to 02:00 on 25 October 2026 (EU directive 2000/84/EC: last
# Sundays of March and October, 01:00 UTC).
PLACED = {
    "2026-01-05 08:00": "2026-01-05 07:00",
    "2026-07-05T08:00:30": "2026-07-05 06:00:30",
    "2026-07-05T08:00+02:00": "2026-07-05 06:00",
    "2026-07-05T08:00-0500": "2026-07-05 13:00",
    "2026-07-05T08:00Z": "2026-07-05 08:00",
    "2026-07-05": "2026-07-04 22:00",
    "2026-07-05 24:00": "2026-07-05 22:00",
    "2026-12-31T24:00:00Z": "2027-01-01 00:00",
    "2026-10-25T02:30+02:00": "2026-10-25 00:30",
    "2026-10-25T02:30+01:00": "2026-10-25 01:30",
    "2026-10-25 01:59:59": "2026-10-24 23:59:59",
    "2026-10-25 03:00": "2026-10-25 02:00",
    "2026-03-29 03:00": "2026-03-29 01:00",
}
TWICE = ["2026-10-25 02:00", "2026-10-25T02:30", "2026-10-25T02:59:59"]
NEVER = ["2026-03-29 02:00", "2026-03-29 02:30", "2026-03-29T02:59:59.9"]
NO_TIMES = [
    "3/4/26 0800",
    "04/03/2026",
    "46085.354",
    "08:00",
    "24:00",
    "2026-02-30 24:00",
    "2026-01-05 24:30",
    "2026-01-05 8:00",
    "20260105T0800",
    "2026-13-01",
    "tomorrow",
    "epoch",
]


def test_a_time_is_placed_in_utc(export, taken):
    rows = [f"{typed},{typed},vcv,450" for typed in PLACED]
    _, log, refused = taken(export("treatment.csv", HEAD, *rows))
    found = log.cursor().execute("SELECT treatment_id, started_at FROM treatment")
    assert refused.empty
    assert dict(found.fetchall()) == {
        typed: datetime.fromisoformat(utc) for typed, utc in PLACED.items()
    }


def test_a_time_that_cannot_be_placed_is_refused_with_the_reason(export, taken):
    wrong = [*TWICE, *NEVER, *NO_TIMES]
    rows = [f"T{i},{typed},vcv,450" for i, typed in enumerate(wrong)]
    refused = taken(export("treatment.csv", HEAD, *rows))[2]
    once = "started_at must be a time that came once"
    expected = [
        *(f"{once}; got {t}, which came twice in Europe/Berlin" for t in TWICE),
        *(f"{once}; got {t}, which never came in Europe/Berlin" for t in NEVER),
        *(f"started_at must be a date and time; got {t}" for t in NO_TIMES),
    ]
    assert list(refused["message"]) == [
        f"{text} (treatment T{i})" for i, text in enumerate(expected)
    ]
    assert set(refused["code"]) == {"unreadable"}
    assert list(refused["value"]) == wrong


CHANGES = ["2026-10-25", "2026-11-01", "2026-03-29", "2026-04-05", "2026-10-04"]
ZONES = ["Europe/Berlin", "America/New_York", "Australia/Lord_Howe", "Asia/Kolkata"]


@settings(
    max_examples=8,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
@given(
    zone=st.sampled_from(ZONES),
    times=st.lists(
        st.one_of(
            st.datetimes(datetime(2000, 1, 1), datetime(2035, 1, 1)),
            # Near the changes of the clocks of these zones in 2026.
            st.sampled_from(
                ["2026-10-25", "2026-11-01", "2026-04-05", "2026-10-04"]
            ).flatmap(
                lambda day: st.integers(0, 300).map(
                    lambda n: datetime.fromisoformat(day) + timedelta(minutes=n)
                )
            ),
        ),
        min_size=1,
        max_size=40,
    ),
)
def test_local_times_agree_with_the_time_zone_library(export, taken, zone, times):
    # Checked against zoneinfo (IANA data, PEP 495): a local time is placed only where
    # both readings of it have one offset.
    times = [at.replace(microsecond=0) for at in times]
    rows = [f"T{i},{at.isoformat()},vcv,450" for i, at in enumerate(times)]
    _, log, refused = taken(export("treatment.csv", HEAD, *rows), zone=zone)
    expected = {}
    for i, at in enumerate(times):
        offsets = {
            at.replace(tzinfo=ZoneInfo(zone), fold=f).utcoffset() for f in (0, 1)
        }
        if len(offsets) == 1:
            placed = at.replace(tzinfo=ZoneInfo(zone)).astimezone(UTC)
            expected[f"T{i}"] = placed.replace(tzinfo=None)
    found = log.cursor().execute("SELECT treatment_id, started_at FROM treatment")
    assert dict(found.fetchall()) == expected
    assert len(refused) == len(times) - len(expected)


CELL = st.one_of(
    st.sampled_from(
        ["", "unknown", "vcv", "450 mL", "0.4 L", "2026-01-05", "T1", "-1"]
    ),
    st.text(st.characters(codec="utf-8", exclude_characters="\x00"), max_size=8),
)


@settings(
    max_examples=10,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
@given(rows=st.lists(st.lists(CELL, min_size=1, max_size=6), max_size=12))
def test_whatever_a_file_holds_no_row_is_lost(tmp_path, rows):
    path, into = tmp_path / "treatment.csv", tmp_path / "any.duckdb"
    with path.open("w", encoding="utf-8", newline="") as file:
        file.write(HEAD + "\n")
        csv.writer(file, lineterminator="\n").writerows(rows)
    report = take_in([path], into, "Etc/UTC", CREATED)
    with open_log(into) as log:
        accounts = log.accounts().iloc[0]
        assert accounts["rows_in"] == report.sources["rows_read"].iloc[0]
        assert accounts["rows_in"] == accounts["rows_used"] + accounts["rows_refused"]
        assert len(log.frame("SELECT * FROM refused")) == accounts["rows_refused"]
        assert set(log.frame("SELECT code FROM refused")["code"]) <= {
            "missing",
            "unreadable",
            "unknown_word",
            "out_of_range",
            "duplicate",
            "identifier",
        }


@pytest.mark.parametrize(
    ("name", "content", "says"),
    [
        ("treatment.csv", b"", " is empty; it needs a row of column names"),
        ("treatment.csv", b"\n\n", " has no row of column names at its beginning"),
        (
            "treatment.csv",
            b"treatment_id,started_at,Started_At\n",
            ": two columns are named started_at",
        ),
        (
            "treatment.csv",
            b"treatment_id,mode\n",
            "treatment.csv has no column started_at; every file of treatment rows "
            "has one",
        ),
        (
            "march.csv",
            b"a,b\n1,2\n",
            "march.csv: its name and columns do not tell which table it holds; begin "
            "its name with one of treatment, filter_use, filter_reading, sensor_check, "
            "service_event, incident, room, clock_offset",
        ),
        (
            "treatment.xlsx",
            b"PK",
            " is of a kind not taken in; save it as .csv or .parquet",
        ),
        ("treatment.parquet", b"PAR1", " cannot be read: "),
        (
            "treatment.csv",
            b"treatment_id,started_at\nT1,\x81\n",
            " is neither UTF-8 nor Windows text; save it as UTF-8",
        ),
    ],
)
def test_a_file_that_cannot_be_used_gives_one_clear_line(tmp_path, name, content, says):
    path = tmp_path / name
    path.write_bytes(content)
    with pytest.raises(SourceUnreadable) as error:
        take_in([path], tmp_path / "log.duckdb", "Etc/UTC", CREATED)
    text = str(error.value)
    assert says in text
    assert "\n" not in text
    assert not (tmp_path / "log.duckdb").exists()


def test_missing_sources_and_folders_are_named(tmp_path):
    into = tmp_path / "log.duckdb"
    for sources, says in (
        ([], "no source given; name the files to take in"),
        ([tmp_path / "no.csv"], f"{tmp_path}/no.csv does not exist; check the name"),
        ([tmp_path], f"{tmp_path} is a folder; name the files in it"),
    ):
        with pytest.raises(SourceUnreadable) as error:
            take_in(sources, into, "Etc/UTC", CREATED)
        assert str(error.value) == says


@pytest.mark.parametrize("zone", [None, "", "Mars/Olympus"])
def test_a_zone_must_be_given_and_known(export, tmp_path, zone):
    path = export("treatment.csv", HEAD)
    with pytest.raises(SourceUnreadable, match="site_zone must be a time zone such as"):
        take_in([path], tmp_path / "log.duckdb", zone, CREATED)


def test_no_file_but_a_log_is_overwritten(export, tmp_path):
    path = export("treatment.csv", HEAD, "T1,2026-01-05T08:00Z,vcv,450")
    for into in (path, export("notes.txt", "mine")):
        before = into.read_bytes()
        with pytest.raises(SourceUnreadable, match="is no log; give another name"):
            take_in([path], into, "Etc/UTC", CREATED)
        assert into.read_bytes() == before
    with pytest.raises(SourceUnreadable, match="is not a folder; make it first"):
        take_in([path], tmp_path / "none" / "log.duckdb", "Etc/UTC", CREATED)
    log = tmp_path / "log.duckdb"
    write_log(log, {}, "Etc/UTC", CREATED)
    take_in([path], log, "Etc/UTC", CREATED)
    with open_log(log) as opened:
        assert len(opened.frame("SELECT * FROM treatment")) == 1


@pytest.mark.parametrize("last", ['"vcv,450', 'vcv,"450'])
def test_a_quotation_mark_never_closed_loses_nothing_in_silence(export, taken, last):
    path = export(
        "treatment.csv",
        HEAD,
        "T1,2026-01-05T08:00Z,vcv,450",
        f"T2,2026-01-05T08:00Z,{last}",
        "T3,2026-01-05T08:00Z,vcv,450",
    )
    with pytest.raises(SourceUnreadable, match="a quotation mark is not closed, near"):
        taken(path)


def test_rows_taken_into_one_cell_by_a_quotation_mark_are_refused(export, taken):
    path = export(
        "treatment.csv",
        HEAD,
        "T1,2026-01-05T08:00Z,vcv,450",
        'T2,2026-01-05T08:00Z,"vcv,450',
        'T3,2026-01-05T08:00Z,vcv",450',
        "T4,2026-01-05T08:00Z,vcv,450",
    )
    report, log, refused = taken(path)
    assert report.sources["rows_read"].iloc[0] == 3
    assert "T3" in " ".join(refused["raw"])
    assert sorted(log.frame("FROM treatment")["treatment_id"]) == ["T1", "T4"]


def test_a_note_over_two_lines_is_one_cell(export, taken):
    path = export(
        "treatment.csv",
        HEAD + ",note",
        'T1,2026-01-05T08:00Z,vcv,450,"one, two',
        'three"',
        "T2,2026-01-05T08:00Z,vcv,450,",
    )
    report, log, refused = taken(path)
    assert report.sources["rows_read"].iloc[0] == 2
    assert refused.empty
    assert sorted(log.frame("FROM treatment")["treatment_id"]) == ["T1", "T2"]


def test_wider_text_is_named(tmp_path, taken):
    path = tmp_path / "treatment.csv"
    path.write_text("treatment_id,started_at\nT1,2026-01-05T08:00Z\n", "utf-16")
    with pytest.raises(SourceUnreadable, match="save it as UTF-8"):
        taken(path)


def test_columns_the_log_does_not_have_are_listed_not_read(export, taken):
    path = export(
        "treatment.csv", HEAD + ",ward,", "T1,2026-01-05T08:00Z,vcv,450,north,"
    )
    report, _, _ = taken(path)
    assert report.ignored == ("treatment.csv: ward",)
    assert "not taken in, no such column: treatment.csv: ward" in report.text()
