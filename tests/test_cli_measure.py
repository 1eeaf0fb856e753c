"""`measure` and `chart`: what a second run does, each take's page, and faults of the disk.

There is no outside source here. The full disk and the read-only one are small disks in memory, where the
machine lets us make them; a limit on the size of files stands in for them elsewhere.
"""

import json
import os
import shutil
import subprocess
import sys
from collections.abc import Iterator
from contextlib import suppress
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result
from on_page import pdf_text
from short_takes import short_session

from fluteprobe import hearing
from fluteprobe.cli.main import main

TAKES = ("xxxxxx", "xxxxxo", "xxxxoo", "oxxxxx-over")
OUTPUTS = ("measurements.json", "measurements.csv")

posix_only = pytest.mark.skipif(sys.platform == "win32", reason="permissions and limits are POSIX here")


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Return the current folder, with the session `heron` in it, four real takes cut short."""
    monkeypatch.chdir(tmp_path)
    short_session(tmp_path / "heron", TAKES)
    return tmp_path


def run(*words: str | Path) -> Result:
    return CliRunner().invoke(main, [str(word) for word in words])


def process(*words: str | Path, before: str = "") -> "subprocess.Popen[str]":
    """Start a command in a process of its own, after some Python code."""
    code = f"{before}\nfrom fluteprobe.cli.main import main; main()"
    return subprocess.Popen(
        [sys.executable, "-c", code, *words], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
        encoding="utf-8", stdin=subprocess.DEVNULL,
    )  # fmt: skip


def contents(folder: Path) -> dict[str, bytes]:
    return {name: (folder / name).read_bytes() for name in OUTPUTS}


# --- a second run ------------------------------------------------------------------------------------


def test_a_second_run_says_the_same_and_hears_nothing(here: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    first = run("measure", "heron", "--json")
    assert first.exit_code == 0, first.output
    written = contents(here / "reports" / "heron")
    monkeypatch.setattr(hearing, "hear_recording", None)  # whoever listens now fails
    assert run("measure", "heron", "--json").stdout == first.stdout
    assert contents(here / "reports" / "heron") == written
    assert run("chart", "heron", "--format", "svg").exit_code == 0
    assert isinstance(run("measure", "heron", "--anew").exception, TypeError)


def test_what_was_kept_and_damaged_is_heard_anew_in_silence_and_strays_are_swept(here: Path) -> None:
    first = run("measure", "heron")
    out = here / "reports" / "heron"
    kept = list((out / ".kept").iterdir())
    for path in kept:
        path.write_bytes(path.read_bytes()[:-40])
    strays = [out / ".chart.pdf.0123abcd.fluteprobe.tmp", out / ".kept" / ".a.json.0123abcd.fluteprobe.tmp"]
    for path in strays:
        path.write_bytes(b"half")
    again = run("measure", "heron")
    assert (again.exit_code, again.stdout, again.stderr) == (0, first.stdout, first.stderr)
    assert set((out / ".kept").iterdir()) == set(kept)
    assert {path.name for path in out.iterdir()} == {*OUTPUTS, ".kept"}


def test_a_place_that_cannot_keep_anything_is_no_fault(here: Path) -> None:
    out = here / "reports" / "heron"
    out.mkdir(parents=True)
    (out / ".kept").write_text("a file of this name is in the way")
    told = run("measure", "heron")
    assert (told.exit_code, "kept" in told.stderr) == (0, False)


def test_every_take_s_page_shows_the_flute_s_own_evidence(here: Path) -> None:
    told = run("measure", "heron", "--pages", "--paper", "letter")
    assert told.exit_code == 0, told.stderr
    pages = here / "reports" / "heron" / "takes"
    assert sorted(path.stem for path in pages.iterdir()) == sorted(TAKES)
    assert "Wrote " + str(Path("reports/heron/takes/oxxxxx-over.pdf")) in told.stderr
    words = pdf_text(pages / "oxxxxx-over.pdf")
    assert "Acoustic model" in words  # what one recording alone, without the flute, cannot tell


# --- faults of the disk ------------------------------------------------------------------------------

LIMITED = (
    "import resource, signal\n"
    "signal.signal(signal.SIGXFSZ, signal.SIG_IGN)\n"
    "resource.setrlimit(resource.RLIMIT_FSIZE, (4096, 4096))"
)


@pytest.fixture
def disk(tmp_path: Path) -> Iterator[Path]:
    """Return a small disk of its own, in memory."""
    folder = tmp_path / "disk"
    folder.mkdir()
    mount = ["mount", "-t", "tmpfs", "-o", "size=256k", "none", str(folder)]
    if not shutil.which("mount") or subprocess.run(mount, capture_output=True, check=False).returncode:
        pytest.skip("this machine lets us make no small disk")
    yield folder
    subprocess.run(["umount", str(folder)], check=True)


def fill(disk: Path) -> None:
    """Leave no room on a disk."""
    with (disk / "ballast").open("wb", buffering=0) as file, suppress(OSError):
        while True:
            file.write(bytes(1024))


def measured_before(here: Path, out: Path) -> dict[str, bytes]:
    """Measure, and let the next run write something else; return what stands there now."""
    assert run("measure", "heron", "--out", str(out)).exit_code == 0
    facts = here / "heron" / "flute.toml"
    facts.write_text(facts.read_text("utf-8").replace("Heron", "Egret"), "utf-8")
    return contents(out)


def check_one_line(exit_code: int, said: str, out: Path, words: str) -> None:
    """Check that a run ended in one line with the file's name, and left nothing half-written."""
    assert exit_code == 1
    errors = [line for line in said.splitlines() if not line.startswith("Caution: ")]
    assert errors == [f"Error: {out / 'measurements.json'}: {words}"]
    assert not [path for path in out.rglob("*") if path.suffix == ".tmp"]


@posix_only
@pytest.mark.parametrize("command", [["measure"], ["chart", "--format", "svg"]])
def test_a_full_disk_is_one_line_and_the_old_files_stay(here: Path, disk: Path, command: list[str]) -> None:
    old = measured_before(here, disk)
    fill(disk)
    told = run(*command, "heron", "--anew", "--out", str(disk))
    check_one_line(told.exit_code, told.stderr, disk, "the disk is full: make room, then run it again")
    assert contents(disk) == old


@posix_only
def test_a_limit_on_files_is_one_line_and_the_old_files_stay(here: Path) -> None:
    out = here / "out"
    old = measured_before(here, out)
    limited = process("measure", "heron", "--out", out, before=LIMITED)
    _, said = limited.communicate()
    check_one_line(limited.returncode, said, out, "files may not grow so large here: choose another folder")
    assert contents(out) == old


@posix_only
def test_a_read_only_disk_is_one_line_and_the_old_files_stay(here: Path, disk: Path) -> None:
    old = measured_before(here, disk)
    subprocess.run(["mount", "-o", "remount,ro", str(disk)], check=True)
    told = run("measure", "heron", "--anew", "--out", str(disk))
    check_one_line(told.exit_code, told.stderr, disk, "the disk is read-only: choose another folder")
    assert contents(disk) == old


@posix_only
@pytest.mark.skipif(sys.platform != "win32" and os.geteuid() == 0, reason="to root everything is permitted")
def test_a_folder_that_may_not_be_written_is_one_line(here: Path) -> None:
    out = here / "out"
    old = measured_before(here, out)
    out.chmod(0o555)
    told = run("measure", "heron", "--anew", "--out", str(out))
    out.chmod(0o755)
    check_one_line(told.exit_code, told.stderr, out, "there is no permission to write: choose another folder")
    assert contents(out) == old


@posix_only
def test_a_folder_that_is_taken_away_meanwhile_is_one_line(
    here: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    assert run("measure", "heron").exit_code == 0
    old = contents(here / "reports" / "heron")
    real = hearing.hear_recording

    def hear(path: Path) -> Any:
        with suppress(OSError):
            Path("heron").rename("removed")
        return real(path)

    monkeypatch.setattr(hearing, "hear_recording", hear)
    told = run("measure", "heron", "--anew")
    assert told.exit_code == 1
    (line,) = told.stderr.splitlines()
    assert line.startswith("Error: heron/takes/")
    assert line.endswith(" gone while it was heard; was a drive removed?")
    assert contents(here / "reports" / "heron") == old


def test_two_runs_at_once_do_no_harm(here: Path) -> None:
    alone = run("measure", "heron", "--out", "alone", "--json").stdout
    both = [process("measure", "heron", "--json") for _ in range(2)]
    assert [each.communicate()[0] for each in both] == [alone, alone]
    assert [each.returncode for each in both] == [0, 0]
    out = here / "reports" / "heron"
    assert contents(out) == contents(here / "alone")
    assert json.loads((out / "measurements.json").read_bytes())["flute"]["name"] == "Heron"
    assert {path.name for path in out.iterdir()} == {*OUTPUTS, ".kept"}
    assert len(list((out / ".kept").iterdir())) == len(TAKES)
