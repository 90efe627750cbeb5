"""Words, units and modes are brought over only where it is known what they mean."""

import math

import pytest

from engine.columns import TREATMENT, words_of
from engine.errors import SourceUnreadable
from engine.intake import load_map
from engine.intake.modes import clear_modes, mode_terms
from engine.intake.spelling import SYMBOLS, factors
from engine.units import CONVERSIONS

BASE = "treatment_id,started_at"
AT = "T1,2026-01-05T08:00Z"


def brought(taken, export, column, typed, mapping=None):
    """One cell taken in: its value, the report, the refused rows."""
    path = export("treatment.csv", f"{BASE},{column}", f'{AT},"{typed}"')
    report, log, refused = taken(path, mapping=mapping)
    found = log.cursor().execute(f"SELECT {column} FROM treatment").fetchall()
    return (found[0][0] if found else None), report, refused


def one_cell_each(export, cells):
    """An export with one row for each (column, cell), all else left empty."""
    columns = sorted({column for column, _ in cells})
    rows = [
        f"T{i},2026-01-05T08:00Z,"
        + ",".join(f'"{typed}"' if name == column else "" for name in columns)
        for i, (column, typed) in enumerate(cells)
    ]
    return export("treatment.csv", ",".join([BASE, *columns]), *rows)


# By definition: 1 L = 1000 mL, 1 in = 25.4 mm, 60 s a minute (BIPM, SI brochure;
# the international inch). Conventional centimetre of water 98.0665 Pa (ISO 80000-4
# standard gravity times 1 cm of water at 1 g/mL), millimetre of mercury 133.322 Pa.
WRITTEN = [
    ("tidal_volume_ml", "450", 450),
    ("tidal_volume_ml", "450 mL", 450),
    ("tidal_volume_ml", "450ml", 450),
    ("tidal_volume_ml", "0.45 L", 450),
    ("tidal_volume_ml", ".45 l", 450),
    ("fill_volume_ml", "3cc", 3),
    ("nominal_dose_mg", "2500 mcg", 2.5),
    ("nominal_dose_mg", "250 µg", 0.25),
    ("nominal_dose_mg", "1 g", 1000),
    ("bias_flow_lpm", "1e0 L/s", 60),
    ("bias_flow_lpm", "2 LPM", 2),
    ("peak_inspiratory_flow_lpm", "1 L/s", 60),
    ("distance_from_wye_cm", "6 in", 15.24),
    ("distance_from_wye_cm", "6 inches", 15.24),
    ("distance_from_wye_cm", "150 mm", 15),
    ("tube_id_mm", "0.8 cm", 8),
    ("peep_cmh2o", "10 mbar", 10 * 100 / 98.0665),
    ("peep_cmh2o", "1 kPa", 1000 / 98.0665),
    ("peep_cmh2o", "5 mmHg", 5 * 133.322 / 98.0665),
    ("peep_cmh2o", "5 cm H2O", 5),
    ("inspiratory_time_s", "900 ms", 0.9),
    ("respiratory_rate_bpm", "18 bpm", 18),
    ("mmad_um", "3.5 µm", 3.5),
]


def test_a_figure_is_converted_where_its_unit_is_written(export, taken):
    path = one_cell_each(export, [case[:2] for case in WRITTEN])
    report, log, refused = taken(path)
    assert refused.empty
    for i, (column, typed, value) in enumerate(WRITTEN):
        question = f"SELECT {column} FROM treatment WHERE treatment_id = 'T{i}'"
        found = log.cursor().execute(question).fetchone()[0]
        assert math.isclose(found, value, rel_tol=2e-5), (column, typed)
    assert set(report.repaired["repair"]) == {"unit"}
    # All but the one bare figure.
    assert report.repaired["values_repaired"].sum() == len(WRITTEN) - 1


FOREIGN = [
    ("tidal_volume_ml", "7.8 gal"),
    ("tidal_volume_ml", "450 mg"),
    ("tidal_volume_ml", "450 L/min"),
    ("tidal_volume_ml", "6-8 mL"),
    ("tidal_volume_ml", "0,45 L"),
    ("tidal_volume_ml", "mL"),
    ("nominal_dose_mg", "2 MU"),
    ("nominal_dose_mg", "30 ng/kg/min"),
    ("actuations_count", "4 puffs"),
    ("gsd", "2 cm"),
]


def test_a_unit_nobody_can_convert_makes_the_figure_unreadable(export, taken):
    _, _, refused = taken(one_cell_each(export, FOREIGN))
    assert list(refused["value"]) == [typed for _, typed in FOREIGN]
    assert list(refused["column"]) == [column for column, _ in FOREIGN]
    assert set(refused["code"]) == {"unreadable"}


def test_a_bare_figure_is_never_converted_for_its_size(export, taken):
    # 0.45 may well be litres; the column says millilitres, so it is out of range.
    _, _, refused = brought(taken, export, "tidal_volume_ml", "0.45")
    assert list(refused["code"]) == ["out_of_range"]


def test_a_bare_figure_is_converted_where_the_map_says_its_unit(export, taken):
    found, report, _ = brought(
        taken, export, "tidal_volume_ml", "0.45", {"units": {"tidal_volume_ml": "L"}}
    )
    assert found == 450
    assert list(report.repaired["repair"]) == ["unit"]
    found, _, _ = brought(
        taken, export, "tidal_volume_ml", "500 mL", {"units": {"tidal_volume_ml": "L"}}
    )
    assert found == 500


def test_every_conversion_used_is_a_plain_factor():
    # A factor stands for the function only if that is proportional.
    for convert in CONVERSIONS.values():
        assert convert(0.0) == 0
        assert math.isclose(convert(7.0), 7 * convert(1.0))


def test_every_unit_of_the_treatment_table_can_be_written_out():
    units = {c.unit for c in TREATMENT.columns if c.kind == "number"} - {"1"}
    assert units <= set(SYMBOLS.values())
    for column in TREATMENT.columns:
        if column.kind == "number" and column.unit != "1":
            assert 1.0 in factors(column).values()


def test_a_unit_spelled_in_lower_case_means_one_unit_only():
    assert all(spelling == spelling.lower() for spelling in SYMBOLS)


def test_a_word_is_translated_by_the_map_only(export, taken):
    words = {"words": {"generator": {"VMN": "vibrating_mesh", "SVN": "jet"}}}
    found, report, _ = brought(taken, export, "generator", "vmn", words)
    assert found == "vibrating_mesh"
    assert list(report.repaired["repair"]) == ["word"]
    found, report, _ = brought(taken, export, "generator", "JET", words)
    assert found == "jet"
    assert report.repaired.empty
    assert list(brought(taken, export, "generator", "VMN")[2]["code"]) == [
        "unknown_word"
    ]


def test_yes_and_no_may_be_translated_too(export, taken):
    words = {"words": {"spontaneous_breaths": {"X": "yes", "-": "no"}}}
    assert brought(taken, export, "spontaneous_breaths", "x", words)[0] is True
    assert brought(taken, export, "spontaneous_breaths", "-", words)[0] is False
    assert brought(taken, export, "spontaneous_breaths", "", words)[0] is None


CHARTED = {
    "AC/VC": "vcv",
    "  ac/vc ": "vcv",
    "A/C  Volume": "vcv",
    "PRVC": "prvc",
    "PS 8": "psv",
    "SIMV": "simv",
    "CPAP": "cpap",
    "APRV": "aprv",
    "HFOV": "other",
    "CMV": None,
    "AC": None,
    "VC": None,
    "PCV+": None,
    "HFNC": None,
    "T-piece": None,
    "nobody knows this": None,
    "": None,
}


def test_a_charted_mode_gives_a_word_only_where_it_means_one_thing(export, taken):
    path = one_cell_each(export, [("mode_text", charted) for charted in CHARTED])
    _, log, refused = taken(path)
    rows = log.cursor().execute("SELECT mode_text, mode::VARCHAR FROM treatment")
    assert dict(rows.fetchall()) == {
        charted.strip() or None: mode for charted, mode in CHARTED.items()
    }
    assert refused.empty


def test_a_mode_that_was_given_is_not_overruled_by_the_text(export, taken):
    path = export(
        "treatment.csv",
        f"{BASE},mode,mode_text",
        f"{AT},pcv,AC/VC",
        "T2,2026-01-05T08:00Z,unknown,AC/VC",
    )
    report, log, _ = taken(path)
    modes = log.cursor().execute("SELECT mode::VARCHAR FROM treatment ORDER BY 1")
    assert [mode for (mode,) in modes.fetchall()] == ["pcv", "vcv"]
    assert report.repaired["values_repaired"].sum() == 1


def test_a_site_can_say_what_its_own_modes_mean(export, taken):
    path = export("treatment.csv", f"{BASE},MODE", f"{AT},CMV")
    mapping = {"columns": {"MODE": "mode_text"}, "modes": {"CMV": "vcv"}}
    _, log, _ = taken(path, mapping=mapping)
    assert log.cursor().execute("SELECT mode::VARCHAR FROM treatment").fetchone() == (
        "vcv",
    )


def test_the_shipped_mode_terms_hold_together():
    terms = mode_terms()
    assert len({row["term"] for row in terms}) == len(terms) > 100
    for row in terms:
        assert row["term"] == " ".join(row["term"].lower().split())
        assert row["status"] in {"clear", "ambiguous", "not_a_mode"}
        assert row["known"] in {"read", "from memory"}
        assert (row["mode"] in words_of("mode")) == (row["status"] == "clear")
        assert bool(row["note"]) == (row["status"] != "clear")
    assert clear_modes({"Odd  Name": "psv"})["odd name"] == "psv"


def test_a_whole_map_from_a_file(export, taken, tmp_path):
    path = export(
        "neb_export_march.csv",
        "TX_ID,GIVEN,MED,DEVICE,VT,HH,VENT",
        "10021,03/04/2026 08:07,albuterol,VMN,0.45,Y,V1",
        "10022,25/10/2026,albuterol,SVN,0.5,N,V1",
    )
    site_map = tmp_path / "site.toml"
    site_map.write_text(
        'site_zone = "America/New_York"\n'
        '[files]\n"neb_export*" = "treatment"\n'
        '[columns]\nTX_ID = "treatment_id"\nGIVEN = "started_at"\nMED = "drug"\n'
        'DEVICE = "generator"\nVT = "tidal_volume_ml"\nVENT = "ventilator_token"\n'
        'HH = "heated_humidifier_on"\n'
        '[words.generator]\nVMN = "vibrating_mesh"\nSVN = "jet"\n'
        '[units]\ntidal_volume_ml = "L"\n'
        '[times]\nstarted_at = "%m/%d/%Y %H:%M"\n'
        '[constants]\ncircuit = "dual_limb"\n'
    )
    report, log, refused = taken(path, zone=None, mapping=site_map)
    row = log.cursor().execute(
        "SELECT treatment_id, started_at::VARCHAR, generator::VARCHAR, "
        "tidal_volume_ml, heated_humidifier_on, circuit::VARCHAR FROM treatment"
    )
    # 4 March 2026 is before the US clocks change: Eastern standard time, UTC - 5 h.
    assert row.fetchall() == [
        ("10021", "2026-03-04 13:07:00", "vibrating_mesh", 450.0, True, "dual_limb")
    ]
    assert list(refused["column"]) == ["started_at"]
    assert log.site_zone == "America/New_York"
    repaired = report.repaired.set_index("column")["values_repaired"].to_dict()
    assert repaired == {
        "started_at": 1,
        "generator": 2,
        "tidal_volume_ml": 2,
        "circuit": 2,
    }


def test_a_constant_never_fills_a_cell_that_was_left_empty(export, taken):
    path = export("treatment.csv", f"{BASE},circuit", f"{AT},")
    _, log, _ = taken(path, mapping={"constants": {"circuit": "dual_limb"}})
    assert log.cursor().execute("SELECT circuit FROM treatment").fetchone() == (None,)


MODES = "vcv, pcv, prvc, psv, simv, aprv, cpap, other, unknown"


@pytest.mark.parametrize(
    ("content", "says"),
    [
        (
            {"colums": {}},
            "map: colums is no key of a map; the keys are site_zone, files, columns, "
            "words, units, times, constants, modes",
        ),
        ({"columns": {"A": "tx"}}, "map: columns.A: the log has no column tx"),
        (
            {"columns": {"MRN": "patient_token"}},
            "map: columns.MRN names a person; put an opaque token in its place "
            "before intake",
        ),
        (
            {"words": {"mode": {"CMV": "vc"}}},
            f"map: words.mode.CMV must be one of {MODES}; got vc",
        ),
        (
            {"words": {"drug": {"a": "b"}}},
            "map: words: drug is not a word or yes_no column",
        ),
        ({"modes": {"CMV": "vc"}}, f"map: modes.CMV must be one of {MODES}; got vc"),
        (
            {"files": {"*.csv": "treatments"}},
            "map: files.*.csv must be one of treatment, filter_use, filter_reading, "
            "sensor_check, service_event, incident, room, clock_offset; got treatments",
        ),
        ({"times": {"mode": "%Y"}}, "map: times: mode is not a time column"),
        ({"constants": {"x": "1"}}, "map: constants: the log has no column x"),
        ({"site_zone": 5}, "map: site_zone: Input should be a valid string"),
    ],
)
def test_a_map_that_does_not_hold_names_the_key_and_what_is_allowed(content, says):
    with pytest.raises(SourceUnreadable) as error:
        load_map(content)
    assert str(error.value) == says


def test_a_unit_the_map_cannot_mean_is_named():
    with pytest.raises(SourceUnreadable) as error:
        load_map({"units": {"peep_cmh2o": "psi"}})
    text = str(error.value)
    assert text.startswith("map: units.peep_cmh2o must be one of cmh2o, ")
    assert text.endswith("; got psi")


def test_a_map_file_that_cannot_be_read_is_named(tmp_path):
    path = tmp_path / "site.toml"
    with pytest.raises(SourceUnreadable, match=r"site\.toml cannot be read: No such"):
        load_map(path)
    path.write_text("= =")
    with pytest.raises(SourceUnreadable, match=r"site\.toml is not a TOML file: "):
        load_map(path)
