"""Whether a flute can play a tune, and in which transposition best.

Conventions: those of `fluteprobe.repertoire.sounds`. Every transposition by whole semitones that brings any
of the tune into the flute's compass is tried, octaves among them. Notes count by how long they are held;
where none has a duration, each counts once. Shares run from 0 to 1.
"""

from collections import Counter, defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from math import ceil, floor, sqrt

from fluteprobe.flute.tuning import Note
from fluteprobe.repertoire.scales import suited_offset_cents
from fluteprobe.repertoire.sounds import Compass, Match, Sound, Standard
from fluteprobe.score.annotated import AnnotatedNote, annotated_xml
from fluteprobe.score.tune import ScoreError, Tune, TuneNote

MOST_PITCHES = 400


@dataclass(frozen=True, slots=True, kw_only=True)
class TuneFit:
    """A tune in one transposition.

    `surely` and `perhaps` are the shares of its time that can be played so; `expected` weighs each note by
    the chance that its best fingering speaks in tune. `off_cents` is the root mean square deviation
    of what can be played. `moves` is how many fingers move between neighbouring notes, on average, a change
    of register counting as one. `matches` has each pitch once, low to high, transposed; `short` is how
    many notes cannot be played.
    """

    semitones: int
    a4_hz: float
    surely: float
    perhaps: float
    expected: float
    off_cents: float | None
    moves: float | None
    matches: tuple[Match, ...]
    short: int


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
    if not compass.sounds or not tune.notes:
        return ()
    outline, a4 = _outline(tune.notes), standard.offset_cents / 100.0
    low = floor(compass.sounds[0].pitch_semitones - a4 - max(outline.weights))
    high = ceil(compass.sounds[-1].pitch_semitones - a4 - min(outline.weights))
    fits = (_fit(outline, semitones, compass, standard) for semitones in range(low, high + 1))
    return tuple(sorted(fits, key=_rank))


def tune_fit(tune: Tune, semitones: int, compass: Compass, standard: Standard) -> TuneFit:
    """Return how a flute plays a tune in one transposition, by so many semitones up."""
    return _fit(_outline(tune.notes), semitones, compass, standard)


def short_notes(tune: Tune, fit: TuneFit) -> tuple[TuneNote, ...]:
    """Return the notes that cannot be played, as the score has them, in the order of time."""
    missing = {match.target_semitones for match in fit.matches if match.grade == "not"}
    return tuple(note for note in tune.notes if note.pitch_semitones + fit.semitones in missing)


def tune_xml(tune: Tune, fit: TuneFit, title: str) -> bytes:
    """Return a tune in one transposition as a MusicXML score, the best fingering below each note.

    A fingering that is only perhaps in tune has a question mark below it; a note that falls short a dash.
    Pitches are those of the nearest equal-tempered notes.

    Raises
    ------
    ScoreError
        If a note is moved out of the ten octaves that a score can hold.
    """
    words = {match.target_semitones: _words(match) for match in fit.matches}
    notes = [
        AnnotatedNote(
            note=note,
            sounds=Note(round(note.pitch_semitones + fit.semitones)),
            words=words[note.pitch_semitones + fit.semitones],
        )
        for note in tune.notes
    ]
    if not all(0 <= each.sounds.octave <= 9 for each in notes):
        raise ScoreError("moved so far the tune cannot be written: a score holds octaves 0 to 9")
    return annotated_xml(notes, title=title, part=tune.part)


def _words(match: Match) -> tuple[str, ...]:
    if not match.ways:
        return ("–",)
    return (str(match.ways[0].sound.fingering), "?" if match.grade == "perhaps" else "")


def finger_moves(one: Sound, other: Sound) -> int:
    """Return how many fingers move between two tones; a change of register counts as one more."""
    states = zip(str(one.fingering), str(other.fingering), strict=False)
    return sum(before != after for before, after in states) + (one.register != other.register)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Outline:
    """A tune in brief: for how long each pitch is held, how often it comes, and how often after which."""

    weights: Mapping[float, float]
    times: Mapping[float, int]
    steps: Mapping[tuple[float, float], int]


def _outline(notes: Sequence[TuneNote]) -> _Outline:
    """Return a tune in brief; where no note has a duration, each weighs the same."""
    pitches = [note.pitch_semitones for note in notes]
    times = Counter(pitches)
    weights: dict[float, float] = defaultdict(float)
    for note in notes:
        weights[note.pitch_semitones] += note.duration_quarters
    held = any(weight > 0.0 for weight in weights.values())
    return _Outline(weights=weights if held else times, times=times, steps=Counter(pairwise(pitches)))


def _fit(outline: _Outline, semitones: int, compass: Compass, standard: Standard) -> TuneFit:
    weights, offset = outline.weights, standard.offset_cents
    if standard.best_a4:
        targets = {pitch + semitones: weight for pitch, weight in weights.items()}
        offset += suited_offset_cents(targets, compass, standard)
    matches = {
        pitch: compass.match(pitch + semitones, offset, standard.tolerance_cents) for pitch in sorted(weights)
    }
    played = {pitch: match.ways[0] for pitch, match in matches.items() if match.ways}
    total = sum(weights.values())
    return TuneFit(
        semitones=semitones,
        a4_hz=440.0 * 2.0 ** (offset / 1200.0),
        surely=_share(matches, weights, "surely") / total,
        perhaps=_share(matches, weights, "perhaps") / total,
        expected=sum(weights[pitch] * way.chance for pitch, way in played.items()) / total,
        off_cents=_off_cents({pitch: way.deviation_cents for pitch, way in played.items()}, weights),
        moves=_moves(outline.steps, {pitch: way.sound for pitch, way in played.items()}),
        matches=tuple(matches.values()),
        short=sum(times for pitch, times in outline.times.items() if pitch not in played),
    )


def _share(matches: Mapping[float, Match], weights: Mapping[float, float], grade: str) -> float:
    return sum(weights[pitch] for pitch, match in matches.items() if match.grade == grade)


def _off_cents(deviations: Mapping[float, float], weights: Mapping[float, float]) -> float | None:
    """Return the root mean square of some deviations, by weight; None where there is none."""
    total = sum(weights[pitch] for pitch in deviations)
    if total <= 0.0:
        return None
    return sqrt(sum(weights[pitch] * off**2 for pitch, off in deviations.items()) / total)


def _moves(steps: Mapping[tuple[float, float], int], sounds: Mapping[float, Sound]) -> float | None:
    """Return how many fingers move between neighbours that can both be played; None where there are none."""
    able = {step: times for step, times in steps.items() if step[0] in sounds and step[1] in sounds}
    if not able:
        return None
    moved = sum(finger_moves(sounds[low], sounds[high]) * times for (low, high), times in able.items())
    return moved / sum(able.values())


def _rank(fit: TuneFit) -> tuple[float, float, float, int]:
    off = float("inf") if fit.off_cents is None else fit.off_cents
    return -round(fit.expected, 2), round(fit.moves or 0.0, 1), round(off, 1), abs(fit.semitones)
