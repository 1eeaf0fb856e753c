"""A short clip of a recording as compressed sound, for pages that play it.

Conventions: times in seconds from the start of the recording. A clip is MPEG layer III, one channel, 24 kHz,
which every browser plays, and the same samples give the same bytes (Ogg numbers its streams at random).
"""

import io

import numpy as np
import soundfile
import soxr
from numpy.typing import NDArray

from fluteprobe.sound.recording import Recording, RecordingError

CLIP_RATE_HZ = 24_000
LONGEST_CLIP_S = 2.0
MIME_TYPE = "audio/mpeg"

_PEAK = 0.35  # of full scale, for all clips alike: none startles after another
_RISE_S = 0.03
_FALL_S = 0.12


def compressed(recording: Recording, start_s: float, end_s: float) -> bytes:
    """Return a part of a recording, two seconds at most, faded in and out, all clips as loud as one another.

    Raises
    ------
    ValueError
        If the part is empty or not within the recording.
    RecordingError
        If the recording cannot be read, or if this machine's libsndfile writes no MP3.
    """
    if not 0.0 <= start_s < end_s <= recording.duration_s + 1.0 / recording.rate_hz:
        raise ValueError(f"{start_s} to {end_s} s is no part of a recording of {recording.duration_s} s")
    if "MP3" not in soundfile.available_formats():
        raise RecordingError("no sound can be put into the page: this machine's libsndfile writes no MP3")
    start = int(start_s * recording.rate_hz)
    stop = min(int(min(end_s, start_s + LONGEST_CLIP_S) * recording.rate_hz), recording.frames)
    samples = soxr.resample(recording.read(start, stop), recording.rate_hz, CLIP_RATE_HZ)
    target = io.BytesIO()
    soundfile.write(target, _levelled(_faded(samples)), CLIP_RATE_HZ, format="MP3")
    return target.getvalue()


def _faded(samples: NDArray[np.float32]) -> NDArray[np.float32]:
    """Return samples that swell from and sink to silence along half a cosine."""
    rise, fall = (min(int(time * CLIP_RATE_HZ), len(samples) // 2) for time in (_RISE_S, _FALL_S))
    faded = samples.astype(np.float32, copy=True)
    faded[:rise] *= _swell(rise)
    faded[len(faded) - fall :] *= _swell(fall)[::-1]
    return faded


def _swell(length: int) -> NDArray[np.float32]:
    return (0.5 - 0.5 * np.cos(np.pi * np.arange(length) / max(length, 1))).astype(np.float32)


def _levelled(samples: NDArray[np.float32]) -> NDArray[np.float32]:
    peak = float(np.max(np.abs(samples), initial=0.0))
    return samples if peak <= 0.0 else (samples * (_PEAK / peak)).astype(np.float32)
