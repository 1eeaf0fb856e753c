"""The quality of a take: what room, microphone and recorder did to it, in plain words and with what to do.

Conventions: samples are one channel, full scale ±1; tones are (start, stop) sample numbers, stop excluded;
levels in dB re full scale, 0 for power 1. Blocks are 10 ms long. "High" levels are those of the differenced
samples, which leaves rumble and hum out. A pause is what lies before, between and after tones.

Each fault is told by what only it does:

- wind: gusts under about 40 Hz that come and go;
- mains hum: lines at multiples of 50 or 60 Hz, each against the F distribution of its neighbours;
- a lossy format: the noise ends at a wall far under half the sampling rate;
- automatic gain: the noise in a pause rises after a tone, or is lower after a loud attack than before it;
- noise reduction: a pause much more silent than any microphone is, or whose noise stops at a stroke.

What concerns one tone alone is told by `tone_quality`. Thresholds stand well beyond what chance alone does
(chances under 1e-4 a take where they can be calculated); what was counted on takes with and without each
fault is in DEVELOPERS.md.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import chain, pairwise

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.hum import MAINS_HZ
from fluteprobe.sound.quantile import median, quantile

Floats = NDArray[np.float64]
Samples = NDArray[np.float32]
Stretch = tuple[int, int]

LONGEST_S = 20.0  # of a take that is looked at

_BLOCK_S = 0.01
_AFTER = 6  # blocks of a pause left out after a tone, which dies away
_BEFORE = 8  # and before one, where the breath starts
_INHALED = 30  # before a tone that follows another: the player breathes in


_SLOW_HZ = 1000.0
_NOTHING_DB = -150.0
_GUST_S = 0.2
_GUST_RISE_DB = 12.0
_SHIFTING = 4  # blocks at each edge of a tone
_GUST_UNDER_TONE_DB = -25.0
_HUM_LINES = 3
_HUM_OFF_HZ = 0.5
_HUM_OVER = 25.0  # the median of exponential noise is ln 2 of its mean: chance 3e-8 a line
_HUM_ALONE_OVER = 250.0
_HUM_UNDER_TONE_DB = -40.0
_TONE_SHARE = 0.05

_WALL_FRAMES = 8
_WALL_LENGTH_S = 0.046
_BAND_HZ = 230.0
_WALL_FROM_HZ = 4000.0
_WALL_SHARE = 0.88
_WALL_TO_HZ = 19300.0
_WALL_TOP_SHARE = 0.98
_WALL_DB = 10.0
_LEAST_RATE_HZ = 22000

_RISE_DB = 4.0
_RISE_BLOCKS = 25
_RISE_ROUGH_DB = 2.0
_RISE_LAST = 10
_RISE_STEP = 8  # blocks in which no more than this share of the rise may come: a noise that starts is no gain
_RISE_SHARE = 0.6
_FALL_DB = 6.0
_OVERSHOOT_DB = 2.0
_FLOOR_BLOCKS = 6
_SILENT_DB = (
    80.0  # under the tone: a flute at arm's length is about 80 dB, a microphone's own noise 15 or more
)
_UNDER_NOISE_DB = 20.0
_NOISELESS_DB = 42.0  # a tone so clear of noise has none that a gate could spare
_LOUD_ENOUGH_DB = -50.0
_STEP_BLOCKS = 6
_STEP_DB = 8.0
_FLAT_DB = 2.5
_STEP_UNDER_TONE_DB = 25.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Part:
    """One tone of a take as it concerns quality: its samples' range, its pitch, and its noise in dB."""

    start: int
    stop: int
    frequency_hz: float
    harmonic_to_noise_db: float


def take_cautions(samples: Samples, rate_hz: int, parts: Sequence[Part]) -> tuple[str, ...]:
    """Say what is wrong with a take as a whole, a line each with what to do; nothing where nothing is.

    `samples` (samples,) are the whole take or its first `LONGEST_S`, `parts` its tones in order.
    """
    parts = [part for part in parts if part.stop <= len(samples)]
    if not parts or len(samples) < _GUST_S * rate_hz:
        return ()
    course = _course(samples, rate_hz, parts)
    slow = _slow(samples, rate_hz)
    wind = _wind(slow, course)
    found = (
        wind,
        _hum(slow, course, parts),
        _wall(samples, rate_hz, parts),
        None if wind else _automatic_gain(course),
        _gate(course, parts),
    )
    return tuple(caution for caution in found if caution is not None)


# --- the course of a take ----------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, kw_only=True)
class _Course:
    """Levels of the blocks of a take in dB, whole and high, and the tones' first and last blocks."""

    level_db: Floats
    high_db: Floats
    tones: Sequence[Stretch]

    @property
    def tone_db(self) -> float:
        """The usual level of the loudest tone."""
        return max(median(self.level_db[first:last]) for first, last in self.tones)

    @property
    def high_tone_db(self) -> float:
        """The same of the high level."""
        return max(median(self.high_db[first:last]) for first, last in self.tones)

    @property
    def before(self) -> Stretch:
        """The blocks of the pause before the first tone."""
        return 0, max(self.tones[0][0] - _BEFORE, 0)

    @property
    def after(self) -> Iterator[Stretch]:
        """The blocks of every pause that follows a tone."""
        starts = [*(first - _INHALED for first, _ in self.tones[1:]), len(self.level_db)]
        for (_, last), stop in zip(self.tones, starts, strict=True):
            yield last + _AFTER, max(stop, last + _AFTER)


def _course(samples: Samples, rate_hz: int, parts: Sequence[Part]) -> _Course:
    hop = int(_BLOCK_S * rate_hz)
    level = _level_db(samples, hop)
    spans = [
        (part.start // hop, min(max(part.stop // hop, part.start // hop + 1), len(level))) for part in parts
    ]
    return _Course(
        level_db=level,
        high_db=_level_db(np.diff(samples, append=samples[-1:]), hop),
        tones=[(min(first, len(level) - 1), last) for first, last in spans],
    )


def _level_db(samples: Samples, hop: int) -> Floats:
    rows = samples[: len(samples) // hop * hop].reshape(-1, hop)
    power = np.einsum("ij,ij->i", rows, rows) / hop
    return np.asarray(10.0 * np.log10(power.astype(np.float64) + 1e-20))


@lru_cache(maxsize=8)
def _hann(length: int) -> Floats:
    window = np.hanning(length + 2)[1:-1]
    window.flags.writeable = False
    return window


def _running_mean(levels: Floats, width: int) -> Floats:
    return np.convolve(levels, np.full(width, 1.0 / width), mode="valid")


# --- wind and hum ------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, kw_only=True)
class _Slow:
    """A take thinned to about 1000 samples a second, low-passed at some 250 Hz."""

    samples: Floats
    rate_hz: float


def _slow(samples: Samples, rate_hz: int) -> _Slow:
    """Low-pass by a Hann window four of the longer samples wide, so that partials fold down 40 dB weaker."""
    step = max(round(rate_hz / _SLOW_HZ), 1)
    rows = samples[: len(samples) // step * step].reshape(-1, step)
    window = _hann(4 * step)
    parts = rows @ (window / window.sum()).reshape(4, step).T.astype(np.float32)
    count = len(parts) - 3
    thinned = sum(parts[k : k + count, k] for k in range(4))
    return _Slow(samples=np.asarray(thinned, np.float64), rate_hz=rate_hz / step)


def _wind(slow: _Slow, course: _Course) -> str | None:
    """Tell gusts: the lowest sound comes and goes by far more than noise does, near the tone's own level."""
    hop = int(_BLOCK_S * slow.rate_hz)
    rows = slow.samples[: len(slow.samples) // hop * hop].reshape(-1, hop)
    count = len(rows) - 3
    if count < 2 * _GUST_S / _BLOCK_S:
        return None
    window = _hann(4 * hop)
    parts = rows @ (window / window.sum()).reshape(4, hop).T
    low = np.sum([parts[k : k + count, k] for k in range(4)], axis=0)
    power = _running_mean(_levelled(low, course.tones) ** 2, round(_GUST_S / _BLOCK_S))
    level = 10.0 * np.log10(power + 1e-20)
    gust = quantile(level, 0.98)
    calm = quantile(level[level > _NOTHING_DB], 0.1) if np.any(level > _NOTHING_DB) else gust
    if gust < course.tone_db + _GUST_UNDER_TONE_DB or gust < calm + _GUST_RISE_DB:
        return None
    return (
        f"wind on the microphone: gusts {_apart(gust - course.tone_db)} the tone; "
        "shield it, and turn it out of the breath"
    )


def _levelled(low: Floats, tones: Sequence[Stretch]) -> Floats:
    """Take each tone's and each pause's middle off: a wave cut on one side only shifts it while it sounds."""
    edges = [0, *(edge for first, last in tones for edge in (first - 2, last - 2)), len(low)]
    levelled = np.zeros_like(low)
    for first, last in pairwise(edges):
        inside = slice(first + _SHIFTING, last - _SHIFTING)
        if last - first > 4 * _SHIFTING:
            levelled[inside] = low[inside] - median(low[inside])
    return levelled


def _hum(slow: _Slow, course: _Course, parts: Sequence[Part]) -> str | None:
    """Tell mains hum that stands less than 40 dB under the tone."""
    spectrum = _power(slow)
    found = [(mains, *_hum_lines(spectrum, mains, parts)) for mains in MAINS_HZ]
    mains, over, power = max(found, key=lambda each: each[2])
    told = sum(each > _HUM_OVER for each in over) >= 2 or max(over, default=0.0) > _HUM_ALONE_OVER
    level = 10.0 * np.log10(power + 1e-20)
    if not told or level < course.tone_db + _HUM_UNDER_TONE_DB:
        return None
    return (
        f"mains hum ({mains:.0f} Hz): {_apart(level - course.tone_db)} the tone; "
        "move away from lamps and chargers, or unplug the recorder"
    )


def _power(slow: _Slow) -> tuple[float, float, Floats]:
    """Return rate, spacing of the lines, and the power spectrum, whose sum over a line is its mean square."""
    window = _hann(len(slow.samples))
    spectrum = np.abs(np.fft.rfft(slow.samples * window)) ** 2
    return slow.rate_hz, slow.rate_hz / len(window), 2.0 * spectrum / (len(window) * float(np.sum(window**2)))


def _hum_lines(
    spectrum: tuple[float, float, Floats], mains_hz: float, parts: Sequence[Part]
) -> tuple[list[float], float]:
    """Return how far the lowest multiples stand over their neighbours, and the power of those that do."""
    slow_rate_hz, line_hz, power = spectrum
    reach, aside = max(round(_HUM_OFF_HZ / line_hz), 1), max(round(8.0 / line_hz), 8)
    over, total = [], 0.0
    for hz in (k * mains_hz for k in range(1, _HUM_LINES + 1)):
        place = round(hz / line_hz)
        near = any(abs(hz / part.frequency_hz - 1.0) < _TONE_SHARE for part in parts)
        if near or place - aside < 1 or place + aside >= len(power):
            continue
        peak = place - reach + int(np.argmax(power[place - reach : place + reach + 1]))
        wide = 4.0 * hz / slow_rate_hz  # what thinning, by a Hann window four samples wide, passes
        passed = float(np.sinc(wide)) / (1.0 - wide**2)
        beside = np.concatenate([power[peak - aside : peak - 2], power[peak + 3 : peak + aside + 1]])
        over.append(float(power[peak]) / max(median(beside), 1e-30))
        total += float(power[peak - 1 : peak + 2].sum()) / passed**2 if over[-1] > _HUM_OVER else 0.0
    return over, total


def _apart(level_db: float) -> str:
    """Return a level against the tone's in words."""
    return f"{abs(level_db):.0f} dB {'under' if level_db < 0.0 else 'over'}"


# --- a lossy format ----------------------------------------------------------------------------------


def _wall(samples: Samples, rate_hz: int, parts: Sequence[Part]) -> str | None:
    """Tell where the noise ends at a wall far under half the sampling rate."""
    length = int(2 ** round(np.log2(_WALL_LENGTH_S * rate_hz)))
    each = -(-_WALL_FRAMES // len(parts))
    starts = list(chain.from_iterable(_starts(part, length, each) for part in parts))
    if not starts or rate_hz < _LEAST_RATE_HZ:
        return None
    frames = np.stack([samples[start : start + length] for start in starts[:_WALL_FRAMES]])
    lines = np.fft.rfft(frames * _hann(length).astype(np.float32), axis=1)
    power = (np.square(lines.real) + np.square(lines.imag)).mean(axis=0, dtype=np.float64)
    wide = max(round(_BAND_HZ * length / rate_hz), 1)
    count = int(_WALL_TOP_SHARE * len(power)) // wide
    bands = 10.0 * np.log10(power[: count * wide].reshape(count, wide).mean(axis=1) + 1e-20)
    band_hz = wide * rate_hz / length
    highest_hz = min(_WALL_TO_HZ, _WALL_SHARE * rate_hz / 2.0)
    edges = range(int(_WALL_FROM_HZ / band_hz), min(int(highest_hz / band_hz), count - 2))
    highest_above = np.maximum.accumulate(bands[::-1])[::-1]
    drops = [float(bands[edge - 4 : edge].min() - highest_above[edge + 2]) for edge in edges]
    if not drops or max(drops) < _WALL_DB:
        return None
    end_khz = (edges[int(np.argmax(drops))] + 1) * band_hz / 1000.0
    return (
        f"nothing above {end_khz:.0f} kHz: cut off as by a lossy format (MP3, AAC) or a voice filter; "
        "record as WAV or FLAC"
    )


def _starts(part: Part, length: int, most: int) -> list[int]:
    last = part.stop - length
    return [] if last < part.start else np.linspace(part.start, last, most).astype(int).tolist()


# --- automatic gain and noise reduction --------------------------------------------------------------


def _automatic_gain(course: _Course) -> str | None:
    """Tell a recorder's automatic gain by the noise that it turns up when the tone is over."""
    rise = max((_rise_db(course.high_db[first:last]) for first, last in course.after), default=0.0)
    fall = max(rise, _fall_db(course))
    if rise < _RISE_DB and fall < _FALL_DB:
        return None
    return (
        f"automatic gain: the noise in the pauses moves by {fall:.0f} dB with the tones; "
        "switch the recorder's automatic level off"
    )


def _rise_db(levels: Floats) -> float:
    """Return by how much the noise rises steadily from its lowest to the pause's end, 0 where it does not."""
    if len(levels) < _RISE_BLOCKS + _FLOOR_BLOCKS:
        return 0.0
    smooth = _running_mean(levels, _FLOOR_BLOCKS)
    rising = smooth[int(np.argmin(smooth)) :]
    if len(rising) < _RISE_BLOCKS:
        return 0.0
    rise = median(rising[-_RISE_LAST:]) - float(rising[0])
    falls_back = float((np.maximum.accumulate(rising) - rising).max()) > _RISE_ROUGH_DB
    at_once = float((rising[_RISE_STEP:] - rising[:-_RISE_STEP]).max()) > _RISE_SHARE * rise
    return 0.0 if falls_back or at_once else rise


def _fall_db(course: _Course) -> float:
    """Return by how much noise before a tone that starts too loud is louder than the quietest after it."""
    before = course.high_db[slice(*course.before)]
    after = [course.high_db[first:last] for first, last in course.after if last - first >= _FLOOR_BLOCKS]
    if len(before) < _FLOOR_BLOCKS or not after:
        return 0.0
    floors = [float(_running_mean(levels, _FLOOR_BLOCKS).min()) for levels in (before, *after)]
    first, last = course.tones[0]
    attack = course.level_db[first : min(first + 25, last)]
    later = course.level_db[first + 50 : last]
    if len(attack) < 3 or len(later) < 3:
        return 0.0
    overshoot = float(_running_mean(attack, 3).max()) - median(later)
    return floors[0] - min(floors[1:]) if overshoot > _OVERSHOOT_DB else 0.0


def _gate(course: _Course, parts: Sequence[Part]) -> str | None:
    """Tell noise reduction by pauses more silent than a microphone is, or cut off at a stroke."""
    pauses = [course.before, *course.after]
    levels = np.concatenate([course.level_db[first:last] for first, last in pauses])
    clearest = min(part.harmonic_to_noise_db for part in parts)
    noise = course.tone_db - clearest
    silent = (
        len(levels) >= _STEP_BLOCKS
        and clearest < _NOISELESS_DB
        and course.tone_db > _LOUD_ENOUGH_DB
        and quantile(levels, 0.3) < min(course.tone_db - _SILENT_DB, noise - _UNDER_NOISE_DB)
    )
    least = course.high_tone_db - _STEP_UNDER_TONE_DB
    if not silent and not any(_has_step(course.high_db[first:last], least) for first, last in pauses):
        return None
    return (
        "noise reduction: the pauses are more silent than the tone's own noise allows; "
        "switch it off, the register is read from the breath's noise"
    )


def _has_step(levels: Floats, highest_db: float) -> bool:
    """Whether the noise falls or rises from one even level to another within two blocks."""
    if len(levels) < 2 * _STEP_BLOCKS + 2:
        return False
    stretches = np.lib.stride_tricks.sliding_window_view(levels, _STEP_BLOCKS)
    middle, swing = stretches.mean(axis=1), np.ptp(stretches, axis=1)
    apart = _STEP_BLOCKS + 2
    even = (swing[:-apart] < _FLAT_DB) & (swing[apart:] < _FLAT_DB)
    low_enough = np.maximum(middle[:-apart], middle[apart:]) < highest_db
    return bool(np.any(even & low_enough & (np.abs(middle[apart:] - middle[:-apart]) > _STEP_DB)))
