"""Whole recordings, made with known truth: exactly the tones are found, and their facts are right."""

from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from tones import RATE_HZ, as_recording, cents

from fluteprobe.sound.tone import read_tones

Floats = NDArray[np.float64]
PLAIN = (1.0, 0.1, 0.05, 0.02, 0.01)


def note(
    frequency_hz: float, seconds: float, amplitudes: tuple[float, ...] = PLAIN, **movement: float
) -> Floats:
    """Return a tone with an attack of 40 ms and a release of 50 ms, 14 dB under full scale."""
    time_s = np.arange(round(seconds * RATE_HZ)) / RATE_HZ
    bend = movement.get("vibrato", 0.0) * np.sin(2 * np.pi * 5.0 * time_s)
    bend = bend + movement.get("drift", 0.0) * (time_s / seconds - 0.5)
    phase = 2 * np.pi * np.cumsum(frequency_hz * 2.0 ** (bend / 1200.0)) / RATE_HZ
    tone = sum(a * np.cos(k * phase + k) for k, a in enumerate(amplitudes, start=1))
    envelope = np.minimum(1.0, time_s / 0.04) * np.minimum(1.0, (seconds - time_s) / 0.05)
    return np.asarray(0.2 * tone * envelope)


def pause(seconds: float) -> Floats:
    return np.zeros(round(seconds * RATE_HZ))


def room(samples: Floats, noise: float = 0.002) -> NDArray[np.float32]:
    """Add the hiss of a room and mains hum with its harmonics."""
    time_s = np.arange(len(samples)) / RATE_HZ
    hum = 0.003 * np.sin(2 * np.pi * 50 * time_s) + 0.002 * np.sin(2 * np.pi * 100 * time_s)
    hum += 0.0015 * np.sin(2 * np.pi * 150 * time_s)
    hiss = noise * np.random.default_rng(50).standard_normal(len(samples))
    return (samples + hum + hiss).astype(np.float32)


def reverberant(samples: Floats) -> Floats:
    """Add a room of 0.4 s reverberation time, 12 dB under the direct sound (exponentially decaying noise)."""
    n = round(0.5 * RATE_HZ)
    decay = np.random.default_rng(51).standard_normal(n) * 10.0 ** (-3.0 * np.arange(n) / RATE_HZ / 0.4)
    decay *= 0.25 / np.sqrt(np.sum(decay**2))
    size = 1 << (len(samples) + n).bit_length()
    wet = np.fft.irfft(np.fft.rfft(samples, size) * np.fft.rfft(decay, size), size)
    return samples + wet[: len(samples)]


def test_a_busy_recording_gives_exactly_its_tones(tmp_path: Path) -> None:
    """Pauses, a break of register in mid-breath, a click, hum, reverberation and a cough."""
    parts = [pause(0.5), note(440, 1.5), note(884, 1.2), pause(0.6), note(330, 2.0, (0.03, 1, 0.3, 0.5, 0.2))]
    parts += [
        pause(0.8),
        note(1760, 1.0, drift=20.0),
        pause(0.4),
        note(115, 1.5, (1, 0.5, 0.3, 0.2, 0.1)),
        pause(0.5),
    ]
    samples = reverberant(np.concatenate(parts))
    samples[round(0.25 * RATE_HZ)] += 0.8
    cough = slice(round(6.2 * RATE_HZ), round(6.35 * RATE_HZ))
    samples[cough] += 0.1 * np.random.default_rng(52).standard_normal(cough.stop - cough.start)
    tones = read_tones(as_recording(tmp_path, room(samples)))
    truth = [(0.5, 2.0, 440.0), (2.0, 3.2, 884.0), (3.8, 5.8, 330.0), (6.6, 7.6, 1760.0), (8.0, 9.5, 115.0)]
    assert [tone.kind for tone in tones] == ["tone"] * 5
    for tone, (start_s, end_s, frequency_hz) in zip(tones, truth, strict=True):
        assert tone.start_s == pytest.approx(start_s, abs=0.05)
        assert tone.end_s == pytest.approx(end_s, abs=0.05)
        assert tone.frequency_hz is not None
        assert cents(tone.frequency_hz / frequency_hz) == pytest.approx(0.0, abs=0.2)


def test_half_a_second_is_enough(tmp_path: Path) -> None:
    tones = read_tones(as_recording(tmp_path, room(np.concatenate([pause(0.2), note(620, 0.5), pause(0.2)]))))
    assert len(tones) == 1
    assert tones[0].frequency_hz == pytest.approx(620.0, rel=2e-5)


@pytest.mark.parametrize("rate_hz", [8000, 16000, 48000, 96000])
def test_any_rate_gives_the_same_pitch(tmp_path: Path, rate_hz: int) -> None:
    time_s = np.arange(rate_hz) / rate_hz
    samples = 0.2 * np.cos(2 * np.pi * 700.0 * time_s) + 0.02 * np.cos(2 * np.pi * 1400.0 * time_s)
    samples += 0.001 * np.random.default_rng(53).standard_normal(rate_hz)
    tones = read_tones(as_recording(tmp_path, samples.astype(np.float32), rate_hz))
    assert [tone.frequency_hz for tone in tones] == [pytest.approx(700.0, rel=1e-5)]


def test_facts_of_a_tone(tmp_path: Path) -> None:
    samples = room(np.concatenate([pause(0.3), note(523.0, 2.2, vibrato=25.0, drift=12.0), pause(0.3)]))
    (tone,) = read_tones(as_recording(tmp_path, samples))
    assert tone.vibrato is not None
    assert tone.vibrato.rate_hz == pytest.approx(5.0, abs=0.3)
    assert tone.vibrato.extent_cents == pytest.approx(25.0, rel=0.15)
    assert tone.drift_cents == pytest.approx(12.0 * (tone.end_s - tone.start_s) / 2.2, abs=1.5)
    assert tone.attack_ms == pytest.approx(28.0, abs=15.0)
    assert [partial.order for partial in tone.partials][:4] == [1, 2, 3, 4]
    assert [partial.level_db for partial in tone.partials][:4] == pytest.approx(
        [0.0, -20.0, -26.0, -34.0], abs=0.3
    )
    assert tone.harmonic_to_noise_db == pytest.approx(32.4, abs=1.0)


@pytest.mark.parametrize("colour", [0.0, 1.0])
def test_breath_without_a_tone_is_breath_only(tmp_path: Path, colour: float) -> None:
    rng = np.random.default_rng(54)
    n = 2 * RATE_HZ
    shape = np.maximum(np.fft.rfftfreq(n, 1.0 / RATE_HZ), 50.0) ** -colour
    hiss = np.fft.irfft(np.fft.rfft(rng.standard_normal(n)) * shape, n)
    (tone,) = read_tones(as_recording(tmp_path, (0.05 * hiss / hiss.std()).astype(np.float32)))
    assert tone.kind == "breath only"
    assert tone.frequency_hz is None
    assert tone.cautions == ("no steady tone was found: breath only",)


def test_cautions_in_plain_words(tmp_path: Path) -> None:
    rng = np.random.default_rng(55)
    noisy = (note(600, 0.35) + 0.05 * rng.standard_normal(round(0.35 * RATE_HZ))).astype(np.float32)
    (tone,) = read_tones(as_recording(tmp_path, noisy))
    assert tone.cautions[0].startswith("noisy: the tone stands only 8 dB") or "9 dB" in tone.cautions[0]
    assert tone.cautions[1].startswith("short: 0.2") or tone.cautions[1].startswith("short: 0.3")


def test_two_tones_that_the_jet_mixes_are_a_multiphonic(tmp_path: Path) -> None:
    """A square law mixes the two: lines at their sum and difference."""
    both = note(500.0, 2.0) + 0.4 * note(683.0, 2.0)
    (tone,) = read_tones(as_recording(tmp_path, room(both + 0.8 * both**2)))
    assert tone.kind == "multiphonic"
    assert tone.cautions[0] == "two tones at once: 500 and 683 Hz; blow until one holds, one flute alone"


def test_two_tones_that_only_add_are_two_instruments(tmp_path: Path) -> None:
    both = note(500.0, 2.0) + 0.4 * note(683.0, 2.0)
    (tone,) = read_tones(as_recording(tmp_path, room(both)))
    assert tone.kind == "multiphonic"
    assert tone.cautions[0] == "more than one instrument: 500 and 683 Hz; record one flute alone"


def test_a_whistle_that_follows_the_breath_is_an_edge_tone(tmp_path: Path) -> None:
    """A bare, faint tone whose pitch swings by tens of cents with no resonance at it (made, no source)."""
    rng = np.random.default_rng(56)
    time_s = np.arange(2 * RATE_HZ) / RATE_HZ
    bend = 35.0 * np.sin(2 * np.pi * 0.9 * time_s) + 10.0 * np.sin(2 * np.pi * 1.7 * time_s)
    phase = 2 * np.pi * np.cumsum(1130.0 * 2.0 ** (bend / 1200.0)) / RATE_HZ
    whistle = 0.02 * np.cos(phase) + 0.006 * rng.standard_normal(len(time_s))
    (tone,) = read_tones(as_recording(tmp_path, whistle.astype(np.float32)))
    assert tone.kind == "edge tone"
    assert tone.frequency_hz == pytest.approx(1130.0, rel=0.01)


def test_a_tone_that_turns_between_registers_is_a_warble(tmp_path: Path) -> None:
    parts = [note(392.0, 0.4), note(790.0, 0.4)] * 3
    (tone,) = read_tones(as_recording(tmp_path, room(np.concatenate([pause(0.2), *parts, pause(0.2)]))))
    assert tone.kind == "multiphonic"
    assert tone.cautions[0] == "warbles between 392 and 790 Hz: steady the breath"
