"""The split at the Y: which part of a generator's output the patient breathes in.

Gas moves along the inspiratory limb with the breath: fast while the patient breathes
in, by bias flow and driving gas only while the patient breathes out. Count the gas
that passes the Y instead of the time, and everything becomes a shift: what is put out
at position u of the breath arrives at u + v, v being the gas between generator and Y.
The breath repeats every ``cycle_ml``; arrivals in its first ``window_ml`` are inhaled
and kept, the rest is swept past. Output of the expiration is *parked* in the limb; how
far the bias flow moves it decides whether it is there when the next breath comes.

A real limb disperses: v is not one volume but spread, as if the gas went through
stirred tanks in series. Where the spread is small the split is averaged over a few
volumes; where it is wide it is summed as a Fourier series over the breath, whose
zeroth term is the fully mixed limb. Both tend to the exact plug-flow and mixed limits.

All of it is ours; the tests repeat it by following parcels of gas one by one.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cache
from itertools import pairwise
from typing import TypeAlias, TypeVar

import numpy as np
from scipy.special import ndtri

from engine.evidence import device, wye
from engine.physics.air import coefficients

Values: TypeAlias = np.ndarray | float
# gas volume in mL and number of stirred tanks, for each part of the way to the Y
Parts: TypeAlias = Sequence[tuple[Values, float]]

_Work: TypeAlias = "Callable[[Parts, Cycle, Emission], Arrivals]"

_TINY = 1e-12
_SMALL_ANGLE = 1e-6
_LEAST_FALL = 1.001  # peak over mean flow
_LEAST_VARIANCE = 0.01  # of the mean squared: an age known better than that is even


@dataclass(frozen=True, eq=False, kw_only=True)
class Cycle:
    """One breath as the Y sees it; each field a number or an array of n.

    inspired_ml    gas past the Y while the patient breathes in
    swept_ml       gas past the Y while the patient breathes out
    window_ml      arrivals in this first part of the inspired gas reach the patient
    peak_ratio     peak over mean of a falling inspiratory flow: 1 constant, 2 to zero
    patient_share  of the inspired gas, where a leak or bias flow takes the rest
    pause_s        between the two, when nothing moves
    """

    inspired_ml: Values
    swept_ml: Values
    window_ml: Values
    inspiratory_s: Values
    expiratory_s: Values
    peak_ratio: Values = 1.0
    patient_share: Values = 1.0
    pause_s: Values = 0.0

    @property
    def cycle_ml(self) -> Values:
        """Gas past the Y in a whole breath."""
        return self.inspired_ml + self.swept_ml

    @property
    def cycle_s(self) -> Values:
        """Time of a whole breath."""
        return self.inspiratory_s + self.pause_s + self.expiratory_s

    @property
    def turn_s(self) -> Values:
        """When the gas begins to be swept: inspiration and pause are over."""
        return self.inspiratory_s + self.pause_s


def cycle_of(
    *,
    tidal_ml: Values,
    inspiratory_s: Values,
    expiratory_s: Values,
    bias_ml_per_s: Values,
    gas_ml_per_s: Values = 0.0,
    dead_ml: Values = 0.0,
    gas_is_added: bool = False,
    bias_in_inspiration: Values = False,
    peak_ratio: Values = 1.0,
    pause_s: Values = 0.0,
) -> Cycle:
    """The breath at the Y from what a ventilator is set to.

    Gas     the generator's driving gas; part of the tidal volume unless it is added.
    Bias    runs while the patient breathes out; with ``bias_in_inspiration`` also
            while the patient breathes in, as the leak of a single-limb circuit does.
    Dead    gas between the Y and the tip of the tube: its last filling comes back out.
    """
    through_ml = bias_in_inspiration * bias_ml_per_s * inspiratory_s
    added_ml = gas_ml_per_s * inspiratory_s if gas_is_added else 0.0
    inspired_ml = tidal_ml + through_ml + added_ml
    swept_ml_per_s = np.maximum(
        bias_ml_per_s + gas_ml_per_s, float(wye.STILL_GAS_ML_PER_S)
    )
    return Cycle(
        inspired_ml=inspired_ml,
        swept_ml=swept_ml_per_s * expiratory_s,
        window_ml=inspired_ml * np.maximum(1 - dead_ml / tidal_ml, 0.0),
        inspiratory_s=inspiratory_s,
        expiratory_s=expiratory_s,
        peak_ratio=peak_ratio,
        patient_share=tidal_ml / (tidal_ml + through_ml),
        pause_s=pause_s,
    )


@dataclass(frozen=True, eq=False)
class Emission:
    """The part of the breath in which the generator puts out, evenly in time."""

    start_s: Values
    stop_s: Values


Record = TypeVar("Record", Cycle, Emission)
EMISSIONS = ("continuous", "inspiration", "expiration", "puff")


def emission_of(cycle: Cycle, kind: str) -> Emission:
    """One of EMISSIONS by name.

    Raises   ValueError for any other name.
    """
    ends = {
        "continuous": (0.0, cycle.cycle_s),
        "inspiration": (0.0, cycle.inspiratory_s),
        "expiration": (cycle.turn_s, cycle.cycle_s),
        "puff": (0.0, np.minimum(float(device.PUFF_S), cycle.inspiratory_s)),
    }
    if kind not in ends:
        raise ValueError(f"emission must be one of {', '.join(EMISSIONS)}; got {kind}")
    return Emission(*ends[kind])


@dataclass(frozen=True, eq=False)
class Arrivals:
    """Share of the output that arrives somewhere, and how old it is by then."""

    share: np.ndarray
    mean_s: np.ndarray
    variance_s2: np.ndarray

    def pick(self, index: np.ndarray | slice) -> Arrivals:
        """The same for some of the treatments."""
        return Arrivals(*(values[index] for values in vars(self).values()))

    def airborne_frac(self, loss_per_s: Values) -> np.ndarray:
        """The share that has not settled on the way.

        Shapes   n arrivals, losses (n, k) -> (n, k); one loss -> n.
        Holds    ages taken as a gamma distribution of the mean and variance known.
        """
        loss = np.asarray(loss_per_s)
        mean_s = np.maximum(self.mean_s, _TINY)
        scale_s = np.maximum(self.variance_s2 / mean_s, _LEAST_VARIANCE * mean_s)
        share, power = self.share, mean_s / scale_s
        if loss.ndim > share.ndim:  # in the precision the losses come in
            share, scale_s, power = (
                values.astype(loss.dtype)[..., None]
                for values in (share, scale_s, power)
            )
        return share * np.exp(-power * np.log(1 + loss * scale_s))


def plug_flow(volume_ml: Values, cycle: Cycle, emission: Emission) -> Arrivals:
    """What is inhaled if the limb does not disperse.

    Shapes   arrays that broadcast; returns their common shape.
    Checked  engine/evidence/published/wye_values.csv
    """
    found = _arrivals(*_moments(_inhaled(volume_ml, cycle, emission)))
    return replace(found, share=found.share * cycle.patient_share)


def mixed_frac(cycle: Cycle) -> np.ndarray:
    """What is inhaled if the limb mixes everything: the limit of a long limb."""
    return np.asarray(cycle.patient_share * cycle.window_ml / cycle.cycle_ml)


def dispersed(parts: Parts, cycle: Cycle, emission: Emission) -> Arrivals:
    """What is inhaled from a limb that disperses: the form the balance uses.

    Parts    each stretch of tubing and each stirred chamber on the way to the Y.
    Shapes   arrays of n -> n.
    Holds    what gets through the tube within 0.01 of parcels of gas followed one by
             one; a few in a thousand a little more.
    Checked  engine/evidence/published/wye_values.csv
    """
    spread = np.asarray(_spread_ml(parts) / cycle.cycle_ml)
    lasted_s = np.asarray(emission.stop_s) - np.asarray(emission.start_s)
    puff = lasted_s < float(wye.SHORT_OUTPUT_FRAC) * np.asarray(cycle.cycle_s)
    groups = [
        ((spread >= low) & (spread < high) & (puff == is_puff), work)
        for low, high, is_puff, work in _BY_SPREAD
    ]
    return _by_group(groups, parts, cycle, emission)


def _by_group(
    groups: Sequence[tuple[np.ndarray, _Work]],
    parts: Parts,
    cycle: Cycle,
    emission: Emission,
) -> Arrivals:
    """Each group worked out its own way, steady and falling flow apart."""
    n = len(groups[0][0])
    falls = np.broadcast_to(np.asarray(cycle.peak_ratio) > _LEAST_FALL, n)
    found = np.zeros((3, n))
    for where, work in groups:
        for falling in (False, True):
            index = np.flatnonzero(where & (falls == falling))
            if len(index) == 0:
                continue
            breath = _picked(cycle, index)
            if not falling:
                breath = replace(breath, peak_ratio=1.0)
            some = [(_at(volume, index), tanks) for volume, tanks in parts]
            part = work(some, breath, _picked(emission, index))
            found[:, index] = part.share, part.mean_s, part.variance_s2
    return Arrivals(*found)


def _narrow(nodes: int) -> _Work:
    """The split averaged over so many volumes."""

    def work(parts: Parts, cycle: Cycle, emission: Emission) -> Arrivals:
        found = _averaged(parts, cycle, emission, _inhaled, nodes)
        return replace(found, share=found.share * cycle.patient_share)

    return work


def _wide(harmonics: int, nodes: int) -> _Work:
    """The share from so many harmonics, the age from so many volumes.

    No volumes: where the spread is wide enough to part arrival from output.
    """

    def work(parts: Parts, cycle: Cycle, emission: Emission) -> Arrivals:
        share = series_frac(parts, cycle, emission, harmonics)
        if nodes == 0:
            return replace(_mixed_ages(parts, cycle, emission), share=share)
        found = _averaged(parts, cycle, emission, _inhaled, nodes)
        return replace(found, share=share)

    return work


_NARROW = float(wye.NARROW_SPREAD_FRAC)
_WIDE = float(wye.WIDE_SPREAD_FRAC)
_WIDEST = float(wye.WIDEST_SPREAD_FRAC)
# spread of the volume over the breath's, from and below; whether the output is short;
# how the split is summed
_BY_SPREAD: tuple[tuple[float, float, bool, _Work], ...] = (
    (0.0, _NARROW, False, _narrow(int(wye.NARROW_NODES_COUNT))),
    (_NARROW, _WIDE, False, _narrow(int(wye.VOLUME_NODES_COUNT))),
    (
        _WIDE,
        _WIDEST,
        False,
        _wide(int(wye.WIDE_HARMONICS_COUNT), int(wye.WIDE_NODES_COUNT)),
    ),
    (_WIDEST, np.inf, False, _wide(int(wye.WIDEST_HARMONICS_COUNT), 0)),
    (0.0, _WIDE, True, _narrow(int(wye.VOLUME_NODES_COUNT))),
    (_WIDE, np.inf, True, _wide(int(wye.HARMONICS_COUNT), int(wye.PUFF_NODES_COUNT))),
)


def swept(parts: Parts, cycle: Cycle, emission: Emission) -> Arrivals:
    """What passes the Y outside the window, and its age: the other part of the split.

    The share is exact only as ``1 - dispersed(...).share``; the ages are wanted.
    """
    everywhere = np.ones(len(_volume_ml(parts)), bool)
    return _by_group([(everywhere, _swept_ages)], parts, cycle, emission)


def _swept_ages(parts: Parts, cycle: Cycle, emission: Emission) -> Arrivals:
    return _averaged(parts, cycle, emission, _swept, int(wye.AGE_NODES_COUNT))


def series_frac(
    parts: Parts,
    cycle: Cycle,
    emission: Emission,
    harmonics: int = int(wye.HARMONICS_COUNT),
) -> np.ndarray:
    """What is inhaled, as a Fourier series over the breath; nothing settles.

    Each harmonic is the product of how the output sends it, how the limb damps and
    delays it and how the window receives it; a stretch of constant flow sends the
    phase of its middle times the sine of its half length over that half length.

    Holds    exact as the number of harmonics grows; a dozen do where the spread of
             the volume is above a tenth of the breath's.
    Shapes   arrays of n -> n.
    Checked  engine/evidence/published/wye_values.csv
    """
    circle = np.asarray(2 * np.pi / cycle.cycle_ml)
    half_window = np.asarray(cycle.window_ml) / 2
    received = _Sines(circle * half_window)
    shares, middles_ml, halves_ml = _stretches(cycle, emission)
    sent = _Sines(circle * halves_ml)
    turn = _Turn(circle * (middles_ml - half_window))
    damps = [(1j * circle * volume / tanks, tanks) for volume, tanks in parts]
    total = np.full(circle.shape, 0.5)
    for n in range(1, harmonics + 1):
        harmonic = (shares * sent.next() * turn.next()).sum(axis=0)
        for w, tanks in damps:
            harmonic = harmonic * _tanks(n * w, tanks)
        total += received.next() * harmonic.real
    share = 2 * total * cycle.window_ml / cycle.cycle_ml
    return np.clip(share, 0.0, 1.0) * cycle.patient_share


class _Turn:
    """exp(i x), exp(2 i x), ... one after the other."""

    def __init__(self, angle: np.ndarray) -> None:
        self._step = np.exp(1j * angle)
        self._value: np.ndarray | None = None

    def next(self) -> np.ndarray:
        value = self._step if self._value is None else self._value * self._step
        self._value = value
        return value


class _Sines:
    """sin(n x) / (n x) for n = 1, 2, ...; 1 throughout where x is 0."""

    def __init__(self, angle: np.ndarray) -> None:
        self._angle = np.maximum(angle, _SMALL_ANGLE)
        self._turn = _Turn(self._angle)
        self._n = 0

    def next(self) -> np.ndarray:
        self._n += 1
        return np.imag(self._turn.next()) / (self._n * self._angle)


# --- the breath in volume and in time --------------------------------------------


def _is_steady(cycle: Cycle) -> bool:
    return isinstance(cycle.peak_ratio, float) and cycle.peak_ratio == 1


def _falling_ratio(cycle: Cycle) -> Values:
    """Peak over mean flow; a flow that hardly falls is taken to fall a little."""
    return np.maximum(cycle.peak_ratio, _LEAST_FALL)


def _inspiratory_time_s(cycle: Cycle, position_ml: Values) -> Values:
    """When a position of the inspired gas passes the Y.

    A flow that falls evenly makes the position a parabola of time; this is its root.
    """
    ti_s = cycle.inspiratory_s
    if _is_steady(cycle):
        return position_ml * (ti_s / cycle.inspired_ml)
    steep = _falling_ratio(cycle) - 1
    vertex_s = ti_s * (steep + 1) / (2 * steep)
    per_ml = ti_s * ti_s / (steep * cycle.inspired_ml)
    left = np.maximum(vertex_s**2 - per_ml * position_ml, (vertex_s - ti_s) ** 2)
    return vertex_s - np.sqrt(left)


def _inspired_by_ml(cycle: Cycle, time_s: Values) -> np.ndarray:
    """The other way round: gas inspired by this time."""
    s = np.clip(np.asarray(time_s) / cycle.inspiratory_s, 0.0, 1.0)
    if _is_steady(cycle):
        return cycle.inspired_ml * s
    ratio = _falling_ratio(cycle)
    return cycle.inspired_ml * s * (ratio - (ratio - 1) * s)


def _expiratory_time_s(cycle: Cycle, position_ml: Values) -> Values:
    """When a position of the gas swept past the Y passes it."""
    slope = cycle.expiratory_s / cycle.swept_ml
    return cycle.turn_s + (position_ml - cycle.inspired_ml) * slope


def _swept_by_ml(cycle: Cycle, time_s: Values) -> np.ndarray:
    share = np.clip((time_s - cycle.turn_s) / cycle.expiratory_s, 0.0, 1.0)
    return cycle.inspired_ml + cycle.swept_ml * share


def time_s(cycle: Cycle, position_ml: np.ndarray) -> np.ndarray:
    """When a position of the breath passes the Y, from the start of inspiration."""
    inspired = np.minimum(position_ml, cycle.inspired_ml)
    after = np.maximum(position_ml, cycle.inspired_ml)
    return np.where(
        position_ml < cycle.inspired_ml,
        _inspiratory_time_s(cycle, inspired),
        _expiratory_time_s(cycle, after),
    )


_Clock: TypeAlias = Callable[[Cycle, np.ndarray], Values]
_Piece: TypeAlias = tuple[np.ndarray, np.ndarray, np.ndarray]


@dataclass(frozen=True, eq=False)
class _Stretch:
    """A stretch of the breath inside one phase, with the clock of that phase."""

    start_ml: Values
    stop_ml: Values
    clock: _Clock


def _outputs(cycle: Cycle, emission: Emission) -> tuple[_Stretch, _Stretch]:
    return (
        _Stretch(
            _inspired_by_ml(cycle, emission.start_s),
            _inspired_by_ml(cycle, emission.stop_s),
            _inspiratory_time_s,
        ),
        _Stretch(
            _swept_by_ml(cycle, emission.start_s),
            _swept_by_ml(cycle, emission.stop_s),
            _expiratory_time_s,
        ),
    )


def _inhaled(volume_ml: Values, cycle: Cycle, emission: Emission) -> list[_Piece]:
    put_in, put_out = _outputs(cycle, emission)
    window = _Stretch(0.0, cycle.window_ml, _inspiratory_time_s)
    met = _meeting(volume_ml, cycle, emission)
    paused = _paused(volume_ml, cycle, emission, (window,))
    return [
        met(put_in, window, 0),
        met(put_in, window, 1),
        met(put_out, window, 1),
        *paused,
    ]


def _swept(volume_ml: Values, cycle: Cycle, emission: Emission) -> list[_Piece]:
    put_in, put_out = _outputs(cycle, emission)
    late = _Stretch(cycle.window_ml, cycle.inspired_ml, _inspiratory_time_s)
    after = _Stretch(cycle.inspired_ml, cycle.cycle_ml, _expiratory_time_s)
    met = _meeting(volume_ml, cycle, emission)
    pieces = [
        met(output, window, lap)
        for output in (put_in, put_out)
        for window in (late, after)
        for lap in (0, 1)
    ]
    return pieces + _paused(volume_ml, cycle, emission, (late, after))


def _in_pause_s(cycle: Cycle, emission: Emission) -> Values:
    """How much of the output falls into the pause."""
    stop_s = np.minimum(emission.stop_s, cycle.turn_s)
    return np.maximum(stop_s - np.maximum(emission.start_s, cycle.inspiratory_s), 0.0)


def _paused(
    volume_ml: Values, cycle: Cycle, emission: Emission, windows: tuple[_Stretch, ...]
) -> list[_Piece]:
    """What is put out in a pause: all of it at one place, the end of the inspired gas.

    As in ``_meeting``: the share that arrives in each window, and its age for the
    output of the beginning and of the end of the pause.
    """
    if not np.any(cycle.pause_s):
        return []
    duration_s = np.maximum(emission.stop_s - emission.start_s, _TINY)
    share = _in_pause_s(cycle, emission) / duration_s
    gone_ml = volume_ml + cycle.inspired_ml
    laps = np.floor(gone_ml / cycle.cycle_ml)
    place_ml = gone_ml - laps * cycle.cycle_ml
    found = []
    for window in windows:
        is_here = (place_ml >= window.start_ml) & (place_ml < window.stop_ml)
        age_s = laps * cycle.cycle_s + window.clock(cycle, place_ml)
        age_s = np.where(is_here, age_s, 0.0)
        found.append(
            (share * is_here, age_s - cycle.inspiratory_s, age_s - cycle.turn_s)
        )
    return found


def _meeting(
    volume_ml: Values, cycle: Cycle, emission: Emission
) -> Callable[[_Stretch, _Stretch, int], _Piece]:
    """How an output and a window meet after the shift by ``volume_ml``.

    The function returned gives the share of the output that arrives in the window,
    and its age at either end of the overlap; age runs evenly between the two. Where
    they do not meet the share is nothing and the ages mean nothing.
    """
    cycle_ml, cycle_s = cycle.cycle_ml, cycle.cycle_s
    laps = np.floor(volume_ml / cycle_ml)
    shift_ml = volume_ml - laps * cycle_ml
    duration_s = np.maximum(emission.stop_s - emission.start_s, _TINY)

    def met(output: _Stretch, window: _Stretch, lap: int) -> _Piece:
        back_ml = lap * cycle_ml - shift_ml
        low = np.maximum(output.start_ml, window.start_ml + back_ml)
        high = np.maximum(np.minimum(output.stop_ml, window.stop_ml + back_ml), low)
        out_low, out_high = output.clock(cycle, low), output.clock(cycle, high)
        waited_s = (laps + lap) * cycle_s
        return (
            (out_high - out_low) / duration_s,
            waited_s + window.clock(cycle, low - back_ml) - out_low,
            waited_s + window.clock(cycle, high - back_ml) - out_high,
        )

    return met


def _arrivals(share: np.ndarray, first: np.ndarray, second: np.ndarray) -> Arrivals:
    """From sums of share, share x age and share x age squared."""
    safe = np.maximum(share, _TINY)
    mean_s = first / safe
    return Arrivals(share, mean_s, np.maximum(second / safe - mean_s * mean_s, 0.0))


def _moments(pieces: list[_Piece]) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Sums of share, share x age and share x age squared, age even in each piece."""
    share = sum(piece[0] for piece in pieces)
    first = sum(part * (a + b) / 2 for part, a, b in pieces)
    second = sum(part * (a * a + a * b + b * b) / 3 for part, a, b in pieces)
    return np.asarray(share), np.asarray(first), np.asarray(second)


# --- a limb that disperses -------------------------------------------------------


def _volume_ml(parts: Parts) -> np.ndarray:
    return np.asarray(sum(volume_ml for volume_ml, _ in parts))


def _spread_ml(parts: Parts) -> np.ndarray:
    """Standard deviation of the volume between generator and Y."""
    return np.sqrt(sum(np.asarray(volume) ** 2 / tanks for volume, tanks in parts))


@cache
def _normal_quantiles(n: int) -> np.ndarray:
    return ndtri((np.arange(n) + 0.5) / n)


def _volume_nodes_ml(parts: Parts, count: int) -> np.ndarray:
    """Volumes of equal weight that stand for the spread, one row of them a treatment.

    Source   WILSON_1931 for the quantiles of a gamma distribution.
    """
    volume_ml = _volume_ml(parts)
    ninth, third = coefficients(wye.GAMMA_QUANTILE_COEF)
    c = (_spread_ml(parts) / np.maximum(volume_ml, _TINY))[..., None]
    root = np.maximum(1 - c * c / ninth + _normal_quantiles(count) * (c / third), 0.0)
    nodes = root * root * root
    return nodes * (volume_ml[..., None] / nodes.mean(axis=-1, keepdims=True))


def _averaged(
    parts: Parts,
    cycle: Cycle,
    emission: Emission,
    pieces: Callable[[Values, Cycle, Emission], list[_Piece]],
    nodes: int,
) -> Arrivals:
    """The split averaged over the volumes that stand for the spread."""
    met = pieces(
        _volume_nodes_ml(parts, nodes),
        Cycle(**{k: _column(v) for k, v in vars(cycle).items()}),
        Emission(_column(emission.start_s), _column(emission.stop_s)),
    )
    return _arrivals(*(moment.mean(axis=-1) for moment in _moments(met)))


def _mixed_ages(parts: Parts, cycle: Cycle, emission: Emission) -> Arrivals:
    """Age of what is inhaled where arrival no longer depends on the time of output.

    The gas takes its volume over the mean flow, give or take how far output and window
    run ahead of the mean flow.
    """
    per_ml = cycle.cycle_s / cycle.cycle_ml
    turn_s = np.asarray(cycle.inspiratory_s - cycle.inspired_ml * per_ml)
    window_s = _inspiratory_time_s(cycle, cycle.window_ml) - cycle.window_ml * per_ml
    mean_in_s, variance_in = window_s / 2, window_s**2 / 12
    mean_out_s, variance_out = _ahead(cycle, emission, turn_s)
    return Arrivals(
        np.ones_like(turn_s),
        np.maximum(_volume_ml(parts) * per_ml + mean_in_s - mean_out_s, 0.0),
        (_spread_ml(parts) * per_ml) ** 2 + variance_in + variance_out,
    )


def _ahead(
    cycle: Cycle, emission: Emission, turn_s: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Mean and variance of how far output runs ahead of the mean flow.

    It starts at nothing, is ``turn_s`` where the inspiration ends, grows through a
    pause, and comes back.
    """

    late_s = turn_s + cycle.pause_s

    def ahead(time_s: Values) -> np.ndarray:
        rising = turn_s * time_s / cycle.inspiratory_s
        waiting = turn_s + time_s - cycle.inspiratory_s
        falling = late_s * (cycle.cycle_s - time_s) / cycle.expiratory_s
        moving = np.where(time_s < cycle.inspiratory_s, rising, falling)
        is_still = (time_s >= cycle.inspiratory_s) & (time_s < cycle.turn_s)
        return np.where(is_still, waiting, moving)

    first_s, last_s = emission.start_s, emission.stop_s
    ends = (
        first_s,
        np.clip(cycle.inspiratory_s, first_s, last_s),
        np.clip(cycle.turn_s, first_s, last_s),
        last_s,
    )
    duration_s = np.maximum(emission.stop_s - emission.start_s, _TINY)
    pieces = [
        ((last - first) / duration_s, ahead(first), ahead(last))
        for first, last in pairwise(ends)
    ]
    _, mean, square = _moments(pieces)
    return mean, np.maximum(square - mean * mean, 0.0)


def _column(values: Values) -> Values:
    return values[..., None] if isinstance(values, np.ndarray) else values


def _at(values: Values, index: np.ndarray) -> Values:
    return values[index] if isinstance(values, np.ndarray) else values


def _picked(record: Record, index: np.ndarray) -> Record:
    return replace(record, **{k: _at(v, index) for k, v in vars(record).items()})


def _stretches(
    cycle: Cycle, emission: Emission
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """The output as stretches of constant flow, on a first axis.

    Returns  share, middle in mL and half length in mL of each stretch.
    """
    pieces = 1 if _is_steady(cycle) else int(wye.FALLING_FLOW_PIECES_COUNT)
    duration_s = np.maximum(emission.stop_s - emission.start_s, _TINY)
    first_s = np.minimum(emission.start_s, cycle.inspiratory_s)
    step_s = (np.minimum(emission.stop_s, cycle.inspiratory_s) - first_s) / pieces
    ends = [_inspired_by_ml(cycle, first_s + i * step_s) for i in range(pieces + 1)]
    last_s = (
        np.maximum(emission.start_s, cycle.turn_s),
        np.maximum(emission.stop_s, cycle.turn_s),
    )
    after = [_swept_by_ml(cycle, time_s) for time_s in last_s]
    shares = [step_s / duration_s] * pieces + [(last_s[1] - last_s[0]) / duration_s]
    lows = [np.asarray(v) for v in (*ends[:-1], after[0])]
    highs = [np.asarray(v) for v in (*ends[1:], after[1])]
    if np.any(cycle.pause_s):
        shares.append(_in_pause_s(cycle, emission) / duration_s)
        lows.append(np.asarray(cycle.inspired_ml))
        highs.append(np.asarray(cycle.inspired_ml))
    low, high = np.stack(lows), np.stack(highs)
    return np.stack(shares), (low + high) / 2, (high - low) / 2


def _tanks(w: np.ndarray, tanks: float) -> np.ndarray:
    """How stirred tanks in series damp and turn one harmonic: (1 - w)^-tanks."""
    one = 1 / (1 - w)
    if tanks == 1:
        return one
    if tanks == 8:
        two = one * one
        four = two * two
        return four * four
    return one**tanks


# --- the patient's side of the Y -------------------------------------------------


def patient_side(
    *,
    tidal_ml: Values,
    inspiratory_s: Values,
    expiratory_s: Values,
    to_wye_ml: Values,
    dead_ml: Values,
    emission_start_s: Values,
    emission_stop_s: Values,
    gas_ml_per_s: Values = 0.0,
    pause_s: Values = 0.0,
    time_constant_s: Values,
) -> tuple[np.ndarray, Arrivals]:
    """What is inhaled of a generator between Y and airway.

    Output of the inspiration goes straight in, but for the last filling of the dead
    space. Output of the expiration is carried out past the Y by the gas breathed out,
    until so little is still to come that it stays; that part is inhaled next.

    To Y     gas between generator and Y; ``dead_ml`` between generator and tube tip.
    Returns  the share inhaled at once, and the share kept for the next breath.
    Holds    passive expiration with one time constant.
    Checked  engine/evidence/published/wye_values.csv
    """
    cycle_s = inspiratory_s + expiratory_s
    duration_s = np.maximum(emission_stop_s - emission_start_s, _TINY)
    stays_s = inspiratory_s + np.minimum(
        carried_out_s(tidal_ml, to_wye_ml, gas_ml_per_s, expiratory_s, time_constant_s),
        expiratory_s,
    )
    breathed_in_s = np.maximum(
        np.minimum(emission_stop_s, inspiratory_s - pause_s) - emission_start_s, 0.0
    )
    kept_s = np.maximum(
        np.minimum(emission_stop_s, cycle_s) - np.maximum(emission_start_s, stays_s),
        0.0,
    )
    at_once = breathed_in_s / duration_s * np.maximum(1 - dead_ml / tidal_ml, 0.0)
    waits = Arrivals(np.asarray(kept_s / duration_s), kept_s / 2, kept_s**2 / 12)
    return np.asarray(at_once), waits


def carried_out_s(
    tidal_ml: Values,
    to_wye_ml: Values,
    gas_ml_per_s: Values,
    expiratory_s: Values,
    time_constant_s: Values,
) -> np.ndarray:
    """Time into expiration until which output is still carried past the Y.

    From then on the gas still to come, breathed out or driving the generator, fills
    less than the way to the Y.
    """
    t = time_constant_s * np.log(np.maximum(tidal_ml / to_wye_ml, 1.0))
    for _ in range(8):
        breath_ml = tidal_ml * np.exp(-t / time_constant_s)
        surplus_ml = breath_ml + gas_ml_per_s * (expiratory_s - t) - to_wye_ml
        slope = breath_ml / time_constant_s + gas_ml_per_s
        t = t + np.maximum(surplus_ml, 0.0) / slope
    return np.asarray(t)
