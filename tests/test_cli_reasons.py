"""`measure --explain`: the reasons in words, and a take that is not there."""

from pathlib import Path

from click.testing import CliRunner

from fluteprobe.cli.main import main

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
