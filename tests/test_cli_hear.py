"""`fluteprobe hear --page` at the command line: what is written, where, and what is said."""

from pathlib import Path

import numpy as np
import pytest
import soundfile
from click.testing import CliRunner, Result
from on_page import pdf_text

from fluteprobe.cli.main import main
from fluteprobe.sound import view
from fluteprobe.sound.second import SecondOpinionError

RATE_HZ = 22050


@pytest.fixture
def take(tmp_path: Path) -> Path:
    path = tmp_path / "oxxxxx.wav"
    record(path)
    return path


def record(path: Path) -> None:
    path.parent.mkdir(exist_ok=True)
    time_s = np.arange(RATE_HZ) / RATE_HZ
    hiss = 0.001 * np.random.default_rng(1).standard_normal(RATE_HZ)
    soundfile.write(path, 0.3 * np.cos(2 * np.pi * 620.0 * time_s) + hiss, RATE_HZ)


def run(*words: str | Path) -> Result:
    return CliRunner().invoke(main, ["hear", *map(str, words)])


def test_a_page_is_named_after_its_recording(take: Path, tmp_path: Path) -> None:
    told = run(take, "--page", "--out", tmp_path / "pages")
    assert told.exit_code == 0
    target = tmp_path / "pages" / "oxxxxx.pdf"
    assert told.stderr.endswith(f"Wrote {target}\n")
    assert "620.0" in pdf_text(target)


def test_without_a_wish_pages_go_under_reports(
    take: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    assert run(take.name, "--page").exit_code == 0
    assert (tmp_path / "reports" / "takes" / "oxxxxx.pdf").exists()


def test_without_page_nothing_is_written(take: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    assert run(take).exit_code == 0
    assert [path.name for path in tmp_path.iterdir()] == [take.name]


def test_two_recordings_of_one_name_get_two_pages(take: Path, tmp_path: Path) -> None:
    record(tmp_path / "other" / take.name)
    told = run(take, tmp_path / "other" / take.name, "--page", "--out", tmp_path / "pages")
    assert told.exit_code == 0
    assert sorted(path.name for path in (tmp_path / "pages").iterdir()) == ["oxxxxx.pdf", "oxxxxx_2.pdf"]


def test_a_file_that_is_no_sound_stops_no_other(take: Path, tmp_path: Path) -> None:
    bad = tmp_path / "notes.wav"
    bad.write_text("no sound")
    told = run(bad, take, "--page", "--out", tmp_path / "pages")
    assert told.exit_code == 1
    assert f"Not used: {bad}: " in told.stderr
    assert [path.name for path in (tmp_path / "pages").iterdir()] == ["oxxxxx.pdf"]


def test_json_stays_alone_on_stdout(take: Path, tmp_path: Path) -> None:
    told = run(take, "--json", "--page", "--out", tmp_path)
    assert told.stdout.startswith("{")
    assert told.stdout.endswith("}\n")
    assert "Wrote" in told.stderr


def test_where_librosa_cannot_run_the_page_is_drawn_without_it(
    take: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(*_: object) -> None:
        raise SecondOpinionError("librosa cannot be asked here (cannot cache)")

    monkeypatch.setattr(view, "constant_q", fail)
    told = run(take, "--second-opinion", "--out", tmp_path)
    assert told.exit_code == 0
    assert "the first run compiles, about 15 s" in told.stderr
    assert f"Caution: {take}: librosa cannot be asked here (cannot cache)\n" in told.stderr
    assert "pYIN" not in pdf_text(tmp_path / "oxxxxx.pdf")
