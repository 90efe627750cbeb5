"""One estimate of where the dose went, every stage in order, size by size.

No bands, no assumptions: those are put around it in ``balance.py``.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.columns import FRACTIONS, code_of
from engine.evidence import circuit, filter_capture, lung
from engine.physics.constants import Constants
from engine.physics.droplets import size_weights
from engine.physics.filter import hme_capture_frac, penetration_frac
from engine.physics.lung import SUBJECTS, Breath, Subject, intubated_deposition
from engine.physics.setup import Setup, is_child, ml_per_cm
from engine.physics.sizes import (
    FAST,
    LPM_PER_ML_PER_S,
    Sized,
    column,
    expiratory_ml_per_s,
    filter_ml_per_s,
    inspiratory_ml_per_s,
    sized_of,
    tube_passed,
)
from engine.physics.split import at_wye, passes_chamber

WEIGHTS = size_weights().astype(FAST)
_AIRWAY_SIDE = code_of("site", "airway_side")
_EXPIRATORY = code_of("site", "expiratory_limb")


@dataclass(frozen=True, eq=False)
class Estimate:
    """Fractions of the nominal dose, n each; ``places`` are those of FRACTIONS.

    Beside the places a dose can end: ``delivered`` leaves the tube tip, ``swept``
    passes the Y outside the breath, ``exhaled`` comes back from the patient, ``load``
    arrives at the filter position and ``passed`` leaves it.
    """

    places: dict[str, np.ndarray]
    delivered: np.ndarray
    swept: np.ndarray
    exhaled: np.ndarray
    load: np.ndarray
    passed: np.ndarray


@dataclass(frozen=True, eq=False)
class Airways:
    """What each size meets past the Y, wherever the generator sits; shares (n, k).

    ``tube_out`` gets back through the tube; the other two are of what left its tip.
    """

    sized: Sized
    tube_out: np.ndarray
    tracheobronchial: np.ndarray
    alveolar: np.ndarray

    def pick(self, index: np.ndarray) -> Airways:
        """The same for some of the treatments."""
        return Airways(
            self.sized.pick(index),
            self.tube_out[index],
            self.tracheobronchial[index],
            self.alveolar[index],
        )


def airways_of(setup: Setup, constants: Constants) -> Airways:
    """Sizes, tube and lung of each treatment; bias flow and site play no part."""
    sized = sized_of(setup, constants)
    back = tube_passed(setup, sized.relaxation_s, expiratory_ml_per_s(setup))
    return Airways(sized, back, *_lung(setup, sized))


def estimate(
    setup: Setup, constants: Constants, airways: Airways | None = None
) -> Estimate:
    """The balance of each treatment as it is set up."""
    if airways is None:
        airways = airways_of(setup, constants)
    sized = airways.sized
    emitted = constants.emitted_frac(setup.generator, setup.is_synchronised)
    output = emitted * way_survival_frac(setup, constants)
    split = at_wye(setup, sized, constants)
    dose = column(output) * WEIGHTS
    inhaled = split.inhaled * dose
    swept = split.swept * dose

    held = column(hme_on_the_way_in_frac(setup))
    back = column(hme_on_the_way_out_frac(setup))
    swept_in_hme = np.where(column(setup.site == _AIRWAY_SIDE) > 0, back, 0)
    reaches_tube = inhaled * (1 - held)
    delivered = reaches_tube * sized.tube_in
    tracheobronchial = delivered * airways.tracheobronchial
    alveolar = delivered * airways.alveolar
    comes_back = np.maximum(delivered - tracheobronchial - alveolar, 0.0)
    leaves_tube = comes_back * airways.tube_out
    exhaled = leaves_tube * (1 - back)
    goes_on = swept * (1 - swept_in_hme)
    survives = _expiratory_limb_frac(setup, sized)
    load = _sum((goes_on + exhaled) * survives)
    filtered, sensor, room = _filter_side(setup, load)
    places = {
        "generator_residual": 1 - emitted,
        "hme": _sum(inhaled * held + leaves_tube * back + swept * swept_in_hme),
        "unused_past_wye": _sum(goes_on * (1 - survives)),
        "tube": _sum(reaches_tube - delivered + comes_back - leaves_tube),
        "tracheobronchial": _sum(tracheobronchial),
        "alveolar": _sum(alveolar),
        "expiratory_limb": _sum(exhaled * (1 - survives)),
        "filter": filtered,
        "sensor_side": sensor,
        "room": room,
    }
    return Estimate(
        places=with_rest_in_limb(places),
        delivered=_sum(delivered),
        swept=_sum(swept),
        exhaled=_sum(exhaled),
        load=load,
        passed=sensor + room,
    )


def delivered_frac(
    setup: Setup, inhaled: np.ndarray, sized: Sized, constants: Constants
) -> np.ndarray:
    """Only what leaves the tube tip, from the inhaled shares (n, k) of one site."""
    output = constants.emitted_frac(setup.generator, setup.is_synchronised)
    output = output * way_survival_frac(setup, constants)
    through = _sum(inhaled * sized.tube_in * WEIGHTS)
    return output * (1 - hme_on_the_way_in_frac(setup)) * through


def way_survival_frac(setup: Setup, constants: Constants) -> np.ndarray:
    """What Y, chamber and humid gas leave of the output, settling apart."""
    humid = np.where(takes_humid_factor(setup), constants.humid_frac, 1.0)
    chamber = np.where(passes_chamber(setup), constants.chamber_frac, 1.0)
    survives = humid * chamber * constants.wye_frac
    return np.where(setup.site == _EXPIRATORY, 1.0, survives)


def takes_humid_factor(setup: Setup) -> np.ndarray:
    """Where the bench factor for humid circuits applies."""
    return setup.is_humid & minds_humid_gas(setup)


def minds_humid_gas(setup: Setup) -> np.ndarray:
    """Where humid gas costs dose on the way to the Y.

    Not breath-enhanced jets, which lose nothing to humid gas on the bench, not at the
    airway of a single-limb circuit, past all humid tubing, and not past the Y.
    """
    enhanced = setup.generator == code_of("generator", "breath_enhanced_jet")
    at_airway = setup.is_single_limb & (setup.site == _AIRWAY_SIDE)
    return ~enhanced & ~at_airway & (setup.site != _EXPIRATORY)


def hme_on_the_way_in_frac(setup: Setup) -> np.ndarray:
    """Share an HME takes from aerosol on its way to the patient.

    None where the generator sits between HME and airway.
    """
    upstream = setup.hme_in_line & (setup.site != _AIRWAY_SIDE)
    return np.where(upstream, hme_capture_frac(setup.is_filter_hme), 0.0)


def hme_on_the_way_out_frac(setup: Setup) -> np.ndarray:
    """Share an HME takes from whatever comes back through it."""
    return np.where(setup.hme_in_line, hme_capture_frac(setup.is_filter_hme), 0.0)


def _lung(setup: Setup, sized: Sized) -> tuple[np.ndarray, np.ndarray]:
    """Shares of what leaves the tube tip left in larger airways and in alveoli.

    The dead space was counted at the Y, so the delivery is all in gas that enters.
    """
    breath = Breath(
        tidal_ml=column(setup.tidal_ml),
        inspiratory_ml_per_s=column(inspiratory_ml_per_s(setup)),
        expiratory_ml_per_s=column(expiratory_ml_per_s(setup)),
        dead_ml=column(setup.dead_ml),
        pause_s=column(setup.pause_s),
    )
    lungs = intubated_deposition(sized.diameter_um, breath, subject_of(setup))
    enters = column(1 - setup.dead_ml / setup.tidal_ml)
    return lungs.tracheobronchial / enters, lungs.alveolar / enters


_LUNGS = ("male", "10y", "5y")


def lung_index(setup: Setup) -> np.ndarray:
    """Which reference lung is taken, by the size of the tube."""
    return is_child(setup.tube_mm).astype(int) + (
        setup.tube_mm < float(lung.SMALL_CHILD_TUBE_MM)
    )


def subject_of(setup: Setup) -> Subject:
    """The reference lung of each treatment; fields (n, 1)."""
    index = lung_index(setup)
    fields = zip(*(vars(SUBJECTS[name]).values() for name in _LUNGS), strict=True)
    return Subject(*(column(np.array(values, float)[index]) for values in fields))


def _expiratory_limb_frac(setup: Setup, sized: Sized) -> np.ndarray:
    """Share still airborne at the end of the expiratory limb.

    The gas of a breath pushes the limb's content on; a single limb has no such limb.
    """
    limb_ml = float(circuit.EXPIRATORY_LIMB_CM) * ml_per_cm(setup.limb_mm)
    cycle_s = setup.inspiratory_s + setup.expiratory_s
    swept_ml = (setup.bias_ml_per_s + setup.gas_ml_per_s) * setup.expiratory_s
    time_s = limb_ml / (setup.tidal_ml + swept_ml) * cycle_s
    time_s = np.where(setup.is_single_limb, 0.0, time_s)
    return np.exp(-sized.loss_per_s * column(time_s))


def with_rest_in_limb(places: dict[str, np.ndarray]) -> dict[str, np.ndarray]:
    """All places, adding to 1: what did not reach the Y is what is left for the limb.

    Where the others come to more than 1, by the last bits of single precision or by a
    factor put on them, all that left the generator is drawn in alike.
    """
    residual = places["generator_residual"]
    left = sum(v for name, v in places.items() if name != "generator_residual")
    most = 1 - residual
    with np.errstate(divide="ignore", invalid="ignore"):
        drawn_in = np.where(left > most, most / left, 1.0)
    told = {
        name: frac if name == "generator_residual" else frac * drawn_in
        for name, frac in places.items()
    }
    told["limb"] = np.maximum(most - left * drawn_in, 0.0)
    return {name: told[name] for name in FRACTIONS}


def _filter_side(
    setup: Setup, load: np.ndarray
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """What the filter holds, what sensors and valve keep, what reaches the room."""
    through, _, _ = penetration_frac(
        setup.filter_kind, filter_ml_per_s(setup) * LPM_PER_ML_PER_S
    )
    passed = load * np.where(setup.filter_present, through, 1.0)
    sensor = passed * np.where(
        setup.is_single_limb, 0.0, float(filter_capture.SENSOR_HELD_FRAC)
    )
    return load - passed, sensor, passed - sensor


def _sum(shares: np.ndarray) -> np.ndarray:
    """Over the sizes, in double precision from here on."""
    return shares.sum(axis=-1, dtype=np.float64)
