"""The shape's resonances and how they move, against the tube model's own peaks and small changes of it."""

import numpy as np
import pytest
from foretelling import SIX_HOLES
from hypothesis import given
from hypothesis import strategies as st

from fluteprobe.flute.fingering import Fingering, ladder
from fluteprobe.flute.shape import (
    BORE,
    FIRST_PLACE,
    HEAD,
    LENGTH,
    WALL,
    Reals,
    Setting,
    followed,
    opening_slopes,
    pitches,
    slopes,
    tube_of,
)
from fluteprobe.flute.tube import openness_of, resonances

WORDS = [*ladder(6), *(Fingering(word) for word in ("oxxxxx", "xoxxxx", "xxoxoo", "hxxxxx", "xxvxxx"))]
OPENNESS = openness_of(WORDS)
SETTING = Setting(temperature_c=SIX_HOLES.temperature_c)
STRONG = resonances(SIX_HOLES, WORDS, 3).strength > 5.0  # weaker ones sound on no flute


def values_of_six_holes() -> Reals:
    places, sizes = zip(*SIX_HOLES.holes_mm, strict=True)
    tube = SIX_HOLES
    numbers = [tube.length_mm, tube.bore_mm, tube.wall_mm, tube.head_correction_mm, *places, *sizes, 0.0]
    return np.array(numbers)


def test_a_shape_is_its_tube_and_back() -> None:
    assert tube_of(values_of_six_holes(), SETTING) == SIX_HOLES


@given(st.lists(st.floats(-500.0, 900.0), min_size=17, max_size=17))
def test_any_numbers_are_some_tube(numbers: list[float]) -> None:
    """The solver may try anything; `Tube` itself refuses what cannot be."""
    tube = tube_of(np.array(numbers), SETTING)
    assert len(tube.holes_mm) == 6


def test_a_bore_that_narrows_keeps_its_shares() -> None:
    """The fitted bore is that at the sound hole; the foot is narrower by the same share."""
    setting = Setting(temperature_c=21.0, profile=((0.0, 1.0), (400.0, 0.8)))
    values = values_of_six_holes()
    values[BORE] = 20.0
    tube = tube_of(values, setting)
    assert tube.profile_mm == ((0.0, 20.0), (400.0, 16.0))
    assert np.nanmax(np.abs(pitches(tube, OPENNESS, 1) - pitches(SIX_HOLES, OPENNESS, 1))) > 5.0


def test_followed_resonances_are_the_peaks_that_a_search_finds() -> None:
    """The admittance's peaks and the zeros of a straight impedance are the same within 0.05 cent."""
    found = pitches(SIX_HOLES, OPENNESS, 3)
    assert np.abs(followed(SIX_HOLES, OPENNESS, found + 12.0) - found)[STRONG].max() < 0.05
    searched = 1200.0 * np.log2(resonances(SIX_HOLES, WORDS, 3).frequency_hz)
    assert np.array_equal(found, searched)


def test_a_resonance_that_is_not_there_stays_unknown() -> None:
    near = pitches(SIX_HOLES, OPENNESS, 3)
    near[2, 1] = np.nan
    assert np.isnan(followed(SIX_HOLES, OPENNESS, near)[2, 1])
    assert np.isnan(slopes(values_of_six_holes(), SETTING, OPENNESS, near)[2, 1]).all()


@pytest.mark.parametrize("number", [LENGTH, BORE, WALL, HEAD, FIRST_PLACE + 2, FIRST_PLACE + 6 + 4])
def test_slopes_are_what_a_changed_tube_does(number: int) -> None:
    """Against the difference of searched peaks over 0.4 mm: within 3 % of the largest and 0.02 cents/mm."""
    values = values_of_six_holes()
    step = np.zeros(len(values))
    step[number] = 0.2
    here = pitches(SIX_HOLES, OPENNESS, 2)
    high, low = (pitches(tube_of(values + sign * step, SETTING), OPENNESS, 2) for sign in (1.0, -1.0))
    difference = (high - low) / 0.4
    off = np.abs(slopes(values, SETTING, OPENNESS, here)[..., number] - difference)[STRONG[:, :2]]
    assert off.max() < 0.03 * np.abs(difference).max() + 0.02


def test_warm_air_moves_every_resonance_alike() -> None:
    here = pitches(SIX_HOLES, OPENNESS, 2)
    assert (slopes(values_of_six_holes(), SETTING, OPENNESS, here)[..., -1] == 1.0).all()


def test_opening_a_hole_further_is_what_another_openness_does() -> None:
    half = OPENNESS[[WORDS.index(Fingering("hxxxxx"))]]
    here = pitches(SIX_HOLES, half, 2)
    wider, closer = half.copy(), half.copy()
    wider[0, 0], closer[0, 0] = 0.52, 0.48
    difference = (pitches(SIX_HOLES, wider, 2) - pitches(SIX_HOLES, closer, 2)) / 0.04
    assert opening_slopes(SIX_HOLES, half, here)[0, :, 0] == pytest.approx(difference[0], rel=0.03)
