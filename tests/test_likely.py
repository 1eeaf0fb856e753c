"""What is to be expected of a flute's fingerings; the flutes that it is held against are simulated."""

import numpy as np
import pytest
from longs import holes_of, pitches, wanted

from fluteprobe.flute.fingering import Fingering, ladder
from fluteprobe.flute.likely import likely_pitches


def test_the_ladder_rises_and_overblows_near_the_octave() -> None:
    likely = likely_pitches(ladder(6))
    first, second = likely.middle[:, 0], likely.middle[:, 1]
    assert np.all(np.diff(first) > 100.0)
    assert np.all(np.diff(second) > 50.0)
    # Closed all the way down it is an open pipe: its second resonance is near the octave.
    assert second[0] - first[0] == pytest.approx(1200.0, abs=60.0)


def test_the_top_hole_open_gives_about_a_semitone_over_the_octave() -> None:
    # Common practice, no source.
    likely = likely_pitches([Fingering("xxxxxx"), Fingering("oxxxxx")])
    assert likely.middle[1, 1] - likely.middle[0, 0] == pytest.approx(1300.0, abs=80.0)


def test_a_half_holed_rung_stands_between_its_neighbours() -> None:
    likely = likely_pitches([Fingering(word) for word in ("xxxxxx", "xxxxxh", "xxxxxo")])
    assert likely.middle[0, 0] < likely.middle[1, 0] < likely.middle[2, 0]


def test_simulated_flutes_lie_where_they_are_expected() -> None:
    off = []
    for seed in (5000, 5001):
        order = wanted(holes_of(seed), "short")
        likely = likely_pitches([take.fingering for take in order])
        spread = np.sqrt(np.sum(likely.loadings**2, axis=2) + likely.own**2)
        off.append(((pitches(seed, order) - likely.middle) / spread)[:, :2].ravel())
    assert np.nanmax(np.abs(np.concatenate(off))) < 3.0


def test_one_pitch_tells_the_others_apart_from_the_flute_s_size() -> None:
    # Knowing all-closed leaves a step's uncertainty of the next rung, far less than of a flute unknown.
    likely = likely_pitches(ladder(6))
    apart = likely.loadings[1, 0] - likely.loadings[0, 0]
    assert np.linalg.norm(apart) < 0.2 * np.linalg.norm(likely.loadings[1, 0])


@pytest.mark.parametrize("holes", [1, 10])
def test_any_number_of_holes_will_do(holes: int) -> None:
    likely = likely_pitches(ladder(holes))
    assert likely.middle.shape == likely.own.shape == (holes + 1, 3)
    assert np.all(np.isfinite(likely.middle))
    assert np.all(likely.own > 0.0)


def test_no_fingering_or_two_flutes_are_refused() -> None:
    for words in ([], [Fingering("xo"), Fingering("xox")]):
        with pytest.raises(ValueError, match=r"^fingerings of one flute are needed"):
            likely_pitches(words)
