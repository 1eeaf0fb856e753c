"""MusicXML out: a tune with words below its notes.

Conventions: MusicXML 4.0, partwise, in equal temperament. Times are rounded to 1/480 of a quarter note. The
bars are those of the tune's notes, each as long as what begins in it, so the score has no time signature
(`senza-misura`). A duration that note values with dots can tell in a few tied notes is written so; any
other, such as a triplet's, by its length alone, which readers take from `duration`.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby
from xml.etree import ElementTree as ET

from fluteprobe.flute.tuning import Note
from fluteprobe.score.tune import TuneNote
from fluteprobe.score.writing import (
    add_accidental,
    add_attributes,
    add_pitch,
    add_words,
    finished,
    new_score,
)

DIVISIONS = 480  # of a quarter note
MOST_TIED = 3

# Note values in divisions, from the longest: name and dots.
_VALUES = tuple(
    (length * (3 if dots else 2) // 2, name, dots)
    for length, name in (
        (3840, "breve"), (1920, "whole"), (960, "half"), (480, "quarter"), (240, "eighth"), (120, "16th"),
        (60, "32nd"),
    )
    for dots in (1, 0)
)  # fmt: skip


@dataclass(frozen=True, slots=True, kw_only=True)
class AnnotatedNote:
    """A note of a tune, the note it is to sound, and lines of words below it."""

    note: TuneNote
    sounds: Note
    words: tuple[str, ...]


def annotated_xml(notes: Sequence[AnnotatedNote], *, title: str, part: str) -> bytes:
    """Return a tune as MusicXML 4.0 in UTF-8; `notes` are one line in the order of time.

    Raises
    ------
    ValueError
        If there is no note.
    """
    if not notes:
        raise ValueError("a score has one note at least")
    root, music = new_score(title, part)
    now = 0
    for number, (label, some) in enumerate(groupby(notes, key=lambda each: each.note.bar), start=1):
        bar = ET.SubElement(music, "measure", number=label)
        if number == 1:
            time = add_attributes(bar, [each.sounds for each in notes], divisions=DIVISIONS)
            ET.SubElement(time, "senza-misura")
        sharp: set[int] = set()  # naturals that a sharp in this bar has raised
        for each in some:
            start = _ticks(each.note.start_quarters)
            _add_rest(bar, start - now)
            _add_note(bar, each, _ticks(each.note.end_quarters) - start, sharp)
            now = max(now, _ticks(each.note.end_quarters))
    return finished(root)


def note_values(divisions: int) -> list[tuple[int, str, int]]:
    """Return note values (divisions, name, dots) that add up to a length; none where it takes too many."""
    values: list[tuple[int, str, int]] = []
    left = divisions
    while left > 0 and len(values) < MOST_TIED:
        value = next((value for value in _VALUES if value[0] <= left), None)
        if value is None:
            break
        values.append(value)
        left -= value[0]
    return values if left == 0 else []


def _ticks(quarters: float) -> int:
    return round(quarters * DIVISIONS)


def _values(divisions: int) -> list[tuple[int, str, int]]:
    return note_values(divisions) or [(divisions, "", 0)]


def _add_rest(bar: ET.Element, divisions: int) -> None:
    """Add a rest of some length, in several if need be; none where there is no time for one."""
    for value in _values(divisions) if divisions > 0 else ():
        element = ET.SubElement(bar, "note")
        ET.SubElement(element, "rest")
        _add_value(element, value)


def _add_note(bar: ET.Element, each: AnnotatedNote, divisions: int, sharp: set[int]) -> None:
    """Add a note, tied where it takes several values; without a length it is a grace note."""
    values = _values(divisions) if divisions > 0 else [(0, "eighth", 0)]
    for k, value in enumerate(values):
        ties = ["stop"] * (k > 0) + ["start"] * (k + 1 < len(values))
        element = ET.SubElement(bar, "note")
        if value[0] == 0:
            ET.SubElement(element, "grace")
        add_pitch(element, each.sounds, each.sounds.frequency_hz())
        _add_value(element, value, ties)
        if k == 0:
            _mark_accidental(element, each.sounds, sharp)
        if ties:
            notations = ET.SubElement(element, "notations")
            for kind in ties:
                ET.SubElement(notations, "tied", type=kind)
        if k == 0:
            add_words(element, each.words)


def _add_value(element: ET.Element, value: tuple[int, str, int], ties: Sequence[str] = ()) -> None:
    """Add a length, ties, voice, note value and dots, in the order that the schema wants."""
    length, name, dots = value
    if length:
        ET.SubElement(element, "duration").text = str(length)
    for kind in ties:
        ET.SubElement(element, "tie", type=kind)
    ET.SubElement(element, "voice").text = "1"
    if name:
        ET.SubElement(element, "type").text = name
    for _ in range(dots):
        ET.SubElement(element, "dot")


def _mark_accidental(element: ET.Element, note: Note, sharp: set[int]) -> None:
    """Add a sharp, or the natural that takes one back within its bar."""
    is_sharp = "#" in str(note)
    natural = note.midi - is_sharp
    if is_sharp or natural in sharp:
        add_accidental(element, note)
    sharp.discard(natural)
    sharp.update({natural} if is_sharp else ())
