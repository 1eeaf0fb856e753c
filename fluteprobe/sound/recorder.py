"""What a recorder does to a take: a lossy format's missing top, automatic gain, noise reduction.

Conventions: as in `course`. Cautions are plain words with what to do; None where nothing is to be said.

- A lossy format: the noise ends at a wall far under half the sampling rate.
- Automatic gain: the noise in a pause rises after a tone, or is lower after a loud attack than before it.
- Noise reduction: a pause much more silent than any microphone is, or whose noise stops at a stroke.
"""

from collections.abc import Sequence
from itertools import chain

import numpy as np

from fluteprobe.sound.course import Course, Floats, Part, Samples, hann, running_mean
from fluteprobe.sound.quantile import median, quantile

_WALL_FRAMES = 6
_WALL_LENGTH_S = 0.046
_BAND_HZ = 230.0
_WALL_FROM_HZ = 4000.0
_WALL_SHARE = 0.88
_WALL_TO_HZ = 16700.0  # above it nothing is lost that a flute shows, and phones usually end there
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


def lossy_wall(samples: Samples, rate_hz: int, parts: Sequence[Part]) -> str | None:
    """Tell where the noise ends at a wall far under half the sampling rate."""
    length = int(2 ** round(np.log2(_WALL_LENGTH_S * rate_hz)))
    each = -(-_WALL_FRAMES // len(parts))
    starts = list(chain.from_iterable(_starts(part, length, each) for part in parts))
    if not starts or rate_hz < _LEAST_RATE_HZ:
        return None
    frames = np.stack([samples[start : start + length] for start in starts[:_WALL_FRAMES]])
    lines = np.fft.rfft(frames * hann(length).astype(np.float32), axis=1)
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


def automatic_gain(course: Course) -> str | None:
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
    smooth = running_mean(levels, _FLOOR_BLOCKS)
    rising = smooth[int(np.argmin(smooth)) :]
    if len(rising) < _RISE_BLOCKS:
        return 0.0
    rise = median(rising[-_RISE_LAST:]) - float(rising[0])
    falls_back = float((np.maximum.accumulate(rising) - rising).max()) > _RISE_ROUGH_DB
    at_once = float((rising[_RISE_STEP:] - rising[:-_RISE_STEP]).max()) > _RISE_SHARE * rise
    return 0.0 if falls_back or at_once else rise


def _fall_db(course: Course) -> float:
    """Return by how much noise before a tone that starts too loud is louder than the quietest after it."""
    before = course.high_db[slice(*course.before)]
    after = [course.high_db[first:last] for first, last in course.after if last - first >= _FLOOR_BLOCKS]
    if len(before) < _FLOOR_BLOCKS or not after:
        return 0.0
    floors = [float(running_mean(levels, _FLOOR_BLOCKS).min()) for levels in (before, *after)]
    first, last = course.tones[0]
    attack = course.level_db[first : min(first + 25, last)]
    later = course.level_db[first + 50 : last]
    if len(attack) < 3 or len(later) < 3:
        return 0.0
    overshoot = float(running_mean(attack, 3).max()) - median(later)
    return floors[0] - min(floors[1:]) if overshoot > _OVERSHOOT_DB else 0.0


def noise_reduction(course: Course, parts: Sequence[Part]) -> str | None:
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
