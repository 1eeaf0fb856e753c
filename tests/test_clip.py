"""Short clips of compressed sound, decoded again by libsndfile. Tones are true by construction."""

import io
from pathlib import Path

import numpy as np
import pytest
import soundfile
from numpy.typing import NDArray

from fluteprobe.sound.clip import CLIP_RATE_HZ, compressed
from fluteprobe.sound.recording import Recording, RecordingError, open_recording

TONE_HZ = 1000.0


@pytest.fixture(params=[8000, 44100, 48000, 96000])
def recording(request: pytest.FixtureRequest, tmp_path: Path) -> Recording:
    """Return four seconds of a quiet tone, between two silences of half a second."""
    rate_hz = request.param
    time_s = np.arange(4 * rate_hz) / rate_hz
    tone = 0.02 * np.sin(2.0 * np.pi * TONE_HZ * time_s)
    silence = np.zeros(rate_hz // 2)
    soundfile.write(tmp_path / "take.wav", np.concatenate([silence, tone, silence]), rate_hz)
    return open_recording(tmp_path / "take.wav")


def decoded(content: bytes) -> NDArray[np.float64]:
    samples, rate_hz = soundfile.read(io.BytesIO(content))
    assert rate_hz == CLIP_RATE_HZ
    assert samples.ndim == 1
    return np.asarray(samples)


def test_the_clip_is_the_tone_and_nothing_else(recording: Recording) -> None:
    samples = decoded(compressed(recording, 1.0, 2.5))
    assert len(samples) == pytest.approx(1.5 * CLIP_RATE_HZ, abs=1200)  # an MP3 has whole packets of 576
    middle = samples[6000:30000]
    spectrum = np.abs(np.fft.rfft(middle * np.hanning(len(middle))))
    peak_hz = float(np.argmax(spectrum)) * CLIP_RATE_HZ / len(middle)
    assert peak_hz == pytest.approx(TONE_HZ, abs=1.0)  # one bin


def test_a_clip_is_faded_levelled_and_two_seconds_at_most(recording: Recording) -> None:
    samples = decoded(compressed(recording, 0.5, 4.5))
    assert len(samples) == pytest.approx(2.0 * CLIP_RATE_HZ, abs=1200)
    assert float(np.max(np.abs(samples))) == pytest.approx(0.35, rel=0.1)  # compression moves a peak a little
    assert float(np.max(np.abs(samples[:60]))) < 0.05
    assert float(np.max(np.abs(samples[-60:]))) < 0.05


def test_the_same_samples_give_the_same_bytes_and_few(recording: Recording) -> None:
    once, again = (compressed(recording, 1.0, 3.0) for _ in range(2))
    assert once == again
    assert len(once) < 20_000


def test_silence_stays_silence(recording: Recording) -> None:
    assert float(np.max(np.abs(decoded(compressed(recording, 0.0, 0.4))))) < 1e-3


@pytest.mark.parametrize(("start_s", "end_s"), [(-0.1, 1.0), (2.0, 2.0), (3.0, 2.0), (4.0, 5.2)])
def test_a_part_that_is_none_is_refused(recording: Recording, start_s: float, end_s: float) -> None:
    with pytest.raises(ValueError, match=f"{start_s} to {end_s} s is no part of a recording of 5.0 s"):
        compressed(recording, start_s, end_s)


def test_without_an_mp3_encoder_it_says_so(recording: Recording, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(soundfile, "available_formats", lambda: {"WAV": "WAV"})
    with pytest.raises(RecordingError, match="this machine's libsndfile writes no MP3"):
        compressed(recording, 1.0, 2.0)
