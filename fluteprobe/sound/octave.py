"""Which octave: the fundamental that the lines of a tone themselves support.

Conventions: orders are multiples of the pitch in question; halves and thirds are asked for too. "Steady" is
what `partials.lines` tells from noise.

A weak fundamental is a steady line however weak; a bump of breath noise at half the frequency is none,
however strong. So a coarse pitch is led down where steady lines stand at the odd multiples of its half (or
its third), and up where no line but the even multiples (or those of three) is steady.
"""

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.partials import (
    Floats,
    Samples,
    Tracks,
    demodulate,
    lines,
    orders_below_nyquist,
    standing,
)
from fluteprobe.sound.pitch import guide_phase, refine

LOWEST_FUNDAMENTAL_HZ = 85.0

_LONGEST_S = 1.2
_ORDERS = 9
# Windows of so many periods put the places between the multiples on zeros of their neighbours.
_PARTS = {2: (8, np.array([0.5, 1.5, 2.5])), 3: (9, np.array([1 / 3, 2 / 3, 4 / 3, 5 / 3]))}
_LEAST_DB = -50.0
_ALONE = 8.0
_GATHERED = 0.5
_SAME_DB = 8.0
_SURE = 1e-6
# A breath resonance of quality 50 is as narrow as the lines of so many cycles: fewer need a surer line.
_TELLING_CYCLES = 400.0
_SURE_OF_FEW = 1e-12
_SURE_OF_TWO = 1e-5
_LIKELY = 1e-3


def settle_octave(samples: Samples, rate_hz: int, frequency_hz: float) -> float:
    """Return the fundamental of a tone from a coarse pitch that may be a multiple or a part of it.

    Parameters
    ----------
    samples
        The steady tone, shape (samples,); its middle 1.2 s is asked.
    frequency_hz
        The coarse pitch, within about half a semitone of the fundamental or of a low multiple or part.
    """
    spare = max(len(samples) - int(_LONGEST_S * rate_hz), 0) // 2
    samples = samples[spare : len(samples) - spare]
    frequency_hz = refine(samples, rate_hz, frequency_hz)
    for _ in range(3):
        tracks = demodulate(
            samples, rate_hz, frequency_hz, orders_below_nyquist(rate_hz, frequency_hz, _ORDERS)
        )
        times = _part(samples, tracks) or _multiple(tracks)
        if times is None:
            break
        frequency_hz = refine(samples, rate_hz, frequency_hz * times)
    return frequency_hz


def _part(samples: Samples, tracks: Tracks) -> float | None:
    """Return 1/2 or 1/3 if steady lines stand between the multiples of the pitch."""
    phase = guide_phase(tracks)
    cycles = len(samples) / tracks.rate_hz * tracks.frequency_hz
    sure = _SURE if cycles > _TELLING_CYCLES else _SURE_OF_FEW
    least = _power(tracks).sum() * 10.0 ** (_LEAST_DB / 10.0)
    for parts, (periods, orders) in _PARTS.items():
        if tracks.frequency_hz / parts < LOWEST_FUNDAMENTAL_HZ:
            continue
        between = demodulate(samples, tracks.rate_hz, tracks.frequency_hz, orders, periods)
        loud = _power(between) > least
        if not loud.any():
            continue
        line = lines(standing(between, np.interp(between.time_s, tracks.time_s, phase)))
        alone = loud & (line.prominence > _ALONE)
        chance = np.sort(np.where(alone, line.chance, 1.0))
        if chance[0] < sure or chance[1] < _SURE_OF_TWO:
            return 1.0 / parts
    return None


def _multiple(tracks: Tracks) -> float | None:
    """Return 2 or 3 if only those multiples of the pitch are lines, steady or swinging in loudness."""
    line, power = lines(standing(tracks, guide_phase(tracks))), _power(tracks)
    loud = power > power.max() * 10.0 ** (_LEAST_DB / 10.0)
    swinging = (line.gathered > _GATHERED) & (line.prominence > 1.0)
    steady: NDArray[np.bool_] = loud & ((line.chance < _LIKELY) | swinging)
    for times in (2, 3):
        multiples = tracks.orders % times == 0
        if np.any(steady & multiples) and not np.any(steady & ~multiples):
            return float(times)
    return None


def _power(tracks: Tracks) -> Floats:
    return np.asarray(np.mean(np.abs(tracks.phasors) ** 2, axis=0))


def is_one_tone(before: Samples, after: Samples, rate_hz: int, lower_hz: float) -> bool:
    """Whether two neighbouring stretches, read an octave or a twelfth apart, hold the same lines.

    The lower of the two pitches has lines that the higher has not. If they are as strong (within 8 dB)
    against the rest on both sides, nothing broke: it is one tone, whose octave a short stretch hid.
    """
    orders = orders_below_nyquist(rate_hz, lower_hz, _ORDERS)
    shares = []
    for samples in (before, after):
        power = _power(demodulate(samples, rate_hz, lower_hz, orders))
        extra = power[(orders % 2 != 0) & (orders % 3 != 0)].sum()
        shares.append(10.0 * np.log10((extra + 1e-20) / (power.sum() + 1e-20)))
    return bool(abs(shares[0] - shares[1]) < _SAME_DB)
