"""Notes, cents and air.

Conventions: A4 is 440 Hz (ISO 16:1975) unless told otherwise; equal temperament; octave numbers change at
C; MIDI note number 69 is A4. A deviation in cents is positive where the tone is sharp of the note.
Temperatures are of the air in the flute, in °C.
"""

from dataclasses import dataclass
from math import floor, log2, sqrt

A4_HZ = 440.0
A4_MIDI = 69
A4_RANGE_HZ = (380.0, 500.0)

_NAMES = ("C", "C#", "D", "D#", "E", "F", "F#", "G", "G#", "A", "A#", "B")
_ABSOLUTE_ZERO_C = -273.15


@dataclass(frozen=True, slots=True, order=True)
class Note:
    """An equal-tempered note, by its MIDI note number."""

    midi: int

    def __str__(self) -> str:
        return f"{_NAMES[self.midi % 12]}{self.octave}"

    @property
    def octave(self) -> int:
        """The octave number, 4 for the octave from middle C up."""
        return self.midi // 12 - 1

    def frequency_hz(self, a4_hz: float = A4_HZ) -> float:
        """Return the note's frequency in equal temperament."""
        return float(a4_hz * 2.0 ** ((self.midi - A4_MIDI) / 12.0))


def cents_between(low_hz: float, high_hz: float) -> float:
    """Return the interval from one frequency to another, in cents (1200 log2 of the ratio)."""
    return 1200.0 * log2(high_hz / low_hz)


def nearest_note(frequency_hz: float, a4_hz: float = A4_HZ) -> tuple[Note, float]:
    """Return the nearest equal-tempered note and the deviation from it in cents, in [-50, 50).

    Raises
    ------
    ValueError
        If the frequency is not positive.
    """
    if not frequency_hz > 0.0:
        raise ValueError(f"a frequency is above 0 Hz, not {frequency_hz}")
    semitones = 12.0 * log2(frequency_hz / a4_hz)
    steps = floor(semitones + 0.5)
    return Note(A4_MIDI + steps), 100.0 * (semitones - steps)


def speed_of_sound_m_per_s(temperature_c: float) -> float:
    """Return the speed of sound in dry air of ordinary pressure, 331.3 √(1 + t/273.15) m/s.

    Cramer, JASA 93, 2510 (1993) gives 331.45 m/s at 0 °C and adds up to 0.35 % for humid air; as a ratio
    between two temperatures the two agree within 0.5 cent per 10 °C.

    Raises
    ------
    ValueError
        If the temperature is at or under absolute zero.
    """
    if not temperature_c > _ABSOLUTE_ZERO_C:
        raise ValueError(f"a temperature is above {_ABSOLUTE_ZERO_C} °C, not {temperature_c}")
    return 331.3 * sqrt(1.0 + temperature_c / 273.15)


def temperature_shift_cents(from_c: float, to_c: float) -> float:
    """Return how far the pitch of an air column moves between two temperatures, in cents.

    The pitch follows the speed of sound. A blown flute is warmed by the breath, so this is an estimate.
    """
    return cents_between(speed_of_sound_m_per_s(from_c), speed_of_sound_m_per_s(to_c))
