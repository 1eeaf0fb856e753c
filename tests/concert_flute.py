"""Ten recordings of a concert flute, from the General-MIDI sample bank that the package pretty_midi ships.

Every recording carries its maker's root key and tuning correction, and a loop. A loop holds a whole number
of cycles, so played round it has an exactly known mean frequency: cycles × rate / length. The names in the
bank are an octave up for most samples; root keys and measured frequencies agree.

Conventions: samples are float64, full scale ±1; loops run from `loop_start` to `loop_end`, excluded; register
borders are those of every method book for the concert flute: C4 to C♯5 first, D5 to C♯6 second, from D6 third
and above.
"""

import importlib.util
import logging
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluteprobe.flute.register import Register

Samples = NDArray[np.float64]

FLUTE_PROGRAM = 73  # General MIDI Level 1: program 74 counted from 1
LARGEST_MISMATCH = 0.25  # of a loop that closes by itself; breath noise alone makes 0.1 to 0.2

_MIDI_A4 = 69
_FIRST_REGISTER_TO = 73.5  # between C♯5 and D5, as MIDI note numbers
_SECOND_REGISTER_TO = 85.5  # between C♯6 and D6
_WINDOW_CYCLES = 6


@dataclass(frozen=True, kw_only=True, eq=False)
class FluteSample:
    """One recording.

    Attributes
    ----------
    root_key, correction_cents
        The MIDI key at which the bank plays the recording as it is, and what it adds to put it in tune.
    cycles
        How many cycles of the tone the loop holds.
    slip_cycles
        What the loop's own phase lacks or has over to be `cycles` whole ones.
    mismatch
        How badly the loop closes: rms difference between the samples around its end and those around its
        start, over their rms. 0 closes perfectly; unrelated sounds give 1.4.
    """

    name: str
    samples: Samples
    rate_hz: int
    loop_start: int
    loop_end: int
    root_key: int
    correction_cents: int
    cycles: int
    slip_cycles: float
    mismatch: float

    @property
    def exact_hz(self) -> float:
        """The mean frequency of the loop played round: exact, whatever the tone does inside it."""
        return self.cycles * self.rate_hz / (self.loop_end - self.loop_start)

    @property
    def named_hz(self) -> float:
        """The frequency of the recording by the bank's root key and correction."""
        return _key_hz(self.root_key - self.correction_cents / 100.0)

    @property
    def step_cents(self) -> float:
        """How far off the frequency would be if the loop held one cycle more."""
        return 1200.0 * float(np.log2(1.0 + 1.0 / self.cycles))

    @property
    def closes(self) -> bool:
        """Whether the loop goes round without a jump."""
        return self.mismatch < LARGEST_MISMATCH

    @property
    def register(self) -> Register:
        """The register by the method books, from the measured frequency."""
        key = _MIDI_A4 + 12.0 * float(np.log2(self.exact_hz / 440.0))
        return 1 if key < _FIRST_REGISTER_TO else 2 if key < _SECOND_REGISTER_TO else 3

    def played_round(self, seconds: float) -> Samples:
        """Return the loop, played round for some seconds."""
        return np.resize(self.samples[self.loop_start : self.loop_end], round(seconds * self.rate_hz))


@cache
def concert_flute() -> tuple[FluteSample, ...]:
    """Return the recordings, low to high."""
    with _bank() as bank:
        presets = [
            p
            for p in bank.presets
            if (getattr(p, "bank", None), getattr(p, "preset", None)) == (0, FLUTE_PROGRAM)
        ]
        zones = [
            zone for bag in presets[0].bags if bag.instrument for zone in bag.instrument.bags if zone.sample
        ]
        return tuple(_flute_sample(zone.sample) for zone in zones)


@contextmanager
def _bank() -> Iterator[Any]:
    """Open the bank; sf2utils' remarks on other instruments' loops are kept quiet."""
    from sf2utils.sf2parse import Sf2File

    package = importlib.util.find_spec("pretty_midi")
    assert package is not None
    assert package.origin is not None
    (path,) = Path(package.origin).parent.glob("*.sf2")
    logging.disable(logging.WARNING)
    try:
        with path.open("rb") as file:
            yield Sf2File(file)
    finally:
        logging.disable(logging.NOTSET)


def _flute_sample(sample: Any) -> FluteSample:
    samples = np.frombuffer(sample.raw_sample_data, "<i2") / 2.0**15
    start, end, rate_hz = sample.start_loop, sample.end_loop, sample.sample_rate
    guide_hz = _key_hz(sample.original_pitch - sample.pitch_correction / 100.0)
    cycles = _phase_turned(samples, start, end, guide_hz / rate_hz)
    return FluteSample(
        name=sample.name,
        samples=samples,
        rate_hz=rate_hz,
        loop_start=start,
        loop_end=end,
        root_key=sample.original_pitch,
        correction_cents=sample.pitch_correction,
        cycles=round(cycles),
        slip_cycles=cycles - round(cycles),
        mismatch=_mismatch(samples, start, end, around=round(2 * rate_hz / guide_hz)),
    )


def _phase_turned(samples: Samples, start: int, end: int, guide: float) -> float:
    """Return how many cycles the fundamental turns between two samples; `guide` is in cycles per sample.

    The tone is brought down by the guide and smoothed over six cycles; what phase is left is followed
    through. Both ends move forward alike where the smoothing would reach past the last sample.
    """
    width = round(_WINDOW_CYCLES / guide)
    window = np.hanning(width) / np.hanning(width).sum()
    slow = np.convolve(samples * np.exp(-2j * np.pi * guide * np.arange(len(samples))), window, "same")
    early = max(width // 2 - (len(samples) - end), 0) + 1
    phase = np.unwrap(np.angle(slow[start - early : end - early + 1]))
    return guide * (end - start) + float(phase[-1] - phase[0]) / (2.0 * np.pi)


def _mismatch(samples: Samples, start: int, end: int, around: int) -> float:
    """Compare `around` samples before, and those after as far as there are any, up to as many."""
    after = min(around, len(samples) - end)
    here, there = samples[start - around : start + after], samples[end - around : end + after]
    return float(np.sqrt(np.mean((there - here) ** 2) / np.mean(here**2)))


def _key_hz(key: float) -> float:
    return float(440.0 * 2.0 ** ((key - _MIDI_A4) / 12.0))
