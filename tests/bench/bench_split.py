"""Splitting: how often every sound of a long recording is told right, and what an hour of sound costs.

Sittings are the standard take sheet, played on simulated flutes that set no constant; their pitches come from
the tube model and have a player's scatter (see `longs.py`). A take is doubtful under 80 %: then a script
writes nothing. The hour holds 60 takes, 48 kHz, stereo, 16 bit; it is split by a fresh process, which writes
the takes too. Memory is the largest resident set of that process or one of its helpers, in MB (10⁶ bytes).
"""

from collections.abc import Callable
from itertools import pairwise
from pathlib import Path
from tempfile import TemporaryDirectory
from time import perf_counter

import numpy as np
import soundfile
from bench.bench_speed import _OURS, run
from bench.tables import share_text, table
from longs import Mishap, pitches, played, sounded, wanted
from make_long import spoken

from fluteprobe.flute.alignment import align
from fluteprobe.session import FluteFacts, create_session, read_session
from fluteprobe.session.names import TakeName
from fluteprobe.splitting import DOUBTFUL

RATE_HZ = 48_000
TAKES = 60

_FIRST_SEED = 5000
_MISHAPS: tuple[dict[Mishap, int], ...] = (
    {},
    {"repeats": 2},
    {"skips": 1},
    {"fails": 1},
    {"strays": 1},
    {"skips": 1, "repeats": 1, "fails": 1, "strays": 1},
)
_CHANCES = (0.0, 0.5, DOUBTFUL, 0.95, 0.99, 1.01)
_ROOM = 5e-4


def report(*, full: bool, say: Callable[[str], None]) -> None:
    """Say the tables."""
    say(alignments(60 if full else 4))
    say(hours((8.0, 55.0) if full else (4.0,), 60 if full else 6))


def alignments(sittings: int) -> str:
    """Return the tables of right and wrong sounds, by what went amiss and by the probability told."""
    rows, told = [], []
    for mishaps in _MISHAPS:
        start = perf_counter()
        answers = [_answers(_FIRST_SEED + k, mishaps) for k in range(sittings)]
        each_s = (perf_counter() - start) / sittings
        flat = [answer for sitting in answers for answer in sitting]
        told += flat
        rows.append(
            [
                ", ".join(f"{count} {word}" for word, count in mishaps.items()) or "as planned",
                share_text(sum(all(right for right, _ in sitting) for sitting in answers), sittings),
                share_text(sum(right for right, _ in flat), len(flat)),
                share_text(sum(not right and sure < DOUBTFUL for right, sure in flat), len(flat)),
                share_text(sum(not right and sure >= DOUBTFUL for right, sure in flat), len(flat)),
                f"{each_s:.2f}",
            ]
        )
    titles = [
        "mishaps",
        "sittings all right",
        "sounds right",
        "wrong, doubtful",
        "wrong, not so",
        "s a sitting",
    ]
    return table(titles, rows) + "\n\n" + _calibration(told)


def _answers(seed: int, mishaps: dict[Mishap, int]) -> list[tuple[bool, float]]:
    """Return for every sound of a sitting whether it was told right, and how surely."""
    sitting = played(seed, mishaps)
    told = align(sitting.heard, sitting.order).placed
    return [(each.take == true, each.probability) for each, true in zip(told, sitting.truth, strict=True)]


def _calibration(told: list[tuple[bool, float]]) -> str:
    rows = []
    for low, high in pairwise(_CHANCES):
        mine = [(right, sure) for right, sure in told if low <= sure < high]
        mean = f"{100.0 * np.mean([sure for _, sure in mine]):.1f} %" if mine else "–"
        rows.append(
            [
                f"{low:g} to {min(high, 1.0):g}",
                str(len(mine)),
                mean,
                share_text(sum(r for r, _ in mine), len(mine)),
            ]
        )
    return table(["probability told", "sounds", "mean told", "right"], rows)


def hours(lengths_s: tuple[float, ...], minutes: int) -> str:
    """Return what it costs to split a recording of so many minutes into as many takes of some lengths."""
    rows = []
    for length_s in lengths_s:
        with TemporaryDirectory() as name:
            folder = Path(name)
            names = _write_hour(folder, length_s, minutes)
            size = (folder / "long.wav").stat().st_size / 1e6
            order = ("--order", str(folder / "order.txt"))
            cost = run((_OURS, "split", str(folder / "long.wav"), str(folder / "flute"), *order, "--yes"))
            written = [take.path.stem for take in read_session(folder / "flute").takes]
        right = sorted(written) == sorted(names)
        rows.append(
            [f"{minutes} min, takes of {length_s:g} s", f"{size:.0f} MB", str(len(written)),
             "yes" if right else "NO", f"{cost.wall_s:.1f}", f"{cost.cpu_s:.1f}", f"{cost.memory_mb:.0f}"]
        )  # fmt: skip
    titles = ["recording", "file", "takes", "all right", "s", "s on processors", "MB"]
    return table(titles, rows)


def _write_hour(folder: Path, length_s: float, minutes: int) -> list[str]:
    """Write a recording with one take a minute and words between some, its order and a session for it."""
    random = np.random.default_rng(64)
    order = wanted(6, "full")[:minutes]
    seed = 5001
    known = pitches(seed, order)
    create_session(folder / "flute", FluteFacts(name="Hour", holes=6))
    names = [TakeName(fingering=take.fingering, breath=take.breath, number=None).stem for take in order]
    (folder / "order.txt").write_text("\n".join(names), "utf-8")
    with soundfile.SoundFile(folder / "long.wav", "w", RATE_HZ, 2, subtype="PCM_16") as file:
        for k, take in enumerate(order):
            minute = _ROOM * random.standard_normal(60 * RATE_HZ)
            tone = sounded(float(known[k, int(take.breath == "over")]), length_s, RATE_HZ, random)
            minute[4 * RATE_HZ : 4 * RATE_HZ + len(tone)] += tone
            if k % 3 == 0:
                word = spoken(0.8, RATE_HZ, random)
                minute[RATE_HZ : RATE_HZ + len(word)] += word
            file.write(np.stack([minute, 0.7 * minute], axis=1))
    return names
