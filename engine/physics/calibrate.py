"""Fits the free constants to the calibration studies and writes them down.

    python -m engine.physics.calibrate           print the fit
    python -m engine.physics.calibrate --write   and put it into engine/evidence

Only rows of kind *calibration* are read; a validation row never enters. Each study may
lie off by its own amount (what its bench did not report), drawn from a distribution of
known width; the constants are what is left. The spread of single results comes from
leaving out one study at a time.
"""

from __future__ import annotations

import sys
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from scipy.optimize import least_squares
from scipy.special import expit, logit, ndtri

from engine import evidence
from engine.evidence import fit
from engine.evidence.shape import Number
from engine.physics.air import coefficients
from engine.physics.bench import BenchRow, batch_of, bench_rows
from engine.physics.constants import FITTED, Constants
from engine.physics.estimate import estimate
from engine.physics.setup import Setup, setup_of, stacked

# field of Constants -> (name in the evidence, what it is, what was expected)
_LOG = {"settling_ratio"}  # fitted on the log scale, the others as logits
FREE: dict[str, tuple[str, str, Number]] = {
    "settling_ratio": (
        "SETTLING_MULTIPLIER_RATIO",
        "settling in the limb over well-mixed settling",
        fit.SETTLING_RATIO_PRIOR_COEF,
    ),
    "humid_frac": (
        "HUMID_SURVIVAL_FRAC",
        "dose through an actively humidified circuit over dry gas",
        fit.HUMID_FRAC_PRIOR_COEF,
    ),
    "wye_frac": (
        "WYE_SURVIVAL_FRAC",
        "aerosol that passes Y and connectors",
        fit.WYE_FRAC_PRIOR_COEF,
    ),
    "chamber_frac": (
        "CHAMBER_SURVIVAL_FRAC",
        "aerosol that passes the humidifier chamber",
        fit.CHAMBER_FRAC_PRIOR_COEF,
    ),
    "vibrating_mesh_frac": (
        "MESH_EMITTED_FRAC",
        "nominal dose leaving the generator as aerosol",
        fit.VIBRATING_MESH_FRAC_PRIOR_COEF,
    ),
    "ultrasonic_frac": (
        "ULTRASONIC_EMITTED_FRAC",
        "nominal dose leaving the generator as aerosol",
        fit.ULTRASONIC_FRAC_PRIOR_COEF,
    ),
    "pmdi_spacer_frac": (
        "INHALER_EMITTED_FRAC",
        "label dose leaving the spacer as aerosol",
        fit.PMDI_SPACER_FRAC_PRIOR_COEF,
    ),
    "jet_frac": (
        "JET_EMITTED_FRAC",
        "nominal dose leaving the generator as aerosol",
        fit.JET_FRAC_PRIOR_COEF,
    ),
    "pulsed_jet_frac": (
        "PULSED_JET_EMITTED_FRAC",
        "nominal dose leaving a jet driven in inspiration only",
        fit.PULSED_JET_FRAC_PRIOR_COEF,
    ),
    "breath_enhanced_jet_frac": (
        "BREATH_ENHANCED_EMITTED_FRAC",
        "nominal dose leaving the generator as aerosol",
        fit.BREATH_ENHANCED_JET_FRAC_PRIOR_COEF,
    ),
}


@dataclass(frozen=True, eq=False)
class Data:
    """The calibration rows as the fit needs them."""

    setup: Setup
    emissions: np.ndarray
    study: np.ndarray
    observed_logit: np.ndarray
    error_logit: np.ndarray


@dataclass(frozen=True, eq=False)
class Fit:
    """Constants, their spread on the fitted scale, and each study's own amount."""

    constants: Constants
    middle: np.ndarray
    spread: np.ndarray
    offsets: dict[str, float]
    cost: float


def calibration_rows() -> list[BenchRow]:
    """The rows that may be fitted: single conditions of what reached the tube tip."""
    return [
        row
        for row in bench_rows()
        if row.kind == "calibration"
        and row.outcome == "delivered"
        and row.pooled in {"point", "middle of a range"}
        and not row.not_in_model
    ]


def data_of(rows: Sequence[BenchRow]) -> Data:
    """Rows with their observed values and errors on the logit scale."""
    observed = np.array([row.observed_frac for row in rows])
    printed = np.nan_to_num(np.array([row.spread_frac for row in rows]), nan=0.0)
    return Data(
        setup=stacked([setup_of(batch_of(row.treatments)) for row in rows]),
        emissions=np.array([row.emission for row in rows]),
        study=np.array([row.study for row in rows]),
        observed_logit=logit(observed),
        error_logit=np.hypot(
            float(fit.WITHIN_ERROR_LOGIT), printed / (observed * (1 - observed))
        ),
    )


def predicted_logit(data: Data, constants: Constants) -> np.ndarray:
    """What the model gives for each row, logit scale."""
    found = np.empty(len(data.study))
    for emission in np.unique(data.emissions):
        index = np.flatnonzero(data.emissions == emission)
        setup = data.setup.pick(index)
        if emission:
            setup = setup.but(emission=str(emission))
        found[index] = logit(estimate(setup, constants).delivered)
    return found


def fitted(data: Data, start: Constants = FITTED) -> Fit:
    """The constants that fit the rows best, priors and study amounts included."""
    names = list(FREE)
    studies = sorted(set(data.study))
    medians, widths = _priors(names)
    which = np.array([studies.index(study) for study in data.study])

    def residuals(x: np.ndarray) -> np.ndarray:
        constants = _constants(names, x[: len(names)], start)
        offsets = x[len(names) :]
        misfit = data.observed_logit - predicted_logit(data, constants) - offsets[which]
        return np.concatenate(
            [
                misfit / data.error_logit,
                (x[: len(names)] - medians) / widths,
                offsets / float(fit.BETWEEN_STUDY_LOGIT),
            ]
        )

    first = np.concatenate([medians, np.zeros(len(studies))])
    done = least_squares(residuals, first, diff_step=1e-3, x_scale=1.0)
    covariance = np.linalg.inv(done.jac.T @ done.jac)
    n = len(names)
    return Fit(
        constants=_constants(names, done.x[:n], start),
        middle=done.x[:n],
        spread=np.sqrt(np.diag(covariance))[:n],
        offsets=dict(zip(studies, done.x[n:], strict=True)),
        cost=float(done.cost * 2),
    )


def left_out_errors(rows: Sequence[BenchRow]) -> dict[str, np.ndarray]:
    """Errors of each study's rows when it is left out of the fit, logit scale."""
    errors = {}
    for study in sorted({row.study for row in rows}):
        rest = fitted(data_of([row for row in rows if row.study != study]))
        own = data_of([row for row in rows if row.study == study])
        errors[study] = predicted_logit(own, rest.constants) - own.observed_logit
    return errors


def spread_of(errors: dict[str, np.ndarray]) -> float:
    """Root mean square error with every study counting alike."""
    return float(np.sqrt(np.mean([np.mean(e**2) for e in errors.values()])))


def within_of(data: Data, found: Fit) -> float:
    """Spread of the conditions inside the studies, their own amounts taken out."""
    offsets = np.array([found.offsets[study] for study in data.study])
    left = data.observed_logit - predicted_logit(data, found.constants) - offsets
    return float(np.sqrt(np.mean(left**2)))


def tanks_profile(data: Data, counts: Sequence[float]) -> dict[float, float]:
    """Cost of the best fit for each spread of gas in the limb."""
    return {n: fitted(data, replace(FITTED, tanks_count=float(n))).cost for n in counts}


def _priors(names: Sequence[str]) -> tuple[np.ndarray, np.ndarray]:
    pairs = [coefficients(FREE[name][2]) for name in names]
    medians = [_scaled(name, pair[0]) for name, pair in zip(names, pairs, strict=True)]
    return np.array(medians), np.array([pair[1] for pair in pairs])


def _scaled(name: str, value: float) -> float:
    return float(np.log(value) if name in _LOG else logit(value))


def _plain(name: str, value: float) -> float:
    return float(np.exp(value) if name in _LOG else expit(value))


def _constants(names: Sequence[str], x: np.ndarray, start: Constants) -> Constants:
    values = {name: _plain(name, v) for name, v in zip(names, x, strict=True)}
    return replace(start, **values)


# --- writing it down -------------------------------------------------------------

_HEAD = '''"""Free constants of the balance, fitted once to the calibration studies.

Written by ``python -m engine.physics.calibrate --write``; not by hand. Low and high
hold 80 % of what the fit leaves open.
"""

from engine.evidence.shape import Number
from engine.evidence.sources import CALIBRATION_FIT
'''


def evidence_text(found: Fit, spread: float, within: float) -> str:
    """The evidence file with this fit in it."""
    z = float(ndtri(0.9))
    parts = [_HEAD]
    parts.append(
        _number(
            "LIMB_TANKS_COUNT",
            found.constants.tanks_count,
            "count",
            "stirred tanks in series that spread gas like the limb; set, not fitted",
            note="4 to 16 fit about as well",
        )
    )
    for (field, (name, where, _)), middle, width in zip(
        FREE.items(), found.middle, found.spread, strict=True
    ):
        parts.append(
            _number(
                name,
                _plain(field, middle),
                name.rsplit("_", 1)[1].lower(),
                where,
                low=_plain(field, middle - z * width),
                high=_plain(field, middle + z * width),
            )
        )
    parts.append(
        _number(
            "DELIVERED_SPREAD_LOGIT",
            spread,
            "logit",
            "spread of single results about the estimate, their study left out",
        )
    )
    parts.append(
        _number(
            "WITHIN_STUDY_LOGIT",
            within,
            "logit",
            "spread of conditions inside a study about the estimate",
        )
    )
    return "".join(parts)


def _number(
    name: str,
    value: float,
    unit: str,
    where: str,
    low: float | None = None,
    high: float | None = None,
    note: str = "",
) -> str:
    lines = [f"{name} = Number(", f"    value={float(f'{value:.4g}')},"]
    if low is not None and high is not None:
        lines += [f"    low={low:.3g},", f"    high={high:.3g},"]
    lines += [
        f'    unit="{unit}",',
        "    source=CALIBRATION_FIT,",
        f'    where="{where}",',
        '    known="fitted",',
    ]
    if note:
        lines.append(f'    note="{note}",')
    return "\n".join([*lines, ")\n"])


def main(arguments: Sequence[str]) -> None:
    rows = calibration_rows()
    data = data_of(rows)
    found = fitted(data)
    errors = left_out_errors(rows)
    spread, within = spread_of(errors), within_of(data, found)
    profile = tanks_profile(data, (2, 4, 8, 16, 32))
    print(f"{len(rows)} rows of {len(set(data.study))} studies, cost {found.cost:.1f}")
    for field, middle, width in zip(FREE, found.middle, found.spread, strict=True):
        ends = [_plain(field, middle + z * width) for z in (-1.2816, 0.0, 1.2816)]
        print(f"  {field:26s} {ends[1]:.3f}  ({ends[0]:.3f} to {ends[2]:.3f})")
    for study, offset in found.offsets.items():
        print(
            f"  {study:14s} lies {offset:+.2f} off; left out, errors "
            f"{np.array2string(errors[study], precision=2)}"
        )
    print(f"  single results {spread:.2f}, inside a study {within:.2f} (logit)")
    costs = ", ".join(f"{n:g}: {cost:.1f}" for n, cost in profile.items())
    print(f"  cost by number of tanks: {costs}")
    if "--write" in arguments:
        target = Path(evidence.__file__).parent / "calibration.py"
        target.write_text(evidence_text(found, spread, within), "utf-8")
        print(f"written to {target.name}")


if __name__ == "__main__":
    main(sys.argv[1:])
