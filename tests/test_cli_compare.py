"""`fluteprobe compare` as people use it: what it prints, writes and refuses."""

import json
from pathlib import Path

import numpy as np
import pytest
import soundfile
from classes import KEYS, flute
from click.testing import CliRunner, Result

from fluteprobe.cli.main import main
from fluteprobe.results import write_results

ROWS = len(KEYS)


def run(*words: str) -> Result:
    return CliRunner().invoke(main, ["compare", *words])


@pytest.fixture
def flutes(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Return a folder, the current one, with the measurements of three flutes in folders of their own."""
    monkeypatch.chdir(tmp_path)
    for k, name in enumerate(("Wren", "Coot", "Rail")):
        off = [4.0 * k] * (ROWS - k)
        write_results(flute(name, off, air_temperature_c=20.0), tmp_path / name.lower())
    return tmp_path


def test_two_flutes_are_told_with_their_differences(flutes: Path) -> None:
    told = run("wren", "coot/measurements.json")
    assert told.exit_code == 0, told.output
    lines = told.stdout.splitlines()
    assert lines[0] == "2 flutes by fingering · A4 = 440 Hz · air 20 °C"
    assert "1  Wren  6 holes  air 20 °C" in lines
    row = next(line for line in lines if line.startswith("xxxxxx "))
    assert row.split() == ["xxxxxx", "1", "G4", "+0.0", "+4.0", "−4.0", "±", "1.4", "+0.0", "±", "1.3", "0.9"]
    assert "As a whole 1 is flatter than 2 by 4.0 ± 0.5 cents: different" in lines
    assert max(map(len, lines)) <= 80


def test_several_flutes_have_a_column_each(flutes: Path) -> None:
    told = run("wren", "coot", "rail")
    assert told.exit_code == 0, told.output
    assert "fingering  register  note     1     2     3  spread  beats" in told.stdout
    assert "Every flute plays: G4, A4, B4, C5, D5, E5, F♯5, G♯5" in told.stdout
    assert "Hz suits all shared notes best" in told.stdout


def test_files_are_written_and_named(flutes: Path) -> None:
    told = run("wren", "coot", "--sheets", "--out", "both")
    assert [line for line in told.stderr.splitlines() if line.startswith("Wrote")] == [
        "Wrote both/comparison.json", "Wrote both/comparison.csv", "Wrote both/comparison.pdf",
        "Wrote both/students.pdf",
    ]  # fmt: skip
    assert (flutes / "both" / "students.pdf").read_bytes().startswith(b"%PDF")


def test_json_is_printed_and_written_alike(flutes: Path) -> None:
    told = run("wren", "coot", "--json")
    assert told.exit_code == 0
    assert told.stdout == (flutes / "reports" / "comparison" / "comparison.json").read_text("utf-8")
    assert json.loads(told.stdout)["schema"] == "fluteprobe/comparison/1"


def test_by_note_and_at_another_a4(flutes: Path) -> None:
    told = json.loads(run("wren", "coot", "--json", "--by", "note", "--a4-hz", "442").stdout)
    assert (told["by"], told["a4_hz"]) == ("note", 442.0)
    assert [row["by"] for row in told["rows"]][:2] == ["G4", "A4"]


def test_what_cannot_be_used_is_named_and_the_rest_compared(flutes: Path) -> None:
    (flutes / "bad.json").write_text("{", "utf-8")
    told = run("wren", "coot", "bad.json", "nosuch", "wren/../wren")
    assert told.exit_code == 1
    assert told.stdout.startswith("2 flutes by fingering")
    assert [line for line in told.stderr.splitlines() if line.startswith("Not used")] == [
        "Not used: bad.json is no JSON: measure the flute again",
        "Not used: nosuch: no such folder; make one with `fluteprobe begin nosuch`",
        "Not used: wren/../wren is given twice: it is compared once",
    ]


def test_one_that_is_left_is_no_comparison(flutes: Path) -> None:
    told = run("wren", "nosuch")
    assert told.exit_code == 1
    assert told.stderr.splitlines()[-1] == "Error: 1 of 2 could be used: give two or more"
    assert not (flutes / "reports").exists()


def test_one_path_is_wrong_usage(flutes: Path) -> None:
    told = run("wren")
    assert told.exit_code == 2
    assert told.stderr.splitlines()[-1] == "Error: a comparison takes two folders or files, or more."


def test_a_session_folder_is_measured(flutes: Path) -> None:
    takes = flutes / "plover" / "takes"
    takes.mkdir(parents=True)
    (takes.parent / "flute.toml").write_text('[flute]\nname = "Plover"\nholes = 6\n', "utf-8")
    time_s = np.arange(2 * 16000) / 16000
    for word, hz in (("xxxxxx", 392.0), ("xxxxxo", 440.0), ("xxxxoo", 493.9)):
        noise = 0.003 * np.random.default_rng(1).normal(size=len(time_s))
        soundfile.write(takes / f"{word}.wav", 0.3 * np.sin(2 * np.pi * hz * time_s) + noise, 16000)
    soundfile.write(takes / "xxxooo.wav", np.zeros(0), 16000)
    told = run("wren", "plover")
    assert told.exit_code == 1
    assert "2  Plover" in told.stdout
    assert "Not used: plover: takes/xxxooo.wav: " in told.stderr
    assert "Caution: no air temperature is given for Plover: " in told.stderr


def test_a_reports_folder_that_cannot_be_written_is_told(flutes: Path) -> None:
    (flutes / "taken").write_text("", "utf-8")
    told = run("wren", "coot", "--out", "taken")
    assert told.exit_code == 1
    assert told.stderr.splitlines()[-1].startswith("Error: taken: ")
