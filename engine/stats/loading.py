"""Aerosol or water: what a filter's rise goes along with, pooled across filters.

Resistance rises with the aerosol a filter has caught and with the hours it sat in
humid gas. Within one filter the two grow together and cannot be told apart; across
filters they do not, so every filter borrows from the others: its own two rates are
drawn towards the rates of all, as far as its own readings leave them open.

What comes out is an association. It points, it does not prove.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtri

from engine.evidence.filter import (
    INTERVAL_COVER_FRAC,
    POOLED_FILTERS_COUNT,
    SHARE_DRAWS_COUNT,
    SHARE_WIDTH_FRAC,
)

VERDICTS = ("aerosol", "water", "cannot_tell")
AEROSOL, WATER, CANNOT_TELL = VERDICTS


@dataclass(frozen=True, kw_only=True)
class Loading:
    """Rates pooled over all filters, and the share of each filter's rise.

    Per filter, in the order of ``filters``: ``share`` of the modelled rise that goes
    along with captured aerosol, its ends, and the verdict word.
    """

    filters: np.ndarray
    share: np.ndarray
    low: np.ndarray
    high: np.ndarray
    verdict: np.ndarray
    rate_per_dose: float
    rate_per_dose_low: float
    rate_per_dose_high: float
    rate_per_humid_h: float
    rate_per_humid_h_low: float
    rate_per_humid_h_high: float
    readings_count: int
    filters_count: int
    seed: int
    refusal: str = ""


@dataclass(frozen=True)
class _Pooled:
    mean: np.ndarray  # (2,)
    mean_var: np.ndarray  # (2, 2)
    own: np.ndarray  # (filters, 2)
    own_var: np.ndarray  # (filters, 2, 2)
    noise_sd: float


def loading_shares(
    segment: np.ndarray,
    filter_of: np.ndarray,
    resistance: np.ndarray,
    captured_dose: np.ndarray,
    humid_h: np.ndarray,
    seed: int = 0,
    cover: float | None = None,
) -> Loading:
    """The share of each filter's rise that goes along with captured aerosol.

    Shapes   one row a reading, n each: the segment it belongs to (a change starts a
             new one), its filter, its resistance, and what had gathered by then.
             Rows with anything missing are left out.
    Rates    not below zero: a filter does not clear by catching aerosol.
    Verdict  aerosol or water where the whole interval lies beyond a half; cannot tell
             where it does not, or is too wide, or the filter did not load.
    Source   random-coefficient regression, Laird and Ware 1982 (from memory); the
             interval by draws from each filter's two rates, seed kept
    Checked  tests/engine/stats/test_loading.py; detection.csv
    """
    y = np.asarray(resistance, float)
    x = np.column_stack([captured_dose, humid_h]).astype(float)
    good = np.isfinite(y) & np.isfinite(x).all(axis=1)
    labels, owner = np.unique(np.asarray(filter_of)[good], return_inverse=True)
    away_y, away_x, segments = _within(np.asarray(segment)[good], y[good], x[good])
    scale = np.sqrt((away_x**2).mean(axis=0)) if len(away_x) else np.zeros(2)
    if len(labels) < int(POOLED_FILTERS_COUNT) or not (scale > 0).all():
        why = "too few filters" if (scale > 0).all() else "no aerosol or no humid hours"
        return _silent(labels, int(good.sum()), seed, f"{why} to tell the two apart")
    pooled = _pooled(owner, len(labels), away_y, away_x / scale, len(away_y) - segments)
    gathered = _gathered(owner, len(labels), x[good])
    cover = float(INTERVAL_COVER_FRAC) if cover is None else cover
    share, low, high = _shares(pooled, gathered / scale, seed, cover)
    rates, half = pooled.mean / scale, _half(pooled, cover) / scale
    return Loading(
        filters=labels,
        share=share,
        low=low,
        high=high,
        verdict=_verdicts(share, low, high),
        rate_per_dose=float(rates[0]),
        rate_per_dose_low=float(rates[0] - half[0]),
        rate_per_dose_high=float(rates[0] + half[0]),
        rate_per_humid_h=float(rates[1]),
        rate_per_humid_h_low=float(rates[1] - half[1]),
        rate_per_humid_h_high=float(rates[1] + half[1]),
        readings_count=int(good.sum()),
        filters_count=len(labels),
        seed=seed,
    )


_ROUNDS = 60  # of expectation and maximisation; the rates settle well before
_SMALLEST_VAR = 1e-10


def _within(
    segment: np.ndarray, y: np.ndarray, x: np.ndarray
) -> tuple[np.ndarray, np.ndarray, int]:
    """Each reading less the mean of its segment, and how many segments there are."""
    labels, code = np.unique(segment, return_inverse=True)
    n = np.maximum(np.bincount(code), 1)
    mean_y = np.bincount(code, y) / n if len(y) else np.empty(0)
    mean_x = [np.bincount(code, column) / n for column in x.T]
    away_x = x - np.column_stack([mean[code] for mean in mean_x])
    return y - mean_y[code], away_x, len(labels)


def _gathered(owner: np.ndarray, count: int, x: np.ndarray) -> np.ndarray:
    """What each filter gathered between its first and its last reading."""
    top = np.full((count, 2), -np.inf)
    bottom = np.full((count, 2), np.inf)
    np.maximum.at(top, owner, x)
    np.minimum.at(bottom, owner, x)
    return top - bottom


def _pooled(
    owner: np.ndarray, count: int, y: np.ndarray, x: np.ndarray, df: int
) -> _Pooled:
    """Rates of all filters and of each, by expectation and maximisation."""
    a = np.zeros((count, 2, 2))
    np.add.at(a, owner, x[:, :, None] * x[:, None, :])
    c = np.zeros((count, 2))
    np.add.at(c, owner, x * y[:, None])
    total = float((y**2).sum())
    mean = np.linalg.lstsq(a.sum(axis=0), c.sum(axis=0), rcond=None)[0]
    spread = np.eye(2) * max(float((mean**2).mean()), _SMALLEST_VAR)
    noise = max(total / max(df, 1), _SMALLEST_VAR)
    for _ in range(_ROUNDS):
        inverse = np.linalg.inv(spread)
        own_var = np.linalg.inv(a / noise + inverse)
        # What each filter says of the common rates once its own freedom is allowed.
        told = a / noise - (a / noise) @ own_var @ (a / noise)
        heard = (c - np.einsum("fij,fj->fi", a @ own_var, c) / noise) / noise
        mean_var = np.linalg.pinv(told.sum(axis=0))
        mean = mean_var @ heard.sum(axis=0)
        own = np.einsum("fij,fj->fi", own_var, c / noise + inverse @ mean)
        away = own - mean
        spread = own_var.mean(axis=0) + away.T @ away / count
        spread += np.eye(2) * _SMALLEST_VAR
        misfit = (
            total
            - 2 * float((own * c).sum())
            + float(np.einsum("fi,fij,fj->", own, a, own))
            + float(np.einsum("fij,fji->", a, own_var))
        )
        noise = max(misfit / max(df, 1), _SMALLEST_VAR)
    pull = own_var @ np.linalg.inv(spread)
    own_var = own_var + pull @ mean_var @ np.transpose(pull, (0, 2, 1))
    return _Pooled(mean, mean_var, own, own_var, math.sqrt(noise))


def _shares(
    pooled: _Pooled, gathered: np.ndarray, seed: int, cover: float
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    drawn = np.random.default_rng(seed).random((int(SHARE_DRAWS_COUNT), 2))
    normal = ndtri(drawn)
    tail = (1 - cover) / 2
    out = np.full((3, len(gathered)), math.nan)
    for i, (rates, var) in enumerate(zip(pooled.own, pooled.own_var, strict=True)):
        root = np.linalg.cholesky(var + np.eye(2) * _SMALLEST_VAR)
        tried = rates + normal @ root.T
        # A rise that may be none, or no more than the readings scatter, has no parts.
        if np.quantile(tried @ gathered[i], tail) <= pooled.noise_sd:
            continue
        parts = np.maximum(tried, 0.0) * gathered[i]
        rise = parts.sum(axis=1)
        share = parts[rise > 0, 0] / rise[rise > 0]
        out[:, i] = np.quantile(share, [0.5, tail, 1 - tail])
    return out[0], out[1], out[2]


def _half(pooled: _Pooled, cover: float) -> np.ndarray:
    quantile = float(ndtri((1 + cover) / 2))
    return quantile * np.sqrt(np.diag(pooled.mean_var))


def _verdicts(share: np.ndarray, low: np.ndarray, high: np.ndarray) -> np.ndarray:
    narrow = high - low <= float(SHARE_WIDTH_FRAC)
    aerosol, water = narrow & (low > 0.5), narrow & (high < 0.5)
    return np.select([aerosol, water], [AEROSOL, WATER], default=CANNOT_TELL)


def _silent(labels: np.ndarray, readings: int, seed: int, why: str) -> Loading:
    nan, empty = math.nan, np.full(len(labels), math.nan)
    return Loading(
        filters=labels,
        share=empty,
        low=empty.copy(),
        high=empty.copy(),
        verdict=np.full(len(labels), CANNOT_TELL),
        rate_per_dose=nan,
        rate_per_dose_low=nan,
        rate_per_dose_high=nan,
        rate_per_humid_h=nan,
        rate_per_humid_h_low=nan,
        rate_per_humid_h_high=nan,
        readings_count=readings,
        filters_count=len(labels),
        seed=seed,
        refusal=why,
    )
