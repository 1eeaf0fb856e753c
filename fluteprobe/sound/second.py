"""A second opinion on a tone's pitch: librosa's pYIN reads it too, and the two readings are compared.

Conventions: frequencies in Hz; differences in cents, positive where pYIN hears higher; `scatter_cents` is by
how much pYIN's mean may be off: twice the standard error of its frames' mean, and one step of its grid.

pYIN (Mauch & Dixon, ICASSP 2014) knows nothing of our reading but the range that it searches, more than a
twelfth to either side, so that it can disagree about the octave. librosa is imported when it is asked. Its
first use after installation compiles for some 15 s; where it cannot keep what it compiled, it may not run.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.partials import Samples
from fluteprobe.sound.pitch import CENTS

Floats = NDArray[np.float64]

STEP_CENTS = 10.0
GRID_HZ = 440.0  # its grid stands on this, not on our reading
REACH = 3.2

_PERIODS = 4.0
_FRAME_S = 0.04
_FASTEST_OCTAVES_PER_S = 10.0
_LEAST_RATE_HZ = 32_000  # pYIN counts whole samples of a period first: at low rates it errs by octaves
_SAME_TONE_CENTS = 100.0
_ROUNDING_CENTS = 1e-6
_NEAR_CENTS = 50.0
_INTERVALS = {1200.0: "an octave", 1200.0 * np.log2(3.0): "a twelfth"}


class SecondOpinionError(RuntimeError):
    """librosa cannot be asked here. Its text is one line for people."""


@dataclass(frozen=True, slots=True, kw_only=True)
class SecondOpinion:
    """What pYIN hears in a tone, beside our own reading.

    Attributes
    ----------
    frequency_hz, scatter_cents
        The mean of its frames and by how much that may be off; None where it hears no pitch.
    share
        The share of its frames that hear this pitch (within a semitone), 0 to 1.
    difference_cents
        Its mean over our own reading; None where it hears no pitch.
    """

    frequency_hz: float | None
    scatter_cents: float | None
    share: float
    difference_cents: float | None

    @property
    def differs(self) -> bool:
        """Whether the two readings differ by more than pYIN's scatter."""
        if self.difference_cents is None or self.scatter_cents is None:
            return True
        return abs(self.difference_cents) - self.scatter_cents > _ROUNDING_CENTS

    @property
    def interval(self) -> str | None:
        """The interval in words, "an octave above" or the like, if that is what they differ by."""
        if self.difference_cents is None:
            return None
        for size, words in _INTERVALS.items():
            if abs(abs(self.difference_cents) - size) < _NEAR_CENTS:
                return f"{words} {'above' if self.difference_cents > 0.0 else 'below'}"
        return None


def second_opinion(samples: Samples, rate_hz: int, frequency_hz: float) -> SecondOpinion:
    """Ask pYIN about one steady tone that we read as `frequency_hz`.

    Parameters
    ----------
    samples
        The steady tone, shape (samples,).

    Raises
    ------
    SecondOpinionError
        If librosa is not installed or cannot run here.
    """
    track = _track(samples, rate_hz, frequency_hz)
    heard = CENTS * np.log(track[np.isfinite(track)] / frequency_hz)
    if not len(heard):
        return SecondOpinion(frequency_hz=None, scatter_cents=None, share=0.0, difference_cents=None)
    same = heard[np.abs(heard - np.median(heard)) < _SAME_TONE_CENTS]
    mean = float(np.mean(same))
    return SecondOpinion(
        frequency_hz=float(frequency_hz * np.exp(mean / CENTS)),
        scatter_cents=STEP_CENTS + 2.0 * standard_error(same),
        share=len(same) / len(track),
        difference_cents=mean,
    )


def standard_error(values: Floats) -> float:
    """Return the standard error of the mean of neighbouring values that may resemble each other.

    With a correlation r of neighbours, n values count as n (1 - r) / (1 + r) independent ones (for a
    first-order process: Bayley & Hammersley, J. R. Statist. Soc. Suppl. 8, 184 (1946)).
    """
    count = len(values)
    if count < 3 or np.ptp(values) < 1e-9:
        return 0.0
    off = values - values.mean()
    alike = float(np.clip(off[1:] @ off[:-1] / (off @ off), 0.0, 0.95))
    independent = max(count * (1.0 - alike) / (1.0 + alike), 1.0)
    return float(np.std(values, ddof=1) / np.sqrt(independent))


def _track(samples: Samples, rate_hz: int, frequency_hz: float) -> Floats:
    """Return pYIN's pitches (frames,), NaN where it hears none, the frames at the edges left out."""
    raised = -(-_LEAST_RATE_HZ // rate_hz)
    semitones = np.floor(12.0 * np.log2(frequency_hz / REACH / GRID_HZ))
    lowest_hz, highest_hz = GRID_HZ * 2.0 ** (semitones / 12.0), min(frequency_hz * REACH, 0.45 * rate_hz)
    length = int(2 ** np.ceil(np.log2(raised * rate_hz * max(_PERIODS / lowest_hz, _FRAME_S))))
    try:
        import librosa

        if raised > 1:
            samples = librosa.resample(samples, orig_sr=rate_hz, target_sr=raised * rate_hz)
        track, _, _ = librosa.pyin(
            samples,
            fmin=lowest_hz,
            fmax=highest_hz,
            sr=raised * rate_hz,
            frame_length=length,
            hop_length=length // 2,
            max_transition_rate=_FASTEST_OCTAVES_PER_S,
            resolution=STEP_CENTS / 100.0,
        )
    except (ImportError, RuntimeError, OSError) as error:
        reason = (str(error).splitlines() or [type(error).__name__])[0]
        raise SecondOpinionError(f"librosa cannot be asked here ({reason})") from error
    inner = track[1:-1] if len(track) > 4 else track
    return np.asarray(inner, dtype=np.float64)
