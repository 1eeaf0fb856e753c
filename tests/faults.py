"""Faults of recordings, made by construction: each takes samples and gives them with one known fault.

Conventions: samples are one channel, full scale ±1, at `rate_hz`; levels in dB against the tone's rms, which
is that of the loudest half second. What is random comes from the generator given. All is invented.
"""

from io import BytesIO

import numpy as np
import soundfile
from numpy.typing import NDArray

Floats = NDArray[np.float64]
AnySamples = NDArray[np.float32] | Floats


def tone_rms(samples: AnySamples, rate_hz: int) -> float:
    """Return the rms of the loudest half second."""
    hop = rate_hz // 10
    power = np.square(samples[: len(samples) // hop * hop].astype(np.float64)).reshape(-1, hop).mean(axis=1)
    return float(np.sqrt(np.sort(power)[-5:].mean()))


def coloured(
    count: int, rate_hz: int, slope: float, rng: np.random.Generator, low_hz: float = 40.0
) -> Floats:
    """Return noise of unit rms whose power falls as frequency to the `slope` above `low_hz`."""
    shape = np.maximum(np.fft.rfftfreq(count, 1.0 / rate_hz), low_hz) ** (-0.5 * slope)
    noise = np.fft.irfft(np.fft.rfft(rng.standard_normal(count)) * shape, count)
    return np.asarray(noise / np.std(noise))


def with_pauses(
    samples: AnySamples, rate_hz: int, seconds: float, rng: np.random.Generator, room: float = 2.5e-4
) -> Floats:
    """Return a take with pauses of a room's noise before and after it."""
    pause = round(seconds * rate_hz)
    ends = [room * coloured(pause, rate_hz, 1.0, rng) for _ in range(2)]
    return np.concatenate([ends[0], samples, ends[1]])


def hard_clipped(samples: AnySamples, share: float) -> Floats:
    """Return a wave cut at that share of its highest crest, and brought back to half of full scale."""
    top = share * float(np.quantile(np.abs(samples), 0.999))
    return np.asarray(0.5 / top * np.clip(samples.astype(np.float64), -top, top))


def soft_clipped(samples: AnySamples, drive: float) -> Floats:
    """Return a wave squeezed by a hyperbolic tangent, its crests at `drive` on its scale."""
    return np.asarray(0.5 * np.tanh(drive * samples / float(np.quantile(np.abs(samples), 0.999))))


def hummed(samples: AnySamples, rate_hz: int, mains_hz: float, level_db: float) -> Floats:
    """Add mains hum: a fundamental with its second and third harmonic, 6 and 9 dB under it."""
    time_s = np.arange(len(samples)) / rate_hz
    parts = [a * np.sin(2 * np.pi * k * mains_hz * time_s + k) for k, a in ((1, 1.0), (2, 0.5), (3, 0.35))]
    hum = np.sum(parts, axis=0)
    return np.asarray(samples + hum / np.std(hum) * tone_rms(samples, rate_hz) * 10.0 ** (level_db / 20.0))


def noisy(samples: AnySamples, rate_hz: int, level_db: float, rng: np.random.Generator) -> Floats:
    """Add a room's noise, falling by 3 dB an octave."""
    room = coloured(len(samples), rate_hz, 1.0, rng)
    return np.asarray(samples + room * tone_rms(samples, rate_hz) * 10.0 ** (level_db / 20.0))


def windy(samples: AnySamples, rate_hz: int, level_db: float, rng: np.random.Generator) -> Floats:
    """Add gusts: noise that falls steeply above 20 Hz, coming and going about once a second."""
    count = len(samples)
    knots = np.maximum(rng.standard_normal(int(count / rate_hz * 2.0) + 4), 0.05)
    knots[rng.integers(1, len(knots) - 1)] = 1.5
    gusts = np.interp(np.linspace(0, len(knots) - 1, count), np.arange(len(knots)), knots)
    wind = gusts * coloured(count, rate_hz, 3.5, rng, low_hz=20.0)
    return np.asarray(samples + wind / np.std(wind) * tone_rms(samples, rate_hz) * 10.0 ** (level_db / 20.0))


def gained(samples: AnySamples, rate_hz: int, most_db: float, recovery_db_per_s: float = 12.0) -> Floats:
    """Let a recorder turn the gain down by `most_db` within 80 ms of a tone, and up again after it."""
    hop = rate_hz // 200
    count = len(samples) // hop
    power = np.square(samples[: count * hop].astype(np.float64)).reshape(-1, hop).mean(axis=1)
    loud = np.sqrt(power) > 0.25 * tone_rms(samples, rate_hz)
    gain = np.zeros(count + 1)
    for k in range(count):
        down, up = most_db * hop / rate_hz / 0.08, recovery_db_per_s * hop / rate_hz
        gain[k + 1] = max(gain[k] - down, -most_db) if loud[k] else min(gain[k] + up, 0.0)
    course = np.interp(np.arange(len(samples)) / hop, np.arange(count + 1), gain)
    return np.asarray(samples * 10.0 ** (course / 20.0))


def gated(samples: AnySamples, rate_hz: int, reduction_db: float, hold_s: float = 0.15) -> Floats:
    """Turn down whatever stands 30 dB under the tone, from `hold_s` after it and until 20 ms before it."""
    hop = rate_hz // 200
    count = len(samples) // hop
    power = np.square(samples[: count * hop].astype(np.float64)).reshape(-1, hop).mean(axis=1)
    loud = np.sqrt(power) > 10.0**-1.5 * tone_rms(samples, rate_hz)
    reach = np.concatenate([np.ones(4), np.ones(1), np.ones(round(hold_s * 200))])
    kept = np.convolve(loud, reach)[4 : 4 + count] > 0.0
    course = np.interp(np.arange(len(samples)) / hop, np.arange(count), np.where(kept, 0.0, -reduction_db))
    quiet = samples * 10.0 ** (course / 20.0)
    return np.asarray(np.round(quiet * 2.0**15) / 2.0**15)


def through_mp3(samples: AnySamples, rate_hz: int, kbit_per_s: int) -> Floats:
    """Return what an MP3 of that rate leaves; libsndfile's levels run from 320 to 32 kbit/s at 44.1 kHz."""
    file = BytesIO()
    level = (320 - kbit_per_s) / 288
    soundfile.write(
        file,
        samples.astype(np.float32),
        rate_hz,
        format="MP3",
        bitrate_mode="CONSTANT",
        compression_level=level,
    )
    file.seek(0)
    decoded, _ = soundfile.read(file)
    return np.asarray(np.round(decoded * 2.0**15) / 2.0**15)


def mixed(samples: AnySamples, others: AnySamples, rate_hz: int, level_db: float) -> Floats:
    """Add another recording, brought to a level against the first one's tone."""
    other = np.resize(others, len(samples)).astype(np.float64)
    gain = tone_rms(samples, rate_hz) / tone_rms(other, rate_hz) * 10.0 ** (level_db / 20.0)
    return np.asarray(samples + gain * other)


def swelling(samples: AnySamples, rate_hz: int, swing_db: float, rng: np.random.Generator) -> Floats:
    """Let the tones' loudness swing at random by that rms, forgetting itself within a quarter of a second."""
    knots = rng.standard_normal(int(len(samples) / rate_hz * 6.0) + 4)
    knots = np.convolve(knots, [0.5, 0.7, 0.5], mode="same")
    course = np.interp(np.linspace(0, len(knots) - 1, len(samples)), np.arange(len(knots)), knots)
    hop = rate_hz // 100
    rows = samples[: len(samples) // hop * hop].astype(np.float64).reshape(-1, hop)
    loud = np.sqrt(np.mean(rows**2, axis=1)) > 0.1 * tone_rms(samples, rate_hz)
    played = np.interp(np.arange(len(samples)) / hop, np.arange(len(loud)), loud.astype(np.float64))
    return np.asarray(samples * 10.0 ** (swing_db * played * course / np.std(course) / 20.0))
