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

    The two diameters are the same for droplets.
    """
    diffusion = diffusion_cm2_per_s(thermal_um)
    _, _, t_alveoli = _times_s(subject, reach, breath.inspiratory_ml_per_s)
    t_alveoli = t_alveoli + breath.pause_s
    alveoli = _both(
        alveoli_settled_frac(aerodynamic_um, t_alveoli, subject),
        alveoli_diffused_frac(diffusion, t_alveoli, subject),
    )
    ways = []
    for flow, law in (
        (breath.inspiratory_ml_per_s, lung.BRONCHI_IN_COEF),
        (breath.expiratory_ml_per_s, lung.BRONCHI_OUT_COEF),
    ):
        t_bb, t_small, _ = _times_s(subject, reach, flow)
        bronchi = _both(
            bronchi_impacted_frac(aerodynamic_um, flow, subject, law),
            bronchi_diffused_frac(thermal_um, diffusion, t_bb, subject),
        )
        bronchioles = _both(
            bronchioles_settled_frac(aerodynamic_um, t_small),
            bronchioles_diffused_frac(diffusion, t_small, subject),
        )
        ways.append((bronchi, bronchioles))
    return (*ways[0], alveoli), ways[1]


def _times_s(
    subject: Subject, reach: Reach, flow_ml_per_s: Values
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Time the gas spends in BB, bb and AI at this flow."""
    half = 1 + reach.growth / 2
    return (
        subject.bronchi_ml * half / flow_ml_per_s,
        subject.bronchioles_ml * half / flow_ml_per_s,
        reach.alveolar_ml / flow_ml_per_s,
    )


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
    diameter_um: np.ndarray, flow_ml_per_s: Values, subject: Subject, law: Number
) -> np.ndarray:
    """BB filter by impaction; ``law`` tells inspiration from expiration."""
    slope, power, scale_power = coefficients(law)
    per_size = np.asarray(flow_ml_per_s) * subject.trachea_scale**scale_power
    return -np.expm1(-slope * (diameter_um**2 * per_size) ** power)


def bronchi_diffused_frac(
    thermal_um: np.ndarray, diffusion: np.ndarray, time_s: Values, subject: Subject
) -> np.ndarray:
    """BB filter by diffusion, with the factor for turbulence in the first airways."""
    slope, scale_power, power = coefficients(lung.BRONCHI_THERMAL_COEF)
    height, inner, outer, size_power = coefficients(lung.BRONCHI_TURBULENCE_COEF)
    psi = 1 + height * np.exp(-(np.log10(inner + outer / thermal_um**size_power) ** 2))
    strength = slope * subject.trachea_scale**scale_power
    return -np.expm1(-strength * psi * (diffusion * time_s) ** power)


def bronchioles_settled_frac(diameter_um: np.ndarray, time_s: Values) -> np.ndarray:
    """bb filter by settling; the same both ways."""
    slope, base, time_power, size_power, power = coefficients(lung.BRONCHIOLES_COEF)
    t = np.asarray(time_s)
    size = diameter_um ** (t**-size_power)
    return -np.expm1(-slope * ((base + t**time_power) * size) ** power)


def bronchioles_diffused_frac(
    diffusion: np.ndarray, time_s: Values, subject: Subject
) -> np.ndarray:
    """bb filter by diffusion; the same both ways."""
    base, slope, scale_power, power = coefficients(lung.BRONCHIOLES_THERMAL_COEF)
    strength = base + slope * subject.bronchiole_scale**scale_power
    return -np.expm1(-strength * (diffusion * time_s) ** power)


def alveoli_settled_frac(
    diameter_um: np.ndarray, time_s: Values, subject: Subject
) -> np.ndarray:
    """AI filter by settling."""
    slope, scale_power, power = coefficients(lung.ALVEOLI_COEF)
    strength = slope * subject.alveolus_scale**scale_power
    return -np.expm1(-strength * (diameter_um**2 * time_s) ** power)


def alveoli_diffused_frac(
    diffusion: np.ndarray, time_s: Values, subject: Subject
) -> np.ndarray:
    """AI filter by diffusion."""
    base, slope, scale_power, power = coefficients(lung.ALVEOLI_THERMAL_COEF)
    strength = base + slope * subject.alveolus_scale**scale_power
    return -np.expm1(-strength * (diffusion * time_s) ** power)


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
