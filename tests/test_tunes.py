"""Whether a flute can play a tune: tunes made from what an invented flute plays, moved and spoilt."""

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st
from test_repertoire import flute

from fluteprobe.repertoire.sounds import Compass, Standard
from fluteprobe.repertoire.tunes import finger_moves, require_playable, short_notes, tune_fit, tune_fits
from fluteprobe.score.tune import ScoreError, Tune, TuneNote

STANDARD = Standard(tolerance_cents=20.0, a4_hz=440.0)
# A scale in which no shift but its own fits: steps of 2, 1, 3, 2, 4 semitones.
SCALE = (62, 64, 65, 68, 70, 74)
FINGERINGS = ("xxxxxx", "xxxxxo", "xxxxoo", "xxxooo", "xxoooo", "xooooo")


def compass() -> Compass:
    return flute(*((states, 1, key, 0.0) for states, key in zip(FINGERINGS, SCALE, strict=True)))


def tune(*notes: tuple[float, float]) -> Tune:
    """Return a tune of (pitch, duration)."""
    made, now = [], 0.0
    for pitch, duration in notes:
        made.append(
            TuneNote(
                start_quarters=now, duration_quarters=duration, pitch_semitones=pitch,
                bar=str(1 + int(now // 4)), beat=1.0 + now % 4,
            )
        )  # fmt: skip
        now += duration
    return Tune(title=None, part="made up", notes=tuple(made), cautions=())


@pytest.mark.parametrize("moved", [-24, -12, -5, 0, 1, 7, 12, 31])
def test_a_tune_of_the_flute_s_own_notes_is_found_wherever_it_was_moved(moved: int) -> None:
    best = tune_fits(tune(*((key + moved, 1.0) for key in SCALE)), compass(), STANDARD)[0]
    assert best.semitones == -moved
    assert (best.surely, best.perhaps, best.short) == (1.0, 0.0, 0)
    assert best.off_cents == pytest.approx(0.0, abs=1e-9)
    assert best.moves == 1.0  # from each rung of the ladder to the next, one finger


def test_shares_are_of_the_time() -> None:
    found = tune_fit(tune((62, 3.0), (63, 1.0)), 0, compass(), STANDARD)
    assert (found.surely, found.short) == (0.75, 1)
    assert found.expected == pytest.approx(0.75)


def test_what_falls_short_is_told_with_its_place() -> None:
    spoilt = tune((62, 1.0), (63, 1.0), (64, 2.0), (65, 1.0), (63, 1.0))
    found = tune_fit(spoilt, 0, compass(), STANDARD)
    assert [(note.bar, note.beat, note.pitch_semitones) for note in short_notes(spoilt, found)] == [
        ("1", 2.0, 63),
        ("2", 2.0, 63),
    ]
    assert found.short == 2


def test_a_tune_without_durations_counts_its_notes() -> None:
    assert tune_fit(tune((62, 0.0), (62, 0.0), (63, 0.0)), 0, compass(), STANDARD).surely == pytest.approx(
        2 / 3
    )


def test_the_better_known_note_wins_over_the_nearer_key() -> None:
    # One semitone up everything is in tune; as written it is 15 cents off and known to 10.
    sounds = compass().sounds
    vague = [
        replace(sound, frequency_hz=sound.frequency_hz * 2 ** (-85 / 1200), uncertainty_cents=10.0)
        for sound in sounds
    ]
    best = tune_fits(tune(*((key - 1, 1.0) for key in SCALE)), Compass([*sounds, *vague]), STANDARD)[0]
    assert best.semitones == 1
    assert best.surely == 1.0


def test_the_best_a4_is_found_with_the_transposition() -> None:
    sharp = flute(*((states, 1, key, 30.0) for states, key in zip(FINGERINGS, SCALE, strict=True)))
    standard = Standard(tolerance_cents=5.0, a4_hz=440.0, best_a4=True)
    best = tune_fits(tune(*((key + 3, 1.0) for key in SCALE)), sharp, standard)[0]
    assert (best.semitones, best.surely) == (-3, 1.0)
    assert best.a4_hz == pytest.approx(440.0 * 2 ** (30 / 1200))


@given(st.lists(st.tuples(st.integers(40, 90), st.integers(0, 8)), min_size=1, max_size=30))
def test_shares_add_up_and_the_order_is_that_of_expectation(notes: list[tuple[int, int]]) -> None:
    fits = tune_fits(tune(*((pitch, duration / 2) for pitch, duration in notes)), compass(), STANDARD)
    assert len({fit.semitones for fit in fits}) == len(fits)
    for fit in fits:
        assert 0.0 <= fit.surely + fit.perhaps <= 1.0 + 1e-9
        assert fit.expected <= fit.surely + fit.perhaps + 1e-9
    shown = [round(fit.expected, 2) for fit in fits]
    assert shown == sorted(shown, reverse=True)


def test_decimals_of_a_semitone_are_kept_through_a_transposition() -> None:
    between = flute(("xxxxxx", 1, 62, 49.0), ("xxxxxo", 1, 64, 49.0))
    best = tune_fits(tune((60.49, 1.0), (62.49, 1.0)), between, Standard(tolerance_cents=2.0, a4_hz=440.0))[0]
    assert (best.semitones, best.surely, best.short) == (2, 1.0, 0)


def test_fingers_move_and_so_does_the_breath() -> None:
    low, high, over = flute(("xxxxxx", 1, 62, 0.0), ("xxxooo", 1, 68, 0.0), ("oxxxxx", 2, 75, 0.0)).sounds
    assert finger_moves(low, high) == 3
    assert finger_moves(high, low) == 3
    assert finger_moves(low, over) == 2  # the top finger, and another register
    assert finger_moves(low, low) == 0


def test_nothing_measured_plays_nothing() -> None:
    assert tune_fits(tune((62, 1.0)), Compass([]), STANDARD) == ()


def test_a_tune_that_nobody_could_play_is_refused() -> None:
    require_playable(tune(*((40 + k / 10, 1.0) for k in range(400))))
    with pytest.raises(
        ScoreError, match=r"^it has more than 400 different pitches: give a melody in semitones$"
    ):
        require_playable(tune(*((40 + k / 10, 1.0) for k in range(401))))
