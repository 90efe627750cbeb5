"""What every other site the generator may use would have delivered."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from engine.batch import Batch, size
from engine.columns import CHOICE_SITES, code_of, words_of
from engine.evidence import circuit
from engine.physics.bands import logit_band, spread_logit
from engine.physics.chunks import in_chunks
from engine.physics.constants import FITTED, Constants
from engine.physics.estimate import delivered_frac
from engine.physics.setup import DISTANCE, GENERATORS, Setup, setup_of, stacked
from engine.physics.sizes import Sized, sized_of
from engine.physics.split import along_limb, inhaled_only, on_patient_side
from engine.physics.tries import humidity_ratio, other_setups

# Sites where a generator of each kind can be put; common practice, no source.
SITES_OF: dict[str, tuple[str, ...]] = {
    "jet": CHOICE_SITES,
    "vibrating_mesh": CHOICE_SITES,
    "ultrasonic": tuple(site for site in CHOICE_SITES if site != "airway_side"),
    "breath_enhanced_jet": (
        "ventilator_outlet",
        "humidifier_inlet",
        "humidifier_outlet",
        "inspiratory_limb",
    ),
    "pmdi_spacer": ("inspiratory_limb", "wye", "airway_side"),
}
_NEED_HUMIDIFIER = ("humidifier_inlet", "humidifier_outlet")


def alternatives(rows: Batch) -> dict[str, np.ndarray]:
    """The delivered dose at every site the generator may use, and the best of them.

    Returns  n values each: ``delivered_at_<site>_frac`` with low and high, NaN where
             the generator may not use the site; ``best_site`` a code of ``site``, -1
             where nothing can be said; ``best_delivered_frac``; ``best_ratio``, best
             over logged; ``difference_shown`` 1 where the best is better beyond what
             benches differ by, 0 where no difference is shown, -1 unknown;
             ``forgone_frac`` the dose a shown difference amounts to, else 0.
    """
    return in_chunks(_alternatives, rows)


def _alternatives(rows: Batch) -> dict[str, np.ndarray]:
    setup = setup_of(rows)
    n = size(rows)
    index = np.flatnonzero(setup.refusal == 0)
    names = [
        f"delivered_at_{s}{e}" for s in CHOICE_SITES for e in ("", "_low", "_high")
    ]
    names += ["best_delivered", "best", "forgone"]
    out = {f"{name}_frac": np.full(n, np.nan) for name in names}
    out["best_ratio"] = out.pop("best_frac")
    out["best_site"] = np.full(n, -1, np.int8)
    out["difference_shown"] = np.full(n, -1, np.int8)
    if len(index):
        for name, values in compared(setup.pick(index)).items():
            out[name][index] = values
    return out


def compared(setup: Setup, constants: Constants = FITTED) -> dict[str, np.ndarray]:
    """The comparison of sites for treatments that are not refused."""
    sized = sized_of(setup, constants)
    mine = _everywhere(setup, sized, constants)
    lows, highs = mine.lows.copy(), mine.highs.copy()
    best = _best(mine.points)
    shown = _ratio(mine, best) > float(circuit.SHOWN_DIFFERENCE_RATIO)
    for index, other, _ in other_setups(setup):
        theirs = _everywhere(other, sized.pick(index), constants)
        for row in range(len(CHOICE_SITES)):
            np.fmin.at(lows[row], index, theirs.lows[row])
            np.fmax.at(highs[row], index, theirs.highs[row])
        # A difference that one of the values tried turns round is not shown.
        np.logical_and.at(shown, index, _ratio(theirs, best[index]) > 1)
    return _told(setup, mine, best, shown, lows, highs)


@dataclass(frozen=True, eq=False)
class _Everywhere:
    """Delivered at each of CHOICE_SITES, (sites, n), and where the generator sat."""

    points: np.ndarray
    lows: np.ndarray
    highs: np.ndarray
    here: np.ndarray


def _everywhere(setup: Setup, sized: Sized, constants: Constants) -> _Everywhere:
    shape = (len(CHOICE_SITES), len(setup))
    points, lows, highs = (np.full(shape, np.nan) for _ in range(3))
    for row, there, index, inhaled in _inhaled_everywhere(setup, sized, constants):
        frac = delivered_frac(there, inhaled, sized.pick(index), constants)
        points[row, index] = frac
        lows[row, index], highs[row, index] = _band(there, frac, constants)
    return _Everywhere(points, lows, highs, _here(setup, sized, points, constants))


_Site = tuple[int, Setup, np.ndarray, np.ndarray]


def _inhaled_everywhere(
    setup: Setup, sized: Sized, constants: Constants
) -> Iterator[_Site]:
    """For each site: its row, the treatments there, which they are, what is inhaled.

    All sites along the limb are worked out as one long batch.
    """
    moved = []
    for row, site in enumerate(CHOICE_SITES):
        index = np.flatnonzero(_may_use(setup, site))
        moved.append((row, _moved(setup.pick(index), site), index))
    limb = [place for place in moved if CHOICE_SITES[place[0]] != "airway_side"]
    arrivals = along_limb(stacked([there for _, there, _ in limb]), constants)
    start = 0
    for row, there, index in limb:
        part = arrivals.pick(slice(start, start + len(index)))
        start += len(index)
        yield row, there, index, part.airborne_frac(sized.loss_per_s[index])
    row, there, index = moved[CHOICE_SITES.index("airway_side")]
    inhaled = on_patient_side(there, sized.pick(index), constants).inhaled
    yield row, there, index, inhaled


def _here(
    setup: Setup, sized: Sized, points: np.ndarray, constants: Constants
) -> np.ndarray:
    """Delivered where the generator sat, even where it does not belong."""
    here = np.full(len(setup), np.nan)
    for row, site in enumerate(CHOICE_SITES):
        here = np.where(setup.site == code_of("site", site), points[row], here)
    index = np.flatnonzero(np.isnan(here))
    if len(index):
        odd, sizes = setup.pick(index), sized.pick(index)
        inhaled = inhaled_only(odd, sizes, constants)
        here[index] = delivered_frac(odd, inhaled, sizes, constants)
    return here


def _moved(setup: Setup, site: str) -> Setup:
    """The same treatment with its generator at another site."""
    code = np.full(len(setup), code_of("site", site), np.int8)
    stayed = setup.site == code
    usual_cm = float(circuit.DEFAULT_DISTANCE_CM)
    distance_bit = np.int32(1 << DISTANCE)
    return setup.but(
        site=code,
        distance_cm=np.where(stayed, setup.distance_cm, usual_cm),
        patient_side_cm=np.where(stayed, setup.patient_side_cm, 0.0),
        assumed=np.where(stayed, setup.assumed, setup.assumed & ~distance_bit),
    )


def _may_use(setup: Setup, site: str) -> np.ndarray:
    may = np.array([site in SITES_OF[word] for word in GENERATORS])[setup.generator]
    return may & setup.has_chamber if site in _NEED_HUMIDIFIER else may


def _band(
    setup: Setup, frac: np.ndarray, constants: Constants
) -> tuple[np.ndarray, np.ndarray]:
    spread = spread_logit(setup)
    other = np.minimum(frac * humidity_ratio(setup, constants), 1.0)
    return (
        logit_band(np.minimum(frac, other), spread)[0],
        logit_band(np.maximum(frac, other), spread)[1],
    )


def _best(points: np.ndarray) -> np.ndarray:
    """Row of the best site; the generators known all may use one at least."""
    return np.nanargmax(np.where(np.isnan(points), -1.0, points), axis=0)


def _ratio(all_sites: _Everywhere, best: np.ndarray) -> np.ndarray:
    at_best = all_sites.points[best, np.arange(len(best))]
    with np.errstate(divide="ignore"):
        return np.where(all_sites.here > 0, at_best / all_sites.here, np.inf)


def _told(
    setup: Setup,
    mine: _Everywhere,
    best: np.ndarray,
    shown: np.ndarray,
    lows: np.ndarray,
    highs: np.ndarray,
) -> dict[str, np.ndarray]:
    out: dict[str, np.ndarray] = {}
    for row, site in enumerate(CHOICE_SITES):
        out[f"delivered_at_{site}_frac"] = mine.points[row]
        out[f"delivered_at_{site}_low_frac"] = lows[row]
        out[f"delivered_at_{site}_high_frac"] = highs[row]
    ratio = _ratio(mine, best)
    at_best = mine.points[best, np.arange(len(best))]
    site_codes = np.array([words_of("site").index(s) for s in CHOICE_SITES], np.int8)
    out["best_site"] = site_codes[best]
    out["best_delivered_frac"] = at_best
    out["best_ratio"] = np.where(np.isinf(ratio), np.nan, ratio)
    out["difference_shown"] = shown.astype(np.int8)
    out["forgone_frac"] = np.where(shown, np.maximum(at_best - mine.here, 0.0), 0.0)
    return out
