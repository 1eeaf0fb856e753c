"""General-purpose pitch trackers, each asked for the one frequency of a steady tone.

Conventions: samples (samples,) in, Hz out, NaN where a tracker hears no pitch. Each is given the range of the
program's own search and otherwise its published defaults; the answer is the median of its frames, which a
few frames at the edges do not move.
"""

from collections.abc import Callable, Mapping

import librosa
import numpy as np
import parselmouth
from numpy.typing import NDArray

Samples = NDArray[np.float32]
Tracker = Callable[[Samples, int], float]

LOWEST_HZ = 90.0
HIGHEST_HZ = 3400.0


def yin(samples: Samples, rate_hz: int) -> float:
    """Return the pitch by librosa's YIN (de Cheveigné & Kawahara, JASA 111, 1917 (2002))."""
    return _median(librosa.yin(samples, fmin=LOWEST_HZ, fmax=HIGHEST_HZ, sr=rate_hz))


def pyin(samples: Samples, rate_hz: int) -> float:
    """Return the pitch by librosa's pYIN (Mauch & Dixon, ICASSP 2014)."""
    track, _, _ = librosa.pyin(samples, fmin=LOWEST_HZ, fmax=HIGHEST_HZ, sr=rate_hz)
    return _median(track)


def praat(samples: Samples, rate_hz: int) -> float:
    """Return the pitch by Praat's autocorrelation (Boersma, IFA Proc. 17, 97 (1993))."""
    sound = parselmouth.Sound(samples.astype(np.float64), sampling_frequency=rate_hz)
    track = sound.to_pitch_ac(pitch_floor=LOWEST_HZ, pitch_ceiling=HIGHEST_HZ)
    return _median(track.selected_array["frequency"])


TRACKERS: Mapping[str, Tracker] = {"YIN": yin, "pYIN": pyin, "Praat": praat}


def _median(track: NDArray[np.float64]) -> float:
    heard = track[np.isfinite(track) & (track > 0.0)]
    return float(np.median(heard)) if len(heard) else float("nan")
