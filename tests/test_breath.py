"""Breath resonances: bumps that are there are found, noise, lines and slopes are not taken for them."""

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import f as f_distribution

from fluteprobe.sound import breath

RATE_HZ = 44100
TONE_HZ = 880.0


def noise(
    seconds: float, rng: np.random.Generator, *, slope_db_per_octave: float = 0.0, bump_db: float = 0.0
) -> NDArray[np.float32]:
    """Make Gaussian noise with a slope and a resonance at 431 Hz of quality 25."""
    n = round(seconds * RATE_HZ)
    hertz = np.fft.rfftfreq(n, 1.0 / RATE_HZ)
    shape = np.maximum(hertz, 20.0) ** (slope_db_per_octave / 6.02)
    peak = (10.0 ** (bump_db / 20.0) - 1.0) / np.sqrt(1.0 + ((hertz - 431.0) / (431.0 / 50.0)) ** 2)
    spectrum = np.fft.rfft(rng.standard_normal(n)) * shape * (1.0 + peak)
    return np.asarray(np.fft.irfft(spectrum, n), np.float32)


def found(samples: NDArray[np.float32]) -> tuple[breath.BreathResonance, ...]:
    spectrum = breath.noise_spectrum(samples, RATE_HZ, breath.segment_length(len(samples), RATE_HZ, TONE_HZ))
    assert spectrum is not None
    return breath.breath_resonances(spectrum, TONE_HZ)


def test_a_resonance_is_found_where_it_is() -> None:
    for seed in range(20):
        bumps = found(noise(2.0, np.random.default_rng([40, seed]), bump_db=16.0))
        near = [bump for bump in bumps if abs(bump.frequency_hz - 431.0) < 8.0]
        assert len(near) == 1
        assert near[0].prominence_db > 6.0
        assert 5.0 < near[0].width_hz < 90.0


@pytest.mark.parametrize("slope_db_per_octave", [0.0, -6.0, -12.0])
def test_noise_without_a_resonance_shows_one_no_more_often_than_said(slope_db_per_octave: float) -> None:
    """Chance is kept under 1 % a tone: of 200 tones, more than eight with a bump is a 1 in 5000 event."""
    rng = np.random.default_rng(41)
    tones = [found(noise(1.0, rng, slope_db_per_octave=slope_db_per_octave)) for _ in range(200)]
    assert sum(bool(bumps) for bumps in tones) <= 8


def test_a_steady_line_is_no_resonance() -> None:
    rng = np.random.default_rng(42)
    time_s = np.arange(2 * RATE_HZ) / RATE_HZ
    hum = 0.4 * np.sin(2 * np.pi * 350.0 * time_s) + 0.3 * np.sin(2 * np.pi * 450.0 * time_s)
    bumps = found((noise(2.0, rng) + hum).astype(np.float32))
    assert not [bump for bump in bumps if 300.0 < bump.frequency_hz < 500.0]


def test_what_the_room_has_when_nobody_plays_is_no_resonance() -> None:
    rng = np.random.default_rng(43)
    length = breath.segment_length(2 * RATE_HZ, RATE_HZ, TONE_HZ)
    spectrum = breath.noise_spectrum(noise(2.0, rng, bump_db=16.0), RATE_HZ, length)
    room = breath.noise_spectrum(noise(2.0, rng, bump_db=16.0), RATE_HZ, length)
    assert spectrum is not None
    assert breath.breath_resonances(spectrum, TONE_HZ)
    assert not breath.breath_resonances(spectrum, TONE_HZ, room)


def test_the_chance_is_the_upper_tail_of_the_f_distribution() -> None:
    """Against scipy.stats.f; Paulson's approximation is good to a tenth of the exponent down to 1e-8."""
    ratio = np.array([1.2, 2.0, 4.0, 8.0])
    for above, below in ((10.0, 30.0), (40.0, 80.0)):
        ours = breath._f_tail(ratio, np.full(4, above), np.full(4, below))
        exact = f_distribution.sf(ratio, above, below)
        assert np.log10(ours) == pytest.approx(np.log10(exact), rel=0.1, abs=0.05)


def test_a_tone_too_short_for_a_spectrum_has_none() -> None:
    length = breath.segment_length(20, RATE_HZ, TONE_HZ)
    assert breath.noise_spectrum(np.zeros(20, np.float32), RATE_HZ, length) is None
