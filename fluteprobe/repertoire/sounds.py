"""The tones a flute gives, and how a note that is asked for can be played with them.

Conventions: pitch in semitones is a MIDI note number with decimals at A4 = 440 Hz, so 69.0 is 440 Hz. A note
that is asked for is a *target* in equal-tempered semitones at the A4 asked for. Deviations are in cents,
positive where the flute is sharp. Uncertainties are standard (k = 1). Everything is as played, not carried
to another temperature.

Whether a tone with deviation d ± u lies within a tolerance T is told by its conformance probability,
Φ((T − d)/u) − Φ((−T − d)/u), for normal errors (JCGM 106:2012, 7.4): *surely* from 95 %, *perhaps* from 5 %.
A fingering that does not speak well, or whose register is not certain, is at best *perhaps*.
"""

from bisect import bisect_left, bisect_right
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from math import erf, log2, sqrt
from typing import Literal, get_args

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.register import Register
from fluteprobe.survey import Entry, Reading, Survey

Grade = Literal["not", "perhaps", "surely"]

GRADES: tuple[Grade, ...] = get_args(Grade)  # from the poorest
SURE = 0.95
UNLIKELY = 0.05
SPEAKS_WELL = 0.75  # share of takes from which a fingering counts as one to rely on, as on the chart
REGISTER_SURE = 0.9
NEAR_CENTS = 60.0  # a tone further off is no try at that note


@dataclass(frozen=True, slots=True, kw_only=True)
class Standard:
    """What counts as in tune: how far off, and at which A4.

    With `best_a4` the tuning may move by up to half a semitone from `a4_hz` to suit what is played.
    """

    tolerance_cents: float
    a4_hz: float
    best_a4: bool = False

    def __post_init__(self) -> None:
        if not self.tolerance_cents > 0.0:
            raise ValueError(f"a tolerance is above 0 cents, not {self.tolerance_cents}")

    @property
    def offset_cents(self) -> float:
        """How far A4 is above 440 Hz."""
        return 1200.0 * log2(self.a4_hz / 440.0)


@dataclass(frozen=True, slots=True, kw_only=True)
class Sound:
    """One tone that a flute gives: with which fingering, in which register, how high and how surely."""

    fingering: Fingering
    register: Register | None
    frequency_hz: float
    uncertainty_cents: float
    reliability: float
    register_probability: float

    @property
    def pitch_semitones(self) -> float:
        """The tone as a MIDI note number with decimals."""
        return 69.0 + 12.0 * log2(self.frequency_hz / 440.0)

    @property
    def is_sure(self) -> bool:
        """Whether the fingering can be relied on to speak, in that register."""
        return (
            self.register is not None
            and self.reliability >= SPEAKS_WELL
            and self.register_probability >= REGISTER_SURE
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Way:
    """One way to play a note that is asked for: how far off it is and how likely within the tolerance."""

    sound: Sound
    deviation_cents: float
    in_tolerance: float
    grade: Grade

    @property
    def chance(self) -> float:
        """The chance that the fingering speaks and is within the tolerance."""
        return self.in_tolerance * self.sound.reliability


@dataclass(frozen=True, slots=True, kw_only=True)
class Match:
    """A note that is asked for and the ways to play it, best first; `nearest` is told where there is none."""

    target_semitones: float
    grade: Grade
    ways: tuple[Way, ...]
    nearest: Way | None


def sounds_of(survey: Survey) -> tuple[Sound, ...]:
    """Return every tone a survey knows, low to high.

    A tone whose register is undecided is in no entry, but it was played: it counts with a register of None.
    """
    found = [_entry_sound(entry, survey.readings) for entry in survey.entries]
    found += [
        _undecided_sound(reading, survey.readings)
        for reading in survey.readings
        if reading.tone.kind == "tone"
        and reading.tone.frequency_hz is not None
        and reading.fingering is not None
        and reading.call.register is None
    ]
    return tuple(sorted(found, key=lambda sound: sound.frequency_hz))


def conformance(deviation_cents: float, uncertainty_cents: float, tolerance_cents: float) -> float:
    """Return the probability that a true deviation lies within ± a tolerance, for normal errors."""
    spread = max(uncertainty_cents, 1e-3) * sqrt(2.0)
    above = erf((tolerance_cents - deviation_cents) / spread)
    below = erf((-tolerance_cents - deviation_cents) / spread)
    return 0.5 * (above - below)


class Compass:
    """A flute's tones in the order of pitch, to be asked for notes."""

    def __init__(self, sounds: Iterable[Sound]) -> None:
        self.sounds = tuple(sorted(sounds, key=lambda sound: sound.frequency_hz))
        self._pitches = [sound.pitch_semitones for sound in self.sounds]

    def near(self, semitones: float, reach_cents: float) -> Sequence[tuple[Sound, float]]:
        """Return the tones within reach of a pitch, each with its deviation from it in cents."""
        low = bisect_left(self._pitches, semitones - reach_cents / 100.0)
        high = bisect_right(self._pitches, semitones + reach_cents / 100.0)
        return [(self.sounds[k], 100.0 * (self._pitches[k] - semitones)) for k in range(low, high)]

    def match(self, target: float, offset_cents: float, tolerance_cents: float) -> Match:
        """Return how a note can be played when the whole tuning is moved by an offset."""
        near = self.near(target + offset_cents / 100.0, NEAR_CENTS)
        ways = [_way(sound, deviation, tolerance_cents) for sound, deviation in near]
        able = sorted((way for way in ways if way.grade != "not"), key=_preference)
        nearest = min(ways, key=lambda way: abs(way.deviation_cents), default=None)
        return Match(
            target_semitones=target,
            grade=able[0].grade if able else "not",
            ways=tuple(able),
            nearest=None if able else nearest,
        )


def _way(sound: Sound, deviation_cents: float, tolerance_cents: float) -> Way:
    share = conformance(deviation_cents, sound.uncertainty_cents, tolerance_cents)
    grade: Grade = "not" if share < UNLIKELY else "perhaps"
    if share >= SURE and sound.is_sure:
        grade = "surely"
    return Way(sound=sound, deviation_cents=deviation_cents, in_tolerance=share, grade=grade)


def _preference(way: Way) -> tuple[int, float, float, str]:
    """Order ways from the best: by grade, then by the chance to sound right, then by closeness."""
    closeness = abs(way.deviation_cents)
    return -GRADES.index(way.grade), -round(way.chance, 2), closeness, str(way.sound.fingering)


def _entry_sound(entry: Entry, readings: Iterable[Reading]) -> Sound:
    told = [
        reading.call.probability.get(entry.register, 0.0)
        for reading in readings
        if reading.fingering == entry.fingering and reading.call.register == entry.register
    ]
    return Sound(
        fingering=entry.fingering,
        register=entry.register,
        frequency_hz=entry.frequency_hz,
        uncertainty_cents=entry.uncertainty_cents,
        reliability=entry.reliability,
        register_probability=max(told, default=1.0),
    )


def _undecided_sound(reading: Reading, readings: Iterable[Reading]) -> Sound:
    """Return an undecided tone as a sound, as reliable as its share of the takes blown alike."""
    fingering, frequency_hz = reading.fingering, reading.tone.frequency_hz
    assert fingering is not None  # noqa: S101  (callers ask for these only)
    assert frequency_hz is not None  # noqa: S101  (a tone has a frequency)
    alike = {r.take for r in readings if r.fingering == fingering and r.breath == reading.breath}
    return Sound(
        fingering=fingering,
        register=None,
        frequency_hz=frequency_hz,
        uncertainty_cents=reading.tone.uncertainty_cents or 0.0,
        reliability=1.0 / len(alike),
        register_probability=max(reading.call.probability.values(), default=0.0),
    )
