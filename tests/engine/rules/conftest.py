"""Rows of the rule tables as batches the rules can be asked about."""

import numpy as np
import pytest

from engine.batch import COLUMNS, from_values, size
from engine.columns import code_of

NUMBERS = (
    "best_ratio",
    "delivered_frac",
    "best_delivered_frac",
    "room_frac",
    "room_low_frac",
    "room_high_frac",
)


def _value(name, text):
    if text in ("", None):
        return None
    kind = COLUMNS[name].kind
    if kind == "yes_no":
        return {"yes": True, "no": False}[text]
    if kind in {"number", "count"}:
        return float(text)
    return text


def _batch(cells):
    """One treatment from plain texts; what a cell leaves blank is not logged."""
    rows = from_values(
        **{name: _value(name, text) for name, text in cells.items() if name in COLUMNS}
    )
    n = size(rows)
    for name in NUMBERS:
        rows[name] = np.full(n, float(cells.get(name) or "nan"))
    shown = {"yes": 1, "no": 0}.get(cells.get("difference_shown"), -1)
    rows["difference_shown"] = np.full(n, shown, dtype=np.int8)
    best = code_of("site", cells.get("best_site") or "unknown")
    rows["best_site"] = np.full(n, best, dtype=np.int8)
    # That many assumptions, whichever they were.
    rows["assumed"] = np.full(n, 2 ** int(cells.get("assumed") or 0) - 1, np.int32)
    return rows


@pytest.fixture(scope="session")
def batch():
    """``batch(cells)``: one treatment from texts by column name."""
    return _batch
