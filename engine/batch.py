"""A batch: some treatments as named arrays, the form the physics and rules read.

``rows[name]`` is one array of n values:
  word columns    int8 codes into ``columns.words_of(name)``; -1 where unknown
  numbers, counts float64, NaN where missing
  yes / no        int8, 1 yes, 0 no, -1 unknown
  times           datetime64[us], NaT where missing
  ids, tokens     object, None where missing
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TypeAlias

import numpy as np

from engine.columns import CONTEXT, TREATMENT, Column, code_of
from engine.ternary import Ternary

Batch: TypeAlias = Mapping[str, np.ndarray]

COLUMNS: dict[str, Column] = {
    column.name: column for table in (CONTEXT, TREATMENT) for column in table.columns
}


def size(rows: Batch) -> int:
    """How many treatments the batch holds."""
    return len(next(iter(rows.values())))


def from_values(**columns: object) -> dict[str, np.ndarray]:
    """A whole batch from plain values: words as text, None for what is missing.

    Every declared column is present; those not given are missing throughout. One
    value stands for a single treatment, a list for several.
    """
    lists = {k: v if isinstance(v, list) else [v] for k, v in columns.items()}
    unknown = set(lists) - set(COLUMNS)
    if unknown:
        raise ValueError(f"no such column: {', '.join(sorted(unknown))}")
    n = max((len(values) for values in lists.values()), default=1)
    return {
        name: _array(column, _repeated(lists.get(name, [None]), n))
        for name, column in COLUMNS.items()
    }


def one_row(rows: Batch, index: int) -> dict[str, np.ndarray]:
    """The same batch cut down to one treatment."""
    return {name: values[index : index + 1] for name, values in rows.items()}


def is_word(rows: Batch, column: str, *words: str) -> Ternary:
    """Whether the column says one of these words; unknown where it says nothing."""
    codes = rows[column]
    wanted = [code_of(column, word) for word in words]
    return Ternary.of(np.isin(codes, wanted), codes >= 0)


def is_yes(rows: Batch, column: str) -> Ternary:
    """Whether a yes / no column says yes."""
    return Ternary.of(rows[column] == 1, rows[column] >= 0)


def is_above(values: np.ndarray, limit: np.ndarray | float) -> Ternary:
    """Whether each value lies above the limit; unknown where either is missing."""
    known = ~np.isnan(values) & ~np.isnan(limit)
    with np.errstate(invalid="ignore"):
        return Ternary.of(values > limit, known)


def is_below(values: np.ndarray, limit: np.ndarray | float) -> Ternary:
    """Whether each value lies below the limit; unknown where either is missing."""
    known = ~np.isnan(values) & ~np.isnan(limit)
    with np.errstate(invalid="ignore"):
        return Ternary.of(values < limit, known)


def is_missing(rows: Batch, column: str) -> np.ndarray:
    """True where the record does not hold this column."""
    values = rows[column]
    kind = COLUMNS[column].kind
    if kind in {"word", "yes_no"}:
        return values < 0
    if kind in {"number", "count"}:
        return np.isnan(values)
    if kind == "time":
        return np.isnat(values)
    return np.array([value is None for value in values], dtype=bool)


def _repeated(values: list, n: int) -> list:
    return values * n if len(values) == 1 else values


def _array(column: Column, values: list) -> np.ndarray:
    if column.kind == "word":
        codes = [-1 if v is None else code_of(column.name, v) for v in values]
        return np.array(codes, dtype=np.int8)
    if column.kind == "yes_no":
        return np.array([-1 if v is None else int(v) for v in values], dtype=np.int8)
    if column.kind in {"number", "count"}:
        return np.array([np.nan if v is None else float(v) for v in values])
    if column.kind == "time":
        return np.array(values, dtype="datetime64[us]")
    return np.array(values, dtype=object)
