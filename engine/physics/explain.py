"""One treatment explained: each stage in words, with what went in and what came out.

For understanding a finding. It is no advice for a patient: nothing here says what
should be set.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache

import numpy as np

from engine.batch import COLUMNS, Batch, size
from engine.columns import code_of, shown_unit, words_of
from engine.evidence import calibration, circuit, filter_capture, lung
from engine.evidence import tube as tube_figures
from engine.evidence.shape import Number, Source
from engine.evidence.sources import (
    ICRP_66,
    LIU_AGARWAL_1974,
    OURS,
    PUI_1987,
    SCHWENDIMAN_1975,
)
from engine.physics import setup as gaps
from engine.physics.balance import balance
from engine.physics.constants import FITTED
from engine.physics.estimate import lung_index, takes_humid_factor
from engine.physics.filter import hme_capture_frac, penetration_frac
from engine.physics.published import published_table
from engine.physics.setup import Setup, setup_of
from engine.physics.sizes import LPM_PER_ML_PER_S, filter_ml_per_s
from engine.physics.split import limb_cm, passes_chamber, way_to_wye

Input = tuple[str, str, bool]  # label, value with its unit, whether it was assumed


@dataclass(frozen=True, kw_only=True)
class Stage:
    """One stage of the balance of one treatment.

    places   of FRACTIONS, or ``swept_past_wye``, which is part of the way only
    frac     of the nominal dose in these places together, with low and high; the ends
             of several places are added, so their band is on the wide side
    """

    name: str
    places: tuple[str, ...]
    equation: str
    inputs: tuple[Input, ...]
    sources: tuple[str, ...]
    checked_by: str
    frac: float
    low_frac: float
    high_frac: float


@dataclass(frozen=True, eq=False)
class _Treatment:
    rows: Batch
    setup: Setup
    found: dict[str, np.ndarray]

    def logged(self, column: str, value: np.ndarray, gap: int | None = None) -> Input:
        """A number as a column of the log names it, in the units of the log."""
        label, unit = COLUMNS[column].label, shown_unit(COLUMNS[column].unit)
        assumed = gap is not None and bool(self.setup.lacks(gap)[0])
        return label, f"{float(np.ravel(value)[0]):.3g} {unit}".strip(), assumed

    def word(self, column: str, gap: int | None = None) -> Input:
        """A word as it is logged."""
        code = int(self.rows[column][0])
        word = words_of(column)[code].replace("_", " ") if code >= 0 else "not logged"
        assumed = gap is not None and bool(self.setup.lacks(gap)[0])
        return COLUMNS[column].label, word, assumed

    def total(self, places: tuple[str, ...], end: str = "") -> float:
        """What ended in several places together."""
        return float(sum(self.found[f"{place}{end}_frac"][0] for place in places))


def explain(rows: Batch) -> list[Stage]:
    """The stages of one treatment in the order the aerosol meets them.

    Together their places are those of FRACTIONS, each once, beside ``swept_past_wye``.
    Returns  nothing for a treatment that is refused: ``balance`` says why.
    Raises   ValueError if the batch does not hold exactly one treatment.
    """
    if size(rows) != 1:
        raise ValueError(f"one treatment is explained at a time; got {size(rows)}")
    found = balance(rows)
    if found["refusal"][0]:
        return []
    treatment = _Treatment(rows, setup_of(rows), found)
    return [stage(treatment) for stage in _STAGES]


def _stage(
    treatment: _Treatment,
    name: str,
    places: tuple[str, ...],
    equation: str,
    inputs: list[Input],
    sources: tuple[Source | Number, ...],
    checks: tuple[str, ...],
) -> Stage:
    keys = [s.key if isinstance(s, Source) else s.source.key for s in sources]
    return Stage(
        name=name,
        places=places,
        equation=equation,
        inputs=tuple(inputs),
        sources=tuple(dict.fromkeys(keys)),
        checked_by=_checked_by(checks),
        frac=treatment.total(places),
        low_frac=treatment.total(places, "_low"),
        high_frac=min(treatment.total(places, "_high"), 1.0),
    )


def _share(label: str, frac: float) -> Input:
    """A share that every treatment of the kind has."""
    return label, f"{100 * frac:.3g} %", False


# --- the stages ------------------------------------------------------------------


def _generator(t: _Treatment) -> Stage:
    emitted = FITTED.emitted_frac(t.setup.generator, t.setup.is_synchronised)
    return _stage(
        t,
        "Generator",
        ("generator_residual",),
        "The nominal dose less the share that leaves generators of this kind.",
        [
            t.word("generator"),
            t.word("synchrony", gaps.TIMING),
            _share("Share that leaves the generator", float(emitted[0])),
        ],
        (calibration.JET_EMITTED_FRAC,),
        (),
    )


def _limb(t: _Treatment) -> Stage:
    setup = t.setup
    inputs = [
        t.word("site"),
        t.logged("distance_from_wye_cm", limb_cm(setup), gaps.DISTANCE),
        t.logged("mmad_um", setup.mmad_um, gaps.SIZE),
        t.logged("gsd", setup.gsd, gaps.SIZE),
        t.word("humidification", gaps.HUMIDITY),
        _share("Share that passes Y and connectors", FITTED.wye_frac),
    ]
    if takes_humid_factor(setup)[0]:
        open_ = any(setup.lacks(g)[0] for g in (gaps.HUMIDITY, gaps.HEATER))
        inputs.append(
            ("Humid over dry gas", f"{100 * FITTED.humid_frac:.3g} %", bool(open_))
        )
    if passes_chamber(setup)[0]:
        inputs.append(_share("Share that passes the chamber", FITTED.chamber_frac))
    return _stage(
        t,
        "Way to the Y",
        ("limb",),
        "Each droplet size falls through the tubing for as long as it takes to the Y, "
        "moving or parked; humid gas, chamber, Y and connectors each keep their share.",
        inputs,
        (SCHWENDIMAN_1975, calibration.SETTLING_MULTIPLIER_RATIO),
        ("settling_velocity", "settle_", "lognormal_", "limb_and_tube"),
    )


def _wye(t: _Treatment) -> Stage:
    setup = t.setup
    flow = gaps.LEAK if setup.is_single_limb[0] else gaps.BIAS
    way_ml = sum(float(volume[0]) for volume, _ in way_to_wye(setup, FITTED))
    inputs = [
        t.word("circuit"),
        t.logged("tidal_volume_ml", setup.tidal_ml),
        t.logged("inspiratory_time_s", setup.inspiratory_s, gaps.TI),
        ("Time to breathe out", f"{setup.expiratory_s[0]:.3g} s", False),
        t.logged("bias_flow_lpm", setup.bias_ml_per_s * LPM_PER_ML_PER_S, flow),
        t.logged("generator_gas_lpm", setup.gas_ml_per_s * LPM_PER_ML_PER_S, gaps.GAS),
    ]
    if setup.site[0] != code_of("site", "airway_side"):
        inputs.append(("Gas between generator and Y", f"{way_ml:.0f} mL", False))
    return _stage(
        t,
        "Split at the Y",
        ("swept_past_wye",),
        "What is put out while the patient breathes out waits in the limb or is swept "
        "on by bias flow and driving gas; what passes the Y outside a breath is swept "
        "past the patient.",
        inputs,
        (OURS, calibration.LIMB_TANKS_COUNT),
        ("y_split", _WYE_TABLE),
    )


def _hme(t: _Treatment) -> Stage:
    held = hme_capture_frac(t.setup.is_filter_hme)[0] if t.setup.hme_in_line[0] else 0.0
    return _stage(
        t,
        "HME",
        ("hme",),
        "An HME in line takes the same share of all aerosol that passes through it, on "
        "the way in unless the generator sits behind it, and on the way out.",
        [t.word("hme_state", gaps.HME), _share("Share the HME takes", float(held))],
        (filter_capture.HME_CAPTURE_FRAC, filter_capture.HMEF_CAPTURE_FRAC),
        (),
    )


def _tube(t: _Treatment) -> Stage:
    setup = t.setup
    inspiratory_lpm = setup.tidal_ml / setup.moving_s
    return _stage(
        t,
        "Artificial airway",
        ("tube",),
        "Droplets too heavy for the bend and the wall at this flow stay there, on the "
        "way in and, of what is breathed out again, on the way back.",
        [
            t.word("airway", gaps.AIRWAY),
            t.logged("tube_id_mm", setup.tube_mm, gaps.TUBE),
            (
                "Mean inspiratory flow",
                f"{inspiratory_lpm[0] * LPM_PER_ML_PER_S:.3g} L/min",
                bool(setup.lacks(gaps.TI)[0]),
            ),
            ("Peak over mean flow", f"{setup.peak_ratio[0]:.3g}", False),
        ],
        (PUI_1987, LIU_AGARWAL_1974, tube_figures.TRACHEOSTOMY_OVER_ENDOTRACHEAL_RATIO),
        ("bend_", "vd_plus", "artificial_airway", "ett_share"),
    )


_LUNG_WORDS = ("adult man", "child of 10 years", "child of 5 years")


def _lung(t: _Treatment) -> Stage:
    setup = t.setup
    return _stage(
        t,
        "Lung",
        ("tracheobronchial", "alveolar"),
        "Of what leaves the tube tip, larger airways, smaller airways and alveoli act "
        "as filters one behind the other, in and out; the head is bypassed. A healthy "
        "lung is taken.",
        [
            (
                "Leaves the tube tip",
                f"{100 * t.total(('delivered',)):.3g} % of the nominal dose",
                False,
            ),
            t.logged("inspiratory_pause_s", setup.pause_s),
            ("Gas between Y and tube tip", f"{setup.dead_ml[0]:.0f} mL", False),
            ("Reference lung", _LUNG_WORDS[int(lung_index(setup)[0])], True),
        ],
        (ICRP_66, lung.MODEL_TB_FRAC),
        ("icrp66_", "icrp130_", "intubated_"),
    )


def _expiratory_limb(t: _Treatment) -> Stage:
    length_cm = 0.0 if t.setup.is_single_limb[0] else float(circuit.EXPIRATORY_LIMB_CM)
    return _stage(
        t,
        "Expiratory limb",
        ("unused_past_wye", "expiratory_limb"),
        "What is swept past the Y and what is breathed out settles while the gas of "
        "each breath pushes the content of the limb on.",
        [("Expiratory limb", f"{length_cm:.0f} cm", True)],
        (SCHWENDIMAN_1975, circuit.EXPIRATORY_LIMB_CM),
        ("settle_",),
    )


def _filter(t: _Treatment) -> Stage:
    setup = t.setup
    flow_lpm = filter_ml_per_s(setup) * LPM_PER_ML_PER_S
    through = penetration_frac(setup.filter_kind, flow_lpm)[0][0]
    passed = float(through) if setup.filter_present[0] else 1.0
    return _stage(
        t,
        "Expiratory filter",
        ("filter",),
        "A filter lets through the share measured for its kind, more at higher flow; "
        "where it is not logged the point takes it as absent.",
        [
            t.word("expiratory_filter", gaps.FILTER),
            t.word("filter_kind", gaps.FILTER_KIND),
            _share("Share that passes the filter position", passed),
        ],
        (
            filter_capture.PLEATED_PENETRATION_FRAC,
            filter_capture.PENETRATION_FLOW_COEF,
            filter_capture.ANY_FILTER_PENETRATION_FRAC,
        ),
        (),
    )


def _past_filter(t: _Treatment) -> Stage:
    return _stage(
        t,
        "Sensors and room",
        ("sensor_side", "room"),
        "Of what passes the filter position a share stays on flow sensor and valve; "
        "the rest reaches the room. No published split was found.",
        [
            _share(
                "Share held by sensor and valve", float(filter_capture.SENSOR_HELD_FRAC)
            ),
        ],
        (filter_capture.SENSOR_HELD_FRAC,),
        (),
    )


_STAGES: tuple[Callable[[_Treatment], Stage], ...] = (
    _generator,
    _limb,
    _wye,
    _hme,
    _tube,
    _lung,
    _expiratory_limb,
    _filter,
    _past_filter,
)

# --- what each stage is checked by -----------------------------------------------

_WYE_TABLE = "wye_values.csv"


@cache
def _checked_by(checks: tuple[str, ...]) -> str:
    """How many values from outside the stage is held to."""
    whole = "bench results for the dose delivered and the dose in the lung"
    count = sum(
        row["quantity"].startswith(tuple(c for c in checks if c != _WYE_TABLE))
        for row in published_table("physics_values.csv")
        if checks
    )
    count += len(published_table(_WYE_TABLE)) if _WYE_TABLE in checks else 0
    if count == 0:
        return f"no value of its own; only {whole}"
    return f"{count} published or separately computed values, and {whole}"
