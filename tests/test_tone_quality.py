"""The quality of single tones, on made ones: what is cut, squeezed, uneven or not alone."""

import faults
import numpy as np
import pytest
from numpy.typing import NDArray
from tones import RATE_HZ, TIMBRES, Made, make_tone

from fluteprobe.sound.breath import noise_spectrum
from fluteprobe.sound.measured import take_apart
from fluteprobe.sound.tone_quality import (
    beside,
    is_clipped,
    loudness_swing_db,
    other_tones,
    room_cautions,
    tone_cautions,
    two_tones,
)

HZ = 466.0


def made(timbre: str = "plain", snr_db: float = 30.0, seconds: float = 0.8, hz: float = HZ) -> Made:
    return make_tone(hz, seconds, timbre, snr_db, np.random.default_rng(20))


def clipped(samples: NDArray[np.floating], hz: float = HZ, crest: float = 0.0) -> bool:
    kept = samples.astype(np.float32)
    return is_clipped(kept, take_apart(kept, RATE_HZ, hz).residual, RATE_HZ, hz, crest)


@pytest.mark.parametrize("timbre", TIMBRES)
@pytest.mark.parametrize("snr_db", [15.0, 40.0])
def test_tones_of_any_timbre_are_not_clipped(timbre: str, snr_db: float) -> None:
    assert not clipped(made(timbre, snr_db).samples)


@pytest.mark.parametrize("timbre", TIMBRES)
def test_a_wave_cut_at_six_tenths_is_clipped(timbre: str) -> None:
    assert clipped(faults.hard_clipped(made(timbre).samples, 0.6))


def test_a_wave_cut_on_one_side_is_clipped() -> None:
    samples = made().samples
    assert clipped(np.minimum(samples, 0.6 * samples.max()))


def test_a_squeezed_wave_is_clipped() -> None:
    assert clipped(faults.soft_clipped(made().samples, 3.0))


def test_a_squeezed_wave_is_clipped_through_an_mp3() -> None:
    cut = faults.hard_clipped(made(seconds=1.5).samples, 0.4)
    assert clipped(faults.through_mp3(cut, RATE_HZ, 128)[RATE_HZ // 4 : RATE_HZ])


def test_a_square_wave_that_was_played_so_is_not_clipped() -> None:
    """Flat crests that the noise still moves: the wave is square, but nothing held it."""
    time_s = np.arange(RATE_HZ) / RATE_HZ
    square = sum(np.sin(2 * np.pi * k * HZ * time_s) / k for k in (1, 3, 5, 7, 9))
    assert not clipped(square + 0.03 * np.random.default_rng(21).standard_normal(RATE_HZ))


def test_hum_and_swelling_do_not_pass_for_clipping() -> None:
    samples = faults.hummed(made(seconds=1.0).samples, RATE_HZ, 50.0, -10.0)
    assert not clipped(faults.swelling(samples, RATE_HZ, 2.0, np.random.default_rng(22)))


def test_what_is_far_under_the_highest_crest_was_not_cut() -> None:
    cut = faults.hard_clipped(made().samples, 0.6)
    assert clipped(cut, crest=0.5)
    assert not clipped(cut, crest=1.0)


def test_too_few_crests_tell_nothing() -> None:
    assert not clipped(faults.hard_clipped(made(seconds=0.06).samples, 0.4))


def test_a_tone_without_noise_tells_nothing() -> None:
    assert not clipped(made(snr_db=100.0).samples)


def test_loudness_swing() -> None:
    steady = made(seconds=2.0).samples
    assert loudness_swing_db(steady, RATE_HZ) < 0.2
    assert loudness_swing_db(steady * np.float32(0.1), RATE_HZ) < 0.2
    fading = steady * np.logspace(0.0, -0.5, len(steady), dtype=np.float32)
    assert loudness_swing_db(fading, RATE_HZ) < 0.3
    time_s = np.arange(len(steady)) / RATE_HZ
    swinging = steady * (10.0 ** (4.0 * np.sin(2 * np.pi * 1.5 * time_s) / 20.0)).astype(np.float32)
    assert loudness_swing_db(swinging, RATE_HZ) == pytest.approx(4.0 / np.sqrt(2.0), abs=0.3)
    assert loudness_swing_db(steady[:1000], RATE_HZ) == 0.0


def test_words_for_a_tone_alone() -> None:
    samples = (1e-4 * made(snr_db=8.0, seconds=0.3).samples).astype(np.float32)
    measured = take_apart(samples, RATE_HZ, HZ)
    assert tone_cautions(samples, RATE_HZ, measured, 0.0) == [
        "very quiet (-79 dB under full scale): record closer",
        f"noisy: the tone stands only {measured.harmonic_to_noise_db:.0f} dB over the noise; "
        "blow until it speaks clearly, in a quiet room",
        "short: 0.30 s steady; hold the tone for two seconds",
    ]


@pytest.mark.parametrize(("room_share", "is_told"), [(0.1, False), (0.9, True)])
def test_a_room_that_makes_most_of_the_noise(room_share: float, is_told: bool) -> None:
    rng = np.random.default_rng(23)
    noise = rng.standard_normal(RATE_HZ).astype(np.float32)
    room = (np.sqrt(room_share) * rng.standard_normal(RATE_HZ)).astype(np.float32)
    spectra = [noise_spectrum(each, RATE_HZ, 4096, 4.0 * HZ) for each in (noise, room)]
    words = ["a noisy room: it drowns the breath, which tells the register; come closer, in a quieter room"]
    assert room_cautions(spectra[0], spectra[1], HZ) == (words if is_told else [])
    assert room_cautions(spectra[0], None, HZ) == []


def test_other_tones_are_found_down_to_40_db() -> None:
    rng = np.random.default_rng(24)
    time_s = np.arange(2 * RATE_HZ) / RATE_HZ
    residual = 0.02 * np.cos(2 * np.pi * 700.0 * time_s) + 0.002 * np.cos(2 * np.pi * 290.0 * time_s)
    residual += 1e-3 * rng.standard_normal(len(time_s))
    spectrum = noise_spectrum(residual.astype(np.float32), RATE_HZ, 4096, 4.0 * HZ)
    (found,) = other_tones(spectrum, HZ, 1.0)
    assert found[0] == pytest.approx(700.0, abs=2.0)
    assert found[1] == pytest.approx(-34.0, abs=1.5)
    assert other_tones(None, HZ, 1.0) == []


def test_a_loud_tone_counts_that_lasts_for_half_of_the_time() -> None:
    residual = 0.6 * np.cos(2 * np.pi * 700.0 * np.arange(2 * RATE_HZ) / RATE_HZ)
    residual[RATE_HZ:] = 0.0
    residual += 1e-3 * np.random.default_rng(25).standard_normal(len(residual))
    spectrum = noise_spectrum(residual.astype(np.float32), RATE_HZ, 4096, 4.0 * HZ)
    assert other_tones(spectrum, HZ, 1.0)[0][0] == pytest.approx(700.0, abs=3.0)


def test_breath_noise_alone_has_no_other_tones() -> None:
    """A resonance of quality 50, 20 dB over its surroundings: still noise."""
    rng = np.random.default_rng(26)
    white = np.fft.rfft(rng.standard_normal(2 * RATE_HZ))
    hz = np.fft.rfftfreq(2 * RATE_HZ, 1.0 / RATE_HZ)
    bump = 1.0 + 9.0 / np.sqrt(1.0 + (100.0 * (hz / 230.0 - 1.0)) ** 2)
    noise = np.fft.irfft(white * bump).astype(np.float32)
    assert other_tones(noise_spectrum(noise, RATE_HZ, 4096, 4.0 * HZ), HZ, 1.0) == []


def test_words_for_two_tones() -> None:
    assert two_tones(500.0, [683.0, 1366.0]) == (
        "more than one instrument: 500 and 683 Hz; record one flute alone"
    )
    mixed = "two tones at once: 500 and 683 Hz; blow until one holds, one flute alone"
    assert two_tones(500.0, [683.0, 1366.0, 183.0]) == mixed
    assert two_tones(500.0, [683.0]) == mixed
    assert beside(293.2, -27.6) == "another sound: 293 Hz, 28 dB under the tone; record one flute alone"
