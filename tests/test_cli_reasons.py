"""`measure --explain`: the reasons in words, and a take that is not there."""

from dataclasses import replace
from pathlib import Path

import click
import pytest
from click.testing import CliRunner
from surveys import reading

from fluteprobe.cli.main import main
from fluteprobe.cli.reasons import explained

LOW = reading("oxxxxx", kind="tone", frequency_hz=450.0)
HIGH = reading("oxxxxx", breath="over", kind="tone", frequency_hz=900.0)
HERON = Path(__file__).parent.parent / "samples" / "heron"


def test_the_reasons_of_a_take_are_told_strongest_first(tmp_path: Path) -> None:
    result = CliRunner().invoke(main, ["measure", str(HERON), "--out", str(tmp_path), "--explain", "vxxxxx"])
    told = result.stdout.split("takes/vxxxxx.flac, ")[1].splitlines()
    assert "register 2" in told[0]
    reasons = [line for line in told[1:] if line.startswith("  for ")]
    assert reasons[0].startswith("  for 2, ")
    assert "acoustic model: the tube of the given dimensions" in reasons[0]
    assert any("breath resonances: the breath noise has a bump at 0.6" in line for line in reasons)


def test_a_take_that_is_not_there_names_the_nearest(tmp_path: Path) -> None:
    result = CliRunner().invoke(main, ["measure", str(HERON), "--out", str(tmp_path), "--explain", "vxxxxy"])
    assert result.exit_code == 2
    assert "no take is called vxxxxy; the nearest is vxxxxx" in result.output


@pytest.mark.parametrize(
    ("file", "asked"),
    [
        ("takes/New Recording 12.m4a", "oxxxxx-over"),
        ("takes/New Recording 12.m4a", "New Recording 12"),
        ("takes/OXXXXX overblown (2).wav", "oxxxxx-over-2"),
        ("takes/OXXXXX overblown (2).wav", "OXXXXX_OVER"),
        ("raw/oxxxxx_over.wav", "oxxxxx-over.wav"),
    ],
)
def test_a_take_is_found_by_its_fingering_whatever_its_file_is_called(file: str, asked: str) -> None:
    told = explained([LOW, replace(HIGH, take=file)], asked)
    assert told == f"{file}, 0.30–2.10 s, 900.00 Hz: undecided (1 40.0 %, 2 50.0 %, 3 10.0 %)"


@pytest.mark.parametrize("asked", ["oxxxxx-over-7", "oxxxxx-soft", "", "\x1b[2J"])
def test_another_number_or_breath_is_another_take(asked: str) -> None:
    with pytest.raises(click.BadParameter, match=r"^no take is called .*; the nearest is oxxxxx"):
        explained([replace(HIGH, take="takes/oxxxxx over.wav")], asked)
    with pytest.raises(click.BadParameter, match=r"^no take is called .*, for nothing was heard in any$"):
        explained([], asked)
