"""What a signature is put under, and whether the same still stands."""

from __future__ import annotations

from typing import Any

import pandas as pd

from engine.journal import Journal
from engine.replay import Replay

COLUMNS = ("seq", "at", "actor", "role", "snapshot")
_TOLD_AT_MOST = 8  # changes since a signature; more are counted
_STAMPS = {
    "log_fingerprint": "Log",
    "policy_hash": "Policy",
    "engine_version": "Engine",
}


def stamps_of(replay: Replay, journal: Journal | None) -> dict[str, Any]:
    """What the figures rest on: engine, log, policy, and the journal's head."""
    stamp = replay.stamp
    return {
        "engine_version": stamp["engine_version"],
        "log_fingerprint": stamp["log_fingerprint"],
        "policy_name": stamp["policy_name"],
        "policy_hash": stamp["policy_hash"],
        "journal_head": journal.head if journal is not None else None,
    }


def sign_offs(journal: Journal | None, signed_object: str) -> pd.DataFrame:
    """Signatures that stand under that object: ``COLUMNS``, oldest first."""
    entries = [] if journal is None else journal.standing("sign_off")
    found = [
        (e.seq, e.at_utc, e.actor, e.role, e.new)
        for e in entries
        if e.object == signed_object and isinstance(e.new, dict)
    ]
    return pd.DataFrame(found, columns=list(COLUMNS))


def signed_lines(sign_offs: pd.DataFrame, now: dict[str, Any]) -> list[str]:
    """Who signed what, and what has changed since; a line each."""
    lines = []
    for row in sign_offs.to_dict("records"):
        changed = differences(row["snapshot"], now)
        told = changed[:_TOLD_AT_MOST]
        if len(changed) > len(told):
            told.append(f"{len(changed) - len(told)} more have changed.")
        same = " ".join(told) or "Nothing has changed since."
        head = str(row["snapshot"].get("journal_head") or "")[:12] or "empty"
        lines.append(
            f"{row['actor']} ({row['role']}), {row['at']:%d %B %Y %H:%M} UTC, on"
            f" journal head {head}. {same}"
        )
    return lines


def differences(signed: dict[str, Any], now: dict[str, Any]) -> list[str]:
    """What no longer agrees with a signed snapshot, a line each."""
    told = []
    for key, words in _STAMPS.items():
        if signed.get(key) != now.get(key):
            told.append(f"{words} then {signed.get(key)}, now {now.get(key)}.")
    for name, before in (signed.get("figures") or {}).items():
        after = (now.get("figures") or {}).get(name)
        if after is None:
            told.append(f"{name} is no longer counted.")
        elif after != before:
            told.append(f"{name}: then {_figure(before)}, now {_figure(after)}.")
    for name, before in (signed.get("grades") or {}).items():
        after = (now.get("grades") or {}).get(name)
        if after != before:
            told.append(f"{name}: then {before}, now {after or 'no longer asked'}.")
    return told


def _figure(held: dict[str, Any]) -> str:
    value = held.get("value")
    shown = "no figure" if value is None else f"{value:.4g}"
    return f"{shown} from {held.get('known')} known, {held.get('unknown')} unknown"
