"""What an engineer's note says was found: plain words looked for, nothing guessed.

A log by itself reaches no further than "consistent with". Only a record that somebody
opened the device and found something lifts an explanation to "supported", and a record
that somebody looked and found nothing speaks against it.
"""

from __future__ import annotations

import re
from collections.abc import Iterable

# Words that name each cause in a note, as the trade writes them.
WORDS: dict[str, tuple[str, ...]] = {
    "aerosol_film": (
        "residue",
        "deposit",
        "film",
        "crystal",
        "encrust",
        "sticky",
        "drug",
        "aerosol",
    ),
    "condensate": ("water", "condensate", "moisture", "wet", "droplets"),
    "filter_loading": (
        "filter blocked",
        "filter clogged",
        "filter occluded",
        "blocked filter",
        "clogged filter",
        "occluded filter",
    ),
    "exhalation_valve": ("valve", "diaphragm", "membrane"),
    "external_gas": ("external gas", "flowmeter", "added gas"),
    "circuit_change": ("misassembled", "wrong circuit", "circuit leak", "cracked"),
    "electronics": (
        "board",
        "electronic",
        "connector",
        "cable",
        "voltage",
        "communication",
        "power",
        "short circuit",
    ),
    "sensor_age": ("end of life", "worn", "aged"),
}
_DENIALS = r"(?:\bno|\bnot|\bwithout|\bfree of|\bclean of|\bnone|\bnil)\b[\w\s,]{0,24}$"
# A code names a part, not a finding, so codes lift nothing; they are shown.


def found_in(note: str | None, cause: str) -> bool | None:
    """True if the note names the cause, False if it denies it, None if silent."""
    if not isinstance(note, str):
        return None
    text = note.lower()
    answer: bool | None = None
    for word in WORDS.get(cause, ()):
        for match in re.finditer(rf"\b{re.escape(word)}", text):
            denied = re.search(_DENIALS, text[: match.start()]) is not None
            if not denied:
                return True
            answer = False
    return answer


def causes_named(notes: Iterable[str | None]) -> dict[str, bool]:
    """Each cause any note speaks of: True found, False looked for and not found."""
    said: dict[str, bool] = {}
    for note in notes:
        for cause in WORDS:
            answer = found_in(note, cause)
            if answer is not None:
                said[cause] = said.get(cause, False) or answer
    return said
