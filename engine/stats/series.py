"""Did a session help? A level and a slope before, a level and a slope after.

One coding, always: time counts from the first point after, so that the level change is
the jump at that point. Ordinary and autocorrelation-proof intervals are both given;
on one short series neither is wide enough, which is said beside them.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from engine.evidence.filter import INTERVAL_COVER_FRAC
from engine.evidence.review import POINTS_TO_DRAW_COUNT, POINTS_TO_TEST_COUNT

# A difference of two equal series is nothing, not the last bits of its arithmetic.
_PLACES = 12
_NOTHING = 1e-9


@dataclass(frozen=True, kw_only=True)
class Change:
    """One coefficient with its two standard errors and intervals."""

    value: float
    se_ols: float
    se_hac: float
    low_ols: float
    high_ols: float
    low_hac: float
    high_hac: float

    @property
    def shown(self) -> bool:
        """Whether both intervals leave out no change."""
        if abs(self.value) < _NOTHING:
            return False
        return (self.low_ols > 0 and self.low_hac > 0) or (
            self.high_ols < 0 and self.high_hac < 0
        )


@dataclass(frozen=True, kw_only=True)
class Segmented:
    """A series cut at a session. ``refusal`` says why there is no fit."""

    before_count: int
    after_count: int
    level: float
    slope: Change | None
    slope_alone_se: float  # of the line fitted to the earlier points alone
    level_change: Change | None
    slope_change: Change | None
    r2: float
    fitted: np.ndarray
    expected: np.ndarray  # the earlier line carried on
    mean_gap: float
    tested: bool
    refusal: str = ""


def segmented(
    values: ArrayLike,
    first_after: int,
    weights: ArrayLike | None = None,
    hac_lags: int = 1,
    fewest: int | None = None,
) -> Segmented:
    """y = b0 + b1 t + b2 after + b3 t after, t = 0 at the first point after.

    ``first_after``  place of the first point after the session
    ``weights``      how many treatments each point stands on; a point that stands on
                     none is left out
    HAC              Newey-West with the small-sample correction
    Source           Wagner 2002, Linden 2015 (method); checked in
                     tests/published/review_methods.csv
    Below ``POINTS_TO_DRAW_COUNT`` points a side there is no fit, below
    ``POINTS_TO_TEST_COUNT`` a fit without a verdict (``tested`` false).
    """
    import statsmodels.api as sm

    y = np.round(np.asarray(values, float), _PLACES)
    t = np.arange(len(y)) - float(first_after)
    w = np.ones(len(y)) if weights is None else np.asarray(weights, float)
    good = np.isfinite(y) & np.isfinite(w) & (w > 0)
    before, after = int((good & (t < 0)).sum()), int((good & (t >= 0)).sum())
    needed = int(POINTS_TO_DRAW_COUNT) if fewest is None else fewest
    if min(before, after) < needed:
        return _refused(before, after, needed, len(y))
    post = (t >= 0).astype(float)
    design = np.column_stack([np.ones(len(y)), t, post, t * post])
    model = sm.WLS(y[good], design[good], weights=w[good])
    plain = model.fit()
    hac = model.fit(
        cov_type="HAC",
        cov_kwds={"maxlags": hac_lags, "use_correction": True},
        use_t=True,
    )
    expected = design[:, :2] @ plain.params[:2]
    earlier = good & (t < 0)
    alone = sm.WLS(y[earlier], design[earlier, :2], weights=w[earlier]).fit()
    return Segmented(
        before_count=before,
        after_count=after,
        level=float(plain.params[0]),
        slope=_change(plain, hac, 1),
        slope_alone_se=float(alone.bse[1]),
        level_change=_change(plain, hac, 2),
        slope_change=_change(plain, hac, 3),
        r2=float(plain.rsquared) if np.ptp(y[good]) > 0 else math.nan,
        fitted=design @ plain.params,
        expected=expected,
        mean_gap=float(np.mean((design @ plain.params - expected)[t >= 0])),
        tested=min(before, after) >= int(POINTS_TO_TEST_COUNT),
    )


def step_in_counts(
    counts: ArrayLike, exposure: ArrayLike, after: ArrayLike
) -> tuple[float, float, float, float]:
    """Rate ratio of a step in counts with its interval, scaled by Pearson's phi.

    Gives ratio, low, high (widened by the square root of phi where above 1) and phi;
    four NaN where one side has no events or an exposure is not above 0.
    Source   Lopez Bernal, Cummins and Gasparrini 2017; checked in
             tests/published/review_methods.csv
    """
    import statsmodels.api as sm
    from scipy.special import ndtri

    y, later = np.asarray(counts, float), np.asarray(after, bool)
    told = y[later].sum() > 0 and y[~later].sum() > 0
    if not told or not (np.asarray(exposure, float) > 0).all():
        return math.nan, math.nan, math.nan, math.nan
    design = np.column_stack(
        [np.ones(len(y)), np.asarray(after, float), np.arange(len(y), dtype=float)]
    )
    fit = sm.GLM(
        y, design, family=sm.families.Poisson(), offset=np.log(np.asarray(exposure))
    ).fit()
    phi = float(fit.pearson_chi2 / fit.df_resid)
    z = float(ndtri((1 + float(INTERVAL_COVER_FRAC)) / 2))
    half = z * float(fit.bse[1]) * math.sqrt(max(phi, 1.0))
    b = float(fit.params[1])
    return math.exp(b), math.exp(b - half), math.exp(b + half), phi


def _change(plain, hac, i: int) -> Change:
    cover = 1 - float(INTERVAL_COVER_FRAC)
    ols, robust = plain.conf_int(alpha=cover)[i], hac.conf_int(alpha=cover)[i]
    return Change(
        value=float(plain.params[i]),
        se_ols=float(plain.bse[i]),
        se_hac=float(hac.bse[i]),
        low_ols=float(ols[0]),
        high_ols=float(ols[1]),
        low_hac=float(robust[0]),
        high_hac=float(robust[1]),
    )


def _refused(before: int, after: int, needed: int, n: int) -> Segmented:
    return Segmented(
        before_count=before,
        after_count=after,
        level=math.nan,
        slope=None,
        slope_alone_se=math.nan,
        level_change=None,
        slope_change=None,
        r2=math.nan,
        fitted=np.full(n, np.nan),
        expected=np.full(n, np.nan),
        mean_gap=math.nan,
        tested=False,
        refusal=f"{before} points before and {after} after; {needed} a side are needed",
    )
