"""MusicXML out: valid by the published schema, and read back by the general library `musicxml` and by us."""

from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from musicxml.parser.parser import parse_musicxml
from musicxml_schema import faults

from fluteprobe.flute.tuning import Note, nearest_note
from fluteprobe.score.musicxml import read_xml
from fluteprobe.score.tune import tune_of
from fluteprobe.score.writing import WrittenNote, alter_semitones, scale_xml


def written(frequency_hz: float, *words: str, section: str = "", a4_hz: float = 440.0) -> WrittenNote:
    note, _ = nearest_note(frequency_hz, a4_hz)
    return WrittenNote(note=note, frequency_hz=frequency_hz, words=words, section=section)


def below(element: Any, *names: str) -> list[Any]:
    """Return the elements below one, going down by their names."""
    found = [element]
    for name in names:
        found = [child for each in found for child in each.find_children(f"XML{name}")]
    return found


def pitch_of(note: Any) -> float:
    """Return the pitch that the library read, as a MIDI note number."""
    step, alter, octave = (below(note, "Pitch", name)[0].value_ for name in ("Step", "Alter", "Octave"))
    return float(12 * (octave + 1) + "C D EF G A B".index(step) + alter)


SCALE = [
    written(391.86, "xxxxxx", "−1", section="first register"),
    written(467.22, "xxxxxo", "+4", section="first register"),
    written(931.68, "xxxxxo", "−1", section="second register"),
]


def test_a_general_library_reads_the_true_pitches(tmp_path: Path) -> None:
    path = tmp_path / "scale.musicxml"
    path.write_bytes(scale_xml(SCALE, title="Heron", part="Heron"))
    score = parse_musicxml(str(path))  # which also checks every value by the schema's types
    notes = [note for note in below(score, "Part", "Measure", "Note") if note.find_children("XMLPitch")]
    pitches = [pitch_of(note) for note in notes]
    fingerings = [below(note, "Lyric", "Text")[0].value_ for note in notes]
    # `alter` is decimal semitones (MusicXML 4.0); A4 = 440 Hz is MIDI note 69.
    heard = [440.0 * 2 ** ((pitch - 69) / 12) for pitch in pitches]
    assert heard == pytest.approx([391.86, 467.22, 931.68], rel=3e-6)  # 0.005 cent: half the last digit
    assert fingerings == ["xxxxxx", "xxxxxo", "xxxxxo"]


def test_it_is_valid_and_the_same_each_time() -> None:
    content = scale_xml(SCALE, title="Heron", part="Heron")
    assert faults(content) == []
    assert content == scale_xml(SCALE, title="Heron", part="Heron")


@settings(max_examples=25)
@given(
    st.lists(st.floats(30.0, 4000.0), min_size=1, max_size=12),
    st.text(max_size=20),
    st.floats(400.0, 480.0),
)
def test_any_scale_is_valid_and_comes_back(frequencies: list[float], title: str, a4_hz: float) -> None:
    notes = [written(frequency, title, "±0", a4_hz=a4_hz, section=title[:1]) for frequency in frequencies]
    content = scale_xml(notes, title=title, part=title)
    assert faults(content) == []
    back = tune_of(read_xml(content)).notes
    heard = [440.0 * 2 ** ((note.pitch_semitones - 69) / 12) for note in back]
    assert heard == pytest.approx(frequencies, rel=3e-6)


def test_the_spelling_keeps_the_note_s_name() -> None:
    sharp = Note(70)
    assert alter_semitones(sharp, sharp.frequency_hz()) == pytest.approx(1.0)
    assert alter_semitones(sharp, sharp.frequency_hz(432.0)) == pytest.approx(1.0 - 0.31766653633429414)
    content = scale_xml([written(sharp.frequency_hz())], title="", part="").decode()
    assert "<step>A</step>" in content
    assert "<accidental>sharp</accidental>" in content


def test_every_note_carries_its_accidental() -> None:
    sharp, natural = Note(70), Note(69)
    notes = [written(natural.frequency_hz()), written(sharp.frequency_hz()), written(natural.frequency_hz())]
    content = scale_xml(notes, title="", part="").decode()
    assert (content.count(">natural<"), content.count(">sharp<")) == (2, 1)


def test_four_notes_make_a_bar_and_sections_begin_one() -> None:
    notes = [written(440.0 + k, section="low" if k < 5 else "high") for k in range(6)]
    content = scale_xml(notes, title="", part="").decode()
    assert content.count("<measure ") == 3
    assert content.count("<rest") == 6
    assert content.count("<words>") == 2


def test_low_flutes_get_the_bass_clef_and_nothing_is_no_score() -> None:
    assert "<sign>F</sign>" in scale_xml([written(110.0)], title="", part="").decode()
    with pytest.raises(ValueError, match=r"^a score has one note at least$"):
        scale_xml([], title="", part="")
