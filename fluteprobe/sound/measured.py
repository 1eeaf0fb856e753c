"""One steady stretch taken apart: pitch, partials, and the noise that they leave.

Conventions: amplitudes are peak values of full scale ±1; frequencies in Hz; ratios in dB are of power.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fluteprobe.sound.partials import (
    Samples,
    amplitudes,
    demodulate,
    orders_below_nyquist,
    standing,
    undimmed,
    without_partials,
)
from fluteprobe.sound.pitch import Pitch, measure_pitch, phase_track
from fluteprobe.sound.quantile import median, quantile

Floats = NDArray[np.float64]

_EVEN = 0.55
_EVEN_DB = 10.0
_HELD_CENTS = 6.0  # wanders less: a room that fades a tone in and out leaves its pitch, noise does not


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Measured:
    """Pitch, partial amplitudes (orders,), what is left without the partials (samples,), and evenness.

    `evenness` is the strongest partial's level that nine tenths of its frames exceed, over its median: near 1
    for a tone, 0.39 for a resonance that only noise stirs (its level is Rayleigh distributed).
    """

    pitch: Pitch
    orders: Floats
    amplitude: Floats
    residual: Samples
    evenness: float

    @property
    def sounds(self) -> bool:
        """Whether there is a tone: a partial that noise alone would not make."""
        uneven = self.evenness < _EVEN and self.harmonic_to_noise_db < _EVEN_DB
        stirred = uneven and self.pitch.wander_cents > _HELD_CENTS
        return bool(np.any(self.amplitude > 0.0)) and not stirred

    @property
    def harmonic_to_noise_db(self) -> float:
        """Power of all partials over the power of the rest, in dB."""
        noise = float(np.mean(self.residual.astype(np.float64) ** 2)) + 1e-20
        return float(10.0 * np.log10((0.5 * np.sum(self.amplitude**2) + 1e-20) / noise))


def take_apart(samples: Samples, rate_hz: int, frequency_hz: float) -> Measured:
    """Measure a steady stretch whose fundamental is known within a few cents."""
    tracks = demodulate(samples, rate_hz, frequency_hz, orders_below_nyquist(rate_hz, frequency_hz))
    pitch = measure_pitch(phase_track(tracks))
    phase = pitch.curve.phase(tracks.time_s)
    still = undimmed(standing(tracks, phase), phase)
    amplitude = amplitudes(still)
    level = np.abs(still.phasors[:, int(np.argmax(amplitude))])
    return Measured(
        pitch=pitch,
        orders=tracks.orders,
        amplitude=amplitude,
        residual=without_partials(samples, still, pitch.curve.phase, amplitude > 0.0),
        evenness=quantile(level, 0.1) / (median(level) + 1e-20),
    )
