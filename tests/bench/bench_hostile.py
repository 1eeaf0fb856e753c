"""Damaged and hostile sound files of every container, by the hundred: what came out of each.

A second of tone is written in each kind and harmed: some bytes changed at random, most of them near the start
where headers are; fields set to an extreme value; the end cut off; a piece left out, doubled or zeroed.
The file is opened and read through, every second one as if it were too long to be kept. Processes of their
own do it, so that a crash counts and is told.

| column | counts |
| --- | --- |
| read | files that were read, with or without a caution |
| refused | files for which a RecordingError was raised |
| wrong | any other exception, a crash, or more than ten seconds on a processor |
| said more | files with which something was written to standard error |
| slowest | processor time of the slowest file |
| memory | by how much the largest process grew while it read them |
"""

import os
import resource
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from multiprocessing import get_context
from multiprocessing.connection import Connection
from pathlib import Path

import numpy as np
import phone_files
import soundfile
from bench.tables import table

CASES, FEW_CASES = 1000, 40
SLOW_S = 10.0
PATIENCE_S = 120.0  # of the clock: the machine may be busy

_RATE_HZ = 48_000
_HEADER_BYTES = 600
_EXTREMES = (b"\xff" * 8, b"\x7f" + b"\xff" * 7, b"\x80" + b"\0" * 7, b"\0" * 8, b"\0\0\0\1" * 2)

_SOUND_FILES = (
    ("WAV", "PCM_16"),
    ("WAV", "FLOAT"),
    ("RF64", "PCM_24"),
    ("W64", "PCM_16"),
    ("AIFF", "PCM_16"),
    ("CAF", "ALAC_16"),
    ("AU", "PCM_16"),
    ("FLAC", "PCM_16"),
    ("OGG", "VORBIS"),
    ("OGG", "OPUS"),
    ("MP3", "MPEG_LAYER_III"),
)
_PHONE_FILES = (
    ("kind.m4a", "aac", 48_000, None),
    ("alac.m4a", "alac", 48_000, None),
    ("kind.3gp", "libopencore_amrnb", 8_000, None),
    ("kind.amr", "libopencore_amrnb", 8_000, None),
    ("kind.mp4", "aac", 48_000, "mpeg4"),
    ("kind.mov", "pcm_s16le", 48_000, None),
    ("float.mov", "pcm_f32le", 48_000, None),
    ("kind.webm", "libopus", 48_000, None),
    ("kind.mkv", "aac", 48_000, "mpeg4"),
    ("flac.mkv", "flac", 48_000, None),
    ("kind.aac", "aac", 48_000, None),
    ("kind.avi", "ac3", 48_000, "mpeg4"),
    ("kind.wma", "wmav2", 48_000, None),
)
_BIT_RATES = {"wmav2": 64_000}

Harm = Callable[[bytearray, np.random.Generator], bytes]


@dataclass(frozen=True, slots=True, kw_only=True)
class Outcome:
    """What came out of one harmed file: "read", "refused" or what went wrong."""

    case: int
    result: str
    said_more: bool
    took_s: float
    memory_mb: float


def report(*, full: bool, say: Callable[[str], None]) -> None:
    """Say a table: a row for each kind of file."""
    cases = CASES if full else FEW_CASES
    titles = ("kind of file", "files", "read", "refused", "wrong", "said more", "slowest, s", "memory, MB")
    rows, faults = [], []
    with tempfile.TemporaryDirectory() as folder:
        for kind, content in kinds(Path(folder)):
            print(f"Harming: {kind}", file=sys.stderr, flush=True)
            outcomes = _outcomes(content, cases, Path(folder))
            rows.append(_row(kind, outcomes))
            faults += [f"{kind}, case {o.case}: {o.result}" for o in outcomes if _is_wrong(o)]
    say(table(titles, rows))
    say("\n".join(faults) or "Nothing went wrong.")


def kinds(folder: Path) -> Iterator[tuple[str, bytes]]:
    """Yield each kind of file's name and a second of tone in it."""
    time_s = np.arange(_RATE_HZ) / _RATE_HZ
    samples = 0.4 * np.sin(2 * np.pi * 523.25 * time_s)
    samples += 0.01 * np.random.default_rng(5).standard_normal(_RATE_HZ)
    path = folder / "kind"
    for kind, subtype in _SOUND_FILES:
        soundfile.write(path, samples, _RATE_HZ, format=kind, subtype=subtype)
        yield f"{kind}, {subtype.lower()}", path.read_bytes()
    for name, codec, rate_hz, video in _PHONE_FILES:
        thinned = samples[:: _RATE_HZ // rate_hz]
        path = phone_files.written(
            folder / name, thinned, rate_hz, codec, video=video, bit_rate=_BIT_RATES.get(codec)
        )
        yield f"{path.suffix[1:].upper()}, {codec}{' with video' if video else ''}", path.read_bytes()


def harmed(content: bytes, case: int) -> bytes:
    """Return the content with one to four harms, the same for the same case."""
    rng = np.random.default_rng(case)
    for _ in range(int(rng.integers(1, 5))):
        content = _HARMS[int(rng.integers(len(_HARMS)))](bytearray(content), rng)
    return content


def _outcomes(content: bytes, cases: int, folder: Path) -> list[Outcome]:
    """Have processes try all cases; one that ends early has met a case that ended it."""
    outcomes: list[Outcome] = []
    while len(outcomes) < cases:
        ours, theirs = get_context("fork").Pipe()
        process = get_context("fork").Process(
            target=_try_all, args=(theirs, content, range(len(outcomes), cases), folder)
        )
        process.start()
        theirs.close()
        outcomes += _received(ours)
        process.kill()
        process.join()
        if len(outcomes) < cases:
            crash = "a crash, or no end"
            case = len(outcomes)
            outcomes.append(Outcome(case=case, result=crash, said_more=False, took_s=0.0, memory_mb=0.0))
    return outcomes


def _received(pipe: Connection) -> list[Outcome]:
    outcomes: list[Outcome] = []
    try:
        while pipe.poll(PATIENCE_S):
            outcomes.append(pipe.recv())
    except EOFError:
        pass
    return outcomes


def _try_all(pipe: Connection, content: bytes, cases: range, folder: Path) -> None:
    errors = os.open(folder / "errors", os.O_RDWR | os.O_CREAT | os.O_TRUNC)
    os.dup2(errors, 2)
    before_kb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    for case in cases:
        path = folder / "harmed"
        path.write_bytes(harmed(content, case))
        start_s, said = time.process_time(), os.fstat(errors).st_size
        result = _tried(path, streamed=case % 2 == 1)
        grown_kb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before_kb
        pipe.send(
            Outcome(
                case=case,
                result=result,
                said_more=os.fstat(errors).st_size > said,
                took_s=time.process_time() - start_s,
                memory_mb=grown_kb / 1024,
            )
        )


def _tried(path: Path, *, streamed: bool) -> str:
    """Open a file and read all of it; return what came out."""
    from fluteprobe.sound import phone, recording

    held_s = 0.2 if streamed else 60.0
    recording._KEPT_S = phone._HELD_S = held_s
    try:
        opened = recording.open_recording(path)
        for _, block in opened.blocks(10_000):
            if not np.all(np.isfinite(block)):
                return "samples that are no numbers"
        opened.read(opened.frames // 2, opened.frames)
    except recording.RecordingError as error:
        return "refused" if "\n" not in str(error) else "words of several lines"
    except Exception as error:
        return f"{type(error).__name__}: {error}"
    return "read"


def _row(kind: str, outcomes: list[Outcome]) -> list[str]:
    results = [outcome.result for outcome in outcomes]
    return [
        kind,
        str(len(outcomes)),
        str(results.count("read")),
        str(results.count("refused")),
        str(sum(_is_wrong(outcome) for outcome in outcomes)),
        str(sum(outcome.said_more for outcome in outcomes)),
        f"{max(outcome.took_s for outcome in outcomes):.2f}",
        f"{max(outcome.memory_mb for outcome in outcomes):.0f}",
    ]


def _is_wrong(outcome: Outcome) -> bool:
    return outcome.result not in {"read", "refused"} or outcome.took_s > SLOW_S


def _change(content: bytearray, rng: np.random.Generator) -> bytes:
    for _ in range(int(rng.choice([1, 4, 32]))):
        content[_place(content, rng)] = int(rng.integers(256))
    return bytes(content)


def _extreme(content: bytearray, rng: np.random.Generator) -> bytes:
    """Set a field of two, four or eight bytes to something extreme."""
    at, width = _place(content, rng), int(rng.choice([2, 4, 8]))
    content[at : at + width] = _EXTREMES[int(rng.integers(len(_EXTREMES)))][-width:]
    return bytes(content)


def _cut(content: bytearray, rng: np.random.Generator) -> bytes:
    return bytes(content[: max(_place(content, rng), 1)])


def _leave_out(content: bytearray, rng: np.random.Generator) -> bytes:
    start, stop = _piece(content, rng)
    return bytes(content[:start] + content[stop:]) or b"\0"


def _double(content: bytearray, rng: np.random.Generator) -> bytes:
    start, stop = _piece(content, rng)
    return bytes(content[:stop] + content[start:])


def _zero(content: bytearray, rng: np.random.Generator) -> bytes:
    start, stop = _piece(content, rng)
    return bytes(content[:start] + bytes(stop - start) + content[stop:])


_HARMS: tuple[Harm, ...] = (_change, _change, _extreme, _extreme, _cut, _leave_out, _double, _zero)


def _place(content: bytearray, rng: np.random.Generator) -> int:
    """Return a place, two times in three near the start or the end, where headers are."""
    size, near = len(content), min(_HEADER_BYTES, len(content))
    places = (rng.integers(size), rng.integers(near), size - 1 - rng.integers(near))
    return int(places[int(rng.integers(3))])


def _piece(content: bytearray, rng: np.random.Generator) -> tuple[int, int]:
    start = _place(content, rng)
    return start, min(start + int(rng.choice([1, 8, 100, 4000])), len(content))
