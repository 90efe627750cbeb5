"""A log is written whole, from the declared columns, and put in place in one step."""

import os
from datetime import UTC, datetime, timedelta, timezone

import duckdb
import pandas as pd
import pyarrow as pa
import pytest

from engine.columns import LOG_INFO, TABLES
from engine.log import open_log, write_log
from engine.log.schema import create, word_types

CREATED = datetime(2026, 2, 1)


def treatments(**columns):
    start = pd.to_datetime(["2026-01-05"])
    return pd.DataFrame({"treatment_id": ["T1"], "started_at": start, **columns})


def test_every_declared_column_stands_in_the_file_with_its_words_in_order():
    with duckdb.connect() as connection:
        create(connection)
        found = connection.execute(
            "SELECT table_name, column_name, data_type FROM duckdb_columns() "
            "WHERE schema_name = 'main' AND NOT internal"
        ).fetchall()
    stored = {(table, column): kind for table, column, kind in found}
    declared = {(t.name, c.name): c for t in TABLES for c in t.columns}
    assert set(stored) == set(declared)
    for place, column in declared.items():
        if column.kind == "word":
            listed = ", ".join(f"'{word}'" for word in column.words)
            assert stored[place] == f"ENUM({listed})"


def test_columns_of_one_name_share_one_word_list():
    assert word_types()["filter_kind_words"][-1] == "unknown"


def test_what_is_written_is_read_back_and_what_was_left_out_is_missing(small):
    with open_log(small) as log:
        rows = log.cursor().execute(
            "SELECT treatment_id, ended_at, mode::VARCHAR, spontaneous_breaths, "
            "bias_flow_lpm, actuations_count, note, drug FROM treatment ORDER BY 1"
        )
        assert rows.fetchall() == [
            ("T1", datetime(2026, 1, 5, 8, 20), "vcv", True, 2.0, None, "seen", None),
            ("T2", None, None, None, None, 4, None, None),
        ]
        info = log.frame("SELECT * FROM log_info").iloc[0]
        assert info["sources"] == "made by hand"
        assert info["created_at"] == CREATED
        assert list(log.frame("SELECT * FROM log_info").columns) == [
            column.name for column in LOG_INFO.columns
        ]


def test_arrow_tables_are_taken_as_well(tmp_path):
    rows = pa.table(
        {
            "treatment_id": ["T1", "T2"],
            "started_at": pa.array([datetime(2026, 1, 5)] * 2, pa.timestamp("us")),
            "mode": pa.array(["pcv", None]).dictionary_encode(),
        }
    )
    write_log(tmp_path / "a.duckdb", {"treatment": rows}, "Etc/UTC", CREATED)
    with open_log(tmp_path / "a.duckdb") as log:
        assert log.frame("SELECT count(mode) AS n FROM treatment")["n"].iloc[0] == 1


def test_a_time_with_a_zone_is_stored_in_utc(tmp_path):
    start = pd.to_datetime(["2026-01-05 08:00+02:00"])
    rows = pd.DataFrame({"treatment_id": ["T1"], "started_at": start})
    made = datetime(2026, 2, 1, 1, 0, tzinfo=timezone(timedelta(hours=1)))
    write_log(tmp_path / "z.duckdb", {"treatment": rows}, "Etc/UTC", made)
    with open_log(tmp_path / "z.duckdb") as log:
        started = log.frame("SELECT started_at FROM treatment").iloc[0, 0]
        created = log.frame("SELECT created_at FROM log_info").iloc[0, 0]
    assert started == datetime(2026, 1, 5, 6)
    assert created == datetime(2026, 2, 1, tzinfo=UTC).replace(tzinfo=None)


@pytest.mark.parametrize(
    ("tables", "text"),
    [
        ({"treatments": treatments()}, "a log has no table treatments"),
        ({"log_info": treatments()}, "a log has no table log_info"),
        ({"treatment": treatments(ward=["N"])}, "treatment has no column ward"),
        ({"treatment": treatments(mode=["vc+"])}, "treatment: "),
        ({"treatment": treatments(bias_flow_lpm=[-2.0])}, "treatment: "),
        ({"treatment": treatments(bias_flow_lpm=[float("inf")])}, "treatment: "),
        ({"treatment": treatments().drop(columns="started_at")}, "treatment: "),
    ],
)
def test_rows_a_log_cannot_hold_are_refused_and_the_old_log_stays(small, tables, text):
    before = small.read_bytes()
    with pytest.raises(ValueError, match=text):
        write_log(small, tables, "Etc/UTC", CREATED)
    assert small.read_bytes() == before
    assert [p.name for p in small.parent.iterdir()] == [small.name]


def test_a_reader_keeps_the_old_log_while_a_new_one_takes_its_place(small):
    with open_log(small) as old:
        write_log(small, {"treatment": treatments()}, "Etc/UTC", CREATED)
        assert old.frame("SELECT count(*) FROM treatment").iloc[0, 0] == 2
        with old.reopened() as new:
            assert new.frame("SELECT count(*) FROM treatment").iloc[0, 0] == 1
            assert new.fingerprint != old.fingerprint


def test_a_write_ahead_file_of_the_old_log_does_not_reach_the_new_one(small):
    stale = small.with_name(small.name + ".wal")
    stale.write_bytes(b"left by a crash")
    write_log(small, {"treatment": treatments()}, "Etc/UTC", CREATED)
    assert not stale.exists()
    open_log(small).close()


def test_the_file_is_for_its_owner_only(small):
    assert os.stat(small).st_mode & 0o077 == 0


def test_the_same_rows_give_the_same_bytes(small, tmp_path):
    with open_log(small) as log:
        rows = log.frame("SELECT * FROM treatment ORDER BY treatment_id")
    rows = pd.concat([rows] * 3000).assign(treatment_id=[str(i) for i in range(6000)])
    for name in ("a", "b"):
        write_log(tmp_path / name, {"treatment": rows}, "Etc/UTC", CREATED, "twice")
    assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes()
