"""Parts of recordings as files: every sample of the original, read back by libsndfile."""

import io
from pathlib import Path

import numpy as np
import pytest
import soundfile
from numpy.typing import NDArray

from fluteprobe.sound.cut import own_rate_hz, part_format, part_of
from fluteprobe.sound.recording import open_recording

RATE_HZ = 16_000
RNG = np.random.default_rng(12)


def made(
    path: Path, subtype: str, *, channels: int = 2, rate_hz: int = RATE_HZ, seconds: float = 2.0
) -> Path:
    noise = RNG.uniform(-0.999, 0.999, (int(seconds * rate_hz), channels))
    soundfile.write(path, noise, rate_hz, subtype=subtype)
    return path


def decoded(content: bytes, dtype: str) -> tuple[NDArray[np.float64], int, str]:
    with soundfile.SoundFile(io.BytesIO(content)) as file:
        return file.read(dtype=dtype, always_2d=True), file.samplerate, f"{file.format} {file.subtype}"


@pytest.mark.parametrize(
    ("name", "subtype", "kind", "dtype"),
    [
        ("a.wav", "PCM_U8", "FLAC PCM_S8", "int32"),
        ("a.wav", "PCM_16", "FLAC PCM_16", "int32"),
        ("a.wav", "PCM_24", "FLAC PCM_24", "int32"),
        ("a.wav", "PCM_32", "WAV PCM_32", "int32"),
        ("a.wav", "FLOAT", "WAV FLOAT", "float32"),
        ("a.wav", "DOUBLE", "WAV DOUBLE", "float64"),
        ("a.wav", "ULAW", "WAV FLOAT", "float32"),
        ("a.aiff", "PCM_16", "FLAC PCM_16", "int32"),
        ("a.caf", "ALAC_24", "WAV FLOAT", "float32"),
        ("a.flac", "PCM_24", "FLAC PCM_24", "int32"),
        ("a.ogg", "VORBIS", "WAV FLOAT", "float32"),
    ],
)
def test_a_part_has_the_very_samples_of_the_recording(
    tmp_path: Path, name: str, subtype: str, kind: str, dtype: str
) -> None:
    path = made(tmp_path / name, subtype)
    samples, rate_hz, told = decoded(part_of(open_recording(path), 0.25, 1.5), dtype)
    original, _ = soundfile.read(path, dtype=dtype, always_2d=True)
    assert (rate_hz, told) == (RATE_HZ, kind)
    np.testing.assert_array_equal(samples, original[RATE_HZ // 4 : 3 * RATE_HZ // 2])


def test_an_mp3_s_part_is_what_decoding_gave(tmp_path: Path) -> None:
    time_s = np.arange(3 * 44_100) / 44_100
    soundfile.write(tmp_path / "a.mp3", 0.3 * np.sin(2.0 * np.pi * 500.0 * time_s), 44_100)
    original, _ = soundfile.read(tmp_path / "a.mp3", dtype="float32", always_2d=True)
    samples, _, told = decoded(part_of(open_recording(tmp_path / "a.mp3"), 1.0, 2.0), "float32")
    assert told == "WAV FLOAT"
    np.testing.assert_allclose(samples, original[44_100:88_200], atol=2.0**-15)  # half a step of 16 bits


@pytest.mark.parametrize("channels", [1, 2, 9])
def test_all_channels_stay(tmp_path: Path, channels: int) -> None:
    recording = open_recording(made(tmp_path / "a.wav", "PCM_16", channels=channels))
    samples, _, told = decoded(part_of(recording, 0.0, 1.0), "float32")
    assert samples.shape == (RATE_HZ, channels)
    assert told == ("FLAC PCM_16" if channels <= 8 else "WAV PCM_16")
    assert part_format(recording).suffix == (".flac" if channels <= 8 else ".wav")


def test_a_rate_above_what_is_heard_at_stays(tmp_path: Path) -> None:
    recording = open_recording(made(tmp_path / "a.wav", "PCM_24", rate_hz=192_000, channels=1))
    assert recording.rate_hz < own_rate_hz(recording) == 192_000
    samples, rate_hz, _ = decoded(part_of(recording, 0.5, 1.0), "int32")
    assert (len(samples), rate_hz) == (96_000, 192_000)


def test_a_part_ends_with_the_recording(tmp_path: Path) -> None:
    recording = open_recording(made(tmp_path / "a.wav", "PCM_16"))
    assert len(decoded(part_of(recording, 1.0, recording.duration_s), "int32")[0]) == RATE_HZ


@pytest.mark.parametrize(("start_s", "end_s"), [(-0.1, 1.0), (1.0, 1.0), (1.5, 2.5)])
def test_what_is_no_part_is_refused(tmp_path: Path, start_s: float, end_s: float) -> None:
    recording = open_recording(made(tmp_path / "a.wav", "PCM_16"))
    with pytest.raises(ValueError, match=r"s is no part of a recording of 2\.0 s$"):
        part_of(recording, start_s, end_s)


def test_the_recording_stays_as_it_is(tmp_path: Path) -> None:
    path = made(tmp_path / "a.wav", "PCM_16")
    before = path.read_bytes()
    part_of(open_recording(path), 0.0, 1.0)
    assert path.read_bytes() == before
