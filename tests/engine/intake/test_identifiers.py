"""Names, record numbers and birth dates do not reach the log by any way."""

import pytest

from engine.intake.identifiers import names_a_person

HEAD = "treatment_id,started_at,patient_token,drug,note"


@pytest.mark.parametrize(
    "head",
    [
        "MRN", "mrn", "Medical Record Number", "record no", "Patient Name", "pt_name",
        "Last Name", "FIRST-NAME", "name", "Surname", "Initials", "LNAME", "DOB",
        "Date of Birth", "birth date", "Birthday", "SSN", "Social Security Number",
        "CSN", "Account Number", "Hospital No", "Phone", "e-mail", "Address", "ZIP",
        "patient_mrn",
    ],
)  # fmt: skip
def test_a_column_head_that_names_a_person_is_told(head):
    assert names_a_person(head)


@pytest.mark.parametrize(
    "head",
    [
        "drug name", "Unit Name", "device_name", "patient_token", "bed_token", "note",
        "started_at", "mode", "filter_id", "generator", "record", "number", "birth",
        "tidal_volume_ml", "code", "ventilator name",
    ],
)  # fmt: skip
def test_a_column_head_that_names_a_thing_is_not(head):
    assert not names_a_person(head)


def test_a_column_of_identifiers_is_not_taken_in_and_the_report_says_so(export, taken):
    path = export(
        "treatment.csv",
        HEAD + ",MRN,DOB",
        "T1,2026-01-05T08:00Z,P1,albuterol,,99887766,1950-02-03",
        "T2,,P1,albuterol,,55443322,1960-04-05",
        "T3,short,88776655",
    )
    report, log, refused = taken(path)
    assert report.withheld == ("treatment.csv: MRN", "treatment.csv: DOB")
    assert "not taken in, names a person: treatment.csv: DOB" in report.text()
    held = everything(log)
    for secret in ("99887766", "1950-02-03", "55443322", "1960-04-05", "88776655"):
        assert secret not in held
    assert len(refused) == 2


PERSONS = [
    ("patient_token", "Miller, John"),
    ("patient_token", "John Miller"),
    ("patient_token", "John Q. Miller"),
    ("patient_token", "00123456"),
    ("patient_token", "12345678.0"),
    ("patient_token", "1950-02-03"),
    ("patient_token", "2/3/1950"),
    ("patient_token", "MRN 4711"),
    ("note", "moved with Mrs Miller"),
    ("note", "Dr. Jones informed"),
    ("note", "pt name: Miller"),
    ("note", "DOB 2/3/1950"),
    ("note", "born 1950"),
    ("note", "see mrn: 4711"),
    ("note", "account no 12-34"),
    ("note", "078-05-1120"),
    ("note", "write to a.b@example.org"),
    ("note", "call (555) 123-4567"),
    ("note", "call 555-123-4567 later"),
]


def test_a_value_that_looks_like_a_person_refuses_its_row_and_is_not_repeated(
    export, taken
):
    path = export("treatment.csv", HEAD, *(row(i, *p) for i, p in enumerate(PERSONS)))
    _, log, refused = taken(path)
    assert list(refused["message"]) == [
        f"{column} must not tell who somebody is; the value is withheld "
        f"(treatment T{i})"
        for i, (column, _) in enumerate(PERSONS)
    ]
    assert set(refused["code"]) == {"identifier"}
    held = everything(log)
    assert [value for _, value in PERSONS if value in held] == []


def test_an_id_that_is_a_name_is_not_repeated_as_the_place(export, taken):
    path = export("treatment.csv", HEAD, "Mr Miller,2026-01-05T08:00Z,P1,albuterol,")
    _, log, refused = taken(path)
    assert refused["message"].iloc[0].endswith("(treatment (withheld))")
    assert "Miller" not in everything(log)


EVERYDAY = [
    ("patient_token", "P017"),
    ("patient_token", "a3f9c2"),
    ("patient_token", "12345"),
    ("patient_token", "north-b-17"),
    ("drug", "Albuterol, Ipratropium"),
    ("drug", "sodium chloride 3 %"),
    ("note", "Filter changed 2026-01-05 08:00, drained 12 mL"),
    ("note", "water in the limb; flow 60, drop 2.5, miss a dose"),
    ("note", "newborn circuit; named drug unchanged"),
    ("note", "lot 123-456-78"),
]


def test_what_the_trade_writes_every_day_is_let_through(export, taken):
    path = export("treatment.csv", HEAD, *(row(i, *e) for i, e in enumerate(EVERYDAY)))
    _, log, refused = taken(path)
    assert list(refused["message"]) == []
    assert len(log.frame("SELECT * FROM treatment")) == len(EVERYDAY)


def test_a_row_out_of_step_is_withheld_if_it_looks_like_a_person(export, taken):
    path = export("treatment.csv", HEAD, "T1,2026-01-05T08:00Z,Mrs Miller", "T2,x")
    refused = taken(path)[2]
    assert list(refused["raw"]) == ["(withheld)", "T2,x"]


def row(i, column, value):
    cells = {"patient_token": "P1", "drug": "albuterol", "note": ""}
    cells[column] = f'"{value}"'
    return f"T{i},2026-01-05T08:00Z," + ",".join(cells.values())


def everything(log):
    tables = ["treatment", "refused", "log_info"]
    return "".join(log.frame(f"SELECT * FROM {table}").to_csv() for table in tables)
