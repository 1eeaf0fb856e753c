"""The fitted tube, on flutes whose tube is known: made without sound, the truth by construction."""

from collections.abc import Sequence
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from foretelling import SIX_HOLES, Blown, first_takes, renamed, survey_of_tube
from scipy.stats import chi2

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.fit import Fit, fitted
from fluteprobe.flute.joint import BENDS, Heard
from fluteprobe.flute.proportions import Known, believed_shape
from fluteprobe.flute.shape import BORE, HEAD, LENGTH, pitches
from fluteprobe.flute.tube import openness_of
from fluteprobe.forecast.heard import heard_of, known_dimensions, known_rungs
from fluteprobe.survey import Survey


def fit_of(survey: Survey) -> Fit:
    heard = heard_of(survey)
    holes = survey.flute.holes
    return fitted(believed_shape(holes, known_rungs(holes, heard), known_dimensions(survey)), heard)


@cache
def first_fit(random: int = 1) -> Fit:
    """Return the fit of a flute of which the first register was heard."""
    return fit_of(survey_of_tube(SIX_HOLES, first_takes(), random=random))


def as_believed() -> Blown:
    """Return a breath that bends as the model believes, without scatter."""
    means = {1: BENDS["first"].mean, 2: BENDS["second"].mean, 3: BENDS["third"].mean}
    return Blown(tone_cents=means, bump_cents=BENDS["bump above"].mean, scatter_cents=0.0)


def test_known_dimensions_give_back_length_and_head() -> None:
    """With bore, wall and holes to 0.3 mm, the length comes back within 1.5 mm and the head within 2 mm."""
    survey = survey_of_tube(
        SIX_HOLES, first_takes(), blown=as_believed(), bore_mm=19.0, wall_mm=4.0, holes_mm=SIX_HOLES.holes_mm
    )
    tube = fit_of(survey).shape.tube
    assert tube.length_mm == pytest.approx(400.0, abs=1.5)
    assert tube.head_correction_mm == pytest.approx(40.0, abs=2.0)


def test_a_tapered_bore_is_fitted_by_its_known_profile() -> None:
    """A bore from 20 to 16 mm: length and head come back as for an even one."""
    profile = ((0.0, 20.0), (400.0, 16.0))
    tube = replace(SIX_HOLES, bore_mm=20.0, profile_mm=profile)
    heard = heard_of(survey_of_tube(tube, first_takes(), blown=as_believed()))
    known = Known(wall_mm=4.0, holes_mm=SIX_HOLES.holes_mm, air_c=21.0, profile_mm=profile)
    tapered = fitted(believed_shape(6, known_rungs(6, heard), known), heard)
    assert tapered.shape.tube.length_mm == pytest.approx(400.0, abs=1.5)
    assert tapered.shape.tube.head_correction_mm == pytest.approx(40.0, abs=2.0)
    assert tapered.misfit_cents < 10.0


@pytest.mark.parametrize("random", range(1, 4))
def test_without_a_ruler_the_uncertainty_covers_the_truth(random: int) -> None:
    """Chi square of the shape's numbers by their covariance: under its 99.9 % point for 17 numbers."""
    fit = first_fit(random)
    places, sizes = zip(*SIX_HOLES.holes_mm, strict=True)
    off = fit.shape.values - np.array([400.0, 19.0, 4.0, 40.0, *places, *sizes, 0.0])
    assert off @ np.linalg.solve(fit.shape.covariance, off) < chi2.ppf(0.999, len(off))


def test_what_was_heard_narrows_what_was_believed() -> None:
    fit = first_fit()
    before, after = (np.sqrt(np.diag(each.covariance)) for each in (fit.believed, fit.shape))
    assert (after <= before + 1e-9).all()
    assert (after < 0.75 * before)[[LENGTH, BORE, HEAD]].all()


def test_breath_resonances_get_the_number_of_the_one_they_lie_by() -> None:
    fit = first_fit()
    numbers = {each.resonance for each in fit.heard if not each.is_tone}
    assert numbers == {2, 3, 4}
    assert fit.misfit_cents < 12.0
    assert fit.strangeness < 2.0


def false_bumps(survey: Survey) -> Sequence[Heard]:
    """Return a bump a third of a tone under each second resonance, in half of all takes."""
    true = [each for each in heard_of(survey) if not each.is_tone]
    return [replace(each, cents=each.cents - 55.0) for each in true[::5]]


def test_false_breath_resonances_are_forgiven() -> None:
    """A fifth of all bumps comes twice, once 55 cents too low: the tube's length moves by under 2 mm."""
    survey = survey_of_tube(SIX_HOLES, first_takes())
    heard = heard_of(survey)
    believed = believed_shape(6, known_rungs(6, heard), known_dimensions(survey))
    plain, troubled = first_fit(), fitted(believed, [*heard, *false_bumps(survey)])
    lengths = [fit.shape.values[[LENGTH, HEAD]].sum() for fit in (plain, troubled)]
    assert lengths[1] == pytest.approx(lengths[0], abs=2.0)
    far = np.array([each.cents for each in troubled.heard]) != 0.0
    assert troubled.variance[far].max() > 2.0 * plain.variance.max()


def test_a_take_under_a_wrong_name_stands_out() -> None:
    """Two takes 250 cents apart bear each other's names: one of the two is the worst of all."""
    fit = fit_of(renamed(survey_of_tube(SIX_HOLES, first_takes()), "xxxooo", "xooooo"))
    tones = np.array([each.is_tone for each in fit.heard])
    worst = fit.heard[int(np.argmax(np.abs(fit.surprise) * tones))]
    assert str(worst.fingering) in {"xxxooo", "xooooo"}
    assert fit.strangeness > 5.0


def test_a_register_counted_past_a_resonance_finds_its_own() -> None:
    """A tone called third that stands at the fourth resonance is fitted to the fourth."""
    heard = heard_of(survey_of_tube(SIX_HOLES, first_takes()))
    closed = Fingering("xxxxxx")
    fourth = float(pitches(SIX_HOLES, openness_of([closed]), 4)[0, 3])
    late = Heard(
        take="t", fingering=closed, kind="third", resonance=3, cents=fourth, uncertainty_cents=1.0, sounding=3
    )
    fit = fitted(first_fit().believed, [*heard, late])
    assert [each.resonance for each in fit.heard if each.take == "t"] == [4]


def test_without_a_tone_there_is_nothing_to_fit() -> None:
    with pytest.raises(ValueError, match="there is no tone to fit a tube to"):
        fitted(believed_shape(6, {0: 10000.0}, Known()), [])
