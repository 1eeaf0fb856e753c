"""The survey against the truth of the demo flutes, and its sums worked by hand.

The demo recordings and their truth come from the simulation in samples/: regression, not reference.
"""

import json
from dataclasses import replace
from math import log2, sqrt
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import soundfile
from tones import RATE_HZ, cents, make_tone

from fluteprobe import hear, measure
from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.register import RegisterCall
from fluteprobe.session import SessionError, Sitting, Take, read_session
from fluteprobe.sound.recording import RecordingError
from fluteprobe.sound.tone import Tone
from fluteprobe.survey import Reading, Survey, summed_up, survey_of

SAMPLES = Path(__file__).parent.parent / "samples"
DEMOS = ["heron", "bittern"]


@pytest.fixture(scope="module", params=DEMOS)
def demo(request: pytest.FixtureRequest) -> tuple[Survey, dict[str, Any]]:
    folder = SAMPLES / request.param
    return measure(folder), json.loads((folder / "truth.json").read_text())


def test_every_demo_tone_is_found_within_a_cent(demo: tuple[Survey, dict[str, Any]]) -> None:
    survey, truth = demo
    for take, tones in truth.items():
        heard = [reading.tone for reading in survey.readings if reading.take == take]
        sounding = [tone for tone in heard if tone.frequency_hz is not None]
        assert len(sounding) == len(tones), take
        for tone, true in zip(sounding, tones, strict=True):
            assert tone.frequency_hz is not None
            assert cents(tone.frequency_hz / true["frequency_hz"]) == pytest.approx(0.0, abs=1.0), take
            assert tone.start_s == pytest.approx(true["start_s"], abs=0.08), take
            assert tone.end_s == pytest.approx(true["end_s"], abs=0.08), take


def test_no_demo_register_is_wrong_and_few_are_undecided(demo: tuple[Survey, dict[str, Any]]) -> None:
    survey, truth = demo
    undecided = 0
    for take, tones in truth.items():
        calls = [r.call.register for r in survey.readings if r.take == take and r.tone.frequency_hz]
        for register, true in zip(calls, tones, strict=True):
            assert register in {true["register"], None}, take
            undecided += register is None
    assert undecided <= 1


def test_what_did_not_speak_is_breath_only(demo: tuple[Survey, dict[str, Any]]) -> None:
    survey, truth = demo
    silent = {take for take, tones in truth.items() if not tones}
    assert silent
    assert {r.take for r in survey.readings if r.tone.kind == "breath only"} == silent


def test_entries_stand_in_pitch_order_and_carry_the_stretch(demo: tuple[Survey, dict[str, Any]]) -> None:
    survey, _ = demo
    pitches = [entry.frequency_hz for entry in survey.entries]
    assert pitches == sorted(pitches)
    second = [entry for entry in survey.entries if entry.register == 2]
    first = {entry.fingering: entry for entry in survey.entries if entry.register == 1}
    assert len(second) >= 3
    for entry in second:
        below = first.get(entry.fingering)
        if below is None:
            assert entry.stretch_cents is None
        else:
            expected = cents(entry.frequency_hz / below.frequency_hz) - 1200.0
            assert entry.stretch_cents == pytest.approx(expected, abs=1e-6)


# --- sums, worked by hand ------------------------------------------------------------------------------


def reading(take: str, frequency_hz: float, uncertainty_cents: float, register: int = 1) -> Reading:
    tone = Tone(
        start_s=0.2,
        end_s=2.2,
        kind="tone",
        frequency_hz=frequency_hz,
        uncertainty_cents=uncertainty_cents,
        partials=(),
        harmonic_to_noise_db=30.0,
        breath_resonances=(),
        drift_cents=0.0,
        vibrato=None,
        attack_ms=None,
        cautions=(),
    )
    call = RegisterCall(register=register, probability={1: 1.0, 2: 0.0, 3: 0.0})  # type: ignore[arg-type]
    return Reading(
        take=take,
        fingering=Fingering("xxxxxx"),
        breath="normal",
        tone=tone,
        note="A4",
        cents=0.0,
        cents_at_reference=None,
        call=call,
    )


def take(name: str) -> Take:
    return Take(name=name, path=Path(name), fingering=Fingering("xxxxxx"), breath="normal")


def test_two_takes_that_scatter_give_the_scatter_of_their_mean() -> None:
    """From 26 to 20 °C, c going with the root of absolute temperature: 600 log2(293.15 / 299.15)."""
    other = 440.0 * 2.0 ** (4.0 / 1200.0)
    takes = [take("a"), take("b")]
    (entry,) = summed_up([reading("a", 440.0, 0.01), reading("b", other, 0.01)], takes, Sitting())
    assert entry.note == "A4"
    assert entry.cents == pytest.approx(2.0, abs=1e-6)
    assert entry.uncertainty_cents == pytest.approx(2.0, rel=1e-3)
    assert (entry.tones, entry.takes, entry.reliability) == (2, ("a", "b"), 1.0)


def test_one_take_keeps_its_own_uncertainty_and_equal_takes_share_it() -> None:
    (alone,) = summed_up([reading("a", 440.0, 0.5)], [take("a")], Sitting())
    assert alone.uncertainty_cents == pytest.approx(0.5)
    twice = [reading("a", 440.0, 0.5), reading("b", 440.0, 0.5)]
    (both,) = summed_up(twice, [take("a"), take("b")], Sitting())
    assert both.uncertainty_cents == pytest.approx(0.5 / sqrt(2.0))


def test_reliability_is_the_share_of_takes_that_gave_it() -> None:
    (entry,) = summed_up([reading("a", 440.0, 0.5)], [take("a"), take("b"), take("c")], Sitting())
    assert entry.reliability == pytest.approx(1.0 / 3.0)


def test_a_register_is_told_by_the_breath_it_is_blown_with() -> None:
    """Overblown and still in the first register, 70 cents sharp: that is not what the fingering plays."""
    sharp = replace(reading("hard", 440.0 * 2.0 ** (70.0 / 1200.0), 0.5), breath="over")
    low, high = reading("low", 440.0, 0.5), replace(reading("high", 885.0, 0.5, register=2), breath="over")
    takes = [take("low"), replace(take("hard"), breath="over"), replace(take("high"), breath="over")]
    first, second = summed_up([low, sharp, high], takes, Sitting())
    assert first.cents == pytest.approx(0.0, abs=1e-6)
    assert first.uncertainty_cents == pytest.approx(0.5)
    assert (first.takes, first.tones, first.reliability) == (("low",), 1, 1.0)
    assert second.takes == ("high",)
    assert second.uncertainty_cents == pytest.approx(0.5)
    assert second.reliability == pytest.approx(0.5)
    (alone,) = summed_up([sharp], takes, Sitting())
    assert alone.takes == ("hard",)


def test_hard_blowing_s_scatter_makes_no_normal_take_unsure() -> None:
    other = Fingering("xxxxxo")
    hard = [
        replace(reading(name, hz, 0.5, register=2), breath="over")
        for name, hz in (("a", 880.0), ("b", 890.0))
    ]
    normal = [reading("c", 440.0, 0.5), reading("d", 440.0, 0.5)]
    alone = replace(reading("e", 494.0, 0.5), fingering=other)
    takes = [replace(take(name), breath="over") for name in "ab"] + [take(name) for name in "cde"]
    entries = summed_up([*hard, *normal, alone], takes, Sitting())
    assert [entry.uncertainty_cents < 1.0 for entry in entries] == [True, True, False]


def test_cents_are_carried_to_the_reference_temperature() -> None:
    """From 26 to 20 °C, c going with the root of the absolute temperature: 600 log2(293.15 / 299.15)."""
    sitting = Sitting(air_temperature_c=26.0, reference_temperature_c=20.0)
    (entry,) = summed_up([reading("a", 440.0, 0.5)], [take("a")], sitting)
    assert entry.cents_at_reference == pytest.approx(600.0 * log2(293.15 / 299.15), abs=1e-6)
    (unknown,) = summed_up([reading("a", 440.0, 0.5)], [take("a")], Sitting(air_temperature_c=26.0))
    assert unknown.cents_at_reference is None


# --- folders ---------------------------------------------------------------------------------------------


def test_a_bad_take_is_a_problem_and_the_others_are_measured(tmp_path: Path) -> None:
    (tmp_path / "flute.toml").write_text('[flute]\nname = "Test"\nholes = 6\n')
    (tmp_path / "takes").mkdir()
    (tmp_path / "takes" / "oooooo.wav").write_bytes(b"")
    rng = np.random.default_rng(60)
    for k, states in enumerate(("xxxxxx", "xxxxxo")):
        tone = 0.2 * make_tone(440.0 + 60.0 * k, 1.0, "plain", 40.0, rng).samples
        soundfile.write(tmp_path / "takes" / f"{states}.wav", tone, RATE_HZ)
    done: list[tuple[int, int]] = []
    survey = measure(tmp_path, on_take=lambda n, total: done.append((n, total)))
    assert [problem.take for problem in survey.problems] == ["takes/oooooo.wav"]
    assert len(survey.readings) == 2
    assert done == [(1, 3), (2, 3), (3, 3)]


def test_hear_needs_no_session(tmp_path: Path) -> None:
    tone = 0.2 * make_tone(432.0, 1.0, "plain", 40.0, np.random.default_rng(61)).samples
    soundfile.write(tmp_path / "a.wav", tone, RATE_HZ)
    (heard,) = hear(tmp_path / "a.wav", a4_hz=432.0)
    assert (heard.note, heard.fingering, heard.breath) == ("A4", None, None)
    assert heard.cents == pytest.approx(0.0, abs=0.1)
    with pytest.raises(RecordingError):
        hear(tmp_path / "missing.wav")
    with pytest.raises(SessionError):
        measure(tmp_path / "missing")


def test_the_same_session_gives_the_same_survey() -> None:
    session = read_session(SAMPLES / "heron")
    few = replace(session, takes=session.takes[:5])
    assert survey_of(few) == survey_of(few)
