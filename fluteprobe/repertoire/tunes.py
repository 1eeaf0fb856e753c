"""Whether a flute can play a tune, and in which transposition best.

Conventions: those of `fluteprobe.repertoire.sounds`. Every transposition by whole semitones that brings any
of the tune into the flute's compass is tried, octaves among them. Notes count by how long they are held;
where none has a duration, each counts once. Shares run from 0 to 1.
"""

from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import ceil, floor, sqrt

from fluteprobe.repertoire.scales import suited_offset_cents
from fluteprobe.repertoire.sounds import Compass, Match, Sound, Standard
from fluteprobe.score.tune import ScoreError, Tune, TuneNote

MOST_PITCHES = 400


@dataclass(frozen=True, slots=True, kw_only=True)
class TuneFit:
    """A tune in one transposition.

    `surely` and `perhaps` are the shares of its time that can be played so; `expected` weighs each note by
    the chance that its best fingering speaks in tune. `off_cents` is the root mean square deviation
    of what can be played. `moves` is how many fingers move from note to note, on average, a change of
    register counting as one. `matches` has each pitch once, low to high, transposed; `short` are the notes
    that fall short, as the score has them, in the order of time.
    """

    semitones: int
    a4_hz: float
    surely: float
    perhaps: float
    expected: float
    off_cents: float | None
    moves: float | None
    matches: tuple[Match, ...]
    short: tuple[TuneNote, ...]


def require_playable(tune: Tune) -> None:
    """Refuse a tune that nobody could play, and that would take very long to fit.

    Raises
    ------
    ScoreError
        If it has more different pitches than `MOST_PITCHES`.
    """
    if len({note.pitch_semitones for note in tune.notes}) > MOST_PITCHES:
        raise ScoreError(f"it has more than {MOST_PITCHES} different pitches: give a melody in semitones")


def tune_fits(tune: Tune, compass: Compass, standard: Standard) -> tuple[TuneFit, ...]:
    """Return a tune in every transposition that touches the compass, the best first.

    Best is what can be expected in tune, to the nearest 1 %; then what needs fewer fingers moved, to the
    nearest tenth of a finger; then what is nearer in tune.
    """
    weights = _weights(tune.notes)
    if not compass.sounds or not weights:
        return ()
    low = floor(compass.sounds[0].pitch_semitones - standard.offset_cents / 100.0 - max(weights))
    high = ceil(compass.sounds[-1].pitch_semitones - standard.offset_cents / 100.0 - min(weights))
    fits = (tune_fit(tune, semitones, compass, standard) for semitones in range(low, high + 1))
    return tuple(sorted(fits, key=_rank))


def tune_fit(tune: Tune, semitones: int, compass: Compass, standard: Standard) -> TuneFit:
    """Return how a flute plays a tune in one transposition, by so many semitones up."""
    weights = {pitch + semitones: weight for pitch, weight in _weights(tune.notes).items()}
    offset = standard.offset_cents
    if standard.best_a4:
        offset += suited_offset_cents(weights, compass, standard)
    matches = {pitch: compass.match(pitch, offset, standard.tolerance_cents) for pitch in sorted(weights)}
    total = sum(weights.values())
    shares = {grade: _share(matches, weights, grade) / total for grade in ("surely", "perhaps")}
    played = {pitch: match.ways[0] for pitch, match in matches.items() if match.ways}
    return TuneFit(
        semitones=semitones,
        a4_hz=440.0 * 2.0 ** (offset / 1200.0),
        surely=shares["surely"],
        perhaps=shares["perhaps"],
        expected=sum(weights[pitch] * way.chance for pitch, way in played.items()) / total,
        off_cents=_off_cents({pitch: way.deviation_cents for pitch, way in played.items()}, weights),
        moves=_moves(
            [
                played[note.pitch_semitones + semitones].sound
                for note in tune.notes
                if note.pitch_semitones + semitones in played
            ]
        ),
        matches=tuple(matches.values()),
        short=tuple(note for note in tune.notes if note.pitch_semitones + semitones not in played),
    )


def finger_moves(one: Sound, other: Sound) -> int:
    """Return how many fingers move between two tones; a change of register counts as one more."""
    states = zip(str(one.fingering), str(other.fingering), strict=False)
    return sum(before != after for before, after in states) + (one.register != other.register)


def _weights(notes: Sequence[TuneNote]) -> dict[float, float]:
    """Return for how long each pitch is held, in quarter notes; where none is, how often it comes."""
    held = any(note.duration_quarters > 0.0 for note in notes)
    weights: dict[float, float] = defaultdict(float)
    for note in notes:
        weights[note.pitch_semitones] += note.duration_quarters if held else 1.0
    return dict(weights)


def _share(matches: Mapping[float, Match], weights: Mapping[float, float], grade: str) -> float:
    return sum(weights[pitch] for pitch, match in matches.items() if match.grade == grade)


def _off_cents(deviations: Mapping[float, float], weights: Mapping[float, float]) -> float | None:
    """Return the root mean square of some deviations, by weight; None where there is none."""
    total = sum(weights[pitch] for pitch in deviations)
    if total <= 0.0:
        return None
    return sqrt(sum(weights[pitch] * off**2 for pitch, off in deviations.items()) / total)


def _moves(sounds: Sequence[Sound]) -> float | None:
    """Return how many fingers move from one tone to the next, on average; None for fewer than two tones."""
    if len(sounds) < 2:
        return None
    return sum(finger_moves(one, other) for one, other in pairwise(sounds)) / (len(sounds) - 1)


def _rank(fit: TuneFit) -> tuple[float, float, float, int]:
    off = float("inf") if fit.off_cents is None else fit.off_cents
    return -round(fit.expected, 2), round(fit.moves or 0.0, 1), round(off, 1), abs(fit.semitones)
