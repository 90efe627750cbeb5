"""One journal entry: what it holds, how it is written, how it is chained.

An entry is one line of canonical JSON (keys sorted, no spare blanks, ASCII only) that
carries the hash of the entry before it and, over all that, its own.
"""

from __future__ import annotations

import hashlib
import json
import unicodedata
from dataclasses import asdict, dataclass
from datetime import UTC, datetime
from typing import Any

from engine.errors import EntryRefused

# What may be written, and what the object of such an entry is.
ACTIONS: dict[str, str] = {
    "verdict": "a finding: confirmed, dismissed or needs chart check",
    "note": "whatever the note is about",
    "decision": "an indicator, topic or incident: what was decided, who owns it",
    "sign_off": "a report, with the head of the chain it was signed on",
    "scenario": "a scenario kept for later, whole",
    "export": "a report or table that left the program",
    "withdraw": "the number of an earlier entry that no longer stands",
}
VERDICTS = ("confirmed", "dismissed", "needs_chart_check")

# What the first entry names as the one before it.
GENESIS = "0" * 64

# A page and a half of typing; more belongs in a document of its own.
LONGEST_TEXT_CHARACTERS = 4000
LONGEST_ENTRY_BYTES = 100_000

# Characters that reorder what the eye reads, so that a note could show another text
# than it holds (Unicode bidirectional formatting characters).
_REORDERING = frozenset(
    chr(c) for c in (*range(0x202A, 0x202F), *range(0x2066, 0x206A))
)


@dataclass(frozen=True, kw_only=True)
class Entry:
    """One line of the journal; ``at`` is ISO 8601 with its offset."""

    seq: int
    at: str
    actor: str
    role: str
    action: str
    object: str
    old: Any
    new: Any
    reason: str
    previous: str
    hash: str

    @property
    def at_utc(self) -> datetime:
        """When, in UTC without a zone, as the log's own times are."""
        return datetime.fromisoformat(self.at).astimezone(UTC).replace(tzinfo=None)


def written(
    *,
    seq: int,
    at: datetime,
    actor: str,
    role: str,
    action: str,
    object: str,
    old: Any,
    new: Any,
    reason: str,
    previous: str,
) -> Entry:
    """The entry, cleaned, checked and chained to the one before.

    Raises   EntryRefused for an unknown action or verdict, a missing actor or object,
             a value that is not plain JSON, or a text too long.
    """
    if action not in ACTIONS:
        allowed = ", ".join(ACTIONS)
        raise EntryRefused(f"action must be one of {allowed}; got {action}")
    if action == "verdict" and (not isinstance(new, str) or new not in VERDICTS):
        raise EntryRefused(f"verdict must be one of {', '.join(VERDICTS)}; got {new}")
    content = {
        "seq": seq,
        "at": (at if at.tzinfo else at.replace(tzinfo=UTC)).isoformat(),
        "actor": _needed("actor", actor),
        "role": clean("role", role),
        "action": action,
        "object": _needed("object", object),
        "old": clean("old", old),
        "new": clean("new", new),
        "reason": clean("reason", reason),
        "previous": previous,
    }
    try:
        entry = Entry(**content, hash=digest(content))
    except (TypeError, ValueError, RecursionError):
        raise EntryRefused(f"{action} must hold plain values that JSON can") from None
    size = len(line_of(entry))
    if size > LONGEST_ENTRY_BYTES:
        raise EntryRefused(
            f"an entry must be at most {LONGEST_ENTRY_BYTES} bytes; got {size}"
        )
    return entry


def is_sound(entry: Entry) -> bool:
    """Whether each part is of its kind: a chain alone does not say so.

    Raises   ValueError or OverflowError for a moment that is none.
    """
    texts = (entry.actor, entry.role, entry.action, entry.object, entry.reason)
    if not all(isinstance(each, str) for each in texts) or type(entry.seq) is not int:
        return False
    if not all(clean("text", each) == each for each in texts):
        return False
    if datetime.fromisoformat(entry.at).tzinfo is None or entry.at_utc.year < 1:
        return False
    known = entry.action in ACTIONS and bool(entry.actor and entry.object)
    return known and (entry.action != "verdict" or entry.new in list(VERDICTS))


def line_of(entry: Entry) -> bytes:
    """The line as it stands in the file, without its line end."""
    return canonical(asdict(entry))


def digest(content: dict[str, Any]) -> str:
    """SHA-256 over the canonical JSON of everything but the hash itself."""
    return hashlib.sha256(canonical(content)).hexdigest()


def canonical(value: Any) -> bytes:
    """The one way this value is written as JSON."""
    text = json.dumps(value, sort_keys=True, separators=(",", ":"), allow_nan=False)
    return text.encode("ascii")


def clean(name: str, value: Any) -> Any:
    """The value with control characters gone from every text in it.

    Raises   EntryRefused if a text is longer than an entry may hold.
    """
    if isinstance(value, str):
        text = "".join(_kept(character) for character in value).strip()
        if len(text) > LONGEST_TEXT_CHARACTERS:
            raise EntryRefused(
                f"{name} must be at most {LONGEST_TEXT_CHARACTERS} characters; "
                f"got {len(text)}"
            )
        return text
    if isinstance(value, dict):
        return {clean(name, str(k)): clean(name, v) for k, v in value.items()}
    if isinstance(value, (list, tuple)):
        return [clean(name, item) for item in value]
    return value


def _kept(character: str) -> str:
    if character == "\n":
        return character
    if character == "\t":
        return " "
    if character in _REORDERING or unicodedata.category(character) in {"Cc", "Cs"}:
        return ""
    return character


def _needed(name: str, value: str) -> str:
    text = clean(name, value)
    if not isinstance(text, str) or not text:
        raise EntryRefused(f"{name} must be given; got nothing")
    return text
