"""The pitch estimator against the Cramér-Rao bound, by Monte-Carlo with fixed seeds, and on moving tones.

The bound is that of Christensen & Jakobsson, Multi-Pitch Estimation (2009), ch. 1, for real signals. The full
size runs in tests/bench/bench_pitch.py.
"""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from tones import RATE_HZ, TIMBRES, bound_cents, cents, make_tone

from fluteprobe.sound.octave import settle_octave
from fluteprobe.sound.partials import Samples, demodulate, orders_below_nyquist
from fluteprobe.sound.pitch import Pitch, measure_pitch, phase_track, refine

PITCHES = [
    (110.0, 0.3),
    (110.0, 1.0),
    (440.0, 0.3),
    (440.0, 1.0),
    (1200.0, 0.3),
    (2600.0, 0.3),
    (2600.0, 1.0),
]


def read(samples: Samples, coarse_hz: float, rate_hz: int = RATE_HZ) -> Pitch:
    refined = refine(samples, rate_hz, settle_octave(samples, rate_hz, coarse_hz))
    tracks = demodulate(samples, rate_hz, refined, orders_below_nyquist(rate_hz, refined))
    return measure_pitch(phase_track(tracks))


@pytest.mark.parametrize("snr_db", [10.0, 30.0, 50.0])
@pytest.mark.parametrize("timbre", list(TIMBRES))
def test_error_stands_at_the_cramer_rao_bound_and_uncertainty_covers_it(timbre: str, snr_db: float) -> None:
    rng = np.random.default_rng([20, int(snr_db), len(timbre)])
    ratios, errors, covered = [], [], []
    for base_hz, duration_s in PITCHES * 4:
        frequency_hz = base_hz * 2.0 ** (rng.uniform(-50, 50) / 1200.0)
        made = make_tone(frequency_hz, duration_s, timbre, snr_db, rng)
        pitch = read(made.samples, frequency_hz * 2.0 ** (rng.uniform(-15, 15) / 1200.0))
        error = cents(pitch.frequency_hz / frequency_hz)
        ratios.append(error / bound_cents(made, frequency_hz))
        errors.append(error)
        covered.append(abs(error) < 2.0 * pitch.uncertainty_cents)
    # 1.3 is the requirement; the rms of 28 normal values scatters by 13 % itself, which 0.2 allows for.
    assert np.sqrt(np.mean(np.square(ratios))) < 1.3 + 0.2
    # 28 cases at 95.4 % coverage fall under 78 % less than once in a thousand runs (binomial).
    assert np.mean(covered) > 0.78
    assert abs(np.mean(errors)) < 0.05


@pytest.mark.parametrize("coarse", [0.5, 1.0, 2.0, 3.0])
@pytest.mark.parametrize("timbre", list(TIMBRES))
def test_the_octave_is_settled_by_the_lines_themselves(timbre: str, coarse: float) -> None:
    """A coarse pitch an octave or a twelfth off is mended if that partial is within 26 dB of the top one."""
    amplitudes = (*TIMBRES[timbre], 0.0, 0.0)
    if coarse > 1.0 and amplitudes[int(coarse) - 1] < 0.05:
        pytest.skip("no coarse pitch is read from a partial that is hardly there")
    rng = np.random.default_rng([21, len(timbre)])
    for frequency_hz in (196.0, 440.0, 987.8):
        made = make_tone(frequency_hz, 0.6, timbre, 30.0, rng)
        settled = settle_octave(made.samples, RATE_HZ, coarse * frequency_hz)
        assert abs(cents(settled / frequency_hz)) < 5.0


def test_a_bump_of_breath_noise_at_half_the_frequency_is_no_fundamental() -> None:
    rng = np.random.default_rng(22)
    made = make_tone(880.0, 1.5, "plain", 40.0, rng)
    n = len(made.samples)
    spectrum = np.fft.rfft(rng.standard_normal(n))
    hertz = np.fft.rfftfreq(n, 1.0 / RATE_HZ)
    bump = np.fft.irfft(spectrum / np.sqrt(1.0 + ((hertz - 440.0) / 6.0) ** 2), n)
    samples = (made.samples + 0.03 * bump / np.std(bump)).astype(np.float32)
    assert abs(cents(settle_octave(samples, RATE_HZ, 880.0) / 880.0)) < 5.0


@given(
    rate_hz=st.floats(3.2, 7.8),
    extent=st.floats(8.0, 40.0),
    drift=st.floats(-30.0, 30.0),
    frequency_hz=st.floats(150.0, 1800.0),
)
@settings(max_examples=12, deadline=None, derandomize=True)
def test_moving_tones(rate_hz: float, extent: float, drift: float, frequency_hz: float) -> None:
    rng = np.random.default_rng(23)
    whole_s = round(3.0 * rate_hz) / rate_hz
    time_s = np.arange(round(whole_s * RATE_HZ)) / RATE_HZ
    movement = extent * np.sin(2 * np.pi * rate_hz * time_s + 1.0) + drift * (time_s / whole_s - 0.5)
    made = make_tone(frequency_hz, whole_s, "plain", 30.0, rng, movement_cents=movement)
    pitch = read(made.samples, frequency_hz)
    assert cents(pitch.frequency_hz / frequency_hz) == pytest.approx(float(np.mean(movement)), abs=0.5)
    assert pitch.vibrato is not None
    assert pitch.vibrato.rate_hz == pytest.approx(rate_hz, abs=0.3)
    assert pitch.vibrato.extent_cents == pytest.approx(extent, rel=0.15)
    assert pitch.drift_cents == pytest.approx(drift, abs=1.0 + 0.02 * extent)


def test_uncertainty_covers_the_middle_of_a_wandering_pitch() -> None:
    """A pitch that wanders about its middle with memory (first-order, 0.15 s) for three seconds."""
    rng = np.random.default_rng(24)
    step_s, memory_s, spread_cents = 0.005, 0.15, 4.0
    keep = np.exp(-step_s / memory_s)
    covered = []
    for _ in range(40):
        pushes = rng.standard_normal(650) * spread_cents * np.sqrt(1.0 - keep**2)
        wander = np.zeros(650)
        for i in range(1, 650):
            wander[i] = keep * wander[i - 1] + pushes[i]
        time_s = np.arange(3 * RATE_HZ) / RATE_HZ
        movement = np.interp(time_s, step_s * np.arange(600), wander[50:])
        made = make_tone(500.0, 3.0, "plain", 30.0, rng, movement_cents=movement)
        pitch = read(made.samples, 500.0)
        covered.append(abs(cents(pitch.frequency_hz / 500.0)) < 2.0 * pitch.uncertainty_cents)
    # Wanted: 93 to 99 %. 40 cases at 95 % scatter by 3.4 %, so 85 to 100 % passes; the benchmark has more.
    assert np.mean(covered) > 0.85
