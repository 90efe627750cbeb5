"""What droplet size decides for a treatment, wherever its generator sits."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.evidence import droplet, tube
from engine.physics.constants import Constants
from engine.physics.droplets import droplet_relaxation_s, size_nodes_um
from engine.physics.limb import settling_rate_per_s
from engine.physics.setup import Setup
from engine.physics.tube import M_PER_MM, passed_frac
from engine.units import ML_PER_L, S_PER_MIN

LPM_PER_ML_PER_S = S_PER_MIN / ML_PER_L
# Two Gauss points of the inspiratory time, for a flow that falls while it lasts.
FAST = np.float32  # seven digits are enough for what happens to one size
_MOMENTS = (0.5 - 0.5 / np.sqrt(3), 0.5 + 0.5 / np.sqrt(3))


@dataclass(frozen=True, eq=False)
class Sized:
    """Arrays (n, k): n treatments, k sizes. Nothing here depends on the site."""

    diameter_um: np.ndarray
    relaxation_s: np.ndarray
    loss_per_s: np.ndarray  # settling in tubing
    tube_in: np.ndarray  # share that gets through the tube with the inspired gas

    def pick(self, index: np.ndarray) -> Sized:
        """The same for some of the treatments."""
        return Sized(*(values[index] for values in vars(self).values()))


def sized_of(setup: Setup, constants: Constants) -> Sized:
    """Sizes of each treatment's droplets, how they settle and pass the tube."""
    diameter_um = size_nodes_um(setup.mmad_um, setup.gsd).astype(FAST)
    relaxation_s = droplet_relaxation_s(diameter_um, float(tube.TUBE_GAS_K))
    falls = relaxation_s * float(droplet.GRAVITY_M_PER_S2)
    mixed = settling_rate_per_s(falls, column(setup.limb_mm * M_PER_MM))
    return Sized(
        diameter_um,
        relaxation_s,
        constants.settling_ratio * mixed,
        _tube_in(setup, relaxation_s),
    )


def column(values: np.ndarray) -> np.ndarray:
    """One value a treatment, ready to meet its k sizes."""
    return values.astype(FAST)[:, None]


def inspiratory_ml_per_s(setup: Setup) -> np.ndarray:
    """Mean inspiratory flow while gas moves: the pause is left out."""
    return setup.tidal_ml / setup.moving_s


def expiratory_ml_per_s(setup: Setup) -> np.ndarray:
    """Mean expiratory flow."""
    return setup.tidal_ml / setup.expiratory_s


def filter_ml_per_s(setup: Setup) -> np.ndarray:
    """Mean flow through the expiratory filter: bias and driving gas pass it as well."""
    added = np.nan_to_num(setup.bias_ml_per_s) + np.nan_to_num(setup.gas_ml_per_s)
    return expiratory_ml_per_s(setup) + added


def tube_passed(
    setup: Setup, relaxation_s: np.ndarray, flow_ml_per_s: np.ndarray
) -> np.ndarray:
    """Share of each size that gets through the artificial airway at this flow.

    A tracheostomy tube passes more than bend and wall explain: the ratio seen on the
    bench is taken in place of a reason, up to no loss at all.
    """
    length_cm = np.where(
        setup.is_tracheostomy, float(tube.ADULT_TUBE_CM), setup.tube_cm
    )
    passed = passed_frac(
        relaxation_s,
        column(flow_ml_per_s * LPM_PER_ML_PER_S),
        column(setup.tube_mm),
        column(length_cm),
    )
    ratio = float(tube.TRACHEOSTOMY_OVER_ENDOTRACHEAL_RATIO)
    easier = column(np.where(setup.is_tracheostomy, ratio, 1.0))
    return np.minimum(passed * easier, 1.0)


def _tube_in(setup: Setup, relaxation_s: np.ndarray) -> np.ndarray:
    """Passage weighted by the gas that flows at each moment of the inspiration."""
    mean = inspiratory_ml_per_s(setup)
    if np.all(setup.peak_ratio == 1):
        return tube_passed(setup, relaxation_s, mean)
    total = np.zeros_like(relaxation_s)
    for moment in _MOMENTS:
        relative = setup.peak_ratio - 2 * (setup.peak_ratio - 1) * moment
        passed = tube_passed(setup, relaxation_s, mean * relative)
        total += passed * column(relative / len(_MOMENTS))
    return total
