"""The forecast: on surveys of known tubes, and by leave-one-out on the demo flutes against their truth."""

import json
from dataclasses import replace
from functools import cache
from math import log2
from pathlib import Path
from statistics import median

import jsonschema
import pytest
from foretelling import (
    FIRST_WORDS,
    SIX_HOLES,
    UPPER_WORDS,
    first_takes,
    renamed,
    survey_of_tube,
    true_hz,
    upper_takes,
)

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.tube import Tube
from fluteprobe.forecast import Forecast, Prediction, forecast
from fluteprobe.forecast.contract import forecast_json
from fluteprobe.forecast.heard import heard_of, known_rungs, tries_of
from fluteprobe.results import json_text
from fluteprobe.sound.tone import BreathResonance
from fluteprobe.survey import Survey, measure, summed_up

SAMPLES = Path(__file__).parent.parent / "samples"
SCHEMA = Path(__file__).parent.parent / "fluteprobe" / "schema" / "forecast-1.schema.json"
DEMOS = ("heron", "bittern")


def cents(high_hz: float, low_hz: float) -> float:
    return 1200.0 * log2(high_hz / low_hz)


def of(result: Forecast, word: str, register: int = 2) -> Prediction:
    return next(p for p in result.predictions if (str(p.fingering), p.register) == (word, register))


@cache
def first_only() -> Forecast:
    return forecast(survey_of_tube(SIX_HOLES, first_takes()))


@cache
def with_upper() -> Forecast:
    return forecast(survey_of_tube(SIX_HOLES, [*first_takes(), *upper_takes()]))


@cache
def demo(name: str) -> Survey:
    return measure(SAMPLES / name)


def truth(name: str) -> dict[tuple[str, int], list[float]]:
    """Return the true frequencies of the demo's higher registers, by fingering and register."""
    told: dict[tuple[str, int], list[float]] = {}
    for take, tones in json.loads((SAMPLES / name / "truth.json").read_text("utf-8")).items():
        for tone in tones:
            word = Path(take).stem.split("-")[0]
            told.setdefault((word, tone["register"]), []).append(tone["frequency_hz"])
    return {key: found for key, found in told.items() if key[1] > 1}


# --- the demo flutes ---------------------------------------------------------------------------------


@pytest.mark.parametrize("name", DEMOS)
def test_each_upper_note_of_the_demo_from_all_the_others(name: str) -> None:
    """Leave-one-out. Required: 90 % foretold, median at most 8 cents, two uncertainties hold 90 %."""
    result = forecast(demo(name))
    off = []
    for (word, register), found in truth(name).items():
        told = of(result, word, register)
        assert told.measured_hz is not None
        off.append((cents(told.frequency_hz, sum(found) / len(found)), told.uncertainty_cents))
    assert len(off) >= 7
    assert median(abs(miss) for miss, _ in off) <= 8.0
    assert sum(abs(miss) <= 2.0 * u for miss, u in off) / len(off) >= 0.9


@pytest.mark.parametrize("with_ruler", [True, False])
@pytest.mark.parametrize("name", DEMOS)
def test_the_demo_s_upper_notes_from_its_first_register_alone(name: str, with_ruler: bool) -> None:
    """Required: 90 % foretold, median at most 15 cents, two uncertainties hold 90 %."""
    whole = demo(name)
    low = tuple(r for r in whole.readings if r.call.register == 1 and r.breath == "normal")
    flute = whole.flute if with_ruler else replace(whole.flute, bore_mm=None, wall_mm=None, holes_mm=None)
    result = forecast(replace(whole, flute=flute, readings=low, entries=summed_up(low, [], whole.sitting)))
    wanted = {key: found for key, found in truth(name).items() if key[1] == 2}
    told = {(str(p.fingering), p.register): p for p in result.predictions}
    foretold = {key: told[key] for key in wanted if key in told}
    assert len(foretold) >= 0.9 * len(wanted)
    off = [
        (cents(p.frequency_hz, sum(wanted[key]) / len(wanted[key])), p.uncertainty_cents)
        for key, p in foretold.items()
    ]
    assert median(abs(miss) for miss, _ in off) <= 15.0
    assert sum(abs(miss) <= 2.0 * u for miss, u in off) / len(off) >= 0.9


# --- known tubes -------------------------------------------------------------------------------------


def test_upper_notes_from_the_first_register() -> None:
    """Within two uncertainties of what the tube itself would give, each; nothing was measured."""
    for word in UPPER_WORDS:
        told = of(first_only(), word)
        assert abs(cents(told.frequency_hz, true_hz(SIX_HOLES, word, 2))) < 2.0 * told.uncertainty_cents
        assert told.measured_hz is None
        assert told.uncertainty_cents < 30.0


def test_upper_takes_make_the_others_surer() -> None:
    assert of(with_upper(), "oxxxxo").uncertainty_cents < of(first_only(), "oxxxxo").uncertainty_cents - 1.0


def test_what_was_measured_is_not_used_for_itself() -> None:
    """A played note moved by 40 cents moves its own measured pitch, and its forecast not at all."""
    survey = survey_of_tube(SIX_HOLES, [*first_takes(), *upper_takes()])
    readings = tuple(
        replace(r, tone=replace(r.tone, frequency_hz=r.tone.frequency_hz * 2.0 ** (40.0 / 1200.0)))
        if str(r.fingering) == "xxxxoo" and r.call.register == 2 and r.tone.frequency_hz
        else r
        for r in survey.readings
    )
    moved = forecast(replace(survey, readings=readings, entries=summed_up(readings, [], survey.sitting)))
    before, after = of(with_upper(), "xxxxoo"), of(moved, "xxxxoo")
    assert after.measured_hz is not None
    assert before.measured_hz is not None
    assert cents(after.measured_hz, before.measured_hz) == pytest.approx(40.0, abs=0.1)
    assert cents(after.frequency_hz, before.frequency_hz) == pytest.approx(0.0, abs=2.0)


def test_basis_says_what_was_heard_of_that_resonance() -> None:
    silent = forecast(survey_of_tube(SIX_HOLES, first_takes(), with_bumps=False))
    assert {p.basis for p in silent.predictions} == {"fitted tube"}
    assert of(first_only(), "xxxoxx").basis == "both"
    assert of(first_only(), "vxxxxx").basis == "fitted tube"


def test_a_take_of_breath_alone_tells_too() -> None:
    """A fingering blown too softly to speak: surer than without it, and right within two uncertainties."""
    word = "oxxoxo"
    without = of(first_only(), word)
    breathed = of(forecast(survey_of_tube(SIX_HOLES, [*first_takes(), (word, 0)])), word)
    assert breathed.basis == "both"
    assert breathed.uncertainty_cents < without.uncertainty_cents
    assert abs(cents(breathed.frequency_hz, true_hz(SIX_HOLES, word, 2))) < 2.0 * breathed.uncertainty_cents


def test_few_takes_tell_little_and_say_so() -> None:
    """From one note of an unknown flute an upper note is unsure, or not told at all."""
    few = forecast(survey_of_tube(SIX_HOLES, [("xxxooo", 1)], with_bumps=False))
    assert few.reason is None
    assert all(p.uncertainty_cents > 15.0 for p in few.predictions)
    assert len(few.predictions) < 0.5 * len(first_only().predictions)


@pytest.mark.parametrize("holes", [1, 10])
def test_any_number_of_holes(holes: int) -> None:
    places = [150.0 + 26.0 * k for k in range(holes)]
    tube = replace(SIX_HOLES, length_mm=places[-1] + 70.0, holes_mm=tuple((at, 8.0) for at in places))
    result = forecast(survey_of_tube(tube, first_takes(holes, more=())))
    word = "o" + "x" * (holes - 1) if holes > 1 else "x"
    told = of(result, word)
    assert abs(cents(told.frequency_hz, true_hz(tube, word, 2))) < 2.5 * told.uncertainty_cents


# --- what to try next --------------------------------------------------------------------------------


def test_gaps_above_the_first_register_come_first() -> None:
    ranked = [p for p in with_upper().predictions if p.rank is not None]
    assert [p.rank for p in ranked] == list(range(1, len(ranked) + 1))
    firsts = list(dict.fromkeys(p.fills for p in ranked if p.fills is not None))
    assert [p.fills for p in ranked[: len(firsts)]] != []
    assert len({p.fills for p in ranked[: len(firsts)]}) == len(firsts)
    assert None not in {p.fills for p in ranked[: len(firsts)]}
    assert all(p.measured_hz is None and p.likely_to_speak >= 0.2 for p in ranked)


def test_a_gap_is_a_note_above_the_first_register_that_nothing_gives() -> None:
    survey = survey_of_tube(SIX_HOLES, [*first_takes(), *upper_takes()])
    top_hz = max(entry.frequency_hz for entry in survey.entries if entry.register == 1)
    played = {entry.note for entry in survey.entries}
    for each in with_upper().predictions:
        fills = (
            each.measured_hz is None and each.note not in played and cents(each.frequency_hz, top_hz) > 50.0
        )
        assert each.fills == (each.note if fills else None)


def test_takes_that_failed_are_counted_and_lower_the_chance() -> None:
    survey = survey_of_tube(SIX_HOLES, first_takes())
    silent = tuple(
        replace(r, breath="over", take="takes/xxxxxo-over.wav")
        for r in survey.readings
        if str(r.fingering) == "xxxxxo"
    )
    tried = forecast(replace(survey, readings=(*survey.readings, *silent)))
    assert of(tried, "xxxxxo").tried == 1
    assert of(tried, "xxxxxo").likely_to_speak < of(first_only(), "xxxxxo").likely_to_speak - 0.1


def test_an_undecided_take_tells_nothing_of_what_speaks() -> None:
    survey = survey_of_tube(SIX_HOLES, upper_takes())
    unsure = tuple(replace(r, call=replace(r.call, register=None)) for r in survey.readings)
    assert len(tries_of(survey.readings)) == len(UPPER_WORDS)
    assert tries_of(unsure) == ()


# --- what was heard ----------------------------------------------------------------------------------


def test_bumps_at_the_tone_and_its_partials_are_not_told() -> None:
    survey = survey_of_tube(SIX_HOLES, [("xxxxxx", 1)], with_bumps=False)
    (reading,) = survey.readings
    own = reading.tone.frequency_hz
    assert own is not None
    bumps = tuple(
        BreathResonance(frequency_hz=own * ratio, width_hz=8.0, prominence_db=9.0, chance=1e-6)
        for ratio in (0.97, 1.01, 2.004, 1.97, 2.9, 3.0)
    )
    heard = heard_of(
        replace(survey, readings=(replace(reading, tone=replace(reading.tone, breath_resonances=bumps)),))
    )
    told = [2.0 ** (each.cents / 1200.0) / own for each in heard if not each.is_tone]
    assert told == pytest.approx([1.97, 2.9])


def test_a_ladder_without_a_first_register_is_guessed_from_what_there_is() -> None:
    for words, open_holes, like in ((UPPER_WORDS[2:5], 2, "xxxxoo"), (("oxxxxx",), 0, "xxxxxx")):
        heard = heard_of(survey_of_tube(SIX_HOLES, upper_takes(words)))
        (rung,) = known_rungs(6, heard).items()
        assert rung[0] == open_holes
        assert rung[1] == pytest.approx(1200.0 * log2(true_hz(SIX_HOLES, like, 1)), abs=100.0)


# --- flutes that do not fit --------------------------------------------------------------------------


def test_takes_under_wrong_names_are_told_and_nothing_is_foretold() -> None:
    mixed = forecast(renamed(survey_of_tube(SIX_HOLES, first_takes()), "xxxooo", "xooooo"))
    assert mixed.predictions == ()
    assert mixed.fit is None
    assert mixed.reason == (
        "no tube sounds like these takes: see whether their names are right, those below first"
    )
    assert mixed.disagreements[0].take in {"takes/xxxooo.wav", "takes/xooooo.wav"}
    assert abs(mixed.disagreements[0].deviation_cents) > 100.0


def impossible(tube: Tube) -> tuple[tuple[float, float], ...]:
    """Return the holes measured from the wrong end of a longer flute."""
    return tuple((1.35 * place, size) for place, size in tube.holes_mm)


def test_impossible_dimensions_are_told_as_such() -> None:
    wrong = survey_of_tube(SIX_HOLES, first_takes(), bore_mm=19.0, holes_mm=impossible(SIX_HOLES))
    result = forecast(wrong)
    assert result.predictions == ()
    assert result.reason == (
        "a tube of the dimensions in flute.toml does not sound like these takes, but one of others does: "
        "measure again, from the sound hole"
    )


@pytest.mark.parametrize("size_mm", [0.2, 45.0])
def test_holes_like_pins_or_wider_than_the_bore_are_told_as_such(size_mm: float) -> None:
    holes = tuple((place, size_mm) for place, _ in SIX_HOLES.holes_mm)
    result = forecast(survey_of_tube(SIX_HOLES, first_takes(), bore_mm=19.0, holes_mm=holes))
    assert (result.reason or "").startswith("a tube of the dimensions in flute.toml does not sound")
    assert result.predictions == ()


def test_right_dimensions_are_believed() -> None:
    right = survey_of_tube(SIX_HOLES, first_takes(), bore_mm=19.0, wall_mm=4.0, holes_mm=SIX_HOLES.holes_mm)
    assert forecast(right).reason is None


def test_nothing_heard_is_told() -> None:
    mute = forecast(survey_of_tube(SIX_HOLES, [(word, 0) for word in FIRST_WORDS]))
    assert mute.predictions == ()
    assert mute.reason == "no tone whose register is known: record the ladder first, from all closed up"


# --- as JSON -----------------------------------------------------------------------------------------


@pytest.mark.parametrize("words", [(), UPPER_WORDS])
def test_json_is_by_the_schema(words: tuple[str, ...]) -> None:
    result = with_upper() if words else first_only()
    values = json.loads(json_text(forecast_json(result)))
    jsonschema.validate(values, json.loads(SCHEMA.read_text("utf-8")))
    assert values["schema"] == "fluteprobe/forecast/1"
    assert any("wood" in caution for caution in values["cautions"])
    assert len(values["predictions"]) == len(result.predictions)


def test_json_of_no_forecast_is_by_the_schema() -> None:
    mute = forecast(survey_of_tube(SIX_HOLES, [("xxxxxx", 0)]))
    values = json.loads(json_text(forecast_json(mute)))
    jsonschema.validate(values, json.loads(SCHEMA.read_text("utf-8")))
    assert values["predictions"] == []
    assert values["reason"]


def test_the_same_survey_is_foretold_the_same() -> None:
    survey = survey_of_tube(SIX_HOLES, first_takes())
    assert forecast_json(forecast(survey)) == forecast_json(first_only())


def test_every_fingering_that_was_played_is_among_them() -> None:
    told = {(p.fingering, p.register) for p in with_upper().predictions if p.measured_hz is not None}
    assert told == {(Fingering(word), 2) for word in UPPER_WORDS}
