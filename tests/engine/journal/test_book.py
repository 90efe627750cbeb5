"""The journal keeps what was said, in order, and shows when somebody changed it."""

import hashlib
import json
import subprocess
import sys
import threading
from datetime import UTC, datetime, timedelta, timezone

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from engine.errors import EntryRefused, JournalBroken, UnknownId
from engine.journal import open_journal

AT = datetime(2026, 3, 1, 9, 30, tzinfo=timezone(timedelta(hours=1)))


def say(journal, finding="T1:PL01", verdict="confirmed", actor="a.lead", **more):
    more = {"at": AT, "role": "lead", "action": "verdict", **more}
    return journal.append(actor=actor, object=finding, new=verdict, **more)


@pytest.fixture
def journal(tmp_path):
    book = open_journal(tmp_path / "log.duckdb.journal.jsonl")
    say(book, reason="seen in the chart")
    say(book, "T2:FI01", "dismissed", actor="b.reviewer", role="reviewer")
    book.append(
        at=AT, actor="a.lead", role="lead", action="note", object="V07", new="drained"
    )
    say(book, "T3:HU01", "needs_chart_check")
    return book


def test_a_journal_that_does_not_exist_yet_is_empty(tmp_path):
    book = open_journal(tmp_path / "none.jsonl")
    assert book.entries() == ()
    assert book.head == "0" * 64
    assert book.check() == 0
    assert list(book.verdicts().columns) == [
        "finding_id",
        "verdict",
        "reason",
        "at",
        "actor",
        "role",
        "seq",
    ]
    assert not book.path.exists()


def test_a_line_is_canonical_json_whose_hash_anyone_can_recompute(journal):
    # Worked by hand from the definition: SHA-256 over the same JSON without "hash".
    previous = "0" * 64
    for line in journal.path.read_text("ascii").splitlines():
        content = json.loads(line)
        given_hash = content.pop("hash")
        plain = json.dumps(content, sort_keys=True, separators=(",", ":"))
        assert hashlib.sha256(plain.encode()).hexdigest() == given_hash
        assert content["previous"] == previous
        previous = given_hash
    assert journal.head == previous


def test_the_latest_verdict_of_each_actor_on_a_finding_counts(journal):
    say(journal, verdict="dismissed", reason="second look")
    say(journal, verdict="confirmed", actor="b.reviewer")
    found = journal.verdicts().set_index(["finding_id", "actor"])
    assert found.loc[("T1:PL01", "a.lead"), "verdict"] == "dismissed"
    assert found.loc[("T1:PL01", "a.lead"), "reason"] == "second look"
    assert found.loc[("T1:PL01", "b.reviewer"), "verdict"] == "confirmed"
    assert len(found) == 4


def test_a_time_keeps_its_offset_and_is_given_in_utc(journal):
    assert journal.entries()[0].at == "2026-03-01T09:30:00+01:00"
    assert journal.verdicts()["at"].iloc[0] == datetime(2026, 3, 1, 8, 30)
    say(journal, "T9:PL01", at=datetime(2026, 3, 2, 7, 0))
    assert journal.entries()[-1].at == "2026-03-02T07:00:00+00:00"


def test_withdrawing_lets_the_earlier_verdict_stand_again_and_loses_nothing(journal):
    wrong = say(journal, verdict="dismissed")
    journal.withdraw(wrong.seq, at=AT, actor="a.lead", role="lead", reason="misread")
    found = journal.verdicts().set_index("finding_id")
    assert found.loc["T1:PL01", "verdict"] == "confirmed"
    assert len(journal.entries()) == 6
    assert journal.entries()[-1].object == str(wrong.seq)


def test_withdrawing_what_does_not_stand_is_refused(journal):
    journal.withdraw(1, at=AT, actor="a.lead", role="lead")
    for seq in (1, 99):
        with pytest.raises(UnknownId, match=f"no entry {seq} stands in log.duckdb"):
            journal.withdraw(seq, at=AT, actor="a.lead", role="lead")


def test_notes_decisions_sign_offs_and_scenarios_are_kept_whole(journal):
    scenario = {"name": "filters_on", "facts": [["expiratory_filter", "present"]]}
    for action, new in (
        ("decision", {"text": "filter in the set", "owner_role": "lead", "weeks": 6}),
        ("sign_off", {"report": "month 2026-03", "head": journal.head}),
        ("scenario", scenario),
    ):
        journal.append(
            at=AT, actor="a.lead", role="lead", action=action, object="m", new=new
        )
        assert journal.standing(action)[-1].new == new


@pytest.mark.parametrize(
    ("change", "text"),
    [
        (
            {"action": "erase"},
            "action must be one of verdict, note, decision, sign_off, scenario, "
            "export, withdraw; got erase",
        ),
        (
            {"verdict": "maybe"},
            "verdict must be one of confirmed, dismissed, needs_chart_check; got maybe",
        ),
        ({"actor": " \x00 "}, "actor must be given; got nothing"),
        ({"finding": ""}, "object must be given; got nothing"),
        ({"reason": "x" * 4001}, "reason must be at most 4000 characters; got 4001"),
        (
            {"action": "note", "verdict": float("nan")},
            "note must hold plain values that JSON can",
        ),
        (
            {"action": "note", "verdict": {1, 2}},
            "note must hold plain values that JSON can",
        ),
    ],
)
def test_an_entry_that_cannot_be_kept_is_refused_and_nothing_is_written(
    journal, change, text
):
    before = journal.path.read_bytes()
    with pytest.raises(EntryRefused) as refused:
        say(journal, **change)
    assert str(refused.value) == text
    assert journal.path.read_bytes() == before


def test_control_and_reordering_characters_are_stripped_from_text(journal):
    entry = say(journal, reason="a\x1b[31mred\x00\r\nline\u202ekcab\ttab\ud800")
    assert entry.reason == "a[31mred\nlinekcab tab"
    assert journal.entries()[-1] == entry


def test_markup_and_other_alphabets_come_back_as_they_went_in(journal):
    text = "<script>alert(1)</script> =1+1 | фильтр 濾過 𝔘"
    say(journal, reason=text)
    assert open_journal(journal.path).entries()[-1].reason == text


@settings(
    max_examples=300,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
@given(data=st.data())
def test_changing_any_one_byte_is_found_and_its_line_named(journal, data):
    whole = journal.path.read_bytes()
    place = data.draw(st.integers(0, len(whole) - 1), label="place")
    other = data.draw(st.integers(1, 255), label="xor")
    changed = bytearray(whole)
    changed[place] ^= other
    line = whole[:place].count(b"\n") + 1
    copy = journal.path.with_name("copy.jsonl")
    copy.write_bytes(bytes(changed))
    with pytest.raises(JournalBroken, match=f"copy.jsonl line {line} "):
        open_journal(copy)


@pytest.mark.parametrize(
    ("order", "line", "says"),
    [
        ([1, 2, 3], 1, "does not follow the line before it"),
        ([0, 2, 3], 2, "does not follow the line before it"),
        ([0, 2, 1, 3], 2, "does not follow the line before it"),
        ([0, 1, 1, 2, 3], 3, "does not follow the line before it"),
    ],
)
def test_removing_moving_or_repeating_a_line_is_found(journal, order, line, says):
    lines = journal.path.read_bytes().splitlines(keepends=True)
    journal.path.write_bytes(b"".join(lines[i] for i in order))
    with pytest.raises(JournalBroken, match=f"line {line} {says}"):
        journal.check()


def test_a_line_forged_with_a_right_hash_still_does_not_fit_the_chain(journal):
    lines = journal.path.read_text("ascii").splitlines()
    forged = json.loads(lines[1])
    forged["new"] = "confirmed"
    del forged["hash"]
    plain = json.dumps(forged, sort_keys=True, separators=(",", ":"))
    forged["hash"] = hashlib.sha256(plain.encode()).hexdigest()
    lines[1] = json.dumps(forged, sort_keys=True, separators=(",", ":"))
    journal.path.write_text("\n".join(lines) + "\n", "ascii")
    with pytest.raises(JournalBroken, match="line 3 does not follow"):
        journal.check()


def test_lines_gone_from_the_end_are_found_by_a_head_printed_earlier(journal):
    head = journal.head
    lines = journal.path.read_bytes().splitlines(keepends=True)
    assert journal.check(head[:12]) == 4
    journal.path.write_bytes(b"".join(lines[:-1]))
    # The chain alone cannot know: this is why a head is printed on what is signed.
    assert journal.check() == 3
    with pytest.raises(JournalBroken, match=f"no entry ends the chain at {head[:12]}"):
        journal.check(head)


def test_a_broken_journal_is_not_added_to(journal):
    whole = journal.path.read_bytes()
    journal.path.write_bytes(whole[:-10])
    with pytest.raises(JournalBroken, match="line 4 is cut short"):
        say(journal)
    assert journal.path.read_bytes() == whole[:-10]


@pytest.mark.parametrize(
    "content",
    [
        b"\n",
        b"[]\n",
        b"{}\n",
        b"null\n",
        b"\xff\xfe\n",
        b"[" * 90_000 + b"\n",
        b'{"at":1}\n',
    ],
)
def test_a_file_that_is_no_journal_gives_one_clear_line(tmp_path, content):
    path = tmp_path / "other.jsonl"
    path.write_bytes(content)
    with pytest.raises(JournalBroken) as broken:
        open_journal(path)
    assert str(broken.value) == f"{path} line 1 is not a journal entry"


def test_a_line_too_long_for_an_entry_is_not_read_into_memory(tmp_path):
    path = tmp_path / "long.jsonl"
    path.write_bytes(b" " * 300_000 + b"\n")
    with pytest.raises(JournalBroken, match="line 1 is cut short or too long"):
        open_journal(path)


def test_a_folder_in_place_of_the_file_gives_one_clear_line(tmp_path):
    with pytest.raises(JournalBroken, match="cannot be read or written"):
        open_journal(tmp_path)
    book = open_journal(tmp_path / "no_such_folder" / "j.jsonl")
    with pytest.raises(JournalBroken, match="cannot be read or written: No such file"):
        say(book)


def test_what_another_program_appends_is_seen(journal):
    second = open_journal(journal.path)
    say(second, "T5:PL01")
    assert journal.entries()[-1].object == "T5:PL01"
    say(journal, "T6:PL01")
    assert second.check() == 6


def test_threads_appending_at_once_lose_nothing_and_keep_the_chain(journal):
    def work(name):
        book = open_journal(journal.path)
        for i in range(20):
            say(book, f"T{i}:PL01", actor=name)

    threads = [threading.Thread(target=work, args=(f"w{i}",)) for i in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert journal.check() == 4 + 80
    assert len(journal.verdicts()) == 3 + 80


def test_processes_appending_at_once_lose_nothing_and_keep_the_chain(journal):
    program = (
        "import sys; from datetime import datetime; "
        "from engine.journal import open_journal\n"
        "for i in range(15): open_journal(sys.argv[1]).append("
        "at=datetime(2026, 3, 1), actor=sys.argv[2], role='lead', action='note', "
        "object=str(i), new='x')"
    )
    running = [
        subprocess.Popen([sys.executable, "-c", program, str(journal.path), f"p{i}"])
        for i in range(3)
    ]
    assert [process.wait(60) for process in running] == [0, 0, 0]
    assert journal.check() == 4 + 45


def test_the_file_is_for_its_owner_only(journal):
    assert journal.path.stat().st_mode & 0o077 == 0


def test_an_entry_without_zone_in_its_time_is_not_an_entry(journal):
    content = json.loads(journal.path.read_text("ascii").splitlines()[0])
    content["at"] = datetime(2026, 3, 1, tzinfo=UTC).replace(tzinfo=None).isoformat()
    del content["hash"]
    plain = json.dumps(content, sort_keys=True, separators=(",", ":"))
    content["hash"] = hashlib.sha256(plain.encode()).hexdigest()
    line = json.dumps(content, sort_keys=True, separators=(",", ":"))
    journal.path.write_text(line + "\n", "ascii")
    with pytest.raises(JournalBroken, match="line 1 is not a journal entry"):
        journal.check()
