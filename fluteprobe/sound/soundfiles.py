"""Sound files that libsndfile decodes: WAV, AIFF, CAF, FLAC, Ogg, Opus, MP3 and their kin.

Conventions: those of `fluteprobe.sound.decoding`.
"""

import os
import re
import threading
from collections.abc import Callable
from contextlib import AbstractContextManager, nullcontext
from functools import partial
from pathlib import Path
from types import TracebackType
from typing import Self

import soundfile

from fluteprobe.sound.decoding import (
    CUT_OFF,
    DAMAGED,
    FINEST_STEP,
    NO_SOUND_FOUND,
    Decoder,
    RecordingError,
    Samples,
    UnknownKindError,
    head_of,
    open_read_only,
)

NO_KNOWN_KIND = "not a sound file that can be read (WAV, AIFF, CAF, FLAC, Ogg, Opus, MP3, M4A, 3GP …)"

_CHUNK_VALUES = 2**20  # decoded at a time from longer recordings, over all channels
_MPEG_LOSS_S = 0.1  # MP3 headers announce whole packets
_SILENT_DECODERS = (b"RIFF", b"RF64", b"riff", b"FORM", b"caff", b"fLaC", b"OggS", b".snd")
_LOSSLESS = ("PCM_", "FLOAT", "DOUBLE", "ALAC_")
_COARSE_STEPS = {"PCM_S8": 2.0**-7, "PCM_U8": 2.0**-7, "ULAW": 2.0**-5, "ALAW": 2.0**-5}
_BYTES = {"PCM_S8": 1, "PCM_U8": 1, "PCM_16": 2, "PCM_24": 3, "PCM_32": 4, "FLOAT": 4, "DOUBLE": 8}
_SIZE_LINE = re.compile(r"^ *(?:data|SSND|Data Size) *: *(\d+)", re.MULTILINE | re.IGNORECASE)
_SIZE_SLACK = 32  # bytes of a chunk's own header that some formats count as data
_UNKNOWN_SIZES = range(0x7FFF0000, 0x1_0000_0000)  # written by recorders that did not know the length yet
_NOT_RECOGNISED = 1  # libsndfile's SF_ERR_UNRECOGNISED_FORMAT


class SoundFileDecoder:
    """A sound file, open for reading; every fault comes out as a RecordingError.

    Raises
    ------
    UnknownKindError
        If libsndfile does not open it.
    """

    def __init__(self, path: Path) -> None:
        self._descriptor = open_read_only(path)
        try:
            self._open()
        except BaseException:
            os.close(self._descriptor)
            raise
        self.rate_hz: int = self._file.samplerate
        self.frames: int = self._file.frames
        self.channels: int = self._file.channels
        self.codec: str = self._file.subtype
        self.lossy: bool = not self.codec.startswith(_LOSSLESS)
        self.may_hold_nan: bool = self.codec in {"FLOAT", "DOUBLE"}
        self.step: float = _COARSE_STEPS.get(self.codec, FINEST_STEP)
        self.chunk_frames: int = max(_CHUNK_VALUES // self.channels, 1)
        self.again: Callable[[], Decoder] = partial(SoundFileDecoder, path)

    def _open(self) -> None:
        head = head_of(self._descriptor)
        quiet = head.startswith(_SILENT_DECODERS)
        self._hush: AbstractContextManager[None] = nullcontext() if quiet else _hush
        try:
            with self._hush:
                self._file = soundfile.SoundFile(self._descriptor, closefd=False)
        except soundfile.LibsndfileError as error:
            raise UnknownKindError(_why_not_opened(head, error.code)) from None

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        with self._hush:
            self._file.close()
        os.close(self._descriptor)

    def read(self, frames: int) -> Samples:
        """Read the next frames, shape (frames, channels); fewer where the file ends.

        Raises RecordingError where the file is damaged.
        """
        try:
            with self._hush:
                samples: Samples = self._file.read(frames, dtype="float32", always_2d=True)
        except (soundfile.LibsndfileError, ValueError):  # the latter where it finds itself beyond the end
            raise RecordingError(DAMAGED) from None
        return samples

    def seek(self, frame: int) -> None:
        """Go to a frame."""
        try:
            with self._hush:
                self._file.seek(frame)
        except soundfile.LibsndfileError:
            raise RecordingError(DAMAGED) from None

    def reaches(self, frame: int) -> bool:
        """Return whether a frame can be decoded.

        FLAC is decoded all the way there: libsndfile seeks past damage, but does not read past it.
        """
        if not self._file.seekable():
            raise RecordingError("too long for its kind of sound file; save it as WAV or FLAC")
        try:
            if self._file.format == "FLAC":
                while (at := self._file.tell()) < frame and len(
                    self.read(min(self.chunk_frames, frame - at))
                ):
                    pass
            else:
                self.seek(frame)
            return len(self.read(1)) == 1
        except RecordingError:
            return False

    def cautions(self, found: int) -> tuple[str, ...]:
        """Say so where the header announces more frames than were found."""
        return (CUT_OFF,) if self._falls_short(found) else ()

    def _falls_short(self, found: int) -> bool:
        if "MPEG" in self.codec:
            return self.frames - found > _MPEG_LOSS_S * self.rate_hz
        width = _BYTES.get(self.codec, 0) * self.channels
        return (
            self.frames > found
            or _announced_bytes(self._file.extra_info) > found * width + _SIZE_SLACK > _SIZE_SLACK
        )


def _why_not_opened(head: bytes, code: int) -> str:
    if code == _NOT_RECOGNISED and not head.startswith(_SILENT_DECODERS):
        return NO_KNOWN_KIND
    return NO_SOUND_FOUND


def _announced_bytes(log: str) -> int:
    """Return how much sound data libsndfile's log says the header announces; 0 where it does not say."""
    sizes = [int(size) for size in _SIZE_LINE.findall(log)]
    return max((size for size in sizes if size not in _UNKNOWN_SIZES), default=0)


class _Hush:
    """Keeps the process's standard error quiet while any thread decodes: mpg123 writes there by itself.

    What other threads write to standard error meanwhile is lost too, so it is held only for single reads.
    """

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._holders = 0
        self._saved = -1

    def __enter__(self) -> None:
        with self._lock:
            self._holders += 1
            if self._holders == 1:
                self._saved = _swap_standard_error()

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        with self._lock:
            self._holders -= 1
            if self._holders == 0:
                os.dup2(self._saved, 2)
                os.close(self._saved)


def _swap_standard_error() -> int:
    """Point descriptor 2 at nothing and return a copy of what it was."""
    saved = os.dup(2)
    nowhere = os.open(os.devnull, os.O_WRONLY)
    os.dup2(nowhere, 2)
    os.close(nowhere)
    return saved


_hush = _Hush()
