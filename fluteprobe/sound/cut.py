"""Parts of a long recording become sound files of their own, with nothing lost and nothing added.

Conventions: times in seconds from the start of the recording; a frame is one sample of every channel, at the
file's own rate. A part has the same rate and the same channels as the recording, and the same samples: whole
numbers of up to 24 bits go into FLAC, all else into WAV; of a lossy recording it is what decoding it gave.
The recording is only read.
"""

import io
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import soundfile
from numpy.typing import NDArray

from fluteprobe.sound.decoding import Decoder, RecordingError, open_read_only
from fluteprobe.sound.recording import Recording

_BLOCK_FRAMES = 2**16
_LEAD_S = 0.5
_MOST_FLAC_CHANNELS = 8
_HIGHEST_FLAC_RATE_HZ = 655_350
_FLAC_SUBTYPES = {"PCM_S8": "PCM_S8", "PCM_U8": "PCM_S8", "PCM_16": "PCM_16", "PCM_24": "PCM_24"}
_FULL_SCALE = 2.0**31
# float32 holds 24 bits: what has more of them is read in its own kind.
_WIDE_SUBTYPES = {"PCM_32": "int32", "DOUBLE": "float64"}

Frames = NDArray[np.int32] | NDArray[np.float32] | NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class PartFormat:
    """What kind of file holds a part: the ending of its name, and libsndfile's words for the rest."""

    suffix: str
    container: str
    subtype: str


def part_format(recording: Recording) -> PartFormat:
    """Return the kind of file that holds any part of a recording without loss."""
    subtype = _FLAC_SUBTYPES.get(recording.codec)
    if subtype is not None and _fits_flac(recording):
        return PartFormat(suffix=".flac", container="FLAC", subtype=subtype)
    subtype = recording.codec if recording.codec in {*_FLAC_SUBTYPES, *_WIDE_SUBTYPES} else "FLOAT"
    return PartFormat(suffix=".wav", container="WAV", subtype="PCM_U8" if "8" in subtype else subtype)


def part_of(recording: Recording, start_s: float, end_s: float) -> bytes:
    """Return a part of a recording as a whole sound file of the kind that `part_format` says.

    Raises
    ------
    ValueError
        If the part is empty or not within the recording.
    RecordingError
        If the recording cannot be read there.
    """
    if not 0.0 <= start_s < end_s <= recording.duration_s + 1.0 / recording.rate_hz:
        raise ValueError(f"{start_s} to {end_s} s is no part of a recording of {recording.duration_s} s")
    kind, rate_hz = part_format(recording), own_rate_hz(recording)
    target = io.BytesIO()
    with soundfile.SoundFile(
        target, "w", rate_hz, recording.channels, subtype=kind.subtype, format=kind.container
    ) as file:
        for frames in _frames(recording, round(start_s * rate_hz), round(end_s * rate_hz)):
            file.write(_whole(frames) if kind.subtype in _FLAC_SUBTYPES else frames)
    return target.getvalue()


def own_rate_hz(recording: Recording) -> int:
    """Return the file's own sampling rate, of which the recording's may be a division."""
    with recording._again() as decoder:
        return decoder.rate_hz


def _fits_flac(recording: Recording) -> bool:
    return recording.channels <= _MOST_FLAC_CHANNELS and own_rate_hz(recording) <= _HIGHEST_FLAC_RATE_HZ


def _frames(recording: Recording, first: int, last: int) -> Iterator[Frames]:
    """Yield the frames from first to last (excluded), or to the recording's end, block by block."""
    if recording.codec in _WIDE_SUBTYPES:
        yield from _wide_frames(recording, first, last)
        return
    with recording._again() as decoder:
        if recording.lossy:
            yield _lossy_frames(decoder, first, last)
            return
        decoder.seek(first)
        while first < last and len(frames := decoder.read(min(_BLOCK_FRAMES, last - first))):
            yield frames
            first += len(frames)


def _lossy_frames(decoder: Decoder, first: int, last: int) -> NDArray[np.float32]:
    """Return frames of a lossy recording, in one go from half a second before.

    An MP3 decoder needs what came before to find into the sound; so it does after each read, for soundfile
    seeks then. Without this the first 70 ms would be silent.
    """
    lead = min(first, int(_LEAD_S * decoder.rate_hz))
    decoder.seek(first - lead)
    return decoder.read(last - first + lead)[lead:]


def _wide_frames(recording: Recording, first: int, last: int) -> Iterator[Frames]:
    descriptor = open_read_only(recording.path)
    try:
        with soundfile.SoundFile(descriptor, closefd=True) as file:
            file.seek(first)
            left = min(last, file.frames) - first
            wide = _WIDE_SUBTYPES[recording.codec]
            yield from file.blocks(_BLOCK_FRAMES, frames=left, dtype=wide, always_2d=True)
    except soundfile.LibsndfileError:
        raise RecordingError("damaged: it cannot be read to its end; copy or record it again") from None


def _whole(frames: Frames) -> NDArray[np.int32]:
    """Return decoded samples as the whole numbers they were, in the upper bits of 32."""
    return np.rint(frames.astype(np.float64) * _FULL_SCALE).astype(np.int32)
