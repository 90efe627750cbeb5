"""Do two reviewers agree? The table, the share agreed, kappa and AC1 side by side.

Kappa falls to nothing where almost all charts are alike, AC1 hardly moves; neither
verbal scale is used.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import special, stats

from engine.evidence.filter import INTERVAL_COVER_FRAC
from engine.evidence.review import DOUBLE_REVIEWS_COUNT


@dataclass(frozen=True, kw_only=True)
class Agreement:
    """Two reviewers of the same charts.

    ``kappa_se_null`` is for the test of no agreement, ``kappa_se`` for the interval;
    they are not the same. ``refusal`` is set where there are too few charts for
    coefficients; the table and the share agreed stand all the same.
    """

    charts_count: int
    agreed_frac: float
    expected_frac: float
    kappa: float
    kappa_se: float
    kappa_low: float
    kappa_high: float
    kappa_se_null: float
    z: float
    p: float
    ac1: float
    ac1_se: float
    ac1_low: float
    ac1_high: float
    refusal: str = ""


def agreement(table: ArrayLike, fewest: int | None = None) -> Agreement:
    """Kappa and AC1 of a square table: rows the first reviewer, columns the second.

    ``fewest``  charts below which coefficients are called too few; the policy's number
    Source      Cohen 1960; standard errors Fleiss, Cohen and Everitt 1969; Gwet 2008
                (formulas from memory); checked in tests/published/review_methods.csv
    Raises      ValueError if the table is not square or empty.
    """
    counts = np.asarray(table, float)
    square = counts.ndim == 2 and counts.shape[0] == counts.shape[1] > 1
    if not square or not counts.sum():
        raise ValueError("the table must be square, 2 by 2 at least, and hold a chart")
    n = counts.sum()
    p = counts / n
    row, column = p.sum(axis=1), p.sum(axis=0)
    agreed, expected = float(np.trace(p)), float(row @ column)
    kappa, se, null = _kappa(p, row, column, n)
    ac1, ac1_se = _ac1(p, row, column, n)
    z_cover = float(special.ndtri((1 + float(INTERVAL_COVER_FRAC)) / 2))
    z = kappa / null if null > 0 else math.nan
    needed = int(DOUBLE_REVIEWS_COUNT) if fewest is None else fewest
    return Agreement(
        charts_count=int(n),
        agreed_frac=agreed,
        expected_frac=expected,
        kappa=kappa,
        kappa_se=se,
        kappa_low=max(kappa - z_cover * se, -1.0),
        kappa_high=min(kappa + z_cover * se, 1.0),
        kappa_se_null=null,
        z=z,
        p=float(2 * stats.norm.sf(abs(z))),
        ac1=ac1,
        ac1_se=ac1_se,
        ac1_low=max(ac1 - z_cover * ac1_se, -1.0),
        ac1_high=min(ac1 + z_cover * ac1_se, 1.0),
        refusal=f"{int(n)} charts; {needed} are needed" if n < needed else "",
    )


def _kappa(
    p: np.ndarray, row: np.ndarray, column: np.ndarray, n: float
) -> tuple[float, float, float]:
    """Kappa, its standard error for the interval, and under no agreement."""
    agreed, expected = float(np.trace(p)), float(row @ column)
    left = 1 - expected
    if left <= 0:
        return math.nan, math.nan, math.nan
    kappa = (agreed - expected) / left
    diagonal = np.diag(p)
    own = float(np.sum(diagonal * (1 - (row + column) * (1 - kappa)) ** 2))
    off = p * _crossed(row, column) ** 2
    off_sum = (1 - kappa) ** 2 * float(off.sum() - np.diag(off).sum())
    variance = own + off_sum - (kappa - expected * (1 - kappa)) ** 2
    se = math.sqrt(max(variance, 0.0) / n) / left
    products = float(np.sum(row * column * (row + column)))
    null = math.sqrt(max(expected + expected**2 - products, 0.0) / n) / left
    return kappa, se, null


def _crossed(row: np.ndarray, column: np.ndarray) -> np.ndarray:
    """For cell i, j the column total of i plus the row total of j."""
    return column[:, None] + row[None, :]


def _ac1(
    p: np.ndarray, row: np.ndarray, column: np.ndarray, n: float
) -> tuple[float, float]:
    categories = len(row)
    mean = (row + column) / 2
    expected = float(np.sum(mean * (1 - mean))) / (categories - 1)
    agreed = float(np.trace(p))
    ac1 = (agreed - expected) / (1 - expected)
    # Linearised variance over charts, by the cell each chart lies in.
    i, j = np.indices(p.shape)
    own = (i == j).astype(float)
    towards = 1 - (mean[i] + mean[j]) / 2
    each = (own - expected) / (1 - expected) - 2 * (1 - ac1) * (
        towards / (categories - 1) - expected
    ) / (1 - expected)
    variance = float(np.sum(p * (each - ac1) ** 2)) / (n - 1) if n > 1 else math.nan
    return ac1, math.sqrt(variance)
