"""Which few topics cover most of what was seen: every set is tried."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import ArrayLike


@dataclass(frozen=True, kw_only=True)
class Choice:
    """The best set of topics, the next best, and what the difference is.

    ``chosen`` and ``runner_up`` hold column numbers, ``without`` what the best set
    loses without each of its topics, ``alone`` what each topic covers by itself.
    """

    chosen: tuple[int, ...]
    value: float
    total: float
    runner_up: tuple[int, ...]
    runner_up_value: float
    without: tuple[float, ...]
    alone: tuple[float, ...]

    @property
    def loss_frac(self) -> float:
        """What is lost by taking the runner-up, as a share of the best value."""
        return 1 - self.runner_up_value / self.value if self.value > 0 else 0.0


def best_topics(values: ArrayLike, weights: ArrayLike, k: int) -> Choice:
    """The k topics of greatest coverage.

    ``values``   pattern x topic: what a topic is worth for treatments of a pattern, 0
                 where it does not touch them
    ``weights``  how many treatments (capped) have each pattern
    A treatment counts once, at the worth of the topic in the set that touches it most.
    Tries every set: 15,504 for 5 of 20 topics.
    """
    worth, many = _usable(values, weights)
    topics = worth.shape[1]
    size = min(k, topics)
    alone = many @ worth
    total = float(many @ worth.max(axis=1)) if worth.size else 0.0
    ranked = sorted(
        (
            (_value(worth, many, each), each)
            for each in combinations(range(topics), size)
        ),
        key=lambda found: (-found[0], found[1]),
    )
    value, chosen = ranked[0] if ranked else (0.0, ())
    second, runner_up = ranked[1] if len(ranked) > 1 else (0.0, ())
    without = tuple(
        value - _value(worth, many, tuple(t for t in chosen if t != topic))
        for topic in chosen
    )
    return Choice(
        chosen=tuple(chosen),
        value=value,
        total=total,
        runner_up=tuple(runner_up),
        runner_up_value=second,
        without=without,
        alone=tuple(float(each) for each in alone),
    )


def greedy_topics(values: ArrayLike, weights: ArrayLike, k: int) -> tuple[int, ...]:
    """k topics, each time the one that adds most: for more sets than can be tried.

    Never worth less than 1 - (1 - 1/k)^k of the best (Nemhauser, Wolsey and Fisher
    1978, from memory).
    """
    worth, many = _usable(values, weights)
    covered = np.zeros(len(worth))
    chosen: list[int] = []
    for _ in range(min(k, worth.shape[1])):
        gains = many @ np.maximum(worth - covered[:, None], 0)
        gains[chosen] = -1.0
        best = int(np.argmax(gains))
        chosen.append(best)
        covered = np.maximum(covered, worth[:, best])
    return tuple(chosen)


def capped(weight_by_patient: ArrayLike, most_frac: float) -> np.ndarray:
    """The factor for each patient that keeps anyone within a share of the whole.

    The share is of what the others and the capped one then weigh together, found by
    lowering the cap until it holds; with too few patients for the share, all weigh the
    same.
    """
    weight = np.asarray(weight_by_patient, float)
    n = int(np.count_nonzero(weight > 0))
    if n == 0:
        return np.ones_like(weight)
    if n * most_frac <= 1:
        ceiling = weight[weight > 0].min()
    else:
        ceiling = _ceiling(weight, most_frac)
    with np.errstate(divide="ignore"):
        return np.where(weight > 0, np.minimum(1.0, ceiling / weight), 1.0)


def _ceiling(weight: np.ndarray, most_frac: float) -> float:
    """The weight c with c = most_frac x sum(min(weight, c)), by the sorted sums."""
    falling = np.sort(weight)[::-1]
    rest = falling.sum() - np.cumsum(falling)
    for capped_count in range(len(falling) + 1):
        if capped_count * most_frac >= 1:
            break
        below = rest[capped_count - 1] if capped_count else falling.sum()
        ceiling = most_frac * below / (1 - capped_count * most_frac)
        if capped_count == len(falling) or falling[capped_count] <= ceiling:
            return float(ceiling)
    return float(falling[-1])


def _value(worth: np.ndarray, many: np.ndarray, topics: Sequence[int]) -> float:
    if not topics or not len(worth):
        return 0.0
    return float(many @ worth[:, list(topics)].max(axis=1))


def _usable(values: ArrayLike, weights: ArrayLike) -> tuple[np.ndarray, np.ndarray]:
    return np.asarray(values, float), np.asarray(weights, float)
