"""A tune with words below it: valid by the published schema, and the same tune when it is read back."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from musicxml_schema import faults

from fluteprobe.flute.tuning import Note
from fluteprobe.score.annotated import AnnotatedNote, annotated_xml, note_values
from fluteprobe.score.musicxml import read_xml
from fluteprobe.score.tune import TuneNote, tune_of

TICK = 1 / 480


def annotated(start: float, duration: float, midi: int, *words: str, bar: str = "1") -> AnnotatedNote:
    note = TuneNote(
        start_quarters=start, duration_quarters=duration, pitch_semitones=float(midi), bar=bar, beat=1.0
    )
    return AnnotatedNote(note=note, sounds=Note(midi), words=words)


@settings(max_examples=30)
@given(
    st.lists(
        st.tuples(st.integers(0, 960), st.integers(0, 5000), st.integers(24, 107)), min_size=1, max_size=12
    ),
    st.text(max_size=12),
)
def test_any_line_is_valid_and_comes_back(steps: list[tuple[int, int, int]], word: str) -> None:
    notes, now = [], 0
    for rest, ticks, midi in steps:
        start = now + rest
        notes.append(annotated(start * TICK, ticks * TICK, midi, word, bar=str(start // 1920)))
        now = start + ticks
    content = annotated_xml(notes, title=word, part=word)
    assert faults(content) == []
    back = tune_of(read_xml(content)).notes
    assert [(round(n.start_quarters * 480), round(n.duration_quarters * 480)) for n in back] == [
        (round(each.note.start_quarters * 480), round(each.note.duration_quarters * 480)) for each in notes
    ]
    assert [n.pitch_semitones for n in back] == [each.note.pitch_semitones for each in notes]


@pytest.mark.parametrize(
    ("quarters", "values"),
    [
        (1.0, ["quarter"]),
        (1.5, ["quarter."]),
        (4.0, ["whole"]),
        (2.5, ["half", "eighth"]),
        (5.0, ["whole", "quarter"]),
        (3.75, ["half.", "eighth."]),
        (1 / 3, []),  # a triplet's: by its length alone
        (0.0, []),
    ],
)
def test_lengths_as_note_values(quarters: float, values: list[str]) -> None:
    assert [name + "." * dots for _, name, dots in note_values(round(480 * quarters))] == values


def test_words_stand_below_the_first_of_tied_notes_and_rests_have_none() -> None:
    content = annotated_xml(
        [annotated(0.0, 2.5, 69, "xxxxxx"), annotated(3.0, 1.0, 71, "xxxxxo", "?")], title="", part=""
    ).decode()
    assert content.count("<text>xxxxxx</text>") == 1
    assert content.count("<tie ") == 2
    assert content.count("<rest") == 1
    assert content.count("<text>?</text>") == 1


def test_accidentals_as_in_print() -> None:
    keys = [70, 70, 69, 69, 70]  # a sharp, again, the natural that takes it back, then none, a sharp
    content = annotated_xml(
        [annotated(float(k), 1.0, key) for k, key in enumerate(keys)], title="", part=""
    ).decode()
    assert (content.count(">sharp<"), content.count(">natural<")) == (3, 1)


def test_nothing_is_no_score() -> None:
    with pytest.raises(ValueError, match=r"^a score has one note at least$"):
        annotated_xml([], title="", part="")
