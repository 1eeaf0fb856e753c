"""What is kept of recordings: it comes back exactly, and only for what has not changed in any way.

Truth is what hearing anew gives. There is no outside source here.
"""

import json
import os
import shutil
from dataclasses import fields, replace
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fluteprobe import kept as keeping
from fluteprobe.hearing import hear_recording
from fluteprobe.kept import SPARE, Kept, program_digest, stamp
from fluteprobe.sound.stored import tone_from
from fluteprobe.sound.tone import BreathResonance, Partial, Tone, Vibrato

HERON = Path(__file__).parent.parent / "samples" / "heron" / "takes"
PLAIN = Tone(
    start_s=0.1 + 0.2,
    end_s=2.0 / 3.0,
    kind="multiphonic",
    frequency_hz=440.00000000000006,
    uncertainty_cents=1e-17,
    partials=(Partial(order=3, frequency_hz=1320.1, level_db=-0.0),),
    harmonic_to_noise_db=31.2,
    breath_resonances=(BreathResonance(frequency_hz=220.7, width_hz=9.9, prominence_db=12.5, chance=5e-324),),
    drift_cents=-1e-300,
    vibrato=Vibrato(rate_hz=5.1, extent_cents=12.3),
    attack_ms=41.0,
    cautions=("clipped: \x1b[31m ♯ \ud800", ""),
)


@pytest.fixture
def recording(tmp_path: Path) -> Path:
    """Return a file that stands for a recording: nothing here listens to it."""
    path = tmp_path / "oxxxxx.wav"
    path.write_bytes(b"sound" * 1000)
    return path


@pytest.fixture
def kept(tmp_path: Path) -> Kept:
    return Kept(folder=tmp_path / "reports" / ".kept")


def the_file(kept: Kept) -> Path:
    (path,) = kept.folder.iterdir()
    return path


# --- it comes back -----------------------------------------------------------------------------------


def test_what_was_heard_comes_back_exactly(kept: Kept, recording: Path) -> None:
    kept.keep(recording, (PLAIN, replace(PLAIN, vibrato=None)), stamp(recording))
    (tones,) = kept.found([recording]).values()
    assert repr(tones) == repr((PLAIN, replace(PLAIN, vibrato=None)))  # repr tells -0.0 from 0.0


def test_every_field_of_a_tone_is_set_otherwise_here_than_by_default() -> None:
    """So that a field added to a tone cannot be lost: it has no value here until one is written above."""
    for value in (PLAIN, PLAIN.partials[0], PLAIN.breath_resonances[0], PLAIN.vibrato):
        assert value is not None
        assert [f.name for f in fields(value) if getattr(value, f.name) in {f.default, None, ()}] == []


any_number = st.floats(-1e9, 1e9)
above_zero = st.floats(1e-9, 1e9)
at_least_zero = st.floats(0.0, 1e9)


@given(
    frequency_hz=st.none() | above_zero,
    numbers=st.tuples(any_number, any_number, at_least_zero, at_least_zero),
    cautions=st.lists(st.text()),
    orders=st.lists(st.integers(1, 10**9)),
)
def test_any_tone_comes_back_bit_for_bit(
    frequency_hz: float | None, numbers: tuple[float, ...], cautions: list[str], orders: list[int]
) -> None:
    tone = replace(
        PLAIN, frequency_hz=frequency_hz, drift_cents=numbers[0], harmonic_to_noise_db=numbers[1],
        uncertainty_cents=numbers[2], attack_ms=numbers[3], cautions=tuple(cautions),
        partials=tuple(Partial(order=k, frequency_hz=1.5, level_db=numbers[0]) for k in orders),
    )  # fmt: skip
    content = keeping._content("0" * 32, [tone])
    (back,) = map(tone_from, json.loads(content)["tones"])
    assert repr(back) == repr(tone)


@pytest.mark.parametrize("name", ["oxxxxx-over", "xxxxxx", "vxxxxx"])
def test_real_tones_come_back_exactly(kept: Kept, name: str) -> None:
    recording = HERON / f"{name}.flac"
    heard = hear_recording(recording)
    kept.keep(recording, heard, stamp(recording))
    assert kept.found([recording]) == {recording: heard}


# --- and only for what has not changed -----------------------------------------------------------------


def test_a_recording_is_known_by_its_bytes_not_by_its_name_or_date(kept: Kept, recording: Path) -> None:
    kept.keep(recording, (PLAIN,), stamp(recording))
    moved = recording.rename(recording.with_name("xxxxxx.wav"))
    os.utime(moved, (5.0, 5.0))
    assert kept.found([moved]) == {moved: (PLAIN,)}
    content = bytearray(moved.read_bytes())
    content[1234] ^= 1
    moved.write_bytes(content)
    assert kept.found([moved]) == {}


def test_a_recording_that_changed_while_it_was_heard_is_not_kept(kept: Kept, recording: Path) -> None:
    before = stamp(recording)
    recording.write_bytes(b"another take")
    kept.keep(recording, (PLAIN,), before)
    assert kept.found([recording]) == {}
    assert stamp(recording.with_name("gone")) is None
    kept.keep(recording.with_name("gone"), (PLAIN,), None)
    assert not kept.folder.exists()


def test_a_changed_program_finds_nothing_of_before(kept: Kept, recording: Path) -> None:
    kept.keep(recording, (PLAIN,), stamp(recording))
    assert replace(kept, program=b"another").found([recording]) == {}
    assert replace(kept, anew=True).found([recording]) == {}
    assert kept.found([recording])


def test_the_program_is_known_by_its_code_its_version_and_its_libraries(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    house = tmp_path / "house"
    shutil.copytree(Path(keeping.__file__).parent / "sound", house / "sound")
    monkeypatch.setattr(keeping, "__file__", str(house / "kept.py"))
    monkeypatch.setattr(keeping, "_libraries", lambda: ["numpy-2.0.0.dist-info"])
    digests = [program_digest(), program_digest()]
    assert digests[0] == digests[1] != b""
    pitch = house / "sound" / "pitch.py"
    pitch.write_text(pitch.read_text("utf-8").replace("0.5", "0.6", 1), "utf-8")
    digests.append(program_digest())
    monkeypatch.setattr(keeping, "_libraries", lambda: ["numpy-2.0.1.dist-info"])
    digests.append(program_digest())
    monkeypatch.setattr(keeping, "__version__", "99")
    digests.append(program_digest())
    assert len(set(digests)) == 4


def test_the_libraries_that_decode_and_transform_are_told_with_their_versions() -> None:
    import numpy as np
    import soundfile

    told = " ".join(keeping._libraries())
    assert f"numpy-{np.__version__}" in told
    assert f"soundfile-{soundfile.__version__}" in told
    assert "soxr-" in told


def test_where_the_code_cannot_be_read_nothing_is_kept(
    tmp_path: Path, recording: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(keeping, "__file__", str(tmp_path / "nowhere" / "kept.py"))
    kept = Kept(folder=tmp_path / ".kept")
    kept.keep(recording, (PLAIN,), stamp(recording))
    assert kept.program == b""
    assert kept.found([recording]) == {}
    assert not kept.folder.exists()


# --- damage --------------------------------------------------------------------------------------------


def test_every_single_damaged_byte_is_noticed(kept: Kept, recording: Path) -> None:
    kept.keep(recording, (PLAIN,), stamp(recording))
    path = the_file(kept)
    whole = path.read_bytes()
    for k in range(len(whole)):
        path.write_bytes(whole[:k] + bytes([whole[k] ^ 1]) + whole[k + 1 :])
        assert kept.found([recording]) == {}, k
    for k in range(0, len(whole), 7):
        path.write_bytes(whole[:k])
        assert kept.found([recording]) == {}, k
    path.write_bytes(whole)
    assert kept.found([recording])


@pytest.mark.parametrize(
    "content", [b"", b"null", b"\n", b"[" * 100_000, b"\xff\xfe\x00", b'{"tones": []}', b"{}\n{}"]
)
def test_what_is_foreign_is_heard_anew(kept: Kept, recording: Path, content: bytes) -> None:
    kept.keep(recording, (PLAIN,), stamp(recording))
    the_file(kept).write_bytes(content)
    assert kept.found([recording]) == {}


def test_a_file_of_another_recording_is_not_believed(kept: Kept, recording: Path) -> None:
    other = recording.with_name("other.wav")
    other.write_bytes(b"other")
    kept.keep(recording, (PLAIN,), stamp(recording))
    mine = the_file(kept)
    kept.keep(other, (replace(PLAIN, frequency_hz=1.0),), stamp(other))
    (theirs,) = set(kept.folder.iterdir()) - {mine}
    shutil.copy(theirs, mine)
    assert set(kept.found([recording, other])) == {other}


@pytest.mark.parametrize(
    "change", [{"frequency_hz": -440.0}, {"start_s": "soon"}, {"kind": "whistle"}, {"partials": None}]
)
def test_a_forged_file_is_still_checked_value_by_value(
    kept: Kept, recording: Path, change: dict[str, Any]
) -> None:
    kept.keep(recording, (PLAIN,), stamp(recording))
    path = the_file(kept)
    tone = {**json.loads(path.read_bytes())["tones"][0], **change}
    body = f'"tones": {json.dumps([tone])}}}\n'.encode()
    path.write_bytes(keeping._head(path.stem, body) + b"\n" + body)
    assert kept.found([recording]) == {}


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="there are no pipes with names here")
def test_no_pipe_is_waited_for(kept: Kept, recording: Path) -> None:
    kept.keep(recording, (PLAIN,), stamp(recording))
    path = the_file(kept)
    path.unlink()
    os.mkfifo(path)
    pipe = recording.with_name("pipe.wav")
    os.mkfifo(pipe)
    assert kept.found([recording, pipe]) == {}


def test_what_is_not_finite_is_not_kept_and_stops_nothing(kept: Kept, recording: Path) -> None:
    kept.keep(recording, (replace(PLAIN, harmonic_to_noise_db=float("inf")),), stamp(recording))
    assert kept.found([recording]) == {}


# --- the folder ----------------------------------------------------------------------------------------


def test_a_place_that_cannot_be_written_stops_nothing(recording: Path, tmp_path: Path) -> None:
    (tmp_path / "taken").write_bytes(b"")
    for folder in (tmp_path / "taken", tmp_path / "taken" / "deeper"):
        kept = Kept(folder=folder)
        kept.keep(recording, (PLAIN,), stamp(recording))
        assert kept.found([recording]) == {}
        kept.sweep(1)


def test_a_folder_that_leads_elsewhere_is_not_followed(recording: Path, tmp_path: Path) -> None:
    (tmp_path / "elsewhere").mkdir()
    kept = Kept(folder=tmp_path / "link")
    kept.folder.symlink_to(tmp_path / "elsewhere", target_is_directory=True)
    kept.keep(recording, (PLAIN,), stamp(recording))
    assert list((tmp_path / "elsewhere").iterdir()) == []


def test_the_oldest_go_when_there_are_many_and_what_was_of_use_stays(kept: Kept, recording: Path) -> None:
    kept.keep(recording, (PLAIN,), stamp(recording))
    used = the_file(kept)
    os.utime(used, (1.0, 1.0))
    old = [kept.folder / f"{k:032x}.json" for k in range(SPARE + 3)]
    for k, path in enumerate(old):
        path.write_bytes(b"")
        os.utime(path, (10.0 + k, 10.0 + k))
    stray = kept.folder / f".{used.name}.0123abcd.fluteprobe.tmp"
    stray.write_bytes(b"half")
    foreign = kept.folder / "notes.txt"
    foreign.write_text("not ours")
    assert kept.found([recording])
    kept.sweep(1)
    assert {used, foreign, *old[3:]} == set(kept.folder.iterdir())
