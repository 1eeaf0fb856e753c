"""Which scales a flute can play, from which tonic.

Conventions: those of `fluteprobe.repertoire.sounds`. A scale is asked for over the flute's whole compass,
from half a semitone under its lowest tone to half a semitone over its highest. A key counts as playable by
its best octave, from tonic to tonic.
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from fluteprobe.flute.scales import Scale
from fluteprobe.repertoire.best_a4 import REACH_CENTS, best_offset_cents
from fluteprobe.repertoire.sounds import GRADES, Compass, Grade, Match, Standard


@dataclass(frozen=True, slots=True, kw_only=True)
class ScaleFit:
    """A scale from one tonic over a flute's compass, low to high.

    `octaves` pairs each tonic that has its octave within the compass (its place in `notes`) with the grade
    of the poorest note up to and with that octave; `grade` is that of the best of them. `run` is the longest
    unbroken row of notes that can be played, as places in `notes` from and up to but not with.
    """

    scale: Scale
    tonic: int
    a4_hz: float
    notes: tuple[Match, ...]
    octaves: tuple[tuple[int, Grade], ...]
    run: tuple[int, int]
    grade: Grade

    @property
    def missing(self) -> tuple[Match, ...]:
        """The notes within the compass that cannot be played within the tolerance."""
        return tuple(match for match in self.notes if match.grade == "not")


def scale_fit(scale: Scale, tonic: int, compass: Compass, standard: Standard) -> ScaleFit:
    """Return how a flute plays a scale from one tonic (a pitch class), over its whole compass."""
    offset = standard.offset_cents
    targets = _targets(scale, tonic, compass, offset)
    if standard.best_a4:
        offset += suited_offset_cents(dict.fromkeys(targets, 1.0), compass, standard)
    notes = tuple(compass.match(target, offset, standard.tolerance_cents) for target in targets)
    octaves = _octaves(notes, len(scale.steps), tonic)
    return ScaleFit(
        scale=scale,
        tonic=tonic,
        a4_hz=440.0 * 2.0 ** (offset / 1200.0),
        notes=notes,
        octaves=octaves,
        run=_longest_run(notes),
        grade=GRADES[max((GRADES.index(grade) for _, grade in octaves), default=0)],
    )


def suited_offset_cents(weights: Mapping[float, float], compass: Compass, standard: Standard) -> float:
    """Return how far to move A4 from the standard's so that most of some notes is within the tolerance."""
    reach = REACH_CENTS + standard.tolerance_cents
    deviations = {
        target: [deviation for _, deviation in compass.near(target + standard.offset_cents / 100.0, reach)]
        for target in weights
    }
    return best_offset_cents(deviations, weights, standard.tolerance_cents)


def best_first(fits: Iterable[ScaleFit]) -> tuple[ScaleFit, ...]:
    """Return fits by their grade, then those with fewer notes missing, with a longer row, by tonic."""

    def rank(fit: ScaleFit) -> tuple[int, int, int, int]:
        return -GRADES.index(fit.grade), len(fit.missing), fit.run[0] - fit.run[1], fit.tonic

    return tuple(sorted(fits, key=rank))


def _targets(scale: Scale, tonic: int, compass: Compass, offset_cents: float) -> list[float]:
    """Return the scale's notes within the compass, low to high."""
    if not compass.sounds:
        return []
    low = compass.sounds[0].pitch_semitones - offset_cents / 100.0 - 0.5
    high = compass.sounds[-1].pitch_semitones - offset_cents / 100.0 + 0.5
    octaves = range(int(low // 12) - 1, int(high // 12) + 1)
    notes = (12.0 * octave + tonic + step for octave in octaves for step in scale.steps)
    return [note for note in notes if low <= note <= high]


def _octaves(notes: Sequence[Match], steps: int, tonic: int) -> tuple[tuple[int, Grade], ...]:
    """Return every tonic with its octave within the compass, and the poorest grade between the two."""
    found: list[tuple[int, Grade]] = []
    for place in range(len(notes) - steps):
        if (notes[place].target_semitones - tonic) % 12.0 == 0.0:
            grades = [GRADES.index(match.grade) for match in notes[place : place + steps + 1]]
            found.append((place, GRADES[min(grades)]))
    return tuple(found)


def _longest_run(notes: Sequence[Match]) -> tuple[int, int]:
    """Return the longest row of neighbouring notes that can be played, from and up to but not with."""
    best, start = (0, 0), 0
    for place, match in enumerate(notes):
        if match.grade == "not":
            start = place + 1
        elif place + 1 - start > best[1] - best[0]:
            best = (start, place + 1)
    return best
