"""The quality of a take: what room, microphone and recorder did to it, in plain words and with what to do.

Conventions: as in `course`. `take_cautions` gathers what is told of a whole take: here of its surroundings,

- wind: gusts under about 40 Hz that come and go;
- mains hum: lines at multiples of 50 or 60 Hz, each far over its neighbours;

in `recorder` of what the recorder did; what concerns one tone alone is told by `tone_quality`. Thresholds
stand well beyond what chance alone does (chances under 1e-4 a take where they can be calculated); what was
counted on takes with and without each fault is in DEVELOPERS.md.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise, product
from math import log2, log10

import numpy as np

from fluteprobe.sound.course import (
    BLOCK_S,
    Course,
    Floats,
    Part,
    Samples,
    Stretch,
    course_of,
    hann,
    running_mean,
)
from fluteprobe.sound.hum import MAINS_HZ
from fluteprobe.sound.partials import quick_length
from fluteprobe.sound.quantile import median, quantile
from fluteprobe.sound.recorder import automatic_gain, lossy_wall, noise_reduction

__all__ = ["LONGEST_S", "Part", "take_cautions"]

LONGEST_S = 20.0  # of a take that is looked at

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
_CONFIRMING_DB = 20.0
_HUM_UNDER_TONE_DB = -32.0
_TONE_SHARE = 0.05
_FOLDED = 12  # partials that are strong enough to be seen folded down
_FOLDED_HZ = 3.0
_CONFUSED_RATES = ((44100, 48000), (48000, 44100))  # made at the one, read at the other


def take_cautions(samples: Samples, rate_hz: int, parts: Sequence[Part]) -> tuple[str, ...]:
    """Say what is wrong with a take as a whole, a line each with what to do; nothing where nothing is.

    `samples` (samples,) are the whole take or its first `LONGEST_S`, `parts` its tones in order.
    """
    parts = [part for part in parts if part.stop <= len(samples)]
    if not parts or len(samples) < _GUST_S * rate_hz:
        return ()
    course = course_of(samples, rate_hz, parts)
    slow = _slow(samples, rate_hz)
    wind = _wind(slow, course)
    found = (
        wind,
        _hum(slow, course, parts),
        lossy_wall(samples, rate_hz, parts),
        None if wind else automatic_gain(course),
        noise_reduction(course, parts),
    )
    return tuple(caution for caution in found if caution is not None)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Slow:
    """A take thinned to about 1000 samples a second, low-passed at some 250 Hz."""

    samples: Floats
    rate_hz: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Spectrum:
    """The low-passed take's power spectrum, lines `line_hz` apart; its sum over a line is its mean square.

    Lines under `faintest` are not asked: they cannot even confirm a hum that is worth telling.
    """

    rate_hz: float
    line_hz: float
    power: Floats
    faintest: float


def _slow(samples: Samples, rate_hz: int) -> _Slow:
    """Low-pass by a Hann window four of the longer samples wide, so that partials fold down 40 dB weaker."""
    step = max(round(rate_hz / _SLOW_HZ), 1)
    rows = samples[: len(samples) // step * step].reshape(-1, step)
    window = hann(4 * step)
    parts = rows @ (window / window.sum()).reshape(4, step).T.astype(np.float32)
    count = len(parts) - 3
    thinned = sum(parts[k : k + count, k] for k in range(4))
    return _Slow(samples=np.asarray(thinned, np.float64), rate_hz=rate_hz / step)


def _wind(slow: _Slow, course: Course) -> str | None:
    """Tell gusts: the lowest sound comes and goes by far more than noise does, near the tone's own level."""
    hop = int(BLOCK_S * slow.rate_hz)
    rows = slow.samples[: len(slow.samples) // hop * hop].reshape(-1, hop)
    count = len(rows) - 3
    if count < 2 * _GUST_S / BLOCK_S:
        return None
    window = hann(4 * hop)
    parts = rows @ (window / window.sum()).reshape(4, hop).T
    low = np.sum([parts[k : k + count, k] for k in range(4)], axis=0)
    power = running_mean(_levelled(low, course.tones) ** 2, round(_GUST_S / BLOCK_S))
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


def _hum(slow: _Slow, course: Course, parts: Sequence[Part]) -> str | None:
    """Tell mains hum that stands less than 32 dB under the tone, and one that stands at no mains frequency.

    Mains keep within 0.2 Hz of 50 or 60 Hz (common practice, no source).
    """
    least_db = course.tone_db + _HUM_UNDER_TONE_DB
    spectrum = _power(slow, least_db)
    for mains, level in ((mains, _hum_db(spectrum, mains, parts)) for mains in MAINS_HZ):
        if level is not None and level > least_db:
            return (
                f"mains hum ({mains:.0f} Hz): {_apart(level - course.tone_db)} the tone; "
                "move away from lamps and chargers, or unplug the recorder"
            )
    return _wrong_rate(spectrum, course, parts)


def _wrong_rate(spectrum: _Spectrum, course: Course, parts: Sequence[Part]) -> str | None:
    """Tell a hum that stands where mains would if the recording were read at the wrong one of two rates."""
    for (made, read), mains in product(_CONFUSED_RATES, MAINS_HZ):
        hz = mains * read / made
        level = _hum_db(spectrum, hz, parts, alone=False)
        if level is not None and level > course.tone_db + _HUM_UNDER_TONE_DB:
            rates = f"{made / 1000:g} kHz were read as {read / 1000:g} kHz"
            off_cents = 1200.0 * log2(read / made)
            return (
                f"wrong sampling rate: the mains hum at {hz:.1f} Hz, as if {rates}, "
                f"so that all is {off_cents:+.0f} cents off; record anew"
            )
    return None


def _hum_db(
    spectrum: _Spectrum, mains_hz: float, parts: Sequence[Part], *, alone: bool = True
) -> float | None:
    """Return the level of hum at a frequency's multiples; None where neither two nor a clear one is there."""
    over, power = _hum_lines(spectrum, mains_hz, parts)
    several = sum(each > _HUM_OVER for each in over) >= 2
    clear = alone and max(over, default=0.0) > _HUM_ALONE_OVER
    return 10.0 * log10(power + 1e-20) if several or clear else None


def _power(slow: _Slow, least_db: float) -> _Spectrum:
    """Return the power spectrum, for hum of at least a level."""
    window = hann(quick_length(len(slow.samples)))
    lines = np.fft.rfft(slow.samples[: len(window)] * window)
    spectrum = np.square(lines.real) + np.square(lines.imag)
    return _Spectrum(
        rate_hz=slow.rate_hz,
        line_hz=slow.rate_hz / len(window),
        power=2.0 * spectrum / (len(window) * float(np.sum(window**2))),
        faintest=10.0 ** ((least_db - _CONFIRMING_DB) / 10.0),
    )


def _hum_lines(spectrum: _Spectrum, mains_hz: float, parts: Sequence[Part]) -> tuple[list[float], float]:
    """Return how far the lowest multiples stand over their neighbours, and the power of those that do."""
    slow_rate_hz, line_hz, power = spectrum.rate_hz, spectrum.line_hz, spectrum.power
    reach, aside = max(round(_HUM_OFF_HZ / line_hz), 1), max(round(8.0 / line_hz), 8)
    over, total = [], 0.0
    for hz in (k * mains_hz for k in range(1, _HUM_LINES + 1)):
        place = round(hz / line_hz)
        if place - aside < 1 or place + aside >= len(power):
            continue
        if power[place - reach : place + reach + 1].max() < spectrum.faintest:
            continue
        if any(_is_the_tones(hz, part.frequency_hz, slow_rate_hz) for part in parts):
            continue
        peak = place - reach + int(np.argmax(power[place - reach : place + reach + 1]))
        wide = 4.0 * hz / slow_rate_hz  # what thinning, by a Hann window four samples wide, passes
        passed = float(np.sinc(wide)) / (1.0 - wide**2)
        beside = np.concatenate([power[peak - aside : peak - 2], power[peak + 3 : peak + aside + 1]])
        over.append(float(power[peak]) / max(median(beside), 1e-30))
        total += float(power[peak - 1 : peak + 2].sum()) / passed**2 if over[-1] > _HUM_OVER else 0.0
    return over, total


def _is_the_tones(hz: float, tone_hz: float, slow_rate_hz: float) -> bool:
    """Whether the tone itself, or a partial of it that thinning folds down, may stand at a frequency."""
    partials = np.arange(1, _FOLDED + 1) * tone_hz
    folded = np.abs(partials - slow_rate_hz * np.round(partials / slow_rate_hz))
    return abs(hz / tone_hz - 1.0) < _TONE_SHARE or bool(np.any(np.abs(folded - hz) < _FOLDED_HZ))


def _apart(level_db: float) -> str:
    """Return a level against the tone's in words."""
    return f"{abs(level_db):.0f} dB {'under' if level_db < 0.0 else 'over'}"
