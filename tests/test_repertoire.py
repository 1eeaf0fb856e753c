"""What a flute can play: by construction, and with the conformance probability against scipy.

Surveys are made up; they prove nothing about flutes.
"""

from dataclasses import replace
from math import log2

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import norm
from surveys import entry, heron, nothing_heard, one_take, reading

from fluteprobe.flute.register import Register
from fluteprobe.flute.scales import named_scale, tonic_of
from fluteprobe.repertoire.best_a4 import REACH_CENTS, best_offset_cents
from fluteprobe.repertoire.scales import ScaleFit, best_first, scale_fit
from fluteprobe.repertoire.sounds import SURE, UNLIKELY, Compass, Standard, conformance, sounds_of

MAJOR = named_scale("major")
WITHIN_20 = Standard(tolerance_cents=20.0, a4_hz=440.0)


def flute(*notes: tuple[str, Register, int, float], reliability: float = 1.0) -> Compass:
    """Return a flute with (fingering, register, MIDI note, cents off)."""
    entries = tuple(entry(*note, reliability=reliability) for note in notes)
    return Compass(sounds_of(replace(one_take(), entries=entries)))


def whole_tones_and_more(*, off: float = 0.0) -> Compass:
    """Return a flute that plays C major from C4 to E5, all notes off alike."""
    keys = [60, 62, 64, 65, 67, 69, 71, 72, 74, 76]
    return flute(
        *((f"{k:06b}".replace("0", "x").replace("1", "o"), 1, key, off) for k, key in enumerate(keys))
    )


def fit(scale: str, tonic: str, compass: Compass, standard: Standard = WITHIN_20) -> ScaleFit:
    return scale_fit(named_scale(scale), tonic_of(tonic), compass, standard)


# Tones and tolerances ------------------------------------------------------------------------------------


@given(st.floats(-80, 80), st.floats(0.05, 30), st.floats(0.5, 50))
def test_conformance_is_that_of_the_normal_distribution(off: float, u: float, tolerance: float) -> None:
    # JCGM 106:2012, 7.4: the share of the distribution of the true value inside the tolerance interval.
    expected = norm.cdf((tolerance - off) / u) - norm.cdf((-tolerance - off) / u)
    assert conformance(off, u, tolerance) == pytest.approx(expected, abs=1e-9)


def test_surely_keeps_its_word() -> None:
    """Of notes called surely in tune, at least 95 % are, where nothing is known of flutes beforehand."""
    draw = np.random.default_rng(8)
    true = draw.uniform(-100.0, 100.0, 40_000)
    uncertainty = draw.uniform(0.5, 8.0, true.size)
    measured = true + uncertainty * draw.standard_normal(true.size)
    told = np.array([conformance(m, u, 20.0) for m, u in zip(measured, uncertainty, strict=True)])
    in_tune = np.abs(true) <= 20.0
    assert in_tune[told >= SURE].mean() > 0.98  # most are far inside
    assert in_tune[told < UNLIKELY].mean() < 0.005
    # In between the probability is the share: 400 and more in a bin.
    for low in np.arange(0.05, 0.95, 0.1):
        some = (told >= low) & (told < low + 0.1)
        assert in_tune[some].mean() == pytest.approx(told[some].mean(), abs=0.08)  # 3 standard errors


@pytest.mark.parametrize(
    ("cents", "uncertainty", "grade"),
    [
        (0.0, 1.0, "surely"),
        (18.0, 1.0, "surely"),  # two uncertainties inside: 97.7 %
        (18.8, 1.0, "perhaps"),  # 1.2 uncertainties inside: 88 %
        (20.0, 1.0, "perhaps"),  # on the edge: one half
        (21.5, 1.0, "perhaps"),  # 1.5 outside: 7 %
        (22.0, 1.0, "not"),  # two outside: 2.3 %
        (0.0, 20.0, "perhaps"),  # in the middle but hardly known: 68 %
        (-18.0, 1.0, "surely"),
        (-22.0, 1.0, "not"),
    ],
)
def test_a_note_is_graded_by_how_surely_it_is_in_tune(cents: float, uncertainty: float, grade: str) -> None:
    survey = replace(one_take(), entries=(entry("xxxxx", 1, 69, cents, uncertainty=uncertainty),))
    match = Compass(sounds_of(survey)).match(69.0, 0.0, 20.0)
    assert match.grade == grade
    assert (match.nearest is None) == (grade != "not")


def test_a_fingering_that_speaks_poorly_is_at_best_perhaps() -> None:
    assert flute(("xxxxx", 1, 69, 0.0), reliability=0.75).match(69.0, 0.0, 20.0).grade == "surely"
    assert flute(("xxxxx", 1, 69, 0.0), reliability=0.5).match(69.0, 0.0, 20.0).grade == "perhaps"


def test_a_register_that_is_not_certain_is_at_best_perhaps() -> None:
    (sound,) = flute(("oxxxx", 2, 81, 0.0)).sounds
    for probability, grade in ((0.95, "surely"), (0.85, "perhaps")):
        compass = Compass([replace(sound, register_probability=probability)])
        assert compass.match(81.0, 0.0, 20.0).grade == grade


def test_a_tone_of_undecided_register_counts_as_perhaps() -> None:
    tone = reading("oxxxxo", breath="over", kind="tone", frequency_hz=880.0)
    silent = reading("oxxxxo", breath="over")
    survey = replace(one_take(), entries=(), readings=(tone, replace(silent, take="takes/other.wav")))
    (sound,) = sounds_of(survey)
    assert (sound.register, sound.reliability) == (None, 0.5)
    assert Compass([sound]).match(81.0, 0.0, 20.0).grade == "perhaps"


def test_the_best_way_comes_first_and_the_others_after_it() -> None:
    compass = flute(
        ("xoxoxx", 1, 72, 15.0), ("xxxxoo", 1, 72, -3.0), ("xxxoox", 1, 72, 50.0), ("xxxxxo", 1, 72, 2.0)
    )
    match = compass.match(72.0, 0.0, 20.0)
    assert [str(way.sound.fingering) for way in match.ways] == ["xxxxxo", "xxxxoo", "xoxoxx"]
    assert [way.deviation_cents for way in match.ways] == pytest.approx([2.0, -3.0, 15.0])


def test_a_note_out_of_tune_tells_what_is_nearest() -> None:
    match = flute(("oxxxxx", 2, 80, -26.0)).match(80.0, 0.0, 20.0)
    assert match.ways == ()
    assert match.nearest is not None
    assert match.nearest.deviation_cents == pytest.approx(-26.0)
    assert flute(("oxxxxx", 2, 78, 0.0)).match(80.0, 0.0, 20.0).nearest is None


def test_another_a4_moves_every_note() -> None:
    compass = flute(("xxxxxx", 1, 69, 0.0))
    standard = Standard(tolerance_cents=20.0, a4_hz=432.0)
    match = compass.match(69.0, standard.offset_cents, 20.0)
    assert match.nearest is not None
    assert match.nearest.deviation_cents == pytest.approx(1200 * log2(440 / 432))


@pytest.mark.parametrize("tolerance", [0.0, -1.0, float("nan")])
def test_a_tolerance_is_above_nought(tolerance: float) -> None:
    with pytest.raises(ValueError, match=r"^a tolerance is above 0 cents, not "):
        Standard(tolerance_cents=tolerance, a4_hz=440.0)


# Scales --------------------------------------------------------------------------------------------------


def test_a_scale_that_the_flute_was_made_for() -> None:
    found = fit("major", "C", whole_tones_and_more())
    assert found.grade == "surely"
    assert found.missing == ()
    assert [match.target_semitones for match in found.notes] == [60, 62, 64, 65, 67, 69, 71, 72, 74, 76]
    assert found.octaves == ((0, "surely"),)
    assert found.run == (0, 10)


def test_the_relative_minor_has_no_octave_within_the_compass() -> None:
    found = fit("minor", "A", whole_tones_and_more())
    assert (found.grade, found.octaves, found.run) == ("not", (), (0, 10))


def test_a_missing_note_breaks_the_row_and_is_named() -> None:
    found = fit("major", "F", whole_tones_and_more())
    assert [match.target_semitones for match in found.missing] == [70.0]  # B flat
    assert found.run == (0, 6)


def test_the_pentatonic_modes_of_one_set_of_notes_are_all_found() -> None:
    keys = [57, 60, 62, 64, 67, 69, 72, 74, 76, 79, 81]  # A minor pentatonic over two octaves
    compass = flute(
        *((f"{k:06b}".replace("0", "x").replace("1", "o"), 1, key, 0.0) for k, key in enumerate(keys))
    )
    sure = {
        (mode, tonic)
        for mode in range(1, 6)
        for tonic in range(12)
        if scale_fit(named_scale(f"pentatonic-{mode}"), tonic, compass, WITHIN_20).grade == "surely"
    }
    assert sure == {(1, 0), (2, 2), (3, 4), (4, 7), (5, 9)}  # C, D, E, G, A: each note is a tonic once


def test_steps_between_the_semitones() -> None:
    just = "0 204c 386c 498c 702c 884c 1088c"  # a just major scale, in whole cents
    compass = flute(
        *((f"{k:06b}".replace("0", "x").replace("1", "o"), 1, 60, cents)
          for k, cents in enumerate((0.0, 204.0, 386.0, 498.0, 702.0, 884.0, 1088.0, 1200.0)))
    )  # fmt: skip
    narrow = Standard(tolerance_cents=5.0, a4_hz=440.0)
    assert fit(just, "C", compass, narrow).grade == "surely"
    assert fit("major", "C", compass, narrow).grade == "not"


def test_the_whole_compass_counts_half_a_semitone_more_each_way() -> None:
    found = fit("major", "C", flute(("xxxxxx", 1, 60, -49.0), ("oooooo", 1, 72, 49.0)))
    assert (found.notes[0].target_semitones, found.notes[-1].target_semitones) == (60.0, 72.0)


def test_a_flute_that_never_spoke_plays_nothing() -> None:
    found = fit("major", "C", Compass(sounds_of(nothing_heard())))
    assert (found.notes, found.grade, found.run) == ((), "not", (0, 0))


def test_fits_are_ordered_from_the_best() -> None:
    compass = whole_tones_and_more()
    ordered = best_first(scale_fit(MAJOR, tonic, compass, WITHIN_20) for tonic in range(12))
    assert ordered[0].tonic == 0
    assert len({fit.tonic for fit in ordered}) == 12


# The best A4 ---------------------------------------------------------------------------------------------


@pytest.mark.parametrize("off", [-45.0, -18.0, 0.0, 7.5, 40.0])
def test_a_flute_that_is_off_alike_fits_at_its_own_a4(off: float) -> None:
    standard = Standard(tolerance_cents=5.0, a4_hz=440.0, best_a4=True)
    found = fit("major", "C", whole_tones_and_more(off=off), standard)
    assert found.grade == "surely"
    assert found.a4_hz == pytest.approx(440.0 * 2 ** (off / 1200), rel=1e-9)


def test_the_offset_meets_the_most_weight_and_then_least_squares() -> None:
    # Three notes near +10 and one at −30: within 10 cents three can be met, and their mean is 10.
    deviations = {60.0: [8.0], 62.0: [10.0], 64.0: [12.0], 65.0: [-30.0]}
    assert best_offset_cents(deviations, dict.fromkeys(deviations, 1.0), 10.0) == pytest.approx(10.0)
    heavy = {60.0: 1.0, 62.0: 1.0, 64.0: 1.0, 65.0: 5.0}
    assert best_offset_cents(deviations, heavy, 10.0) == pytest.approx(-30.0)
    assert best_offset_cents({60.0: []}, {60.0: 1.0}, 10.0) == 0.0


@given(
    st.dictionaries(
        st.integers(50, 80).map(float), st.lists(st.floats(-90, 90), max_size=3), min_size=1, max_size=10
    ),
    st.floats(2.0, 30.0),
)
def test_no_other_offset_meets_more_notes(deviations: dict[float, list[float]], tolerance: float) -> None:
    weights = dict.fromkeys(deviations, 1.0)

    def met(offset: float) -> int:
        return sum(
            any(abs(deviation - offset) <= tolerance + 1e-6 for deviation in found)
            for found in deviations.values()
        )

    best = best_offset_cents(deviations, weights, tolerance)
    assert abs(best) <= REACH_CENTS
    assert met(best) >= max(met(offset / 4) for offset in range(-200, 201))


# A survey as people have it --------------------------------------------------------------------------------


def test_every_tone_of_the_survey_is_found_once() -> None:
    survey = heron()
    sounds = sounds_of(survey)
    undecided = [r for r in survey.readings if r.tone.frequency_hz and r.tone.kind == "tone"]
    heard = [each.frequency_hz for each in survey.entries] + [r.tone.frequency_hz for r in undecided]
    assert [sound.frequency_hz for sound in sounds] == sorted(map(float, filter(None, heard)))
    assert sum(sound.register is None for sound in sounds) == len(undecided) > 0
    assert Compass(reversed(sounds)).sounds == sounds


def test_a_scale_of_the_demo_survey() -> None:
    found = fit("minor", "A", Compass(sounds_of(heron())))
    grades = [match.grade for match in found.notes]
    # B4 is 21 cents flat, known to 4: perhaps. F♯5, C♯5 and the like are no notes of A minor.
    assert (found.notes[1].target_semitones, grades[1]) == (71.0, "perhaps")
    assert found.octaves == ((0, "perhaps"),)
