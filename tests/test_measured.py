"""A steady stretch taken apart: what is a tone, and what only sounds like one."""

import numpy as np
import pytest
from numpy.typing import NDArray

from fluteprobe.sound.measured import take_apart

RATE_HZ = 44_100
TIME_S = np.arange(2 * RATE_HZ) / RATE_HZ


def faded(frequency_hz: float) -> NDArray[np.float64]:
    """Return a tone that the reflections of a room fade to a tenth and back, no louder than the noise."""
    level = 0.1 + 0.9 * np.abs(np.cos(2.0 * np.pi * 0.8 * TIME_S))
    noise = np.random.default_rng(3).standard_normal(len(TIME_S))
    return np.asarray(0.1 * level * np.cos(2.0 * np.pi * frequency_hz * TIME_S) + 0.04 * noise)


@pytest.mark.parametrize("frequency_hz", [440.0, 1016.0])
def test_a_tone_that_the_room_fades_is_a_tone(frequency_hz: float) -> None:
    """Its level is as uneven as noise makes it, and its pitch is held: by construction."""
    measured = take_apart(faded(frequency_hz).astype(np.float32), RATE_HZ, frequency_hz)
    assert measured.evenness < 0.55
    assert measured.harmonic_to_noise_db < 10.0
    assert measured.sounds
    assert measured.pitch.frequency_hz == pytest.approx(frequency_hz, rel=6e-4)  # a cent, of 4 dB over noise


@pytest.mark.parametrize("seed", range(6))
def test_a_resonance_that_noise_stirs_is_none(seed: int) -> None:
    """A resonance 12 Hz wide, by the two-pole filter's definition."""
    noise = np.random.default_rng(seed).standard_normal(len(TIME_S))
    around = np.fft.rfftfreq(len(noise), 1.0 / RATE_HZ)
    shape = 1.0 / (1.0 + ((around - 600.0) / 6.0) ** 2) ** 0.5 + 0.03
    stirred = np.fft.irfft(np.fft.rfft(noise) * shape, len(noise))
    assert not take_apart((0.1 * stirred / stirred.std()).astype(np.float32), RATE_HZ, 600.0).sounds
