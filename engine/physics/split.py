"""From generator to Y: what each site makes of the same output.

Every site is a way to the Y: a length of tubing, perhaps the humidifier chamber or a
spacer. The site on the patient's side of the Y has no way to go and follows a rule of
its own; on the expiratory limb nothing is inhaled.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.columns import code_of
from engine.evidence import circuit, device
from engine.physics import wye
from engine.physics.constants import Constants
from engine.physics.setup import Setup, ml_per_cm
from engine.physics.sizes import Sized, column

_AIRWAY_SIDE = code_of("site", "airway_side")
_EXPIRATORY = code_of("site", "expiratory_limb")
_UPSTREAM_OF_CHAMBER = (
    code_of("site", "ventilator_outlet"),
    code_of("site", "humidifier_inlet"),
)


@dataclass(frozen=True, eq=False)
class AtWye:
    """What becomes of the droplets on the way to the Y; shares (n, k) of the output."""

    inhaled: np.ndarray
    swept: np.ndarray  # past the Y, airborne, outside the breath

    @property
    def settled(self) -> np.ndarray:
        """Left on the inspiratory side."""
        return np.maximum(1 - self.inhaled - self.swept, 0.0)


def at_wye(setup: Setup, sized: Sized, constants: Constants) -> AtWye:
    """The split for each treatment's own site."""
    inhaled = np.zeros_like(sized.loss_per_s)
    gone = np.ones_like(inhaled)
    airway = setup.site == _AIRWAY_SIDE
    limb = ~airway & (setup.site != _EXPIRATORY)
    for where, rule in ((limb, _along_limb), (airway, on_patient_side)):
        index = np.flatnonzero(where)
        if len(index):
            part = rule(setup.pick(index), sized.pick(index), constants)
            inhaled[index], gone[index] = part.inhaled, part.swept
    return AtWye(inhaled, gone)


def inhaled_only(setup: Setup, sized: Sized, constants: Constants) -> np.ndarray:
    """What is inhaled at each treatment's own site; the rest is not followed."""
    inhaled = np.zeros_like(sized.loss_per_s)
    airway = setup.site == _AIRWAY_SIDE
    index = np.flatnonzero(airway)
    if len(index):
        part = on_patient_side(setup.pick(index), sized.pick(index), constants)
        inhaled[index] = part.inhaled
    index = np.flatnonzero(~airway & (setup.site != _EXPIRATORY))
    if len(index):
        arrivals = along_limb(setup.pick(index), constants)
        inhaled[index] = arrivals.airborne_frac(sized.loss_per_s[index])
    return inhaled


def along_limb(setup: Setup, constants: Constants) -> wye.Arrivals:
    """Only what is inhaled from sites on the inspiratory side, sizes apart."""
    return wye.dispersed(way_to_wye(setup, constants), cycle(setup), emission(setup))


def _along_limb(setup: Setup, sized: Sized, constants: Constants) -> AtWye:
    parts, breath, output = way_to_wye(setup, constants), cycle(setup), emission(setup)
    kept = wye.dispersed(parts, breath, output)
    rest = wye.swept(parts, breath, output)
    unused = np.maximum(1 - kept.share, 0.0)
    rest = wye.Arrivals(unused, rest.mean_s, rest.variance_s2)
    return AtWye(
        kept.airborne_frac(sized.loss_per_s), rest.airborne_frac(sized.loss_per_s)
    )


def on_patient_side(setup: Setup, sized: Sized, constants: Constants) -> AtWye:
    to_wye_ml = patient_side_ml(setup)
    output = emission(setup)
    at_once, waits = wye.patient_side(
        tidal_ml=setup.tidal_ml,
        inspiratory_s=setup.inspiratory_s,
        pause_s=setup.pause_s,
        expiratory_s=setup.expiratory_s,
        to_wye_ml=to_wye_ml,
        dead_ml=np.maximum(setup.dead_ml - to_wye_ml - _hme_ml(setup), 0.0),
        emission_start_s=output.start_s,
        emission_stop_s=output.stop_s,
        gas_ml_per_s=setup.gas_ml_per_s,
        time_constant_s=float(circuit.RESPIRATORY_RC_S),
    )
    kept = waits.airborne_frac(sized.loss_per_s)
    carried_out = 1 - at_once - waits.share
    return AtWye(
        column(at_once) + kept, np.broadcast_to(column(carried_out), kept.shape)
    )


def _hme_ml(setup: Setup) -> np.ndarray:
    """An HME in line lies between the Y and a generator on the patient's side."""
    return np.where(setup.hme_in_line, float(circuit.HME_ML), 0.0)


def cycle(setup: Setup) -> wye.Cycle:
    """The breath as the Y sees it.

    Nothing moves in a pause, except that a single limb goes on leaking: its leak flows
    in inspiration too, and its pause counts as expiration.
    """
    pause_s = np.where(setup.is_single_limb, 0.0, setup.pause_s)
    return wye.cycle_of(
        tidal_ml=setup.tidal_ml,
        inspiratory_s=setup.moving_s,
        pause_s=pause_s if np.any(pause_s) else 0.0,
        expiratory_s=setup.expiratory_s + setup.pause_s - pause_s,
        bias_ml_per_s=setup.bias_ml_per_s,
        gas_ml_per_s=setup.gas_ml_per_s,
        dead_ml=setup.dead_ml,
        bias_in_inspiration=setup.is_single_limb,
        peak_ratio=_steady_or_falling(setup),
    )


def _steady_or_falling(setup: Setup) -> wye.Values:
    """One number where every flow is constant: the sums are then shorter."""
    return 1.0 if np.all(setup.peak_ratio == 1) else setup.peak_ratio


def emission(setup: Setup) -> wye.Emission:
    """When each generator puts out: always, in inspiration, or one puff."""
    if setup.emission is not None:
        return wye.emission_of(cycle(setup), setup.emission)
    puff_s = np.minimum(float(device.PUFF_S), setup.moving_s)
    always_s = setup.inspiratory_s + setup.expiratory_s
    stop_s = np.where(setup.is_synchronised, setup.moving_s, always_s)
    return wye.Emission(np.zeros(len(setup)), np.where(setup.is_puff, puff_s, stop_s))


def way_to_wye(setup: Setup, constants: Constants) -> list[tuple[np.ndarray, float]]:
    """Gas between generator and Y: tubing that disperses, then chambers that mix."""
    tubing_ml = limb_cm(setup) * ml_per_cm(setup.limb_mm) + float(
        circuit.WYE_FITTING_ML
    )
    chamber_ml = np.where(passes_chamber(setup), float(circuit.CHAMBER_ML), 0.0)
    spacer_ml = np.where(setup.is_puff, float(circuit.SPACER_ML), 0.0)
    parts = [(tubing_ml, constants.tanks_count)]
    parts += [(v, 1.0) for v in (chamber_ml, spacer_ml) if np.any(v)]
    return parts


def limb_cm(setup: Setup) -> np.ndarray:
    """Tubing between each treatment's generator and the Y."""
    to_outlet = float(circuit.HUMIDIFIER_LIMB_CM)
    behind = {
        "ventilator_outlet": float(circuit.VENTILATOR_TUBE_CM),
        "humidifier_inlet": float(circuit.INLET_TUBE_CM),
    }
    cm = np.where(setup.site == code_of("site", "wye"), 0.0, to_outlet)
    for site, more in behind.items():
        here = (setup.site == code_of("site", site)) & setup.has_chamber
        cm = np.where(here, to_outlet + more, cm)
    in_limb = setup.site == code_of("site", "inspiratory_limb")
    return np.where(in_limb, setup.distance_cm, cm)


def passes_chamber(setup: Setup) -> np.ndarray:
    """Whether the output goes through a humidifier chamber."""
    return setup.has_chamber & np.isin(setup.site, _UPSTREAM_OF_CHAMBER)


def patient_side_ml(setup: Setup) -> np.ndarray:
    """Gas between the Y, or an HME, and a generator on the patient's side of it."""
    tubing_cm = np.where(setup.site == _AIRWAY_SIDE, setup.patient_side_cm, 0.0)
    return float(circuit.WYE_FITTING_ML) + tubing_cm * ml_per_cm(setup.limb_mm)
