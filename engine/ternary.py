"""Yes, no, unknown: the one way this project answers from incomplete records.

A missing value must end as "cannot tell", never as "no". Arrays of plain booleans
cannot hold that, so every condition on the log returns a ``Ternary``.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

NO, UNKNOWN, YES = np.int8(0), np.int8(1), np.int8(2)


@dataclass(frozen=True, eq=False)
class Ternary:
    """A column of n answers, each no (0), unknown (1) or yes (2).

    ``&``, ``|`` and ``~`` follow Kleene's strong logic: unknown spreads only where
    the other side does not already decide the outcome.

    Source   Kleene, Introduction to Metamathematics, 1952, section 64 (from memory).
    """

    codes: np.ndarray

    @classmethod
    def of(cls, truth: np.ndarray, known: np.ndarray | bool = True) -> Ternary:
        """From plain truth values; unknown wherever ``known`` is false."""
        return cls(np.where(known, np.where(truth, YES, NO), UNKNOWN).astype(np.int8))

    @classmethod
    def always(cls, n: int, code: np.int8 = YES) -> Ternary:
        """The same answer n times."""
        return cls(np.full(n, code, dtype=np.int8))

    def __and__(self, other: Ternary) -> Ternary:
        return Ternary(np.minimum(self.codes, other.codes))

    def __or__(self, other: Ternary) -> Ternary:
        return Ternary(np.maximum(self.codes, other.codes))

    def __invert__(self) -> Ternary:
        return Ternary((YES - self.codes).astype(np.int8))

    def __len__(self) -> int:
        return len(self.codes)

    @property
    def yes(self) -> np.ndarray:
        """True where the answer is certainly yes."""
        return self.codes == YES

    @property
    def no(self) -> np.ndarray:
        """True where the answer is certainly no."""
        return self.codes == NO

    @property
    def unknown(self) -> np.ndarray:
        """True where the record does not say."""
        return self.codes == UNKNOWN
