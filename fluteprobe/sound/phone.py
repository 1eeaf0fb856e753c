"""The sound of phones and cameras, through PyAV (extra `phone`): M4A, MP4, MOV, 3GP, WebM, MKV, AMR.

Conventions: those of `fluteprobe.sound.decoding`. Time stamps count in the stream's own time base.

Frame 0 is the first one that the file says is to be played. What an encoder puts before the sound (1024 or
2112 samples for AAC, 312 for Opus) is left out where the file tells how much that is, as M4A, MP4, MOV, 3GP,
WebM and MKV do; bare AAC and AMR do not, and their sound comes late by as much. An announced duration is not
believed: a file is decoded from end to end to count its frames. Where packets are lost or damaged, silence
keeps the time. Marks, one about every second, tell which frame a time stamp is; seeking goes by them.
"""

import os
from bisect import bisect_right
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial
from math import inf
from pathlib import Path
from types import TracebackType
from typing import Self

import numpy as np

from fluteprobe.sound.decoding import (
    CUT_OFF,
    FINEST_STEP,
    LONGEST_S,
    NO_SOUND_FOUND,
    TOO_LONG,
    Decoder,
    RecordingError,
    Samples,
    head_of,
    open_read_only,
)
from fluteprobe.sound.track import Timed, Track, samples_of

INSTALL = "python -m pip install 'fluteprobe[phone]'"

_LOSSLESS = ("alac", "flac", "wmalossless", "pcm_u8", "pcm_s", "pcm_f")
_HELD_VALUES = 2**25
_HELD_S = 60.0
_CHUNK_VALUES = 2**20
_MARK_S = 1.0
_PREROLL_S = 0.25  # after a jump a decoder needs 80 ms (Opus, RFC 7845 section 4.6), a few packets of AAC
_HEADS = (
    (4, (b"ftyp", b"moov", b"mdat", b"wide", b"free", b"skip"), "an M4A, MP4, MOV or 3GP file"),
    (0, (b"\x1aE\xdf\xa3",), "a WebM or MKV file"),
    (0, (b"#!AMR",), "an AMR file"),
    (0, (b"\xff\xf1", b"\xff\xf9"), "an AAC file"),
    (0, (b"\x30\x26\xb2\x75\x8e\x66\xcf\x11",), "a WMA or WMV file"),
    (8, (b"AVI ",), "an AVI video"),
    (0, (b"caff",), "a CAF file of a kind that phones write"),
)


@dataclass(frozen=True, slots=True, kw_only=True)
class PhoneIndex:
    """What one pass over a file found: how many frames there are, and where.

    Attributes
    ----------
    track, tracks
        Which of the file's sound tracks is used, from 0, and how many there are.
    is_cut, is_damaged, missing_s
        Whether the file ends too early, whether packets amid the sound could not be decoded, and how much
        silence stands for sound that is not there.
    marks
        (frame, time stamp), rising in both.
    """

    rate_hz: int
    channels: int
    frames: int
    codec: str
    track: int
    tracks: int
    is_cut: bool
    is_damaged: bool
    missing_s: float
    marks: tuple[tuple[int, int], ...]


def open_phone(path: Path, fault: RecordingError) -> "PhoneDecoder":
    """Open a file that libsndfile does not read.

    Raises
    ------
    RecordingError
        `fault`, which libsndfile gave, if the file is no phone's either; else what is wrong with it.
    """
    descriptor = open_read_only(path)
    try:
        kind = kind_of(head_of(descriptor))
    finally:
        os.close(descriptor)
    try:
        import av  # noqa: F401  (only whether it is there)
    except ImportError:
        raise (RecordingError(f"{kind}; to read such files: {INSTALL}") if kind else fault) from None
    try:
        return PhoneDecoder(path)
    except RecordingError:
        if kind:
            raise
        raise fault from None


def kind_of(head: bytes) -> str | None:
    """Return, in words, what kind of phone's or camera's file begins like this; None if none does."""
    for at, marks, words in _HEADS:
        if head[at:].startswith(marks):
            return words
    return None


class PhoneDecoder:
    """A phone's file, open for reading; every fault comes out as a RecordingError.

    Without an `index` the whole file is decoded once, and kept if it is a minute at most.
    """

    may_hold_nan: bool = True
    step: float = FINEST_STEP

    def __init__(self, path: Path, index: PhoneIndex | None = None) -> None:
        self._track = Track(path, is_checked=index is not None)
        self._held: list[Timed] | None = None
        self._left: Samples = np.empty((0, 1), np.float32)
        self._pieces: Iterator[Samples] | None = None
        try:
            self.index = self._surveyed() if index is None else index
        except BaseException:
            self._track.close()
            raise
        self.rate_hz: int = self.index.rate_hz
        self.frames: int = self.index.frames
        self.channels: int = self.index.channels
        self.codec: str = self.index.codec
        self.lossy: bool = not self.codec.startswith(_LOSSLESS)
        self.chunk_frames: int = max(_CHUNK_VALUES // self.channels, 1)
        self.again: Callable[[], Decoder] = partial(PhoneDecoder, path, self.index)

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._pieces, self._held = None, None
        self._track.close()

    def read(self, frames: int) -> Samples:
        """Read the next frames, shape (frames, channels); fewer where the file ends."""
        if self._pieces is None:
            self.seek(0)
        pieces, found = [self._left], len(self._left)
        while found < frames and (piece := next(self._pieces or iter(()), None)) is not None:
            pieces.append(piece)
            found += len(piece)
        together = np.concatenate(pieces)
        self._left = together[frames:]
        return together[:frames]

    def seek(self, frame: int) -> None:
        """Go to a frame."""
        first, timed = (0, iter(self._held)) if self._held is not None else self._from_mark(frame)
        self._left = np.empty((0, self.channels), np.float32)
        self._pieces = _skipped(timed, frame - first, self.channels)

    def reaches(self, frame: int) -> bool:
        """Return whether a frame can be decoded: each one that was counted has been."""
        return frame < self.frames

    def cautions(self, found: int) -> tuple[str, ...]:  # noqa: ARG002  (all that was counted is found)
        """Say which track is used, and what is missing of it."""
        index = self.index
        cautions = []
        if index.tracks > 1:
            cautions.append(f"used sound track {index.track + 1} of {index.tracks}")
        if index.is_cut:
            cautions.append(CUT_OFF)
        if index.is_damaged:
            cautions.append("damaged: silence stands for what could not be read; copy or record it again")
        elif index.missing_s:
            cautions.append(f"{index.missing_s:.1f} s of sound are missing; silence stands for them")
        return tuple(cautions)

    def _surveyed(self) -> PhoneIndex:
        """Decode the whole file, count its frames and set the marks; keep a minute at most."""
        track, count, missing = self._track, 0, 0
        marks: list[tuple[int, int]] = []
        held: list[Timed] = []
        for gap, frame in track.frames():
            count, missing = count + gap, missing + gap
            _mark(marks, count, frame.pts, track.rate_hz)
            count += frame.samples
            if _is_short(count, track):
                held.append((gap, frame))
            else:
                held.clear()
            if count > LONGEST_S * track.rate_hz:
                raise RecordingError(TOO_LONG)
        if not count:
            raise RecordingError(NO_SOUND_FOUND)
        self._held = held or None
        return PhoneIndex(
            rate_hz=track.rate_hz,
            channels=track.channels,
            frames=count,
            codec=track.codec,
            track=track.number,
            tracks=track.of,
            is_cut=track.falls_short_of(count / track.rate_hz),
            is_damaged=track.is_damaged,
            missing_s=missing / track.rate_hz,
            marks=tuple(marks),
        )

    def _from_mark(self, frame: int) -> tuple[int, Iterator[Timed]]:
        """Return a frame's number some way before the one asked, and what is decoded from there on."""
        early = frame - int(_PREROLL_S * self.rate_hz)
        mark = bisect_right(self.index.marks, (early, inf)) - 1
        if mark > 0:
            first, stamp = self.index.marks[mark]
            if (timed := self._track.frames_from(stamp)) is not None:
                return first, timed
        return 0, self._track.frames_from_the_start()


def _mark(marks: list[tuple[int, int]], count: int, stamp: int | None, rate_hz: int) -> None:
    """Add a mark where the last one is a second back and time has gone on."""
    if stamp is None:
        return
    if not marks or (count - marks[-1][0] >= _MARK_S * rate_hz and stamp > marks[-1][1]):
        marks.append((count, stamp))


def _is_short(count: int, track: Track) -> bool:
    return count <= _HELD_S * track.rate_hz and count * track.channels <= _HELD_VALUES


def _skipped(timed: Iterator[Timed], count: int, channels: int) -> Iterator[Samples]:
    """Yield samples piece by piece, shape (frames, channels), after passing over `count` frames."""
    for gap, frame in timed:
        length = gap + frame.samples
        if count < length:
            yield samples_of((gap, frame), channels)[count:]
        count = max(count - length, 0)
