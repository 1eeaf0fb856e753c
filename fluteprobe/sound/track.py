"""The sound track of a phone's or camera's file, packet by packet, through PyAV (extra `phone`).

Conventions: `stamp` is a time stamp in the track's own time base; a gap counts the frames that are missing
before a frame by the file's own clock, where packets were lost or damaged. PyAV is loaded where it is used.
"""

import os
from collections.abc import Iterator, Sequence
from itertools import chain
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from fluteprobe.sound.boxes import fault_of, is_unfinished
from fluteprobe.sound.decoding import NO_SOUND_FOUND, PROTECTED, RecordingError, Samples, open_read_only

if TYPE_CHECKING:
    from av import AudioFrame, AudioStream, CodecContext, Packet
    from av.container import InputContainer

Timed = tuple[int, "AudioFrame"]  # the gap before it, and what the decoder gave

_CONTAINERS = "mov,matroska,aac,amr,caf,asf,avi"  # of those whose tracks are known when they are opened
_CODECS = (
    "aac,aac_latm,alac,amrnb,amrwb,opus,vorbis,mp2float,mp3float,mp2,mp3,ac3,eac3,flac,qcelp,evrc,"
    "wmav1,wmav2,wmapro,wmalossless,wmavoice,adpcm_ima_qt,adpcm_ima_wav,adpcm_ms,pcm_alaw,pcm_mulaw,pcm_u8,"
    "pcm_s8,pcm_s16le,pcm_s16be,pcm_s24le,pcm_s24be,pcm_s32le,pcm_s32be,pcm_f32le,pcm_f32be,pcm_f64le,pcm_f64be"
)
_PROTECTED_TAGS = ("drms", "drmi", "enca")
_TRUE_DURATIONS = ("mov", "matroska", "asf", "avi")  # the others are guessed from the file's size
_SHORT_BY_S = 0.2
_SHORT_BESIDE_VIDEO_S = 1.0

_MOST_CHANNELS = 64
_LEAST_GAP_S = 0.01
_SURE_GAP_S = 0.25  # clocks of phones jitter by less
_LONGEST_GAP_S = 10.0  # longer ones are cuts, or nonsense
_LONGEST_ALAC_PACKET = 2**16

_OVERHEAD = 2  # packets hold fewer bytes than the file; some kinds strip what is the same in each
_UNFINISHED = "cut off: the recorder did not finish this file, so its index is missing; record it again"
_KINDS: dict[str, tuple[type[np.generic], float, float]] = {
    "u8": (np.uint8, 128.0, 2.0**-7),
    "s16": (np.int16, 0.0, 2.0**-15),
    "s32": (np.int32, 0.0, 2.0**-31),
    "s64": (np.int64, 0.0, 2.0**-63),
    "flt": (np.float32, 0.0, 1.0),
    "dbl": (np.float64, 0.0, 1.0),
}


class Track:
    """The sound track of an open file, packet by packet; every fault comes out as a RecordingError.

    Attributes
    ----------
    rate_hz, channels
        Those of the first frame; 0 before it is decoded.
    number, of
        Which of the file's sound tracks it is, from 0, and how many there are.
    codec
        How the samples are held, in FFmpeg's word.
    is_damaged
        Whether packets amid the sound that was read so far could not be decoded.
    """

    def __init__(self, path: Path, *, is_checked: bool = False) -> None:
        self._descriptor = open_read_only(path)
        try:
            if not is_checked and (fault := fault_of(self._descriptor)) is not None:
                raise RecordingError(fault)
            self._open()
        except BaseException:
            os.close(self._descriptor)
            raise
        tracks = self._container.streams.audio
        self.number, self.of = tracks.index(self._stream), len(tracks)
        self.codec: str = self._stream.codec_context.codec.canonical_name
        self.rate_hz, self.channels = 0, 0
        self.is_damaged, self._is_cut = False, False

    def falls_short_of(self, found_s: float) -> bool:
        """Return whether the file ended amid its sound, or announces more than was found."""
        announced_s, by_s = _announced(self._container, self._stream)
        return self._is_cut or announced_s - found_s > by_s

    def frames_from_the_start(self) -> Iterator[Timed]:
        """Yield all frames, from the first one on."""
        if not self._is_fresh:
            self._container.close()
            self._open()
        return self.frames()

    def frames_from(self, stamp: int) -> Iterator[Timed] | None:
        """Yield the frames from the one with that time stamp on; None if it is not found."""
        from av import FFmpegError

        self._is_fresh = False
        try:
            self._container.seek(stamp, stream=self._stream)
        except FFmpegError:
            return None
        timed = self.frames()
        for _, frame in timed:
            if frame.pts is None or frame.pts > stamp:
                return None
            if frame.pts == stamp:
                return chain([(0, frame)], timed)
        return None

    def frames(self) -> Iterator[Timed]:
        """Yield each frame with how many are missing before it by the file's own clock."""
        end_s, failed = None, False
        for decoded in self._decoded():
            if decoded is None:
                failed = True
                continue
            for frame in decoded:
                if not self._goes_on(frame):
                    self._is_cut = True
                    return
                yield self._gap(frame, end_s, failed), frame
                self.is_damaged, failed = self.is_damaged or failed, False
                end_s = self._end_s(frame)
        self._is_cut = self._is_cut or failed

    def close(self) -> None:
        """Close the file."""
        self._container.close()
        os.close(self._descriptor)

    def _open(self) -> None:
        os.lseek(self._descriptor, 0, os.SEEK_SET)
        self._container = _container(self._descriptor)
        try:
            self._stream = _chosen(self._container)
        except BaseException:
            self._container.close()
            raise
        self._tick_s = float(self._stream.time_base or 0)
        self._is_fresh = True

    def _decoded(self) -> Iterator[Sequence["AudioFrame"] | None]:
        """Yield the frames of each packet; None for a packet that cannot be decoded."""
        from av import FFmpegError

        self._is_fresh = False
        most_bytes = _OVERHEAD * os.fstat(self._descriptor).st_size
        try:
            for packet in self._container.demux(self._stream):
                most_bytes -= packet.size
                if most_bytes < 0:
                    break
                yield _frames_of(packet)
        except (FFmpegError, IndexError):  # PyAV 18 raises the latter where a track turns up late
            most_bytes = -1
        self._is_cut = self._is_cut or most_bytes < 0

    def _goes_on(self, frame: "AudioFrame") -> bool:
        """Return whether a frame is like the first one."""
        if not self.rate_hz:
            self.rate_hz, self.channels = frame.sample_rate, frame.layout.nb_channels
            if not 0 < self.channels <= _MOST_CHANNELS:
                raise RecordingError(f"{self.channels} channels; save the one to measure as WAV or FLAC")
        return frame.sample_rate == self.rate_hz > 0

    def _gap(self, frame: "AudioFrame", end_s: float | None, failed: bool) -> int:
        """Return how many frames of silence keep the time between the last frame's end and this one."""
        if end_s is None or frame.pts is None:
            return 0
        gap_s = frame.pts * self._tick_s - end_s
        least_s = _LEAST_GAP_S if failed else _SURE_GAP_S
        return round(gap_s * self.rate_hz) if least_s < gap_s <= _LONGEST_GAP_S else 0

    def _end_s(self, frame: "AudioFrame") -> float | None:
        return None if frame.pts is None else frame.pts * self._tick_s + frame.samples / self.rate_hz


def samples_of(timed: Timed, channels: int) -> Samples:
    """Return what was decoded, after silence for the gap, shape (frames, channels).

    The last channel stands for those that a later packet lacks.
    """
    gap, frame = timed
    found = _values(frame)
    if found.shape[1] != channels:
        found = found[:, np.minimum(np.arange(channels), found.shape[1] - 1)]
    return np.concatenate([np.zeros((gap, channels), np.float32), found]) if gap else found


def _values(frame: "AudioFrame") -> Samples:
    kind, frames, channels = frame.format.name, frame.samples, frame.layout.nb_channels
    dtype, offset, scale = _KINDS[kind.removesuffix("p")]
    if kind.endswith("p"):
        planes = [np.frombuffer(_plane(frame, k), dtype, frames) for k in range(channels)]
        found = np.array(planes).T  # a column after the other in memory, which is fastest to join
    else:
        found = np.frombuffer(_plane(frame, 0), dtype, frames * channels).reshape(frames, channels)
    if dtype is np.float32:
        return found
    return ((found - np.float64(offset)) * scale).astype(np.float32)


def _container(descriptor: int) -> "InputContainer":
    """Open a file by its descriptor; FFmpeg is to read no other file, and to use no decoder but for sound."""
    import av

    options = {
        "fd": str(descriptor),
        "protocol_whitelist": "fd",
        "format_whitelist": _CONTAINERS,
        "codec_whitelist": _CODECS,
    }
    try:
        return av.open("fd:", container_options=options, metadata_errors="replace")
    except (av.FFmpegError, ValueError):
        words = _UNFINISHED if is_unfinished(descriptor) else NO_SOUND_FOUND
        raise RecordingError(words) from None


def _chosen(container: "InputContainer") -> "AudioStream":
    """Return the sound track that the file prefers, else the first that can be read; pass over all others."""
    from av.stream import Discard, Disposition

    tracks = container.streams.audio
    usable = [track for track in tracks if _fault_of(track) is None]
    if not usable:
        raise RecordingError(_fault_of(tracks[0]) if tracks else _why_no_sound(container))
    chosen = next((track for track in usable if track.disposition & Disposition.default), usable[0])
    for stream in container.streams:
        if stream.index != chosen.index:
            stream.discard = Discard.all
    return chosen


def _fault_of(track: "AudioStream") -> str | None:
    """Return why a sound track cannot be read."""
    context = track.codec_context
    if context is not None and _tag(context) in _PROTECTED_TAGS:
        return PROTECTED
    if context is None or context.codec.name not in _CODECS.split(","):
        return "its kind of sound cannot be read; save it as WAV or FLAC"
    extra = context.extradata or b""
    if context.codec.name == "alac" and int.from_bytes(extra[12:16], "big") > _LONGEST_ALAC_PACKET:
        return NO_SOUND_FOUND
    return None


def _tag(context: "CodecContext") -> str:
    try:
        return context.codec_tag
    except UnicodeDecodeError:
        return ""


def _why_no_sound(container: "InputContainer") -> str:
    if container.streams.video:
        return "a video without sound; film it with the microphone on"
    return "no sound in this file; pick the recording itself"


def _announced(container: "InputContainer", track: "AudioStream") -> tuple[float, float]:
    """Return how long the header says the sound is, in s, 0 if it does not say, and what it may err by."""
    kind = container.format.name
    if kind.startswith("mov") and track.duration and track.time_base:
        return float(track.duration * track.time_base), _SHORT_BY_S
    if kind.startswith(_TRUE_DURATIONS) and container.duration:
        return container.duration / 1e6, _SHORT_BESIDE_VIDEO_S
    return 0.0, 0.0


def _frames_of(packet: "Packet[AudioStream]") -> Sequence["AudioFrame"] | None:
    """Return what a packet holds; None where it cannot be decoded."""
    from av import FFmpegError

    try:
        return None if packet.is_corrupt else [frame for frame in packet.decode() if frame.samples > 0]
    except FFmpegError:
        return None


def _plane(frame: "AudioFrame", number: int) -> memoryview:
    """Return one plane's bytes: with eight planes or more, PyAV 18's `frame.planes` reads past the last."""
    from av.audio.plane import AudioPlane

    return memoryview(AudioPlane(frame, number))
