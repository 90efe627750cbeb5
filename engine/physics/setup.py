"""From logged columns to what the physics needs: every gap filled is written down.

A ``Setup`` holds plain arrays in the units of the physics. Where the log is silent a
stated value is taken and a bit is set in ``assumed``; where nothing can be said, the
treatment gets a refusal. Nothing here is a judgement.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np

from engine.batch import COLUMNS, Batch, size
from engine.columns import code_of, words_of
from engine.evidence import circuit, device, tube
from engine.evidence.shape import Number
from engine.units import ML_PER_L, MM_PER_CM, S_PER_MIN

GENERATORS = words_of("generator")[:-1]

REFUSALS: tuple[str, ...] = (
    "",
    "the generator is not logged",
    "the site of the generator is not logged",
    "the kind of circuit is not logged",
    "the tidal volume is not logged",
    "a logged value is not possible",
    "the inspiratory time leaves no time to breathe out at the rate",
    "the breath is too small: infants are outside the bench work this rests on",
    "the tidal volume does not exceed the dead space of tube and connectors",
    "the site does not exist on a single-limb circuit",
    "the inspiratory pause fills the inspiratory time",
    "the breath would need more flow than a ventilator gives",
    "the rate is beyond tidal breathing: oscillation is outside the bench work",
)

# (plain words, what it may move on the logit scale; None where it is tried out)
_ASSUMED: tuple[tuple[str, Number | None], ...] = (
    ("droplet size not logged: usual for the generator", circuit.ASSUMED_SIZE_LOGIT),
    (
        "inspiratory time not logged: a usual share of the cycle",
        circuit.ASSUMED_INSPIRATORY_TIME_LOGIT,
    ),
    ("respiratory rate not logged: a usual adult rate", circuit.ASSUMED_RATE_LOGIT),
    ("bias flow not logged: 0, 2 and 5 L/min tried", None),
    ("driving gas not logged: usual flow of a jet", circuit.ASSUMED_GAS_LOGIT),
    ("distance from the Y not logged: 15 cm", circuit.ASSUMED_DISTANCE_LOGIT),
    ("tube size not logged: usual size for the breath", circuit.ASSUMED_TUBE_LOGIT),
    ("kind of airway not logged: endotracheal tube", circuit.ASSUMED_TUBE_LOGIT),
    ("humidification not logged: humid and dry gas tried", None),
    ("heated humidifier on or off not logged: both tried", None),
    ("heated humidifier off: gas does not dry at once, both tried", None),
    ("HME in line or not is not logged: both tried", None),
    ("expiratory filter not logged: absent and present tried", None),
    ("kind of filter not logged: all kinds tried", None),
    ("output timing not logged: usual for the generator", circuit.ASSUMED_TIMING_LOGIT),
    (
        "breaths the patient adds are not in the estimate",
        circuit.ASSUMED_PATTERN_LOGIT,
    ),
    ("leak flow not logged: 10, 25 and 40 L/min tried", None),
)
ASSUMPTIONS: tuple[str, ...] = tuple(words for words, _ in _ASSUMED)
(
    SIZE,
    TI,
    RATE,
    BIAS,
    GAS,
    DISTANCE,
    TUBE,
    AIRWAY,
    HUMIDITY,
    HEATER,
    DRYING,
    HME,
    FILTER,
    FILTER_KIND,
    TIMING,
    PATTERN,
    LEAK,
) = range(len(_ASSUMED))


@dataclass(frozen=True, eq=False, kw_only=True)
class Setup:
    """n treatments as the physics reads them; each field an array of n.

    Where a thing is tried both ways (humidity, HME, filter) the field holds the one
    the point estimate takes, and ``assumed`` says that the other was tried too.
    """

    generator: np.ndarray  # code
    site: np.ndarray  # code
    is_single_limb: np.ndarray
    is_synchronised: np.ndarray
    is_puff: np.ndarray
    mmad_um: np.ndarray
    gsd: np.ndarray
    tidal_ml: np.ndarray
    inspiratory_s: np.ndarray
    expiratory_s: np.ndarray
    pause_s: np.ndarray
    peak_ratio: np.ndarray  # peak over mean inspiratory flow, 1 to 2
    bias_ml_per_s: np.ndarray
    gas_ml_per_s: np.ndarray  # driving gas while the patient breathes out
    limb_mm: np.ndarray
    distance_cm: np.ndarray  # inspiratory limb to the Y
    patient_side_cm: np.ndarray  # tubing between the Y and a generator past it
    has_chamber: np.ndarray
    is_humid: np.ndarray
    hme_in_line: np.ndarray
    is_filter_hme: np.ndarray
    is_tracheostomy: np.ndarray
    tube_mm: np.ndarray
    tube_cm: np.ndarray
    dead_ml: np.ndarray  # Y, or an HME's far side, to tube tip
    filter_present: np.ndarray  # 1, 0; worst case 0 where unknown
    filter_kind: np.ndarray  # code, -1 unknown
    refusal: np.ndarray  # int8, into REFUSALS
    assumed: np.ndarray  # int32, bits into ASSUMPTIONS
    emission: str | None = None  # set only where a bench forced one

    def __len__(self) -> int:
        return len(self.refusal)

    @property
    def moving_s(self) -> np.ndarray:
        """Inspiratory time in which gas moves: without the pause."""
        return self.inspiratory_s - self.pause_s

    def pick(self, index: np.ndarray | slice) -> Setup:
        """The same setup for some of the treatments."""
        chosen = {
            f.name: getattr(self, f.name)[index]
            for f in fields(self)
            if f.name != "emission"
        }
        return Setup(**chosen, emission=self.emission)

    def but(self, **changed: Any) -> Setup:
        """The same setup with some fields changed."""
        return replace(self, **changed)

    def lacks(self, assumption: int) -> np.ndarray:
        """True where this assumption had to be made."""
        return (self.assumed >> assumption & 1).astype(bool)


def stacked(setups: list[Setup]) -> Setup:
    """Several setups as one, one after the other."""
    names = [f.name for f in fields(Setup) if f.name != "emission"]
    return Setup(
        **{name: np.concatenate([getattr(s, name) for s in setups]) for name in names},
        emission=setups[0].emission,
    )


# Impossible values are worked through like any other: their row is refused after all.
@np.errstate(over="ignore", divide="ignore", invalid="ignore")
def setup_of(rows: Batch) -> Setup:
    """What the physics needs of each treatment, with assumptions and refusals."""
    gaps = _Gaps(size(rows))
    generator = rows["generator"]
    single = rows["circuit"] == code_of("circuit", "single_limb")
    mmad_um, gsd = _droplets(rows, gaps)
    inspiratory_s, expiratory_s = _timing(rows, gaps)
    pause_s = _pause(rows, inspiratory_s)
    synchronised = _synchronised(rows, gaps)
    tracheostomy, tube_mm, tube_cm = _airway(rows, gaps)
    limb_mm = np.where(
        is_child(tube_mm), float(circuit.CHILD_LIMB_MM), float(circuit.LIMB_MM)
    )
    in_line = _hme(rows, gaps)
    humid, chamber = _humidity(rows, gaps)
    present, kind = _filter(rows, gaps)
    tidal_ml = rows["tidal_volume_ml"]
    gaps.note(PATTERN, _patient_adds(rows))
    setup = Setup(
        generator=generator,
        site=rows["site"],
        is_single_limb=single,
        is_synchronised=synchronised,
        is_puff=generator == code_of("generator", "pmdi_spacer"),
        mmad_um=mmad_um,
        gsd=gsd,
        tidal_ml=tidal_ml,
        inspiratory_s=inspiratory_s,
        expiratory_s=expiratory_s,
        pause_s=pause_s,
        peak_ratio=_peak_ratio(rows, inspiratory_s - pause_s),
        bias_ml_per_s=_bias(rows, single, gaps),
        gas_ml_per_s=_gas(rows, synchronised, gaps),
        limb_mm=limb_mm,
        distance_cm=_distance(rows, gaps),
        patient_side_cm=_patient_side(rows),
        has_chamber=chamber,
        is_humid=humid,
        hme_in_line=in_line,
        is_filter_hme=rows["humidification"] != code_of("humidification", "hme"),
        is_tracheostomy=tracheostomy,
        tube_mm=tube_mm,
        tube_cm=tube_cm,
        dead_ml=_bore_ml(tube_mm, tube_cm)
        + _fittings_ml(tube_mm, in_line)
        + _patient_side(rows) * ml_per_cm(limb_mm),
        filter_present=present,
        filter_kind=kind,
        refusal=np.zeros(size(rows), np.int8),
        assumed=gaps.bits,
    )
    return setup.but(refusal=_refusal(rows, setup))


class _Gaps:
    """Collects, bit by bit, what had to be assumed for each treatment."""

    def __init__(self, n: int) -> None:
        self.bits = np.zeros(n, np.int32)

    def note(self, assumption: int, where: np.ndarray) -> None:
        self.bits |= np.where(where, 1 << assumption, 0).astype(np.int32)

    def filled(
        self, values: np.ndarray, default: np.ndarray | float, assumption: int
    ) -> np.ndarray:
        missing = np.isnan(values)
        self.note(assumption, missing)
        return np.where(missing, default, values)


_SIZES = {
    "jet": (device.JET_MMAD_UM, device.JET_GSD_RATIO),
    "breath_enhanced_jet": (
        device.BREATH_ENHANCED_MMAD_UM,
        device.BREATH_ENHANCED_GSD_RATIO,
    ),
    "vibrating_mesh": (device.MESH_MMAD_UM, device.MESH_GSD_RATIO),
    "ultrasonic": (device.ULTRASONIC_MMAD_UM, device.ULTRASONIC_GSD_RATIO),
    "pmdi_spacer": (device.INHALER_MMAD_UM, device.INHALER_GSD_RATIO),
}


def by_generator(codes: np.ndarray, values: dict[str, Number]) -> np.ndarray:
    """The value of each treatment's generator; NaN where it is unknown."""
    table = [float(values[word]) for word in GENERATORS]
    return np.array([*table, np.nan])[codes]


def _droplets(rows: Batch, gaps: _Gaps) -> tuple[np.ndarray, np.ndarray]:
    usual_um = by_generator(rows["generator"], {k: v[0] for k, v in _SIZES.items()})
    usual_gsd = by_generator(rows["generator"], {k: v[1] for k, v in _SIZES.items()})
    mmad_um = gaps.filled(rows["mmad_um"], usual_um, SIZE)
    gaps.note(SIZE, np.isnan(rows["gsd"]))
    return mmad_um, np.where(np.isnan(rows["gsd"]), usual_gsd, rows["gsd"])


def _timing(rows: Batch, gaps: _Gaps) -> tuple[np.ndarray, np.ndarray]:
    rate = gaps.filled(
        rows["respiratory_rate_bpm"], float(circuit.DEFAULT_RATE_BPM), RATE
    )
    with np.errstate(divide="ignore"):
        cycle_s = S_PER_MIN / rate
    inspiratory_s = gaps.filled(
        rows["inspiratory_time_s"], cycle_s * float(circuit.DEFAULT_DUTY_FRAC), TI
    )
    return inspiratory_s, cycle_s - inspiratory_s


def _pause(rows: Batch, inspiratory_s: np.ndarray) -> np.ndarray:
    """The logged pause is part of the inspiratory time; it never fills it."""
    pause_s = np.nan_to_num(rows["inspiratory_pause_s"], nan=0.0)
    return np.where(pause_s < inspiratory_s, pause_s, 0.0)


def _peak_ratio(rows: Batch, moving_s: np.ndarray) -> np.ndarray:
    """Peak over mean flow of a falling flow; constant flow where none is logged."""
    peak_ml_per_s = rows["peak_inspiratory_flow_lpm"] * (ML_PER_L / S_PER_MIN)
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = peak_ml_per_s * moving_s / rows["tidal_volume_ml"]
    return np.clip(np.nan_to_num(ratio, nan=1.0), 1.0, 2.0)


def _synchronised(rows: Batch, gaps: _Gaps) -> np.ndarray:
    said = rows["synchrony"]
    usual = rows["generator"] == code_of("generator", "breath_enhanced_jet")
    inhaler = rows["generator"] == code_of("generator", "pmdi_spacer")
    gaps.note(TIMING, (said < 0) & ~inhaler)
    synchronised = said == code_of("synchrony", "inspiration_synchronised")
    return np.where(said < 0, usual, synchronised) | inhaler


def _bias(rows: Batch, single: np.ndarray, gaps: _Gaps) -> np.ndarray:
    missing = np.isnan(rows["bias_flow_lpm"])
    gaps.note(BIAS, missing & ~single)
    gaps.note(LEAK, missing & single)
    usual = np.where(
        single, first(circuit.LEAK_TRIED_COEF), first(circuit.BIAS_TRIED_COEF)
    )
    lpm = np.where(missing, usual, rows["bias_flow_lpm"])
    return lpm * (ML_PER_L / S_PER_MIN)


def first(coefficients: Number) -> float:
    """The first of a set of coefficients."""
    return tried(coefficients)[0]


def tried(coefficients: Number) -> tuple[float, ...]:
    """All of a set of coefficients."""
    assert isinstance(coefficients.value, tuple)
    return coefficients.value


def _gas(rows: Batch, synchronised: np.ndarray, gaps: _Gaps) -> np.ndarray:
    """Driving gas that keeps flowing while the patient breathes out."""
    runs = (rows["generator"] == code_of("generator", "jet")) & ~synchronised
    missing = np.isnan(rows["generator_gas_lpm"])
    gaps.note(GAS, runs & missing)
    lpm = np.where(missing, float(device.JET_GAS_LPM), rows["generator_gas_lpm"])
    return np.where(runs, lpm, 0.0) * (ML_PER_L / S_PER_MIN)


def _distance(rows: Batch, gaps: _Gaps) -> np.ndarray:
    in_limb = rows["site"] == code_of("site", "inspiratory_limb")
    missing = np.isnan(rows["distance_from_wye_cm"])
    gaps.note(DISTANCE, in_limb & missing)
    usual_cm = float(circuit.DEFAULT_DISTANCE_CM)
    return np.where(in_limb & ~missing, rows["distance_from_wye_cm"], usual_cm)


def _airway(rows: Batch, gaps: _Gaps) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    small = rows["tidal_volume_ml"] < float(circuit.SMALL_BREATH_ML)
    usual_mm = np.where(
        small, float(circuit.SMALL_TUBE_MM), float(circuit.DEFAULT_TUBE_MM)
    )
    tube_mm = gaps.filled(rows["tube_id_mm"], usual_mm, TUBE)
    gaps.note(AIRWAY, rows["airway"] < 0)
    tracheostomy = rows["airway"] == code_of("airway", "tracheostomy")
    tube_cm = np.where(
        tracheostomy,
        float(tube.TRACHEOSTOMY_CM),
        np.where(
            is_child(tube_mm), float(tube.CHILD_TUBE_CM), float(tube.ADULT_TUBE_CM)
        ),
    )
    return tracheostomy, tube_mm, tube_cm


def _patient_side(rows: Batch) -> np.ndarray:
    """Tubing between the Y and a generator past it, where it is logged."""
    past = rows["site"] == code_of("site", "airway_side")
    return np.where(past, np.nan_to_num(rows["distance_from_wye_cm"], nan=0.0), 0.0)


def is_child(tube_mm: np.ndarray) -> np.ndarray:
    """Whether a tube of this size is a child's."""
    return tube_mm < float(tube.ADULT_TUBE_MM)


def ml_per_cm(bore_mm: np.ndarray) -> np.ndarray:
    """Gas in a centimetre of tubing."""
    return np.pi / 4 * (bore_mm / MM_PER_CM) ** 2


def _bore_ml(tube_mm: np.ndarray, tube_cm: np.ndarray) -> np.ndarray:
    return ml_per_cm(tube_mm) * tube_cm


def _fittings_ml(tube_mm: np.ndarray, in_line: np.ndarray) -> np.ndarray:
    connector_ml = np.where(
        is_child(tube_mm),
        float(circuit.SMALL_CONNECTOR_ML),
        float(circuit.CONNECTOR_ML),
    )
    return connector_ml + np.where(in_line, float(circuit.HME_ML), 0.0)


def _hme(rows: Batch, gaps: _Gaps) -> np.ndarray:
    """Whether an HME stands between Y and airway; in line where it may be."""
    state = rows["hme_state"]
    uses_hme = np.isin(
        rows["humidification"],
        [code_of("humidification", "hme"), code_of("humidification", "hmef")],
    )
    unknown = (state < 0) & uses_hme
    gaps.note(HME, unknown)
    return (state == code_of("hme_state", "in_line")) | unknown


def _humidity(rows: Batch, gaps: _Gaps) -> tuple[np.ndarray, np.ndarray]:
    """Whether the gas is actively humidified, and whether a chamber stands there."""
    kind = rows["humidification"]
    heated = kind == code_of("humidification", "heated_humidifier")
    on = rows["heated_humidifier_on"]
    gaps.note(HUMIDITY, kind < 0)
    gaps.note(HEATER, heated & (on < 0))
    gaps.note(DRYING, heated & (on == 0))
    return (kind < 0) | (heated & (on != 0)), (kind < 0) | heated


def _filter(rows: Batch, gaps: _Gaps) -> tuple[np.ndarray, np.ndarray]:
    said = rows["expiratory_filter"]
    kind = rows["filter_kind"]
    present = said == code_of("expiratory_filter", "present")
    gaps.note(FILTER, said < 0)
    gaps.note(FILTER_KIND, (present | (said < 0)) & (kind < 0))
    return present, kind


def _patient_adds(rows: Batch) -> np.ndarray:
    free = np.isin(rows["mode"], [code_of("mode", "aprv"), code_of("mode", "cpap")])
    return (rows["spontaneous_breaths"] == 1) | (
        free & (rows["spontaneous_breaths"] != 0)
    )


_READ = (
    "tidal_volume_ml",
    "respiratory_rate_bpm",
    "inspiratory_time_s",
    "inspiratory_pause_s",
    "peak_inspiratory_flow_lpm",
    "bias_flow_lpm",
    "generator_gas_lpm",
    "distance_from_wye_cm",
    "tube_id_mm",
    "mmad_um",
    "gsd",
)


_FASTEST_ML_PER_S = (COLUMNS["peak_inspiratory_flow_lpm"].high or 0) * (
    ML_PER_L / S_PER_MIN
)


def _is_impossible(rows: Batch) -> np.ndarray:
    """True where a number the physics reads lies outside what its column can hold."""
    outside = np.zeros(size(rows), bool)
    for name in _READ:
        low, high = COLUMNS[name].low, COLUMNS[name].high
        assert low is not None
        assert high is not None
        outside |= (rows[name] < low) | (rows[name] > high)
    return outside


def _refusal(rows: Batch, setup: Setup) -> np.ndarray:
    """The first reason that holds, in the order the reasons are listed."""
    reasons = (
        setup.generator < 0,
        setup.site < 0,
        rows["circuit"] < 0,
        np.isnan(setup.tidal_ml),
        _is_impossible(rows),
        setup.expiratory_s <= 0,
        setup.tidal_ml < float(circuit.SMALLEST_BREATH_ML),
        setup.tidal_ml <= setup.dead_ml,
        setup.is_single_limb & (setup.site == code_of("site", "expiratory_limb")),
        np.nan_to_num(rows["inspiratory_pause_s"], nan=0.0) >= setup.inspiratory_s,
        setup.tidal_ml > _FASTEST_ML_PER_S * setup.moving_s,
        rows["respiratory_rate_bpm"] > float(circuit.FASTEST_TIDAL_RATE_BPM),
    )
    refusal = np.zeros(len(setup), np.int8)
    for code in range(len(reasons), 0, -1):
        refusal[reasons[code - 1]] = code
    return refusal


def assumption_spread_logit(assumed: np.ndarray) -> np.ndarray:
    """What the assumptions made add to the spread, in quadrature."""
    total = np.zeros(len(assumed))
    for bit, (_, effect) in enumerate(_ASSUMED):
        if effect is not None:
            total += (assumed >> bit & 1) * float(effect) ** 2
    return np.sqrt(total)
