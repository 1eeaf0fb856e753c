"""Tones made for tests: their truth is known by construction. Frequencies in Hz, times in s, levels in dB."""

from dataclasses import dataclass
from itertools import count
from pathlib import Path

import numpy as np
import soundfile
from numpy.typing import NDArray

from fluteprobe.sound.recording import Recording, open_recording

Floats = NDArray[np.float64]
RATE_HZ = 44100

# Amplitudes of partials 1, 2, 3 …
TIMBRES: dict[str, tuple[float, ...]] = {
    "plain": (1.0, 0.1, 0.05, 0.02),
    "dark": (1.0, 0.02),
    "bright": (1.0, 0.8, 0.6, 0.5, 0.4, 0.3, 0.2, 0.1),
    "hollow": (1.0, 0.0, 0.5, 0.0, 0.3, 0.0, 0.1),
    "weak fundamental": (0.05, 1.0, 0.3, 0.5, 0.2, 0.1),
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Made:
    """A made tone: samples of unit power and then noise, the partials' amplitudes, the noise's deviation."""

    samples: NDArray[np.float32]
    amplitudes: Floats
    noise: float


def cents(ratio: float) -> float:
    return float(1200.0 * np.log2(ratio))


def make_tone(
    frequency_hz: float,
    duration_s: float,
    timbre: str,
    snr_db: float,
    rng: np.random.Generator,
    *,
    movement_cents: Floats | float = 0.0,
    rate_hz: int = RATE_HZ,
) -> Made:
    """Return a tone of unit power in white noise; `movement_cents` (samples,) bends its pitch."""
    n = round(duration_s * rate_hz)
    orders = np.arange(1, len(TIMBRES[timbre]) + 1)
    heard = np.where(orders * frequency_hz < 0.47 * rate_hz, np.array(TIMBRES[timbre]), 0.0)
    amplitudes = heard / np.sqrt(0.5 * np.sum(heard**2))
    phase = 2 * np.pi * np.cumsum(frequency_hz * 2.0 ** (np.full(n, 0.0) + movement_cents / 1200.0)) / rate_hz
    tone = sum(
        a * np.cos(k * phase + rng.uniform(0, 2 * np.pi)) for k, a in zip(orders, amplitudes, strict=True)
    )
    noise = 10.0 ** (-snr_db / 20.0)
    return Made(
        samples=(tone + noise * rng.standard_normal(n)).astype(np.float32), amplitudes=amplitudes, noise=noise
    )


def bound_cents(made: Made, frequency_hz: float, rate_hz: int = RATE_HZ) -> float:
    """Return the Cramér-Rao bound of the fundamental in white noise, var(ω) ≥ 24 σ² / (N³ Σ k² A_k²)."""
    orders = np.arange(1, len(made.amplitudes) + 1)
    variance = 24.0 * made.noise**2 / (len(made.samples) ** 3 * np.sum((orders * made.amplitudes) ** 2))
    return float(np.sqrt(variance) * rate_hz / (2 * np.pi) / frequency_hz * 1200.0 / np.log(2.0))


_NUMBERS = count()


def as_recording(folder: Path, samples: NDArray[np.float32], rate_hz: int = RATE_HZ) -> Recording:
    """Write samples as a float WAV and open it as the program does."""
    path = folder / f"tone-{next(_NUMBERS)}.wav"
    soundfile.write(path, samples, rate_hz, subtype="FLOAT")
    return open_recording(path)
