"""ICRP Publication 66 and its fits for people breathing by nose or mouth.

No treatment is estimated with these: they are here because the published tables are
for breathing people, and a model that gives those tables can be trusted further down.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.evidence import droplet, lung
from engine.physics.air import coefficients
from engine.physics.droplets import (
    particle_diameter_um,
    size_nodes_um,
    size_weights,
)
from engine.physics.lung import (
    SUBJECTS,
    Breath,
    Subject,
    Values,
    diffusion_cm2_per_s,
    filters,
    reach_of,
)

TABLE_NODES_COUNT = 48  # enough sizes for the print of the tables
NOSE_SHARES = {"nose": 1.0, "mouth": 0.0}


@dataclass(frozen=True, eq=False)
class Regions:
    """Fractions of what was in the air breathed, by region; what is not inhaled counts.

    nose_front is ET1, head is ET2, bronchi BB, bronchioles bb, alveolar AI.
    """

    nose_front: np.ndarray
    head: np.ndarray
    bronchi: np.ndarray
    bronchioles: np.ndarray
    alveolar: np.ndarray

    def by_key(self) -> dict[str, np.ndarray]:
        """The same under the letters of the source."""
        return {
            "ET1": self.nose_front,
            "ET2": self.head,
            "ET": self.nose_front + self.head,
            "BB": self.bronchi,
            "bb": self.bronchioles,
            "TB": self.bronchi + self.bronchioles,
            "AI": self.alveolar,
        }


def inhalable_frac(aerodynamic_um: Values, wind_m_per_s: Values = 0.0) -> np.ndarray:
    """Share of the particles in the air that enters nose or mouth.

    Source   ICRP_66 equation 12.
    """
    half, scale, power, gain, wind_power, growth = coefficients(lung.INHALABLE_COEF)
    d = np.asarray(aerodynamic_um, float)
    wind = (
        gain
        * np.asarray(wind_m_per_s, float) ** wind_power
        * np.exp(np.minimum(growth * d, 50.0))
    )
    return np.minimum(1 - half * (1 - 1 / (scale * d**power + 1)) + wind, 1.0)


def breathing_deposition(
    aerodynamic_um: Values,
    tidal_ml: Values,
    flow_ml_per_s: Values,
    subject: Subject | str = "male",
    nose_share: float = 1.0,
    density_g_per_cm3: float = 3.0,
    shape_factor: float = 1.5,
    wind_m_per_s: float = 0.0,
) -> Regions:
    """Regional deposition of one particle size.

    Shapes   arrays that broadcast; returns their common shape.
    Flow     the mean, equal both ways: VT x rate / 30 s.
    Source   ICRP_66 equations 7, 11 and 12; nose and mouth paths weighted by the air
             that takes them.
    Raises   KeyError for a subject that is not in SUBJECTS.
    Checked  engine/evidence/published/physics_values.csv
    """
    d_th = particle_diameter_um(
        aerodynamic_um,
        density_g_per_cm3,
        shape_factor,
        float(droplet.ICRP_66_FREE_PATH_UM),
        "icrp66",
    )
    return _by_path(
        np.asarray(aerodynamic_um, float),
        d_th,
        tidal_ml,
        flow_ml_per_s,
        SUBJECTS[subject] if isinstance(subject, str) else subject,
        nose_share,
        wind_m_per_s,
    )


def breathing_deposition_polydisperse(
    amad_um: Values,
    tidal_ml: float,
    flow_ml_per_s: float,
    subject: Subject | str = "male",
    nose_share: float = 1.0,
    density_g_per_cm3: float = 3.0,
    shape_factor: float = 1.5,
    gsd: Values | None = None,
    wind_m_per_s: float = 0.0,
) -> Regions:
    """Regional deposition of a lognormal aerosol, as the published tables give it.

    Spread   by ICRP_66 equation 16 from the thermodynamic median unless given.
    Shapes   k medians -> k fractions for each region.
    Checked  engine/evidence/published/physics_values.csv
    """
    path_um = float(droplet.ICRP_66_FREE_PATH_UM)
    median_th = particle_diameter_um(
        amad_um, density_g_per_cm3, shape_factor, path_um, "icrp66"
    )
    spread = workplace_gsd(median_th) if gsd is None else gsd
    d_ae = size_nodes_um(amad_um, spread, TABLE_NODES_COUNT)
    d_th = particle_diameter_um(
        d_ae, density_g_per_cm3, shape_factor, path_um, "icrp66"
    )
    each = _by_path(
        d_ae,
        d_th,
        tidal_ml,
        flow_ml_per_s,
        SUBJECTS[subject] if isinstance(subject, str) else subject,
        nose_share,
        wind_m_per_s,
    )
    weights = size_weights(TABLE_NODES_COUNT)
    return Regions(*(part @ weights for part in vars(each).values()))


def workplace_gsd(thermal_median_um: Values) -> np.ndarray:
    """Spread of an aerosol nobody measured.

    Source   ICRP_66 equation 16.
    """
    rise, scale, power = coefficients(lung.AEROSOL_SPREAD_COEF)
    d = np.asarray(thermal_median_um, float)
    return 1 + rise * (1 - 1 / (scale * d**power + 1))


def reference_worker_deposition(amad_um: Values) -> Regions:
    """Sitting and light exercise weighted by the air breathed in each.

    Checked  engine/evidence/published/physics_values.csv
    """
    figures = coefficients(lung.WORKER_COEF)
    parts = []
    breathed = []
    for hours, tidal_ml, flow, m3_per_h in (figures[:4], figures[4:]):
        parts.append(breathing_deposition_polydisperse(amad_um, tidal_ml, flow))
        breathed.append(hours * m3_per_h)
    shares = np.array(breathed) / sum(breathed)
    return Regions(
        *(
            shares[0] * first + shares[1] * second
            for first, second in zip(
                vars(parts[0]).values(), vars(parts[1]).values(), strict=True
            )
        )
    )


def _by_path(
    d_ae: np.ndarray,
    d_th: np.ndarray,
    tidal_ml: Values,
    flow: Values,
    subject: Subject,
    nose_share: float,
    wind: float,
) -> Regions:
    inhaled = inhalable_frac(d_ae, wind)
    parts = []
    for share, head in ((nose_share, _nose), (1 - nose_share, _mouth)):
        if share > 0:
            front, back = head(d_ae, d_th, tidal_ml, flow, share, subject)
            regions = _through(d_ae, d_th, front, back, tidal_ml, flow, subject)
            parts.append([inhaled * share * part for part in regions])
    return Regions(*(sum(pieces) for pieces in zip(*parts, strict=True)))


def _through(
    d_ae: np.ndarray,
    d_th: np.ndarray,
    front: np.ndarray,
    back: np.ndarray,
    tidal_ml: Values,
    flow: Values,
    subject: Subject,
) -> tuple[np.ndarray, ...]:
    """The chain of nine filters: front, back, BB, bb, AI, bb, BB, back, front."""
    breath = Breath(
        tidal_ml=tidal_ml,
        inspiratory_ml_per_s=flow,
        expiratory_ml_per_s=flow,
        dead_ml=subject.head_ml,
    )
    reach = reach_of(breath, subject)
    (bb, small, alveoli), (bb_out, small_out) = filters(
        d_ae, d_th, breath, subject, reach
    )
    chain = (
        (0, front, 1.0),
        (1, back, 1.0),
        (2, bb, reach.bronchi),
        (3, small, reach.bronchioles),
        (4, alveoli, reach.alveoli),
        (3, small_out, reach.bronchioles),
        (2, bb_out, reach.bronchi),
        (1, back, 1.0),
        (0, front, 1.0),
    )
    held = [np.zeros_like(d_ae) for _ in range(5)]
    airborne = np.ones_like(d_ae)
    for region, efficiency, share in chain:
        held[region] = held[region] + share * airborne * efficiency
        airborne = airborne * (1 - efficiency)
    return tuple(held)


def _nose(
    d_ae: np.ndarray,
    d_th: np.ndarray,
    tidal_ml: Values,
    flow: Values,
    share: float,
    subject: Subject,
) -> tuple[np.ndarray, np.ndarray]:
    scale_power, flow_power = coefficients(lung.HEAD_FLOW_COEF)
    through = np.asarray(flow) * share
    inertia = d_ae**2 * through * subject.trachea_scale**scale_power
    slow = (through * subject.trachea_scale) ** flow_power
    diffusion = diffusion_cm2_per_s(d_th) * slow
    slope, thermal_slope, thermal_power = coefficients(lung.NOSE_FRONT_COEF)
    front = _joined(
        0.5 * (1 - 1 / (slope * inertia + 1)),
        -0.5 * np.expm1(-thermal_slope * diffusion**thermal_power),
    )
    slope, power, thermal_slope, thermal_power = coefficients(lung.NOSE_BACK_COEF)
    back = _joined(
        1 - 1 / (slope * inertia**power + 1),
        -np.expm1(-thermal_slope * diffusion**thermal_power),
    )
    return front, back


def _mouth(
    d_ae: np.ndarray,
    d_th: np.ndarray,
    tidal_ml: Values,
    flow: Values,
    share: float,
    subject: Subject,
) -> tuple[np.ndarray, np.ndarray]:
    scale_power, thermal_flow_power = coefficients(lung.HEAD_FLOW_COEF)
    slope, flow_power, tidal_power, power, thermal_slope, thermal_power = coefficients(
        lung.MOUTH_COEF
    )
    inertia = (
        d_ae**2
        * (np.asarray(flow) * subject.trachea_scale**scale_power) ** flow_power
        * (np.asarray(tidal_ml) * subject.trachea_scale**2) ** tidal_power
    )
    slow = (np.asarray(flow) * share * subject.trachea_scale) ** thermal_flow_power
    diffusion = diffusion_cm2_per_s(d_th) * slow
    back = _joined(
        1 - 1 / (slope * inertia**power + 1),
        -np.expm1(-thermal_slope * diffusion**thermal_power),
    )
    return np.zeros_like(d_ae), back


def _joined(aerodynamic: np.ndarray, thermal: np.ndarray) -> np.ndarray:
    return np.minimum(np.hypot(aerodynamic, thermal), 1.0)


# --- fits to the whole model, for quick comparison -------------------------------


def hinds1999_deposition(diameter_um: Values) -> dict[str, np.ndarray]:
    """Average deposition of people breathing: inhalable, HA, TB, AL and total.

    Holds    unit-density spheres, averaged over sexes and three activity levels.
    Source   HINDS_1999 equations 11.1 to 11.5.
    Checked  engine/evidence/published/physics_values.csv
    """
    d = np.asarray(diameter_um, float)
    log_d = np.log(d)
    half, scale, power = coefficients(lung.HINDS_INHALABLE_COEF)
    inhaled = 1 - half * (1 - 1 / (1 + scale * d**power))
    a, b, c, e = coefficients(lung.HINDS_HEAD_COEF)
    head = inhaled * (1 / (1 + np.exp(a + b * log_d)) + 1 / (1 + np.exp(c + e * log_d)))
    total = coefficients(lung.HINDS_TOTAL_COEF)
    return {
        "inhalable": inhaled,
        "HA": head,
        "TB": _two_humps(d, log_d, coefficients(lung.HINDS_BRONCHIAL_COEF)),
        "AL": _two_humps(d, log_d, coefficients(lung.HINDS_ALVEOLAR_COEF)),
        "total": inhaled
        * (
            total[0]
            + total[1] / (1 + np.exp(total[2] + total[3] * log_d))
            + total[4] / (1 + np.exp(total[5] + total[6] * log_d))
        ),
    }


def _two_humps(
    d: np.ndarray, log_d: np.ndarray, figures: tuple[float, ...]
) -> np.ndarray:
    scale, width, centre, height, width_2, centre_2 = figures
    return (scale / d) * (
        np.exp(-width * (log_d + centre) ** 2)
        + height * np.exp(-width_2 * (log_d - centre_2) ** 2)
    )
