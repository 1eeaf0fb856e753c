"""The quality of one tone: what makes its numbers less sure, in plain words and with what to do.

Conventions: samples are one channel, full scale ±1; levels in dB. A crest is the highest (or lowest) sample
of one period of the wave.

Clipping is told by what only it does, whatever was done to the recording afterwards: noise moves every crest
of a wave as it moves the rest, and where the crests move by far less, something held them. It is seen where
the recording had noise of its own before it was clipped, which every microphone's has.
"""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.breath import NoiseSpectrum, steady_lines
from fluteprobe.sound.measured import Measured
from fluteprobe.sound.quantile import median

Floats = NDArray[np.float64]
Samples = NDArray[np.float32]

SECOND_TONE_DB = -20.0

_SHORT_S = 0.4
_NOISY_DB = 12.0
_UNSTEADY_CENTS = 12.0
_DRIFTING_CENTS = 20.0
_QUIET_DB = -50.0

_SWINGING_DB = 2.0  # clean simulated tones stay under 1.0
_SWING_S = 0.05
_FEWEST_LEVELS = 6

_CREST = (
    0.16  # of the noise's own movement; the crests of unclipped simulated tones move by 0.28 of it or more
)
_CREST_S = 0.45
_FEWEST_CRESTS = 30
_HIGHEST_SHARE = 0.6
_MID_WAVE = 0.5
_NOISELESS_DB = 55.0

_DROWNED = 0.5
_BREATH_LINES = (0.25, 3.0)

_FAINT_DB = -40.0
_SAME_LINE = 0.006
_LOUD_DB = -12.0
_LOUD_OVER = 300.0  # the lines four away: a breath resonance of quality 50 stands 60 times over them
_ASIDE = 4
_APART = 0.1


def tone_cautions(samples: Samples, rate_hz: int, measured: Measured, crest: float) -> list[str]:
    """Say what makes a tone's numbers less sure; `crest` is the highest crest of the whole take."""
    pitch, hnr = measured.pitch, measured.harmonic_to_noise_db
    level_db = 10.0 * np.log10(float(samples @ samples) / len(samples) + 1e-20)
    seconds = len(samples) / rate_hz
    swing_db = 0.0 if pitch.vibrato else loudness_swing_db(samples, rate_hz)
    clipped = is_clipped(samples, measured.residual, rate_hz, pitch.frequency_hz, crest)
    told = (
        (clipped, "clipped: the crests are cut or squeezed; record with less gain, or from further away"),
        (level_db < _QUIET_DB, f"very quiet ({level_db:.0f} dB under full scale): record closer"),
        (
            hnr < _NOISY_DB,
            f"noisy: the tone stands only {hnr:.0f} dB over the noise; "
            "blow until it speaks clearly, in a quiet room",
        ),
        (seconds < _SHORT_S, f"short: {seconds:.2f} s steady; hold the tone for two seconds"),
        (
            pitch.wander_cents > _UNSTEADY_CENTS,
            f"unsteady: the pitch wanders by {pitch.wander_cents:.0f} cents; blow evenly, and repeat it",
        ),
        (swing_db > _SWINGING_DB, f"uneven: the loudness swings by {swing_db:.0f} dB; blow evenly"),
        (
            abs(pitch.drift_cents) > _DRIFTING_CENTS,
            f"drifting: the pitch moves by {pitch.drift_cents:+.0f} cents from start to end; blow evenly",
        ),
    )
    return [words for is_so, words in told if is_so]


def room_cautions(noise: NoiseSpectrum | None, room: NoiseSpectrum | None, frequency_hz: float) -> list[str]:
    """Say where the room, heard in a pause, makes most of the noise that should be the breath's."""
    if noise is None or room is None:
        return []
    low, high = (int(ratio * frequency_hz / noise.line_hz) for ratio in _BREATH_LINES)
    share = room.power[low:high] / np.maximum(noise.power[low:high], 1e-30)
    if not len(share) or median(share) < _DROWNED:
        return []
    return ["a noisy room: it drowns the breath, which tells the register; come closer, in a quieter room"]


def other_tones(noise: NoiseSpectrum | None, own_hz: float, strongest: float) -> list[tuple[float, float]]:
    """Return frequency and level of what else sounds, strongest first, down to 40 dB under the tone.

    Levels are in dB against the tone's strongest partial, whose amplitude is `strongest`. Steady lines count,
    and lines so loud and narrow that only a tone makes them, however long they last.
    """
    if noise is None:
        return []
    found = [(hz, 20.0 * float(np.log10(a / strongest))) for hz, a in steady_lines(noise, own_hz)]
    steady = [line for line in found if line[1] > _FAINT_DB]
    loud = [
        line
        for line in _loud_lines(noise, own_hz, strongest)
        if all(abs(line[0] - hz) > 2.0 * noise.line_hz for hz, _ in steady)
    ]
    return sorted([*steady, *loud], key=lambda line: -line[1])


def two_tones(own_hz: float, others_hz: Sequence[float]) -> str:
    """Tell two tones of one flute from those of two instruments.

    In one flute the jet mixes its two tones: lines stand at sums and differences. Two instruments have none,
    but the second one has harmonics of its own.
    """
    other = others_hz[0]
    mixed = (other + own_hz, abs(other - own_hz), abs(2.0 * own_hz - other), abs(2.0 * other - own_hz))
    harmonics = (2.0 * other, 3.0 * other, 0.5 * other)
    if _is_among(harmonics, others_hz[1:]) and not _is_among(mixed, others_hz[1:]):
        return f"more than one instrument: {own_hz:.0f} and {other:.0f} Hz; record one flute alone"
    return f"two tones at once: {own_hz:.0f} and {other:.0f} Hz; blow until one holds, one flute alone"


def beside(hz: float, level_db: float) -> str:
    """Tell a faint sound beside the tone."""
    return f"another sound: {hz:.0f} Hz, {-level_db:.0f} dB under the tone; record one flute alone"


def is_clipped(
    samples: Samples, residual: Samples, rate_hz: int, frequency_hz: float, crest: float = 0.0
) -> bool:
    """Whether the crests of a tone were cut or squeezed, whatever was done to its level afterwards.

    So they were where they move by less than a sixth of what the noise does midway between them. Movement is
    from period to period, by second differences, so that hum and slow changes are in neither.

    Parameters
    ----------
    samples, residual
        The tone, and what is left of it without its partials, shape (samples,).
    crest
        The highest crest of the take: a tone far under it was not clipped.
    """
    period = int(np.ceil(rate_hz / frequency_hz))
    most = min(len(samples), int(_CREST_S * rate_hz)) // period * period
    if most < _FEWEST_CRESTS * period:
        return False
    rows, rest = samples[:most].reshape(-1, period), residual[:most]
    tops = np.stack([rows.max(axis=1), -rows.min(axis=1)]).astype(np.float64)
    height = median(tops)
    if height < _HIGHEST_SHARE * crest:
        return False
    middle = np.abs(samples[period : most - period]) < _MID_WAVE * height
    rough = (rest[: -2 * period] - 2.0 * rest[period:-period] + rest[2 * period :])[middle]
    noise = float(np.mean(rough**2)) if len(rough) else 0.0
    if noise < 6.0 * height**2 * 10.0 ** (-_NOISELESS_DB / 10.0):
        return False
    moved = np.mean(np.diff(tops, 2, axis=1) ** 2, axis=1)
    return bool(moved.min() < _CREST**2 * noise)


def loudness_swing_db(samples: Samples, rate_hz: int) -> float:
    """Return how far a tone's loudness swings about its trend, in dB, rms over 50 ms."""
    hop = int(_SWING_S * rate_hz)
    rows = samples[: len(samples) // hop * hop].reshape(-1, hop)
    if len(rows) < _FEWEST_LEVELS:
        return 0.0
    level = 10.0 * np.log10(np.einsum("ij,ij->i", rows, rows).astype(np.float64) + 1e-20)
    place = np.arange(len(level)) - 0.5 * (len(level) - 1)
    trend = float(place @ level) / float(place @ place)
    return float(np.std(level - trend * place))


def _is_among(wanted_hz: Sequence[float], lines_hz: Sequence[float]) -> bool:
    return any(abs(line / hz - 1.0) < _SAME_LINE for hz in wanted_hz if hz > 0.0 for line in lines_hz)


def _loud_lines(noise: NoiseSpectrum, own_hz: float, strongest: float) -> list[tuple[float, float]]:
    """Return frequency and level of the lines that are loud and narrow."""
    power = noise.power
    ratio = np.arange(len(power)) * noise.line_hz / own_hz
    amplitude = 4.0 * np.sqrt(power) / noise.length
    around = np.maximum(np.roll(power, _ASIDE), np.roll(power, -_ASIDE))
    leads = (power >= np.roll(power, 1)) & (power > np.roll(power, -1)) & (ratio > _APART)
    apart = np.abs(ratio - np.round(ratio)) > _APART
    loud = leads & apart & (power > _LOUD_OVER * around) & (amplitude > strongest * 10.0 ** (_LOUD_DB / 20.0))
    places = np.flatnonzero(loud[_ASIDE:-_ASIDE]) + _ASIDE
    middle = [float(np.arange(-1, 2) @ power[k - 1 : k + 2] / power[k - 1 : k + 2].sum()) for k in places]
    levels = 20.0 * np.log10(amplitude[places] / strongest)
    return [
        (float(k + off) * noise.line_hz, float(level))
        for k, off, level in zip(places, middle, levels, strict=True)
    ]
