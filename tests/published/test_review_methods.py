"""Every printed value of review_methods.csv against the engine."""

import csv
import io
import math
from decimal import Decimal
from pathlib import Path

import numpy as np
import pytest

from engine.stats.agreement import agreement
from engine.stats.charts import (
    g_limits,
    laney_p_limits,
    p_limits,
    run_false_alarm,
    run_limits,
    t_limits,
    u_limits,
    xmr_limits,
)
from engine.stats.cusum import cusum_run_length, event_weights, ewma, tabular_cusum
from engine.stats.funnel import beta_binomial, beta_by_moments, shrunken
from engine.stats.rates import (
    clopper_pearson,
    corrected_share,
    may_be_shown,
    newcombe,
    poisson_exact,
    poisson_ratio,
    wilson,
)
from engine.stats.sampling import (
    charts_to_find_one,
    plan_accepts,
    predictive,
    stratified_mean,
)
from engine.stats.series import segmented, step_in_counts

HERE = Path(__file__).parent


def rows_of(name):
    lines = (HERE / name).read_text("utf-8").splitlines()
    body = "\n".join(line for line in lines if not line.startswith("#"))
    return list(csv.DictReader(io.StringIO(body)))


SERIES = {
    row["series"]: np.array(row["values"].split(), float)
    for row in rows_of("review_methods_series.csv")
}
PRINTED = rows_of("review_methods.csv")


def ends(pair):
    return {"low": float(pair[0]), "high": float(pair[1])}


def one(limits):
    return {
        "centre": limits.centre[0],
        "low": limits.low[0],
        "high": limits.high[0],
        "outside_count": limits.outside.sum(),
        **{f"high_{i + 1}": value for i, value in enumerate(limits.high)},
    }


def flow_rate():
    done = xmr_limits(SERIES["flow_rate_x"])
    return {**one(done.limits), "moving_range": done.moving_range}


def moving():
    done = ewma(SERIES["ewma_x"], 0.3, 50, 2.0539, asymptotic=True)
    assert not done.outside.any()
    miss = np.abs(done.mean - SERIES["ewma_printed"]).max()
    return {"largest_miss": miss, "high": done.high[0], "low": done.low[0]}


def summed():
    done = tabular_cusum(SERIES["cusum_x"], 325, 0.3175, 4.1959)
    return {
        "largest_miss_up": np.abs(done.up - SERIES["cusum_up"]).max(),
        "largest_miss_down": np.abs(done.down - SERIES["cusum_down"]).max(),
        "first_signal": done.first_signal + 1,
    }


def wafers():
    done = p_limits(SERIES["wafers_x"], np.full(30, 50))
    places = np.flatnonzero(done.outside) + 1
    return {**one(done), "first_outside": places[0], "last_outside": places[-1]}


def attendance():
    x, n = SERIES["attendance_x"], SERIES["attendance_n"]
    done = laney_p_limits(x, n)
    assert done.over_dispersion_p < 1e-6
    return {
        **one(done.limits),
        "sigma_z": done.sigma_z,
        "p_outside": p_limits(x, n).outside.sum(),
        "laney_outside": done.limits.outside.sum(),
        "xmr_high": xmr_limits(x / n).limits.high[0],
    }


def deliveries():
    gaps = SERIES["deliveries_gaps"]
    plain = g_limits(gaps, exact=False)
    return {
        "mean": plain.mean,
        "first_integer_signal": math.floor(plain.high) + 1,
        "exact_high": g_limits(gaps).high,
    }


def screened():
    plain = xmr_limits(SERIES["screened_x"])
    once = xmr_limits(SERIES["screened_x"], screened=True)
    return {
        "mean": plain.limits.centre[0],
        "amr": plain.moving_range,
        "mr_limit": plain.moving_range_limit,
        "amr_screened": once.moving_range,
    }


def weights():
    event, none = event_weights(0.007, 2.0)
    mean = 0.007 * math.exp(event) + 0.993 * math.exp(none)
    return {"event": event, "no_event": none, "mean_exp": mean}


def nickel():
    return {"rate": 137 / 24.19893, **ends(poisson_exact(137, 24.19893))}


def nchs(count):
    low, high = poisson_exact(count)
    return {"relative_width": float(high - low) / count}


def shown_from():
    return {"passes_from": next(c for c in range(1, 30) if may_be_shown(c, 99, 10))}


def tumours():
    y, n = SERIES["tumours_y"], SERIES["tumours_n"]
    rates = y[:70] / n[:70]
    alpha, beta = beta_by_moments(rates)
    after = alpha + 4, beta + 10
    total = sum(after)
    done = shrunken(y, n)
    return {
        "mean": rates.mean(),
        "sd": rates.std(ddof=1),
        "alpha": alpha,
        "beta": beta,
        "post_mean": after[0] / total,
        "post_sd": math.sqrt(after[0] * after[1] / total**2 / (total + 1)),
        "ml_alpha": done.alpha,
        "ml_beta": done.beta,
        "shrunk_0_20": done.rate[(y == 0) & (n == 20)][0],
        "shrunk_4_14": done.rate[-1],
        "shrunk_16_52": done.rate[(y == 16) & (n == 52)][0],
    }


def seeds():
    alpha, beta, likelihood = beta_binomial(SERIES["seeds_y"], SERIES["seeds_n"])
    return {
        "logit_mu": math.log(alpha / beta),
        "phi": 1 / (alpha + beta + 1),
        "log_likelihood": likelihood,
    }


def table(name):
    values = SERIES[name]
    size = math.isqrt(len(values))
    return vars(agreement(values.reshape(size, size), 0))


def liver():
    return vars(predictive(263, 263, 231, 81, 81, 27))


def schools():
    strata = SERIES["schools"].reshape(3, 4)
    return vars(stratified_mean(*strata.T))


def cigarettes():
    done = segmented(SERIES["cigarettes_y"], 1989 - 1970)
    return {
        "level0": done.level,
        "pre_slope": done.slope.value,
        "pre_slope_se": done.slope_alone_se,
        "level_change": done.level_change.value,
        "level_se_ols": done.level_change.se_ols,
        "level_se_nw1": done.level_change.se_hac,
        "slope_change": done.slope_change.value,
        "r2": done.r2,
        "mean_gap": done.mean_gap,
    }


def sicily():
    ratio, low, high, phi = step_in_counts(
        SERIES["sicily_aces"], SERIES["sicily_stdpop"], SERIES["sicily_smokban"]
    )
    plain = [math.log(v / ratio) / math.sqrt(phi) for v in (low, high)]
    return {
        "ratio": ratio,
        "phi": phi,
        "plain_low": ratio * math.exp(plain[0]),
        "plain_high": ratio * math.exp(plain[1]),
    }


WORKED = {
    "flow_rate": flow_rate,
    "ewma": moving,
    "cusum": summed,
    "wafers": wafers,
    "wafer_defects": lambda: one(u_limits(np.full(25, 16), np.ones(25))),
    "battery": lambda: one(p_limits(SERIES["battery_x"], SERIES["battery_n"])),
    "attendance": attendance,
    "deliveries": deliveries,
    "deliveries_days": lambda: vars(t_limits(SERIES["deliveries_days"])),
    "screened": screened,
    "event_weights": weights,
    "difference": lambda: ends(newcombe(56, 70, 48, 80)[1:]),
    "nickel": nickel,
    "fredericia": lambda: vars(poisson_ratio(11, 800, 21, 3011)),
    "rogan_gladen": lambda: {"share": corrected_share(45, 150, 0.96, 0.89)},
    "nchs": shown_from,
    "tumours": tumours,
    "seeds": seeds,
    "liver_scan": liver,
    "schools": schools,
    "cigarettes": cigarettes,
    "sicily": sicily,
}


def by_number(example):
    name, *numbers = example.split("_")
    if name == "runs":
        longest, fewest = run_limits(int(numbers[0]))
        return {"longest_run": longest, "crossings": fewest}
    if name == "false":
        return {"own_median": run_false_alarm(int(numbers[0]), own_median=True)}
    if name == "run":
        return {"points": cusum_run_length(0.5, 4, float(numbers[-1]))}
    if name == "wilson":
        return ends(wilson(*map(int, numbers)))
    if name == "exact":
        return ends(clopper_pearson(*map(int, numbers)))
    if name == "garwood":
        return ends(poisson_exact(int(numbers[0])))
    if name == "nchs":
        return nchs(int(numbers[0]))
    if name == "discovery":
        total = None if numbers[0] == "endless" else int(numbers[0])
        return {"charts": charts_to_find_one(total, int(numbers[1]))}
    if name == "plan":
        return {"accepts": float(plan_accepts(52, 3, float(numbers[0])))}
    return table(example)


def worked(example):
    return WORKED[example]() if example in WORKED else by_number(example)


def tolerance(row):
    if row["tolerance"]:
        assert row["why"], "a wider tolerance needs its reason"
        return float(row["tolerance"])
    places = Decimal(row["printed"]).as_tuple().exponent
    return 0.5 * 10.0**places * (1 + 1e-9)


@pytest.mark.parametrize(
    "row", PRINTED, ids=lambda row: f"{row['example']} {row['quantity']}"
)
def test_the_engine_gives_the_printed_value(row):
    got = float(worked(row["example"])[row["quantity"]])
    assert abs(got - float(row["printed"])) <= tolerance(row), got


def test_a_share_below_nothing_is_refused_not_cut():
    """R epiR epi.prev, example 2 (read): 6 of 151 with Sp .927 comes out negative."""
    assert corrected_share(6, 151, 0.964, 0.927) is None
