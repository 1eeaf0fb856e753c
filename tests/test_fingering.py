"""Fingerings: words of x, o, h and v, top hole first."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fluteprobe.flute.fingering import BREATHS, MAX_HOLES, STATES, Fingering, ladder

WORDS = st.text(alphabet=STATES, min_size=1, max_size=MAX_HOLES)
HOLES = st.integers(1, MAX_HOLES)


@given(WORDS)
def test_a_fingering_is_the_word_it_was_made_from(word: str) -> None:
    fingering = Fingering(word)
    assert str(fingering) == word
    assert fingering.holes == len(word)
    assert fingering == Fingering(word)
    assert hash(fingering) == hash(Fingering(word))


@given(st.text(max_size=2 * MAX_HOLES))
def test_any_other_word_is_refused(word: str) -> None:
    valid = 1 <= len(word) <= MAX_HOLES and set(word) <= set(STATES)
    if valid:
        assert Fingering(word).states == word
        return
    with pytest.raises(ValueError, match="fingering"):
        Fingering(word)


@pytest.mark.parametrize(
    ("word", "message"),
    [
        ("", "a fingering has 1 to 10 holes, not 0: ''"),
        ("x" * 11, "a fingering has 1 to 10 holes, not 11: 'xxxxxxxxxxx'"),
        ("xxaxxb", "'xxaxxb' has 'a'; a fingering is spelt with x, o, h and v"),
        ("XXXX", "'XXXX' has 'X'; a fingering is spelt with x, o, h and v"),
        ("xx\n", r"'xx\n' has '\n'; a fingering is spelt with x, o, h and v"),
    ],
)
def test_refusals_say_what_is_wrong(word: str, message: str) -> None:
    with pytest.raises(ValueError, match="fingering") as caught:
        Fingering(word)
    assert str(caught.value) == message


@given(WORDS)
def test_openness_is_nought_for_closed_and_one_for_open_with_vented_and_half_between(word: str) -> None:
    openness = Fingering(word).openness
    assert len(openness) == len(word)
    for state, share in zip(word, openness, strict=True):
        assert {"x": share == 0.0, "o": share == 1.0}.get(state, 0.0 < share < 1.0)
    assert Fingering("v").openness < Fingering("h").openness


@given(WORDS)
def test_closed_from_top_counts_to_the_first_hole_that_is_not_closed(word: str) -> None:
    closed = Fingering(word).closed_from_top
    assert set(word[:closed]) <= {"x"}
    assert closed == len(word) or word[closed] != "x"
    assert Fingering(word).is_all_closed == (closed == len(word))


@given(HOLES)
def test_the_ladder_opens_one_more_hole_from_the_foot_at_each_step(holes: int) -> None:
    steps = ladder(holes)
    assert len(steps) == holes + 1
    assert steps[0].is_all_closed
    assert [sum(step.openness) for step in steps] == list(range(holes + 1))
    assert [step.closed_from_top for step in steps] == list(range(holes, -1, -1))


@given(WORDS)
def test_exactly_the_steps_of_the_ladder_call_themselves_ladder(word: str) -> None:
    assert Fingering(word).is_ladder == (Fingering(word) in ladder(len(word)))


def test_the_six_hole_ladder_as_written_in_the_conventions() -> None:
    assert [str(step) for step in ladder(6)] == [
        "xxxxxx", "xxxxxo", "xxxxoo", "xxxooo", "xxoooo", "xooooo", "oooooo",
    ]  # fmt: skip


def test_breaths_go_from_soft_to_overblown() -> None:
    assert BREATHS == ("soft", "normal", "over")
