"""A session of the demo flute with a second or so of some takes: quick to hear, for tests around that."""

import shutil
from collections.abc import Iterable
from functools import cache
from pathlib import Path
from typing import Any

import soundfile

HERON = Path(__file__).parent.parent / "samples" / "heron"
SECONDS = 1.1


def short_session(folder: Path, takes: Iterable[str]) -> Path:
    """Make a session folder of those takes of the demo flute, cut short, and return it."""
    (folder / "takes").mkdir(parents=True)
    shutil.copy(HERON / "flute.toml", folder)
    for name in takes:
        write_short(name, folder / "takes" / f"{name}.flac")
    return folder


def write_short(name: str, path: Path) -> None:
    """Write a second or so out of the middle of a take."""
    samples, rate_hz = _middle(name)
    soundfile.write(path, samples, rate_hz)


@cache
def _middle(name: str) -> tuple[Any, int]:
    samples, rate_hz = soundfile.read(HERON / "takes" / f"{name}.flac")
    start = len(samples) // 4
    return samples[start : start + round(SECONDS * rate_hz)], rate_hz
