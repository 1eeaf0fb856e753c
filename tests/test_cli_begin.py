"""`fluteprobe begin`: options, questions at a terminal, and what is written."""

import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result

from fluteprobe.cli.main import main
from fluteprobe.session import FluteFacts, Sitting, read_session

CODE = "from fluteprobe.cli.main import main; main(['begin', 'new'])"
COMMAND = [sys.executable, "-c", CODE]
NEXT = (
    "Put the recordings into new/takes, one fingering a file, named by it:\n"
    "  oxxxx.wav   top hole open, all others closed\n"
    "Then: fluteprobe chart new\n"
)


def begin(*arguments: str, **options: Any) -> Result:
    return CliRunner().invoke(main, ["begin", *arguments], **options)


@pytest.fixture(autouse=True)
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Work in an empty folder."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def terminal(monkeypatch: pytest.MonkeyPatch) -> None:
    """Let somebody sit at a terminal."""
    monkeypatch.setattr("fluteprobe.cli.begin._on_terminal", lambda: True)


# --- options -----------------------------------------------------------------------------------------


def test_a_folder_is_made_and_it_says_what_next() -> None:
    result = begin("my wren", "--holes", "5", "--bore-mm", "16", "--temperature", "21.5", "--key", "G")
    assert result.exit_code == 0
    assert result.output == (
        f"Made {Path('my wren/flute.toml')} for a flute with 5 holes.\n"
        f"Put the recordings into {Path('my wren/takes')}, one fingering a file, named by it:\n"
        "  oxxxx.wav   top hole open, all others closed\n"
        "Then: fluteprobe chart 'my wren'\n"
    )
    session = read_session("my wren")
    assert session.flute == FluteFacts(name="my wren", holes=5, bore_mm=16.0, key="G")
    assert session.sitting == Sitting(air_temperature_c=21.5)


def test_every_fact_is_an_option() -> None:
    flute = FluteFacts(
        name="Wren", holes=2, maker="Osier & Reed", serial="027", key="A", wood="yew", bore_mm=19.5,
        bore_profile_mm=((0.0, 20.0), (385.0, 18.5)), wall_mm=4.0,
        holes_mm=((105.0, 9.0), (127.5, 9.5)), length_mm=385.0, tolerance_mm=0.5,
    )  # fmt: skip
    sitting = Sitting(
        a4_hz=442.0, air_temperature_c=-2.5, reference_temperature_c=20.0, date="2026-01-31", player="Ada",
        place="back room", microphone="phone",
    )  # fmt: skip
    result = begin(
        "new", "--name", "Wren", "--holes", "2", "--maker", "Osier & Reed", "--serial", "027", "--key", "A",
        "--wood", "yew", "--bore-mm", "19,5 mm", "--bore-profile-mm", "0", "20 mm",
        "--bore-profile-mm", "385", "18,5", "--wall-mm", "4", "--hole-mm", "105", "9", "--hole-mm",
        "127,5", "9.5 mm", "--length-mm", "385", "--tolerance-mm", "0,5", "--a4-hz", "442 Hz",
        "--temperature", "−2,5 °C", "--reference-temperature", "20 C", "--date", "2026-01-31",
        "--player", "Ada", "--place", "back room", "--microphone", "phone",
    )  # fmt: skip
    assert result.exit_code == 0, result.output
    session = read_session("new")
    assert (session.flute, session.sitting) == (flute, sitting)
    options = {parameter.name for parameter in main.commands["begin"].params}
    assert options >= {*FluteFacts.__dataclass_fields__, *Sitting.__dataclass_fields__}


def test_holes_that_are_measured_are_counted() -> None:
    assert begin("new", "--hole-mm", "105", "9", "--hole-mm", "127", "9").exit_code == 0
    assert read_session("new").flute.holes == 2


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (["--holes", "11"], "'--holes': found 11, expected a whole number from 1 to 10"),
        (["--holes", "six"], "'--holes': found six, expected a whole number from 1 to 10"),
        (
            ["--temperature", "72 F"],
            "'--temperature': found 72 F, expected a number from -20 to 50 (°C); 72 °F would be 22.2",
        ),
        (["--a4-hz", "44"], "'--a4-hz': found 44, expected a number from 380 to 500 (Hz)"),
        (["--bore-mm", "3/4"], "'--bore-mm': found 3/4, expected a number from 2 to 100 (mm)"),
        (["--name", "a\x1b[2J"], "'--name': found a\\x1b[2J, expected text in \"quotes\", on one line"),
        (
            ["--hole-mm", "127", "9", "--hole-mm", "105", "9"],
            "'--hole-mm': found 127 9, 105 9, expected [[distance from the sound hole, diameter], …] in mm, "
            "top hole first, each farther than the one before",
        ),
        (
            ["--bore-profile-mm", "0", "19"],
            "'--bore-profile-mm': found 0 19, expected [[distance from the sound hole, bore there], …] in "
            "mm, from the sound hole to the foot, 2 to 60 of them; an even bore is bore_mm",
        ),
    ],
)
def test_an_option_is_checked_as_flute_toml_is(words: list[str], told: str) -> None:
    result = begin("new", *words)
    assert result.exit_code == 2
    assert result.stderr.splitlines()[-1] == f"Error: Invalid value for {told}"
    assert not Path("new").exists()


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (
            ["--holes", "3", "--hole-mm", "105", "9"],
            "flute.toml: key holes_mm: found 1 pair, expected 3, one for each hole",
        ),
        (
            ["--hole-mm", "105", "9", "--length-mm", "100"],
            "flute.toml: key length_mm: found 100, expected more than 105, where the lowest hole is: "
            "from the sound hole to the foot",
        ),
    ],
)
def test_options_that_contradict_each_other_are_told(words: list[str], told: str) -> None:
    result = begin("new", *words)
    assert (result.exit_code, result.output) == (1, f"Error: {told}\n")
    assert not Path("new").exists()


def test_nothing_is_overwritten() -> None:
    begin("heron")
    before = Path("heron/flute.toml").read_bytes()
    result = begin("heron", "--holes", "5")
    told = f"Error: {Path('heron/flute.toml')} exists already: edit it, or choose another folder\n"
    assert (result.exit_code, result.output) == (1, told)
    assert Path("heron/flute.toml").read_bytes() == before


# --- questions ---------------------------------------------------------------------------------------


@pytest.mark.usefixtures("terminal")
def test_what_matters_most_is_asked_for_and_wrong_answers_are_asked_again() -> None:
    result = begin("new", input="Wren\n12\nfive\n5 holes\nA minor\nwarm\n70\n21,5 °C\n")
    assert result.exit_code == 0
    assert result.stdout == f"Made {Path('new/flute.toml')} for a flute with 5 holes.\n{NEXT}"
    assert result.stderr == (
        "Name of the flute [new]: Wren\n"
        "Finger holes [6]: 12\n"
        "Error: found 12, expected a whole number from 1 to 10\n"
        "Finger holes [6]: five\n"
        "Error: found five, expected a whole number from 1 to 10\n"
        "Finger holes [6]: 5 holes\n"
        "Key it is in, if known: A minor\n"
        "Temperature of the air in °C, if known: warm\n"
        "Error: found warm, expected a number from -20 to 50 (°C)\n"
        "Temperature of the air in °C, if known: 70\n"
        "Error: found 70, expected a number from -20 to 50 (°C); 70 °F would be 21.1\n"
        "Temperature of the air in °C, if known: 21,5 °C\n"
    )
    session = read_session("new")
    assert session.flute == FluteFacts(name="Wren", holes=5, key="A minor")
    assert session.sitting == Sitting(air_temperature_c=21.5)


@pytest.mark.usefixtures("terminal")
@pytest.mark.parametrize("answers", ["\n\n\n\n", " \n \n \n \n"])
def test_empty_answers_take_what_is_offered_or_leave_it_out(answers: str) -> None:
    assert begin("new", input=answers).exit_code == 0
    session = read_session("new")
    assert (session.flute, session.sitting) == (FluteFacts(name="new", holes=6), Sitting())


@pytest.mark.usefixtures("terminal")
def test_nothing_that_was_given_is_asked_for() -> None:
    words = ["--name", "Wren", "--hole-mm", "105", "9", "--temperature", "20", "--key", "A"]
    result = begin("new", *words, input="")
    assert (result.exit_code, result.stderr) == (0, "")


@pytest.mark.usefixtures("terminal")
def test_a_session_that_is_there_already_is_told_before_anything_is_asked() -> None:
    begin("new", input="\n\n\n\n")
    result = begin("new", input="")
    told = f"Error: {Path('new/flute.toml')} exists already: edit it, or choose another folder\n"
    assert (result.exit_code, result.output) == (1, told)


@pytest.mark.usefixtures("terminal")
def test_breaking_off_makes_nothing() -> None:
    result = begin("new", input="Wren\n")
    assert result.exit_code == 1
    assert result.stderr.endswith("Aborted!\n")
    assert not Path("new").exists()


def test_nothing_is_asked_off_a_terminal(here: Path) -> None:
    told = subprocess.run(
        COMMAND, cwd=here, input="5\n", capture_output=True, text=True, check=False, timeout=60
    )
    assert (told.returncode, told.stderr) == (0, "")
    assert read_session(here / "new").flute == FluteFacts(name="new", holes=6)


@pytest.mark.skipif(not hasattr(os, "openpty"), reason="this machine has no such terminals")
def test_questions_are_asked_at_a_real_terminal(here: Path) -> None:
    ours, theirs = os.openpty()
    os.write(ours, b"\n5\n\n21,5\n")
    told = subprocess.run(
        COMMAND, cwd=here, stdin=theirs, stderr=theirs, stdout=subprocess.PIPE, check=False, timeout=60
    )
    asked = os.read(ours, 10_000).decode()
    os.close(theirs)
    os.close(ours)
    assert told.returncode == 0
    assert told.stdout.decode() == f"Made {Path('new/flute.toml')} for a flute with 5 holes.\n{NEXT}"
    assert "Finger holes [6]: " in asked
    assert read_session(here / "new").sitting == Sitting(air_temperature_c=21.5)
