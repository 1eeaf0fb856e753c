"""What is believed of a flute before it is heard: measured dimensions as given, the rest as is usual."""

import numpy as np
import pytest
from foretelling import SIX_HOLES

from fluteprobe.flute.fingering import ladder
from fluteprobe.flute.proportions import Known, believed_shape, without_dimensions
from fluteprobe.flute.shape import BORE, FIRST_PLACE, HEAD, LENGTH, WALL, pitches
from fluteprobe.flute.tube import openness_of

RUNGS = dict(enumerate(pitches(SIX_HOLES, openness_of(ladder(6)), 1)[:, 0]))


def test_what_was_measured_is_believed_within_its_tolerance() -> None:
    known = Known(
        bore_mm=19.0, wall_mm=4.0, length_mm=400.0, holes_mm=SIX_HOLES.holes_mm, tolerance_mm=0.4, air_c=21.0
    )
    shape = believed_shape(6, RUNGS, known)
    measured = [LENGTH, BORE, WALL, *range(FIRST_PLACE, FIRST_PLACE + 12)]
    assert shape.tube.holes_mm == SIX_HOLES.holes_mm
    assert shape.values[[LENGTH, BORE, WALL]].tolist() == [400.0, 19.0, 4.0]
    assert np.sqrt(np.diag(shape.covariance))[measured] == pytest.approx(0.4)
    assert shape.covariance[HEAD, LENGTH] == 0.0


@pytest.mark.parametrize("rungs", [RUNGS, {0: RUNGS[0]}, {3: RUNGS[3], 5: RUNGS[5]}])
def test_without_a_ruler_the_flute_lies_within_what_is_believed(rungs: dict[int, float]) -> None:
    """Three standard deviations for each number, and a belief that can be inverted."""
    shape = believed_shape(6, rungs, Known(air_c=21.0))
    places, sizes = zip(*SIX_HOLES.holes_mm, strict=True)
    true = np.array([400.0, 19.0, 4.0, 40.0, *places, *sizes, 0.0])
    assert (np.abs(shape.values - true) < 3.0 * np.sqrt(np.diag(shape.covariance))).all()
    assert np.linalg.eigvalsh(shape.covariance).min() > 0.0


def test_a_bore_that_tapers_is_told_by_its_shares() -> None:
    known = Known(profile_mm=((0.0, 20.0), (380.0, 16.0)), air_c=21.0)
    shape = believed_shape(6, RUNGS, known)
    assert shape.values[BORE] == 20.0
    assert shape.setting.profile == ((0.0, 1.0), (380.0, 0.8))
    assert known.has_dimensions


def test_a_deeper_head_means_holes_nearer_to_it() -> None:
    covariance = believed_shape(6, RUNGS, Known()).covariance
    assert (covariance[HEAD, [LENGTH, *range(FIRST_PLACE, FIRST_PLACE + 6)]] < 0.0).all()


def test_unmeasured_air_is_believed_less_surely() -> None:
    measured, not_measured = (believed_shape(6, RUNGS, Known(air_c=air)) for air in (20.0, None))
    assert measured.setting.temperature_c == not_measured.setting.temperature_c == 20.0
    assert not_measured.covariance[-1, -1] > measured.covariance[-1, -1]


def test_dimensions_can_be_laid_aside() -> None:
    known = Known(bore_mm=19.0, air_c=23.0)
    assert known.has_dimensions
    assert without_dimensions(known) == Known(air_c=23.0)
    assert not without_dimensions(known).has_dimensions


def test_without_a_note_of_the_ladder_nothing_is_believed() -> None:
    with pytest.raises(ValueError, match="no note of the ladder is known"):
        believed_shape(6, {}, Known())
