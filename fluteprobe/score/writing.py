"""MusicXML out: a measured scale as a score whose pitches are the measured ones.

Conventions: MusicXML 4.0, partwise. `alter` carries the accidental and the deviation together as decimal
semitones, to 0.0001 (0.01 cent), against equal temperament at A4 = 440 Hz, which is what a score without
a tuning sounds in. Every note carries the accidental of its name, naturals too, so that a reader knows it
whatever it makes of the decimals. Under each note stand two lines of words.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby
from math import log2
from xml.etree import ElementTree as ET

from fluteprobe.flute.tuning import Note
from fluteprobe.version import __version__

NOTES_PER_BAR = 4
_STEPS = ("C", "C", "D", "D", "E", "F", "F", "G", "G", "A", "A", "B")
_SHARPS = (0, 1, 0, 1, 0, 0, 1, 0, 1, 0, 1, 0)
_BASS_BELOW_MIDI = 55
_NO_XML = dict.fromkeys([*range(9), 11, 12, *range(14, 32), *range(0xD800, 0xE000), 0xFFFE, 0xFFFF])


@dataclass(frozen=True, slots=True, kw_only=True)
class WrittenNote:
    """A note of the scale: the note it is called, its true frequency, and the words above and below it.

    `section` is told above the first of several notes that share it, and starts a bar.
    """

    note: Note
    frequency_hz: float
    words: tuple[str, ...] = ()
    section: str = ""


def scale_xml(notes: Sequence[WrittenNote], *, title: str, part: str) -> bytes:
    """Return a score of some notes in their order, a quarter note each, as MusicXML 4.0 in UTF-8.

    Raises
    ------
    ValueError
        If there is no note, or a frequency is not above 0 Hz.
    """
    if not notes:
        raise ValueError("a score has one note at least")
    root, music = new_score(title, part)
    for number, (section, some) in enumerate(_bars(notes), start=1):
        bar = ET.SubElement(music, "measure", number=str(number))
        if number == 1:
            time = add_attributes(bar, [note.note for note in notes], divisions=1)
            ET.SubElement(time, "beats").text = str(NOTES_PER_BAR)
            ET.SubElement(time, "beat-type").text = "4"
        _add_bar(bar, section, some)
    return finished(root)


def alter_semitones(note: Note, frequency_hz: float) -> float:
    """Return what to add to the natural that a note is spelt with, in semitones, to sound a frequency."""
    return 69.0 + 12.0 * log2(frequency_hz / 440.0) - (note.midi - _SHARPS[note.midi % 12])


def new_score(title: str, part: str) -> tuple[ET.Element, ET.Element]:
    """Return an empty score of one part: its root, and the part that its bars belong to."""
    root = ET.Element("score-partwise", version="4.0")
    ET.SubElement(ET.SubElement(root, "work"), "work-title").text = title.translate(_NO_XML)
    encoding = ET.SubElement(ET.SubElement(root, "identification"), "encoding")
    ET.SubElement(encoding, "software").text = f"fluteprobe {__version__}"
    score_part = ET.SubElement(ET.SubElement(root, "part-list"), "score-part", id="P1")
    ET.SubElement(score_part, "part-name").text = part.translate(_NO_XML)
    return root, ET.SubElement(root, "part", id="P1")


def add_attributes(bar: ET.Element, notes: Sequence[Note], *, divisions: int) -> ET.Element:
    """Begin a bar with divisions, key and clef; return the element that says the time."""
    attributes = ET.SubElement(bar, "attributes")
    ET.SubElement(attributes, "divisions").text = str(divisions)
    ET.SubElement(ET.SubElement(attributes, "key"), "fifths").text = "0"
    time = ET.SubElement(attributes, "time")
    clef = ET.SubElement(attributes, "clef")
    is_low = sorted(note.midi for note in notes)[len(notes) // 2] < _BASS_BELOW_MIDI
    ET.SubElement(clef, "sign").text = "F" if is_low else "G"
    ET.SubElement(clef, "line").text = "4" if is_low else "2"
    return time


def add_pitch(element: ET.Element, note: Note, frequency_hz: float) -> None:
    """Add a pitch that is spelt as a note and sounds a frequency."""
    pitch = ET.SubElement(element, "pitch")
    ET.SubElement(pitch, "step").text = _STEPS[note.midi % 12]
    alter = alter_semitones(note, frequency_hz) + 0.0
    ET.SubElement(pitch, "alter").text = f"{alter:.0f}" if alter in {0.0, 1.0} else f"{alter:.4f}"
    ET.SubElement(pitch, "octave").text = str(note.octave)


def add_accidental(element: ET.Element, note: Note) -> None:
    """Add the accidental of a note's name, naturals too."""
    ET.SubElement(element, "accidental").text = "sharp" if _SHARPS[note.midi % 12] else "natural"


def add_words(element: ET.Element, words: Sequence[str]) -> None:
    """Add lines of words below a note; empty ones are left out."""
    for number, word in enumerate(filter(None, words), start=1):
        lyric = ET.SubElement(element, "lyric", number=str(number))
        ET.SubElement(lyric, "syllabic").text = "single"
        ET.SubElement(lyric, "text").text = word.translate(_NO_XML)


def finished(root: ET.Element) -> bytes:
    """Return a score as UTF-8."""
    ET.indent(root, " ")
    return bytes(ET.tostring(root, encoding="UTF-8", xml_declaration=True)) + b"\n"


def _bars(notes: Sequence[WrittenNote]) -> list[tuple[str, list[WrittenNote]]]:
    """Return the notes four to a bar; the first bar of a section goes with its name."""
    bars: list[tuple[str, list[WrittenNote]]] = []
    for section, group in groupby(notes, key=lambda note: note.section):
        mine = list(group)
        pieces = [mine[k : k + NOTES_PER_BAR] for k in range(0, len(mine), NOTES_PER_BAR)]
        bars += [(section if k == 0 else "", piece) for k, piece in enumerate(pieces)]
    return bars


def _add_bar(bar: ET.Element, section: str, notes: Sequence[WrittenNote]) -> None:
    if section:
        direction = ET.SubElement(bar, "direction", placement="above")
        kind = ET.SubElement(direction, "direction-type")
        ET.SubElement(kind, "words").text = section.translate(_NO_XML)
    for written in notes:
        _add_note(bar, written)
    for _ in range(NOTES_PER_BAR - len(notes)):
        rest = ET.SubElement(bar, "note")
        ET.SubElement(rest, "rest")
        _add_length(rest)


def _add_note(bar: ET.Element, written: WrittenNote) -> None:
    """Add a note in the order of elements that the schema wants."""
    element = ET.SubElement(bar, "note")
    add_pitch(element, written.note, written.frequency_hz)
    _add_length(element)
    add_accidental(element, written.note)
    add_words(element, written.words)


def _add_length(note: ET.Element) -> None:
    ET.SubElement(note, "duration").text = "1"
    ET.SubElement(note, "voice").text = "1"
    ET.SubElement(note, "type").text = "quarter"
