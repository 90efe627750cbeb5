"""How well the estimate agrees with every bench result, fitted or not, good or bad."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from scipy.special import logit
from scipy.stats import binom

from engine.evidence import circuit
from engine.evidence import validation as figures
from engine.physics.balance import estimated, passages
from engine.physics.bench import BenchRow, batch_of, bench_rows, contrasts, pool
from engine.physics.constants import FITTED, Constants
from engine.physics.setup import REFUSALS, setup_of

# outcome of a bench -> the places of the balance that hold it
OUTCOMES: dict[str, tuple[str, ...]] = {
    "delivered": ("delivered",),
    "lung": ("tracheobronchial", "alveolar"),
    "residual": ("generator_residual",),
    "exhaled": ("expiratory_limb", "filter", "sensor_side", "room"),
}
# Refused in use, yet worth showing how far off the estimate would be.
_TOO_SMALL = next(i for i, words in enumerate(REFUSALS) if "infants" in words)


@dataclass(frozen=True, kw_only=True)
class Result:
    """One bench result beside its estimate; NaN where there is none."""

    row: BenchRow
    estimate: float
    low: float
    high: float
    why_not: str

    @property
    def is_inside(self) -> bool | None:
        """Whether the result lies in the band; None where there is no estimate."""
        if np.isnan(self.estimate):
            return None
        return self.low <= self.row.observed_frac <= self.high

    @property
    def error_logit(self) -> float:
        """Estimate less result on the logit scale."""
        return float(logit(self.estimate) - logit(self.row.observed_frac))


@dataclass(frozen=True, kw_only=True)
class Order:
    """A published order and whether the estimate has it: 1 right, -1 wrong, 0 tied."""

    study: str
    kind: str
    what: str
    verdict: int


@dataclass(frozen=True, kw_only=True)
class Agreement:
    """The agreement in a few figures; rows and pairs say how many there were."""

    rows: int
    inside: int
    rms_logit: float
    bias_logit: float
    pairs: int
    right: int
    wrong: int

    @property
    def coverage_frac(self) -> float:
        """Share of the results inside their band."""
        return self.inside / self.rows if self.rows else float("nan")

    @property
    def rank_agreement(self) -> float:
        """Right less wrong orders over all of them; ties count as neither."""
        return (self.right - self.wrong) / self.pairs if self.pairs else float("nan")

    @property
    def sentence(self) -> str:
        """The figures in words."""
        return (
            f"{self.inside} of {self.rows} results inside their band "
            f"({self.coverage_frac:.0%}); root mean square error "
            f"{self.rms_logit:.2f} and mean error {self.bias_logit:+.2f} on the logit "
            f"scale; {self.right} of {self.pairs} orders right, {self.wrong} wrong "
            f"(rank agreement {self.rank_agreement:.2f})"
        )

    @property
    def missed(self) -> tuple[str, ...]:
        """The targets of this project that the figures miss, in words."""
        coverage = float(figures.TARGET_COVERAGE_FRAC)
        order = float(figures.TARGET_ORDER_RATIO)
        error = float(figures.TARGET_ERROR_LOGIT)
        checks = (
            (self.coverage_frac >= coverage, f"{coverage:.0%} inside the band"),
            (self.rank_agreement >= order, f"rank agreement of {order:g}"),
            (self.rms_logit <= error, f"root mean square error of {error:g}"),
        )
        return tuple(words for is_met, words in checks if not is_met)

    @property
    def verdict(self) -> str:
        """Whether the targets are met, and whether the band is honest, in words."""
        wanted = float(circuit.BAND_COVER_FRAC)
        met = f"Missed: {', '.join(self.missed)}." if self.missed else "Targets met."
        expected = wanted * self.rows
        wide = binom.sf(self.inside - 1, self.rows, wanted)
        if wide < float(figures.BAND_TEST_FRAC):
            return (
                f"{met} A band of {wanted:.0%} should hold about {expected:.0f} of "
                f"these {self.rows} results and holds {self.inside}: it is rather wide."
            )
        return met


def validation_table(constants: Constants = FITTED) -> list[dict[str, object]]:
    """Every numeric bench result: observed, estimate, band, inside or not.

    Keys  study, condition, kind (calibration or validation), strict, outcome,
          observed_frac, estimate, low, high, inside (None without an estimate),
          known, why_not, assumed.
    """
    return [
        {
            "study": found.row.study,
            "condition": found.row.label,
            "kind": found.row.kind,
            "strict": found.row.is_strict,
            "outcome": found.row.outcome,
            "observed_frac": found.row.observed_frac,
            "estimate": found.estimate,
            "low": found.low,
            "high": found.high,
            "inside": found.is_inside,
            "known": found.row.known,
            "why_not": found.why_not,
            "assumed": found.row.assumed,
        }
        for found in results(constants)
    ]


def results(
    constants: Constants = FITTED, rows: Sequence[BenchRow] | None = None
) -> list[Result]:
    """Each bench result with its estimate and band."""
    chosen = bench_rows() if rows is None else rows
    return [_result(row, constants) for row in chosen]


def orders(constants: Constants = FITTED) -> list[Order]:
    """Each published order: those printed as such, and those between results."""
    found = results(constants)
    return [*_printed_orders(constants), *_orders_between(found)]


def agreement(found: Iterable[Result], ordered: Iterable[Order] = ()) -> Agreement:
    """The figures over the results that have an estimate, and over the orders."""
    held = [result for result in found if result.is_inside is not None]
    errors = np.array([result.error_logit for result in held])
    verdicts = [order.verdict for order in ordered]
    return Agreement(
        rows=len(held),
        inside=sum(bool(result.is_inside) for result in held),
        rms_logit=float(np.sqrt(np.mean(errors**2))) if held else float("nan"),
        bias_logit=float(np.mean(errors)) if held else float("nan"),
        pairs=len(verdicts),
        right=verdicts.count(1),
        wrong=verdicts.count(-1),
    )


def strict_agreement(constants: Constants = FITTED) -> Agreement:
    """Strict validation rows, and all orders of studies that were not fitted."""
    return agreement(
        [result for result in results(constants) if result.row.is_strict],
        [order for order in orders(constants) if order.kind == "validation"],
    )


def _result(row: BenchRow, constants: Constants) -> Result:
    nothing = dict.fromkeys(("estimate", "low", "high"), float("nan"))
    if row.not_in_model or row.outcome not in OUTCOMES:
        why = row.not_in_model or "not a place of the balance"
        return Result(row=row, why_not=why, **nothing)
    values, refusal = estimates(row.treatments, row.emission, constants)
    if not values:
        return Result(row=row, why_not=refusal, **nothing)
    ends = {
        end: pool(row, _over(values, OUTCOMES[row.outcome], i))
        for i, end in enumerate(("estimate", "low", "high"))
    }
    return Result(row=row, why_not=refusal, **ends)


Values = dict[str, tuple[np.ndarray, np.ndarray, np.ndarray]]


def _over(values: Values, places: Sequence[str], end: int) -> np.ndarray:
    """Estimate, low or high of several places together."""
    return np.sum([values[place][end] for place in places], axis=0)


def estimates(
    treatments: Sequence[Mapping[str, object]], emission: str, constants: Constants
) -> tuple[Values, str]:
    """Estimate, low and high of every place and passage, and why it is refused.

    Nothing is returned where nothing can be worked out; a breath that is only too
    small is worked out all the same, since the answer shows why it is refused.
    """
    setup = setup_of(batch_of(treatments))
    refusal = REFUSALS[int(setup.refusal.max())]
    if np.any((setup.refusal != 0) & (setup.refusal != _TOO_SMALL)):
        return {}, refusal
    if emission:
        setup = setup.but(emission=emission)
    found, bands = estimated(setup, constants)
    points = {**found.places, **passages(found)}
    return {name: (frac, *bands[name]) for name, frac in points.items()}, refusal


def _printed_orders(constants: Constants) -> list[Order]:
    found = []
    for contrast in contrasts():
        values, _ = estimates((contrast.more, contrast.less), "", constants)
        places = OUTCOMES["lung" if contrast.what.startswith("lung") else "delivered"]
        more, less = _over(values, places, 0)
        found.append(
            Order(
                study=contrast.study,
                kind=contrast.kind,
                what=contrast.what,
                verdict=_verdict(more, less),
            )
        )
    return found


def _orders_between(found: Sequence[Result]) -> list[Order]:
    """The orders the figures of one study show beyond their spread."""
    usable = [r for r in found if r.is_inside is not None and _is_compared(r)]
    ordered = []
    for first, second in combinations(usable, 2):
        if first.row.study != second.row.study or not _differ(first.row, second.row):
            continue
        more, less = sorted((first, second), key=lambda r: -r.row.observed_frac)
        ordered.append(
            Order(
                study=first.row.study,
                kind=first.row.kind,
                what=f"{more.row.label} over {less.row.label}",
                verdict=_verdict(more.estimate, less.estimate),
            )
        )
    return ordered


def _is_compared(result: Result) -> bool:
    """Single conditions of what reached the tube tip; ranges have no order."""
    row = result.row
    fitted = row.kind == "calibration" and row.pooled == "point"
    return row.outcome == "delivered" and (row.is_strict or fitted)


def _differ(first: BenchRow, second: BenchRow) -> bool:
    gap = abs(first.observed_frac - second.observed_frac)
    spread = np.nansum([first.spread_frac, second.spread_frac])
    larger = max(first.observed_frac, second.observed_frac)
    smaller = min(first.observed_frac, second.observed_frac)
    apart = larger > smaller * float(figures.OBSERVED_TIE_RATIO)
    return bool(gap > spread and apart)


def _verdict(more: float, less: float) -> int:
    tie = float(figures.ESTIMATED_TIE_RATIO)
    if more > less * tie:
        return 1
    return -1 if less > more * tie else 0
