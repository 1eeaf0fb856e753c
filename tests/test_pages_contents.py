"""What stands on the chart: order, words and numbers. All surveys are invented."""

from dataclasses import replace
from math import nan

import pytest
from surveys import entry, heron, nothing_heard, one_take, reading, sixty_entries, strange_words

from fluteprobe.pages.contents import (
    best_first,
    cents_text,
    chart_contents,
    note_text,
    spoke_text,
    uncertainty_text,
)


def test_upper_register_comes_first_and_both_run_from_low_to_high() -> None:
    upper, first = chart_contents(heron()).sections
    assert [upper.register, first.register] == [2, 1]
    assert [group.note for group in upper.groups] == ["A5", "A♯5", "C6", "C♯6", "D6", "D♯6", "E6"]
    assert [group.note for group in first.groups] == [
        "A4",
        "B4",
        "C5",
        "C♯5",
        "D5",
        "D♯5",
        "E5",
        "F5",
        "G5",
        "A5",
    ]


def test_every_entry_stands_in_exactly_one_place() -> None:
    for survey in (heron(), sixty_entries(), one_take()):
        shown = [entry for section in chart_contents(survey).sections for entry in section.entries]
        assert sorted(map(repr, shown)) == sorted(map(repr, survey.entries))


def test_a_third_register_has_a_section_only_where_it_was_heard() -> None:
    assert [section.register for section in chart_contents(sixty_entries()).sections] == [3, 2, 1]
    assert [section.register for section in chart_contents(heron()).sections] == [2, 1]


def test_alternatives_stand_together_whatever_the_tuning() -> None:
    low = replace(heron(), sitting=replace(heron().sitting, a4_hz=415.0))
    notes = [group.note for section in chart_contents(low).sections for group in section.groups]
    assert len(notes) == 17


def test_best_first_prefers_what_speaks_then_what_is_in_tune_then_the_surer_then_the_closer() -> None:
    weak = entry("xxo", 1, 72, 0.0, reliability=0.5)
    off = entry("xox", 1, 72, 30.0)
    rare = entry("oxx", 1, 72, 1.0, reliability=0.9)
    good = entry("oox", 1, 72, -4.0)
    better = entry("ooo", 1, 72, 2.0)
    assert best_first([weak, off, rare, good, better], 10.0) == (better, good, rare, off, weak)


def test_what_did_not_speak_is_listed_once_with_its_breaths() -> None:
    silent, undecided, unused = chart_contents(heron()).asides
    assert (silent.label, silent.items) == ("did not speak", ("xhxxxx (over)", "ooxxxx (soft, over)"))
    assert undecided.items[1] == "oxoxox (over) D6 +20"  # 1188 Hz is 19.6 cents above D6, 1174.66 Hz
    assert undecided.items[0].startswith("oxxxxh (over) edge tone C♯7")
    assert (unused.label, unused.items) == ("not used", ("takes/xxxxxx-over-3.wav",))


def test_breath_inside_a_take_that_gave_an_entry_is_not_silence() -> None:
    survey = one_take()
    breath = replace(reading("xxxxx"), take=survey.entries[0].takes[0])
    assert chart_contents(replace(survey, readings=(breath,))).asides == ()


def test_a_flute_that_never_spoke_says_so() -> None:
    contents = chart_contents(nothing_heard())
    assert [section.remark for section in contents.sections] == ["Nothing has been heard in it yet."] * 2
    assert contents.summary == ""


def test_conditions_name_what_is_known_and_an_estimate_as_one() -> None:
    assert chart_contents(heron()).conditions == (
        "A4 = 440 Hz", "air 22 °C", "carried to 20 °C: an estimate", "2024-05-11", "played by Ada",
        "at back room", "microphone phone, 40 cm away",
    )  # fmt: skip
    assert chart_contents(heron()).reference_label == "est. at 20 °C"
    assert chart_contents(one_take()).conditions == ("A4 = 440 Hz",)
    assert chart_contents(one_take()).reference_label is None


def test_no_control_character_survives() -> None:
    contents = chart_contents(strange_words())
    words = [
        contents.title,
        contents.subtitle,
        *contents.conditions,
        *(i for a in contents.asides for i in a.items),
    ]
    assert all(letter.isprintable() for word in words for letter in word)


def test_a_nameless_flute_still_has_a_title() -> None:
    survey = one_take()
    assert (
        chart_contents(replace(survey, flute=replace(survey.flute, name="\n"))).title
        == "A flute without a name"
    )


@pytest.mark.parametrize(
    ("cents", "words"),
    [(3.6, "+4"), (-11.8, "−12"), (0.4, "0"), (-0.4, "0"), (49.9, "+50"), (None, "?"), (nan, "?")],
)
def test_cents_carry_their_sign(cents: float | None, words: str) -> None:
    assert cents_text(cents) == words


@pytest.mark.parametrize(
    ("cents", "tolerance", "words"),
    [
        (10.3, 10.0, "+10.3"), (-10.3, 10.0, "−10.3"), (10.0, 10.0, "+10"), (9.7, 10.0, "+10"),
        (10.04, 10.0, "+10.04"), (10.6, 10.0, "+11"), (5.2, 10.0, "+5"), (2.7, 2.5, "+3"), (2.5, 2.5, "+2"),
        (0.4, 0.3, "+0.4"), (2.4, 2.3, "+2.4"), (nan, 10.0, "?"),
    ],
)  # fmt: skip
def test_printed_cents_stand_on_their_own_side_of_the_tolerance(
    cents: float, tolerance: float, words: str
) -> None:
    assert cents_text(cents, tolerance) == words


@pytest.mark.parametrize("tolerance", [0.3, 2.5, 5.0, 10.0, 12.25])
def test_print_and_mark_agree_around_any_tolerance(tolerance: float) -> None:
    for k in range(-400, 401):
        cents = tolerance + 0.01 * k
        printed = float(cents_text(cents, tolerance).replace("−", "-"))
        assert (abs(printed) > tolerance) == (abs(cents) > tolerance), cents


@pytest.mark.parametrize(
    ("cents", "words"), [(0.62, "±0.6"), (9.94, "±9.9"), (9.96, "±10"), (40.2, "±40"), (nan, "±?")]
)
def test_uncertainty_has_one_decimal_under_ten_cents(cents: float, words: str) -> None:
    assert uncertainty_text(cents) == words


def test_notes_and_shares_in_print() -> None:
    assert [note_text(note) for note in ("C#5", "Bb4", "B4", "A-1")] == ["C♯5", "B♭4", "B4", "A-1"]


@pytest.mark.parametrize(
    ("takes", "reliability", "words"),
    [(1, 1.0, "1"), (3, 1.0, "3"), (3, 0.75, "3 of 4"), (2, 2 / 3, "2 of 3"), (1, 1 / 7, "1 of 7")],
)
def test_in_how_many_takes_it_spoke(takes: int, reliability: float, words: str) -> None:
    assert spoke_text(entry("xo", 1, 60, 0.0, takes=takes, reliability=reliability)) == words


def test_a_card_has_the_best_fingering_of_each_note_and_no_lists() -> None:
    contents = chart_contents(heron(), best_only=True)
    shown = [entry for section in contents.sections for entry in section.entries]
    assert sorted(entry.note for entry in shown) == sorted({entry.note for entry in heron().entries})
    everything = heron().entries
    for best in shown:
        assert best == best_first([e for e in everything if e.note == best.note], 10.0)[0]
    assert contents.asides == ()
    assert not any("carried" in words for words in contents.conditions)


@pytest.mark.parametrize("tolerance", [0.0, -5.0, nan])
def test_a_tolerance_is_positive(tolerance: float) -> None:
    with pytest.raises(ValueError, match="a tolerance is above 0 cents, not"):
        chart_contents(heron(), tolerance)
