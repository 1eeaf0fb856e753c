"""Session folders: what is read where, what is a take, and every way in which a folder may be wrong."""

import os
import subprocess
import sys
import tomllib
import unicodedata
from contextlib import suppress
from pathlib import Path
from tempfile import TemporaryDirectory

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from sessions import is_harmless, problems, put, takes

from fluteprobe.session import (
    FluteFacts,
    SessionError,
    Sitting,
    create_session,
    facts_text,
    printable,
    read_session,
)

TEXT = st.text(st.characters(exclude_categories=("C", "Z")), min_size=1, max_size=20)
NAMES = [
    "oxxxxx.wav", "OXXXXX (2).wav", "Möwe oxxxxx 2.wav", "oxxxxx überblasen (1).wav", "oxxxxx_over.wav",
    "oxxxxx-over_2.wav",
]  # fmt: skip


@pytest.fixture
def heron(tmp_path: Path) -> Path:
    """Return a session folder without takes."""
    folder = tmp_path / "heron"
    create_session(folder, FluteFacts(name="Heron", holes=6))
    return folder


# --- a good folder -----------------------------------------------------------------------------------


def test_everything_that_flute_toml_can_say(tmp_path: Path) -> None:
    (tmp_path / "flute.toml").write_text(
        """
        [flute]
        name = "Heron"
        holes = 2
        maker = "Osier & Reed"
        serial = 27
        key = "A minor"
        wood = "yew"
        bore_mm = 19
        bore_profile_mm = [[0, 19.5], [385, 18.5]]
        wall_mm = 4.5
        holes_mm = [
            [105, 9],
            [127.5, 9.5],
        ]
        length_mm = 385
        tolerance_mm = 0.3
        [session]
        a4_hz = 442
        air_temperature_c = 22.5
        reference_temperature_c = 20
        date = 2026-01-31
        player = "Ada"
        place = "back room"
        microphone = "phone"
        """,
        encoding="utf-8",
    )
    session = read_session(tmp_path)
    assert session.flute == FluteFacts(
        name="Heron", holes=2, maker="Osier & Reed", serial="27", key="A minor", wood="yew", bore_mm=19.0,
        bore_profile_mm=((0.0, 19.5), (385.0, 18.5)), wall_mm=4.5,
        holes_mm=((105.0, 9.0), (127.5, 9.5)), length_mm=385.0, tolerance_mm=0.3,
    )  # fmt: skip
    assert session.sitting == Sitting(
        a4_hz=442.0, air_temperature_c=22.5, reference_temperature_c=20.0, date="2026-01-31", player="Ada",
        place="back room", microphone="phone",
    )  # fmt: skip


def test_what_is_not_given_is_none_and_the_name_is_the_folders(tmp_path: Path) -> None:
    folder = tmp_path / "wren"
    folder.mkdir()
    (folder / "flute.toml").write_text('[flute]\nholes = 5\nmaker = ""\n')
    session = read_session(folder)
    assert session.flute == FluteFacts(name="wren", holes=5)
    assert session.sitting == Sitting()


def test_takes_are_told_by_their_names_and_sorted_by_fingering_breath_and_number(heron: Path) -> None:
    put(
        heron,
        "oxxxxx-over-10.wav", "oxxxxx-over-2.flac", "oxxxxx-over.MP3", "oxxxxx.wav", "OXXXXX-Soft.wav",
        "oxxxxx-normal-3.ogg", "hvxxxx-02.aiff", "xxxxxx",
    )  # fmt: skip
    session = read_session(heron)
    assert session.problems == ()
    assert [(take.name, str(take.fingering), take.breath, take.number) for take in session.takes] == [
        ("takes/hvxxxx-02.aiff", "hvxxxx", "normal", 2),
        ("takes/OXXXXX-Soft.wav", "oxxxxx", "soft", 1),
        ("takes/oxxxxx.wav", "oxxxxx", "normal", 1),
        ("takes/oxxxxx-normal-3.ogg", "oxxxxx", "normal", 3),
        ("takes/oxxxxx-over.MP3", "oxxxxx", "over", 1),
        ("takes/oxxxxx-over-2.flac", "oxxxxx", "over", 2),
        ("takes/oxxxxx-over-10.wav", "oxxxxx", "over", 10),
        ("takes/xxxxxx", "xxxxxx", "normal", 1),
    ]
    assert all(take.path.is_file() for take in session.takes)


def test_hidden_files_folders_notes_and_pictures_are_passed_over(heron: Path) -> None:
    put(heron, ".DS_Store", ".oxxxxx.wav", "notes.txt", "oxxxxx.md", "flute.JPG", "xxxxxx.wav~", "Thumbs.db")
    (heron / "takes" / "older").mkdir()
    put(heron, "xxxxxx.wav")
    session = read_session(heron)
    assert [take.name for take in session.takes] == ["takes/xxxxxx.wav"]
    assert session.problems == ()


# --- takes that cannot be used -----------------------------------------------------------------------


def test_a_name_that_is_not_understood_is_a_problem_and_the_others_are_read(heron: Path) -> None:
    put(heron, "hello.wav", "oxxxxx-ovr.wav", "xxxxx.wav", "xxxxxx.wav")
    assert takes(heron) == [("takes/xxxxxx.wav", "xxxxxx", "normal", 1)]
    assert problems(heron) == [
        (
            "takes/hello.wav",
            "the name is no fingering: rename it to its fingering, as oxxxxx.wav or oxxxxx-over-2.wav, "
            "or list it in takes.csv",
        ),
        (
            "takes/oxxxxx-ovr.wav",
            'the name has a word that is not known, "ovr": rename it to oxxxxx-over.wav',
        ),
        (
            "takes/xxxxx.wav",
            "the name has 5 holes where the flute has 6: rename it, or correct holes in flute.toml",
        ),
    ]


def test_names_that_mean_the_same_get_numbers_of_their_own(heron: Path) -> None:
    put(
        heron, "oxxxxx (2).wav", "oxxxxx.wav", "oxxxxx-2.wav", "OXXXXX copy.wav", "oxxxxx_3.wav", "Oxxxxx.wav"
    )
    assert [(name, number) for name, _, _, number in takes(heron)] == [
        ("takes/Oxxxxx.wav", 1),
        ("takes/oxxxxx-2.wav", 2),
        ("takes/oxxxxx.wav", 3),
        ("takes/oxxxxx (2).wav", 4),
        ("takes/oxxxxx_3.wav", 5),
        ("takes/OXXXXX copy.wav", 6),
    ]
    assert problems(heron) == []


def test_one_take_in_two_formats_counts_once(heron: Path) -> None:
    put(heron, "oxxxxx.flac", "oxxxxx.wav")
    session = read_session(heron)
    assert [take.name for take in session.takes] == ["takes/oxxxxx.flac"]
    (problem,) = session.problems
    assert problem.take == "takes/oxxxxx.wav"
    assert problem.message == "is the same take as oxxxxx.flac: remove one, or rename it to oxxxxx-2.wav"


def test_a_copy_of_a_take_counts_once(heron: Path) -> None:
    put(heron, "oxxxxx.wav", "oxxxxx-over.wav", "oxxxxx-2.wav")
    recording = (heron / "takes" / "oxxxxx.wav").read_bytes()
    (heron / "takes" / "oxxxxx - Copy.wav").write_bytes(recording)
    (heron / "takes" / "oxxxxx (1).flac").write_bytes(recording)
    assert [name for name, *_ in takes(heron)] == [
        "takes/oxxxxx.wav",
        "takes/oxxxxx-2.wav",
        "takes/oxxxxx-over.wav",
    ]
    why = "is a copy of takes/oxxxxx.wav, the same recording: remove one of the two"
    assert problems(heron) == [("takes/oxxxxx (1).flac", why), ("takes/oxxxxx - Copy.wav", why)]


@settings(max_examples=10)
@given(st.permutations(NAMES), st.sampled_from(["NFC", "NFD"]))
def test_takes_are_the_same_in_every_order_and_spelling_of_the_file_system(
    names: list[str], form: str
) -> None:
    with TemporaryDirectory() as place:
        folder = Path(place) / "Möwe"
        create_session(folder, FluteFacts(name="Möwe", holes=6))
        for name in names:
            file = unicodedata.normalize(form, name)  # type: ignore[arg-type]
            (folder / "takes" / file).write_bytes(name.encode())
        found = [(unicodedata.normalize("NFC", name), *rest) for name, *rest in takes(folder)]
        assert problems(folder) == []
    assert found == [
        ("takes/oxxxxx.wav", "oxxxxx", "normal", 1),
        ("takes/Möwe oxxxxx 2.wav", "oxxxxx", "normal", 2),
        ("takes/OXXXXX (2).wav", "oxxxxx", "normal", 3),
        ("takes/oxxxxx überblasen (1).wav", "oxxxxx", "over", 1),
        ("takes/oxxxxx-over_2.wav", "oxxxxx", "over", 2),
        ("takes/oxxxxx_over.wav", "oxxxxx", "over", 3),
    ]


def test_a_link_out_of_the_folder_is_not_followed(heron: Path, tmp_path: Path) -> None:
    (tmp_path / "elsewhere.wav").write_bytes(b"sound")
    put(heron, "xxxxxx.wav")
    (heron / "takes" / "oxxxxx.wav").symlink_to(tmp_path / "elsewhere.wav")
    (heron / "takes" / "ooxxxx.wav").symlink_to("xxxxxx.wav")
    (heron / "takes" / "oooxxx.wav").symlink_to("nowhere.wav")
    session = read_session(heron)
    assert [take.name for take in session.takes] == ["takes/ooxxxx.wav", "takes/xxxxxx.wav"]
    assert [problem.message for problem in session.problems] == [
        "is no ordinary file: put the recording itself there",
        "is a link that leads out of the session folder: put the recording itself there",
    ]


def test_recordings_and_a_list_that_lie_where_they_are_not_read_are_told(heron: Path) -> None:
    for name in ("oxxxxx-over.wav", "xxxxxx", "notes.txt", "takes/takes.csv"):
        (heron / name).write_bytes(b"sound")
    put(heron, "xxxxxx.wav")
    assert problems(heron) == [
        ("oxxxxx-over.wav", "lies beside flute.toml: move it into takes"),
        ("takes/takes.csv", "is not read there: move it beside flute.toml"),
    ]


def test_takes_that_lead_out_of_the_folder_are_not_followed(heron: Path, tmp_path: Path) -> None:
    (tmp_path / "away").mkdir()
    (tmp_path / "away" / "xxxxxx.wav").write_bytes(b"sound")
    (heron / "takes").rmdir()
    (heron / "takes").symlink_to(tmp_path / "away")
    (heron / "raw.wav").write_bytes(b"raw")
    (heron / "takes.csv").write_text("file,fingering\nraw.wav,oxxxxx\nxxxxxx.wav,xxxxxx\n")
    assert takes(heron) == [("raw.wav", "oxxxxx", "normal", 1)]
    assert problems(heron) == [
        (
            "takes.csv line 3",
            "column file: xxxxxx.wav is a link that leads out of the session folder: "
            "put the recording itself there",
        ),
        ("takes", "is a link that leads out of the session folder: make it a folder"),
    ]


@pytest.mark.parametrize("exists", [True, False])
def test_a_session_without_recordings_says_where_they_go(heron: Path, exists: bool) -> None:
    if not exists:
        (heron / "takes").rmdir()
    session = read_session(heron)
    assert session.takes == ()
    (problem,) = session.problems
    assert problem.take == "takes"
    assert problem.message == "no recordings yet: put them there, as takes/oxxxxx.wav"


def test_a_takes_folder_of_another_name_or_with_folders_in_it_is_told(heron: Path) -> None:
    (heron / "takes" / "monday").mkdir()
    told = "no recordings yet, only folders: put the recordings themselves there, as takes/oxxxxx.wav"
    assert problems(heron) == [("takes", told)]
    for old, new in (("takes", "Takes"), ("Takes", "take")):
        (heron / old).rename(heron / new)
        assert problems(heron) == [("takes", f"no such folder, but {new}: rename it to takes")]


def test_no_control_character_of_a_file_name_reaches_a_message(heron: Path) -> None:
    (heron / "takes" / "a\x1b[31m\n\u202e.wav").write_bytes(b"")
    with suppress(OSError):  # some file systems take no names that are not UTF-8
        os.close(os.open(os.fsencode(heron / "takes") + b"/b\xff.wav", os.O_CREAT | os.O_WRONLY))
    for problem in read_session(heron).problems:
        assert is_harmless(problem.take + problem.message)


@given(st.text())
def test_printable_text_has_no_control_characters(text: str) -> None:
    assert is_harmless(printable(text))


# --- folders that cannot be used ---------------------------------------------------------------------


def refusal(folder: Path) -> str:
    with pytest.raises(SessionError) as caught:
        read_session(folder)
    return str(caught.value)


def test_a_missing_folder_says_how_to_make_one(tmp_path: Path) -> None:
    folder = tmp_path / "no such"
    assert refusal(folder) == f"{folder}: no such folder; make one with `fluteprobe begin '{folder}'`"


def test_a_misspelt_folder_is_guessed(heron: Path) -> None:
    folder = heron.with_name("herron")
    assert refusal(folder) == (
        f"{folder}: no such folder; did you mean {heron}? If not, make one with `fluteprobe begin {folder}`"
    )


def test_a_folder_without_flute_toml_says_how_to_write_one(tmp_path: Path) -> None:
    assert refusal(tmp_path) == f"{tmp_path} has no flute.toml: write one with `fluteprobe begin {tmp_path}`"


@pytest.mark.parametrize("name", ["flute.toml.txt", "Flute.TOML", "flute.txt", "flute"])
def test_a_flute_toml_of_another_name_is_told(heron: Path, name: str) -> None:
    (heron / "flute.toml").rename(heron / name)
    assert refusal(heron) == f"{heron} has no flute.toml, but {name}: rename it to flute.toml"


def test_a_file_or_the_takes_folder_instead_of_the_session(heron: Path) -> None:
    file = heron / "flute.toml"
    assert refusal(file) == f"{file} is a file: give the session folder, the one that holds flute.toml"
    takes = heron / "takes"
    assert refusal(takes) == f"{takes} has no flute.toml, but the folder above it has: give {heron}"


def test_a_flute_toml_that_is_a_folder_or_leads_out(heron: Path, tmp_path: Path) -> None:
    file = heron / "flute.toml"
    file.rename(tmp_path / "other.toml")
    file.symlink_to(tmp_path / "other.toml")
    assert refusal(heron) == f"{file} is a link that leads out of the folder: put the file itself there"
    file.unlink()
    file.mkdir()
    assert refusal(heron) == f"{file} is no file that can be read"


# --- beginning ---------------------------------------------------------------------------------------


@given(
    TEXT, st.integers(1, 10), st.none() | TEXT, st.none() | st.floats(2, 100), st.floats(380, 500),
    st.none() | st.floats(-20, 50),
)  # fmt: skip
def test_what_begin_writes_reads_back(  # noqa: PLR0917
    name: str, holes: int, maker: str | None, bore: float | None, a4_hz: float, air: float | None
) -> None:
    flute = FluteFacts(name=name, holes=holes, maker=maker, bore_mm=bore)
    sitting = Sitting(a4_hz=a4_hz, air_temperature_c=air)
    tables = tomllib.loads(facts_text(flute, sitting))
    given = {"name": name, "holes": holes, "maker": maker, "bore_mm": bore}
    assert tables["flute"] == {key: value for key, value in given.items() if value is not None}
    given = {"a4_hz": a4_hz, "air_temperature_c": air}
    assert tables["session"] == {key: value for key, value in given.items() if value is not None}


def test_every_key_stands_in_a_new_flute_toml_and_may_be_uncommented(tmp_path: Path) -> None:
    file = create_session(tmp_path / "new", FluteFacts(name="A", holes=2))
    lines = file.read_text(encoding="utf-8").splitlines()
    keys = [line.removeprefix("# ").split(" =")[0] for line in lines if " = " in line]
    assert keys == [*FluteFacts.__dataclass_fields__, *Sitting.__dataclass_fields__] or sorted(
        keys
    ) == sorted([*FluteFacts.__dataclass_fields__, *Sitting.__dataclass_fields__])
    file.write_text("\n".join(line.removeprefix("# ") if " = " in line else line for line in lines))
    assert read_session(tmp_path / "new").flute.holes_mm == ((105.0, 9.0), (127.0, 9.5))


def test_an_existing_folder_is_completed_and_nothing_is_overwritten(tmp_path: Path) -> None:
    folder = tmp_path / "heron"
    (folder / "takes").mkdir(parents=True)
    put(folder, "oxxxxx.wav")
    create_session(folder, FluteFacts(name="Heron", holes=6))
    assert len(read_session(folder).takes) == 1
    before = (folder / "flute.toml").read_bytes()
    with pytest.raises(SessionError) as caught:
        create_session(folder, FluteFacts(name="Other", holes=5))
    assert str(caught.value) == (f"{folder / 'flute.toml'} exists already: edit it, or choose another folder")
    assert (folder / "flute.toml").read_bytes() == before


@pytest.mark.skipif(sys.platform == "win32", reason="Windows has no limit on the size of files")
def test_a_flute_toml_that_cannot_be_written_whole_is_not_left_behind(tmp_path: Path) -> None:
    code = (
        "import resource, signal\n"
        "from fluteprobe.session import FluteFacts, create_session\n"
        "signal.signal(signal.SIGXFSZ, signal.SIG_IGN)\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (100, 100))\n"
        "create_session('new', FluteFacts(name='A', holes=6))\n"
    )
    told = subprocess.run(
        [sys.executable, "-c", code], cwd=tmp_path, capture_output=True, text=True, check=False
    )
    assert told.stderr.splitlines()[-1] == (
        "fluteprobe.session.words.SessionError: new cannot be made: File too large"
    )
    assert sorted(path.name for path in (tmp_path / "new").iterdir()) == ["takes"]


def test_a_file_in_the_way_and_values_out_of_range_are_told(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(SessionError, match="cannot be made: a part of its path is a file"):
        create_session(tmp_path / "file", FluteFacts(name="A", holes=6))
    with pytest.raises(SessionError, match="key holes: found 12, expected a whole number from 1 to 10"):
        create_session(tmp_path / "new", FluteFacts(name="A", holes=12))
    assert not (tmp_path / "new").exists()
