"""Files as phones and cameras write them, encoded by PyAV: `written(path, samples, rate_hz, codec=…)`."""

from collections.abc import Callable
from fractions import Fraction
from pathlib import Path
from typing import cast

import av
import numpy as np
from av import AudioStream, VideoStream
from av.container import OutputContainer
from numpy.typing import NDArray

Samples = NDArray[np.float64]

_PIECE = 4096
_FRAMES_A_SECOND = 25


def written(
    path: Path,
    samples: Samples,
    rate_hz: int,
    codec: str = "aac",
    *,
    kind: str | None = None,
    bit_rate: int | None = None,
    tracks: tuple[float, ...] = (1.0,),
    video: str | None = None,
    options: dict[str, str] | None = None,
) -> Path:
    """Encode samples of shape (frames,) or (frames, channels) and return the path.

    There is a sound track for each of `tracks`, a factor that its samples are multiplied by. `kind` is the
    container where the name's ending does not tell it.
    """
    columns = samples.reshape(len(samples), -1).T.astype(np.float32)
    layout = {1: "mono", 2: "stereo", 6: "5.1", 8: "7.1"}[len(columns)]
    with av.open(str(path), "w", format=kind, container_options=options or {}) as container:
        film = None if video is None else _camera(container, video)
        made = [container.add_stream(codec, rate=rate_hz, layout=layout) for _ in tracks]
        streams = [cast(AudioStream, stream) for stream in made]
        for stream, factor in zip(streams, tracks, strict=True):
            if bit_rate is not None:
                stream.bit_rate = bit_rate
            resampler = av.AudioResampler(format=stream.format, layout=layout, rate=rate_hz)
            for frame in [*_frames(factor * columns, layout, rate_hz), None]:
                for ready in resampler.resample(frame):
                    container.mux(stream.encode(ready))
            container.mux(stream.encode(None))
        if film is not None:
            _expose(container, film, seconds=len(samples) / rate_hz)
    return path


def copied(path: Path, to: Path, keep: Callable[[float], bool]) -> Path:
    """Copy the packets of the times in s that are to be kept, without decoding, as quick editors do."""
    with av.open(str(path)) as old, av.open(str(to), "w") as new:
        copies = {stream.index: new.add_stream_from_template(stream) for stream in old.streams}
        for packet in old.demux():
            if packet.dts is not None and keep(float(packet.dts * packet.time_base)):
                packet.stream = copies[packet.stream_index]
                new.mux(packet)
    return to


def _frames(columns: NDArray[np.float32], layout: str, rate_hz: int) -> list[av.AudioFrame]:
    frames = []
    for start in range(0, columns.shape[1], _PIECE):
        piece = np.ascontiguousarray(columns[:, start : start + _PIECE].T.reshape(1, -1))
        frame = av.AudioFrame.from_ndarray(piece, format="flt", layout=layout)
        frame.sample_rate, frame.pts, frame.time_base = rate_hz, start, Fraction(1, rate_hz)
        frames.append(frame)
    return frames


def _camera(container: OutputContainer, codec: str) -> VideoStream:
    stream = cast(VideoStream, container.add_stream(codec, rate=_FRAMES_A_SECOND))
    stream.width, stream.height, stream.pix_fmt = 64, 48, "yuv420p"
    return stream


def _expose(container: OutputContainer, stream: VideoStream, seconds: float) -> None:
    """Film something that grows lighter."""
    for number in range(round(seconds * _FRAMES_A_SECOND)):
        grey = np.full((48, 64, 3), 2 * number % 256, np.uint8)
        frame = av.VideoFrame.from_ndarray(grey, format="rgb24")
        frame.pts, frame.time_base = number, Fraction(1, _FRAMES_A_SECOND)
        container.mux(stream.encode(frame))
    container.mux(stream.encode(None))
