"""MusicXML in: a partwise or timewise score, plain or compressed, becomes parts of plain notes.

Conventions: MusicXML 4.0 and older; notes come as they sound, `transpose` applied; tied notes are one;
repeats are read once; cue notes, unpitched notes and rests give nothing. Times in quarter notes.

A score may come from anybody. Expat reads it bar by bar, so that memory stays small; entities, which the
format does not need, are refused, and nothing outside the file is ever opened.
"""

import zipfile
import zlib
from collections.abc import Iterator
from dataclasses import dataclass, field
from io import BytesIO
from math import isfinite
from xml.etree.ElementTree import Element
from xml.parsers import expat

from fluteprobe.score.tune import MOST_NOTES, Part, Score, ScoreError, TuneNote

LARGEST_BYTES = 16_000_000  # of XML, also after decompression
LARGEST_ARCHIVE_BYTES = 8_000_000

_ROOTS = {"score-partwise": ("part", "measure"), "score-timewise": ("measure", "part")}
_STEPS = {"C": 0, "D": 2, "E": 4, "F": 5, "G": 7, "A": 9, "B": 11}
_DEEPEST = 64
_PIECE_BYTES = 1 << 16
_LONGEST_TEXT = 10_000
_MOST_ELEMENTS = 200_000  # in one bar
_MOST_PARTS = 1000
_BROKEN_ARCHIVE = (  # what zipfile raises for one
    zipfile.BadZipFile, zlib.error, EOFError, OSError, RuntimeError, NotImplementedError,
    LookupError, ValueError,
)  # fmt: skip
_CONTAINER = "META-INF/container.xml"


def read_compressed(content: bytes) -> Score:
    """Return the score in a compressed MusicXML file (.mxl): a zip archive whose container names the score.

    Raises
    ------
    ScoreError
        If it is no such archive, is encrypted, or unpacks to more than `LARGEST_BYTES`.
    """
    if len(content) > LARGEST_ARCHIVE_BYTES:
        raise ScoreError(f"it is larger than {LARGEST_ARCHIVE_BYTES // 1_000_000} MB: export one part alone")
    try:
        with zipfile.ZipFile(BytesIO(content)) as archive:
            return read_xml(_unpacked(archive, _root_file(archive)))
    except ScoreError:
        raise
    except _BROKEN_ARCHIVE:
        raise ScoreError("it is a damaged or encrypted archive: export the score again") from None


def read_xml(content: bytes) -> Score:
    """Return the score in a MusicXML file.

    Raises
    ------
    ScoreError
        If it is not well-formed, no score, too large, or has entities; the text says where.
    """
    if len(content) > LARGEST_BYTES:
        raise ScoreError(f"it is larger than {LARGEST_BYTES // 1_000_000} MB: export one part alone")
    reader = _Reader()
    try:
        for place in range(0, len(content), _PIECE_BYTES):
            reader.parser.Parse(content[place : place + _PIECE_BYTES], False)
        reader.parser.Parse(b"", True)
    except expat.ExpatError as error:
        what = expat.errors.messages.get(error.code, str(error.code))
        raise ScoreError(f"it is no whole XML, line {error.lineno}: {what}: export the score again") from None
    except (ValueError, LookupError) as error:
        if isinstance(error, ScoreError):
            raise
        raise ScoreError("its encoding is not known: export the score as UTF-8") from None
    return reader.score()


# --- the archive -------------------------------------------------------------------------------------


def _root_file(archive: zipfile.ZipFile) -> str:
    """Return the name of the score in a compressed file: the first rootfile of its container."""
    names = archive.namelist()
    if _CONTAINER in names:
        for element in _elements(_unpacked(archive, _CONTAINER)):
            if element.tag.rpartition(":")[2] == "rootfile" and element.get("full-path") in names:
                return str(element.get("full-path"))
    for name in names:
        if name.endswith((".musicxml", ".xml")) and not name.startswith("META-INF/"):
            return name
    raise ScoreError("its archive holds no score: export the score again")


def _unpacked(archive: zipfile.ZipFile, name: str) -> bytes:
    if archive.getinfo(name).compress_type not in {zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED}:
        raise ScoreError("it is packed in a way that MusicXML does not use: export the score again")
    with archive.open(name) as file:
        content = file.read(LARGEST_BYTES + 1)
    if len(content) > LARGEST_BYTES:
        raise ScoreError(f"it unpacks to more than {LARGEST_BYTES // 1_000_000} MB: export one part alone")
    return content


def _elements(content: bytes) -> Iterator[Element]:
    """Return the elements of a small XML file."""
    found: list[Element] = []
    parser = _safe_parser()
    parser.StartElementHandler = lambda tag, attributes: found.append(Element(tag, attributes))
    try:
        parser.Parse(content[:100_000], True)
    except expat.ExpatError:
        return iter(())
    return iter(found)


# --- the score ---------------------------------------------------------------------------------------


def _safe_parser() -> expat.XMLParserType:
    """Return a parser that refuses entities and opens nothing."""
    parser = expat.ParserCreate()
    parser.buffer_text = True
    parser.EntityDeclHandler = _refuse_entities
    return parser


def _refuse_entities(*_: object) -> None:
    raise ScoreError("it declares entities, which a score does not need: export the score again")


@dataclass(slots=True)
class _PartState:
    """What is known of a part while its bars go by."""

    name: str
    divisions: float = 1.0
    beat_quarters: float = 1.0
    transpose_semitones: float = 0.0
    bar_start: float = 0.0
    notes: list[TuneNote] = field(default_factory=list)
    tied: dict[float, int] = field(default_factory=dict)  # pitch -> where the note that goes on stands


class _Reader:
    """Takes expat's events, keeps one bar at a time, and gathers the parts."""

    def __init__(self) -> None:
        self.parser = _safe_parser()
        self.parser.StartElementHandler = self._start
        self.parser.EndElementHandler = self._end
        self.parser.CharacterDataHandler = self._text
        self._open: list[Element] = []
        self._parts: dict[str, _PartState] = {}
        self._title: str | None = None
        self._outer = self._inner = ""
        self._count = self._held = self._kept = 0  # notes; elements in memory, and those that stay

    def score(self) -> Score:
        parts = (Part(name=part.name, notes=tuple(part.notes)) for part in self._parts.values())
        return Score(title=self._title, parts=tuple(parts))

    def _start(self, tag: str, attributes: dict[str, str]) -> None:
        if not self._open:
            if tag not in _ROOTS:
                raise ScoreError(
                    f"its root is <{tag[:40]}>, expected <score-partwise>: it is no MusicXML score"
                )
            self._outer, self._inner = _ROOTS[tag]
        if len(self._open) >= _DEEPEST:
            raise ScoreError("its elements are nested too deeply for a score")
        self._held += 1
        if self._held > _MOST_ELEMENTS:
            raise ScoreError(f"a bar has more than {_MOST_ELEMENTS} elements: it is no score for a flute")
        if tag == self._inner and len(self._open) == 2:
            self._kept = self._held - 1
        element = Element(tag, attributes)
        if len(self._open) > 1:
            self._open[-1].append(element)
        self._open.append(element)

    def _text(self, text: str) -> None:
        if self._open and len(self._open[-1].text or "") < _LONGEST_TEXT:
            self._open[-1].text = (self._open[-1].text or "") + text

    def _end(self, tag: str) -> None:
        element = self._open.pop()
        if tag == self._inner and len(self._open) == 2 and self._open[1].tag == self._outer:
            self._take_bar(self._open[1], element)
            self._open[1].remove(element)
            self._held = self._kept
        elif tag == "score-part":
            identity = element.get("id", "")
            self._part(identity, _said(element, "part-name"))
        elif tag in {"work-title", "movement-title"}:
            self._title = self._title or (element.text or "").strip() or None

    def _part(self, identity: str, name: str = "") -> _PartState:
        """Return what is known of a part, in the order in which parts are first named."""
        if identity not in self._parts:
            if len(self._parts) >= _MOST_PARTS:
                raise ScoreError(f"it has more than {_MOST_PARTS} parts: export one part alone")
            self._parts[identity] = _PartState(name or f"part {identity}")
        return self._parts[identity]

    def _take_bar(self, outer: Element, inner: Element) -> None:
        """Read one bar of one part."""
        part, bar = (outer, inner) if self._inner == "measure" else (inner, outer)
        identity, number = part.get("id", ""), bar.get("number", "?")[:20]
        state = self._part(identity)
        before = len(state.notes)
        _read_bar(state, inner, number)
        self._count += len(state.notes) - before
        if self._count > MOST_NOTES:
            raise ScoreError(f"it has more than {MOST_NOTES} notes: export one part alone")


def _read_bar(part: _PartState, bar: Element, number: str) -> None:
    """Add one bar's notes to its part: a cursor goes on with each note and back with each `backup`."""
    cursor = longest = 0.0
    onset = 0.0
    for item in bar:
        if item.tag == "attributes":
            _read_attributes(part, item, number)
            continue
        if item.tag not in {"note", "backup", "forward"}:
            continue
        length = 0.0 if item.find("grace") is not None else _length(part, item, number)
        if item.tag == "backup":
            cursor = max(cursor - length, 0.0)
            continue
        if item.find("chord") is None:
            onset, cursor = cursor, cursor + length
        longest = max(longest, cursor)
        if item.tag == "note" and item.find("cue") is None and item.find("pitch") is not None:
            _add_note(part, item, onset, length, number)
    part.bar_start += longest


def _read_attributes(part: _PartState, attributes: Element, number: str) -> None:
    if attributes.find("divisions") is not None:
        part.divisions = _number(attributes, "divisions", 1e-6, 1e6, number)
    if attributes.find("time/beat-type") is not None:
        part.beat_quarters = 4.0 / _number(attributes, "time/beat-type", 1.0, 1024.0, number)
    if (transpose := attributes.find("transpose")) is not None:
        octaves = _number(transpose, "octave-change", -10.0, 10.0, number, absent=0.0)
        part.transpose_semitones = 12.0 * octaves + _number(
            transpose, "chromatic", -120.0, 120.0, number, absent=0.0
        )


def _length(part: _PartState, item: Element, number: str) -> float:
    """Return a duration in quarter notes; a note without one, which is a fault, has none."""
    return _number(item, "duration", 0.0, 1e9, number, absent=0.0) / part.divisions


def _add_note(part: _PartState, note: Element, onset: float, length: float, number: str) -> None:
    pitch = _pitch(note, number) + part.transpose_semitones
    ties = {tie.get("type") for tie in note.findall("tie")}
    if "stop" in ties and pitch in part.tied:
        place = part.tied[pitch]
        held = part.notes[place]
        part.notes[place] = _lasting(held, part.bar_start + onset + length - held.start_quarters)
    else:
        place = len(part.notes)
        part.notes.append(
            TuneNote(
                start_quarters=part.bar_start + onset,
                duration_quarters=length,
                pitch_semitones=pitch,
                bar=number,
                beat=1.0 + onset / part.beat_quarters,
            )
        )
    if "start" in ties:
        part.tied[pitch] = place
    else:
        part.tied.pop(pitch, None)


def _lasting(note: TuneNote, quarters: float) -> TuneNote:
    return TuneNote(
        start_quarters=note.start_quarters,
        duration_quarters=max(quarters, note.duration_quarters),
        pitch_semitones=note.pitch_semitones,
        bar=note.bar,
        beat=note.beat,
    )


def _pitch(note: Element, number: str) -> float:
    """Return a written pitch as a MIDI note number; `alter` may be a decimal (MusicXML 4.0, semitones)."""
    step = _said(note, "pitch/step")
    if step not in _STEPS:
        raise ScoreError(f"bar {number}: a note's step is {step!r}, expected A to G")
    octave = _number(note, "pitch/octave", -1.0, 9.0, number)
    return (
        12.0 * (octave + 1.0) + _STEPS[step] + _number(note, "pitch/alter", -12.0, 12.0, number, absent=0.0)
    )


def _said(element: Element, path: str) -> str:
    return (element.findtext(path) or "").strip()[:200]


def _number(  # noqa: PLR0913, PLR0917  (where, what, from, to, and where in the score)
    element: Element, path: str, low: float, high: float, number: str, absent: float | None = None
) -> float:
    """Return a number that a score gives, which lies within bounds."""
    text = _said(element, path)
    if not text and absent is not None:
        return absent
    try:
        value = float(text)
    except ValueError:
        value = float("nan")
    if not (isfinite(value) and low <= value <= high):
        raise ScoreError(f"bar {number}: {path.rpartition('/')[2]} is {text[:40]!r}, expected a number")
    return value
