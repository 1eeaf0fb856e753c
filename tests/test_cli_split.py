"""`split` at the door: what it shows, asks and writes, its JSON and its words for what goes wrong."""

import json
from importlib.resources import files
from pathlib import Path
from typing import Any

import jsonschema
import pytest
import soundfile
from click.testing import CliRunner, Result
from longs import evening, holes_of, wanted

from fluteprobe.cli import split as splitter
from fluteprobe.cli.main import main
from fluteprobe.session import FluteFacts, create_session

SEED = 5000
RATE_HZ = 16_000
TAKES = len(wanted(holes_of(SEED), "short"))


def run(*arguments: str, **options: Any) -> Result:
    return CliRunner().invoke(main, ["split", *arguments], **options)


@pytest.fixture(scope="module")
def recordings(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a folder with a recording as planned, one that leaves doubts, and one of a word."""
    folder = tmp_path_factory.mktemp("recordings")
    plans: dict[str, list[int | str]] = {
        "evening": ["word", *range(TAKES)], "doubt": [0, 1, 3, 4, 5], "word": ["word"],
    }  # fmt: skip
    for name, plan in plans.items():
        soundfile.write(folder / f"{name}.wav", evening(SEED, plan), RATE_HZ, subtype="PCM_16")
    return folder


@pytest.fixture
def here(tmp_path: Path, recordings: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Return an empty current folder with a session, and with the recordings at hand."""
    monkeypatch.chdir(tmp_path)
    create_session(Path("wren"), FluteFacts(name="Wren", holes=holes_of(SEED)))
    for path in recordings.iterdir():
        Path(path.name).symlink_to(path)
    return tmp_path


def takes() -> list[str]:
    return sorted(path.name for path in Path("wren/takes").iterdir())


def test_it_shows_what_it_would_write_and_writes_nothing_unasked(here: Path) -> None:
    told = run("evening.wav", "wren", "--edition", "short")
    assert told.exit_code == 0
    lines = told.stdout.splitlines()
    assert lines[0].endswith(f"· the short take sheet · {TAKES} takes")
    assert lines[2].split() == ["at", "length", "note", "cents", "take", "remark"]
    assert lines[3].split()[-1] == "xxxxx.flac"
    assert "Left out: 1 voice or other noise" in lines
    assert told.stderr == "Nothing was written: look at the table, then add --yes.\n"
    assert takes() == []


def test_with_yes_it_writes_every_take(here: Path) -> None:
    told = run("evening.wav", "wren", "--edition", "short", "--yes")
    assert told.exit_code == 0
    assert told.stderr == f"Wrote {TAKES} takes into wren/takes\n"
    assert len(takes()) == TAKES
    assert "xxxxx-over.flac" in takes()


@pytest.mark.parametrize(("answer", "count"), [("y\n", TAKES), ("n\n", 0)])
def test_at_a_terminal_it_asks(here: Path, monkeypatch: pytest.MonkeyPatch, answer: str, count: int) -> None:
    monkeypatch.setattr(splitter, "_on_terminal", lambda: True)
    told = run("evening.wav", "wren", "--edition", "short", input=answer)
    assert told.exit_code == 0
    assert f"Write {TAKES} takes into wren/takes? [y/N]" in told.stderr
    assert len(takes()) == count


def test_json_follows_its_schema_and_says_what_was_written(here: Path) -> None:
    schema = json.loads(files("fluteprobe").joinpath("schema/split-1.schema.json").read_text("utf-8"))
    told = run("evening.wav", "wren", "--edition", "short", "--yes", "--json")
    values = json.loads(told.stdout)
    jsonschema.Draft202012Validator(schema).validate(values)
    assert [Path(path).name for path in values["written"]] == [
        sound["file"] for sound in values["sounds"] if sound["file"]
    ]
    assert values["missing"] == values["faults"] == []


def test_an_order_of_one_s_own(here: Path) -> None:
    Path("mine.txt").write_text("xxxxx\nxxxxo\nxxxoo\nxxooo\n", "utf-8")
    told = run("evening.wav", "wren", "--order", "mine.txt", "--json")
    assert json.loads(told.stdout)["order"] == "mine.txt"
    assert told.exit_code == 1  # eleven tones more than that order has


def test_doubts_are_not_agreed_to_by_a_script(here: Path) -> None:
    told = run("doubt.wav", "wren", "--edition", "short", "--yes")
    assert told.exit_code == 1
    assert told.stderr.startswith("Error: not sure of ")
    assert told.stderr.endswith(
        ": run it at a terminal and look, or give the order with --order\nNothing was written.\n"
    )
    assert "unsure: or " in told.stdout
    assert takes() == []


def test_what_cannot_be_brought_together_is_told_and_not_written(here: Path) -> None:
    told = run("word.wav", "wren", "--yes")
    assert told.exit_code == 1
    assert told.stderr == (
        "Error: no steady tone was heard: is it the right recording?\nNothing was written.\n"
    )
    assert takes() == []


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("evening.wav", "robin"), "Error: robin: no such folder; make one with `fluteprobe begin robin`\n"),
        (("none.wav", "wren"), "Error: none.wav: no such file\n"),
        (("wren", "wren"), "Error: wren: a folder, not a recording\n"),
        (("evening.wav", "wren", "--order", "no.txt"),
         "Error: no.txt cannot be read: No such file or directory\n"),
    ],
)  # fmt: skip
def test_what_is_missing_is_one_line(here: Path, arguments: tuple[str, ...], words: str) -> None:
    told = run(*arguments)
    assert (told.exit_code, told.stderr) == (1, words)


def test_takes_that_are_there_are_numbered_on_from(here: Path) -> None:
    for _ in range(2):
        run("evening.wav", "wren", "--edition", "short", "--yes")
    assert len(takes()) == 2 * TAKES
    assert "xxxxx-over-2.flac" in takes()
