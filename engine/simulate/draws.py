"""Drawing from shares, each topic on a stream of its own.

A stream is named, so that a topic added later does not reshuffle the others.
"""

from __future__ import annotations

import zlib

import numpy as np

from engine.simulate.prevalence import Shares


def stream(seed: int, topic: str) -> np.random.Generator:
    """The random numbers of one topic in the department of this seed."""
    return np.random.default_rng([seed, zlib.crc32(topic.encode())])


def words(rng: np.random.Generator, shares: Shares, count: int) -> np.ndarray:
    """``count`` words drawn by their shares; None stands for nothing written."""
    names = np.array(list(shares), dtype=object)
    chances = np.array(list(shares.values()), dtype=float)
    return rng.choice(names, count, p=chances / chances.sum())


def hidden(rng: np.random.Generator, values: np.ndarray, share: float) -> np.ndarray:
    """The same values with a share of them not written down."""
    gone = rng.random(len(values)) < share
    if values.dtype == object:
        return unsaid(gone, values)
    return np.where(gone, np.nan, values)


def unsaid(gone: np.ndarray, values: object) -> np.ndarray:
    """The same values with nothing written where ``gone`` holds."""
    kept = np.empty(len(gone), dtype=object)
    kept[:] = values
    kept[gone] = None
    return kept


def hours(count: object) -> np.ndarray:
    """Hours as a span of time, to the second."""
    seconds = np.round(np.asarray(count, dtype=float) * 3600.0)
    return seconds.astype("timedelta64[s]")
