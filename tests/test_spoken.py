"""What a screen reader says for a drawing. There is no outside source: the words are our own."""

import pytest

from fluteprobe.flute.fingering import Fingering
from fluteprobe.pages.spoken import deviation_in_words, fingering_in_words, note_in_words


@pytest.mark.parametrize(
    ("states", "words"),
    [
        ("oxxxxx", "top hole open, the others closed"),
        ("xxxxxx", "all holes closed"),
        ("oooooo", "all holes open"),
        ("vxxxxo", "top hole barely cracked, bottom hole open, the others closed"),
        ("hxxoox", "top hole half-holed, fourth and fifth holes open, the others closed"),
        ("xxxooo", "fourth to bottom holes open, the others closed"),
        ("oxoxox", "top, third and fifth holes open, the others closed"),
        ("xoooxooox", "top, fifth and bottom holes closed, the others open"),
        ("xxxxxxxxoo", "ninth and bottom holes open, the others closed"),
        ("xo", "bottom hole open, the other closed"),
        ("x", "the hole closed"),
    ],
)
def test_fingerings(states: str, words: str) -> None:
    assert fingering_in_words(Fingering(states)) == words


@pytest.mark.parametrize(
    ("cents", "words"),
    [
        (0.3, "in tune, within the tolerance"),
        (4.2, "4 cents sharp, within the tolerance"),
        (-10.0, "10 cents flat, within the tolerance"),
        (-26.1, "26 cents flat, more than the tolerance"),
        (48.9, "49 cents sharp, more than the tolerance"),
    ],
)
def test_deviations(cents: float, words: str) -> None:
    assert deviation_in_words(cents, 10.0) == words


def test_notes() -> None:
    assert [note_in_words(note) for note in ("G♯5", "B♭4", "C6")] == ["G sharp 5", "B flat 4", "C6"]
