"""Breath resonances: the bumps that the resonances of the air column leave in the breath noise.

Conventions: frequencies in Hz, widths at half power in Hz, prominence in dB over the noise to either side.
`chance` is the probability that noise without a bump shows one as strong anywhere in the searched range.

The jet's turbulence excites every resonance of the air column, also those that do not sound. With the
partials taken out, the residual's spectrum is averaged over overlapping segments (Welch, IEEE Trans. Audio
Electroacoust. 15, 70 (1967)); such an average is chi-square distributed, so that the ratio of a few lines to
those on either side has an F distribution. What stands out by more than chance is a bump, unless it is

- within reach of a partial, where what was left of the partial could be taken for it;
- a steady line (mains hum, a whistle): its power hardly changes from segment to segment, while that of
  noise changes as much as its mean;
- as strong in the room when nobody plays, where the recording has such a pause.

A fan's hiss and a room's reverberation have no bumps as narrow as an air column's.
"""

from dataclasses import dataclass
from math import erfc, log10, sqrt

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.hum import nearest_hum_hz
from fluteprobe.sound.partials import quick_length
from fluteprobe.sound.thinning import thinned

Floats = NDArray[np.float64]
Samples = NDArray[np.float32]

PERIODS = 44
LOWEST_RATIO = 0.2
HIGHEST_RATIO = 3.6
HIGHEST_LINE = 4.0  # of the spectrum that is looked at, in multiples of the fundamental
PARTIAL_CORE = 0.065
PARTIAL_REACH = 0.1
CHANCE = 0.01

_FEWEST_SEGMENTS = 4
_SHORTEST = 16
_LOWEST_HZ = 70.0
_PEAK = 1
_GAP = 2
_FLANK = 5
_FEWEST_LINES = 3
_CORE = 0.03
_VALLEY = (0.14, 0.36)
# Hann-windowed segments with half overlap: 0.95 of them count as independent; of neighbouring lines, 1 / 1.5
# (Percival & Walden, Spectral Analysis for Physical Applications, 1993, secs. 6.10, 6.17).
_SEGMENT_SHARE = 0.95
_LINE_SHARE = 1.0 / 1.5
_STEADY_CV = 0.35
_ROOM_MARGIN = 2.0
_STANDING_OUT = 30.0
_AT_ONCE_SAMPLES = 16384  # what is in between stays in the processor's own memory


@dataclass(frozen=True, slots=True, kw_only=True)
class BreathResonance:
    """A bump that a resonance of the air column leaves in the breath noise."""

    frequency_hz: float
    width_hz: float
    prominence_db: float
    chance: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class NoiseSpectrum:
    """An averaged spectrum of noise: power (lines,) at `line_hz` apart, from `segments` segments.

    `variation` is how much each line's power changes between segments, standard deviation over mean. A
    sine of amplitude A has the power (A / 4 × segment length)² at its line.
    """

    line_hz: float
    power: Floats
    variation: Floats
    segments: int
    length: int


def segment_length(count: int, rate_hz: int, frequency_hz: float) -> int:
    """Return the length of the segments to average over: some forty periods, fewer in a short tone."""
    longest = int(min(PERIODS * rate_hz / frequency_hz, 2.0 * count / (_FEWEST_SEGMENTS + 1)))
    return quick_length(max(longest, 1))


def noise_spectrum(
    residual: Samples, rate_hz: int, length: int, highest_hz: float | None = None
) -> NoiseSpectrum | None:
    """Average the spectrum of noise over half-overlapping segments; None if it is too short for one.

    Lines above `highest_hz` are left out where it is given.
    """
    if length < _SHORTEST or len(residual) < length:
        return None
    step = 1 if highest_hz is None else _thinning(length, rate_hz / highest_hz)
    noise = thinned(residual, step)
    short = length // step
    last = short if highest_hz is None else int(highest_hz * length / rate_hz) + 1
    window = (np.hanning(short + 2)[1:-1] * step).astype(np.float32)
    segments = np.lib.stride_tricks.sliding_window_view(noise, short)[:: short // 2]
    at_once = max(_AT_ONCE_SAMPLES // short, 1)
    lines = [
        np.fft.rfft(segments[first : first + at_once] * window, axis=1)[:, :last]
        for first in range(0, len(segments), at_once)
    ]
    power = np.concatenate([np.square(part.real) + np.square(part.imag) for part in lines])
    mean = power.mean(axis=0, dtype=np.float64)
    return NoiseSpectrum(
        line_hz=rate_hz / length,
        power=mean,
        variation=power.std(axis=0, dtype=np.float64) / np.maximum(mean, 1e-30),
        segments=len(segments),
        length=length,
    )


def _thinning(length: int, samples_a_cycle: float) -> int:
    """Return how many samples may be averaged into one, a power of two that divides the segment.

    The highest line keeps eight of the longer samples a cycle: averaging then lowers it by 0.2 dB, and what
    folds down on it by 18 dB.
    """
    step = 1
    while step * 16 <= samples_a_cycle and length % (2 * step) == 0:
        step *= 2
    return step


def breath_resonances(
    spectrum: NoiseSpectrum, frequency_hz: float, room: NoiseSpectrum | None = None
) -> tuple[BreathResonance, ...]:
    """Find the bumps of a residual's spectrum, low to high.

    Parameters
    ----------
    spectrum, frequency_hz
        The noise of a tone, and the tone's fundamental; nothing is said about the noise right beside a
        partial's place.
    room
        The noise of the room on the same lines, when nobody plays.
    """
    ratio = np.arange(len(spectrum.power)) * spectrum.line_hz / frequency_hz
    usable = (ratio > LOWEST_RATIO) & (ratio < HIGHEST_RATIO) & (ratio * frequency_hz > _LOWEST_HZ)
    usable &= np.abs(ratio - np.round(ratio)) > PARTIAL_CORE
    prominence, chance = _prominence(spectrum, usable)
    noisy = spectrum.variation > _STEADY_CV
    if room is not None:
        noisy &= spectrum.power > _ROOM_MARGIN * room.power
    under = _under_partials(spectrum, np.asarray(ratio), noisy)
    chance = np.where(usable & noisy, np.minimum(chance * max(int(usable.sum() * _LINE_SHARE), 1), 1.0), 1.0)
    between = [_bump(spectrum, line, prominence, chance) for line in _peaks(prominence, chance)]
    return tuple(sorted([*between, *under], key=lambda bump: bump.frequency_hz))


def steady_lines(spectrum: NoiseSpectrum, frequency_hz: float) -> list[tuple[float, float]]:
    """Return frequency and amplitude of steady lines away from the partials, strongest first; hum is none."""
    power = spectrum.power
    ratio = np.arange(len(power)) * spectrum.line_hz / frequency_hz
    apart = (np.abs(ratio - np.round(ratio)) > PARTIAL_REACH) & (ratio > LOWEST_RATIO)
    leads = np.zeros(len(power), bool)
    leads[1:-1] = (power[1:-1] > power[:-2]) & (power[1:-1] >= power[2:])
    beside = np.minimum(np.roll(power, 4), np.roll(power, -4))
    steady = apart & leads & (spectrum.variation < _STEADY_CV) & (power > _STANDING_OUT * beside)
    amplitude = 4.0 * np.sqrt(power) / spectrum.length
    found = [(_peak_hz(spectrum, int(i)), float(amplitude[i])) for i in np.flatnonzero(steady)]
    return sorted(
        (line for line in found if not _is_hum(line[0], spectrum.line_hz)), key=lambda line: -line[1]
    )


def _is_hum(frequency_hz: float, line_hz: float) -> bool:
    return any(abs(frequency_hz - hum) < 0.6 * line_hz for hum in nearest_hum_hz(frequency_hz))


def _under_partials(
    spectrum: NoiseSpectrum, ratio: Floats, noisy: NDArray[np.bool_]
) -> list[BreathResonance]:
    """Find the resonances that partials 1 to 3 stand on, from the noise on both of their skirts.

    The lines nearest to the partial are left out, where what is left of it may be; the skirts' quieter side
    is held against the louder of the two valleys, so that a slope is no skirt. Their width is not told.
    """
    found = []
    freedom = 2.0 * _SEGMENT_SHARE * spectrum.segments * _LINE_SHARE
    for order in (1, 2, 3):
        offset = ratio - order
        sides = [noisy & (side * offset > _CORE) & (side * offset <= PARTIAL_REACH) for side in (-1, 1)]
        valleys = [noisy & (side * offset > _VALLEY[0]) & (side * offset < _VALLEY[1]) for side in (-1, 1)]
        if min(int(part.sum()) for part in (*sides, *valleys)) < _FEWEST_LINES:
            continue
        skirt = min(float(spectrum.power[side].mean()) for side in sides)
        floor = max(float(spectrum.power[valley].mean()) for valley in valleys)
        lines = [np.array([min(float(part.sum()) for part in parts)]) for parts in (sides, valleys)]
        chance = float(_f_tail(np.array([skirt / floor]), freedom * lines[0], freedom * lines[1])[0])
        if chance < CHANCE:
            found.append(
                BreathResonance(
                    frequency_hz=order * float(spectrum.line_hz / ratio[1]),
                    width_hz=2.0 * PARTIAL_REACH * float(spectrum.line_hz / ratio[1]),
                    prominence_db=10.0 * log10(skirt / floor),
                    chance=chance,
                )
            )
    return found


def _prominence(spectrum: NoiseSpectrum, usable: NDArray[np.bool_]) -> tuple[Floats, Floats]:
    """Return each line's level over the louder of its two sides, in nepers of power, and its chance.

    The louder side, so that a slope or the skirt of a neighbouring partial is no bump.
    """
    power = np.where(usable, spectrum.power, 0.0)
    peak, peak_lines = _windowed(power, usable, -_PEAK, _PEAK)
    left, left_lines = _windowed(power, usable, -_GAP - _FLANK, -_GAP - 1)
    right, right_lines = _windowed(power, usable, _GAP + 1, _GAP + _FLANK)
    prominence = np.log(np.maximum(peak, 1e-30) / np.maximum(np.maximum(left, right), 1e-30))
    freedom = 2.0 * _SEGMENT_SHARE * spectrum.segments * _LINE_SHARE
    chance = _f_tail(np.exp(prominence), freedom * peak_lines, freedom * np.minimum(left_lines, right_lines))
    measured = usable & (peak_lines > _PEAK) & (np.minimum(left_lines, right_lines) >= _FEWEST_LINES)
    return np.where(measured, prominence, -np.inf), np.where(measured, chance, 1.0)


def _windowed(power: Floats, usable: NDArray[np.bool_], low: int, high: int) -> tuple[Floats, Floats]:
    """Return the mean of the usable lines from `low` to `high` about each line, and how many they are."""
    place = np.arange(len(power))
    first, after = (np.clip(place + edge, 0, len(power)) for edge in (low, high + 1))

    def summed(values: Floats) -> Floats:
        up_to = np.concatenate([[0.0], np.cumsum(values)])
        return np.asarray(up_to[after] - up_to[first])

    lines = summed(usable.astype(np.float64))
    return summed(power) / np.maximum(lines, 1.0), lines


def _f_tail(ratio: Floats, above: Floats, below: Floats) -> Floats:
    """Return the upper tail of the F distribution, nearly (Paulson, Ann. Math. Statist. 13, 233 (1942))."""
    a, b = 2.0 / (9.0 * np.maximum(above, 1.0)), 2.0 / (9.0 * np.maximum(below, 1.0))
    root = np.cbrt(np.minimum(ratio, 1e12))
    z = ((1.0 - b) * root - (1.0 - a)) / np.sqrt(b * root**2 + a)
    return np.array([0.5 * erfc(value / sqrt(2.0)) for value in z])


def _peaks(prominence: Floats, chance: Floats) -> list[int]:
    """Return the lines that lead their surroundings and are less than a matter of chance."""
    reach = _GAP + 1
    padded = np.pad(prominence, reach, constant_values=-np.inf)
    leading = np.lib.stride_tricks.sliding_window_view(padded, 2 * reach + 1).max(axis=1) == prominence
    return np.flatnonzero(leading & (chance < CHANCE)).tolist()


def _peak_hz(spectrum: NoiseSpectrum, line: int) -> float:
    """Return where a parabola through the log powers of a line and its neighbours is highest."""
    lower, middle, upper = np.log(np.maximum(spectrum.power[line - 1 : line + 2], 1e-30))
    curvature = lower - 2.0 * middle + upper
    shift = float(np.clip(0.5 * (lower - upper) / curvature, -1.0, 1.0)) if curvature < 0.0 else 0.0
    return (line + shift) * spectrum.line_hz


def _bump(spectrum: NoiseSpectrum, line: int, prominence: Floats, chance: Floats) -> BreathResonance:
    """Return the bump at a line, its width at half power."""
    half = spectrum.power[line - 1 : line + 2].max() / 2.0
    low = high = line
    while low > 0 and spectrum.power[low - 1] > half:
        low -= 1
    while high < len(spectrum.power) - 1 and spectrum.power[high + 1] > half:
        high += 1
    return BreathResonance(
        frequency_hz=_peak_hz(spectrum, line),
        width_hz=(high - low + 1) * spectrum.line_hz,
        prominence_db=float(10.0 / np.log(10.0) * prominence[line]),
        chance=float(chance[line]),
    )
