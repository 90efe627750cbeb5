"""The free constants of the balance: one set, fitted once, handed to every stage."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.columns import code_of
from engine.evidence import calibration
from engine.physics.setup import GENERATORS


@dataclass(frozen=True, kw_only=True)
class Constants:
    """What the calibration may move; everything else is published or declared."""

    tanks_count: float  # spread of gas in the limb
    settling_ratio: float  # settling in the limb over well-mixed settling
    humid_frac: float  # survives an actively humidified circuit
    wye_frac: float  # survives Y and connectors
    chamber_frac: float  # survives the humidifier chamber
    jet_frac: float  # leaves the generator, by kind
    pulsed_jet_frac: float
    breath_enhanced_jet_frac: float
    vibrating_mesh_frac: float
    ultrasonic_frac: float
    pmdi_spacer_frac: float

    def emitted_frac(
        self, generator: np.ndarray, is_synchronised: np.ndarray
    ) -> np.ndarray:
        """Share of the nominal dose leaving each treatment's generator."""
        table = [getattr(self, f"{word}_frac") for word in GENERATORS]
        emitted = np.array([*table, np.nan])[generator]
        pulsed = is_synchronised & (generator == code_of("generator", "jet"))
        return np.where(pulsed, self.pulsed_jet_frac, emitted)


FITTED = Constants(
    tanks_count=float(calibration.LIMB_TANKS_COUNT),
    settling_ratio=float(calibration.SETTLING_MULTIPLIER_RATIO),
    humid_frac=float(calibration.HUMID_SURVIVAL_FRAC),
    wye_frac=float(calibration.WYE_SURVIVAL_FRAC),
    chamber_frac=float(calibration.CHAMBER_SURVIVAL_FRAC),
    jet_frac=float(calibration.JET_EMITTED_FRAC),
    pulsed_jet_frac=float(calibration.PULSED_JET_EMITTED_FRAC),
    breath_enhanced_jet_frac=float(calibration.BREATH_ENHANCED_EMITTED_FRAC),
    vibrating_mesh_frac=float(calibration.MESH_EMITTED_FRAC),
    ultrasonic_frac=float(calibration.ULTRASONIC_EMITTED_FRAC),
    pmdi_spacer_frac=float(calibration.INHALER_EMITTED_FRAC),
)
