"""The course of a take: how loud it is from moment to moment, and where its tones and pauses are.

Conventions: samples are one channel, full scale ±1; tones are (start, stop) sample numbers, stop excluded;
levels in dB re full scale, 0 for power 1. Blocks are 10 ms long. "High" levels are those of the differenced
samples, which leaves rumble and hum out. A pause is what lies before, between and after tones.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.quantile import median

Floats = NDArray[np.float64]
Samples = NDArray[np.float32]
Stretch = tuple[int, int]

BLOCK_S = 0.01
_AFTER = 6  # blocks of a pause left out after a tone, which dies away
_BEFORE = 8  # and before one, where the breath starts
_INHALED = 30  # before a tone that follows another: the player breathes in


@dataclass(frozen=True, slots=True, kw_only=True)
class Part:
    """One tone of a take as it concerns quality: its samples' range, its pitch, and its noise in dB."""

    start: int
    stop: int
    frequency_hz: float
    harmonic_to_noise_db: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Course:
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


def course_of(samples: Samples, rate_hz: int, parts: Sequence[Part]) -> Course:
    """Return the course of a take from its samples and its tones, of which there is one at least."""
    hop = int(BLOCK_S * rate_hz)
    level = level_db(samples, hop)
    spans = [
        (part.start // hop, min(max(part.stop // hop, part.start // hop + 1), len(level))) for part in parts
    ]
    return Course(
        level_db=level,
        high_db=_high(samples, hop),
        tones=[(min(first, len(level) - 1), last) for first, last in spans],
    )


def _high(samples: Samples, hop: int) -> Floats:
    """Return the level of the differenced samples, whose last stretch may lack one sample and is repeated."""
    levels = level_db(samples[1:] - samples[:-1], hop)
    missing = len(samples) // hop - len(levels)
    return np.append(levels, levels[-1:]) if missing else levels


def level_db(samples: Samples, hop: int) -> Floats:
    """Return the level of each whole stretch of `hop` samples."""
    rows = samples[: len(samples) // hop * hop].reshape(-1, hop)
    power = np.einsum("ij,ij->i", rows, rows) / hop
    return np.asarray(10.0 * np.log10(power.astype(np.float64) + 1e-20))


@lru_cache(maxsize=8)
def hann(length: int) -> Floats:
    """Return a Hann window, shape (length,), read-only."""
    window = np.hanning(length + 2)[1:-1]
    window.flags.writeable = False
    return window


def running_mean(levels: Floats, width: int) -> Floats:
    """Return the mean of every `width` neighbours."""
    return np.convolve(levels, np.full(width, 1.0 / width), mode="valid")
