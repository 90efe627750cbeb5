"""The split at the Y of one treatment as arrays that can be drawn.

One breath is laid out by the gas that passes the Y: first what the patient breathes in,
then what bias flow and driving gas sweep past while the patient breathes out. Output
put out in the second part is parked in the limb; the picture shows where in the breath
it arrives, and which arrivals are inhaled.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.batch import Batch, size
from engine.columns import code_of
from engine.physics import wye
from engine.physics.constants import FITTED, Constants
from engine.physics.setup import setup_of
from engine.physics.split import cycle, emission, way_to_wye

POINTS_COUNT = 512


@dataclass(frozen=True, eq=False, kw_only=True)
class SplitPicture:
    """One breath along the gas that passes the Y; the arrays have POINTS_COUNT values.

    position_ml       where in the breath, from its beginning
    output_per_ml     share of the dose put out while that gas passes
    arriving_per_ml   share of the dose arriving at the Y with that gas; both densities
                      have an area of 1 over the breath; settling is left out
    inspired_ml       up to here the patient breathes in, from here output is parked
    window_ml         up to here arrivals are inhaled; the rest is swept past
    way_ml            gas between generator and Y
    parked_frac       share of the output put out while the patient breathes out
    inhaled_frac      share of the output inhaled, were nothing to settle
    leak_frac         share of the gas of an inspiration that a leak takes
    """

    position_ml: np.ndarray
    output_per_ml: np.ndarray
    arriving_per_ml: np.ndarray
    inspired_ml: float
    window_ml: float
    cycle_ml: float
    way_ml: float
    parked_frac: float
    inhaled_frac: float
    leak_frac: float

    @property
    def swept_frac(self) -> float:
        """Share of the output that passes the Y outside the breath."""
        return 1 - self.inhaled_frac

    @property
    def carried_ml(self) -> float:
        """Gas that passes the Y while the patient breathes out."""
        return self.cycle_ml - self.inspired_ml

    @property
    def sentence(self) -> str:
        """Why so much of the output is inhaled, in one sentence."""
        leak = ""
        if self.leak_frac > 0:
            leak = f"; the leak takes {self.leak_frac:.0%} of what arrives in a breath"
        return (
            f"{self._before} {self._then}{leak}: {self.inhaled_frac:.0%} would be "
            "inhaled if nothing settled."
        )

    @property
    def _before(self) -> str:
        if self.parked_frac == 0:
            return "All output is put out while the patient breathes in;"
        return (
            f"{self.parked_frac:.0%} of the output is put out while the patient "
            "breathes out;"
        )

    @property
    def _then(self) -> str:
        carried = f"{self.carried_ml:.0f} mL of gas"
        way = f"{self.way_ml:.0f} mL between generator and Y"
        if self.carried_ml < 1:
            return f"nothing moves the {way} on until the next breath"
        if self.way_ml >= self.window_ml:
            return (
                f"the {way} are more than one breath takes in, and output comes at "
                "any time of a later breath"
            )
        if self.parked_frac == 0:
            return (
                f"what waits in the {way} at the end of the breath is moved on by "
                f"{carried} before the next"
            )
        if self.way_ml < self.carried_ml:
            return (
                f"{carried} pass in that time, more than the {way}, and sweep past "
                "what was put out early"
            )
        return f"{carried} pass in that time, less than the {way}, and most of it waits"

    @property
    def is_parked(self) -> np.ndarray:
        """True where output waits in the limb while the patient breathes out."""
        return self.position_ml >= self.inspired_ml

    @property
    def is_inhaled(self) -> np.ndarray:
        """True where what arrives at the Y goes to the patient."""
        return self.position_ml < self.window_ml


def split_picture(rows: Batch, constants: Constants = FITTED) -> SplitPicture | None:
    """The picture for a batch of one treatment.

    None     where there is none: refused, or a generator that is not on the way to
             the Y (patient's side, expiratory limb).
    Raises   ValueError if the batch does not hold exactly one treatment.
    """
    if size(rows) != 1:
        raise ValueError(f"one treatment is explained at a time; got {size(rows)}")
    setup = setup_of(rows)
    elsewhere = (code_of("site", "airway_side"), code_of("site", "expiratory_limb"))
    if setup.refusal[0] or setup.site[0] in elsewhere:
        return None
    breath, output = cycle(setup), emission(setup)
    parts = way_to_wye(setup, constants)
    cycle_ml = float(np.ravel(breath.cycle_ml)[0])
    position_ml = (np.arange(POINTS_COUNT) + 0.5) / POINTS_COUNT * cycle_ml
    density = _output_per_ml(breath, output, position_ml)
    arriving = _after_the_way(density, parts, cycle_ml)
    inhaled = wye.dispersed(parts, breath, output)
    parked_s = np.maximum(output.stop_s - breath.inspiratory_s, 0.0)
    return SplitPicture(
        position_ml=position_ml,
        output_per_ml=density,
        arriving_per_ml=arriving,
        inspired_ml=float(np.ravel(breath.inspired_ml)[0]),
        window_ml=float(np.ravel(breath.window_ml)[0]),
        cycle_ml=cycle_ml,
        way_ml=sum(float(volume[0]) for volume, _ in parts),
        parked_frac=float((parked_s / (output.stop_s - output.start_s))[0]),
        inhaled_frac=float(inhaled.share[0]),
        leak_frac=1 - float(np.ravel(breath.patient_share)[0]),
    )


def _output_per_ml(
    breath: wye.Cycle, output: wye.Emission, position_ml: np.ndarray
) -> np.ndarray:
    """Output by position: fast gas carries little of it, slow gas much."""
    edges = np.append(position_ml - position_ml[0], breath.cycle_ml)
    put_out = np.clip(wye.time_s(breath, edges), output.start_s, output.stop_s)
    shares = np.diff(put_out) / (output.stop_s - output.start_s)
    return shares / np.diff(edges)


def _after_the_way(
    density: np.ndarray, parts: wye.Parts, cycle_ml: float
) -> np.ndarray:
    """The same density after the way to the Y has shifted and spread it."""
    harmonics = np.fft.rfft(density)
    turn = 2j * np.pi * np.arange(len(harmonics)) / cycle_ml
    for volume, tanks in parts:
        harmonics = (
            harmonics * (1 + turn * float(np.ravel(volume)[0]) / tanks) ** -tanks
        )
    return np.maximum(np.fft.irfft(harmonics, len(density)), 0.0)
