"""Any sound file becomes samples: one channel, float32, full scale at ±1.

Conventions: `frames`, `start` and `stop` count samples of one channel at the recording's own `rate_hz`;
channels count from 0, but from 1 in words for people. Files are opened read-only. What a file holds is found
out by trying to decode it, never from its name.

Recordings of up to a minute are decoded once and kept; longer ones are read from the file whenever samples
are asked for, so that memory does not grow with length.
"""

import os
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from fluteprobe.sound.channels import LEAST_CLIPPED_SHARE, Choice, choose_channel
from fluteprobe.sound.decoding import (
    DAMAGED,
    LONGEST_S,
    TOO_LONG,
    Decoder,
    RecordingError,
    Samples,
    UnknownKindError,
)
from fluteprobe.sound.soundfiles import SoundFileDecoder

__all__ = ["LOWEST_RATE_HZ", "SHORTEST_S", "Recording", "RecordingError", "Samples", "open_recording"]

LOWEST_RATE_HZ = 8000
SHORTEST_S = 0.1

_HIGHEST_RATE_HZ = 50_000  # recordings above it are given out at a division of their rate
_KEPT_S = 60.0
_KEPT_VALUES = 2**25  # over all channels, 128 MiB as float32
_SALVAGE_FRAMES = 1024
_PROBES = 12
_PROBE_S = 0.25
_RESAMPLING_MARGIN = 256  # samples at the lower rate; soxr's filter is shorter
_LARGEST_SAMPLE = 1e6  # beyond it a float is no sound but damage


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
    _again: Callable[[], Decoder] = field(repr=False)

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
        with self._again() as decoder:
            pieces = self._own_rate(decoder)
            if self._division > 1:
                pieces = _resampled(pieces, self.rate_hz, self._division)
            left = self.frames
            for piece in pieces:
                yield piece[:left]
                left -= min(len(piece), left)

    def _own_rate(self, decoder: Decoder) -> Iterator[Samples]:
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
        with self._again() as decoder:
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
    with _opened(path) as decoder:
        _check_rate(decoder)
        if _is_short(decoder, decoder.frames):
            return _keep(path, decoder, decoder.frames)
        if decoder.reaches(decoder.frames - 1):
            return _stream(path, decoder, decoder.frames)
    return _open_damaged(path, decoder.again)


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


def _opened(path: Path) -> Decoder:
    """Open a file with the decoder that can read it, found out by trial."""
    try:
        return SoundFileDecoder(path)
    except UnknownKindError as fault:
        from fluteprobe.sound.phone import open_phone

        return open_phone(path, fault)


def _open_damaged(path: Path, again: Callable[[], Decoder]) -> Recording:
    """Open a long recording that cannot be decoded to its announced end, as far as it can."""
    with again() as decoder:
        frames = sum(len(piece) for piece in _salvaged(decoder, decoder.frames))
    with again() as decoder:  # after a fault, libsndfile does not go back
        return (_keep if _is_short(decoder, frames) else _stream)(path, decoder, frames)


def _keep(path: Path, decoder: Decoder, frames: int) -> Recording:
    """Decode the whole recording and keep the chosen channel."""
    samples = _all_that_can_be_read(decoder, frames)
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
        _again=decoder.again,
    )


def _stream(path: Path, decoder: Decoder, frames: int) -> Recording:
    """Look at a dozen probes of a long recording and leave the rest in the file."""
    if frames > LONGEST_S * decoder.rate_hz:
        raise RecordingError(TOO_LONG)
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
        _again=decoder.again,
    )


def _check_rate(decoder: Decoder) -> None:
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


def _is_short(decoder: Decoder, frames: int) -> bool:
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


def _all_that_can_be_read(decoder: Decoder, frames: int) -> Samples:
    try:
        return decoder.read(frames)
    except RecordingError:
        with decoder.again() as afresh:
            return np.concatenate([np.empty((0, afresh.channels), np.float32), *_salvaged(afresh, frames)])


def _salvaged(decoder: Decoder, frames: int) -> Iterator[Samples]:
    """Yield small pieces until the file ends, is damaged, or `frames` have been read."""
    try:
        while frames > 0 and len(piece := decoder.read(min(_SALVAGE_FRAMES, frames))):
            yield piece
            frames -= len(piece)
    except RecordingError:
        return


def _probes(decoder: Decoder, frames: int) -> Iterator[Samples]:
    """Yield a dozen stretches spread over the recording; fewer where it is damaged."""
    length = int(_PROBE_S * decoder.rate_hz)
    for start in np.linspace(0, frames - length, _PROBES).astype(int):
        decoder.seek(int(start))
        if len(probe := decoder.read(length)) >= SHORTEST_S * decoder.rate_hz:
            yield probe


def _first_sound(decoder: Decoder, frames: int) -> Samples:
    """Return the first stretch that is not silent."""
    decoder.seek(0)
    shortest = int(SHORTEST_S * decoder.rate_hz) + 1
    while frames > shortest:
        piece = _mended(decoder.read(min(frames, decoder.chunk_frames)))
        frames -= len(piece)
        if len(piece) < shortest:
            raise RecordingError(DAMAGED)
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


def _cautions(decoder: Decoder, choice: Choice, *, found: int, bad: bool) -> tuple[str, ...]:
    cautions = []
    if choice.reason is not None:
        cautions.append(f"used channel {choice.channel + 1} of {decoder.channels} ({choice.reason})")
    if choice.clipped_share > LEAST_CLIPPED_SHARE:
        share = f"{100.0 * choice.clipped_share:.2g} %"
        cautions.append(f"clipped: {share} of samples at full scale; record with less gain")
    cautions += decoder.cautions(found)
    if bad:
        cautions.append("damaged: samples that are no numbers were replaced by silence")
    return tuple(cautions)


def _changed(frame: int, rate_hz: int) -> str:
    return f"damaged at {frame / rate_hz:.1f} s, or changed while it was read; copy or record it again"
