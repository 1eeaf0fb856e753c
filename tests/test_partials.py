"""Partial levels, what is no partial, what is left without the partials: truth by construction."""

import numpy as np
import pytest
from tones import RATE_HZ, TIMBRES, make_tone

from fluteprobe.sound.partials import (
    Floats,
    Samples,
    Tracks,
    amplitudes,
    demodulate,
    orders_below_nyquist,
    standing,
    undimmed,
    without_partials,
)
from fluteprobe.sound.pitch import PhaseCurve, measure_pitch, phase_track


def taken_apart(samples: Samples, frequency_hz: float) -> tuple[Tracks, PhaseCurve, Floats]:
    tracks = demodulate(samples, RATE_HZ, frequency_hz, orders_below_nyquist(RATE_HZ, frequency_hz))
    pitch = measure_pitch(phase_track(tracks))
    phase = pitch.curve.phase(tracks.time_s)
    still = undimmed(standing(tracks, phase), phase)
    return still, pitch.curve, amplitudes(still)


@pytest.mark.parametrize("extent_cents", [0.0, 30.0])
@pytest.mark.parametrize("timbre", list(TIMBRES))
def test_levels_are_within_a_third_of_a_decibel_10_db_over_the_noise(
    timbre: str, extent_cents: float
) -> None:
    """Within 0.3 dB where a partial stands 10 dB over the noise near it (within 0.3 of the fundamental)."""
    for frequency_hz, snr_db in ((165.0, 30.0), (440.0, 20.0), (1400.0, 40.0)):
        rng = np.random.default_rng([30, len(timbre), int(frequency_hz)])
        time_s = np.arange(2 * RATE_HZ) / RATE_HZ
        vibrato = extent_cents * np.sin(2 * np.pi * 5.0 * time_s)
        made = make_tone(frequency_hz, 2.0, timbre, snr_db, rng, movement_cents=vibrato)
        _, _, found = taken_apart(made.samples, frequency_hz)
        near_noise = made.noise**2 * 2.0 * 0.3 * frequency_hz / RATE_HZ * 2.0
        for true, measured in zip(made.amplitudes, found, strict=False):
            if true**2 > 10.0 * near_noise:
                assert 20 * np.log10(measured / true) == pytest.approx(0.0, abs=0.3)


def test_noise_is_not_taken_for_partials() -> None:
    """Of 30 × 15 places without a partial, at one chance in 10 000 each, more than two found is no chance."""
    invented = 0
    for seed in range(30):
        made = make_tone(700.0, 1.0, "dark", 20.0, np.random.default_rng([31, seed]))
        _, _, found = taken_apart(made.samples, 700.0)
        assert found[0] > 0.0
        invented += int(np.sum(found[2:17] > 0.0))
    assert invented <= 2


@pytest.mark.parametrize(("extent_cents", "within_db"), [(0.0, 0.5), (10.0, 1.0), (35.0, 1.5)])
def test_what_is_left_without_the_partials_is_the_noise(extent_cents: float, within_db: float) -> None:
    """Noise 40 dB under the tone, also where the pitch swings (a wide swing of a low tone leaves 1.3 dB)."""
    for frequency_hz in (220.0, 700.0, 1500.0):
        rng = np.random.default_rng([32, int(frequency_hz)])
        time_s = np.arange(2 * RATE_HZ) / RATE_HZ
        vibrato = extent_cents * np.sin(2 * np.pi * 5.0 * time_s)
        made = make_tone(frequency_hz, 2.0, "plain", 40.0, rng, movement_cents=vibrato)
        still, curve, found = taken_apart(made.samples, frequency_hz)
        rest = without_partials(made.samples, still, curve.phase, found > 0.0)
        assert 20 * np.log10(np.std(rest) / made.noise) == pytest.approx(0.0, abs=within_db)
