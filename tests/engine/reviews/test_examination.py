"""What an engineer's note is taken to say, and what it is not."""

import pytest

from engine.reviews.examination import causes_named, found_in


@pytest.mark.parametrize(
    ("note", "cause", "said"),
    [
        ("White residue on the sensor grid, cleaned", "aerosol_film", True),
        ("Sensor removed: crystals seen under lens", "aerosol_film", True),
        ("No residue seen on the sensor", "aerosol_film", False),
        ("Sensor free of any deposit", "aerosol_film", False),
        ("Inspected without finding any visible film", "aerosol_film", False),
        ("No residue on the grid. Later film on the port", "aerosol_film", True),
        ("Water found in the expiratory limb", "condensate", True),
        ("Loose connector behind the module", "electronics", True),
        ("Diaphragm replaced", "exhalation_valve", True),
        ("Module swapped, works", "aerosol_film", None),
        ("", "aerosol_film", None),
        (None, "electronics", None),
    ],
)
def test_a_note_names_denies_or_says_nothing(note, cause, said):
    assert found_in(note, cause) is said


def test_several_notes_are_taken_together_and_a_find_outweighs_a_denial():
    notes = ["no residue seen at first", None, "residue after disassembly", "dry"]
    assert causes_named(notes) == {"aerosol_film": True}


def test_no_notes_name_nothing():
    assert causes_named([]) == {}
