"""Regional deposition below the tube, and in breathing people for comparison.

ICRP Publication 66 treats the airways as filters in series: the head (ET), bronchi
(BB), bronchioles (bb) and alveoli (AI), then bb, BB and ET again on the way out. With
a tube in place the head is left out and the gas between Y and tube tip takes the
place of its dead space. Lengths are micrometres, volumes mL, flows mL/s.

Healthy lungs only: obstruction, ARDS, PEEP, pauses in the larger airways and the jet
from a tube are not in the model.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeAlias

import numpy as np

from engine.evidence import droplet, lung
from engine.evidence.shape import Number
from engine.physics.air import coefficients
from engine.physics.droplets import slip_correction

Values: TypeAlias = np.ndarray | float


@dataclass(frozen=True, eq=False)
class Subject:
    """Lung volumes in mL and scaling factors; each a number or an array of n."""

    frc_ml: Values
    head_ml: Values
    bronchi_ml: Values
    bronchioles_ml: Values
    trachea_scale: Values
    bronchiole_scale: Values
    alveolus_scale: Values


def _subject(number: Number) -> Subject:
    return Subject(*coefficients(number))


SUBJECTS: dict[str, Subject] = {
    "male": _subject(lung.MALE_COEF),
    "female": _subject(lung.FEMALE_COEF),
    "15y": _subject(lung.YEARS_15_COEF),
    "10y": _subject(lung.YEARS_10_COEF),
    "5y": _subject(lung.YEARS_5_COEF),
    "1y": _subject(lung.YEAR_1_COEF),
    "3mo": _subject(lung.MONTHS_3_COEF),
}


@dataclass(frozen=True, eq=False, kw_only=True)
class Breath:
    """One breath below the tube: volume, mean flows, pause before it turns."""

    tidal_ml: Values
    inspiratory_ml_per_s: Values
    expiratory_ml_per_s: Values
    dead_ml: Values  # gas that reaches the patient's side but not the lung
    pause_s: Values = 0.0


@dataclass(frozen=True, eq=False)
class Deposition:
    """Fractions of the aerosol that came in with the breath."""

    bronchi: np.ndarray
    bronchioles: np.ndarray
    alveolar: np.ndarray

    @property
    def tracheobronchial(self) -> np.ndarray:
        """Larger and smaller conducting airways together."""
        return self.bronchi + self.bronchioles

    @property
    def exhaled(self) -> np.ndarray:
        """What comes back out."""
        return 1 - self.bronchi - self.bronchioles - self.alveolar


def intubated_deposition(
    diameter_um: Values, breath: Breath, subject: Subject
) -> Deposition:
    """Where droplets that enter below the Y settle, the head bypassed.

    Shapes   diameter (..., k) against breath and subject arrays that broadcast with it.
    Holds    0.1 to 20 um, water droplets, tidal volume above all dead space; below it
             the regions the breath does not reach get nothing.
    Source   ICRP_66 equation 7 with the head's filter left out; that step is ours.
    Checked  engine/evidence/published/physics_values.csv
    """
    d = np.asarray(diameter_um)
    reach = reach_of(breath, subject)
    (in_bb, in_small, in_alveoli), (out_bb, out_small) = filters(
        d, d, breath, subject, reach
    )
    past_bb = (1 - in_bb) * reach.bronchioles
    past_all = (1 - in_bb) * (1 - in_small) * (1 - in_alveoli)
    return Deposition(
        bronchi=reach.bronchi * (in_bb + past_all * (1 - out_small) * out_bb),
        bronchioles=past_bb * in_small + past_all * out_small * reach.bronchioles,
        alveolar=(1 - in_bb) * (1 - in_small) * in_alveoli * reach.alveoli,
    )


@dataclass(frozen=True, eq=False)
class Reach:
    """Share of the breath that gets as far as each region, and time spent there."""

    bronchi: np.ndarray
    bronchioles: np.ndarray
    alveoli: np.ndarray
    growth: np.ndarray  # VT / FRC
    alveolar_ml: np.ndarray


def reach_of(breath: Breath, subject: Subject) -> Reach:
    tidal_ml = np.asarray(breath.tidal_ml)
    growth = tidal_ml / np.asarray(subject.frc_ml)
    swept_bb = np.asarray(subject.bronchi_ml) * (1 + growth)
    swept_small = np.asarray(subject.bronchioles_ml) * (1 + growth)
    past_dead = tidal_ml - np.asarray(breath.dead_ml)
    past_bb = np.maximum(past_dead - swept_bb, 0.0)
    past_small = np.maximum(past_bb - swept_small, 0.0)
    return Reach(
        bronchi=np.maximum(past_dead, 0.0) / tidal_ml,
        bronchioles=past_bb / tidal_ml,
        alveoli=past_small / tidal_ml,
        growth=growth,
        alveolar_ml=past_small,
    )


def filters(
    aerodynamic_um: np.ndarray,
    thermal_um: np.ndarray,
    breath: Breath,
    subject: Subject,
    reach: Reach,
) -> tuple[tuple[np.ndarray, ...], tuple[np.ndarray, ...]]:
    """Efficiency of BB, bb and AI on the way in, and of BB and bb on the way out.

    The two diameters are the same for droplets. Both ways are worked out at once, on
    a first axis of two, since size plays the same part in both.
    """
    d_ae, d_th = aerodynamic_um, thermal_um
    flow = _ways(breath.inspiratory_ml_per_s, breath.expiratory_ml_per_s, d_ae.ndim)
    diffusion = diffusion_cm2_per_s(d_th)
    half = 1 + reach.growth / 2
    t_bb = subject.bronchi_ml * half / flow
    t_small = subject.bronchioles_ml * half / flow
    t_alveoli = reach.alveolar_ml / breath.inspiratory_ml_per_s + breath.pause_s
    bronchi = _both(
        bronchi_impacted_frac(d_ae, flow, subject),
        bronchi_diffused_frac(d_th, diffusion, t_bb, subject),
    )
    bronchioles = _both(
        bronchioles_settled_frac(d_ae, t_small),
        bronchioles_diffused_frac(diffusion, t_small, subject),
    )
    alveoli = _both(
        alveoli_settled_frac(d_ae, t_alveoli, subject),
        alveoli_diffused_frac(diffusion, t_alveoli, subject),
    )
    return (bronchi[0], bronchioles[0], alveoli), (bronchi[1], bronchioles[1])


def _ways(inspiratory: Values, expiratory: Values, ndim: int) -> np.ndarray:
    """Flow in and out on a first axis, over as many other axes as the sizes have."""
    flow = np.stack(np.broadcast_arrays(inspiratory, expiratory))
    return flow.reshape(2, *(1,) * (ndim + 1 - flow.ndim), *flow.shape[1:])


def _both(aerodynamic: np.ndarray, thermal: np.ndarray) -> np.ndarray:
    """The two mechanisms of one filter taken together; never above 1."""
    return np.minimum(np.sqrt(aerodynamic**2 + thermal**2), 1.0)


def diffusion_cm2_per_s(thermal_um: np.ndarray) -> np.ndarray:
    boltzmann, kelvin, viscosity, cm_per_um = coefficients(lung.DIFFUSION_COEF)
    slip = slip_correction(thermal_um, float(droplet.ICRP_66_FREE_PATH_UM), "icrp66")
    return (
        slip * (boltzmann * kelvin / (3 * np.pi * viscosity * cm_per_um)) / thermal_um
    )


# --- the filters of ICRP Publication 66 ------------------------------------------


def bronchi_impacted_frac(
    diameter_um: np.ndarray, flow_ml_per_s: np.ndarray, subject: Subject
) -> np.ndarray:
    """BB filter by impaction; the first axis of the flow is in, out."""
    slope_in, power, scale_power = coefficients(lung.BRONCHI_IN_COEF)
    slope_out = coefficients(lung.BRONCHI_OUT_COEF)[0]
    slope = np.where(_is_way_in(flow_ml_per_s), slope_in, slope_out)
    per_size = slope * (flow_ml_per_s * subject.trachea_scale**scale_power) ** power
    return 1 - np.exp(
        -(diameter_um ** (2 * power)) * per_size.astype(diameter_um.dtype)
    )


def _is_way_in(flow: np.ndarray) -> np.ndarray:
    return np.array([True, False]).reshape(2, *(1,) * (flow.ndim - 1))


def bronchi_diffused_frac(
    thermal_um: np.ndarray, diffusion: np.ndarray, time_s: np.ndarray, subject: Subject
) -> np.ndarray:
    """BB filter by diffusion, with the factor for turbulence in the first airways."""
    slope, scale_power, power = coefficients(lung.BRONCHI_THERMAL_COEF)
    height, inner, outer, size_power = coefficients(lung.BRONCHI_TURBULENCE_COEF)
    psi = 1 + height * np.exp(-(np.log10(inner + outer / thermal_um**size_power) ** 2))
    strength = slope * subject.trachea_scale**scale_power * time_s**power
    return 1 - np.exp(-strength * (psi * diffusion**power))


def bronchioles_settled_frac(diameter_um: np.ndarray, time_s: Values) -> np.ndarray:
    """bb filter by settling; the same both ways."""
    slope, base, time_power, size_power, power = coefficients(lung.BRONCHIOLES_COEF)
    t = np.asarray(time_s)
    reach = slope * (base + t**time_power) ** power
    return 1 - np.exp(-reach * diameter_um ** (power * t**-size_power))


def bronchioles_diffused_frac(
    diffusion: np.ndarray, time_s: Values, subject: Subject
) -> np.ndarray:
    """bb filter by diffusion; the same both ways."""
    base, slope, scale_power, power = coefficients(lung.BRONCHIOLES_THERMAL_COEF)
    strength = base + slope * subject.bronchiole_scale**scale_power
    return 1 - np.exp(-(strength * time_s**power) * diffusion**power)


def alveoli_settled_frac(
    diameter_um: np.ndarray, time_s: Values, subject: Subject
) -> np.ndarray:
    """AI filter by settling."""
    slope, scale_power, power = coefficients(lung.ALVEOLI_COEF)
    strength = slope * subject.alveolus_scale**scale_power
    return 1 - np.exp(-(strength * time_s**power) * diameter_um ** (2 * power))


def alveoli_diffused_frac(
    diffusion: np.ndarray, time_s: Values, subject: Subject
) -> np.ndarray:
    """AI filter by diffusion."""
    base, slope, scale_power, power = coefficients(lung.ALVEOLI_THERMAL_COEF)
    strength = base + slope * subject.alveolus_scale**scale_power
    return 1 - np.exp(-(strength * time_s**power) * diffusion**power)


def exhaled_by_slices_frac(
    diameter_um: Values, breath: Breath, subject: Subject
) -> np.ndarray:
    """What comes back out if each slice of gas passes only airways it has seen.

    The published chain lets the alveoli filter gas that never got there; the two
    differ by some hundredths, which is a measure of how well either is known.
    """
    d = np.asarray(diameter_um)
    reach = reach_of(breath, subject)
    (in_bb, in_small, in_alveoli), (out_bb, out_small) = filters(
        d, d, breath, subject, reach
    )
    through_bb = (1 - in_bb) * (1 - out_bb)
    through_small = through_bb * (1 - in_small) * (1 - out_small)
    return (
        1
        - reach.bronchi
        + (reach.bronchi - reach.bronchioles) * through_bb
        + (reach.bronchioles - reach.alveoli) * through_small
        + reach.alveoli * through_small * (1 - in_alveoli)
    )
