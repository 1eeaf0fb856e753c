"""What a fit tells a maker: against a plain tube's geometry, and against a tube that was truly changed."""

from dataclasses import replace
from functools import cache
from itertools import product

import numpy as np
import pytest
from foretelling import SIX_HOLES, first_takes, survey_of_tube
from test_fit import fit_of

from fluteprobe.flute.fingering import Fingering
from fluteprobe.flute.sensitivity import (
    CHANGE_MM,
    Sensitivity,
    pressure_maximum_mm,
    sensitivities,
    tube_words,
)
from fluteprobe.flute.shape import Shape, pitches
from fluteprobe.flute.tube import FOOT_CORRECTION, Tube, openness_of

WORDS = [Fingering(word) for word in ("xxxooo", "oxxxxx")]


@cache
def shape() -> Shape:
    return fit_of(survey_of_tube(SIX_HOLES, first_takes(), holes_mm=SIX_HOLES.holes_mm, bore_mm=19.0)).shape


@cache
def told() -> tuple[Sensitivity, ...]:
    return sensitivities(shape(), WORDS)


def changed(tube: Tube, hole: int, *, wider_mm: float = 0.0, lower_mm: float = 0.0) -> Tube:
    holes = [*tube.holes_mm]
    holes[hole - 1] = (holes[hole - 1][0] + lower_mm, holes[hole - 1][1] + wider_mm)
    return replace(tube, holes_mm=tuple(holes))


@pytest.mark.parametrize("kind", ["wider", "lower"])
def test_a_hole_that_is_truly_changed_moves_the_notes_so(kind: str) -> None:
    """The true tube, one hole changed, its peaks searched: within three uncertainties and 0.02 cents."""
    for each in told():
        step = {f"{kind}_mm": 0.25}
        back = {f"{kind}_mm": -0.25}
        column = each.register - 1
        high, low = (
            pitches(changed(SIX_HOLES, each.hole, **way), openness_of([each.fingering]), 2)[0, column]
            for way in (step, back)
        )
        measure = each.wider_cents if kind == "wider" else each.lower_cents
        true = CHANGE_MM * (high - low) / 0.5
        assert abs(measure.value - true) < 3.0 * measure.uncertainty + 0.02, each


def test_every_hole_fingering_and_register_is_told_once() -> None:
    keys = [(each.hole, each.fingering, each.register) for each in told()]
    assert sorted(keys, key=str) == sorted(product(range(1, 7), WORDS, (1, 2)), key=str)


def test_wider_is_sharper_and_lower_is_flatter_where_the_hole_is_the_first_open() -> None:
    """Common practice, no source."""
    first_open = next(e for e in told() if (e.hole, str(e.fingering), e.register) == (4, "xxxooo", 1))
    assert first_open.wider_cents.value > 0.5
    assert first_open.lower_cents.value < -0.1


def test_a_plain_tube_swings_most_in_its_middle() -> None:
    """Half a wavelength between the corrected ends: the pressure is largest midway, within 1 mm."""
    plain = replace(SIX_HOLES, holes_mm=((300.0, 0.05),))
    frequency_hz = float(2.0 ** (pitches(plain, np.zeros((1, 1)), 1)[0, 0] / 1200.0))
    half_mm = 0.5 * (plain.length_mm + FOOT_CORRECTION * plain.bore_mm / 2.0 - plain.head_correction_mm)
    assert pressure_maximum_mm(plain, frequency_hz) == pytest.approx(half_mm, abs=1.0)


def test_the_tube_in_a_maker_s_words_covers_the_truth() -> None:
    """Within three uncertainties and 0.3 mm; the pressure swings most near the top hole (common practice)."""
    words = tube_words(shape())
    foot = FOOT_CORRECTION * 9.5
    for measure, true in (
        (words.length_mm, 400.0),
        (words.bore_mm, 19.0),
        (words.head_correction_mm, 40.0),
        (words.foot_correction_mm, foot),
        (words.effective_length_mm, 440.0 + foot),
        (words.top_hole_mm, 160.0),
    ):
        assert abs(measure.value - true) < 3.0 * measure.uncertainty + 0.3
    assert abs(words.maximum_below_top_hole_mm.value) < 0.1 * 440.0
    first, second = pitches(SIX_HOLES, np.zeros((1, 6)), 2)[0]
    assert words.stretch_cents.value == pytest.approx(second - first - 1200.0, abs=5.0)


def test_the_same_shape_is_told_the_same_each_time() -> None:
    assert tube_words(shape()) == tube_words(shape())


def test_without_fingerings_there_is_nothing_to_tell() -> None:
    assert sensitivities(shape(), []) == ()
