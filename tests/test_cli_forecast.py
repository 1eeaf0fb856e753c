"""`fluteprobe forecast`: what is said, what is written, and how it fails."""

import json
import re
from pathlib import Path

import pytest
from click.testing import CliRunner, Result
from foretelling import SIX_HOLES, first_takes, renamed, survey_of_tube, upper_takes

from fluteprobe.cli.foretold import told
from fluteprobe.cli.main import main
from fluteprobe.forecast import forecast
from fluteprobe.results import write_results
from fluteprobe.survey import Survey

WIDTH = 80


def run(*words: str) -> Result:
    return CliRunner().invoke(main, ["forecast", *words])


@pytest.fixture(scope="module")
def measured(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return written(
        survey_of_tube(SIX_HOLES, [*first_takes(), *upper_takes()]), tmp_path_factory.mktemp("flute")
    )


def written(survey: Survey, folder: Path) -> Path:
    return write_results(survey, folder)[0]


def test_table_file_and_cautions(measured: Path, tmp_path: Path) -> None:
    result = run(str(measured), "--maker", "--out", str(tmp_path))
    assert result.exit_code == 0, result.output
    lines = result.stdout.splitlines()
    assert lines[0] == "Dipper · 6 holes · A4 = 440 Hz · air 21 °C"
    assert "What to try next, best first" in lines
    assert "Foretold from the rest, and played" in lines
    assert "For the maker: estimates in cents, for a small change of one hole" in lines
    assert max(map(len, lines)) <= WIDTH
    assert result.stderr == f"Wrote {tmp_path / 'forecast.json'}\n"
    values = json.loads((tmp_path / "forecast.json").read_text("utf-8"))
    assert values["schema"] == "fluteprobe/forecast/1"
    words = " ".join(result.stdout.split())
    for said in ("Estimates from a fitted tube", "Removed wood does not come back", "Dust of some woods is"):
        assert said in words


def test_json_is_the_file(measured: Path, tmp_path: Path) -> None:
    result = run(str(measured), "--json", "--out", str(tmp_path))
    assert result.stdout == (tmp_path / "forecast.json").read_text("utf-8")


def test_more_is_shown_when_asked_for() -> None:
    foretold = forecast(survey_of_tube(SIX_HOLES, first_takes()))
    brief, long = (told(foretold, show_all=every, maker=False) for every in (False, True))
    assert re.search(r"^  and \d+ more: --all$", brief, re.MULTILINE)
    assert "Will hardly speak" in long
    rows = [line for line in long.splitlines() if re.match(r"  [xohv]{6} ", line)]
    assert len(rows) == len(foretold.predictions)


def test_a_flute_that_does_not_fit(tmp_path: Path) -> None:
    path = written(renamed(survey_of_tube(SIX_HOLES, first_takes()), "xxxooo", "xooooo"), tmp_path / "mixed")
    result = run(str(path), "--out", str(tmp_path))
    assert result.exit_code == 1
    assert result.stdout == ""
    first, second, third = result.stderr.splitlines()[:3]
    assert first == "No forecast: no tube sounds like these takes: see whether their names are right,"
    assert second == "  those below first"
    assert re.fullmatch(
        r"  takes/(xxx|xoo)ooo\.wav: register 1 is \d+ cents (above|below) what all others foretell", third
    )
    assert json.loads((tmp_path / "forecast.json").read_text("utf-8"))["predictions"] == []


def test_no_such_folder(tmp_path: Path) -> None:
    result = run(str(tmp_path / "none"))
    assert result.exit_code == 1
    assert result.stderr.splitlines()[-1] == "Error: no flute could be used"
    assert "Traceback" not in result.stderr
