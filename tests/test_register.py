"""Registers from clues: each clue alone, all of them together, and undecided where they disagree."""

from math import log2

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fluteprobe.flute.bumps import bump_clue
from fluteprobe.flute.evidence import PRIOR, REGISTERS, Clue, Register, decide
from fluteprobe.flute.fingering import Breath, Fingering, ladder
from fluteprobe.flute.ladder import companion_clue, known_ladder, ladder_clue
from fluteprobe.flute.register import SAME_PITCH_CENTS, Sounding, register_alone, registers_of

# A six-hole flute's first register, all closed to all open: a minor pentatonic with two notes between.
LADDER_HZ = (392.0, 466.0, 523.0, 554.0, 587.0, 698.0, 784.0)


def pitch(frequency_hz: float) -> float:
    return 1200.0 * log2(frequency_hz)


def sounding(
    states: str, frequency_hz: float, breath: Breath = "normal", bumps: tuple[tuple[float, float], ...] = ()
) -> Sounding:
    name = f"takes/{states}-{breath}.wav"
    return Sounding(
        take=name, fingering=Fingering(states), breath=breath, pitch_cents=pitch(frequency_hz), bumps=bumps
    )


def flute() -> list[Sounding]:
    return [sounding(str(rung), hz) for rung, hz in zip(ladder(6), LADDER_HZ, strict=True)]


def test_a_bump_near_half_the_frequency_is_the_second_register() -> None:
    """Measured on recorded concert flutes: 10 to 18 dB near half the frequency, and at one and a half."""
    call = register_alone([(0.5, 14.0), (1.0, 8.0), (1.5, 15.0)])
    assert call.register == 2
    assert call.evidence[0].source == "breath resonances"
    assert call.evidence[0].detail == "the breath noise has a bump at 0.50 times the tone (14 dB)"


def test_two_bumps_below_are_the_third_register_and_none_the_first() -> None:
    assert register_alone([(0.34, 8.0), (0.67, 15.0), (1.33, 20.0)]).register == 3
    assert register_alone([(1.0, 7.0), (2.0, 9.0)]).register == 1


def test_nothing_is_decided_where_the_breath_is_not_heard() -> None:
    call = register_alone([])
    assert call.register is None
    assert call.evidence[0].detail == "the breath noise shows no resonance at all"


@given(
    st.lists(
        st.tuples(st.floats(0.2, 3.6), st.floats(0.0, 40.0)),
        max_size=6,
    )
)
def test_probabilities_add_up_whatever_is_heard(bumps: list[tuple[float, float]]) -> None:
    call = register_alone(bumps)
    assert sum(call.probability.values()) == pytest.approx(1.0)
    assert all(0.0 <= p <= 1.0 for p in call.probability.values())
    assert call.register is None or call.probability[call.register] >= 0.9


def test_clues_are_combined_by_bayes_rule() -> None:
    """Two clues of 3 : 1 : 1 give 9 : 1 : 1 times the prior, worked by hand."""
    clue = Clue(source="test", likelihood={1: 3.0, 2: 1.0, 3: 1.0}, detail="")
    call = decide([clue, clue])
    weight = {1: 9.0 * PRIOR[1], 2: PRIOR[2], 3: PRIOR[3]}
    for register in REGISTERS:
        assert call.probability[register] == pytest.approx(weight[register] / sum(weight.values()))
    assert call.evidence[0].favours == 1
    assert call.evidence[0].log_odds == pytest.approx(1.0986, abs=1e-4)


def test_one_clue_is_outvoted_by_two_as_firm_and_by_no_less() -> None:
    """250 and 220 to 1 against 29 to 1 leave a chance of 0.05 %; 60 and 60 against 40, more than 0.2 %."""

    def clue(register: Register, odds: float) -> Clue:
        likelihood = dict.fromkeys(REGISTERS, 1.0) | {register: odds}
        return Clue(source=f"{odds:g}", likelihood=likelihood, detail="")

    assert decide([clue(1, 250.0), clue(1, 220.0), clue(3, 29.0)]).register == 1
    assert decide([clue(1, 60.0), clue(1, 60.0), clue(2, 40.0)]).register is None
    assert decide([clue(1, 50000.0), clue(2, 29.0)]).register is None
    assert (
        decide([clue(1, 250.0), clue(1, 220.0), clue(1, 220.0), clue(2, 20.0), clue(3, 20.0)]).register
        is None
    )


def test_the_whole_ladder_is_the_first_register() -> None:
    assert [call.register for call in registers_of(6, flute())] == [1] * 7


def test_the_octave_of_a_fingering_is_its_second_register() -> None:
    calls = registers_of(6, [*flute(), sounding("xxxxxx", 790.0, "over"), sounding("xxxxxo", 930.0, "over")])
    assert [call.register for call in calls[-2:]] == [2, 2]
    assert {"ladder", "same fingering", "breath in the file name"} <= {e.source for e in calls[-1].evidence}


def test_the_top_hole_open_just_above_the_octave_is_the_second_register() -> None:
    """Common practice, no source: top hole open, all others closed, about a semitone over the octave."""
    calls = registers_of(6, [*flute(), sounding("oxxxxx", 392.0 * 2.12, bumps=((0.63, 12.0), (1.0, 5.0)))])
    assert calls[-1].register == 2


def test_a_fingering_overblown_alone_does_not_bend_the_ladder() -> None:
    """A rung that was only overblown stands above its neighbours, and is read as the second register."""
    tones = [tone for tone in flute() if str(tone.fingering) != "xxxxoo"]
    calls = registers_of(6, [*tones, sounding("xxxxoo", 1040.0, "over")])
    assert calls[-1].register == 2
    rungs = known_ladder(
        6, {tone.fingering: tone.pitch_cents for tone in [*tones, sounding("xxxxoo", 1040.0)]}
    )
    assert 2 not in rungs.rungs


def test_contradicting_evidence_is_undecided() -> None:
    """The ladder says first register, the breath noise second."""
    tones = flute()
    tones[3] = sounding("xxxooo", 554.0, bumps=((0.5, 14.0), (1.0, 8.0), (1.5, 12.0)))
    call = registers_of(6, tones)[3]
    assert call.register is None
    assert call.caution == (
        "register undecided: the evidence disagrees (breath resonances for 2, ladder for 1)"
    )


def test_the_ladder_says_nothing_without_other_rungs() -> None:
    lone = known_ladder(6, {Fingering("xxxxxx"): pitch(392.0)})
    assert ladder_clue(lone, Fingering("xxxxxx"), pitch(392.0)) is None
    assert ladder_clue(known_ladder(6, {}), Fingering("oxxxxx"), pitch(800.0)) is None


def test_the_reach_of_a_fingering_lies_between_ladder_notes() -> None:
    known = known_ladder(6, {tone.fingering: tone.pitch_cents for tone in flute()})
    low, high = known.reach(Fingering("xxxoxx")) or (0.0, 0.0)
    assert (low, high) == pytest.approx((pitch(392.0), pitch(554.0)))
    low, high = known.reach(Fingering("xxoxoo")) or (0.0, 0.0)
    assert (low, high) == pytest.approx((pitch(523.0), pitch(587.0)))


def test_a_companion_is_weighed_by_its_own_register() -> None:
    first = companion_clue(Fingering("xxxxxx"), pitch(788.0), pitch(392.0), {1: 1.0, 2: 0.0, 3: 0.0})
    assert first.evidence.favours == 2
    second = companion_clue(Fingering("xxxxxx"), pitch(392.0), pitch(788.0), {1: 0.0, 2: 1.0, 3: 0.0})
    assert second.evidence.favours == 1


def test_an_overblown_take_names_its_highest_tone() -> None:
    low, high = sounding("xxxxxx", 392.0, "over"), sounding("xxxxxx", 790.0, "over")
    calls = registers_of(6, [low, high])
    said = ["breath in the file name" in {e.source for e in call.evidence} for call in calls]
    assert said == [False, True]
    assert pitch(790.0) - pitch(392.0) > SAME_PITCH_CENTS


def test_an_unheard_bump_list_is_a_weak_word() -> None:
    odds = bump_clue([]).evidence.log_odds
    assert 0.0 < odds < 1.0


def test_a_resonance_seen_in_another_take_speaks_for_what_sounds_there() -> None:
    """A first-register take of a forked fingering shows a bump at 1.5 times: that is the second resonance."""
    low = sounding("oxxoxx", 500.0, bumps=((1.0, 7.0), (1.5, 9.0)))
    high = sounding("oxxoxx", 750.0, "over", bumps=((0.66, 12.0), (1.0, 6.0)))
    call = registers_of(6, [low, high])[1]
    assert call.register == 2
    said = {reason.source: reason for reason in call.evidence}
    assert said["resonances of other takes"].favours == 2
    assert said["resonances of other takes"].detail == (
        "another take showed a resonance here, the second that it showed"
    )
