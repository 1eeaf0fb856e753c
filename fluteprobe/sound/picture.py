"""librosa's constant-Q picture of a tone and what is around it, on request.

Conventions: frequencies in Hz, levels in dB re the picture's strongest value. librosa is imported when it is
asked; its first use after installation compiles for some 15 s. Bins are a quarter-tone wide (a constant-Q
transform: Brown, JASA 89, 425 (1991)), so that partials, breath bumps and hum can be told by eye at once.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.partials import Samples
from fluteprobe.sound.second import SecondOpinionError

Floats = NDArray[np.float64]

BINS_PER_OCTAVE = 24
RANGE_DB = 70.0

_LOWEST_RATIO = 0.3
_MOST_OCTAVES = 5.0
_HIGHEST_SHARE = 0.4
_SHORTEST_S = 1.5
_HOP_S = 0.012
_HOP_UNIT = 64  # the transform halves the rate once an octave, and the hop with it


@dataclass(frozen=True, slots=True, kw_only=True)
class Picture:
    """Levels (bins, frames), low bins first, and where the lowest bin begins and the highest ends."""

    level_db: Floats
    lowest_hz: float
    highest_hz: float


def constant_q(samples: Samples, rate_hz: int, frequency_hz: float) -> Picture:
    """Return the picture of some samples, from a third of a tone's frequency up to five octaves higher.

    Raises
    ------
    SecondOpinionError
        If librosa is not installed or cannot run here.
    """
    lowest_hz = _LOWEST_RATIO * frequency_hz
    octaves = min(_MOST_OCTAVES, float(np.log2(_HIGHEST_SHARE * rate_hz / lowest_hz)))
    bins = max(int(octaves * BINS_PER_OCTAVE), 1)
    level = _transform(samples, rate_hz, lowest_hz, bins)
    level_db = 20.0 * np.log10(level / max(float(level.max()), 1e-12) + 1e-12)
    half = 2.0 ** (0.5 / BINS_PER_OCTAVE)
    return Picture(
        level_db=np.maximum(level_db, -RANGE_DB).astype(np.float64),
        lowest_hz=lowest_hz / half,
        highest_hz=lowest_hz / half * 2.0 ** (bins / BINS_PER_OCTAVE),
    )


def _transform(samples: Samples, rate_hz: int, lowest_hz: float, bins: int) -> Floats:
    """Return magnitudes (bins, frames); a short tone is followed by silence, as the transform asks for."""
    hop = max(round(_HOP_S * rate_hz / _HOP_UNIT), 1) * _HOP_UNIT
    padded = np.pad(samples, (0, max(int(_SHORTEST_S * rate_hz) - len(samples), 0)))
    try:
        import librosa

        picture = librosa.cqt(
            padded, sr=rate_hz, hop_length=hop, fmin=lowest_hz, n_bins=bins, bins_per_octave=BINS_PER_OCTAVE
        )
    except (ImportError, RuntimeError, OSError) as error:
        reason = (str(error).splitlines() or [type(error).__name__])[0]
        raise SecondOpinionError(f"librosa cannot be asked here ({reason})") from error
    return np.asarray(np.abs(picture[:, : len(samples) // hop + 1]), dtype=np.float64)
