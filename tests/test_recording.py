"""Any sound file becomes samples: formats, rates, channels, faults.

The truth is by construction: a tone of known pitch is written and read back. Where the writing is not by
hand (bytes laid down in this file), it is by libsndfile, the general-purpose library that also reads.
"""

import os
import shlex
import stat
import struct
import subprocess
import sys
import tracemalloc
from pathlib import Path

import numpy as np
import pytest
import soundfile
from harm import CHANGES, KEPT, Changes, harmed, is_read_or_refused_in_one_line
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from fluteprobe.sound.channels import choose_channel, clearness_db, clipped_share
from fluteprobe.sound.recording import Recording, RecordingError, open_recording

Samples = NDArray[np.float64]

PITCH_HZ = 523.25
PITCH_TOLERANCE_CENTS = 0.05  # of the crude estimator below on one second of a clean tone

LOSSLESS = [
    *(
        ("WAV", subtype)
        for subtype in ("PCM_U8", "PCM_16", "PCM_24", "PCM_32", "FLOAT", "DOUBLE", "ULAW", "ALAW")
    ),
    *(("WAVEX", subtype) for subtype in ("PCM_16", "PCM_24")),
    *(("RF64", subtype) for subtype in ("PCM_16", "PCM_24", "FLOAT")),
    *(("W64", subtype) for subtype in ("PCM_16", "PCM_32", "DOUBLE")),
    *(("AIFF", subtype) for subtype in ("PCM_S8", "PCM_16", "PCM_24", "PCM_32", "FLOAT")),
    *(("CAF", subtype) for subtype in ("PCM_16", "PCM_24", "FLOAT", "ALAC_16", "ALAC_24")),
    *(("FLAC", subtype) for subtype in ("PCM_S8", "PCM_16", "PCM_24")),
    ("AU", "PCM_16"),
]
LOSSY = [("OGG", "VORBIS"), ("OGG", "OPUS"), ("MP3", "MPEG_LAYER_III")]
RATES_HZ = [8000, 11025, 16000, 22050, 32000, 44100, 48000]


def tone(rate_hz: int = 48000, seconds: float = 1.0, level: float = 0.5, noise: float = 0.001) -> Samples:
    time_s = np.arange(round(seconds * rate_hz)) / rate_hz
    hiss = np.random.default_rng(7).standard_normal(len(time_s))
    return level * np.sin(2 * np.pi * PITCH_HZ * time_s) + noise * hiss


def pitch_error_cents(samples: NDArray[np.float32], rate_hz: int) -> float:
    """Estimate the pitch from the phase that turns between the two halves of the samples."""
    half = len(samples) // 2
    clock = np.exp(-2j * np.pi * PITCH_HZ * np.arange(2 * half) / rate_hz)
    turned = (samples[: 2 * half] * clock * np.tile(np.hanning(half), 2)).reshape(2, half).sum(axis=1)
    offset_hz = float(np.angle(turned[1] / turned[0])) / (2 * np.pi) * rate_hz / half
    return 1200.0 * float(np.log2(1.0 + offset_hz / PITCH_HZ))


def written(path: Path, samples: Samples, rate_hz: int = 48000, **how: str) -> Path:
    soundfile.write(path, samples, rate_hz, **how)
    return path


def fault(path: Path) -> str:
    with pytest.raises(RecordingError) as caught:
        open_recording(path)
    return str(caught.value)


def whole(recording: Recording) -> NDArray[np.float32]:
    return recording.read(0, recording.frames)


# Formats and rates -------------------------------------------------------------------------------------


@pytest.mark.parametrize(("kind", "subtype"), LOSSLESS)
def test_lossless_formats_keep_every_sample_and_the_pitch(tmp_path: Path, kind: str, subtype: str) -> None:
    recording = open_recording(written(tmp_path / "take", tone(), format=kind, subtype=subtype))
    assert (recording.rate_hz, recording.frames, recording.channels) == (48000, 48000, 1)
    assert recording.duration_s == 1.0
    assert (recording.codec, recording.lossy) == (subtype, subtype in {"ULAW", "ALAW"})
    assert whole(recording).dtype == np.float32
    assert abs(pitch_error_cents(whole(recording), 48000)) < PITCH_TOLERANCE_CENTS
    assert recording.cautions == ()


@pytest.mark.parametrize(("kind", "subtype"), LOSSY)
def test_lossy_formats_keep_the_pitch(tmp_path: Path, kind: str, subtype: str) -> None:
    recording = open_recording(written(tmp_path / "take", tone(), format=kind, subtype=subtype))
    assert (recording.codec, recording.lossy) == (subtype, True)
    assert recording.duration_s == pytest.approx(1.0, abs=0.1)  # an MP3 holds whole packets of 24 ms
    assert abs(pitch_error_cents(whole(recording)[:48000], 48000)) < PITCH_TOLERANCE_CENTS
    assert recording.cautions == ()


@pytest.mark.parametrize("rate_hz", RATES_HZ)
def test_rates_up_to_50_khz_are_given_out_as_they_are(tmp_path: Path, rate_hz: int) -> None:
    recording = open_recording(written(tmp_path / "take.wav", tone(rate_hz), rate_hz))
    assert (recording.rate_hz, recording.frames) == (rate_hz, rate_hz)
    assert abs(pitch_error_cents(whole(recording), rate_hz)) < PITCH_TOLERANCE_CENTS


@pytest.mark.parametrize(
    ("rate_hz", "given_hz"),
    [(64000, 32000), (88200, 44100), (96000, 48000), (176400, 44100), (192000, 48000), (50021, 50021)],
)
def test_higher_rates_are_divided_by_a_whole_number_where_there_is_one(
    tmp_path: Path, rate_hz: int, given_hz: int
) -> None:
    recording = open_recording(written(tmp_path / "take.wav", tone(rate_hz), rate_hz))
    assert (recording.rate_hz, recording.frames) == (given_hz, given_hz)
    assert abs(pitch_error_cents(whole(recording), given_hz)) < PITCH_TOLERANCE_CENTS


@pytest.mark.parametrize("name", ["take.mp3", "take.txt", "take.raw", "take.vox", "take"])
def test_what_a_file_holds_is_found_out_by_decoding_not_from_its_name(tmp_path: Path, name: str) -> None:
    recording = open_recording(written(tmp_path / name, tone(), format="FLAC"))
    assert abs(pitch_error_cents(whole(recording), 48000)) < PITCH_TOLERANCE_CENTS


def test_file_names_of_any_script_are_opened(tmp_path: Path) -> None:
    path = written(tmp_path / "Флейта ♯ 1.wav", tone())
    assert open_recording(str(path)).path == path


def test_the_file_is_left_as_it_was_even_where_it_may_not_be_written(tmp_path: Path) -> None:
    path = written(tmp_path / "take.wav", tone())
    path.chmod(stat.S_IRUSR)
    before = (path.read_bytes(), path.stat().st_mtime_ns)
    whole(open_recording(path))
    assert (path.read_bytes(), path.stat().st_mtime_ns) == before


def test_samples_that_are_kept_cannot_be_changed_by_accident(tmp_path: Path) -> None:
    samples = whole(open_recording(written(tmp_path / "take.wav", tone())))
    with pytest.raises(ValueError, match="read-only"):
        samples[0] = 1.0


def test_decoding_mp3_writes_nothing_to_standard_error(
    tmp_path: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    path = written(tmp_path / "take.mp3", tone(seconds=3.0))
    path.write_bytes(path.read_bytes()[: path.stat().st_size // 2])  # mpg123 warns about this one
    open_recording(path)
    os.write(2, b"heard\n")
    assert capfd.readouterr().err == "heard\n"


def test_an_mp3_is_read_where_standard_error_is_closed(tmp_path: Path) -> None:
    path = written(tmp_path / "take.mp3", tone())
    code = (
        f"from fluteprobe.sound.recording import open_recording; print(open_recording({str(path)!r}).codec)"
    )
    command = f"exec {shlex.join([sys.executable, '-c', code])} 2>&-"
    run = subprocess.run(["bash", "-c", command], stdout=subprocess.PIPE, text=True, check=True)
    assert run.stdout == "MPEG_LAYER_III\n"


def test_nothing_slow_is_imported_for_an_ordinary_recording(tmp_path: Path) -> None:
    path = written(tmp_path / "take.wav", tone())
    code = (
        "import sys\n"
        "from fluteprobe.sound.recording import open_recording\n"
        f"open_recording({str(path)!r})\n"
        "print({'soxr', 'scipy', 'librosa', 'matplotlib', 'click'} & set(sys.modules))"
    )
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert run.stdout == "set()\n"


# Reading ranges and blocks -----------------------------------------------------------------------------


@pytest.fixture(scope="module", params=[(8000, 1), (96000, 2)], ids=["as it is", "divided"])
def long_and_short(
    request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory
) -> tuple[Recording, ...]:
    """Return 61 s of tone and noise, which is streamed, and the same samples' first 59 s, which are kept."""
    rate_hz, _ = request.param
    samples = tone(rate_hz, seconds=61.0, noise=0.1)
    folder = tmp_path_factory.mktemp("long")
    long = open_recording(written(folder / "long.wav", samples, rate_hz))
    return long, open_recording(written(folder / "short.wav", samples[: 59 * rate_hz], rate_hz))


def test_a_range_of_a_long_recording_reads_as_that_of_a_short_one(
    long_and_short: tuple[Recording, ...],
) -> None:
    long, short = long_and_short
    for start, stop in (
        (0, 1000),
        (1, 2),
        (7, 7),
        (123_456, 200_000),
        (short.frames - 9000, short.frames - 500),
    ):
        assert long.read(start, stop) == pytest.approx(short.read(start, stop), abs=1e-5)


@pytest.mark.parametrize(
    ("length", "overlap"), [(100_000, 0), (100_000, 30_000), (48_000, 47_000), (10**8, 5)]
)
def test_blocks_of_a_long_recording_are_its_ranges_in_order(
    long_and_short: tuple[Recording, ...], length: int, overlap: int
) -> None:
    long, _ = long_and_short
    end, step = 0, length - overlap
    for number, (start, block) in enumerate(long.blocks(length, overlap)):
        assert start == number * step
        assert len(block) == min(length, long.frames - start)
        if number % 97 == 0:
            assert block[-2000:] == pytest.approx(
                long.read(start + len(block) - 2000, start + len(block)), abs=1e-5
            )
        end = start + len(block)
    assert end == long.frames


@given(frames=st.integers(800, 3000), length=st.integers(1, 4000), data=st.data())
def test_blocks_cover_a_recording_once(
    tmp_path_factory: pytest.TempPathFactory, frames: int, length: int, data: st.DataObject
) -> None:
    overlap = data.draw(st.integers(max(0, length - 400), length - 1)) if length > 1 else 0
    path = tmp_path_factory.mktemp("blocks") / "take.wav"
    recording = open_recording(written(path, tone(8000)[:frames], 8000))
    samples, new = whole(recording), []
    for start, block in recording.blocks(length, overlap):
        assert np.array_equal(block, samples[start : start + length])
        new.append(block if start == 0 else block[overlap:])
        assert len(new[-1]) > 0
    assert np.array_equal(np.concatenate(new), samples)


def test_ranges_outside_the_recording_are_refused(tmp_path: Path) -> None:
    recording = open_recording(written(tmp_path / "take.wav", tone()))
    with pytest.raises(ValueError, match=r"^samples 47000 to 48001 are not within 0 to 48000$"):
        recording.read(47_000, 48_001)
    with pytest.raises(ValueError, match=r"^an overlap of 100 is not from 0 to 99$"):
        recording.blocks(100, 100)


@pytest.mark.parametrize("kind", ["WAV", "FLAC", "OGG", "MP3"])
def test_memory_does_not_grow_with_length(tmp_path: Path, kind: str) -> None:
    path, minute = tmp_path / "long", np.stack([tone(8000, 60.0), tone(8000, 60.0, noise=0.01)], axis=1)
    with soundfile.SoundFile(path, "w", 8000, 2, format=kind) as file:
        for _ in range(10):
            file.write(minute)
    tracemalloc.start()
    recording = open_recording(path)
    longest = max(len(block) for _, block in recording.blocks(100_000, 1000))
    recording.read(recording.frames - 1000, recording.frames)
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert recording.duration_s == pytest.approx(600.0, abs=0.2)
    assert longest == 100_000
    # Ten minutes of both channels as float32 are 38 MB; a chunk of them, its copies and the probes are less.
    assert peak < 20e6


def test_a_long_recording_that_shrinks_while_it_is_read_says_so(tmp_path: Path) -> None:
    path = written(tmp_path / "long.wav", tone(8000, 70.0), 8000)
    recording = open_recording(path)
    path.write_bytes(path.read_bytes()[: 44 + 2 * 8000 * 30])
    words = "damaged at 30.0 s, or changed while it was read; copy or record it again"
    with pytest.raises(RecordingError, match=f"^{words}$"):
        list(recording.blocks(100_000))


# Channels ----------------------------------------------------------------------------------------------


def test_the_clearer_channel_is_used_and_named(tmp_path: Path) -> None:
    both = np.stack([tone(noise=0.1), tone(noise=0.01)], axis=1)
    recording = open_recording(written(tmp_path / "take.wav", both))
    assert (recording.channels, recording.channel) == (2, 1)
    assert recording.cautions == ("used channel 2 of 2 (clearer)",)
    assert whole(recording) == pytest.approx(both[:, 1], abs=2**-15)


def test_the_first_channel_is_used_where_they_are_alike(tmp_path: Path) -> None:
    both = np.stack([tone(noise=0.0102), tone(noise=0.01)], axis=1)
    recording = open_recording(written(tmp_path / "take.wav", both))
    assert (recording.channel, recording.cautions) == (0, ())


def test_a_dead_channel_is_passed_over(tmp_path: Path) -> None:
    both = np.stack([np.zeros(48000), tone(noise=0.1)], axis=1)
    recording = open_recording(written(tmp_path / "take.wav", both))
    assert recording.cautions == ("used channel 2 of 2 (channel 1 is silent)",)


def test_a_clipped_channel_is_passed_over(tmp_path: Path) -> None:
    both = np.stack([np.clip(tone(level=2.0), -1, 1), tone(level=0.2)], axis=1)
    recording = open_recording(written(tmp_path / "take.wav", both))
    assert recording.cautions == ("used channel 2 of 2 (channel 1 is clipped)",)


def test_the_clearest_of_many_channels_is_found_in_a_long_recording_too(tmp_path: Path) -> None:
    noises = [0.3, 0.1, 0.2, 0.01, 0.05]
    samples = np.stack([tone(8000, 65.0, level=0.3, noise=noise) for noise in noises], axis=1)
    recording = open_recording(written(tmp_path / "long.wav", np.clip(samples, -0.8, 0.8), 8000))
    assert recording.cautions == ("used channel 4 of 5 (clearer)",)
    assert recording.read(70_000, 71_000) == pytest.approx(samples[70_000:71_000, 3], abs=2**-15)


def test_clearness_is_the_line_over_the_noise_around_it() -> None:
    # Ten times less noise is 20 dB, by the definition of the decibel; noise scatters by 1 dB.
    noisy, clean = (tone(noise=noise).astype(np.float32) for noise in (0.1, 0.01))
    assert clearness_db([clean], 48000) - clearness_db([noisy], 48000) == pytest.approx(20.0, abs=1.0)


def test_the_probes_of_a_long_recording_count_together() -> None:
    first, second = (np.stack([tone(noise=a), tone(noise=b)], axis=1) for a, b in ((0.1, 0.01), (0.01, 0.01)))
    probes = [part.astype(np.float32) for part in (first, second)]
    assert choose_channel(probes, 48000, 2**-15).channel == 1


# Clipping ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("over_db", [0.5, 3.0, 12.0])
def test_clipped_samples_are_counted(tmp_path: Path, over_db: float) -> None:
    level = 10 ** (over_db / 20)
    recording = open_recording(written(tmp_path / "take.wav", np.clip(tone(level=level, noise=0.0), -1, 1)))
    share = 100.0 * 2.0 / np.pi * np.arccos(1.0 / level)  # of a sine above 1, by its definition
    (caution,) = recording.cautions
    words = caution.split()
    assert caution == f"clipped: {words[1]} % of samples at full scale; record with less gain"
    assert float(words[1]) == pytest.approx(share, rel=0.1)


@pytest.mark.parametrize("subtype", ["PCM_U8", "PCM_16", "PCM_24", "FLOAT"])
@pytest.mark.parametrize("pitch_hz", [110.0, 523.25, 2600.0])
def test_a_smooth_tone_that_just_reaches_full_scale_is_not_clipped(
    tmp_path: Path, subtype: str, pitch_hz: float
) -> None:
    sine = 0.9999 * np.sin(2 * np.pi * pitch_hz * np.arange(48000) / 48000)
    assert open_recording(written(tmp_path / "take.wav", sine, subtype=subtype)).cautions == ()


def test_a_flat_top_far_under_full_scale_is_not_clipping() -> None:
    assert clipped_share(np.clip(tone(), -0.3, 0.3).astype(np.float32), 2**-15) == 0.0


# Faults ------------------------------------------------------------------------------------------------


def test_a_missing_file(tmp_path: Path) -> None:
    assert fault(tmp_path / "none.wav") == "no such file"


def test_a_folder(tmp_path: Path) -> None:
    assert fault(tmp_path) == "a folder, not a recording"


def test_a_pipe_is_not_waited_for(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe")
    assert fault(tmp_path / "pipe") == "not a file; record to a sound file first"


@pytest.mark.skipif(os.geteuid() == 0, reason="root may read everything")
def test_a_file_that_may_not_be_read(tmp_path: Path) -> None:
    path = written(tmp_path / "take.wav", tone())
    path.chmod(0)
    assert fault(path) == "may not be read; check the file's permissions"


def test_a_file_name_that_is_too_long(tmp_path: Path) -> None:
    assert fault(tmp_path / ("x" * 300)) == "cannot be opened: File name too long"


def test_an_empty_file(tmp_path: Path) -> None:
    (tmp_path / "take.wav").touch()
    assert fault(tmp_path / "take.wav") == "an empty file (0 bytes); copy or record it again"


@pytest.mark.parametrize(
    "content",
    [
        b"just words\n" * 500,
        np.random.default_rng(3).bytes(5000),
        b"ID3\x04" + bytes(99),
    ],
    ids=["text", "noise", "an MP3 label"],
)
def test_no_sound_file(tmp_path: Path, content: bytes) -> None:
    (tmp_path / "take.wav").write_bytes(content)
    words = "not a sound file that can be read (WAV, AIFF, CAF, FLAC, Ogg, Opus, MP3, M4A, 3GP …)"
    assert fault(tmp_path / "take.wav") == words


@pytest.mark.parametrize(
    ("kind", "kept"), [("WAV", 20), ("AIFF", 30), ("FLAC", 30), ("CAF", 5000), ("OGG", 50)]
)
def test_a_file_cut_off_before_its_sound(tmp_path: Path, kind: str, kept: int) -> None:
    path = written(tmp_path / "take", tone(), format=kind)
    path.write_bytes(path.read_bytes()[:kept])
    assert fault(path) == "damaged or cut off: no sound can be read from it; copy or record it again"


def test_an_mp3_with_nothing_but_a_packet_head(tmp_path: Path) -> None:
    (tmp_path / "take.mp3").write_bytes(b"\xff\xfb" + bytes(5000))
    words = "damaged or cut off: no sound can be read from it; copy or record it again"
    assert fault(tmp_path / "take.mp3") == words


@pytest.mark.parametrize("kind", ["WAV", "RF64", "W64", "AIFF", "AU", "FLAC", "MP3"])
def test_a_file_cut_off_in_its_sound_is_used_as_far_as_it_goes(tmp_path: Path, kind: str) -> None:
    path = written(tmp_path / "take", tone(seconds=4.0), format=kind)
    path.write_bytes(path.read_bytes()[: path.stat().st_size // 2])
    recording = open_recording(path)
    assert recording.cautions == (
        "cut off or damaged: less can be read than its header says; copy or record it again",
    )
    assert recording.duration_s == pytest.approx(2.0, abs=0.3)
    assert abs(pitch_error_cents(recording.read(0, 48000), 48000)) < PITCH_TOLERANCE_CENTS


def test_a_long_file_cut_off_in_its_sound_is_streamed_as_far_as_it_goes(tmp_path: Path) -> None:
    path = written(tmp_path / "take.flac", tone(8000, seconds=200.0), 8000)
    path.write_bytes(path.read_bytes()[: path.stat().st_size // 2])
    recording = open_recording(path)
    assert recording.cautions == (
        "cut off or damaged: less can be read than its header says; copy or record it again",
    )
    assert recording.duration_s == pytest.approx(100.0, abs=2.0)
    assert sum(len(block) for _, block in recording.blocks(10_000)) == recording.frames


def test_a_long_flac_damaged_amid_its_sound_is_streamed_as_far_as_it_goes(tmp_path: Path) -> None:
    path = written(tmp_path / "take.flac", tone(8000, seconds=200.0), 8000)
    content = bytearray(path.read_bytes())
    content[len(content) // 2] ^= 0x55
    path.write_bytes(content)
    recording = open_recording(path)
    assert recording.cautions == (
        "cut off or damaged: less can be read than its header says; copy or record it again",
    )
    assert recording.duration_s == pytest.approx(100.0, abs=2.0)
    assert sum(len(block) for _, block in recording.blocks(10_000)) == recording.frames


def test_a_recorder_that_did_not_know_the_length_yet_is_believed(tmp_path: Path) -> None:
    path = written(tmp_path / "take.wav", tone())
    content = bytearray(path.read_bytes())
    content[4:8] = content[40:44] = b"\xff\xff\xff\xff"
    path.write_bytes(content)
    recording = open_recording(path)
    assert (recording.frames, recording.cautions) == (48000, ())


@pytest.mark.parametrize("kind", ["FLAC", "W64"])
def test_an_absurd_header_takes_no_memory(tmp_path: Path, kind: str) -> None:
    path = written(tmp_path / "take", tone(), format=kind)
    content = bytearray(path.read_bytes())
    if kind == "FLAC":  # the 36 low bits of bytes 18 to 25 count the samples (RFC 9639, section 8.2)
        content[18:26] = (int.from_bytes(content[18:26], "big") | (1 << 36) - 1).to_bytes(8, "big")
    else:
        at = content.find(b"data") + 16
        content[at : at + 8] = struct.pack("<q", 2 << 40)
    path.write_bytes(content)
    tracemalloc.start()
    recording = open_recording(path)
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert peak < 10e6
    assert recording.duration_s == pytest.approx(1.0, abs=0.1)
    assert recording.cautions == (
        "cut off or damaged: less can be read than its header says; copy or record it again",
    )


def test_a_length_of_a_million_million_samples_takes_no_memory(tmp_path: Path) -> None:
    path = written(tmp_path / "take", tone(), format="RF64")
    content = bytearray(path.read_bytes())
    at = content.find(b"ds64") + 8  # sizes of the file and of its data in bytes, and the count of samples
    content[at : at + 24] = struct.pack("<QQQ", 2**41, 2**41, 2**40)
    path.write_bytes(content)
    tracemalloc.start()
    recording = open_recording(path)
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert peak < 10e6
    assert recording.duration_s == 1.0
    assert recording.cautions == (
        "cut off or damaged: less can be read than its header says; copy or record it again",
    )


NO_SOUND = "damaged or cut off: no sound can be read from it; copy or record it again"


@pytest.mark.parametrize(
    ("at", "field", "words"),
    [
        (24, struct.pack("<I", 0), NO_SOUND),
        (24, struct.pack("<I", 1), "recorded at 1 samples a second; at least 8000 are needed"),
        (24, struct.pack("<I", 2**31 - 1), "only 0.000 s of sound; at least 0.1 s are needed, 2 s are good"),
        (22, struct.pack("<H", 0), NO_SOUND),
        (22, struct.pack("<H", 65_535), NO_SOUND),
        (22, struct.pack("<H", 1024), "only 0.001 s of sound; at least 0.1 s are needed, 2 s are good"),
    ],
    ids=["no rate", "rate 1", "absurd rate", "no channel", "65535 channels", "1024 channels"],
)
def test_an_absurd_rate_or_number_of_channels(tmp_path: Path, at: int, field: bytes, words: str) -> None:
    path = written(tmp_path / "take.wav", tone())
    content = bytearray(path.read_bytes())
    content[at : at + len(field)] = field
    path.write_bytes(content)
    assert fault(path) == words


@pytest.mark.parametrize("kind", ["WAV", "CAF", "AIFF"])
def test_nothing_but_samples_that_are_no_numbers(tmp_path: Path, kind: str) -> None:
    path = written(tmp_path / "take", np.full(48000, np.nan), format=kind, subtype="FLOAT")
    assert fault(path) == "silent: every sample is the same; check which microphone was recording"


def test_too_short(tmp_path: Path) -> None:
    words = "only 0.090 s of sound; at least 0.1 s are needed, 2 s are good"
    assert fault(written(tmp_path / "take.wav", tone(seconds=0.09))) == words
    assert open_recording(written(tmp_path / "take.wav", tone(seconds=0.1))).duration_s == 0.1


def test_more_than_a_day(tmp_path: Path) -> None:
    path = written(tmp_path / "take.wav", tone(8000), 8000, subtype="PCM_U8")
    size = 44 + 8000 * 90_000
    content = bytearray(path.read_bytes())
    content[4:8], content[40:44] = struct.pack("<I", size - 8), struct.pack("<I", size - 44)
    path.write_bytes(content)
    os.truncate(path, size)  # what is added takes no room on the disk
    assert fault(path) == "longer than a day; cut it into shorter recordings"


def test_no_samples_at_all(tmp_path: Path) -> None:
    words = "only 0.000 s of sound; at least 0.1 s are needed, 2 s are good"
    assert fault(written(tmp_path / "take.wav", np.zeros(0))) == words


@pytest.mark.parametrize("seconds", [1.0, 61.0])
@pytest.mark.parametrize("value", [0.0, 0.25])
def test_silence(tmp_path: Path, seconds: float, value: float) -> None:
    path = written(tmp_path / "take.wav", np.full((round(8000 * seconds), 2), value), 8000)
    assert fault(path) == "silent: every sample is the same; check which microphone was recording"


def test_a_long_recording_that_sounds_where_no_probe_falls(tmp_path: Path) -> None:
    samples = np.zeros((8000 * 70, 2))
    samples[8000 * 3 : 8000 * 4, 1] = tone(8000)
    recording = open_recording(written(tmp_path / "take.wav", samples, 8000))
    assert recording.cautions == ("used channel 2 of 2 (channel 1 is silent)",)


def test_a_rate_that_is_too_low(tmp_path: Path) -> None:
    words = "recorded at 4000 samples a second; at least 8000 are needed"
    assert fault(written(tmp_path / "take.wav", tone(4000), 4000)) == words


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf, 1e30])
def test_samples_that_are_no_numbers_become_silence(tmp_path: Path, bad: float) -> None:
    samples = tone()
    samples[1000:1003] = bad
    recording = open_recording(written(tmp_path / "take.wav", samples, subtype="FLOAT"))
    assert recording.cautions == ("damaged: samples that are no numbers were replaced by silence",)
    assert np.all(whole(recording)[1000:1003] == 0.0)
    assert abs(pitch_error_cents(whole(recording), 48000)) < PITCH_TOLERANCE_CENTS


def test_samples_that_are_no_numbers_become_silence_in_a_long_recording(tmp_path: Path) -> None:
    samples = tone(8000, 65.0)
    samples[[10, 100_000]] = np.nan
    recording = open_recording(written(tmp_path / "take.wav", samples, 8000, subtype="FLOAT"))
    assert recording.cautions == ("damaged: samples that are no numbers were replaced by silence",)
    assert recording.read(10, 11)[0] == 0.0
    assert all(np.all(np.isfinite(block)) for _, block in recording.blocks(30_000))


def test_the_unreadable_kinds_of_telephone_sound_are_refused_only_where_long(tmp_path: Path) -> None:
    short = written(tmp_path / "short.wav", tone(8000), 8000, subtype="GSM610")
    assert open_recording(short).rate_hz == 8000
    long = written(tmp_path / "long.wav", tone(8000, 65.0), 8000, subtype="GSM610")
    assert fault(long) == "too long for its kind of sound file; save it as WAV or FLAC"


def test_no_file_stays_open(tmp_path: Path) -> None:
    path = written(tmp_path / "take.wav", tone(8000, 65.0), 8000)
    (tmp_path / "bad.wav").write_text("words")
    before = len(list(Path("/dev/fd").iterdir()))
    recording = open_recording(path)
    recording.read(0, 10)
    list(recording.blocks(10_000))
    fault(tmp_path / "bad.wav")
    assert len(list(Path("/dev/fd").iterdir())) == before


@pytest.fixture(scope="module")
def sound_files(tmp_path_factory: pytest.TempPathFactory) -> list[bytes]:
    """Return a fifth of a second of tone in every kind of file."""
    path = tmp_path_factory.mktemp("sound") / "take"
    kinds = [*LOSSLESS, *LOSSY]
    return [written(path, tone(8000, 0.2), 8000, format=a, subtype=b).read_bytes() for a, b in kinds]


@given(
    which=st.integers(0, len(LOSSLESS) + len(LOSSY) - 1),
    changes=CHANGES,
    kept=KEPT,
)
@settings(max_examples=200, deadline=None)
def test_a_harmed_file_is_read_or_refused_in_one_line(
    sound_files: list[bytes],
    tmp_path_factory: pytest.TempPathFactory,
    which: int,
    changes: Changes,
    kept: float,
) -> None:
    path = tmp_path_factory.getbasetemp() / "harmed"
    path.write_bytes(harmed(sound_files[which], changes, kept))
    assert is_read_or_refused_in_one_line(path)
