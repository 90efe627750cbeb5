"""Contrast, marks, safe tables and safe words."""

import pandas as pd
import pytest

from reviewapp import parts, tables
from reviewapp.drawings.svg import DARK, LIGHT

TEXT, MARKS = ("ink", "faint", "aerosol", "fired", "unknown"), ("aerosol", "fired")


def luminance(colour):
    """Relative luminance, WCAG 2.2 definition (from memory)."""
    parts = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [
        v / 12.92 if v <= 0.04045 else ((v + 0.055) / 1.055) ** 2.4 for v in parts
    ]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def contrast(one, two):
    low, high = sorted((luminance(one), luminance(two)))
    return (high + 0.05) / (low + 0.05)


def test_the_contrast_of_black_on_white_is_21():
    assert contrast("#000000", "#FFFFFF") == pytest.approx(21.0)


@pytest.mark.parametrize("colours", [LIGHT, DARK], ids=["light", "dark"])
@pytest.mark.parametrize("ground", ["paper", "panel"])
def test_words_and_marks_stand_out(colours, ground):
    for name in TEXT:
        assert contrast(colours[name], colours[ground]) >= 4.5, (name, ground)
    for name in MARKS:
        assert contrast(colours[name], colours[ground]) >= 3.0, (name, ground)


def test_each_answer_has_a_mark_of_its_own_shape_and_its_words():
    marks = {answer: parts.answer_mark(answer) for answer in parts.ANSWER_WORDS}
    assert "<rect" in marks["fires"]
    assert "<circle" in marks["silent"]
    assert "<line" in marks["not_asked"]
    assert ">?<" in marks["cannot_tell"]
    for answer, words in parts.ANSWER_WORDS.items():
        assert f'aria-label="{words}"' in marks[answer]


def test_a_formula_in_a_table_is_made_text_and_numbers_stay_numbers():
    table = pd.DataFrame({"note": ["=1+1", "-hold", "fine"], "value": [-3.2, 1.0, 2.0]})
    lines = tables.csv_of(table).decode("utf-8-sig").splitlines()
    assert lines == ["note,value", "'=1+1,-3.2", "'-hold,1.0", "fine,2.0"]


def test_plain_words_lose_no_letter_and_gain_no_markup():
    words = "F*1* [x](http://y) <b> $a$ `c`"
    assert parts.plain(words).replace("\\", "") == words
    assert "<b>" not in parts.plain(words)
