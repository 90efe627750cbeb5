"""What is tried out where the log is silent, beside the value the point takes."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from engine.evidence import circuit
from engine.physics.constants import Constants
from engine.physics.estimate import Estimate, minds_humid_gas, with_rest_in_limb
from engine.physics.setup import (
    BIAS,
    DRYING,
    HEATER,
    HME,
    HUMIDITY,
    LEAK,
    TIMING,
    Setup,
    tried,
)
from engine.units import ML_PER_L, S_PER_MIN


def other_setups(setup: Setup) -> Iterator[tuple[np.ndarray, Setup, bool]]:
    """Other ways the treatment may have been set up.

    Bias or leak flow at the other values tried; output with inspiration where it may
    have been continuous, or the reverse; the HME out where it may have been in.
    Yields   which rows, some more than once, how they are set up then, and whether
             tube and lung stay as they are.
    """
    flows: list[np.ndarray] = []
    lacks: list[np.ndarray] = []
    for gap, lpms in ((BIAS, circuit.BIAS_TRIED_COEF), (LEAK, circuit.LEAK_TRIED_COEF)):
        lacking = np.flatnonzero(setup.lacks(gap))
        for lpm in tried(lpms)[1:]:
            lacks.append(lacking)
            flows.append(np.full(len(lacking), lpm * ML_PER_L / S_PER_MIN))
    rows = np.concatenate(lacks)
    if len(rows):
        yield rows, setup.pick(rows).but(bias_ml_per_s=np.concatenate(flows)), True
    index = np.flatnonzero(setup.lacks(TIMING))
    if len(index):
        one = setup.pick(index)
        yield index, one.but(is_synchronised=~one.is_synchronised), True
    index = np.flatnonzero(setup.lacks(HME))
    if len(index):
        yield index, without_hme(setup.pick(index)), False


def without_hme(setup: Setup) -> Setup:
    """The same with no HME between Y and airway."""
    hme_ml = np.where(setup.hme_in_line, float(circuit.HME_ML), 0.0)
    return setup.but(
        hme_in_line=np.zeros(len(setup), bool), dead_ml=setup.dead_ml - hme_ml
    )


def humidity_ratio(setup: Setup, constants: Constants) -> np.ndarray:
    """What the other state of the gas would make of everything past the limb.

    1 where nothing is open: the humidity is logged, or the generator does not mind.
    """
    minds = minds_humid_gas(setup)
    maybe_dry = (setup.lacks(HUMIDITY) | setup.lacks(HEATER)) & minds
    maybe_humid = setup.lacks(DRYING) & minds
    ratio = np.where(maybe_dry, 1 / constants.humid_frac, 1.0)
    return np.where(maybe_humid, constants.humid_frac, ratio)


def with_other_humidity(found: Estimate, ratio: np.ndarray) -> Estimate:
    """The estimate in the other state of the gas: all past the limb scaled alike."""
    kept = ("generator_residual",)
    places = {
        name: frac if name in kept else frac * ratio
        for name, frac in found.places.items()
        if name != "limb"
    }
    return Estimate(
        places=with_rest_in_limb(places),
        delivered=found.delivered * ratio,
        swept=found.swept * ratio,
        exhaled=found.exhaled * ratio,
        load=found.load * ratio,
        passed=found.passed * ratio,
    )
