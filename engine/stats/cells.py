"""Which cells of a table may be shown, so that no one person can be read off."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike


def hidden_cells(
    count: ArrayLike, small: ArrayLike, zero_may_show: bool = True
) -> np.ndarray:
    """True where a cell stays hidden: small itself, or it would give a small one away.

    ``count``  the table, units by shifts; row and column totals stand beside it
    ``small``  true where the cell alone is too small to show
    A row or column with one hidden cell would give it away by subtraction: the
    smallest other cell is hidden with it, again and again until none stands alone; so
    would hidden cells that are all as small as can be, which is looked at as well.
    """
    n = np.asarray(count, float)
    hidden = np.asarray(small, bool) & ~((n == 0) & zero_may_show)
    while True:
        added = _partner(n, hidden)
        if added is None:
            return hidden
        hidden[added] = True


def _partner(n: np.ndarray, hidden: np.ndarray) -> tuple[int, int] | None:
    """The next cell to hide, or None where no hidden cell can be worked out."""
    for axis in (1, 0):
        for line in np.flatnonzero(_given_away(n, hidden, axis)):
            cells = n[line] if axis == 1 else n[:, line]
            shut = hidden[line] if axis == 1 else hidden[:, line]
            open_cells = np.flatnonzero(~shut)
            if not len(open_cells):
                continue
            other = int(open_cells[np.argmin(_filled_first(cells[open_cells]))])
            return (int(line), other) if axis == 1 else (other, int(line))
    return None


def _given_away(n: np.ndarray, hidden: np.ndarray, axis: int) -> np.ndarray:
    """Lines with one hidden cell, or with so little hidden that each must be one."""
    count = hidden.sum(axis=axis)
    held = np.where(hidden, n, 0.0).sum(axis=axis)
    return (count == 1) | ((count > 1) & (held <= count))


def _filled_first(cells: np.ndarray) -> np.ndarray:
    """Empty cells come last: hiding a zero beside a small cell hides nothing."""
    return np.where(cells > 0, cells, np.inf)
