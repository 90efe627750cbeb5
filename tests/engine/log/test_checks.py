"""Every bad row is refused with a code and one clear sentence, and none is lost."""

import json
import math
import re

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from engine.columns import BAD_ROW_CODES, CLOCK_OFFSET, RECORD_TABLES, TREATMENT
from engine.log import checks, open_log

GOOD = {"treatment_id": "1042", "started_at": "2026-01-05T08:00"}
MODE_WORDS = "vcv, pcv, prvc, psv, simv, aprv, cpap, other, unknown"
FILTER = {"filter_id": "F1", "ventilator_token": "V1"}


def refused(path):
    with open_log(path) as log:
        rows = log.frame("SELECT * FROM refused")
        accounts = log.accounts()
    assert (accounts.rows_in == accounts.rows_used + accounts.rows_refused).all()
    assert accounts.rows_refused.sum() == len(rows)
    return rows


def treated(**columns):
    return {"treatment": [GOOD | columns]}


# what was typed -> code, column, sentence
CASES = [
    (
        treated(bias_flow_lpm="-2"),
        "out_of_range",
        "bias_flow_lpm must be at least 0; got -2 (treatment 1042)",
    ),
    (
        treated(peep_cmh2o="51"),
        "out_of_range",
        "peep_cmh2o must be at most 50; got 51 (treatment 1042)",
    ),
    (
        treated(actuations_count="101"),
        "out_of_range",
        "actuations_count must be at most 100; got 101 (treatment 1042)",
    ),
    (
        treated(started_at="0003-01-01"),
        "out_of_range",
        "started_at must lie between 1900 and 2199; got 0003-01-01 (treatment 1042)",
    ),
    (
        treated(treatment_id=" "),
        "missing",
        "treatment_id must be given; got nothing (treatment row 1)",
    ),
    (
        treated(started_at=None),
        "missing",
        "started_at must be given; got nothing (treatment 1042)",
    ),
    (
        treated(mode="VC+"),
        "unknown_word",
        f"mode must be one of {MODE_WORDS}; got VC+ (treatment 1042)",
    ),
    (
        treated(tidal_volume_ml="0.45 L"),
        "unreadable",
        "tidal_volume_ml must be a number; got 0.45 L (treatment 1042)",
    ),
    (
        treated(tidal_volume_ml="NaN"),
        "unreadable",
        "tidal_volume_ml must be a number; got NaN (treatment 1042)",
    ),
    (
        treated(tidal_volume_ml="-inf"),
        "unreadable",
        "tidal_volume_ml must be a number; got -inf (treatment 1042)",
    ),
    (
        treated(actuations_count="2.5"),
        "unreadable",
        "actuations_count must be a whole number; got 2.5 (treatment 1042)",
    ),
    (
        treated(spontaneous_breaths="maybe"),
        "unreadable",
        "spontaneous_breaths must be yes or no; got maybe (treatment 1042)",
    ),
    (
        treated(ended_at="2026-02-30"),
        "unreadable",
        "ended_at must be a date and time; got 2026-02-30 (treatment 1042)",
    ),
    (
        treated(ended_at="2026-01-05 24:00"),
        "unreadable",
        "ended_at must be a date and time; got 2026-01-05 24:00 (treatment 1042)",
    ),
    (
        treated(ended_at="3/4/26 0800"),
        "unreadable",
        "ended_at must be a date and time; got 3/4/26 0800 (treatment 1042)",
    ),
    (
        treated(ended_at="infinity"),
        "unreadable",
        "ended_at must be a date and time; got infinity (treatment 1042)",
    ),
    (
        treated(mode="x" * 100),
        "unknown_word",
        f"mode must be one of {MODE_WORDS}; got {'x' * 80}... (treatment 1042)",
    ),
    (
        treated(mode="a\x1b[31m\nb"),
        "unknown_word",
        f"mode must be one of {MODE_WORDS}; got a [31m b (treatment 1042)",
    ),
    (
        {
            "filter_use": [
                FILTER | {"installed_at": "2026-01-05", "removed_at": "2026-01-04"}
            ]
        },
        "wrong_order",
        "removed_at must not lie before installed_at; got 2026-01-04 (filter F1)",
    ),
    (
        {"room": [{"unit_token": "north"}, {"unit_token": "north"}]},
        "duplicate",
        "unit_token must stand in one row only; got north again (unit north)",
    ),
    (
        {
            "clock_offset": [
                {
                    "ventilator_token": "V1",
                    "measured_at": "2026-01-05",
                    "offset_s": "-9",
                }
            ]
            * 2
        },
        "duplicate",
        "a row must not repeat another; got the same values again "
        "(clock offsets row 2)",
    ),
]


@pytest.mark.parametrize(("rows", "code", "text"), CASES)
def test_a_bad_row_is_refused_in_full_words(foreign, rows, code, text):
    found = refused(foreign(**rows))
    assert list(found["message"]) == [text]
    assert list(found["code"]) == [code]
    assert found["table"].iloc[0] == next(iter(rows))


def test_the_codes_used_are_the_codes_listed():
    stored = {t.name: {c.name: "VARCHAR" for c in t.columns} for t in RECORD_TABLES}
    used = {f.code for t in RECORD_TABLES for f in checks.faults(t, stored[t.name])}
    used |= {checks.duplicate_fault(t).code for t in RECORD_TABLES}
    # Identifiers are looked for where raw exports come in.
    assert used | {"identifier"} == set(BAD_ROW_CODES)
    assert {case[1] for case in CASES} == used


def test_every_wording_is_used_and_every_hole_in_it_is_filled():
    stored = {c.name: "VARCHAR" for t in RECORD_TABLES for c in t.columns}
    used = [f.must for t in RECORD_TABLES for f in checks.faults(t, stored)]
    used += [checks.duplicate_fault(t).must for t in (TREATMENT, CLOCK_OFFSET)]
    for must in used:
        assert not set(re.findall(r"\{(\w+)\}", must)) - {"value"}
    for wording in checks.MUST.values():
        pattern = re.sub(r"\\\{\w+\\\}", ".*", re.escape(wording))
        assert any(re.fullmatch(pattern, must) for must in used), wording


def test_a_row_with_several_faults_is_filed_once_and_names_them_all(foreign):
    path = foreign(**treated(mode="foo", bias_flow_lpm="-2", started_at=None))
    found = refused(path)
    assert list(found["code"]) == ["missing"]
    assert found["message"].iloc[0] == (
        "started_at must be given; got nothing; "
        f"mode must be one of {MODE_WORDS}; got foo; "
        "bias_flow_lpm must be at least 0; got -2 (treatment 1042)"
    )


def test_a_refused_row_keeps_where_it_stood_and_all_it_held(foreign):
    rows = [GOOD, GOOD | {"treatment_id": "7", "peep_cmh2o": "-1", "note": "as typed"}]
    found = refused(foreign(treatment=rows)).iloc[0]
    assert (found["source"], found["row"]) == ("foreign.duckdb", 2)
    assert (found["column"], found["value"]) == ("peep_cmh2o", "-1")
    raw = json.loads(found["raw"])
    assert {k: v for k, v in raw.items() if v is not None} == rows[1]


def test_the_first_row_of_an_id_is_used_and_later_ones_are_refused(foreign):
    rows = [GOOD | {"note": "first"}, GOOD | {"note": "first"}, GOOD | {"note": "b"}]
    path = foreign(treatment=rows)
    assert list(refused(path)["row"]) == [2, 3]
    with open_log(path) as log:
        assert list(log.frame("SELECT note FROM treatment")["note"]) == ["first"]


def test_a_refused_row_does_not_make_the_corrected_one_a_duplicate(foreign):
    rows = [GOOD | {"peep_cmh2o": "-1"}, GOOD | {"peep_cmh2o": "5"}]
    path = foreign(treatment=rows)
    assert list(refused(path)["row"]) == [1]
    with open_log(path) as log:
        assert log.frame("SELECT peep_cmh2o FROM treatment").iloc[0, 0] == 5


def test_a_treatment_that_ends_before_it_starts_is_kept_for_its_rule(foreign):
    assert refused(foreign(**treated(ended_at="2026-01-05T07:00"))).empty


def test_rows_refused_before_the_log_was_written_are_counted_in(foreign):
    bad = {"source": "july.csv", "row": "12", "code": "unknown_word", "raw": "{}"}
    path = foreign(
        **treated(),
        bad_row=[bad | {"table": "treatment"}, bad | {"table": "no such table"}],
    )
    found = refused(path)
    assert list(found["source"]) == ["july.csv", "july.csv"]
    assert list(found["row"]) == [12, 12]
    with open_log(path) as log:
        accounts = log.accounts().set_index("table")
    assert tuple(accounts.loc["treatment"]) == (2, 1, 1)
    assert tuple(accounts.loc["unknown"]) == (1, 0, 1)


def test_words_are_read_whatever_their_case_and_unknown_is_missing(foreign):
    rows = [
        GOOD | {"treatment_id": str(i), "mode": word}
        for i, word in enumerate([" VCV ", "Prvc", "UNKNOWN", "Unknown", "unknown", ""])
    ]
    path = foreign(treatment=rows)
    assert refused(path).empty
    with open_log(path) as log:
        words = log.cursor().execute("SELECT mode::VARCHAR FROM treatment").fetchall()
    assert [word for (word,) in words] == ["vcv", "prvc", None, None, None, None]


@pytest.mark.parametrize(
    ("typed", "read"),
    [
        ("2026-01-05", "2026-01-05 00:00:00"),
        ("2026-01-05 08:00", "2026-01-05 08:00:00"),
        ("2026-01-05T08:00:30Z", "2026-01-05 08:00:30"),
        ("2026-01-05T08:00:30.5+02:00", "2026-01-05 06:00:30.5"),
        ("2026-01-05 08:00 -0330", "2026-01-05 11:30:00"),
    ],
)
def test_a_written_offset_is_applied(foreign, typed, read):
    # ISO 8601: local time with offset; UTC is the local time minus the offset.
    path = foreign(**treated(started_at=typed))
    assert refused(path).empty
    with open_log(path) as log:
        text = "SELECT started_at::VARCHAR FROM treatment"
        assert log.cursor().execute(text).fetchone() == (read,)


@pytest.mark.parametrize(
    ("column", "stored", "value", "read"),
    [
        ("bias_flow_lpm", "INTEGER", 2, 2.0),
        ("bias_flow_lpm", "DECIMAL(6,2)", 2.25, 2.25),
        ("bias_flow_lpm", "FLOAT", 2.5, 2.5),
        ("actuations_count", "DOUBLE", 4.0, 4),
        ("actuations_count", "UTINYINT", 4, 4),
        ("spontaneous_breaths", "BOOLEAN", False, False),
        ("spontaneous_breaths", "INTEGER", 1, True),
        ("mode", "ENUM('PCV', 'vcv')", "PCV", "pcv"),
        ("treatment_id", "BIGINT", 77, "77"),
        ("started_at", "DATE", "2026-01-05", "2026-01-05 00:00:00"),
        (
            "started_at",
            "TIMESTAMP WITH TIME ZONE",
            "2026-01-05 08:00+02",
            "2026-01-05 06:00:00",
        ),
        ("started_at", "TIMESTAMP_NS", "2026-01-05 08:00", "2026-01-05 08:00:00"),
    ],
)
def test_other_stored_types_are_read_as_what_they_say(
    foreign, column, stored, value, read
):
    path = foreign(types={column: stored}, **treated(**{column: value}))
    assert refused(path).empty
    cast = "::VARCHAR" if column in {"mode", "started_at"} else ""
    with open_log(path) as log:
        question = f"SELECT {column}{cast} FROM treatment"
        assert log.cursor().execute(question).fetchone() == (read,)


@pytest.mark.parametrize("stored", ["DOUBLE", "FLOAT"])
@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_a_stored_figure_that_is_no_number_is_unreadable(foreign, stored, value):
    path = foreign(types={"peep_cmh2o": stored}, **treated(peep_cmh2o=value))
    assert list(refused(path)["code"]) == ["unreadable"]


def test_a_foreign_word_in_an_enum_column_is_an_unknown_word(foreign):
    path = foreign(types={"mode": "ENUM('vcv', 'VC+')"}, **treated(mode="VC+"))
    assert list(refused(path)["code"]) == ["unknown_word"]


# An independent reading of the same limits, one row at a time, in plain Python.
def holds(column, text):
    text = (text or "").strip(" ")
    if not text or (text == "unknown" and column.kind not in {"id", "token", "text"}):
        return not column.required
    if column.kind == "word":
        return text.lower() in column.words
    if column.kind == "yes_no":
        return text.lower() in {"yes", "y", "true", "1", "no", "n", "false", "0"}
    if column.kind in {"number", "count"}:
        try:
            number = float(text)
        except ValueError:
            return False
        whole = column.kind == "number" or number == int(number)
        return column.low <= number <= column.high and whole
    return True


SAID = st.one_of(
    st.none(),
    st.sampled_from(["", " ", "unknown", "UNKNOWN", "vcv", "Yes", "NO", "2", "jet"]),
    st.floats(-1e4, 1e4).map(lambda x: f"{x:.3f}"),
    st.integers(-5, 200).map(str),
    st.text("abcXYZ;'\"-", max_size=6),
)
CHECKED = [
    c for c in TREATMENT.columns if c.kind in {"word", "yes_no", "number", "count"}
]


@settings(
    max_examples=12,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
@given(
    rows=st.lists(
        st.dictionaries(st.sampled_from([c.name for c in CHECKED]), SAID, max_size=4),
        max_size=25,
    )
)
def test_the_sql_refuses_what_a_plain_reading_of_the_columns_refuses(
    foreign, tmp_path, rows
):
    (tmp_path / "any.duckdb").unlink(missing_ok=True)
    numbered = [GOOD | row | {"treatment_id": str(i)} for i, row in enumerate(rows)]
    path = foreign("any.duckdb", treatment=numbered)
    expected = [
        i + 1
        for i, row in enumerate(numbered)
        if not all(holds(column, row.get(column.name)) for column in CHECKED)
    ]
    assert sorted(refused(path)["row"]) == expected
