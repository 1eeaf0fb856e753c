"""Which channel of a recording to use, and whether it is clipped.

Conventions: samples are floats with full scale at ±1; arrays of several channels have shape (samples,
channels); channels count from 0. Clearness is in dB, the strongest spectral line over the median of the
spectrum around it.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Samples = NDArray[np.float32]

TIE_DB = 1.0
LEAST_CLIPPED_SHARE = 1e-4

_FRAME_S = 0.085
_FRAMES = 24
_BAND_HZ = (150.0, 8000.0)
_DEAD_RATIO = 1e-4
_CLIPPED_PENALTY_DB = 30.0
_NEAR_FULL_SCALE = 0.89
_FLAT_RUN = 3
_SMOOTH_STEPS = 4.0
_TINY = 1e-30


@dataclass(frozen=True, slots=True, kw_only=True)
class Choice:
    """The chosen channel, the share of its samples that are clipped, and why it is not the first."""

    channel: int
    clipped_share: float
    reason: str | None


def choose_channel(probes: Sequence[Samples], rate_hz: int, step: float) -> Choice:
    """Choose the channel where a tone stands clearest above the noise; the first one on a tie.

    Parameters
    ----------
    probes
        One or more stretches of the recording, each (samples, channels).
    rate_hz
        Their sampling rate.
    step
        The smallest difference between two samples near full scale (see `clipped_share`).
    """
    channels = range(probes[0].shape[1])
    clipped = [_mean_clipped_share([probe[:, channel] for probe in probes], step) for channel in channels]
    if len(channels) == 1:
        return Choice(channel=0, clipped_share=clipped[0], reason=None)
    swings = [max(float(np.ptp(probe[:, channel])) for probe in probes) for channel in channels]
    dead = [swing <= _DEAD_RATIO * max(swings) for swing in swings]
    scores = [
        -np.inf if dead[channel] else _score_db([p[:, channel] for p in probes], rate_hz, clipped[channel])
        for channel in channels
    ]
    best = next(channel for channel in channels if scores[channel] >= max(scores) - TIE_DB)
    reason = (
        None
        if best == 0
        else _reason(first_dead=dead[0], first_clipped=clipped[0], chosen_clipped=clipped[best])
    )
    return Choice(channel=best, clipped_share=clipped[best], reason=reason)


def clearness_db(probes: Sequence[Samples], rate_hz: int) -> float:
    """Return how far the strongest line stands over the median of the spectrum in loud frames, in dB.

    Every probe is one channel, shape (samples,), at least 0.1 s long.
    """
    length = 2 ** int(np.log2(_FRAME_S * rate_hz))
    frames = np.concatenate([_frames(probe, length, -(-_FRAMES // len(probes))) for probe in probes])
    spectra = np.abs(np.fft.rfft(frames * np.hanning(length).astype(np.float32), axis=1)) ** 2
    first, last = (int(edge * length / rate_hz) for edge in _BAND_HZ)
    band = spectra[:, first : last + 1] + _TINY
    power = band.sum(axis=1)
    loud = band[power >= np.median(power)]
    return float(np.mean(10.0 * np.log10(loud.max(axis=1) / np.median(loud, axis=1))))


def clipped_share(samples: Samples, step: float) -> float:
    """Return the share of samples that lie on a flat top cut off near full scale, 0 to 1.

    A flat top is a run of three or more samples at the file's own extreme value, from which the wave falls
    away by more than four quantisation steps: a smooth crest, rounded to whole steps, does not. `step` is
    one quantisation step.
    """
    flat = _flat_samples(samples, step) + _flat_samples(-samples, step)
    return flat / len(samples)


def _mean_clipped_share(probes: Sequence[Samples], step: float) -> float:
    return float(np.mean([clipped_share(probe, step) for probe in probes]))


def _score_db(probes: Sequence[Samples], rate_hz: int, clipped: float) -> float:
    return clearness_db(probes, rate_hz) - (_CLIPPED_PENALTY_DB if clipped > LEAST_CLIPPED_SHARE else 0.0)


def _reason(*, first_dead: bool, first_clipped: float, chosen_clipped: float) -> str:
    if first_dead:
        return "channel 1 is silent"
    if first_clipped > LEAST_CLIPPED_SHARE >= chosen_clipped:
        return "channel 1 is clipped"
    return "clearer"


def _frames(samples: Samples, length: int, most: int) -> Samples:
    """Return up to `most` frames spread evenly over the samples, shape (frames, length)."""
    last = len(samples) - length
    starts = np.linspace(0, last, min(most, 1 + last // (length // 2))).astype(int)
    return np.stack([samples[start : start + length] for start in starts])


def _flat_samples(samples: Samples, step: float) -> int:
    """Count the samples that lie on cut-off positive crests."""
    top = samples.max()
    if top < _NEAR_FULL_SCALE:
        return 0
    edges = np.flatnonzero(np.diff(samples >= top, prepend=False, append=False))
    starts, stops = edges[::2], edges[1::2]
    before, after = samples[np.maximum(starts - 1, 0)], samples[np.minimum(stops, len(samples) - 1)]
    cut = top - np.minimum(before, after) > _SMOOTH_STEPS * step
    runs = (stops - starts)[cut]
    return int(runs[runs >= _FLAT_RUN].sum())
