"""Scales: which steps above its tonic a scale has, by name or as a list of intervals.

Conventions: steps are in semitones above the tonic, rising, from 0 to under 12; the scale repeats in every
octave. A tonic is a pitch class, 0 for C to 11 for B. A list of intervals is written with blanks or commas
between numbers: `0 2 4 7 9` in semitones, decimals allowed, `0 204c 386c` in cents.
"""

from dataclasses import dataclass
from itertools import pairwise
from math import isfinite

# Major and natural minor: any handbook of harmony. The five pentatonic modes without semitones are the
# rotations of 0 2 4 7 9, from each of its notes in turn; classical Chinese theory has a name for each.
_NAMED: dict[str, tuple[float, ...]] = {
    "major": (0, 2, 4, 5, 7, 9, 11),
    "minor": (0, 2, 3, 5, 7, 8, 10),
    "pentatonic-1": (0, 2, 4, 7, 9),
    "pentatonic-2": (0, 2, 5, 7, 10),
    "pentatonic-3": (0, 3, 5, 8, 10),
    "pentatonic-4": (0, 2, 5, 7, 9),
    "pentatonic-5": (0, 3, 5, 7, 10),
}
_ALSO = {
    "natural-minor": "minor",
    "major-pentatonic": "pentatonic-1",
    "minor-pentatonic": "pentatonic-5",
    "gong": "pentatonic-1",
    "shang": "pentatonic-2",
    "jue": "pentatonic-3",
    "zhi": "pentatonic-4",
    "yu": "pentatonic-5",
}
_DESCRIBED = {
    "major": "major",
    "minor": "natural minor",
    "pentatonic-1": "pentatonic mode 1, major pentatonic, gong",
    "pentatonic-2": "pentatonic mode 2, shang",
    "pentatonic-3": "pentatonic mode 3, jue",
    "pentatonic-4": "pentatonic mode 4, zhi",
    "pentatonic-5": "pentatonic mode 5, minor pentatonic, yu",
}
NAMES = tuple(_NAMED)
MOST_STEPS = 60

_NATURALS = {"C": 0, "D": 2, "E": 4, "F": 5, "G": 7, "A": 9, "B": 11}
_ACCIDENTALS = {"": 0, "#": 1, "b": -1, "♯": 1, "♭": -1}
_TONICS = ("C", "C#", "D", "D#", "E", "F", "F#", "G", "G#", "A", "A#", "B")


@dataclass(frozen=True, slots=True, kw_only=True)
class Scale:
    """A scale: its name, and its steps in semitones above the tonic."""

    name: str
    steps: tuple[float, ...]

    @property
    def description(self) -> str:
        """The scale's name and the other names it has."""
        return _DESCRIBED.get(self.name, self.name)

    @property
    def steps_text(self) -> str:
        """The steps as they are written."""
        return " ".join(f"{step:.6g}" for step in self.steps)


def named_scale(text: str) -> Scale:
    """Return a scale by its name, or from a list of intervals.

    Raises
    ------
    ValueError
        If it is neither; the text says what is expected.
    """
    name = "-".join(text.casefold().replace("_", " ").replace("-", " ").split())
    name = _ALSO.get(name, name)
    if name in _NAMED:
        return Scale(name=name, steps=_NAMED[name])
    if name[:1].isdigit() or name[:1] in {".", "+"}:
        return _listed(text)
    raise ValueError(f"{text!r} is no scale, expected {', '.join(NAMES)} or intervals such as '0 2 4 7 9'")


def tonic_of(text: str) -> int:
    """Return a tonic's pitch class: `C`, `F#`, `Bb`.

    Raises
    ------
    ValueError
        If it is no note's name.
    """
    letter, accidental = text.strip()[:1].upper(), text.strip()[1:]
    if letter not in _NATURALS or accidental not in _ACCIDENTALS:
        raise ValueError(f"{text!r} is no note, expected A to G, with # or b if need be")
    return (_NATURALS[letter] + _ACCIDENTALS[accidental]) % 12


def tonic_name(tonic: int) -> str:
    """Return a pitch class as a name with a sharp where one is needed."""
    return _TONICS[tonic % 12]


def _listed(text: str) -> Scale:
    words = text.replace(",", " ").split()
    steps = [_interval(word, text) for word in words]
    if steps[-1] == 12.0:
        steps.pop()  # the octave, which repeats the tonic
    if steps[:1] != [0.0]:
        steps.insert(0, 0.0)
    rises = all(low < high for low, high in pairwise(steps))
    if not rises or steps[-1] >= 12.0 or len(steps) > MOST_STEPS:
        raise ValueError(f"{text!r} is no scale: its intervals rise from 0 to under 12 semitones (1200c)")
    return Scale(name=" ".join(words), steps=tuple(steps))


def _interval(word: str, text: str) -> float:
    """Return an interval in semitones: a number of them, or of cents with a c behind."""
    number, per_semitone = (word[:-1], 100.0) if word[-1:] in {"c", "C"} else (word, 1.0)
    try:
        value = float(number) / per_semitone
    except ValueError:
        value = float("nan")
    if not isfinite(value):
        raise ValueError(f"{text!r} has {word!r}, expected semitones (4) or cents (386c)")
    return value
