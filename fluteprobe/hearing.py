"""Takes are heard: found among what was kept, or heard anew on all cores.

Conventions: what was heard comes in the order of the takes; one that cannot be used gives a RecordingError in
its place. What is heard is kept by whoever heard it, as soon as it is heard, so that a run that is ended
half-way has lost only what was in work.
"""

import os
import signal
import sys
from collections.abc import Callable, Iterable, Iterator, Sequence
from concurrent.futures import BrokenExecutor, Executor, ThreadPoolExecutor
from dataclasses import replace
from functools import partial
from pathlib import Path
from threading import Thread, active_count

from fluteprobe.kept import Kept, stamp
from fluteprobe.memory import keep_freed_memory
from fluteprobe.session import SessionError, Take, printable
from fluteprobe.sound.recording import RecordingError, open_recording
from fluteprobe.sound.tone import Tone, read_tones

FEW_TAKES = 3

_BROKE_DOWN = "what reads it broke down, or memory ran out; save it as WAV or FLAC, or in shorter pieces"

Heard = tuple[Tone, ...] | RecordingError
HearTake = Callable[[Take], Heard]
MapTakes = Callable[[HearTake, Sequence[Take]], Iterable[Heard]]


def hear_recording(path: Path) -> tuple[Tone, ...]:
    """Return the tones of one recording, what is to be said of the recording among their cautions.

    Raises
    ------
    RecordingError
        If the file cannot be used; the message says what is wrong and what to do.
    """
    recording = open_recording(path)
    return tuple(
        replace(tone, cautions=(*recording.cautions, *tone.cautions)) for tone in read_tones(recording)
    )


def hear_takes(
    takes: Sequence[Take], *, map_takes: MapTakes | None = None, kept: Kept | None = None
) -> Iterator[tuple[Take, Heard]]:
    """Yield every take, in order, with what was heard in it.

    Parameters
    ----------
    map_takes
        Hears takes elsewhere than on this machine's cores: see `fluteprobe.cluster`.
    kept
        What was heard before; without it every take is heard anew and nothing is kept.

    Raises
    ------
    SessionError
        At the end, if recordings went away meanwhile: what is left of a flute whose drive was removed must
        not take the place of the whole.
    """
    there = {take.path for take in takes if stamp(take.path) is not None}
    known = {} if kept is None else kept.found(take.path for take in takes)
    new = [take for take in takes if take.path not in known]
    anew = iter(_heard_elsewhere(new, map_takes, kept) if map_takes else _heard_here(new, kept))
    gone: list[Path] = []
    for take in takes:
        heard = known[take.path] if take.path in known else next(anew)
        if isinstance(heard, RecordingError) and take.path in there and stamp(take.path) is None:
            gone.append(take.path)
        yield take, heard
    next(anew, None)
    if gone:
        more = f" and {len(gone) - 1} more" if len(gone) > 1 else ""
        raise SessionError(f"{printable(str(gone[0]))}{more}: gone while it was heard; was a drive removed?")
    if kept is not None:
        kept.sweep(len(takes))


def _heard_elsewhere(takes: Sequence[Take], map_takes: MapTakes, kept: Kept | None) -> Iterator[Heard]:
    """Hear takes wherever `map_takes` does; what was heard is kept here, for there may be no such folder."""
    seen = [stamp(take.path) for take in takes]
    for take, before, heard in zip(takes, seen, map_takes(_hear_one, takes), strict=True):
        if kept is not None and not isinstance(heard, RecordingError):
            kept.keep(take.path, heard, before)
        yield heard


def _heard_here(takes: Sequence[Take], kept: Kept | None) -> Iterator[Heard]:
    """Hear takes on all cores where there are several; one at a time where that breaks down."""
    hear = partial(_hear_and_keep, kept)
    if len(takes) <= FEW_TAKES:
        yield from map(hear, takes)
        return
    done = 0
    try:
        with _pool(os.cpu_count() or 1) as pool:
            for heard in pool.map(hear, takes):
                yield heard
                done += 1
    except (BrokenExecutor, OSError):  # a process was ended from outside, or none can be made
        yield from (_heard_apart(hear, take) for take in takes[done:])


def _heard_apart(hear: HearTake, take: Take) -> Heard:
    """Hear a take in a process of its own, so that one that breaks it down takes no other with it."""
    try:
        with _pool(1) as pool:
            return pool.submit(hear, take).result()
    except BrokenExecutor:
        return RecordingError(_BROKE_DOWN)


def _hear_and_keep(kept: Kept | None, take: Take) -> Heard:
    seen = stamp(take.path)
    heard = _hear_one(take)
    if kept is not None and not isinstance(heard, RecordingError):
        kept.keep(take.path, heard, seen)
    return heard


def _hear_one(take: Take) -> Heard:
    try:
        return hear_recording(take.path)
    except RecordingError as error:
        return error


def _pool(workers: int) -> Executor:
    """Return forked processes where a fork is cheap and safe (Linux, a single thread), threads elsewhere.

    Threads wait for one another in Python's own part of the work, about half of it; processes do not.
    """
    if sys.platform == "linux" and active_count() == 1 and os.environ.get("OPENBLAS_NUM_THREADS") == "1":
        from concurrent.futures import ProcessPoolExecutor
        from multiprocessing import get_context

        context = get_context("fork")
        return ProcessPoolExecutor(workers, mp_context=context, initializer=_settle_in)
    return ThreadPoolExecutor(workers)


def _settle_in() -> None:
    """Make a forked process ready to hear takes."""
    keep_freed_memory()
    _end_with_the_parent()


def _end_with_the_parent() -> None:
    """Let a forked process end when the one that made it has ended, however it did, or is interrupted."""
    from multiprocessing import parent_process

    signal.signal(signal.SIGINT, signal.SIG_DFL)
    parent = parent_process()

    def watch() -> None:
        if parent is not None:
            parent.join()
            os._exit(1)

    Thread(target=watch, daemon=True).start()
