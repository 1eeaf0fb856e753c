"""Hearing takes side by side: what is found again, what is kept, and what happens when a process is ended.

Truth is what hearing each take alone gives.
"""

import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from short_takes import short_session, write_short

import fluteprobe
from fluteprobe import hearing
from fluteprobe.cluster import joblib_map
from fluteprobe.hearing import FEW_TAKES, Heard, hear_recording, hear_takes
from fluteprobe.kept import Kept
from fluteprobe.session import Session, SessionError, Take, read_session
from fluteprobe.sound.recording import RecordingError

TAKES = ("xxxxxx", "xxxxxo", "xxxxoo", "xxxooo", "xxoooo")
BAD = "xooooo"

linux_only = pytest.mark.skipif(sys.platform != "linux", reason="takes are heard in processes on Linux alone")


@pytest.fixture
def session(tmp_path: Path) -> Session:
    """Return a session of five real takes and one that is no recording."""
    folder = short_session(tmp_path / "heron", TAKES)
    (folder / "takes" / f"{BAD}.flac").write_bytes(b"no recording")
    return read_session(folder)


@pytest.fixture
def kept(tmp_path: Path) -> Kept:
    return Kept(folder=tmp_path / ".kept")


@pytest.fixture
def asked(monkeypatch: pytest.MonkeyPatch) -> list[str]:
    """Return the names of the recordings that are really listened to in this process, as that happens."""
    names: list[str] = []

    def noted(path: Path) -> Any:
        names.append(path.stem)
        return hear_recording(path)

    monkeypatch.setattr(hearing, "hear_recording", noted)
    monkeypatch.delenv("OPENBLAS_NUM_THREADS", raising=False)  # so that no process is forked
    return names


def by_name(heard: Iterable[tuple[Take, Heard]]) -> dict[str, Heard]:
    return {take.path.stem: result for take, result in heard}


def in_turn(hear: Callable[[Take], Heard], takes: Sequence[Take]) -> list[Heard]:
    return [hear(take) for take in takes]


# --- a second run --------------------------------------------------------------------------------------


def test_a_second_run_hears_only_what_could_not_be_used(
    session: Session, kept: Kept, asked: list[str]
) -> None:
    first = by_name(hear_takes(session.takes, kept=kept))
    assert len(asked) == 6
    assert len(list(kept.folder.iterdir())) == len(TAKES)
    asked.clear()
    second = by_name(hear_takes(session.takes, kept=kept))
    assert asked == [BAD]
    assert list(first) == list(second) == [take.path.stem for take in session.takes]
    assert all(first[name] == second[name] for name in TAKES)
    assert isinstance(second[BAD], RecordingError)


def test_a_take_that_changed_is_heard_and_no_other(session: Session, kept: Kept, asked: list[str]) -> None:
    list(hear_takes(session.takes, kept=kept))
    asked.clear()
    changed = session.folder / "takes" / f"{BAD}.flac"
    write_short(BAD, changed)
    heard = by_name(hear_takes(session.takes, kept=kept))
    assert asked == [BAD]
    assert heard[BAD] == hear_recording(changed)


def test_all_anew_where_that_is_asked(session: Session, kept: Kept, asked: list[str]) -> None:
    list(hear_takes(session.takes, kept=kept))
    asked.clear()
    list(hear_takes(session.takes, kept=Kept(folder=kept.folder, anew=True)))
    assert len(asked) == 6


def test_without_a_place_nothing_is_kept(session: Session, asked: list[str]) -> None:
    for _ in range(2):
        list(hear_takes(session.takes))
    assert len(asked) == 12


def test_a_cluster_s_results_are_kept_here_and_found_again(session: Session, kept: Kept) -> None:
    sent: list[int] = []

    def elsewhere(hear: Callable[[Take], Heard], takes: Sequence[Take]) -> Iterable[Heard]:
        sent.append(len(takes))
        return joblib_map(hear, takes)

    first = by_name(hear_takes(session.takes, map_takes=elsewhere, kept=kept))
    second = by_name(hear_takes(session.takes, map_takes=elsewhere, kept=kept))
    assert sent == [6, 1]
    assert all(first[name] == second[name] for name in TAKES)


def test_a_map_that_loses_or_adds_a_take_is_no_silent_loss(session: Session, kept: Kept) -> None:
    for wrong in (lambda h, t: in_turn(h, t)[1:], lambda h, t: [*in_turn(h, t), ()]):
        with pytest.raises(ValueError, match=r"shorter|longer"):
            list(hear_takes(session.takes, map_takes=wrong, kept=kept))


def test_recordings_that_go_away_meanwhile_are_no_flute_with_fewer_takes(
    session: Session, kept: Kept, tmp_path: Path
) -> None:
    taken_away = tmp_path / "elsewhere"

    def removed(hear: Callable[[Take], Heard], takes: Sequence[Take]) -> Iterator[Heard]:
        for k, take in enumerate(takes):
            if k == 3:
                session.folder.rename(taken_away)
            yield hear(take)

    with pytest.raises(SessionError) as caught:
        list(hear_takes(session.takes, map_takes=removed, kept=kept))
    first_lost = session.takes[3].path
    assert str(caught.value) == f"{first_lost} and 2 more: gone while it was heard; was a drive removed?"
    assert len(kept.found(taken_away / take.name for take in session.takes)) == 2  # the first is no recording


def test_a_link_that_leads_nowhere_from_the_start_is_one_bad_take(session: Session) -> None:
    take = replace(session.takes[1], path=session.folder / "takes" / "nowhere.wav")
    take.path.symlink_to("nothing")
    heard = by_name(hear_takes([*session.takes, take]))
    assert str(heard["nowhere"]) == "no such file"


def test_the_survey_is_the_same_whether_heard_or_found(session: Session, kept: Kept) -> None:
    first, second = (fluteprobe.measure(session.folder, kept=kept) for _ in range(2))
    assert first == second == fluteprobe.measure(session.folder)


# --- processes that end --------------------------------------------------------------------------------

_IN_PROCESSES = """
import os, sys
os.environ["OPENBLAS_NUM_THREADS"] = "1"
from pathlib import Path
from fluteprobe import hearing, session
from fluteprobe.kept import Kept
real = hearing.hear_recording
here = os.getpid()
def hear_recording(path):
    {what}
    return real(path)
hearing.hear_recording = hear_recording
kept = Kept(folder=Path(sys.argv[2]))
for take, heard in hearing.hear_takes(session.read_session(sys.argv[1]).takes, kept=kept):
    print(take.path.stem, heard if isinstance(heard, Exception) else len(heard), flush=True)
"""


def in_processes(what: str, session: Session, kept: Kept) -> "subprocess.Popen[str]":
    """Hear a session in forked processes, each of which does something before it hears a take."""
    code = _IN_PROCESSES.format(what=what)
    return subprocess.Popen(
        [sys.executable, "-c", code, str(session.folder), str(kept.folder)],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, start_new_session=True,
    )  # fmt: skip


def members(group: int) -> int:
    """Return how many processes of a group still run."""
    found = 0
    for status in Path("/proc").glob("[0-9]*/stat"):
        try:
            state, _, its_group = status.read_text().rpartition(")")[2].split()[:3]
        except OSError:
            continue
        found += int(its_group) == group and state != "Z"
    return found


def none_left(group: int) -> bool:
    """Wait for a group's processes to end; False if some still run after a while."""
    for _ in range(200):
        if not members(group):
            return True
        time.sleep(0.05)
    return False


@linux_only
def test_takes_are_heard_in_processes_and_kept_by_them(session: Session, kept: Kept) -> None:
    out, err = in_processes("assert os.getpid() != here", session, kept).communicate()
    assert err == ""
    assert [line.split()[0] for line in out.splitlines()] == [take.path.stem for take in session.takes]
    assert len(list(kept.folder.iterdir())) == len(TAKES)


@linux_only
def test_a_process_that_breaks_down_costs_its_own_take_alone(session: Session, kept: Kept) -> None:
    what = 'if path.stem == "xxxooo": os.kill(os.getpid(), 9)'
    out, err = in_processes(what, session, kept).communicate()
    assert err == ""
    told = dict(line.split(" ", 1) for line in out.splitlines())
    assert list(told) == [take.path.stem for take in session.takes]
    assert told.pop("xxxooo") == (
        "what reads it broke down, or memory ran out; save it as WAV or FLAC, or in shorter pieces"
    )
    assert "not a sound file" in told.pop(BAD)
    assert set(told.values()) == {"1"}


@linux_only
def test_a_process_that_was_ended_once_costs_nothing(session: Session, kept: Kept, tmp_path: Path) -> None:
    flag = str(tmp_path / "once")
    what = f'if path.stem == "xxxooo" and not os.path.exists({flag!r}): open({flag!r}, "x"); os._exit(3)'
    out, _ = in_processes(what, session, kept).communicate()
    told = dict(line.split(" ", 1) for line in out.splitlines())
    assert [name for name, words in told.items() if words != "1"] == [BAD]


@linux_only
@pytest.mark.parametrize("ending", [signal.SIGKILL, signal.SIGTERM])
def test_no_process_stays_behind_when_the_run_is_ended(
    session: Session, kept: Kept, ending: signal.Signals
) -> None:
    run = in_processes('if path.stem == "xxxooo": import time; time.sleep(60)', session, kept)
    assert run.stdout is not None
    assert run.stderr is not None
    assert [run.stdout.readline().split()[0] for _ in range(2)] == [BAD, "xxoooo"]
    assert members(run.pid) > 1
    os.kill(run.pid, ending)
    run.wait()
    assert none_left(run.pid)
    run.stdout.close()
    run.stderr.close()
    assert kept.found([session.takes[1].path])  # what had been heard is kept


@linux_only
def test_an_interrupted_run_ends_at_once_and_its_processes_say_nothing(session: Session, kept: Kept) -> None:
    run = in_processes('if path.stem == "xxxooo": import time; time.sleep(60)', session, kept)
    assert run.stdout is not None
    run.stdout.readline()
    os.killpg(run.pid, signal.SIGINT)
    _, err = run.communicate(timeout=20)
    assert err.count("Traceback") == 1  # the run's own, which the command line turns into "Aborted!"
    assert err.rstrip().endswith("KeyboardInterrupt")
    assert none_left(run.pid)


def test_few_takes_need_no_other_process(session: Session, asked: list[str]) -> None:
    list(hear_takes(session.takes[:FEW_TAKES]))
    assert len(asked) == FEW_TAKES
