"""Work in pieces that fit the cache, on the processors there are."""

from __future__ import annotations

import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

import numpy as np

from engine.batch import Batch, size

CHUNK_ROWS = 16384


def in_chunks(
    work: Callable[[Batch], dict[str, np.ndarray]], rows: Batch
) -> dict[str, np.ndarray]:
    """``work`` applied to pieces of the batch; rows stay in order.

    Each row's answer may depend on that row only, so that pieces change nothing.
    """
    n = size(rows)
    if n <= CHUNK_ROWS:
        return work(rows)
    pieces = [
        {name: values[start : start + CHUNK_ROWS] for name, values in rows.items()}
        for start in range(0, n, CHUNK_ROWS)
    ]
    with ThreadPoolExecutor(min(len(pieces), os.cpu_count() or 1)) as pool:
        done = list(pool.map(work, pieces))
    return {name: np.concatenate([d[name] for d in done]) for name in done[0]}
