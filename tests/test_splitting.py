"""One long recording becomes takes. The recordings are made here; the flute is a simulated one (longs.py)."""

import os
import re
import tracemalloc
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import soundfile
from longs import evening, holes_of, wanted

from fluteprobe import splitting
from fluteprobe.files import add_files
from fluteprobe.flute.alignment import Wanted
from fluteprobe.session import FluteFacts, Session, SessionError, create_session, read_session
from fluteprobe.session.names import TakeName
from fluteprobe.sound.recording import Recording, open_recording
from fluteprobe.splitting import Cutting, Order, cutting_of, read_order, sheet_order, write_takes

SEED = 5000
HOLES = holes_of(SEED)
RATE_HZ = 16_000
TAKES = len(wanted(HOLES, "short"))


def stem(take: Wanted) -> str:
    return TakeName(fingering=take.fingering, breath=take.breath, number=None).stem


STEMS = [stem(take) for take in wanted(HOLES, "short")]


@pytest.fixture
def session(tmp_path: Path) -> Session:
    create_session(tmp_path / "wren", FluteFacts(name="Wren", holes=HOLES))
    return read_session(tmp_path / "wren")


def recorded(folder: Path, *plan: int | str) -> Recording:
    """Record all takes of the short sheet, or what `plan` names."""
    path = folder / "long.wav"
    soundfile.write(path, evening(SEED, plan or range(TAKES)), RATE_HZ, subtype="PCM_16")
    return open_recording(path)


def cut(recording: Recording, session: Session, edition: str = "short") -> Cutting:
    return cutting_of(recording, session, sheet_order(HOLES, edition))


def files(cutting: Cutting) -> list[str]:
    return [sound.file or "" for sound in cutting.takes]


@pytest.fixture(scope="module")
def planned(tmp_path_factory: pytest.TempPathFactory) -> tuple[Recording, Cutting]:
    """Return a recording of all takes of the short sheet, and how it is cut for a session without takes."""
    folder = tmp_path_factory.mktemp("planned")
    create_session(folder / "wren", FluteFacts(name="Wren", holes=HOLES))
    recording = recorded(folder)
    return recording, cut(recording, read_session(folder / "wren"))


# Hearing -----------------------------------------------------------------------------------------------


def test_every_take_of_the_sheet_is_found_in_its_place(planned: tuple[Recording, Cutting]) -> None:
    _, cutting = planned
    assert files(cutting) == [f"{each}.flac" for each in STEMS]
    assert (cutting.missing, cutting.faults, cutting.doubtful) == ((), (), ())
    assert all(sound.what == "take" and sound.remark == "" for sound in cutting.sounds)


def test_mishaps_are_told_apart(tmp_path: Path, session: Session) -> None:
    plan = ["word", 0, 1, 2, "word", 2, 3, 4, 5, 6, "breath", 8, 9, "word", *range(11, TAKES)]
    cutting = cut(recorded(tmp_path, *plan), session)
    want = [*STEMS[:3], f"{STEMS[2]}-2", *STEMS[3:10], *STEMS[11:]]
    assert files(cutting) == [f"{each}.flac" for each in want]
    assert cutting.missing == (STEMS[10],)
    by_file = {sound.file: sound for sound in cutting.takes}
    assert by_file[f"{STEMS[2]}-2.flac"].what == "again"
    assert by_file[f"{STEMS[2]}-2.flac"].remark == "once more"
    assert by_file[f"{STEMS[7]}.flac"].remark == "no tone spoke"
    assert by_file[f"{STEMS[7]}.flac"].note is None


def test_a_take_is_told_with_its_note_and_what_was_expected(planned: tuple[Recording, Cutting]) -> None:
    first = planned[1].takes[0]
    assert first.frequency_hz == pytest.approx(first.expected_hz, rel=0.03)
    assert first.register == 1
    assert first.note is not None
    assert first.cut_start_s < first.start_s < first.end_s < first.cut_end_s


def test_an_over_take_that_is_played_again_after_a_low_one_is_named_so(
    tmp_path: Path, session: Session
) -> None:
    order = Order(name="mine", takes=wanted(HOLES, "short")[:6])
    over = STEMS.index(f"{STEMS[0]}-over")
    cutting = cutting_of(recorded(tmp_path, 0, over, 1, 2, 3, 4, 5), session, order)
    assert files(cutting)[:3] == [f"{STEMS[0]}.flac", f"{STEMS[0]}-over.flac", f"{STEMS[1]}.flac"]


def test_takes_are_numbered_on_from_those_that_are_there(tmp_path: Path, session: Session) -> None:
    for name in (f"{STEMS[1]}.wav", f"{STEMS[1]}-4.wav"):
        soundfile.write(session.folder / "takes" / name, np.zeros(RATE_HZ), RATE_HZ)
    cutting = cut(recorded(tmp_path), read_session(session.folder))
    assert files(cutting)[:3] == [f"{STEMS[0]}.flac", f"{STEMS[1]}-5.flac", f"{STEMS[2]}.flac"]


def test_another_edition_than_asked_for_is_proposed(tmp_path: Path, session: Session) -> None:
    path, played = tmp_path / "long.wav", range(len(wanted(HOLES)))
    soundfile.write(path, evening(SEED, played, edition="standard"), RATE_HZ, subtype="PCM_16")
    first, second = cut(open_recording(path), session).faults
    assert re.fullmatch(
        rf"{len(played)} tones were heard, and only \d+ of them fit the short take sheet \({TAKES} takes\): "
        "say in which order it was played, with --edition or --order",
        first,
    )
    assert second == "the standard take sheet fits: give --edition standard"


def test_a_recording_without_a_tone_has_that_fault(tmp_path: Path, session: Session) -> None:
    cutting = cut(recorded(tmp_path, "word", "word"), session)
    assert cutting.faults[0] == "no steady tone was heard: is it the right recording?"
    assert cutting.takes == ()


def test_a_cutting_with_faults_is_not_written(planned: tuple[Recording, Cutting], session: Session) -> None:
    recording, cutting = planned
    with pytest.raises(ValueError, match=r"^a cutting with faults cannot be written$"):
        write_takes(replace(cutting, faults=("why",)), recording, session)


# Orders ------------------------------------------------------------------------------------------------


def test_an_order_is_read_from_a_file(tmp_path: Path) -> None:
    path = tmp_path / "order.txt"
    path.write_text("xxx, xxo  # the ladder\n\nxoo-over\nXXX\n", "utf-8")
    order = read_order(path, 3)
    assert order.name == str(path)
    assert [stem(take) for take in order.takes] == ["xxx", "xxo", "xoo-over", "xxx"]


@pytest.mark.parametrize(
    ("text", "faults"),
    [
        ("", ("order.txt names no take: write one a line, as oxx-over",)),
        (
            "xxx\nxo\nxqx\n",
            (
                "order.txt line 2: found xo, expected a take's name, as oxx-over",
                "order.txt line 3: found xqx, expected a take's name, as oxx-over",
            ),
        ),
    ],
)
def test_an_order_that_cannot_be_used_says_where(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, text: str, faults: tuple[str, ...]
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("order.txt").write_text(text, "utf-8")
    with pytest.raises(SessionError) as told:
        read_order(Path("order.txt"), 3)
    assert told.value.faults == faults


def test_an_order_that_cannot_be_read_says_so(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    with pytest.raises(SessionError, match=r"^order\.txt cannot be read: No such file or directory$"):
        read_order(Path("order.txt"), 3)
    Path("order.txt").write_bytes(b"\xff\xfe\x00x")
    with pytest.raises(SessionError, match=r"^order\.txt is no plain text \(UTF-8\): write one take a line"):
        read_order(Path("order.txt"), 3)


# Writing -----------------------------------------------------------------------------------------------


def test_takes_have_the_very_samples_with_the_room_s_pauses(
    planned: tuple[Recording, Cutting], session: Session
) -> None:
    recording, cutting = planned
    original, _ = soundfile.read(recording.path, dtype="int16")
    written = write_takes(cutting, recording, session)
    assert [path.name for path in written] == files(cutting)
    for path, sound in zip(written, cutting.takes, strict=True):
        samples, rate_hz = soundfile.read(path, dtype="int16")
        first = round(sound.cut_start_s * rate_hz)
        np.testing.assert_array_equal(samples, original[first : first + len(samples)])
        assert len(samples) == pytest.approx((sound.cut_end_s - sound.cut_start_s) * rate_hz, abs=1)
        assert sound.start_s - sound.cut_start_s >= 0.3
    assert {take.path.name for take in read_session(session.folder).takes} == set(files(cutting))


def test_nothing_is_written_over_and_nothing_is_left_behind(
    planned: tuple[Recording, Cutting], session: Session
) -> None:
    recording, cutting = planned
    other = session.folder / "takes" / files(cutting)[5]
    other.write_bytes(b"mine")
    with pytest.raises(FileExistsError) as told:
        write_takes(cutting, recording, session)
    assert told.value.filename == str(other)
    assert other.read_bytes() == b"mine"
    assert os.listdir(session.folder / "takes") == [other.name]  # noqa: PTH208  (hidden ones too)


def test_a_recording_that_fails_half_way_leaves_no_take(
    planned: tuple[Recording, Cutting], session: Session, monkeypatch: pytest.MonkeyPatch
) -> None:
    recording, cutting = planned
    calls = iter(range(3))

    def full(recording: Recording, start_s: float, end_s: float) -> bytes:
        if next(calls, None) is None:
            raise OSError(28, "No space left on device")
        return b"sound"

    monkeypatch.setattr(splitting, "part_of", full)
    with pytest.raises(OSError, match="No space left"):
        write_takes(cutting, recording, session)
    assert list((session.folder / "takes").iterdir()) == []


def test_the_same_recording_gives_the_same_cutting(
    planned: tuple[Recording, Cutting], session: Session
) -> None:
    recording, cutting = planned
    assert cut(recording, session) == cutting


def test_takes_are_written_one_at_a_time_in_memory(tmp_path: Path) -> None:
    tracemalloc.start()
    add_files((tmp_path / f"{k}.bin", bytes(2_000_000)) for k in range(10))
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert peak < 6_000_000
    assert len(list(tmp_path.iterdir())) == 10
