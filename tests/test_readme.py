"""The README and each command's help tell the truth: what they show runs, and prints what they show.

A ```console block holds commands after `$ ` and, below them, what they print; numbers in it may differ, for
another machine rounds another way. All blocks run in order in one folder that holds a copy of `samples/`.
"""

import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest
import soundfile

from fluteprobe.cli.main import main

TOP = Path(__file__).parent.parent
README = (TOP / "README.md").read_text("utf-8")
DEMO = TOP / "samples" / "heron"
COMMANDS = list(main.commands)

_BLOCK = re.compile(r"^```(\w+)\n(.*?)^```$", re.MULTILINE | re.DOTALL)
_LINK = re.compile(r"\]\((?!https?:)([^)#]+)\)")
_NUMBER = re.compile(r"[+−-]?\d+(\.\d+)?")

Example = tuple[str, list[str]]


def blocks(language: str) -> list[str]:
    return [text for kind, text in _BLOCK.findall(README) if kind == language]


def examples(console: str) -> list[Example]:
    """Return (command, lines shown below it) for every command in a block."""
    found: list[Example] = []
    for line in console.splitlines():
        if line.startswith("$ "):
            found.append((line[2:], []))
        else:
            found[-1][1].append(line)
    return found


def run(command: str, folder: Path) -> subprocess.CompletedProcess[str]:
    path = os.pathsep.join([str(Path(sys.executable).parent), os.environ["PATH"]])
    surroundings = {**os.environ, "PATH": path, "PYTHONIOENCODING": "utf-8", "LC_ALL": "C.UTF-8"}
    return subprocess.run(
        ["bash", "-c", command], cwd=folder, env=surroundings, capture_output=True, text=True, check=False
    )


def without_numbers(text: str) -> list[str]:
    return [re.sub(r"\s+", " ", _NUMBER.sub("0", line)).strip() for line in text.splitlines()]


# README ------------------------------------------------------------------------------------------------


def test_every_example_runs_and_prints_what_is_shown(tmp_path: Path) -> None:
    shutil.copytree(TOP / "samples", tmp_path / "samples")
    for command, shown in (example for block in blocks("console") for example in examples(block)):
        told = run(command, tmp_path)
        assert told.returncode == 0, f"{command}\n{told.stderr}"
        printed = without_numbers(told.stdout)
        assert [line for line in without_numbers("\n".join(shown)) if line not in printed] == [], command


def test_the_notebook_s_calls_run(tmp_path: Path) -> None:
    shutil.copytree(TOP / "samples", tmp_path / "samples")
    (block,) = blocks("python")
    (tmp_path / "notebook.py").write_text(block, "utf-8")
    told = run("python notebook.py", tmp_path)
    assert told.returncode == 0, told.stderr
    assert len(told.stdout.splitlines()) > 6  # a line for each rung of the ladder at least


def test_every_command_is_shown() -> None:
    shown = {command.split()[1] for block in blocks("console") for command, _ in examples(block)}
    assert set(COMMANDS) <= shown


def test_the_two_commands_that_set_themselves_up_are_single_lines() -> None:
    first, second = blocks("sh")
    assert first.strip().endswith(" && .venv/bin/fluteprobe chart samples/heron")
    assert " && .venv/bin/pytest" in second
    assert [block.count("\n") for block in (first, second)] == [1, 1]
    assert [block.startswith("python3 -m venv .venv && ") for block in (first, second)] == [True, True]


def test_the_script_that_decides_finds_the_test_command() -> None:
    # The same sed and grep as in .ci/run.
    find = r"sed -n '/<!-- tests -->/,/^```$/p' README.md | grep -E '^python3 '"
    assert run(find, TOP).stdout == blocks("sh")[1]


@pytest.mark.parametrize("document", ["README.md", "DEVELOPERS.md"])
def test_every_link_leads_to_a_file(document: str) -> None:
    links = _LINK.findall((TOP / document).read_text("utf-8"))
    assert [link for link in links if not (TOP / link).exists()] == []


# Help --------------------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def help_folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a folder with a session called heron, its takes as WAV, and what else the examples need."""
    folder = tmp_path_factory.mktemp("help")
    takes = folder / "heron" / "takes"
    takes.mkdir(parents=True)
    shutil.copy(DEMO / "flute.toml", folder / "heron")
    for path in sorted((DEMO / "takes").iterdir()):
        samples, rate_hz = soundfile.read(path)
        soundfile.write(takes / f"{path.stem}.wav", samples, rate_hz)
    if not (takes / "oxxxxx.wav").exists():
        shutil.copy(next(takes.glob("oxxxxx*.wav")), takes / "oxxxxx.wav")
    shutil.copy(TOP / "samples" / "evening.flac", folder / "evening.flac")
    shutil.copytree(TOP / "reports" / "bittern", folder / "bittern", ignore=shutil.ignore_patterns("*.p*"))
    return folder


@pytest.mark.parametrize(
    "words", [[], *([name] for name in COMMANDS)], ids=lambda words: " ".join(words) or "all"
)
def test_help_ends_in_an_example_that_runs(words: list[str], help_folder: Path, tmp_path: Path) -> None:
    told = run(" ".join(["fluteprobe", *words, "--help"]), tmp_path)
    _, _, below = told.stdout.partition("Example:\n")
    commands = [line.strip() for line in below.partition("\n\n")[0].splitlines()]
    assert commands, told.stdout
    for command in commands:
        makes_it = command.split()[1] == "begin"
        ran = run(command, tmp_path if makes_it else help_folder)
        assert ran.returncode == 0, f"{command}\n{ran.stderr}"


@pytest.mark.parametrize("name", COMMANDS)
def test_every_option_has_help(name: str) -> None:
    options = [p for p in main.commands[name].params if p.param_type_name == "option"]
    silent = [option.name for option in options if not getattr(option, "help", None)]
    assert silent == []
