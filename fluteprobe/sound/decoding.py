"""What every decoder of sound files offers, and the words for files that none can read.

Conventions: a frame is one sample of every channel; decoded samples are float32 with full scale at ±1, shape
(frames, channels). Files are opened read-only and by descriptor, so that a name can lead no library astray.
"""

import os
import stat
from collections.abc import Callable
from pathlib import Path
from types import TracebackType
from typing import Protocol, Self

import numpy as np
from numpy.typing import NDArray

Samples = NDArray[np.float32]

FINEST_STEP = 2.0**-15
HEAD_BYTES = 32
LONGEST_S = 86_400.0
_STANDARD_ERROR = 2

CUT_OFF = "cut off or damaged: less can be read than its header says; copy or record it again"
DAMAGED = "damaged: it cannot be read to its end; copy or record it again"
NO_SOUND_FOUND = "damaged or cut off: no sound can be read from it; copy or record it again"
TOO_LONG = "longer than a day; cut it into shorter recordings"
PROTECTED = "copy-protected: it cannot be read; record it anew, or save an unprotected copy"


class RecordingError(ValueError):
    """A recording that cannot be used. Its text is one line for people, without the file's name."""


class UnknownKindError(RecordingError):
    """A file that one decoder cannot open and another one perhaps can."""


class Decoder(Protocol):
    """A sound file, open for reading; every fault comes out as a RecordingError.

    Attributes
    ----------
    frames
        How many there are, or how many the header announces.
    codec, lossy
        How the file holds its samples, in the decoder's own word, and whether part of the sound was left out.
    may_hold_nan
        Whether samples can be no numbers.
    step
        The smallest difference between two samples near full scale.
    chunk_frames
        How many to read at a time from a long recording.
    again
        Opens the same file afresh.
    """

    rate_hz: int
    frames: int
    channels: int
    codec: str
    lossy: bool
    may_hold_nan: bool
    step: float
    chunk_frames: int
    again: Callable[[], "Decoder"]

    def __enter__(self) -> Self: ...

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None: ...

    def read(self, frames: int) -> Samples:
        """Read the next frames, shape (frames, channels); fewer where the file ends."""

    def seek(self, frame: int) -> None:
        """Go to a frame."""

    def reaches(self, frame: int) -> bool:
        """Return whether a frame can be decoded."""

    def cautions(self, found: int) -> tuple[str, ...]:
        """Return what is wrong with the file, a line each, when `found` frames could be read."""


def open_read_only(path: Path) -> int:
    """Return a file descriptor.

    Raises
    ------
    RecordingError
        If there is no file of at least one byte that may be read.
    """
    try:
        if stat.S_ISDIR((status := path.stat()).st_mode):
            raise RecordingError("a folder, not a recording")
        if not stat.S_ISREG(status.st_mode):
            raise RecordingError("not a file; record to a sound file first")
        if status.st_size == 0:
            raise RecordingError("an empty file (0 bytes); copy or record it again")
        descriptor = os.open(path, os.O_RDONLY | getattr(os, "O_BINARY", 0))
        while descriptor <= _STANDARD_ERROR:  # it was closed: its number is not for a file
            descriptor = os.dup(descriptor)
        return descriptor
    except FileNotFoundError:
        raise RecordingError("no such file") from None
    except PermissionError:
        raise RecordingError("may not be read; check the file's permissions") from None
    except OSError as error:
        raise RecordingError(f"cannot be opened: {error.strerror or error}") from None


def head_of(descriptor: int) -> bytes:
    """Return a file's first bytes and leave it at its start; raise RecordingError where it cannot be read."""
    try:
        head = os.read(descriptor, HEAD_BYTES)
        os.lseek(descriptor, 0, os.SEEK_SET)
    except OSError as error:
        raise RecordingError(f"cannot be read: {error.strerror or error}") from None
    return head
