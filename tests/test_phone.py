"""Phone and camera files through PyAV: pitch, place in time, tracks, seeking, faults.

The truth is by construction: a tone of known pitch is encoded by PyAV in the test and read back. A codec
colours sound, but changes neither its pitch nor the order of its samples.
"""

import os
import resource
import struct
import subprocess
import sys
from collections.abc import Sequence
from concurrent.futures import ProcessPoolExecutor, ThreadPoolExecutor
from multiprocessing import get_context
from pathlib import Path

import numpy as np
import phone_files
import pytest
from av import AudioFrame, AudioStream, Packet
from harm import CHANGES, KEPT, Changes, harmed, is_read_or_refused_in_one_line
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from fluteprobe.sound import track
from fluteprobe.sound.recording import Recording, RecordingError, open_recording

Samples = NDArray[np.float64]
Heard = NDArray[np.float32]

PITCH_HZ = 523.25
CLICK_S = 0.3

# What each kind of file is written with; the last number is how many cents the crude estimator below may be
# off on a second of it. AMR at 12.2 kbit/s is meant for speech: its noise is what limits it.
KINDS = {
    "take.m4a": ("aac", 44_100, 0.05),
    "alac.m4a": ("alac", 48_000, 0.05),
    "take.3gp": ("aac", 16_000, 0.05),
    "amr.3gp": ("libopencore_amrnb", 8_000, 0.5),
    "take.amr": ("libopencore_amrnb", 8_000, 0.5),
    "take.mp4": ("aac", 48_000, 0.05),
    "take.mov": ("pcm_s16le", 48_000, 0.05),
    "float.mov": ("pcm_f32le", 48_000, 0.05),
    "take.webm": ("libopus", 48_000, 0.05),
    "take.mkv": ("aac", 32_000, 0.05),
    "flac.mkv": ("flac", 48_000, 0.05),
    "take.aac": ("aac", 22_050, 0.05),
    "take.avi": ("ac3", 48_000, 0.05),
    "take.wma": ("wmav2", 44_100, 0.05),
}
LOSSLESS = {"alac", "pcm_s16le", "pcm_f32le", "flac"}
TELLING_THE_START = ("alac.m4a", "take.m4a", "take.3gp", "take.mp4", "take.mov", "take.webm", "take.mkv")


def tone(rate_hz: int, seconds: float = 1.0, level: float = 0.4, noise: float = 0.001) -> Samples:
    time_s = np.arange(round(seconds * rate_hz)) / rate_hz
    hiss = np.random.default_rng(7).standard_normal(len(time_s))
    return level * np.sin(2 * np.pi * PITCH_HZ * time_s) + noise * hiss


def clicks(rate_hz: int, seconds: float) -> Samples:
    """Return noise so loud at each whole second plus `CLICK_S` that the second can be told."""
    rng = np.random.default_rng(3)
    samples = 0.01 * rng.standard_normal(round(seconds * rate_hz))
    for second in range(int(seconds)):
        start = round((second + CLICK_S) * rate_hz)
        samples[start : start + rate_hz // 50] += 0.3 * rng.standard_normal(rate_hz // 50)
    return samples


def written(path: Path, samples: Samples | None = None) -> Path:
    codec, rate_hz, _ = KINDS[path.name]
    samples = tone(rate_hz) if samples is None else samples
    bit_rate = 64_000 if codec == "wmav2" else None
    video = "libvpx" if path.suffix == ".webm" else "mpeg4" if path.suffix in {".mp4", ".avi"} else None
    return phone_files.written(path, samples, rate_hz, codec, bit_rate=bit_rate, video=video)


def pitch_error_cents(samples: Heard, rate_hz: int) -> float:
    """Estimate the pitch from the phase that turns between the two halves of the samples."""
    half = len(samples) // 2
    clock = np.exp(-2j * np.pi * PITCH_HZ * np.arange(2 * half) / rate_hz)
    turned = (samples[: 2 * half] * clock * np.tile(np.hanning(half), 2)).reshape(2, half).sum(axis=1)
    offset_hz = float(np.angle(turned[1] / turned[0])) / (2 * np.pi) * rate_hz / half
    return 1200.0 * float(np.log2(1.0 + offset_hz / PITCH_HZ))


def late_by(heard: Heard, truth: Samples) -> int:
    """Return by how many samples what was heard comes after the truth, from where they fit best."""
    length = 2 ** int(np.ceil(np.log2(len(heard) + len(truth))))
    fit = np.fft.irfft(np.fft.rfft(heard, length) * np.conj(np.fft.rfft(truth, length)))
    at = int(np.argmax(fit))
    return at if at < length // 2 else at - length


def whole(recording: Recording) -> Heard:
    return recording.read(0, recording.frames)


def fault(path: Path) -> str:
    with pytest.raises(RecordingError) as caught:
        open_recording(path)
    return str(caught.value)


@pytest.fixture
def streamed(monkeypatch: pytest.MonkeyPatch) -> None:
    """Treat recordings of more than half a second as too long to be kept."""
    monkeypatch.setattr("fluteprobe.sound.recording._KEPT_S", 0.5)
    monkeypatch.setattr("fluteprobe.sound.phone._HELD_S", 0.5)


# Pitch and time ----------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", KINDS)
def test_the_pitch_is_kept(tmp_path: Path, name: str) -> None:
    codec, rate_hz, tolerance_cents = KINDS[name]
    recording = open_recording(written(tmp_path / name))
    assert (recording.rate_hz, recording.channels, recording.cautions) == (rate_hz, 1, ())
    assert recording.lossy == (codec not in LOSSLESS)
    assert recording.duration_s == pytest.approx(1.0, abs=0.13)  # a packet of 2048 samples, and its delay
    assert abs(pitch_error_cents(whole(recording)[:rate_hz], rate_hz)) < tolerance_cents


@pytest.mark.parametrize("name", ["alac.m4a", "take.mov", "flac.mkv"])
def test_lossless_sound_is_kept_sample_by_sample(tmp_path: Path, name: str) -> None:
    _, rate_hz, _ = KINDS[name]
    recording = open_recording(written(tmp_path / name))
    assert whole(recording) == pytest.approx(tone(rate_hz), abs=2**-14)


@pytest.mark.parametrize("name", TELLING_THE_START)
def test_the_encoder_s_delay_is_left_out_where_the_file_tells_it(tmp_path: Path, name: str) -> None:
    truth = clicks(KINDS[name][1], 2.0)
    assert late_by(whole(open_recording(written(tmp_path / name, truth))), truth) == 0


def test_bare_aac_comes_late_by_its_encoder_s_delay(tmp_path: Path) -> None:
    truth = clicks(22_050, 2.0)
    assert late_by(whole(open_recording(written(tmp_path / "take.aac", truth))), truth) == 1024


def test_what_a_file_holds_is_found_out_by_trial_not_from_its_name(tmp_path: Path) -> None:
    path = written(tmp_path / "take.m4a").rename(tmp_path / "take.wav")
    assert open_recording(path).codec == "aac"


# Channels and tracks -----------------------------------------------------------------------------------


def test_the_clearer_channel_is_used(tmp_path: Path) -> None:
    both = np.stack([tone(48_000, noise=0.1), tone(48_000)], axis=1)
    recording = open_recording(phone_files.written(tmp_path / "take.m4a", both, 48_000, bit_rate=256_000))
    assert (recording.channels, recording.channel) == (2, 1)
    assert recording.cautions == ("used channel 2 of 2 (clearer)",)


@pytest.mark.parametrize("codec", ["aac", "pcm_s16le"])
def test_eight_channels(tmp_path: Path, codec: str) -> None:
    eight = np.stack([tone(48_000, noise=0.1)] * 8, axis=1)
    eight[:, 3] = 0.0  # the one for low effects, which AAC filters
    eight[:, 5] = tone(48_000)
    recording = open_recording(phone_files.written(tmp_path / "take.mov", eight, 48_000, codec))
    assert (recording.channels, recording.channel) == (8, 5)
    assert abs(pitch_error_cents(whole(recording)[:48_000], 48_000)) < 0.05


def test_of_several_sound_tracks_the_first_is_used_and_named(tmp_path: Path) -> None:
    path = phone_files.written(tmp_path / "take.mp4", tone(48_000), 48_000, tracks=(1.0, 0.1), video="mpeg4")
    recording = open_recording(path)
    assert recording.cautions == ("used sound track 1 of 2",)
    assert float(np.std(whole(recording))) == pytest.approx(0.4 / np.sqrt(2.0), rel=0.05)


# Long recordings ---------------------------------------------------------------------------------------


@pytest.mark.usefixtures("streamed")
@pytest.mark.parametrize("name", KINDS)
def test_a_range_of_a_long_recording_is_that_of_the_whole(tmp_path: Path, name: str) -> None:
    _, rate_hz, _ = KINDS[name]
    recording = open_recording(written(tmp_path / name, clicks(rate_hz, 3.0)))
    in_order = np.concatenate([block for _, block in recording.blocks(7000)])
    assert len(in_order) == recording.frames
    for start_s in (0.0, 0.01, 1.2, 2.5):
        start = round(start_s * rate_hz)
        stop = start + round(0.37 * rate_hz)
        # AAC and AC-3 fill bands with noise that they draw anew: the same sound, but not the same bits.
        assert late_by(recording.read(start, stop), in_order[start:stop].astype(np.float64)) == 0
        assert recording.read(start, stop) == pytest.approx(in_order[start:stop], abs=0.05)
    assert len(recording.read(recording.frames - 10, recording.frames)) == 10


@pytest.fixture(scope="module")
def ten_minutes(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("long") / "take.m4a"
    return phone_files.written(path, np.tile(tone(16_000, 60.0), 10), 16_000, "alac")


def test_memory_does_not_grow_with_length(ten_minutes: Path) -> None:
    code = (
        "import resource, sys\n"
        "from fluteprobe.sound.recording import open_recording\n"
        "import av, numpy\n"
        "def peak_mb(): return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024\n"
        "before = peak_mb()\n"
        f"recording = open_recording({str(ten_minutes)!r})\n"
        "longest = max(len(block) for _, block in recording.blocks(100_000, 1000))\n"
        "recording.read(recording.frames - 1000, recording.frames)\n"
        "print(longest, round(recording.duration_s, 1), peak_mb() - before)\n"
    )
    told = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    longest, duration_s, grown_mb = told.stdout.split()
    assert longest == "100000"
    assert float(duration_s) == pytest.approx(600.0, abs=0.2)
    # Ten minutes as float32 are 38 MB; the held minute is 4 MB, a chunk of 2^20 samples and its copies 12 MB.
    assert float(grown_mb) < 25.0


def test_a_range_of_a_long_recording_is_near_at_hand(
    ten_minutes: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    recording = open_recording(ten_minutes)
    decoded: list[int] = []

    def counted(packet: "Packet[AudioStream]") -> Sequence[AudioFrame] | None:
        decoded.append(packet.size)
        return frames_of(packet)

    frames_of = track._frames_of
    monkeypatch.setattr(track, "_frames_of", counted)
    for start_s in (0.5, 300.0, 599.0):
        start = round(start_s * 16_000)
        expected = tone(16_000, 60.0)[start % 960_000 : start % 960_000 + 8000]
        assert late_by(recording.read(start, start + 8000), expected) == 0
    # A packet is 0.256 s: half a second is 3 at most, and 1.25 s at most lie before it. The file has 2344.
    assert len(decoded) <= 3 * 9


@pytest.mark.parametrize("pool", ["forked processes", "threads"])
def test_recordings_are_read_at_once_in_processes_and_threads(ten_minutes: Path, pool: str) -> None:
    with _pool(pool) as workers:
        ranges = list(workers.map(_middle, [ten_minutes] * 2))
    assert all(np.array_equal(part, ranges[0]) for part in ranges)


def _pool(kind: str) -> ProcessPoolExecutor | ThreadPoolExecutor:
    if kind == "threads":
        return ThreadPoolExecutor(2)
    return ProcessPoolExecutor(2, mp_context=get_context("fork"))


def _middle(path: Path) -> Heard:
    return open_recording(path).read(4_000_000, 4_001_000)


# Faults ------------------------------------------------------------------------------------------------

NO_SOUND = "damaged or cut off: no sound can be read from it; copy or record it again"
NO_KIND = "not a sound file that can be read (WAV, AIFF, CAF, FLAC, Ogg, Opus, MP3, M4A, 3GP …)"
UNFINISHED = "cut off: the recorder did not finish this file, so its index is missing; record it again"
PROTECTED = "copy-protected: it cannot be read; record it anew, or save an unprotected copy"
MANY = "80 channels; save the one to measure as WAV or FLAC"
CUT_OFF = "cut off or damaged: less can be read than its header says; copy or record it again"


@pytest.mark.parametrize(
    ("head", "kind"),
    [
        (b"\0\0\0\x20ftypM4A ", "an M4A, MP4, MOV or 3GP file"),
        (b"\0\0\0\x08wide\0\0\0\0mdat", "an M4A, MP4, MOV or 3GP file"),
        (b"\x1aE\xdf\xa3", "a WebM or MKV file"),
        (b"#!AMR\n", "an AMR file"),
        (b"\xff\xf1\x50\x80", "an AAC file"),
        (b"\x30\x26\xb2\x75\x8e\x66\xcf\x11", "a WMA or WMV file"),
        (b"RIFF\0\0\0\0AVI LIST", "an AVI video"),
        (b"caff\0\x01\0\0desc", "a CAF file of a kind that phones write"),
    ],
)
def test_without_the_extra_the_error_names_the_command_that_adds_it(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, head: bytes, kind: str
) -> None:
    monkeypatch.setitem(sys.modules, "av", None)
    (tmp_path / "take.wav").write_bytes(head + bytes(500))
    words = f"{kind}; to read such files: python -m pip install 'fluteprobe[phone]'"
    assert fault(tmp_path / "take.wav") == words


@pytest.mark.parametrize("name", KINDS)
def test_every_kind_is_known_without_the_extra(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, name: str
) -> None:
    path = written(tmp_path / name)
    monkeypatch.setitem(sys.modules, "av", None)
    assert fault(path).endswith("; to read such files: python -m pip install 'fluteprobe[phone]'")


def test_what_is_no_phone_s_file_is_told_the_same_with_and_without_the_extra(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (tmp_path / "take.m4a").write_bytes(b"just words\n" * 500)
    assert fault(tmp_path / "take.m4a") == NO_KIND
    monkeypatch.setitem(sys.modules, "av", None)
    assert fault(tmp_path / "take.m4a") == NO_KIND


def test_the_extra_is_loaded_only_where_it_is_needed(tmp_path: Path) -> None:
    phone_files.written(tmp_path / "take.wav", tone(8000), 8000, "pcm_s16le")
    phone_files.written(tmp_path / "take.m4a", tone(8000), 8000)
    code = (
        "import sys\n"
        "from fluteprobe.sound.recording import open_recording\n"
        "for name in ('take.wav', 'take.m4a'):\n"
        f"    open_recording({str(tmp_path)!r} + '/' + name)\n"
        "    print('av' in sys.modules)"
    )
    told = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert told.stdout.split() == ["False", "True"]


@pytest.mark.parametrize("name", ["take.m4a", "take.mp4", "take.mov"])
def test_a_recording_that_the_phone_did_not_finish(tmp_path: Path, name: str) -> None:
    path = written(tmp_path / name)
    content = path.read_bytes()
    path.write_bytes(content[: content.find(b"moov") - 4])
    assert fault(path) == UNFINISHED


@pytest.mark.parametrize("name", ["take.m4a", "take.mkv", "take.aac"])
@pytest.mark.parametrize("kept", [1, 20, 200])
def test_a_file_cut_off_before_its_sound(tmp_path: Path, name: str, kept: int) -> None:
    path = written(tmp_path / name)
    path.write_bytes(path.read_bytes()[:kept])
    assert fault(path) in {NO_SOUND, NO_KIND, UNFINISHED}


@pytest.mark.parametrize("kind", ["m4a", "mov", "mkv", "webm"])
def test_a_file_cut_off_in_its_sound_is_used_as_far_as_it_goes(tmp_path: Path, kind: str) -> None:
    codec = "libopus" if kind == "webm" else "aac"
    path = phone_files.written(
        tmp_path / f"take.{kind}", tone(48_000, 4.0), 48_000, codec, options={"movflags": "faststart"}
    )
    path.write_bytes(path.read_bytes()[: path.stat().st_size // 2])
    recording = open_recording(path)
    assert recording.cautions == (CUT_OFF,)
    assert recording.duration_s == pytest.approx(2.0, abs=0.4)
    assert abs(pitch_error_cents(whole(recording)[:48_000], 48_000)) < 0.05


@pytest.mark.parametrize("kind", ["m4a", "mkv"])
@pytest.mark.parametrize("long", [False, True])
def test_what_is_damaged_amid_the_sound_becomes_silence_and_keeps_the_time(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, kind: str, long: bool
) -> None:
    if long:
        monkeypatch.setattr("fluteprobe.sound.recording._KEPT_S", 0.5)
        monkeypatch.setattr("fluteprobe.sound.phone._HELD_S", 0.5)
    truth = clicks(48_000, 6.0)
    path = phone_files.written(tmp_path / f"take.{kind}", truth, 48_000)
    content = bytearray(path.read_bytes())
    middle = len(content) // 2
    content[middle : middle + 3000] = np.random.default_rng(5).bytes(3000)
    path.write_bytes(content)
    recording = open_recording(path)
    assert "damaged: silence stands for what could not be read; copy or record it again" in recording.cautions
    assert recording.duration_s == pytest.approx(6.0, abs=0.05)
    last = recording.read(recording.frames - 60_000, recording.frames)
    assert late_by(last, truth[recording.frames - 60_000 :]) == pytest.approx(0, abs=48)  # Matroska: whole ms


def test_a_video_without_sound(tmp_path: Path) -> None:
    path = phone_files.written(tmp_path / "take.mp4", tone(48_000), 48_000, tracks=(), video="mpeg4")
    assert fault(path) == "a video without sound; film it with the microphone on"


@pytest.mark.parametrize("tag", [b"drms", b"enca"])
def test_a_copy_protected_file(tmp_path: Path, tag: bytes) -> None:
    path = written(tmp_path / "take.m4a")
    path.write_bytes(path.read_bytes().replace(b"mp4a", tag, 1))
    assert fault(path) == PROTECTED


def test_a_file_under_common_encryption(tmp_path: Path) -> None:
    # ISO/IEC 14496-12, section 8.12: the entry is renamed; a `sinf` box tells its true kind and the scheme.
    path = written(tmp_path / "take.m4a")
    content = bytearray(path.read_bytes())
    scheme = box(b"sinf", box(b"frma", b"mp4a") + box(b"schm", b"\0\0\0\0cenc\0\1\0\0"))
    for name in (b"moov", b"trak", b"mdia", b"minf", b"stbl", b"stsd", b"mp4a"):
        start = content.find(name) - 4
        length = int.from_bytes(content[start : start + 4], "big")
        content[start : start + 4] = (length + len(scheme)).to_bytes(4, "big")
    content[start + 4 : start + 8] = b"enca"
    content[start + length : start + length] = scheme
    path.write_bytes(content)
    assert fault(path) == PROTECTED


def box(name: bytes, content: bytes) -> bytes:
    return (8 + len(content)).to_bytes(4, "big") + name + content


def test_a_kind_of_sound_that_nothing_reads(tmp_path: Path) -> None:
    path = written(tmp_path / "take.mov")
    path.write_bytes(path.read_bytes().replace(b"sowt", b"zzzz", 1))
    assert fault(path) == "its kind of sound cannot be read; save it as WAV or FLAC"


def test_a_file_that_another_tool_cut_starts_at_its_first_sound(tmp_path: Path) -> None:
    truth = clicks(48_000, 4.0)
    path = phone_files.copied(written(tmp_path / "take.mp4", truth), tmp_path / "cut.mp4", lambda s: s >= 1.5)
    recording = open_recording(path)
    assert recording.cautions == ()
    assert recording.duration_s == pytest.approx(2.5, abs=0.1)
    offset = late_by(whole(recording), truth)
    assert -offset == pytest.approx(1.5 * 48_000, abs=3000)


@pytest.mark.parametrize("announced", [10**6, 2**31, 2**32 - 1])
def test_an_absurd_number_of_packets_takes_no_memory(tmp_path: Path, announced: int) -> None:
    # A decoder would list them all before it reads the first: 24 bytes for each.
    path = written(tmp_path / "take.m4a")
    content = bytearray(path.read_bytes())
    sizes, chunks, times = (content.find(name) for name in (b"stsz", b"stsc", b"stts"))
    content[sizes + 8 : sizes + 16] = struct.pack(">II", 1, announced)
    content[chunks + 16 : chunks + 20] = content[times + 12 : times + 16] = struct.pack(">I", announced)
    path.write_bytes(content)
    before_kb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    assert fault(path) == NO_SOUND
    assert resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before_kb < 5000


def test_an_absurd_duration_is_not_believed(tmp_path: Path) -> None:
    path = written(tmp_path / "take.m4a")
    content = bytearray(path.read_bytes())
    for name, at in ((b"mvhd", 20), (b"tkhd", 24), (b"mdhd", 20), (b"elst", 12)):
        content[content.find(name) + at : content.find(name) + at + 4] = b"\x7f\xff\xff\xff"
    path.write_bytes(content)
    recording = open_recording(path)
    assert recording.duration_s == pytest.approx(1.0, abs=0.1)


@pytest.mark.parametrize("rate_hz", [1, 4000])
def test_an_absurd_rate_is_refused(tmp_path: Path, rate_hz: int) -> None:
    path = written(tmp_path / "take.mov")
    content = bytearray(path.read_bytes())
    at = content.find(b"sowt") + 28  # 16.16 fixed point (ISO/IEC 14496-12, section 12.2.3)
    content[at : at + 4] = struct.pack(">HH", rate_hz, 0)
    path.write_bytes(content)
    assert fault(path) == f"recorded at {rate_hz} samples a second; at least 8000 are needed"


@pytest.mark.parametrize(("channels", "words"), [(0, NO_SOUND), (80, MANY), (255, MANY.replace("80", "255"))])
def test_an_absurd_number_of_channels_is_refused(tmp_path: Path, channels: int, words: str) -> None:
    path = phone_files.written(tmp_path / "take.mkv", tone(48_000), 48_000, "pcm_s16le")
    path.write_bytes(path.read_bytes().replace(b"\x9f\x81\x01", bytes([0x9F, 0x81, channels])))  # RFC 9559
    assert fault(path) == words


@pytest.mark.parametrize("kind", ["mkv", "mp4"])
def test_sound_that_is_left_out_becomes_silence_and_keeps_the_time(tmp_path: Path, kind: str) -> None:
    truth = clicks(48_000, 4.0)
    path = phone_files.written(tmp_path / f"take.{kind}", truth, 48_000)
    gappy = phone_files.copied(path, tmp_path / f"gap.{kind}", lambda s: not 1.5 <= s < 2.0)
    recording = open_recording(gappy)
    assert recording.cautions == ("0.5 s of sound are missing; silence stands for them",)
    heard = whole(recording)
    assert np.all(heard[round(1.6 * 48_000) : round(1.9 * 48_000)] == 0.0)
    assert late_by(heard[2 * 48_000 :], truth[2 * 48_000 :]) == pytest.approx(0, abs=48)  # Matroska: whole ms


def test_a_file_whose_start_an_edit_hides_begins_after_it(tmp_path: Path) -> None:
    # Phones cut by an edit list (ISO/IEC 14496-12, section 8.6.6): all packets stay, the media time moves on.
    truth = clicks(44_100, 4.0)
    path = written(tmp_path / "take.m4a", truth)
    content = bytearray(path.read_bytes())
    at = content.find(b"elst") + 16
    delay = int.from_bytes(content[at : at + 4], "big")
    content[at : at + 4] = struct.pack(">I", delay + 44_100)
    path.write_bytes(content)
    assert late_by(whole(open_recording(path)), truth) == -44_100


@pytest.mark.usefixtures("streamed")
def test_more_than_a_day(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("fluteprobe.sound.phone.LONGEST_S", 0.9)
    assert fault(written(tmp_path / "take.m4a")) == "longer than a day; cut it into shorter recordings"


def test_samples_that_are_no_numbers_become_silence(tmp_path: Path) -> None:
    samples = tone(48_000)
    samples[1000:1003] = np.nan
    recording = open_recording(written(tmp_path / "float.mov", samples))
    assert recording.cautions == ("damaged: samples that are no numbers were replaced by silence",)
    assert np.all(whole(recording)[1000:1003] == 0.0)


def test_nothing_is_written_to_standard_error(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    path = written(tmp_path / "take.m4a")
    content = bytearray(path.read_bytes())
    content[2000:3000] = np.random.default_rng(5).bytes(1000)
    path.write_bytes(content)
    open_recording(path)
    os.write(2, b"heard\n")
    assert capfd.readouterr().err == "heard\n"


def test_no_file_stays_open(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = written(tmp_path / "take.m4a", tone(44_100, 3.0))
    monkeypatch.setattr("fluteprobe.sound.recording._KEPT_S", 0.5)
    (tmp_path / "bad.m4a").write_bytes(path.read_bytes()[:2000])
    before = len(list(Path("/dev/fd").iterdir()))
    recording = open_recording(path)
    recording.read(0, 10)
    list(recording.blocks(10_000))
    fault(tmp_path / "bad.m4a")
    assert len(list(Path("/dev/fd").iterdir())) == before


@pytest.fixture(scope="module")
def sound_files(tmp_path_factory: pytest.TempPathFactory) -> dict[str, bytes]:
    """Return a fifth of a second of tone in every kind of file."""
    folder = tmp_path_factory.mktemp("sound")
    return {name: written(folder / name, tone(KINDS[name][1], 0.2)).read_bytes() for name in KINDS}


@given(
    name=st.sampled_from(sorted(KINDS)),
    changes=CHANGES,
    kept=KEPT,
)
@settings(max_examples=150, deadline=None)
def test_a_harmed_file_is_read_or_refused_in_one_line(
    sound_files: dict[str, bytes],
    tmp_path_factory: pytest.TempPathFactory,
    name: str,
    changes: Changes,
    kept: float,
) -> None:
    path = tmp_path_factory.getbasetemp() / "harmed"
    path.write_bytes(harmed(sound_files[name], changes, kept))
    assert is_read_or_refused_in_one_line(path)
