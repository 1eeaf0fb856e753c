"""One line out of several notes at once, and parts by number or name: by construction."""

from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fluteprobe.score.tune import Part, Score, ScoreError, TuneNote, top_line, tune_of


def note(start: float, duration: float, pitch: float) -> TuneNote:
    return TuneNote(
        start_quarters=start, duration_quarters=duration, pitch_semitones=pitch, bar="1", beat=1.0
    )


def brief(notes: tuple[TuneNote, ...]) -> list[tuple[float, float, float]]:
    return [(n.start_quarters, n.duration_quarters, n.pitch_semitones) for n in notes]


def test_the_highest_of_a_chord_is_taken() -> None:
    line, left_out = top_line([note(0, 1, 60), note(0, 1, 67), note(0, 1, 64), note(1, 1, 62)])
    assert brief(line) == [(0, 1, 67), (1, 1, 62)]
    assert left_out == 2


def test_a_higher_note_cuts_off_a_lower_one() -> None:
    line, left_out = top_line([note(0, 4, 48), note(1, 1, 60), note(2, 1, 59)])
    assert brief(line)[:2] == [(0, 1, 48), (1, 1, 60)]
    assert left_out == 0


def test_a_lower_voice_under_a_held_note_is_left_out() -> None:
    line, left_out = top_line([note(0, 4, 72), note(1, 1, 60), note(2, 1, 62), note(4, 1, 71)])
    assert brief(line) == [(0, 4, 72), (4, 1, 71)]
    assert left_out == 2


def test_grace_notes_stay() -> None:
    line, left_out = top_line([note(0, 0, 70), note(0, 1, 72), note(1, 0, 60), note(1, 1, 65)])
    assert sorted(brief(line)) == sorted([(0, 0, 70), (0, 1, 72), (1, 0, 60), (1, 1, 65)])
    assert left_out == 0


@given(
    st.lists(st.tuples(st.integers(0, 40), st.integers(0, 12), st.integers(40, 90)), max_size=40),
    st.sampled_from([0.0, 0.3]),
)
def test_a_line_never_overlaps_and_loses_only_what_it_says(
    raw: list[tuple[int, int, int]], legato_share: float
) -> None:
    notes = [note(start / 4, duration / 4, pitch) for start, duration, pitch in raw]
    line, left_out = top_line(notes, legato_share)
    assert len(line) + left_out == len(notes)
    held = [n for n in line if n.duration_quarters > 0]
    assert all(a.end_quarters <= b.start_quarters + 1e-9 for a, b in pairwise(held))
    assert all(n.duration_quarters >= 0.0 for n in line)


def test_a_part_that_is_not_there_is_told() -> None:
    score = Score(title=None, parts=(Part(name="Song", notes=(note(0, 1, 60),)), Part(name="", notes=())))
    assert tune_of(score, "song").part == "Song"
    with pytest.raises(ScoreError, match=r"^it has no part 'Oboe', expected one of 1 Song$"):
        tune_of(score, "Oboe")
    with pytest.raises(ScoreError, match=r"^it has no part '0', expected one of 1 Song$"):
        tune_of(score, "0")
