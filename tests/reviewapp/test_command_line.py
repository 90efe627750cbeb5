"""The command: what it does, and one clear line when it cannot."""

import json
import subprocess
import sys

import duckdb
import pandas as pd
import pytest

from engine.log import write_log
from reviewapp.command_line import main

START = pd.Timestamp("2026-07-01 08:00")


@pytest.fixture
def log(tmp_path):
    path = tmp_path / "log.duckdb"
    row = {
        "treatment_id": "t1",
        "status": "given",
        "started_at": START,
        "ended_at": START + pd.Timedelta(minutes=10),
        "generator": "jet",
        "site": "wye",
        "circuit": "dual_limb",
        "expiratory_filter": "absent",
    }
    write_log(
        path,
        {"treatment": pd.DataFrame([row])},
        site_zone="Etc/UTC",
        created_at=START,
        sources="test",
    )
    return path


def test_replay_writes_its_four_files(log, tmp_path, capsys):
    out = tmp_path / "out"
    assert main(["replay", str(log), "--out", str(out)]) == 0
    assert sorted(p.name for p in out.iterdir()) == [
        "answers.parquet",
        "balance.parquet",
        "findings.parquet",
        "run.json",
    ]
    stamp = json.loads((out / "run.json").read_text())
    assert stamp["treatments"] == 1
    assert stamp["rows_in"] == stamp["rows_used"] + stamp["rows_refused"]
    printed = capsys.readouterr()
    assert printed.out == ("1 treatments replayed; rows in 1 = used 1 + refused 0\n")
    assert printed.err == ""


def bad_files(folder):
    empty = folder / "empty.duckdb"
    empty.write_bytes(b"")
    text = folder / "text.duckdb"
    text.write_text("treatment_id,started_at\n1,2026-01-01\n" * 400)
    other = folder / "other.duckdb"
    duckdb.connect(str(other)).execute("CREATE TABLE a AS SELECT 1 AS b").close()
    cut = folder / "cut.duckdb"
    cut.write_bytes(other.read_bytes()[:5000])
    hostile = folder / "hostile.duckdb"
    with duckdb.connect(str(hostile)) as connection:
        connection.execute("CREATE VIEW treatment AS SELECT 1 AS treatment_id")
    return [folder / "none.duckdb", folder, empty, text, other, cut, hostile]


def test_a_file_that_is_no_log_is_one_line_and_exit_2(tmp_path, capsys):
    for path in bad_files(tmp_path):
        before = path.read_bytes() if path.is_file() else None
        assert main(["replay", str(path), "--out", str(tmp_path / "out")]) == 2
        printed = capsys.readouterr()
        assert printed.out == ""
        assert printed.err.startswith("aerosol-review: ")
        assert printed.err.count("\n") == 1
        assert path.name in printed.err
        assert "Traceback" not in printed.err
        assert (path.read_bytes() if path.is_file() else None) == before


@pytest.mark.parametrize(
    ("extra", "says"),
    [
        (["--policy", "nowhere"], "nowhere is not a readable policy file"),
        (["--scenario", "nowhere"], "nowhere"),
    ],
)
def test_a_wrong_policy_or_scenario_is_one_line_and_exit_2(
    log, tmp_path, capsys, extra, says
):
    out = ["--out", str(tmp_path / "out")]
    assert main(["replay", str(log), *out, *extra]) == 2
    error = capsys.readouterr().err
    assert says in error
    assert error.count("\n") == 1


def test_an_incident_that_is_not_in_the_log_is_one_line_and_exit_2(
    log, tmp_path, capsys
):
    out = str(tmp_path / "incident.html")
    code = main(["report", "incident", str(log), "--incident", "X9", "--out", out])
    assert code == 2
    assert "X9" in capsys.readouterr().err


def test_a_journal_is_checked_whole(tmp_path, capsys):
    path = tmp_path / "journal.jsonl"
    assert main(["journal", "check", str(path)]) == 2
    assert str(path) in capsys.readouterr().err
    path.write_text("{}\n")
    assert main(["journal", "check", str(path)]) == 2
    assert capsys.readouterr().err.count("\n") == 1


def test_verify_prints_each_published_value_and_agrees(capsys):
    assert main(["verify"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert sum(line.startswith("ok ") for line in lines) > 500
    assert not any(line.startswith("OUT") for line in lines)
    assert any(line.startswith("validation") for line in lines)


def test_help_lists_every_command():
    done = subprocess.run(
        [sys.executable, "-m", "reviewapp.command_line", "--help"],
        capture_output=True,
        text=True,
        check=True,
    )
    for command in ("open", "demo", "intake", "replay", "report", "verify"):
        assert f"    {command}" in done.stdout


def test_a_place_that_cannot_be_written_is_one_line_and_exit_2(log, tmp_path, capsys):
    taken = tmp_path / "taken"
    taken.write_text("x")
    asked = [
        ["report", "month", str(log), "--out", str(tmp_path / "none" / "a.html")],
        ["report", "month", str(log), "--out", str(tmp_path / "folder.html")],
        ["replay", str(log), "--out", str(taken)],
        ["replay", str(log), "--out", str(taken / "under")],
        ["demo", str(tmp_path / "none" / "log.duckdb")],
        ["demo", str(taken)],
    ]
    (tmp_path / "folder.html").mkdir()
    for arguments in asked:
        assert main(arguments) == 2, arguments
        error = capsys.readouterr().err
        assert error.count("\n") == 1
        assert "a fault of ours" not in error
    assert taken.read_text() == "x"


def test_a_journal_that_is_not_there_is_not_an_empty_one(log, tmp_path, capsys):
    out = str(tmp_path / "month.html")
    missing = str(tmp_path / "none.jsonl")
    code = main(["report", "month", str(log), "--out", out, "--journal", missing])
    assert code == 2
    assert "there is no journal" in capsys.readouterr().err


def test_what_a_file_is_called_moves_no_cursor(tmp_path, capsys):
    assert main(["replay", "a\nb\x1b[31m", "--out", str(tmp_path / "out")]) == 2
    error = capsys.readouterr().err
    assert error.count("\n") == 1
    assert "\x1b" not in error


@pytest.mark.parametrize(
    "arguments",
    [
        ["demo", "x.duckdb", "--months", "abc"],
        ["demo", "x.duckdb", "--seed", "-1"],
        ["demo", "x.duckdb", "--treatments-per-month", "1"],
        ["nothing"],
    ],
)
def test_a_wrong_argument_is_one_line_and_exit_2(
    arguments, capsys, monkeypatch, tmp_path
):
    monkeypatch.chdir(tmp_path)
    try:
        code = main(arguments)
    except SystemExit as stopped:
        code = stopped.code
    assert code == 2
    error = capsys.readouterr().err
    assert error.count("\n") == 1
    assert "_positive" not in error
    assert list(tmp_path.iterdir()) == []


def test_a_run_that_is_stopped_leaves_the_earlier_one(log, tmp_path, monkeypatch):
    out = tmp_path / "out"
    assert main(["replay", str(log), "--out", str(out)]) == 0
    before = {each.name: each.read_bytes() for each in out.iterdir()}
    assert set(before) >= {"run.json", "balance.parquet"}
    import importlib

    run = importlib.import_module("engine.replay.run")

    def stop(*_):
        raise KeyboardInterrupt

    monkeypatch.setattr(run, "_stamp", stop)
    assert main(["replay", str(log), "--out", str(out)]) == 2
    assert {each.name: each.read_bytes() for each in out.iterdir()} == before


def test_the_zone_of_a_map_holds_unless_another_is_asked_for(tmp_path):
    from engine.log import open_log

    source = tmp_path / "treatment.csv"
    source.write_text("treatment_id,started_at\nT1,2026-07-01 10:00\n")
    site = tmp_path / "map.toml"
    site.write_text('site_zone = "America/New_York"\n')
    into = tmp_path / "log.duckdb"
    asked = ["intake", str(source), "--into", str(into), "--map", str(site)]
    assert main(asked) == 0
    with open_log(into) as opened:
        assert opened.site_zone == "America/New_York"
        at = opened.frame("SELECT started_at FROM treatment")["started_at"][0]
    assert str(at) == "2026-07-01 14:00:00"


def test_a_month_with_a_decision_is_printed(log, tmp_path):
    from datetime import datetime

    from engine.journal import open_journal

    journal = open_journal(tmp_path / "journal.jsonl")
    month = f"{START:%Y-%m}"
    journal.append(
        at=datetime(2026, 12, 1),
        actor="QL",
        role="quality lead",
        action="decision",
        object=f"month:{month}",
        new={"text": "A filter in every bag", "strength": "stronger"},
        reason="",
    )
    out = tmp_path / "month.html"
    asked = ["report", "month", str(log), "--month", month, "--out", str(out)]
    assert main([*asked, "--journal", str(journal.path)]) == 0
    assert "A filter in every bag" in out.read_text()
