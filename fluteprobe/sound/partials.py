"""Partials as slowly turning phasors: a tone is taken apart, measured, and put together again.

Conventions: orders are multiples of the fundamental (1 is the fundamental; halves and thirds are asked for
when octaves are checked). A track is sampled once a hop; frames are Hann-windowed, `PERIODS` periods of the
fundamental long, with half overlap, so that frame m is centred on sample `(m + 1) * hop`. Phasors have the
amplitude of the partial (peak, not rms) and its phase against a steady oscillation at order × frequency.

A window of a whole number of periods puts the other partials on its zeros (Harris, Proc. IEEE 66, 51
(1978)): each partial is read undisturbed, and its noise is that of a band of 1.5 / (frame length).
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Samples = NDArray[np.float32]

PERIODS = 5
HIGHEST_PARTIAL_HZ = 20000.0
MOST_PARTIALS = 14

# Noise of neighbouring half-overlapped Hann frames correlates by 1/6 (sum of w(n) w(n + hop) over sum of w²).
OVERLAP_CORRELATION = 1.0 / 6.0

_NEIGHBOURS = 8
_FEWEST_FRAMES = 9
_SMOOTHING = 9
_STRAYING_RAD = 0.02  # of the fundamental's phase, over a period
_CHANCE = 1e-4
_SWING_HZ = 12.0
_GATHERED = 0.9


@dataclass(frozen=True, slots=True, kw_only=True)
class Partial:
    """One harmonic of a tone: its order (1 is the fundamental), frequency, and level re the strongest."""

    order: int
    frequency_hz: float
    level_db: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Tracks:
    """Phasors of some partials over time, (frames, orders); frame m is centred on `(m + 1) * hop`."""

    rate_hz: int
    frequency_hz: float
    hop: int
    orders: Floats
    phasors: Complexes

    @property
    def hop_s(self) -> float:
        """Seconds from one frame to the next."""
        return self.hop / self.rate_hz

    @property
    def time_s(self) -> Floats:
        """Centres of the frames, from the first sample, shape (frames,)."""
        return np.arange(1, len(self.phasors) + 1, dtype=np.float64) * self.hop_s


def orders_below_nyquist(rate_hz: int, frequency_hz: float, most: int = MOST_PARTIALS) -> Floats:
    """Return the orders 1, 2, 3 … whose partials the recording can hold."""
    highest = min(HIGHEST_PARTIAL_HZ, 0.47 * rate_hz)
    return np.arange(1.0, max(min(most, int(highest / frequency_hz)), 1) + 1.0, dtype=np.float64)


def demodulate(
    samples: Samples, rate_hz: int, frequency_hz: float, orders: Floats, periods: int = PERIODS
) -> Tracks:
    """Read the phasors of the given orders of `frequency_hz` along the samples.

    One matrix product does it: the samples as rows of one hop, against windowed cosines and sines.
    """
    hop = max(round(0.5 * periods * rate_hz / frequency_hz), 1)
    rows = samples[: len(samples) // hop * hop].reshape(-1, hop)
    turning = rows @ _windowed_waves(rate_hz, frequency_hz, hop, orders)
    count = len(orders)
    first, second = turning[:-1, : 2 * count], turning[1:, 2 * count :]
    parts = (first + second).astype(np.float64)
    centres = (np.arange(len(parts)) + 1.0) * hop
    turned = unturning(np.asarray(2.0 * np.pi * frequency_hz / rate_hz * centres), orders)
    phasors = (parts[:, :count] + 1j * parts[:, count:]) * turned
    return Tracks(rate_hz=rate_hz, frequency_hz=frequency_hz, hop=hop, orders=orders, phasors=phasors)


def unturning(phase_rad: Floats, orders: Floats) -> Complexes:
    """Return exp(-j order × phase), shape (frames, orders): what makes partials stand still.

    For orders 1, 2, 3 … the powers of the first are multiplied up, which is many times faster.
    """
    if np.array_equal(orders, np.arange(1.0, len(orders) + 1.0)):
        once = np.exp(-1j * phase_rad)
        return np.cumprod(np.broadcast_to(once[:, None], (len(once), len(orders))), axis=1)
    return np.asarray(np.exp(-1j * phase_rad[:, None] * orders))


def standing(tracks: Tracks, phase_rad: Floats) -> Tracks:
    """Return the phasors with order × `phase_rad` (frames,) taken out: a partial of the tone stands still."""
    return replace(tracks, phasors=tracks.phasors * unturning(phase_rad, tracks.orders))


def undimmed(tracks: Tracks, phase_rad: Floats) -> Tracks:
    """Return the phasors with what a moving pitch takes from them put back.

    A Hann window that is off a partial's frequency by x lines reads sinc(x) / (1 - x²) of it (Harris 1978);
    the slope of the phase (frames,) tells x, a frame being two hops long.
    """
    off = np.clip(np.outer(np.gradient(phase_rad) / np.pi, tracks.orders), -0.9, 0.9)
    return replace(tracks, phasors=tracks.phasors * ((1.0 - off**2) / np.sinc(off)))


def quick_length(longest: int) -> int:
    """Return the greatest quick FFT length up to `longest`: a small odd times a power of two."""
    powers = [odd << max((longest // odd).bit_length() - 1, 0) for odd in (1, 3, 5, 9, 15)]
    return max(length for length in powers if length <= longest)


def _windowed_waves(rate_hz: int, frequency_hz: float, hop: int, orders: Floats) -> Samples:
    """Return windowed cosines and minus sines over both halves of a frame, shape (hop, 4 orders)."""
    n = np.arange(-hop, hop, dtype=np.float64)
    window = 0.5 * (1.0 + np.cos(np.pi * n / hop)) * (2.0 / hop)
    turning = unturning(2.0 * np.pi * frequency_hz / rate_hz * n, orders) * window[:, None]
    waves = np.concatenate([turning.real, turning.imag], axis=1)
    return np.concatenate([waves[:hop], waves[hop:]], axis=1).astype(np.float32)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Lines:
    """What the spectrum of standing phasors says of each order, shapes (orders,).

    `chance` is the probability that noise alone looks like this line; `prominence` the line's power over
    that of the strongest other line in the order's whole band; `gathered` the share of the band's power that
    lies within a vibrato's reach of the middle.
    """

    chance: Floats
    prominence: Floats
    gathered: Floats


def lines(still: Tracks) -> Lines:
    """Tell steady lines from noise in standing phasors.

    A partial of the tone gathers its power in the middle of its phasors' spectrum (Hann-tapered, so that slow
    changes stay within two lines), while noise is as strong in the 2n lines about it. Under noise alone the
    ratio of the two has the F distribution with 2 and 4n degrees of freedom, whose upper tail is (1 + ratio /
    2n)^-2n (Percival & Walden, Spectral Analysis for Physical Applications, 1993, ch. 10); the taper leaves
    two thirds of the lines independent.
    """
    count = quick_length(max(len(still.phasors), 1))
    if count < _FEWEST_FRAMES:
        nothing = np.zeros(len(still.orders))
        return Lines(chance=nothing + 1.0, prominence=nothing, gathered=nothing)
    power = np.abs(np.fft.fft(still.phasors[:count] * np.hanning(count + 2)[1:-1, None], axis=0)) ** 2
    middle = np.max(power[[-1, 0, 1]], axis=0)
    beside = min(_NEIGHBOURS, (count - 1) // 2)
    noise = np.concatenate([power[3 : beside + 1], power[count - beside : count - 2]])
    freedom = len(noise) / 1.5
    reach = min(max(round(_SWING_HZ * count * still.hop_s), 3), (count - 1) // 2)
    within = power[: reach + 1].sum(axis=0) + power[count - reach :].sum(axis=0)
    ratio = middle / np.maximum(noise.mean(axis=0), 1e-30)
    return Lines(
        chance=np.minimum(3.0 * (1.0 + ratio / freedom) ** -freedom, 1.0),
        prominence=middle / np.maximum(power[3 : count - 2].max(axis=0), 1e-30),
        gathered=within / np.maximum(power.sum(axis=0), 1e-30),
    )


def noise_powers(still: Tracks) -> Floats:
    """Return the noise power in each order's phasors, E |n|² (orders,), from what changes within a hop.

    Of standing phasors x, x(m) - (x(m-2) + x(m+2)) / 2 holds 1.5 times the noise of one frame and next to
    nothing of a slow change.
    """
    rough = still.phasors[2:-2] - 0.5 * (still.phasors[:-4] + still.phasors[4:])
    return np.asarray(np.mean(np.abs(rough) ** 2, axis=0) / 1.5)


def amplitudes(still: Tracks) -> Floats:
    """Return the root-mean-square phasor of each order that is no chance, its noise taken off; 0 elsewhere.

    Loudness that swings spreads a line over its neighbours, so one that holds nine tenths of its band's power
    within a vibrato's reach counts too (a bump of breath noise would have to be under 4 Hz wide for that).
    """
    power = np.mean(np.abs(still.phasors) ** 2, axis=0) - noise_powers(still)
    line = lines(still)
    told = ((line.chance < _CHANCE) | (line.gathered > _GATHERED)) & (power > 0.0)
    return np.sqrt(np.where(told, power, 0.0))


def partials_of(frequency_hz: float, orders: Floats, amplitude: Floats) -> tuple[Partial, ...]:
    """Return the partials that are there, levels against the strongest."""
    strongest = amplitude.max(initial=0.0)
    return tuple(
        Partial(
            order=int(k), frequency_hz=float(k * frequency_hz), level_db=float(20.0 * np.log10(a / strongest))
        )
        for k, a in zip(orders, amplitude, strict=True)
        if a > 0.0
    )


def without_partials(
    samples: Samples, still: Tracks, phase: Callable[[Floats], Floats], told: NDArray[np.bool_]
) -> Samples:
    """Take the told partials out of the samples, with their slow changes of frequency and amplitude.

    The phasors, standing against the fundamental's `phase` (rad at given s), are smoothed over about twenty
    periods, so that only noise very near a partial goes with it, and put together in frames of two periods
    (of one where the pitch strays from the tracks' frequency): what is left by a pitch that moves within a
    frame falls on other partials' places, never between them.
    """
    if not told.any():
        return samples
    hop, at, seen = _frames(len(samples), still, phase, 1.0)
    if np.max(np.abs(np.diff(seen))) > _STRAYING_RAD:
        hop, at, seen = _frames(len(samples), still, phase, 0.5)
    turned = seen + 2.0 * np.pi * still.frequency_hz * at
    last = int(np.flatnonzero(told)[-1]) + 1
    turning = unturning(-turned, still.orders[:last])[:, told[:last]]
    now = _interpolated(at, still.time_s, _smoothed(still.phasors[:, told])) * turning
    parts = np.concatenate([now.real, now.imag], axis=1).astype(np.float32)
    model = parts @ _waves(still, hop, still.orders[told])
    whole = (model[:-1, hop:] + model[1:, :hop]).reshape(-1)[: len(samples)]
    return np.subtract(samples, whole, out=whole)


def _frames(
    count: int, still: Tracks, phase: Callable[[Floats], Floats], periods: float
) -> tuple[int, Floats, Floats]:
    """Return the hop in samples that is so many periods long, the frames' centres in s, and phase there."""
    hop = max(round(periods * still.rate_hz / still.frequency_hz), 2)
    at = np.arange(count // hop + 2) * hop / still.rate_hz
    return hop, at, phase(at)


def _waves(tracks: Tracks, hop: int, orders: Floats) -> Samples:
    """Return windowed cosines and minus sines over one frame of two hops, shape (2 orders, 2 hop)."""
    n = np.arange(-hop, hop, dtype=np.float64)
    window = 0.5 * (1.0 + np.cos(np.pi * n / hop))
    turning = unturning(2.0 * np.pi * tracks.frequency_hz / tracks.rate_hz * n, orders) * window[:, None]
    return np.concatenate([turning.real, turning.imag], axis=1).T.astype(np.float32)


def _smoothed(still: Complexes) -> Complexes:
    """Smooth phasors along time by a Hann-weighted mean; towards the ends the mean grows shorter."""
    width = min(_SMOOTHING, (len(still) - 1) // 2 * 2 + 1)
    weights = np.hanning(width + 2)[1:-1]
    weights /= weights.sum()
    half = width // 2
    padded = np.concatenate(
        [2 * still[0] - still[half:0:-1], still, 2 * still[-1] - still[-2 : -2 - half : -1]]
    )
    return np.asarray(np.lib.stride_tricks.sliding_window_view(padded, width, axis=0) @ weights)


def _interpolated(at: Floats, time_s: Floats, values: Complexes) -> Complexes:
    """Interpolate columns linearly, held at the ends."""
    place = np.clip((at - time_s[0]) / (time_s[1] - time_s[0]), 0.0, len(time_s) - 1.0)
    left = np.minimum(place.astype(np.intp), len(time_s) - 2)
    part = (place - left)[:, None]
    return np.asarray((1.0 - part) * values[left] + part * values[left + 1])
