"""Means of doing harm, for `bench_faults.py`: damaged recordings, small disks, killed processes.

Conventions: sizes in bytes or KB (1024 bytes); processes are told apart by their process group.
"""

import io
import os
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from hashlib import sha256
from pathlib import Path

import numpy as np
import soundfile

DEMO = Path(__file__).parent.parent.parent / "samples" / "heron"
TAKES = ("xxxxxx", "xxxxxo", "xxxooo", "xooooo", "oxxxxx-over")
FORMATS = (
    ("WAV", "PCM_16"),
    ("FLAC", "PCM_16"),
    ("OGG", "VORBIS"),
    ("MP3", "MPEG_LAYER_III"),
    ("AIFF", "PCM_24"),
)
DISK_KB = 512

_SECONDS = 1.2
_PATIENCE_S = 30.0
_OPERATIONS = {"open", "os.rename", "os.remove", "os.mkdir", "os.utime", "os.truncate"}


def make_session(folder: Path) -> None:
    """Make a session with a second or so of five takes of the demo flute."""
    (folder / "takes").mkdir(parents=True)
    for name in TAKES:
        samples, rate_hz = soundfile.read(DEMO / "takes" / f"{name}.flac")
        start = len(samples) // 4
        part = samples[start : start + round(_SECONDS * rate_hz)]
        soundfile.write(folder / "takes" / f"{name}.wav", part, rate_hz)


def whole_recording(k: int) -> bytes:
    """Return a sound recording in one of five formats, as bytes."""
    kind, subtype = FORMATS[k % len(FORMATS)]
    samples, rate_hz = soundfile.read(DEMO / "takes" / "xxxxxx.flac")
    held = io.BytesIO()
    soundfile.write(held, samples[: round(_SECONDS * rate_hz)], rate_hz, format=kind, subtype=subtype)
    return held.getvalue()


def damage(content: bytes, k: int, rng: np.random.Generator) -> bytes:
    """Return a recording damaged in one of eight ways."""
    where = int(rng.integers(1, len(content)))
    spoilt = bytearray(content)
    ways: list[Callable[[], bytes]] = [
        lambda: content[:where],
        lambda: bytes(len(content)),
        lambda: rng.bytes(len(content)),
        lambda: content[where:] + content[:where],
        lambda: b"",
        lambda: content[: where // 50],
        lambda: rng.bytes(64) + content[64:],
        lambda: _flipped(spoilt, rng),
    ]
    return ways[k // len(FORMATS) % len(ways)]()


def _flipped(content: bytearray, rng: np.random.Generator) -> bytes:
    for where in rng.integers(0, min(len(content), 2000), 20):
        content[where] ^= 1 << int(rng.integers(0, 8))
    return bytes(content)


# --- disks and processes ------------------------------------------------------------------------------


def kill_before(turn: int, out: Path) -> None:
    """Kill this process before its so-and-so-many-eth operation on a file of the outputs."""
    victim, counted = os.getpid(), os.pipe()
    os.set_blocking(counted[0], False)
    os.write(counted[1], bytes(turn - 1))  # shared with the processes that hear

    def hook(event: str, arguments: tuple[object, ...]) -> None:
        if event in _OPERATIONS and str(out) in str(arguments[0]):
            try:
                os.read(counted[0], 1)
            except BlockingIOError:
                os.kill(victim, signal.SIGKILL)

    sys.addaudithook(hook)


def limit_files(most_bytes: int) -> None:
    """Let no file of this process grow beyond a size."""
    import resource

    signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
    resource.setrlimit(resource.RLIMIT_FSIZE, (most_bytes, most_bytes))


@contextmanager
def small_disk(folder: Path) -> Iterator[bool]:
    """Make a small disk in memory; say whether this machine lets us."""
    folder.mkdir()
    mount = ["mount", "-t", "tmpfs", "-o", f"size={DISK_KB}k", "none", str(folder)]
    is_there = shutil.which("mount") is not None and subprocess.run(mount, check=False).returncode == 0
    try:
        yield is_there
    finally:
        if is_there:
            subprocess.run(["umount", str(folder)], check=True)


def free_bytes(folder: Path) -> int:
    """Return how much room a folder's disk has left."""
    status = os.statvfs(folder)
    return status.f_bavail * status.f_frsize


def digests(folder: Path) -> dict[str, str]:
    """Return a digest of every file in a folder."""
    return {path.name: sha256(path.read_bytes()).hexdigest() for path in sorted(folder.iterdir())}


def ended(group: int) -> bool:
    """Wait for all processes of a group to end; False if some have not after half a minute."""
    start = time.perf_counter()
    while time.perf_counter() - start < _PATIENCE_S:
        try:
            os.killpg(group, 0)
        except ProcessLookupError:
            return True
        time.sleep(0.01)
    return False
