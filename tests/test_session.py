"""Session folders: flute.toml and takes/, and every way in which a maker may get them wrong."""

import os
import tomllib
from contextlib import suppress
from pathlib import Path
from unicodedata import category

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fluteprobe.flute.fingering import BREATHS, STATES, Fingering
from fluteprobe.session import (
    FluteFacts,
    SessionError,
    Sitting,
    create_session,
    facts_text,
    parse_take_name,
    printable,
    read_session,
)

PLAIN = "[flute]\nholes = 6\n"
TEXT = st.text(st.characters(exclude_categories=("C", "Z")), min_size=1, max_size=20)


@pytest.fixture
def heron(tmp_path: Path) -> Path:
    """Return a session folder without takes."""
    folder = tmp_path / "heron"
    create_session(folder, FluteFacts(name="Heron", holes=6))
    return folder


def put(folder: Path, *names: str) -> None:
    for name in names:
        (folder / "takes" / name).write_bytes(b"sound")


def is_harmless(text: str) -> bool:
    """Whether text has neither control characters nor what UTF-8 cannot hold."""
    return not any(category(letter) in {"Cc", "Cs", "Zl", "Zp"} for letter in text)


def faults(folder: Path, text: str | bytes) -> list[str]:
    """Return what is told about a flute.toml, without the folder's name."""
    content = text if isinstance(text, bytes) else text.encode()
    (folder / "flute.toml").write_bytes(content)
    with pytest.raises(SessionError) as caught:
        read_session(folder)
    assert str(caught.value) == "\n".join(caught.value.faults)
    return [fault.removeprefix(f"{folder}{os.sep}") for fault in caught.value.faults]


def fault(folder: Path, text: str | bytes) -> str:
    (only,) = faults(folder, text)
    return only


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
        wall_mm=4.5, holes_mm=((105.0, 9.0), (127.5, 9.5)), length_mm=385.0, tolerance_mm=0.3,
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


@pytest.mark.parametrize("text", [PLAIN.encode("utf-8-sig"), PLAIN.replace("\n", "\r\n").encode()])
def test_files_as_some_editors_save_them_are_read(heron: Path, text: bytes) -> None:
    (heron / "flute.toml").write_bytes(text)
    assert read_session(heron).flute.holes == 6


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


@given(
    st.text(alphabet=STATES, min_size=1, max_size=10),
    st.sampled_from(BREATHS),
    st.integers(1, 9999),
    st.sampled_from([".wav", ".flac", ".mp3", ""]),
)
def test_every_name_of_the_pattern_is_understood(states: str, breath: str, number: int, suffix: str) -> None:
    expected = (Fingering(states), breath, number)
    assert parse_take_name(f"{states}-{breath}-{number}{suffix}") == expected
    assert parse_take_name(f"{states}{suffix}") == (Fingering(states), "normal", 1)
    assert parse_take_name(f"{states}-{breath}{suffix}") == (Fingering(states), breath, 1)
    assert parse_take_name(f"{states}-{number}{suffix}") == (Fingering(states), "normal", number)


# --- takes that cannot be used -----------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "message"),
    [
        (
            "hello.wav",
            "the name is no fingering: rename it to its fingering, as oxxxxx.wav or oxxxxx-over-2.wav",
        ),
        ("oxxxxx_over.wav", "the name is no fingering: rename it to oxxxxx-over.wav"),
        ("oxxxxx over 3.wav", "the name is no fingering: rename it to oxxxxx-over-3.wav"),
        ("oxxxxx-2-over.wav", "the name is no fingering: rename it to oxxxxx-over-2.wav"),
        ("oxxxxx (2).WAV", "the name is no fingering: rename it to oxxxxx-2.wav"),
        ("0xxxxx-overblown.flac", "the name is no fingering: rename it to oxxxxx-over.flac"),
        ("oxxxxx-ovr.wav", "the name is no fingering: rename it to oxxxxx-over.wav"),
        (
            "xxxxx.wav",
            "the name has 5 holes where the flute has 6: rename it, or correct holes in flute.toml",
        ),
        ("x.wav", "the name has 1 hole where the flute has 6: rename it, or correct holes in flute.toml"),
        (
            "xxxxxxxxxxxx-over.wav",
            "the name has 12 holes where the flute has 6: rename it, or correct holes in flute.toml",
        ),
        ("oxxxxx-0.wav", "takes are numbered from 1: rename it"),
        ("oxxxxx-12345.wav", "the name is no fingering: rename it to oxxxxx.wav"),
    ],
)
def test_a_name_that_is_no_take_is_a_problem_with_its_cure(heron: Path, name: str, message: str) -> None:
    put(heron, name, "xxxxxx.wav")
    session = read_session(heron)
    assert [take.name for take in session.takes] == ["takes/xxxxxx.wav"]
    assert [(problem.take, problem.message) for problem in session.problems] == [(f"takes/{name}", message)]


def test_the_proposed_name_is_one_that_is_free(heron: Path) -> None:
    put(heron, "oxxxxx.wav", "oxxxxx-2.wav", "oxxxxx (2).wav")
    (problem,) = read_session(heron).problems
    assert problem.message == "the name is no fingering: rename it to oxxxxx-3.wav"


def test_one_take_in_two_formats_counts_once(heron: Path) -> None:
    put(heron, "oxxxxx.flac", "oxxxxx.wav")
    session = read_session(heron)
    assert [take.name for take in session.takes] == ["takes/oxxxxx.flac"]
    (problem,) = session.problems
    assert problem.take == "takes/oxxxxx.wav"
    assert problem.message == "is the same take as oxxxxx.flac: remove one, or rename it to oxxxxx-2.wav"


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


def test_takes_that_lead_out_of_the_folder_are_not_followed(heron: Path, tmp_path: Path) -> None:
    (tmp_path / "away").mkdir()
    (tmp_path / "away" / "xxxxxx.wav").write_bytes(b"sound")
    (heron / "takes").rmdir()
    (heron / "takes").symlink_to(tmp_path / "away")
    session = read_session(heron)
    assert session.takes == ()
    assert [problem.message for problem in session.problems] == [
        "is a link that leads out of the session folder: make it a folder"
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


# --- faults in flute.toml ----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("", "flute.toml is empty: write at least [flute] and, under it, holes = 6"),
        (" \n\n", "flute.toml is empty: write at least [flute] and, under it, holes = 6"),
        ("# just a note\n", "flute.toml: key holes: missing in [flute], expected holes = 1 to 10"),
        (
            "[flute]\nname = 'A'\n",
            "flute.toml line 1: key holes: missing in [flute], expected holes = 1 to 10",
        ),
        (
            "[flute]\nholes = '6'\n",
            'flute.toml line 2: key holes: found "6", expected a whole number from 1 to 10, without quotes',
        ),
        (
            "[flute]\nholes = 11\n",
            "flute.toml line 2: key holes: found 11, expected a whole number from 1 to 10",
        ),
        (
            "[flute]\nholes = 0\n",
            "flute.toml line 2: key holes: found 0, expected a whole number from 1 to 10",
        ),
        (
            "[flute]\nholes = 6.0\n",
            "flute.toml line 2: key holes: found 6.0, expected a whole number from 1 to 10",
        ),
        (
            "[flute]\nholes = true\n",
            "flute.toml line 2: key holes: found true, expected a whole number from 1 to 10",
        ),
        (PLAIN + "nmae = 'A'\n", "flute.toml line 3: key nmae: not known in [flute]; did you mean name?"),
        (
            PLAIN + "name = 5\n",
            'flute.toml line 3: key name: found 5, expected text in "quotes", on one line',
        ),
        (
            PLAIN + 'wood = "a\\nb"\n',
            'flute.toml line 3: key wood: found "a\\nb", expected text in "quotes", on one line',
        ),
        (
            PLAIN + "colour = 1\n",
            "flute.toml line 3: key colour: not known in [flute]; "
            "known are name, holes, maker, serial, key, wood, bore_mm, wall_mm, holes_mm, length_mm, "
            "tolerance_mm",
        ),
        (
            PLAIN + "a4_hz = 440\n",
            "flute.toml line 3: key a4_hz: not known in [flute]; it belongs under [session]",
        ),
        (
            PLAIN + "holes_mm = [[100, 9], [120, 9]]\n",
            "flute.toml line 3: key holes_mm: found 2 pairs, expected 6, one for each hole",
        ),
        (
            "[flute]\nholes = 2\nholes_mm = [[120, 9], [100, 9]]\n",
            "flute.toml line 3: key holes_mm: found [[120, 9], [100, 9]], expected [[distance from the sound "
            "hole, diameter], …] in mm, top hole first, each farther than the one before",
        ),
        (
            "[flute]\nholes = 1\nholes_mm = [120, 9]\n",
            "flute.toml line 3: key holes_mm: found [120, 9], expected [[distance from the sound hole, "
            "diameter], …] in mm, top hole first",
        ),
        (
            "[flute]\nholes = 1\nholes_mm = [[120, 9]]\nlength_mm = 120\n",
            "flute.toml line 4: key length_mm: found 120, expected more than 120, where the lowest hole is: "
            "from the sound hole to the foot",
        ),
        (
            PLAIN + "length_mm = 38.5e9\n",
            "flute.toml line 3: key length_mm: found 38500000000.0, expected a number from 20 to 4000 (mm)",
        ),
        (
            PLAIN + "tolerance_mm = 0\n",
            "flute.toml line 3: key tolerance_mm: found 0, expected a number from 0.01 to 20 (mm)",
        ),
        (
            PLAIN + "[session]\na4_hz = 44.0\n",
            "flute.toml line 4: key a4_hz: found 44.0, expected a number from 380 to 500 (Hz)",
        ),
        (
            PLAIN + "[session]\nair_temperature_c = 72\n",
            "flute.toml line 4: key air_temperature_c: found 72, expected a number from -20 to 50 (°C)",
        ),
        (
            PLAIN + "[session]\nair_temperature_c = nan\n",
            "flute.toml line 4: key air_temperature_c: found NaN, expected a number from -20 to 50 (°C)",
        ),
        (
            PLAIN + "[sesion]\na4_hz = 440\n",
            "flute.toml line 3: table [sesion]: not known; did you mean [session]?",
        ),
        (PLAIN + "[room]\n", "flute.toml line 3: table [room]: not known; known are [flute] and [session]"),
        (
            "a4_hz = 440\n" + PLAIN,
            "flute.toml line 1: key a4_hz: stands outside a table; put it under [session]",
        ),
        (PLAIN + "[[session]]\n", "flute.toml line 3: key session: found [{}], expected a line [session]"),
    ],
)
def test_a_fault_is_told_with_its_line_what_was_found_and_what_is_expected(
    heron: Path, text: str, expected: str
) -> None:
    assert fault(heron, text) == expected


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        (
            "[flute]\nname = Heron\n",
            'flute.toml line 2: found name = Heron, expected quotes around text: key = "text"',
        ),
        (
            "[flute]\nname = “Heron”\n",
            'flute.toml line 2: found name = “Heron”, expected straight quotes: "text"',
        ),
        (
            "[session]\na4_hz = 440,0\n",
            "flute.toml line 2: found a4_hz = 440,0, expected a point in numbers: 440.0",
        ),
        (
            "[flute]\nholes = 6\nholes = 5\n",
            "flute.toml line 3: found holes = 5, expected each key and each [table] once",
        ),
        ("[flute\n", 'flute.toml line 1: found [flute, expected key = "text" or key = number'),
        ("[flute]\nholes = \n", 'flute.toml line 2: found holes =, expected key = "text" or key = number'),
    ],
)
def test_what_is_no_toml_is_told_in_plain_words(heron: Path, text: str, expected: str) -> None:
    assert fault(heron, text) == expected


def test_all_faults_are_told_at_once_in_the_order_of_lines(heron: Path) -> None:
    text = (
        "[flute]\nnmae = 'A'\nholes = 'six'\nbore_mm = -1\n[session]\na4_hz = 300\n"
        + "\n" * 5
        + "plaice = 'B'\n"
    )
    told = faults(heron, text)
    assert [line.split(":")[0] for line in told] == [f"flute.toml line {line}" for line in (2, 3, 4, 6, 12)]


@pytest.mark.parametrize(
    "content", [b"\xff\xfe[\x00f\x00", b"\x00" * 9, b"x = " + b"[" * 5000, b"[flute]\nholes = " + b"9" * 6000]
)
def test_a_damaged_file_is_one_short_printable_line(heron: Path, content: bytes) -> None:
    told = fault(heron, content)
    assert told.startswith("flute.toml")
    assert is_harmless(told)
    assert len(told) < 200


def test_a_file_of_another_kind_is_not_read_whole(heron: Path) -> None:
    told = fault(heron, b"#" * 2_000_000)
    assert told == "flute.toml is far too long: is it another file?"


@given(st.binary(max_size=60))
def test_no_content_whatever_breaks_the_reader(
    tmp_path_factory: pytest.TempPathFactory, content: bytes
) -> None:
    folder = tmp_path_factory.mktemp("any")
    (folder / "flute.toml").write_bytes(b"[flute]\nholes = 6\n" + content)
    told: tuple[str, ...] = ()
    try:
        read_session(folder)
    except SessionError as error:
        told = error.faults
    assert all(is_harmless(line) for line in told)


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


def test_a_file_in_the_way_and_values_out_of_range_are_told(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(SessionError, match="cannot be made: a part of its path is a file"):
        create_session(tmp_path / "file", FluteFacts(name="A", holes=6))
    with pytest.raises(SessionError, match="key holes: found 12, expected a whole number from 1 to 10"):
        create_session(tmp_path / "new", FluteFacts(name="A", holes=12))
    assert not (tmp_path / "new").exists()
