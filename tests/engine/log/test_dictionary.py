"""The dictionary and the templates say what the columns say, no more and no less."""

import csv

from engine.columns import RECORD_TABLES, TABLES, TREATMENT
from engine.log.dictionary import dictionary, template, write_templates


def test_every_column_stands_in_the_dictionary_once():
    found = dictionary()
    declared = [(table.name, c.name) for table in TABLES for c in table.columns]
    assert list(zip(found["table"], found["column"], strict=True)) == declared


def test_an_entry_tells_unit_range_and_words():
    found = dictionary().set_index(["table", "column"])
    peep = found.loc[("treatment", "peep_cmh2o")]
    assert (peep["unit"], peep["allowed"]) == ("cmH2O", "0 to 50")
    circuit = found.loc[("treatment", "circuit")]
    assert circuit["allowed"] == "dual_limb, single_limb, unknown"
    assert found.loc[("treatment", "started_at"), "required"]
    assert not found.loc[("treatment", "ended_at"), "required"]


def test_a_template_is_the_row_of_column_names():
    names = next(csv.reader(template(TREATMENT).splitlines()))
    assert names == [column.name for column in TREATMENT.columns]


def test_templates_and_dictionary_are_written_side_by_side(tmp_path):
    written = write_templates(tmp_path)
    assert [path.name for path in written] == [
        *(f"{table.name}.csv" for table in RECORD_TABLES),
        "columns.csv",
    ]
    assert all(path.stat().st_size for path in written)
