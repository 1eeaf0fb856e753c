"""Speed: whole processes from a cold start, ours beside a script that runs Praat's pitch alone.

Conventions: wall seconds of a fresh Python process, from its start to its end; the programs take turns, and
the median of the rounds is told with the smallest and the largest. Recordings are 3 s long, 44.1 kHz, 16 bit,
one tone of 2.4 s each. Memory is the process's largest resident set, in MB (10⁶ bytes).
"""

import os
import subprocess
import sys
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import islice, product
from pathlib import Path
from statistics import median
from tempfile import TemporaryDirectory
from time import perf_counter

import numpy as np
import soundfile
from bench.tables import table
from numpy.typing import NDArray
from tones import make_tone

from fluteprobe.session import FluteFacts, create_session

Samples = NDArray[np.float32]

RATE_HZ = 44_100
TAKES = 30
COUNTS = (1, 3, 10, 30, 100, 300)

_LONG_RATE_HZ = 48_000
_OURS = "from fluteprobe.cli.main import main; main()"
_START = "import fluteprobe.survey"
_PRAAT = """
import sys, statistics, pathlib, parselmouth
for path in sorted(pathlib.Path(sys.argv[1], "takes").iterdir()):
    track = parselmouth.Sound(str(path)).to_pitch()
    heard = [hz for hz in track.selected_array["frequency"] if hz > 0]
    print(path.name, statistics.median(heard) if heard else None)
"""
_READ = """
import sys, pathlib, numpy, soundfile
for path in sorted(pathlib.Path(sys.argv[1], "takes").iterdir()):
    samples, rate = soundfile.read(path, dtype="float32")
    numpy.fft.rfft(samples)
"""


@dataclass(frozen=True, slots=True, kw_only=True)
class Cost:
    """Wall seconds, seconds on all processors, and largest memory of a process that went well."""

    wall_s: float
    cpu_s: float
    memory_mb: float


def report(*, full: bool, say: Callable[[str], None]) -> None:
    """Print every table on speed."""
    say(f"### {TAKES} takes of 3 s, whole processes in turn\n\n" + in_turn(9 if full else 2))
    say("### From 1 to 300 takes\n\n" + growth(3 if full else 1, COUNTS if full else COUNTS[:4]))
    minutes = 60 if full else 2
    say(f"### One recording of {minutes} minutes, 48 kHz, stereo\n\n" + long_recording(minutes))


def in_turn(rounds: int) -> str:
    """Return what each program costs on the same 30 takes, and how it compares with Praat's pitch alone."""
    with TemporaryDirectory() as name:
        folder = Path(name) / "flute"
        make_session(folder, TAKES)
        commands = {
            "the whole survey: `measure --json`": (_OURS, *_measure(folder)),
            "Praat's pitch alone": (_PRAAT, str(folder)),
            "reading and one FFT each": (_READ, str(folder)),
            "loading ours, nothing measured": (_START,),
        }
        costs: dict[str, list[Cost]] = {words: [] for words in commands}
        for _ in range(rounds):
            for words, command in commands.items():
                costs[words].append(run(command))
    return _cost_table(costs)


def growth(rounds: int, counts: Sequence[int]) -> str:
    """Return the survey's wall time over the number of takes."""
    rows = []
    for count in counts:
        with TemporaryDirectory() as name:
            folder = Path(name) / "flute"
            make_session(folder, count)
            costs = [run((_OURS, *_measure(folder))) for _ in range(rounds)]
        wall = median(cost.wall_s for cost in costs)
        rows.append(
            [
                str(count),
                f"{wall:.2f}",
                f"{1000 * wall / count:.0f}",
                f"{max(c.memory_mb for c in costs):.0f}",
            ]
        )
    return table(["takes", "s", "ms per take", "MB"], rows)


def long_recording(minutes: int) -> str:
    """Return what `hear --json` costs on one long recording."""
    with TemporaryDirectory() as name:
        path = Path(name) / "long.wav"
        seconds = _write_long(path, minutes)
        megabytes = path.stat().st_size / 1e6
        cost = run((_OURS, "hear", "--json", str(path)))
    row = [f"{seconds / 60:.0f} min", f"{megabytes:.0f} MB", f"{cost.wall_s:.1f}", f"{cost.cpu_s:.1f}",
           f"{cost.memory_mb:.0f}"]  # fmt: skip
    return table(["recording", "file", "s", "s on processors", "MB"], [row])


def make_session(folder: Path, takes: int) -> None:
    """Make a session folder with so many takes of one tone each; what they play is no real flute."""
    create_session(folder, FluteFacts(name="Bench", holes=6))
    (folder / "takes").mkdir(exist_ok=True)
    rng = np.random.default_rng(60)
    for k, name in enumerate(islice(_names(), takes)):
        tone = make_tone(300.0 * 2.0 ** (k % 24 / 12.0), 2.4, "plain", 30.0, rng, rate_hz=RATE_HZ)
        soundfile.write(
            folder / "takes" / name, _with_silence(tone.samples, RATE_HZ), RATE_HZ, subtype="PCM_16"
        )


def run(command: Sequence[str]) -> Cost:
    """Run Python code with arguments in a process of its own; what it prints is thrown away.

    Raises
    ------
    RuntimeError
        If it does not go well.
    """
    start = perf_counter()
    process = subprocess.Popen(
        [sys.executable, "-c", *command], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL
    )
    _, status, usage = os.wait4(process.pid, 0)
    process.returncode = os.waitstatus_to_exitcode(status)
    if process.returncode:
        raise RuntimeError(f"exit code {process.returncode}: {command}")
    return Cost(
        wall_s=perf_counter() - start,
        cpu_s=usage.ru_utime + usage.ru_stime,
        memory_mb=usage.ru_maxrss * 1024 / 1e6,
    )


def _measure(folder: Path) -> tuple[str, ...]:
    return ("measure", "--json", "--anew", str(folder), "--out", str(folder.parent / "out"))


def _names() -> Iterator[str]:
    """Yield file names of takes: the ladder, blown three ways, time and again."""
    words = ["x" * (6 - k) + "o" * k for k in range(7)]
    for number in range(1, 1000):
        for breath, word in product(("", "-over", "-soft"), words):
            yield f"{word}{breath}{'' if number == 1 else f'-{number}'}.wav"


def _with_silence(tone: Samples, rate_hz: int) -> Samples:
    """Return a tone at half of full scale with faded ends, 0.3 s of near silence to either side."""
    quiet = np.random.default_rng(61).standard_normal(round(0.3 * rate_hz)).astype(np.float32) * np.float32(
        1e-4
    )
    fade = np.minimum(1.0, np.arange(len(tone)) / (0.03 * rate_hz))
    faded = tone * (fade * fade[::-1] * 0.5 / np.abs(tone).max()).astype(np.float32)
    return np.concatenate([quiet, faded, quiet])


def _write_long(path: Path, minutes: int) -> float:
    """Write tones of 2.4 s with pauses, on both channels, and return how many seconds they are."""
    rng = np.random.default_rng(62)
    blocks = []
    for k in range(20):
        tone = make_tone(300.0 * 2.0 ** (k / 12.0), 2.4, "plain", 30.0, rng, rate_hz=_LONG_RATE_HZ)
        blocks.append(_with_silence(tone.samples, _LONG_RATE_HZ))
    one = np.concatenate(blocks)
    both = np.stack([one, 0.7 * one], axis=1)
    with soundfile.SoundFile(path, "w", _LONG_RATE_HZ, 2, subtype="PCM_16") as file:
        for _ in range(minutes):
            file.write(both)
    return minutes * len(both) / _LONG_RATE_HZ


def _cost_table(costs: Mapping[str, Sequence[Cost]]) -> str:
    praat = median(cost.wall_s for cost in costs["Praat's pitch alone"])
    rows = []
    for words, told in costs.items():
        walls = [cost.wall_s for cost in told]
        rows.append(
            [
                words,
                f"{median(walls):.2f}",
                f"{min(walls):.2f} to {max(walls):.2f}",
                f"{median(cost.cpu_s for cost in told):.2f}",
                f"{median(walls) / praat:.2f}",
                f"{max(cost.memory_mb for cost in told):.0f}",
            ]
        )
    return table(["process", "s", "from and to", "s on processors", "over Praat's", "MB"], rows)
