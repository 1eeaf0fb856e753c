"""The command line: what it prints where, its files, its exit codes and its words for what goes wrong."""

import json
import os
import re
import shlex
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import click
import pytest
from click.testing import CliRunner, Result
from surveys import heron, nothing_heard, one_take, reading, strange_words

from fluteprobe import __version__
from fluteprobe import survey as surveying
from fluteprobe.cli import screen
from fluteprobe.cli.main import main
from fluteprobe.kept import Kept
from fluteprobe.session import FluteFacts, Problem, create_session, read_session
from fluteprobe.sound.recording import RecordingError
from fluteprobe.survey import Survey

COMMANDS = sorted(main.commands)
ON_SOUND = {"forecast", "split"}  # their examples need recordings: the README's tests run them
WIDTH = 80

HEAVY = ("numpy", "scipy", "matplotlib", "librosa", "numba", "soundfile", "soxr")
SAY_HEAVY = f"import sys\nprint([module for module in {HEAVY} if module in sys.modules])"


def run(*arguments: str | Path, **options: Any) -> Result:
    return CliRunner().invoke(main, [str(argument) for argument in arguments], **options)


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Return an empty current folder that holds the sessions `heron` and `bittern` with one take each."""
    monkeypatch.chdir(tmp_path)
    for name in ("heron", "bittern"):
        create_session(Path(name), FluteFacts(name=name.capitalize(), holes=6))
        Path(name, "takes/oxxxxx.wav").write_bytes(b"sound")
    return tmp_path


@pytest.fixture
def measured(monkeypatch: pytest.MonkeyPatch) -> Survey:
    """Let every session measure as one invented flute without problems."""
    survey = replace(heron(), problems=())

    measures_as(survey, monkeypatch)
    return survey


def measures_as(survey: Survey, monkeypatch: pytest.MonkeyPatch) -> None:
    """Let every session that can be read measure as a given survey of three takes."""

    def fake(folder: Path, *, on_take: Callable[[int, int], None], kept: Kept) -> Survey:
        read_session(folder)
        for done in range(1, 4):
            on_take(done, 3)
        return survey

    monkeypatch.setattr(surveying, "measure", fake)


@pytest.fixture
def heard(monkeypatch: pytest.MonkeyPatch) -> None:
    """Let every recording sound D6, except those whose name begins with `bad`."""

    def fake(path: Path, *, a4_hz: float, name: str) -> tuple[surveying.Reading, ...]:
        if path.name.startswith("bad"):
            raise RecordingError("an empty file (0 bytes); copy or record it again")
        tone = reading("oxxxxx", kind="tone", frequency_hz=1170.0)
        return (replace(tone, take=name, fingering=None, breath=None),)

    monkeypatch.setattr(surveying, "hear", fake)


# --- help --------------------------------------------------------------------------------------------


def example_of(name: str | None) -> str:
    """Return the example at the end of a command's help."""
    text = run("--help") if name is None else run(name, "--help")
    found = re.search(r"Example:\n +(fluteprobe .+)\n", text.output)
    assert found, text.output
    return found[1]


@pytest.mark.parametrize("name", COMMANDS)
def test_every_command_has_help_with_an_example_at_its_end(name: str) -> None:
    command = main.commands[name]
    assert command.help
    assert command.help.rstrip().split("\n")[-1].strip() == example_of(name)
    assert command.short_help
    options = [option for option in command.params if isinstance(option, click.Option)]
    assert all(option.help for option in options), name
    result = run(name, "-h")
    assert result.exit_code == 0
    assert max(map(len, result.output.splitlines())) <= WIDTH


@pytest.mark.usefixtures("measured", "heard")
@pytest.mark.parametrize("name", [None, *(name for name in COMMANDS if name not in ON_SOUND)])
def test_every_example_runs(name: str | None, here: Path) -> None:
    words = shlex.split(example_of(name))[1:]
    if words[0] == "begin":
        words[1] = "new"
    result = run(*words)
    assert (result.exit_code, result.exception) == (0, None), result.output


def test_commands_are_listed_in_the_order_of_work() -> None:
    listed = re.findall(r"^  (\w+)  ", run("--help").output.split("Commands:")[1], re.MULTILINE)
    assert listed == [
        "begin", "sheet", "split", "hear", "measure", "chart", "forecast", "compare", "plays", "tuning",
    ]  # fmt: skip


def test_the_version() -> None:
    assert run("--version").output == f"fluteprobe, version {__version__}\n"


@pytest.mark.parametrize("arguments", [["--help"], ["chart", "--help"], ["begin", "new", "--holes", "5"]])
def test_help_and_begin_load_nothing_heavy(arguments: list[str], tmp_path: Path) -> None:
    code = f"from fluteprobe.cli.main import main\nmain({arguments!r}, standalone_mode=False)\n{SAY_HEAVY}"
    assert python(code, tmp_path).stdout.splitlines()[-1] == "[]"


def test_importing_the_package_loads_nothing_heavy(tmp_path: Path) -> None:
    assert python(f"import fluteprobe\n{SAY_HEAVY}", tmp_path).stdout == "[]\n"


def python(code: str, folder: Path, **environment: str) -> "subprocess.CompletedProcess[str]":
    return subprocess.run(
        [sys.executable, "-c", code], cwd=folder, env={**os.environ, **environment}, capture_output=True,
        text=True, encoding="utf-8", check=True, stdin=subprocess.DEVNULL,
    )  # fmt: skip


# --- wrong usage -------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["mesure"], "No such command 'mesure'."),
        (["measure"], "Missing argument 'FOLDER'."),
        (["measure", "a", "--jsn"], "No such option"),
        (["hear"], "Missing argument 'FILE…'."),
        (["hear", "a.wav", "--a4-hz", "300"], "300.0 is not in the range 380.0<=x<=500.0."),
        (["begin", "new", "--holes", "11"], "found 11, expected a whole number from 1 to 10"),
        (["begin", "new", "--temperature", "−70"], "found −70, expected a number from -20 to 50 (°C)"),
        (["chart", "heron", "--format", "pdf,doc"], "'doc' is not one of pdf, png, svg, html."),
        (["chart", "heron", "--paper", "a3"], "'a3' is not one of 'a4', 'letter', 'a6', '4x6'."),
        (["chart", "heron", "--tolerance", "0"], "0.0 is not in the range 0.0<x<=50.0."),
        (["chart", "heron", "--resolution", "2"], "2.0 is not in the range 40.0<=x<=1200.0."),
        (["chart", "heron", "--paper", "a6", "--large"], "--large needs a larger paper than a6"),
    ],
)
def test_wrong_usage_is_exit_code_2(here: Path, arguments: list[str], words: str) -> None:
    result = run(*arguments)
    assert result.exit_code == 2
    assert result.stdout == ""
    assert words in result.stderr
    assert not Path("new").exists()


@pytest.mark.parametrize("command", ["measure", "chart"])
def test_a_missing_folder_is_one_line_with_the_cure(here: Path, command: str) -> None:
    result = run(command, "wren")
    assert result.exit_code == 1
    assert result.output == "Error: wren: no such folder; make one with `fluteprobe begin wren`\n"


@pytest.mark.parametrize("command", ["measure", "chart"])
def test_every_fault_of_flute_toml_is_one_line(here: Path, command: str) -> None:
    Path("heron/flute.toml").write_text("[flute]\nnmae = 'A'\nholes = 'six'\n")
    result = run(command, "heron")
    assert result.exit_code == 1
    file = Path("heron/flute.toml")
    assert result.stderr.splitlines() == [
        f"Error: {file} line 2: key nmae: not known in [flute]; did you mean name?",
        f'Error: {file} line 3: key holes: found "six", expected a whole number from 1 to 10, without quotes',
    ]
    assert result.stdout == ""
    assert not Path("reports").exists()


def test_an_output_that_cannot_be_written_is_one_line(here: Path, measured: Survey) -> None:
    Path("taken").write_text("")
    result = run("measure", "heron", "--out", "taken/deeper")
    assert result.exit_code == 1
    assert result.stderr.splitlines()[-1].startswith("Error: taken")


def test_a_bug_is_a_bug_and_no_error_line(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def broken(folder: Path, *, on_take: Any, kept: Kept) -> Survey:
        raise ZeroDivisionError

    monkeypatch.setattr(surveying, "measure", broken)
    assert isinstance(run("measure", "heron").exception, ZeroDivisionError)


# --- hear --------------------------------------------------------------------------------------------


@pytest.mark.usefixtures("heard")
def test_hear_prints_every_tone_under_its_recording() -> None:
    result = run("hear", "a.wav", "b.wav", "--a4-hz", "442")
    assert result.exit_code == 0
    assert result.stdout == (
        "  steady       register  note        cents       Hz  remarks\n"
        "a.wav\n"
        "  0.30–2.10 s         ?  D6    −6.9 ±  1.5  1170.00\n"
        "b.wav\n"
        "  0.30–2.10 s         ?  D6    −6.9 ±  1.5  1170.00\n"
        "\n"
        "cents: off the note at A4 = 442 Hz, ± standard uncertainty\n"
    )
    assert result.stderr == ""


@pytest.mark.usefixtures("heard")
def test_hear_names_what_it_cannot_use_and_hears_the_rest() -> None:
    result = run("hear", "a.wav", "bad\x1b.wav", "b.wav")
    assert result.exit_code == 1
    assert [line for line in result.stdout.splitlines() if line.endswith(".wav")] == ["a.wav", "b.wav"]
    assert result.stderr == r"Not used: bad\x1b.wav: an empty file (0 bytes); copy or record it again" + "\n"


@pytest.mark.usefixtures("heard")
def test_hear_json_is_the_contract() -> None:
    result = run("hear", "--json", "a.wav", "bad.wav")
    assert result.exit_code == 1
    values = json.loads(result.stdout)
    assert values["schema"] == "fluteprobe/heard/1"
    assert [tone["take"] for tone in values["tones"]] == ["a.wav"]
    assert values["problems"] == [
        {"take": "bad.wav", "message": "an empty file (0 bytes); copy or record it again"}
    ]


def test_hear_of_a_real_missing_file() -> None:
    result = run("hear", "nowhere.wav")
    assert (result.exit_code, result.stderr) == (1, "Not used: nowhere.wav: no such file\n")
    assert result.stdout == "Nothing was heard.\n"


# --- measure -----------------------------------------------------------------------------------------


def test_measure_prints_the_table_and_writes_both_files(here: Path, measured: Survey) -> None:
    result = run("measure", "heron")
    assert result.exit_code == 0
    assert result.stdout == screen.survey_table(measured) + "\n"
    folder = Path("reports/heron")
    assert [line for line in result.stderr.splitlines() if line.startswith("Wrote")] == [
        f"Wrote {folder / 'measurements.json'}", f"Wrote {folder / 'measurements.csv'}",
    ]  # fmt: skip
    assert json.loads((folder / "measurements.json").read_text("utf-8"))["flute"]["name"] == "Heron"


def test_the_reports_folder_is_named_by_the_session_however_it_was_given(
    here: Path, measured: Survey, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir("heron")
    assert run("measure", ".").exit_code == 0
    assert Path("reports/heron/measurements.json").is_file()


def test_measure_out_is_taken_as_it_is(here: Path, measured: Survey) -> None:
    assert run("measure", "heron", "--out", "a/b").exit_code == 0
    assert sorted(path.name for path in Path("a/b").iterdir()) == ["measurements.csv", "measurements.json"]
    assert not Path("reports").exists()


def test_measure_json_prints_what_it_writes(here: Path, measured: Survey) -> None:
    result = run("measure", "heron", "--json")
    assert result.stdout == Path("reports/heron/measurements.json").read_text("utf-8")


def test_measure_with_a_take_that_cannot_be_used_is_exit_code_1(
    here: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    measures_as(heron(), monkeypatch)
    result = run("measure", "heron")
    assert result.exit_code == 1
    assert "Not used: takes/xxxxxx-over-3.wav: the recording is empty: record it again" in result.stderr
    assert "xxxxxx" in result.stdout


@pytest.mark.parametrize("command", ["measure", "chart"])
def test_a_session_without_a_usable_take_is_told(here: Path, command: str) -> None:
    Path("heron/takes/oxxxxx.wav").unlink()
    result = run(command, "heron")
    assert result.exit_code == 1
    assert result.stderr.splitlines() == [
        "Not used: takes: no recordings yet: put them there, as takes/oxxxxx.wav",
        "Error: heron has no take that could be measured",
    ]
    assert not Path("reports").exists()


# --- chart -------------------------------------------------------------------------------------------


def test_chart_prints_the_files_it_wrote(here: Path, measured: Survey) -> None:
    result = run("chart", "heron", "--format", "svg,pdf", "--format", "svg", "--paper", "letter")
    assert result.exit_code == 0, result.output
    names = ["measurements.json", "measurements.csv", "chart.svg", "map.svg", "chart.pdf", "map.pdf"]
    assert result.stdout.splitlines() == [str(Path("reports/heron") / name) for name in names]
    assert sorted(path.name for path in Path("reports/heron").iterdir()) == sorted(names)
    assert Path("reports/heron/chart.pdf").read_bytes().startswith(b"%PDF")


def test_chart_hands_on_what_is_wished(here: Path, measured: Survey, monkeypatch: pytest.MonkeyPatch) -> None:
    asked: list[tuple[Any, ...]] = []

    def fake(survey: Survey, target: Path, **wished: Any) -> tuple[Path, ...]:
        asked.append((survey is measured, target, *wished.values()))
        return (target, target.with_name("more"))

    monkeypatch.setattr("fluteprobe.pages.chart.write_chart", fake)
    monkeypatch.setattr("fluteprobe.pages.map.write_map", fake)
    words = ["--paper", "Letter", "--tolerance", "5", "--resolution", "150", "--out", "out"]
    result = run("chart", "heron", *words)
    assert asked == [
        (True, Path("out/chart.pdf"), "letter", False, 5.0, 150.0, ()),
        (True, Path("out/map.pdf"), "letter", 150.0),
    ]  # fmt: skip
    assert result.stdout.splitlines()[2:] == [
        str(Path("out") / name) for name in ("chart.pdf", "more", "map.pdf", "more")
    ]


def test_cards_and_large_print_get_names_of_their_own(
    here: Path, measured: Survey, monkeypatch: pytest.MonkeyPatch
) -> None:
    asked: list[tuple[str, str, bool]] = []

    def fake(survey: Survey, target: Path, *, paper: str, large: bool, **_: Any) -> tuple[Path, ...]:
        asked.append((target.name, paper, large))
        return (target,)

    monkeypatch.setattr("fluteprobe.pages.chart.write_chart", fake)
    run("chart", "heron", "--paper", "4X6", "--format", "PNG", "--out", "out")
    run("chart", "heron", "--large", "--out", "out")
    assert asked == [("card.png", "4x6", False), ("chart-large.pdf", "a4", True)]


def test_the_web_page_is_made_of_the_session_with_or_without_its_sound(
    here: Path, measured: Survey, monkeypatch: pytest.MonkeyPatch
) -> None:
    asked: list[tuple[Any, ...]] = []

    def fake(survey: Survey, folder: Path, target: Path, **wished: Any) -> tuple[Path, ...]:
        asked.append((survey is measured, folder, target, *wished.values()))
        return (target,)

    monkeypatch.setattr("fluteprobe.pages.web.write_web", fake)
    run("chart", "heron", "--format", "html", "--tolerance", "5", "--out", "out")
    result = run("chart", "heron", "--format", "html", "--no-sound")
    page = Path("reports/heron/chart.html")
    assert asked == [
        (True, Path("heron"), Path("out/chart.html"), 5.0, True), (True, Path("heron"), page, 10.0, False),
    ]  # fmt: skip
    assert result.stdout.splitlines()[-1] == str(page)


# --- the screen --------------------------------------------------------------------------------------


def test_the_table_of_a_survey_word_for_word() -> None:
    survey = heron()
    picked = tuple(e for e in survey.entries if str(e.fingering) in {"xxxxxx", "oxxxxx", "xxxxxo"})
    assert screen.survey_table(replace(survey, entries=picked)) == (
        "Heron · 6 holes · A4 = 440 Hz · air 22 °C\n"
        "\n"
        "fingering  register  note         cents  at 20 °C  stretch   takes  caution\n"
        "xxxxxx            1  A4     −3.2 ±  0.6      −6.6                3\n"
        "xxxxxo            1  C5     +4.1 ±  0.8      +0.7                2\n"
        "xxoooh            ?  F♯5   −16.4 ±  1.5                          1\n"
        "xxxxxx            2  A5    −17.0 ±  2.8     −20.4    −13.8  2 of 4\n"
        "oxxxxx            2  A♯5    +5.2 ±  1.6      +1.8           4 of 5\n"
        "oxoxox            ?  D6    +19.6 ±  1.5                          1\n"
        "\n"
        "cents: off the note as played, ± standard uncertainty; above 0 is sharp\n"
        "at 20 °C: the same carried to that temperature, an estimate\n"
        "\n"
        "Did not speak: xhxxxx (over), ooxxxx (soft), ooxxxx (over)\n"
        "\n"
        "Edge tone: oxxxxh (over)"
    )


@pytest.mark.parametrize("survey", [heron(), one_take(), nothing_heard(), strange_words()])
def test_every_table_fits_80_columns_and_has_no_control_characters(survey: Survey) -> None:
    lines = screen.survey_table(survey).splitlines()
    assert max(map(len, lines)) <= WIDTH
    assert not any(ord(letter) < 0x20 for line in lines for letter in line)


def test_a_flute_that_never_spoke_has_words_instead_of_a_table() -> None:
    assert screen.survey_table(nothing_heard()) == (
        "Wren · 5 holes · A4 = 440 Hz\n\nNo fingering gave a steady tone.\n\nDid not speak: xxxxx (normal)"
    )


def test_cautions_stand_in_brief_in_the_table_and_in_full_on_stderr(
    here: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    plain = one_take()
    entry = plain.entries[0]
    tone = reading("xxxxx", kind="tone", frequency_hz=330.0)
    tone = replace(
        tone,
        take="takes/xxxxx.wav",
        tone=replace(tone.tone, cautions=("clipped: record with less gain",)),
        call=replace(tone.call, register=1),
    )
    survey = replace(
        plain, readings=(tone, reading("xxxxo", kind="tone", frequency_hz=370.0)), entries=(entry,)
    )
    measures_as(survey, monkeypatch)
    result = run("measure", "heron")
    assert "1  clipped\n" in result.stdout
    assert result.stderr.splitlines()[:2] == [
        "Caution: takes/xxxxx.wav, 0.30–2.10 s: clipped: record with less gain",
        "Caution: takes/xxxxo-normal.wav, 0.30–2.10 s: register undecided (1 40 %, 2 50 %, 3 10 %)",
    ]


def test_what_many_takes_share_of_the_room_is_said_once(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """As of the first take, on stderr; in the table only what is a take's own."""
    plain = one_take()
    hum = "mains hum (50 Hz): {} dB under the tone; move away from lamps and chargers"
    tones = []
    for k, name in enumerate(("xxxxxx", "xxxxxo", "xxxxoo", "xxxooo")):
        tone = reading(name, kind="tone", frequency_hz=330.0)
        own = (hum.format(20 + k), "clipped: record with less gain")
        tones.append(
            replace(tone, tone=replace(tone.tone, cautions=own), call=replace(tone.call, register=1))
        )
    measures_as(replace(plain, readings=tuple(tones)), monkeypatch)
    told = run("measure", "heron").stderr.splitlines()
    assert told[0] == f"Caution: 4 takes: {hum.format(20)}"
    assert sum("mains hum" in line for line in told) == 1
    assert sum("clipped" in line for line in told) == 4


def test_an_uncertainty_is_never_shown_as_nought_nor_a_deviation_as_minus_nought() -> None:
    plain = one_take()
    entry = replace(plain.entries[0], cents=-0.04, uncertainty_cents=0.002)
    assert "+0.0 ±  0.1" in screen.survey_table(replace(plain, entries=(entry,)))


def test_a_terminal_without_music_signs_gets_plain_ones(tmp_path: Path) -> None:
    code = "from fluteprobe.cli import screen\nscreen.say('A♯5 −3.2 ± 0.6')"
    assert python(code, tmp_path, PYTHONIOENCODING="ascii").stdout == "A#5 -3.2 +/- 0.6\n"


@pytest.mark.parametrize("on_terminal", [True, False])
@pytest.mark.parametrize("seconds", [0.0, 2.0])
def test_a_bar_is_shown_on_a_terminal_when_work_lasts_over_a_second(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], *, on_terminal: bool, seconds: float
) -> None:
    clock = iter([0.0, *[seconds] * 10])
    monkeypatch.setattr("time.monotonic", lambda: next(clock))
    monkeypatch.setattr(sys.stderr, "isatty", lambda: on_terminal)
    with screen.progress("Listening") as on_take:
        for done in range(1, 5):
            on_take(done, 4)
    shown = capsys.readouterr()
    assert shown.out == ""
    assert ("Listening" in shown.err and "100%" in shown.err) == (on_terminal and seconds > 1.0)


@pytest.mark.usefixtures("here")
def test_no_output_has_colour(measured: Survey) -> None:
    for arguments in (["--help"], ["measure", "heron"], ["measure", "none"], ["mesure"]):
        assert "\x1b[" not in run(*arguments, color=True).output


# --- for real ----------------------------------------------------------------------------------------


def test_a_problem_of_the_session_leaves_all_other_takes_measured(here: Path) -> None:
    import numpy as np
    import soundfile

    rate = 22050
    time = np.arange(rate) / rate
    fade = np.minimum(1.0, np.minimum(time, 1.0 - time) / 0.05)
    for name, frequency_hz in {"xxxxxx": 440.0, "xxxxxo": 494.0}.items():
        sound = np.pad(0.3 * fade * np.sin(2 * np.pi * frequency_hz * time), 4000)
        noise = 1e-3 * np.random.default_rng(1).standard_normal(len(sound))
        soundfile.write(f"heron/takes/{name}.flac", sound + noise, rate)
    Path("heron/takes/xxxxx.wav").write_bytes(b"")
    Path("heron/takes/hello.wav").write_bytes(b"")
    result = subprocess.run(
        [sys.executable, "-c", "from fluteprobe.cli.main import main; main()", "measure", "heron", "--json"],
        capture_output=True, text=True, encoding="utf-8", check=False, stdin=subprocess.DEVNULL,
    )  # fmt: skip
    assert result.returncode == 1
    told = [line for line in result.stderr.splitlines() if line.startswith("Not used: ")]
    assert [line.split(": ")[1] for line in told] == [
        "takes/hello.wav",
        "takes/xxxxx.wav",
        "takes/oxxxxx.wav",
    ]
    values = json.loads(result.stdout)
    # 0.1 cent: a tone at a signal-to-noise ratio of 47 dB over 0.9 s is read far closer than that
    pitches = {entry["fingering"]: entry["frequency_hz"] for entry in values["entries"]}
    assert pitches["xxxxxx"] == pytest.approx(440.0, rel=6e-5)
    assert {problem["take"] for problem in values["problems"]} == {line.split(": ")[1] for line in told}


def test_problems_may_hold_anything() -> None:
    result = CliRunner().isolation()
    with result as (out, err, _):
        screen.tell_problems([Problem(take="a\x07\ud800", message="b\nc")])
        assert err.getvalue() == b"Not used: a\\x07\\ud800: b\\nc\n"
        assert out.getvalue() == b""
