"""Any sound file becomes samples: one channel, float32, full scale at ±1.

Conventions: `frames`, `start` and `stop` count samples of one channel at the recording's own `rate_hz`;
channels count from 0, but from 1 in words for people. Files are opened read-only. What a file holds is found
out by trying to decode it, never from its name.

Recordings of up to a minute are decoded once and kept; longer ones are read from the file whenever samples
are asked for, so that memory does not grow with length.
"""

import os
import re
import stat
import threading
from collections.abc import Iterator
from contextlib import AbstractContextManager, nullcontext
from dataclasses import dataclass, field
from pathlib import Path
from types import TracebackType
from typing import Self

import numpy as np
import soundfile
from numpy.typing import NDArray

from fluteprobe.sound.channels import LEAST_CLIPPED_SHARE, Choice, choose_channel

Samples = NDArray[np.float32]

LOWEST_RATE_HZ = 8000
SHORTEST_S = 0.1

_HIGHEST_RATE_HZ = 50_000  # recordings above it are given out at a division of their rate
_KEPT_S = 60.0
_KEPT_VALUES = 2**25  # over all channels, 128 MiB as float32
_CHUNK_VALUES = 2**20  # decoded at a time from longer recordings, over all channels
_SALVAGE_FRAMES = 1024
_PROBES = 12
_PROBE_S = 0.25
_RESAMPLING_MARGIN = 256  # samples at the lower rate; soxr's filter is shorter
_LARGEST_SAMPLE = 1e6  # beyond it a float is no sound but damage
_MPEG_LOSS_S = 0.1  # MP3 headers announce whole packets

_SILENT_DECODERS = (b"RIFF", b"RF64", b"riff", b"FORM", b"caff", b"fLaC", b"OggS", b".snd")
_COARSE_STEPS = {"PCM_S8": 2.0**-7, "PCM_U8": 2.0**-7, "ULAW": 2.0**-5, "ALAW": 2.0**-5}
_LOSSLESS = ("PCM_", "FLOAT", "DOUBLE", "ALAC_")
_FINEST_STEP = 2.0**-15
_BYTES = {"PCM_S8": 1, "PCM_U8": 1, "PCM_16": 2, "PCM_24": 3, "PCM_32": 4, "FLOAT": 4, "DOUBLE": 8}
_SIZE_LINE = re.compile(r"^ *(?:data|SSND|Data Size) *: *(\d+)", re.MULTILINE | re.IGNORECASE)
_SIZE_SLACK = 32  # bytes of a chunk's own header that some formats count as data
_UNKNOWN_SIZES = range(0x7FFF0000, 0x1_0000_0000)  # written by recorders that did not know the length yet
_NOT_RECOGNISED = 1  # libsndfile's SF_ERR_UNRECOGNISED_FORMAT


class RecordingError(ValueError):
    """A recording that cannot be used. Its text is one line for people, without the file's name."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Recording:
    """One channel of a sound file, ready to be read.

    Attributes
    ----------
    rate_hz
        Sampling rate of the samples given out: the file's own, or a division of it if above 50 kHz.
    frames
        How many samples there are at `rate_hz`.
    channels, channel
        How many channels the file has, and which one is used, from 0.
    codec
        How the file holds its samples, in the decoder's own word: "PCM_16", "MPEG_LAYER_III", "aac" …
    lossy
        Whether the file was compressed by leaving out part of the sound (MP3, Vorbis, AAC, telephone …).
    cautions
        What a maker should know about this recording, a line each.
    """

    path: Path
    rate_hz: int
    frames: int
    channels: int
    channel: int
    codec: str
    lossy: bool
    cautions: tuple[str, ...]
    _division: int = field(repr=False)
    _kept: Samples | None = field(repr=False)

    @property
    def duration_s(self) -> float:
        """How long the recording is."""
        return self.frames / self.rate_hz

    def read(self, start: int, stop: int) -> Samples:
        """Return samples `start` to `stop` (excluded) of the chosen channel, shape (stop - start,).

        Raises
        ------
        ValueError
            If the range is not within the recording.
        RecordingError
            If the file cannot be read there.
        """
        if not 0 <= start <= stop <= self.frames:
            raise ValueError(f"samples {start} to {stop} are not within 0 to {self.frames}")
        return self._read_from_file(start, stop) if self._kept is None else self._kept[start:stop]

    def blocks(self, length: int, overlap: int = 0) -> Iterator[tuple[int, Samples]]:
        """Yield (start, samples) over the whole recording in order; the last block may be shorter.

        Blocks are `length` samples long and share `overlap` samples with the one before.

        Raises
        ------
        ValueError
            If `overlap` is not from 0 to `length` - 1.
        """
        if not 0 <= overlap < length:
            raise ValueError(f"an overlap of {overlap} is not from 0 to {length - 1}")
        pieces = self._chunks() if self._kept is None else iter([self._kept])
        return _reblocked(pieces, length, overlap)

    def _chunks(self) -> Iterator[Samples]:
        """Yield the whole recording from the file, piece by piece, at `rate_hz`."""
        with _Decoder(self.path) as decoder:
            pieces = self._own_rate(decoder)
            if self._division > 1:
                pieces = _resampled(pieces, self.rate_hz, self._division)
            left = self.frames
            for piece in pieces:
                yield piece[:left]
                left -= min(len(piece), left)

    def _own_rate(self, decoder: "_Decoder") -> Iterator[Samples]:
        left = self.frames * self._division
        while left > 0:
            piece = decoder.read(min(left, decoder.chunk_frames))
            if not len(piece):
                raise RecordingError(_changed(self.frames * self._division - left, decoder.rate_hz))
            yield _mended(piece[:, self.channel])
            left -= len(piece)

    def _read_from_file(self, start: int, stop: int) -> Samples:
        margin = _RESAMPLING_MARGIN if self._division > 1 else 0
        first, last = max(start - margin, 0), min(stop + margin, self.frames)
        with _Decoder(self.path) as decoder:
            decoder.seek(first * self._division)
            wide = decoder.read((last - first) * self._division)[:, self.channel]
        if len(wide) < (last - first) * self._division:
            raise RecordingError(_changed(first * self._division + len(wide), self.rate_hz * self._division))
        return _divided(_mended(wide), self.rate_hz, self._division)[start - first : stop - first]


def open_recording(path: str | os.PathLike[str]) -> Recording:
    """Open a sound file, choose its best channel and say what is wrong with it.

    Raises
    ------
    RecordingError
        If the file is missing or holds no sound that can be measured.
    """
    path = Path(path)
    with _Decoder(path) as decoder:
        _check_rate(decoder)
        if _is_short(decoder, decoder.frames):
            return _keep(path, decoder, decoder.frames)
        if decoder.reaches(decoder.frames - 1):
            return _stream(path, decoder, decoder.frames)
    return _open_damaged(path)


def _reblocked(pieces: Iterator[Samples], length: int, overlap: int) -> Iterator[tuple[int, Samples]]:
    """Cut a run of pieces into blocks of one length."""
    held, start, step = np.empty(0, np.float32), 0, length - overlap
    for piece in pieces:
        held = np.concatenate([held, piece]) if len(held) else piece
        while len(held) >= length:
            yield start, held[:length]
            held, start = held[step:], start + step
    if len(held) > overlap or start == 0:
        yield start, held


def _open_damaged(path: Path) -> Recording:
    """Open a long recording that cannot be decoded to its announced end, as far as it can."""
    with _Decoder(path) as decoder:
        frames = sum(len(piece) for piece in _salvaged(decoder, decoder.frames))
    with _Decoder(path) as decoder:  # after a fault, libsndfile does not go back
        return (_keep if _is_short(decoder, frames) else _stream)(path, decoder, frames)


class _Decoder:
    """A sound file, open for reading; every fault comes out as a RecordingError."""

    def __init__(self, path: Path) -> None:
        self._descriptor = _open_read_only(path)
        try:
            head = os.read(self._descriptor, 12)
            os.lseek(self._descriptor, 0, os.SEEK_SET)
            quiet = head.startswith(_SILENT_DECODERS)
            self._hush: AbstractContextManager[None] = nullcontext() if quiet else _hush
            with self._hush:
                self._file = soundfile.SoundFile(self._descriptor, closefd=False)
        except soundfile.LibsndfileError as error:
            os.close(self._descriptor)
            raise RecordingError(_why_not_opened(head, error.code)) from None
        except BaseException:
            os.close(self._descriptor)
            raise
        self.rate_hz: int = self._file.samplerate
        self.frames: int = self._file.frames
        self.channels: int = self._file.channels
        self.codec: str = self._file.subtype
        self.lossy: bool = not self.codec.startswith(_LOSSLESS)
        self.is_mpeg: bool = "MPEG" in self.codec
        self.may_hold_nan: bool = self.codec in {"FLOAT", "DOUBLE"}
        self.step: float = _COARSE_STEPS.get(self.codec, _FINEST_STEP)
        self.chunk_frames: int = max(_CHUNK_VALUES // self.channels, 1)

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
        except soundfile.LibsndfileError:
            raise RecordingError("damaged: it cannot be read to its end; copy or record it again") from None
        return samples

    def seek(self, frame: int) -> None:
        """Go to a frame."""
        try:
            with self._hush:
                self._file.seek(frame)
        except soundfile.LibsndfileError:
            raise RecordingError("damaged: it cannot be read to its end; copy or record it again") from None

    def falls_short(self, found: int) -> bool:
        """Return whether the header announces more frames than were found."""
        if self.is_mpeg:
            return self.frames - found > _MPEG_LOSS_S * self.rate_hz
        width = _BYTES.get(self._file.subtype, 0) * self.channels
        return (
            self.frames > found
            or _announced_bytes(self._file.extra_info) > found * width + _SIZE_SLACK > _SIZE_SLACK
        )

    def reaches(self, frame: int) -> bool:
        """Return whether a frame can be decoded."""
        if not self._file.seekable():
            raise RecordingError("too long for its kind of sound file; save it as WAV or FLAC")
        try:
            self.seek(frame)
            return len(self.read(1)) == 1
        except RecordingError:
            return False


def _keep(path: Path, decoder: _Decoder, frames: int) -> Recording:
    """Decode the whole recording and keep the chosen channel."""
    samples = _all_that_can_be_read(path, decoder, frames)
    found = len(samples)
    _check_length(found, decoder.rate_hz)
    bad = decoder.may_hold_nan and _has_bad_samples(samples)
    samples = _mended(samples) if bad else samples
    _check_sound([samples])
    choice = choose_channel([samples], decoder.rate_hz, decoder.step)
    division = _division(decoder.rate_hz)
    rate_hz = decoder.rate_hz // division
    kept = _divided(np.ascontiguousarray(samples[:, choice.channel]), rate_hz, division)[: found // division]
    kept.flags.writeable = False
    return Recording(
        path=path,
        rate_hz=rate_hz,
        frames=len(kept),
        channels=decoder.channels,
        channel=choice.channel,
        codec=decoder.codec,
        lossy=decoder.lossy,
        cautions=_cautions(decoder, choice, found=found, bad=bad),
        _division=division,
        _kept=kept,
    )


def _stream(path: Path, decoder: _Decoder, frames: int) -> Recording:
    """Look at a dozen probes of a long recording and leave the rest in the file."""
    probes = list(_probes(decoder, frames))
    bad = decoder.may_hold_nan and any(_has_bad_samples(probe) for probe in probes)
    probes = [_mended(probe) for probe in probes] if bad else probes
    if not _sounds(probes):
        probes = [_first_sound(decoder, frames)]
    choice = choose_channel(probes, decoder.rate_hz, decoder.step)
    division = _division(decoder.rate_hz)
    return Recording(
        path=path,
        rate_hz=decoder.rate_hz // division,
        frames=frames // division,
        channels=decoder.channels,
        channel=choice.channel,
        codec=decoder.codec,
        lossy=decoder.lossy,
        cautions=_cautions(decoder, choice, found=frames, bad=bad),
        _division=division,
        _kept=None,
    )


def _open_read_only(path: Path) -> int:
    """Return a file descriptor. By descriptor, libsndfile cannot be led astray by the file's name."""
    try:
        if stat.S_ISDIR((status := path.stat()).st_mode):
            raise RecordingError("a folder, not a recording")
        if not stat.S_ISREG(status.st_mode):
            raise RecordingError("not a file; record to a sound file first")
        if status.st_size == 0:
            raise RecordingError("an empty file (0 bytes); copy or record it again")
        return os.open(path, os.O_RDONLY | getattr(os, "O_BINARY", 0))
    except FileNotFoundError:
        raise RecordingError("no such file") from None
    except PermissionError:
        raise RecordingError("may not be read; check the file's permissions") from None
    except OSError as error:
        raise RecordingError(f"cannot be opened: {error.strerror or error}") from None


def _why_not_opened(head: bytes, code: int) -> str:
    if head[4:8] == b"ftyp":
        return "an M4A, MP4 or 3GP file, which cannot be read; save it as WAV or FLAC"
    if code == _NOT_RECOGNISED and not head.startswith(_SILENT_DECODERS):
        return "not a sound file that can be read (WAV, AIFF, CAF, FLAC, Ogg, Opus or MP3)"
    return "damaged or cut off: no sound can be read from it; copy or record it again"


def _announced_bytes(log: str) -> int:
    """Return how much sound data libsndfile's log says the header announces; 0 where it does not say."""
    sizes = [int(size) for size in _SIZE_LINE.findall(log)]
    return max((size for size in sizes if size not in _UNKNOWN_SIZES), default=0)


def _check_rate(decoder: _Decoder) -> None:
    if decoder.rate_hz < LOWEST_RATE_HZ:
        raise RecordingError(
            f"recorded at {decoder.rate_hz} samples a second; at least {LOWEST_RATE_HZ} are needed"
        )


def _check_length(frames: int, rate_hz: int) -> None:
    if frames < SHORTEST_S * rate_hz:
        raise RecordingError(
            f"only {frames / rate_hz:.3f} s of sound; at least {SHORTEST_S} s are needed, 2 s are good"
        )


def _check_sound(parts: list[Samples]) -> None:
    if not _sounds(parts):
        raise RecordingError("silent: every sample is the same; check which microphone was recording")


def _sounds(parts: list[Samples]) -> bool:
    return any(bool(np.any(part != part[0])) for part in parts)


def _is_short(decoder: _Decoder, frames: int) -> bool:
    return frames <= _KEPT_S * decoder.rate_hz and frames * decoder.channels <= _KEPT_VALUES


def _division(rate_hz: int) -> int:
    """Return the whole number to divide the rate by, 1 where it is low enough or cannot be divided."""
    least = -(-rate_hz // _HIGHEST_RATE_HZ)
    exact = (d for d in range(least, 2 * least + 1) if rate_hz % d == 0)
    return next(exact, 1)


def _divided(samples: Samples, rate_hz: int, division: int) -> Samples:
    if division == 1:
        return samples
    import soxr

    divided: Samples = soxr.resample(samples, rate_hz * division, rate_hz)
    return divided


def _resampled(pieces: Iterator[Samples], rate_hz: int, division: int) -> Iterator[Samples]:
    import soxr

    stream = soxr.ResampleStream(rate_hz * division, rate_hz, 1)
    for piece in pieces:
        yield stream.resample_chunk(piece)
    yield stream.resample_chunk(np.empty(0, np.float32), last=True)


def _all_that_can_be_read(path: Path, decoder: _Decoder, frames: int) -> Samples:
    try:
        return decoder.read(frames)
    except RecordingError:
        with _Decoder(path) as afresh:
            return np.concatenate([np.empty((0, afresh.channels), np.float32), *_salvaged(afresh, frames)])


def _salvaged(decoder: _Decoder, frames: int) -> Iterator[Samples]:
    """Yield small pieces until the file ends, is damaged, or `frames` have been read."""
    try:
        while frames > 0 and len(piece := decoder.read(min(_SALVAGE_FRAMES, frames))):
            yield piece
            frames -= len(piece)
    except RecordingError:
        return


def _probes(decoder: _Decoder, frames: int) -> Iterator[Samples]:
    length = int(_PROBE_S * decoder.rate_hz)
    for start in np.linspace(0, frames - length, _PROBES).astype(int):
        decoder.seek(int(start))
        yield decoder.read(length)


def _first_sound(decoder: _Decoder, frames: int) -> Samples:
    """Return the first stretch that is not silent."""
    decoder.seek(0)
    shortest = int(SHORTEST_S * decoder.rate_hz) + 1
    while frames > shortest:
        piece = _mended(decoder.read(min(frames, decoder.chunk_frames)))
        frames -= len(piece)
        if len(piece) < shortest:
            break
        if _sounds([piece]):
            return piece
    raise RecordingError("silent: every sample is the same; check which microphone was recording")


def _has_bad_samples(samples: Samples) -> bool:
    return not bool(np.all(np.abs(samples) <= _LARGEST_SAMPLE))


def _mended(samples: Samples) -> Samples:
    """Put zero in place of whatever is no number or absurdly large."""
    if not _has_bad_samples(samples):
        return samples
    return np.where(np.abs(samples) <= _LARGEST_SAMPLE, samples, np.float32(0.0))


def _cautions(decoder: _Decoder, choice: Choice, *, found: int, bad: bool) -> tuple[str, ...]:
    cautions = []
    if choice.reason is not None:
        cautions.append(f"used channel {choice.channel + 1} of {decoder.channels} ({choice.reason})")
    if choice.clipped_share > LEAST_CLIPPED_SHARE:
        share = f"{100.0 * choice.clipped_share:.2g} %"
        cautions.append(f"clipped: {share} of samples at full scale; record with less gain")
    if decoder.falls_short(found):
        cautions.append("cut off: the file is shorter than its header says; copy or record it again")
    if bad:
        cautions.append("damaged: samples that are no numbers were replaced by silence")
    return tuple(cautions)


def _changed(frame: int, rate_hz: int) -> str:
    return f"damaged at {frame / rate_hz:.1f} s, or changed while it was read; copy or record it again"


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
