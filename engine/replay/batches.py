"""Arrow in, batches of arrays for the physics and the rules, Arrow out again."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pyarrow as pa

from engine.batch import COLUMNS
from engine.columns import ANSWERS, UNKNOWN, Column


def batch_of(arrow: pa.RecordBatch) -> dict[str, np.ndarray]:
    """The batch the physics and the rules read, from one Arrow record batch.

    Columns the record batch does not hold are missing throughout.
    """
    n = arrow.num_rows
    held = set(arrow.schema.names)
    return {
        name: _array(arrow.column(name), column) if name in held else _absent(column, n)
        for name, column in COLUMNS.items()
    }


def balance_arrow(
    treatment_id: np.ndarray, balance: Mapping[str, np.ndarray], site_words: list[str]
) -> pa.Table:
    """Balance and alternatives as a table; NaN becomes missing, sites become words."""
    columns: dict[str, pa.Array] = {"treatment_id": pa.array(treatment_id)}
    for name, values in balance.items():
        if name == "best_site":
            columns[name] = _words(values, site_words)
        elif values.dtype.kind == "f":
            columns[name] = pa.array(values, from_pandas=True)
        else:
            columns[name] = pa.array(values)
    return pa.table(columns)


def answer_arrow(
    treatment_id: np.ndarray, answers: Mapping[str, np.ndarray]
) -> pa.Table:
    """One row a treatment, one column a rule, the answer as a word."""
    columns: dict[str, pa.Array] = {"treatment_id": pa.array(treatment_id)}
    for rule_id, codes in answers.items():
        columns[rule_id] = _words(codes, list(ANSWERS))
    return pa.table(columns)


def finding_arrow(
    treatment_id: np.ndarray, answers: Mapping[str, np.ndarray]
) -> pa.Table:
    """One row for each rule that fired on each treatment: the two ids."""
    fired = {rule: np.flatnonzero(codes == 0) for rule, codes in answers.items()}
    rows = np.concatenate([*fired.values(), np.array([], dtype=np.int64)])
    rules = np.repeat(list(fired), [len(rows) for rows in fired.values()])
    return pa.table(
        {
            "treatment_id": pa.array(treatment_id[rows.astype(np.int64)], pa.string()),
            "rule_id": pa.array(rules.astype(str), pa.string()),
        }
    )


def _array(values: pa.Array, column: Column) -> np.ndarray:
    if column.kind == "word":
        return _codes(values, column)
    if column.kind == "yes_no":
        return values.cast(pa.int8()).fill_null(-1).to_numpy(zero_copy_only=False)
    if column.kind in {"number", "count"}:
        numbers = values.cast(pa.float64())
        return numbers.to_numpy(zero_copy_only=False).astype(np.float64)
    if column.kind == "time":
        return values.cast(pa.timestamp("us")).to_numpy(zero_copy_only=False)
    return np.asarray(values.to_numpy(zero_copy_only=False), dtype=object)


def _codes(values: pa.Array, column: Column) -> np.ndarray:
    if not isinstance(values, pa.DictionaryArray):
        values = values.cast(pa.string()).dictionary_encode()
    words = {word: code for code, word in enumerate(column.words)}
    words[UNKNOWN] = -1
    table = [words[word] for word in values.dictionary.to_pylist()]
    lookup = np.array([*table, -1], dtype=np.int8)
    indices = values.indices.cast(pa.int32()).fill_null(len(table))
    return lookup[indices.to_numpy(zero_copy_only=False)]


def _absent(column: Column, n: int) -> np.ndarray:
    if column.kind in {"word", "yes_no"}:
        return np.full(n, -1, dtype=np.int8)
    if column.kind in {"number", "count"}:
        return np.full(n, np.nan)
    if column.kind == "time":
        return np.full(n, "NaT", dtype="datetime64[us]")
    return np.full(n, None, dtype=object)


def _words(codes: np.ndarray, words: list[str]) -> pa.Array:
    indices = pa.array(codes.astype(np.int8), mask=codes < 0)
    return pa.DictionaryArray.from_arrays(indices, pa.array(words)).cast(pa.string())
