"""Files written as a whole or not at all: what is left when that fails or is cut short, and the words for it.

There is no outside source here. Locks are the operating system's; a program that is killed really is.
"""

import errno
import os
import subprocess
import sys
from pathlib import Path

import pytest

from fluteprobe import files
from fluteprobe.files import (
    make_folder,
    open_ordinary,
    read_whole,
    replace_file,
    replace_files,
    sweep_passing,
)

posix_only = pytest.mark.skipif(sys.platform == "win32", reason="files cannot be locked here")


def passing(folder: Path) -> list[Path]:
    return [path for path in folder.iterdir() if path.name.endswith(".fluteprobe.tmp")]


def leave_behind(folder: Path, name: str = "chart.pdf") -> Path:
    """Leave what a killed program leaves: half a passing file that nobody has open."""
    stray = folder / f".{name}.0123abcd.fluteprobe.tmp"
    stray.write_bytes(b"half")
    return stray


# --- writing -------------------------------------------------------------------------------------------


def test_a_file_is_written_and_replaced_and_nothing_else_is_left(tmp_path: Path) -> None:
    target = tmp_path / "a.json"
    for content in (b"old", b"new"):
        replace_file(target, content)
        assert target.read_bytes() == content
    assert list(tmp_path.iterdir()) == [target]


def test_where_one_of_two_cannot_be_written_both_old_ones_stay(tmp_path: Path) -> None:
    first, second = tmp_path / "a.json", tmp_path / "gone" / "b.csv"
    first.write_bytes(b"old")
    with pytest.raises(FileNotFoundError) as caught:
        replace_files({first: b"new", second: b"new"})
    assert caught.value.filename == str(second)
    assert first.read_bytes() == b"old"
    assert list(tmp_path.iterdir()) == [first]


@pytest.mark.parametrize(
    ("number", "words"),
    [
        (errno.ENOSPC, "the disk is full: make room, then run it again"),
        (errno.EDQUOT, "your share of the disk is full: make room, then run it again"),
        (errno.EROFS, "the disk is read-only: choose another folder"),
        (errno.EIO, "the drive does not answer: was it removed?"),
        (errno.EBUSY, "busy, busy"),
    ],
)
def test_what_goes_wrong_is_said_in_plain_words_with_the_file_s_own_name(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, number: int, words: str
) -> None:
    def fail(descriptor: int) -> None:
        raise OSError(number, "busy, busy")

    monkeypatch.setattr("os.fsync", fail)
    target = tmp_path / "a.json"
    target.write_bytes(b"old")
    with pytest.raises(OSError, match=words) as caught:
        replace_file(target, b"new")
    assert (caught.value.errno, caught.value.strerror, caught.value.filename) == (number, words, str(target))
    assert (target.read_bytes(), list(tmp_path.iterdir())) == (b"old", [target])


def test_a_folder_in_the_way_is_named(tmp_path: Path) -> None:
    (tmp_path / "a.json").mkdir()
    with pytest.raises(OSError, match="a folder of that name is in the way: choose another folder"):
        replace_file(tmp_path / "a.json", b"new")
    assert passing(tmp_path) == []


def test_a_folder_that_cannot_be_made_is_named(tmp_path: Path) -> None:
    (tmp_path / "file").write_bytes(b"")
    with pytest.raises(OSError, match="a part of its path is a file: choose another folder") as caught:
        make_folder(tmp_path / "file" / "deeper")
    assert caught.value.filename == str(tmp_path / "file" / "deeper")
    with pytest.raises(OSError, match="a file is in the way: choose another folder"):
        make_folder(tmp_path / "file")
    make_folder(tmp_path / "a" / "b")
    make_folder(tmp_path / "a" / "b")


@posix_only
def test_a_file_that_may_not_grow_leaves_the_old_one(tmp_path: Path) -> None:
    target = tmp_path / "a.json"
    target.write_bytes(b"old")
    code = (
        "import resource, pathlib, sys\n"
        "from fluteprobe.files import replace_file\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (1000, 1000))\n"
        "try:\n    replace_file(pathlib.Path(sys.argv[1]), bytes(5000))\n"
        "except OSError as error:\n    print(error.strerror)\n"
    )
    told = subprocess.run(
        [sys.executable, "-c", code, str(target)], capture_output=True, text=True, check=True
    )
    assert told.stdout == "files may not grow so large here: choose another folder\n"
    assert (target.read_bytes(), list(tmp_path.iterdir())) == (b"old", [target])


# --- sweeping ------------------------------------------------------------------------------------------


def test_what_a_killed_run_left_is_swept_and_nothing_else(tmp_path: Path) -> None:
    others = [tmp_path / name for name in (".a.tmp", ".b.0123abcd.tmp", "c.fluteprobe.tmp", "d.json")]
    for path in others:
        path.write_bytes(b"not ours to remove")
    leave_behind(tmp_path)
    sweep_passing(tmp_path)
    assert sorted(tmp_path.iterdir()) == sorted(others)
    sweep_passing(tmp_path / "no such folder")


WRITES_SLOWLY = """
import os, pathlib, signal, sys
from fluteprobe.files import replace_file
def wait(descriptor):
    print("begun", flush=True)
    signal.pause()
os.fsync = wait
replace_file(pathlib.Path(sys.argv[1]), b"new")
"""


@posix_only
def test_what_a_run_still_writes_is_left_until_that_run_is_killed(tmp_path: Path) -> None:
    command = [sys.executable, "-c", WRITES_SLOWLY, str(tmp_path / "a.json")]
    with subprocess.Popen(command, stdout=subprocess.PIPE) as process:
        assert process.stdout is not None
        assert process.stdout.readline() == b"begun\n"
        assert len(passing(tmp_path)) == 1
        sweep_passing(tmp_path)
        assert len(passing(tmp_path)) == 1
        process.kill()
    sweep_passing(tmp_path)
    assert list(tmp_path.iterdir()) == []


@posix_only
def test_a_sweep_between_opening_and_locking_costs_a_second_try(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    lock = files._lock
    waits: list[bool] = []

    def swept_first(file: object, *, wait: bool) -> None:
        if wait and not waits:
            waits.append(wait)
            for path in passing(tmp_path):
                path.unlink()
        lock(file, wait=wait)  # type: ignore[arg-type]

    monkeypatch.setattr(files, "_lock", swept_first)
    replace_file(tmp_path / "a.json", b"new")
    assert (tmp_path / "a.json").read_bytes() == b"new"
    assert waits == [True]


def test_where_files_cannot_be_locked_a_passing_file_is_left_for_a_day(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(files, "fcntl", None)
    fresh, old = leave_behind(tmp_path, "fresh"), leave_behind(tmp_path, "old")
    os.utime(old, (1.0, 1.0))
    sweep_passing(tmp_path)
    assert list(tmp_path.iterdir()) == [fresh]
    replace_file(tmp_path / "a.json", b"new")
    assert (tmp_path / "a.json").read_bytes() == b"new"
    assert passing(tmp_path) == [fresh]


# --- reading -------------------------------------------------------------------------------------------


def test_a_file_is_read_up_to_a_bound(tmp_path: Path) -> None:
    path = tmp_path / "a"
    path.write_bytes(bytes(2_000_000))
    assert len(read_whole(path, 2_000_000)) == 2_000_000
    with pytest.raises(OSError, match=r"it is far too large \(over 1 MB\)"):
        read_whole(path, 1_999_999)


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="there are no pipes with names here")
def test_a_pipe_or_a_device_is_not_waited_for(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe")
    for path in (tmp_path / "pipe", Path("/dev/zero")):
        with pytest.raises(OSError, match="it is no ordinary file"):
            open_ordinary(path)
        with pytest.raises(OSError, match="it is no ordinary file"):
            read_whole(path, 1000)
