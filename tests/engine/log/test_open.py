"""A log opens locked down and read-only, or not at all with one clear line."""

import base64
import hashlib
import os
import shutil
import subprocess
import sys
from datetime import datetime

import duckdb
import pandas as pd
import pytest

from engine.columns import RECORD_TABLES, TABLES, TREATMENT
from engine.errors import LogUnreadable
from engine.log import fingerprint_of, open_log, stamp_of, write_log


def why_not(path):
    with pytest.raises(LogUnreadable) as refused:
        open_log(path)
    text = str(refused.value)
    assert "\n" not in text
    assert text.startswith(str(path))
    return text.removeprefix(str(path))


def changed(path, *statements):
    with duckdb.connect(str(path)) as connection:
        for statement in statements:
            connection.execute(statement)
    return path


def test_a_missing_file_is_named(tmp_path):
    assert why_not(tmp_path / "no.duckdb") == " does not exist; check the name"


def test_a_folder_is_not_a_log(tmp_path):
    assert why_not(tmp_path) == " is a folder; name the log file in it"


def test_a_pipe_is_not_waited_for(tmp_path):
    os.mkfifo(tmp_path / "pipe")
    assert why_not(tmp_path / "pipe") == " is not a file; name a log file"


def test_an_empty_file_is_not_a_log(tmp_path):
    (tmp_path / "empty.duckdb").touch()
    assert why_not(tmp_path / "empty.duckdb") == " is empty; a log is a DuckDB file"


@pytest.mark.parametrize("content", [b"id,mode\n1,vcv\n", b"x", b"SQLite format 3\0"])
def test_a_file_of_another_kind_is_not_a_log(tmp_path, content):
    (tmp_path / "other").write_bytes(content)
    said = why_not(tmp_path / "other")
    assert said == " is not a DuckDB file; a log is a DuckDB file"


@pytest.mark.parametrize("share", [0.00002, 0.004, 0.01, 0.3, 0.5, 0.8, 0.99999])
def test_a_file_cut_short_is_not_opened(small, share):
    whole = small.read_bytes()
    small.write_bytes(whole[: max(12, int(len(whole) * share))])
    assert "cut short; restore it from its source" in why_not(small)


@pytest.mark.parametrize("place", [13, 300, 4200, 13_000, 300_000, 900_000, -9])
def test_a_file_with_one_damaged_byte_is_not_opened(small, place):
    whole = bytearray(small.read_bytes())
    whole[place] ^= 0x40
    small.write_bytes(bytes(whole))
    assert "restore it from its source" in why_not(small)


def test_a_damaged_block_of_notes_is_found_at_opening(tmp_path):
    path = tmp_path / "notes.duckdb"
    # Long texts that do not compress, so that the notes fill blocks of their own.
    digests = (hashlib.sha512(b"%d" % i).digest() for i in range(16_000))
    random = base64.b64encode(b"".join(digests)).decode()
    notes = [random[i * 340 : i * 340 + 340] for i in range(4000)]
    rows = pd.DataFrame(
        {
            "treatment_id": [str(i) for i in range(4000)],
            "started_at": datetime(2026, 1, 5),
            "note": notes,
        }
    )
    write_log(path, {"treatment": rows}, "Etc/UTC", datetime(2026, 2, 1))
    whole = bytearray(path.read_bytes())
    whole[len(whole) // 2] ^= 1
    path.write_bytes(bytes(whole))
    assert "restore it from its source" in why_not(path)


def test_a_log_being_written_by_another_program_says_so(small):
    program = (
        "import duckdb, sys; c = duckdb.connect(sys.argv[1]); "
        "c.execute('BEGIN; DELETE FROM room'); print('held', flush=True); input()"
    )
    writer = subprocess.Popen(
        [sys.executable, "-c", program, str(small)],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
    )
    try:
        assert writer.stdout.readline() == b"held\n"
        said = why_not(small)
    finally:
        writer.communicate(b"\n", timeout=30)
    assert said == " is being written by another program; close it there and retry"
    open_log(small).close()


def test_a_log_open_for_writing_in_this_program_says_so(small):
    with duckdb.connect(str(small)):
        said = why_not(small)
    assert said == " is open for writing in this program; close it and retry"


@pytest.mark.parametrize(
    ("statements", "said"),
    [
        (
            [
                "DROP TABLE room",
                "CREATE VIEW room AS SELECT * FROM read_csv('{secret}')",
            ],
            ": room is a view; a log holds base tables only; not opened",
        ),
        (
            ["CREATE VIEW extra AS SELECT 1"],
            ": extra is a view; a log holds base tables only; not opened",
        ),
        (
            ["CREATE SCHEMA side", "CREATE VIEW side.room AS SELECT 1"],
            ": room is a view; a log holds base tables only; not opened",
        ),
        (
            ["CREATE MACRO trim(x) AS 'mine'"],
            ": trim is a macro; a log holds base tables only; not opened",
        ),
        (
            ["CREATE MACRO rows() AS TABLE SELECT * FROM read_csv('{secret}')"],
            ": rows is a macro; a log holds base tables only; not opened",
        ),
        (
            ["CREATE TABLE sums (a INTEGER, b INTEGER GENERATED ALWAYS AS (a + 1))"],
            ": sums.b is computed by the file; a log holds values",
        ),
    ],
)
def test_a_file_that_carries_programs_is_refused(small, statements, said):
    secret = small.with_name("secret.csv")
    secret.write_text("unit_token\nnot for you\n")
    changed(small, *(s.replace("{secret}", str(secret)) for s in statements))
    assert why_not(small) == said


def test_without_the_check_such_a_view_would_read_another_file(small):
    # The threat is real: DuckDB itself opens the file and reads for it.
    secret = small.with_name("secret.csv")
    secret.write_text("unit_token\nnot for you\n")
    changed(
        small,
        "DROP TABLE room",
        f"CREATE VIEW room AS SELECT * FROM read_csv('{secret}')",
    )
    with duckdb.connect(str(small), read_only=True) as plain:
        assert plain.execute("FROM room").fetchall() == [("not for you",)]


@pytest.mark.parametrize(
    "table", [table.name for table in RECORD_TABLES] + ["log_info"]
)
def test_a_missing_table_is_named(small, table):
    changed(small, f"DROP TABLE {table}")
    assert why_not(small) == f" has no table {table}; every log has one"


@pytest.mark.parametrize("table", TABLES, ids=lambda table: table.name)
def test_a_missing_column_is_named(foreign, table):
    column = table.columns[-1].name
    path = changed(foreign(), f'ALTER TABLE "{table.name}" DROP "{column}"')
    assert why_not(path) == f": table {table.name} has no column {column}"


@pytest.mark.parametrize(
    ("column", "stored", "said"),
    [
        ("peep_cmh2o", "DOUBLE[]", "DOUBLE[]; it must hold a number"),
        ("peep_cmh2o", "BOOLEAN", "BOOLEAN; it must hold a number"),
        ("note", "BLOB", "BLOB; it must hold a text"),
        ("mode", "INTEGER", "INTEGER; it must hold a word"),
        ("started_at", "TIME", "TIME; it must hold a time"),
        ("started_at", "DOUBLE", "DOUBLE; it must hold a time"),
        ("note", "STRUCT(a INTEGER)", "STRUCT(a INTEGER); it must hold a text"),
    ],
)
def test_a_column_of_a_type_that_cannot_hold_it_is_named(foreign, column, stored, said):
    path = foreign(types={column: stored})
    assert f": treatment.{column} is stored as {said}" == why_not(path) or (
        column == "note" and said in why_not(path)
    )


@pytest.mark.parametrize(
    ("statement", "said"),
    [
        ("DELETE FROM log_info", ": log_info has no row; it must have one"),
        (
            "INSERT INTO log_info SELECT * FROM log_info",
            ": log_info has more than one row; it must have one",
        ),
        (
            "UPDATE log_info SET schema_version = 99",
            ": log_info.schema_version must be 1; got 99",
        ),
        (
            "UPDATE log_info SET site_zone = 'Mars/Olympus'",
            ": log_info.site_zone must be a time zone such as Etc/UTC; "
            "got Mars/Olympus",
        ),
        (
            "UPDATE log_info SET site_zone = '../../etc/passwd'",
            ": log_info.site_zone must be a time zone such as Etc/UTC; "
            "got ../../etc/passwd",
        ),
        (
            "UPDATE log_info SET site_zone = NULL",
            ": log_info.site_zone must be a time zone such as Etc/UTC; got None",
        ),
    ],
)
def test_a_log_that_does_not_say_what_it_is_is_refused(small, statement, said):
    assert why_not(changed(small, statement)) == said


def test_what_the_file_holds_beyond_a_log_is_left_alone_and_listed(small):
    changed(
        small,
        "CREATE TABLE truth (a INTEGER)",
        "ALTER TABLE room ADD COLUMN Ward VARCHAR",
    )
    with open_log(small) as log:
        assert log.ignored == ("room.ward", "truth")
        assert "ward" not in log.frame("SELECT * FROM room").columns


def test_names_in_another_case_are_the_same_names(foreign):
    path = changed(foreign(), 'ALTER TABLE treatment RENAME COLUMN note TO "Note"')
    with open_log(path) as log:
        assert "note" in log.frame("SELECT * FROM treatment").columns
        assert log.ignored == ()


@pytest.mark.parametrize(
    "statement",
    [
        "SELECT * FROM read_csv('{file}')",
        "SELECT * FROM read_text('{file}')",
        "SELECT * FROM '{file}'",
        "SELECT * FROM glob('/*')",
        "COPY (SELECT 1) TO '{file}.copy'",
        "ATTACH '{file}.db'",
        "EXPORT DATABASE '{file}.export'",
        "INSTALL httpfs",
        "LOAD httpfs",
        "SET enable_external_access = true",
        "SET lock_configuration = false",
        "SET memory_limit = '90GB'",
        "INSERT INTO logged.main.room (unit_token) VALUES ('x')",
        "DROP TABLE logged.main.room",
        "DETACH logged; ATTACH '{file}' AS logged",
    ],
)
def test_nothing_outside_can_be_reached_through_an_open_log(small, statement):
    other = small.with_name("other.csv")
    other.write_text("a\n1\n")
    with open_log(small) as log, pytest.raises(duckdb.Error):
        log.cursor().execute(statement.replace("{file}", str(other))).fetchall()


def test_a_python_variable_is_not_a_table(small):
    secret = pd.DataFrame({"a": [1]})
    with open_log(small) as log, pytest.raises(duckdb.CatalogException):
        log.frame("SELECT * FROM secret")
    assert len(secret) == 1


def test_the_file_is_the_same_to_the_byte_after_all_that_can_be_asked(small):
    before, stamp = hashlib.sha256(small.read_bytes()).hexdigest(), stamp_of(small)
    with open_log(small) as log:
        for table in RECORD_TABLES:
            log.frame(f"SELECT * FROM {table.name}")
        log.frame("SELECT * FROM refused")
        log.accounts()
        log.cursor().execute("CREATE TEMP TABLE mine AS SELECT * FROM treatment")
        assert log.fingerprint == before[:12]
    assert hashlib.sha256(small.read_bytes()).hexdigest() == before
    assert stamp_of(small) == stamp
    assert [path.name for path in small.parent.iterdir()] == [small.name]


def test_word_columns_carry_the_codes_the_batch_expects(small):
    with open_log(small) as log:
        words = log.cursor().sql("SELECT mode FROM treatment").to_arrow_table()["mode"]
    assert (
        tuple(words.chunk(0).dictionary.to_pylist()) == TREATMENT.column("mode").words
    )


def test_a_log_of_no_rows_opens_and_says_so(tmp_path):
    path = tmp_path / "none.duckdb"
    write_log(path, {}, "Etc/UTC", datetime(2026, 2, 1))
    with open_log(path) as log:
        assert list(log.accounts()["table"]) == [table.name for table in RECORD_TABLES]
        assert log.accounts()[["rows_in", "rows_used", "rows_refused"]].sum().sum() == 0
        assert log.frame("SELECT * FROM refused").empty


def test_a_log_left_by_a_crash_gives_what_was_committed(small):
    program = (
        "import duckdb, os, sys; c = duckdb.connect(sys.argv[1]); "
        "c.execute(\"SET wal_autocheckpoint = '1GB'\"); "
        "c.execute(\"INSERT INTO room (unit_token) VALUES ('south')\"); os._exit(9)"
    )
    alone = fingerprint_of(small)
    assert subprocess.run([sys.executable, "-c", program, str(small)]).returncode == 9
    assert small.with_name(small.name + ".wal").exists()
    with open_log(small) as log:
        assert set(log.frame("SELECT unit_token FROM room")["unit_token"]) == {
            "north",
            "south",
        }
        assert log.fingerprint != alone


def test_a_replaced_file_has_another_stamp_and_fingerprint(small):
    stamp, fingerprint = stamp_of(small), fingerprint_of(small)
    copy = small.with_name("copy")
    shutil.copy(small, copy)
    assert fingerprint_of(copy) == fingerprint
    os.replace(copy, small)
    assert stamp_of(small) != stamp
    assert stamp_of(small.with_name("none")) == (None, None)


def test_a_name_with_quotes_and_blanks_opens_like_any_other(small):
    odd = small.with_name('it\'s a "log"; DROP TABLE x.duckdb')
    shutil.copy(small, odd)
    with open_log(odd) as log:
        assert log.path == odd
        assert log.accounts()["rows_in"].sum() == 4


def test_two_open_results_do_not_disturb_each_other(small):
    with open_log(small) as log:
        one = log.cursor().execute("SELECT treatment_id FROM treatment ORDER BY 1")
        two = log.cursor().execute("SELECT unit_token FROM room")
        assert (one.fetchone(), two.fetchone()) == (("T1",), ("north",))
        assert one.fetchone() == ("T2",)
