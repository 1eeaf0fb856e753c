"""The acoustic model as a witness, fitted to a flute whose truth is known: the tube itself."""

from dataclasses import replace
from math import log2

import numpy as np
import pytest

from fluteprobe.flute.fingering import Fingering, ladder
from fluteprobe.flute.model import Dimensions, fitted_model, model_clue
from fluteprobe.flute.register import Sounding, registers_of
from fluteprobe.flute.tube import Tube, resonances

HOLES_MM = ((150.0, 8.0), (175.0, 8.0), (200.0, 7.0), (225.0, 8.5), (258.0, 8.5), (290.0, 9.0))
TUBE = Tube(
    bore_mm=19.0, length_mm=385.0, wall_mm=4.0, holes_mm=HOLES_MM, head_correction_mm=44.0, temperature_c=22.0
)
GIVEN = Dimensions(bore_mm=19.0, wall_mm=4.0, holes_mm=HOLES_MM, temperature_c=22.0)
TAPERED_MM = ((0.0, 20.0), (385.0, 15.0))
STEPPED_MM = ((0.0, 19.0), (230.0, 19.0), (230.0, 16.0), (385.0, 16.0))
ASKED = [Fingering("xxxxxx"), Fingering("oxxxxx"), Fingering("hxxxxx")]


def pitch(frequency_hz: float) -> float:
    return 1200.0 * log2(frequency_hz)


def rungs(tube: Tube = TUBE) -> dict[int, float]:
    played = resonances(tube, ladder(6), 1).frequency_hz[:, 0]
    return {k: pitch(float(frequency_hz)) for k, frequency_hz in enumerate(played)}


def test_length_and_head_are_found_from_the_ladder() -> None:
    """Within 2 mm of effective length, which is half a per cent or 8 cents."""
    model = fitted_model(GIVEN, rungs(), ASKED)
    assert model is not None
    assert model.misfit_cents < 2.0
    assert model.tube.effective_length_m == pytest.approx(TUBE.effective_length_m, abs=0.002)


def test_upper_resonances_are_told_from_the_ladder_alone() -> None:
    model = fitted_model(GIVEN, rungs(), ASKED)
    assert model is not None
    true = resonances(TUBE, ASKED, 3).frequency_hz
    told = np.array([model.resonances_hz[fingering] for fingering in ASKED])
    assert 1200.0 * np.log2(told / true) == pytest.approx(np.zeros((3, 3)), abs=12.0)


@pytest.mark.parametrize("profile", [TAPERED_MM, STEPPED_MM], ids=["tapered", "stepped"])
def test_a_bore_that_is_not_even_is_told_by_its_profile(profile: tuple[tuple[float, float], ...]) -> None:
    """Within 3 cents with the profile, which leaves only length and head open; 35 and more astray without."""
    tube = replace(TUBE, bore_mm=profile[0][1], profile_mm=profile)
    asked = [Fingering(word) for word in ("xxxxxx", "oxxxxx", "xxxxxo", "xxxooo", "xoxxxx")]
    true = resonances(tube, asked, 3).frequency_hz
    told = replace(GIVEN, bore_mm=profile[0][1], profile_mm=profile)
    even = replace(GIVEN, bore_mm=0.5 * (profile[0][1] + profile[-1][1]))
    models = [fitted_model(dimensions, rungs(tube), asked) for dimensions in (told, even)]
    off = [
        1200.0 * np.log2(np.array([model.resonances_hz[each] for each in asked]) / true)
        for model in models
        if model is not None
    ]
    assert np.abs(off[0]).max() < 3.0
    assert np.abs(off[1]).max() > 35.0


@pytest.mark.parametrize("register", [1, 2, 3])
def test_a_tone_at_a_resonance_is_that_register(register: int) -> None:
    model = fitted_model(GIVEN, rungs(), ASKED)
    assert model is not None
    for fingering in ASKED[:2]:
        sounding = pitch(model.resonances_hz[fingering][register - 1]) + 15.0
        evidence = model_clue(model, fingering, sounding).evidence
        assert (evidence.source, evidence.favours) == ("acoustic model", register)
        assert evidence.log_odds > 3.0


def test_dimensions_that_cannot_be_are_not_believed() -> None:
    """Holes a third higher up than they are, or past the foot: the ladder is missed, the model silent."""
    higher = Dimensions(bore_mm=19.0, wall_mm=4.0, holes_mm=tuple((x * 0.66, d) for x, d in HOLES_MM))
    assert fitted_model(higher, rungs(), ASKED) is None
    beyond = Dimensions(bore_mm=19.0, wall_mm=4.0, holes_mm=tuple((x * 3.0, d) for x, d in HOLES_MM))
    assert fitted_model(beyond, rungs(), ASKED) is None


def test_too_few_rungs_fit_nothing() -> None:
    few = {k: v for k, v in rungs().items() if k < 2}
    assert fitted_model(GIVEN, few, ASKED) is None


def test_the_model_replaces_the_ladder_and_is_not_added_to_it() -> None:
    tones = [
        Sounding(take=str(rung), fingering=rung, breath="normal", pitch_cents=rungs()[k])
        for k, rung in enumerate(ladder(6))
    ]
    with_model = registers_of(6, tones, GIVEN)
    assert [call.register for call in with_model] == [1] * 7
    sources = {reason.source for call in with_model for reason in call.evidence}
    assert "acoustic model" in sources
    assert "ladder" not in sources
