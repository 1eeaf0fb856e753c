"""The tube model against textbook tubes, published hole formulas and common practice."""

from dataclasses import replace
from math import exp, log, pi, sqrt

import numpy as np
import pytest

from fluteprobe.flute.fingering import Fingering, ladder
from fluteprobe.flute.tube import (
    FOOT_CORRECTION,
    Tube,
    hole_pressures,
    input_admittance,
    openness_of,
    outflows,
    resonances,
)
from fluteprobe.flute.tuning import cents_between, speed_of_sound_m_per_s

SOUND = speed_of_sound_m_per_s(20.0)
PIPE = Tube(bore_mm=16.0, length_mm=600.0, wall_mm=3.0, holes_mm=(), head_correction_mm=FOOT_CORRECTION * 8.0)
FLUTE = Tube(  # an invented six-hole flute, about G4
    bore_mm=19.0,
    length_mm=386.0,
    wall_mm=4.0,
    holes_mm=((150.3, 8.0), (174.4, 8.0), (201.5, 5.0), (221.2, 8.5), (258.8, 8.5), (290.3, 9.0)),
    head_correction_mm=35.0,
)
NO_HOLES = np.zeros((1, 0))


def wall_slowing(radius_m: float, frequency_hz: float) -> float:
    """Fletcher & Rossing, eq. 8.15 (from memory): v = c (1 − 1.65e-3/(a √f))."""
    return 1.0 - 1.65e-3 / (radius_m * sqrt(frequency_hz))


# --- the plain tube ----------------------------------------------------------------------------------


@pytest.mark.parametrize("n", [1, 2, 3, 4])
def test_an_open_tube_has_the_whole_harmonic_series(n: int) -> None:
    """Textbook: f = n c / 2(L + 2 · 0.6133 a), with Levine & Schwinger 1948 at both ends.

    2 cents: the wall losses' formula holds to a per mille at these sizes.
    """
    length_m = 0.6 + 2.0 * FOOT_CORRECTION * 0.008
    ideal = n * SOUND / (2.0 * length_m)
    found = float(resonances(PIPE, NO_HOLES).frequency_hz[0, n - 1])
    assert cents_between(ideal * wall_slowing(0.008, ideal), found) == pytest.approx(0.0, abs=2.0)


@pytest.mark.parametrize("n", [1, 2, 3])
def test_a_tube_closed_at_the_head_has_the_odd_series(n: int) -> None:
    """Textbook: f = (2n − 1) c / 4(L + 0.6133 a): there nothing flows in, the admittance is least."""
    tube = replace(PIPE, head_correction_mm=0.0)
    ideal = (2 * n - 1) * SOUND / (4.0 * (0.6 + FOOT_CORRECTION * 0.008))
    near = ideal * np.linspace(0.97, 1.01, 8001)
    found = float(near[np.argmin(np.abs(input_admittance(tube, np.zeros(0), near)))])
    assert cents_between(ideal * wall_slowing(0.008, ideal), found) == pytest.approx(0.0, abs=2.0)


@pytest.mark.parametrize("ka", [0.1, 0.3, 0.5])
def test_the_foot_reflects_as_levine_and_schwinger_say(ka: float) -> None:
    """Levine & Schwinger 1948, their approximation for ka < 1 (from memory), ln γ = 0.5772 (Euler).

    |R| = exp(−(ka)²/2) (1 + (ka)⁴/6 (ln(1/(γ ka)) + 19/12)), end correction 0.6133 a for small ka.
    """
    stub = Tube(bore_mm=20.0, length_mm=1e-4, wall_mm=3.0, holes_mm=(), head_correction_mm=0.0)
    frequency = np.array([ka * SOUND / (2.0 * pi * 0.01)])
    z = complex(1.0 / input_admittance(stub, np.zeros(0), frequency)[0]) - 0.25 * ka**2
    reflection = (z - 1.0) / (z + 1.0)
    expected = exp(-(ka**2) / 2.0) * (1.0 + ka**4 / 6.0 * (log(1.0 / (exp(0.5772) * ka)) + 19.0 / 12.0))
    assert abs(reflection) == pytest.approx(expected, rel=0.01)
    if ka == 0.1:  # small enough
        assert (pi - np.angle(reflection)) / (2.0 * ka) == pytest.approx(FOOT_CORRECTION, rel=0.005)


def test_the_quality_of_a_narrow_tube_is_set_by_its_walls() -> None:
    """Fletcher & Rossing, eq. 8.14 (from memory): α = 3.0e-5 √f / a, and Q = ω / 2αc. 5 %: their rounding."""
    narrow = Tube(bore_mm=6.0, length_mm=600.0, wall_mm=3.0, holes_mm=(), head_correction_mm=2.0)
    found = resonances(narrow, NO_HOLES, 1)
    frequency = float(found.frequency_hz[0, 0])
    alpha = 3.0e-5 * sqrt(frequency) / 0.003
    assert float(found.quality[0, 0]) == pytest.approx(2.0 * pi * frequency / (2.0 * alpha * SOUND), rel=0.05)


def test_warmer_air_raises_every_resonance_with_the_speed_of_sound() -> None:
    """0.5 cent: viscosity changes a little as well."""
    cold, warm = (resonances(replace(FLUTE, temperature_c=t), [Fingering("xxxxoo")]) for t in (15.0, 25.0))
    shift = 1200.0 * np.log2(warm.frequency_hz / cold.frequency_hz)
    expected = cents_between(speed_of_sound_m_per_s(15.0), speed_of_sound_m_per_s(25.0))
    np.testing.assert_allclose(shift, expected, atol=0.5)


def test_the_sound_hole_widens_the_octave() -> None:
    """A mass lengthens low tones more than high ones: its length is arctan(kΔL)/k (Fletcher & Rossing)."""
    heavy = replace(PIPE, head_correction_mm=40.0)
    first, second = resonances(heavy, NO_HOLES, 2).frequency_hz[0]
    k = 2.0 * pi * np.array([first, second]) / SOUND
    lengths = 0.6 + FOOT_CORRECTION * 0.008 + np.arctan(0.04 * k) / k
    slow = [wall_slowing(0.008, f) for f in (first, second)]
    expected = 2.0 * lengths[0] / lengths[1] * slow[1] / slow[0]
    assert cents_between(expected, float(second / first)) == pytest.approx(0.0, abs=1.0)


# --- holes -------------------------------------------------------------------------------------------


@pytest.mark.parametrize("diameter_mm", [5.0, 6.5, 8.0])
def test_an_open_hole_shortens_the_tube_like_two_masses_side_by_side(diameter_mm: float) -> None:
    """Fletcher & Rossing, ch. 15 (from memory): the hole's length t + 1.5 b, times (a/b)², beside the rest.

    The length beyond the hole agrees within 15 %, a weak check: 1.5 b is a rule of thumb.
    """
    place, wall = 450.0, 4.0
    tube = replace(PIPE, wall_mm=wall, holes_mm=((place, diameter_mm),))
    found = float(resonances(tube, np.ones((1, 1)), 1).frequency_hz[0, 0])
    rest = 150.0 + FOOT_CORRECTION * 8.0
    hole = (wall + 1.5 * diameter_mm / 2.0) * (16.0 / diameter_mm) ** 2
    k = 2.0 * pi * found / (SOUND * wall_slowing(0.008, found))
    beyond = np.arctan(np.tan(k * rest / 1000.0) * hole / (hole + np.tan(k * rest / 1000.0) / k * 1000.0)) / k
    length_mm = 1000.0 * SOUND * wall_slowing(0.008, found) / (2.0 * found) - FOOT_CORRECTION * 8.0
    assert length_mm - place == pytest.approx(1000.0 * beyond, rel=0.15)


def test_a_closed_hole_at_the_pressure_maximum_lowers_the_pitch_by_its_share_of_the_volume() -> None:
    """Rayleigh's perturbation: δf/f = −ΔV / V for a small volume in the middle of the first mode.

    ΔV has the matching volume that Keefe 1982 gives; 5 % of the shift.
    """
    radius, wall, length = 4.0, 6.0, 600.0 + 2.0 * FOOT_CORRECTION * 8.0
    middle = 300.0
    plain = float(resonances(PIPE, NO_HOLES, 1).frequency_hz[0, 0])
    tube = replace(PIPE, wall_mm=wall, holes_mm=((middle, 2.0 * radius),))
    found = float(resonances(tube, np.zeros((1, 1)), 1).frequency_hz[0, 0])
    ratio = radius / 8.0
    volume = pi * radius**2 * (wall + radius * ratio / 8.0 * (1.0 + 0.207 * ratio**3))
    expected = cents_between(1.0, 1.0 - volume / (pi * 64.0 * length))
    assert cents_between(plain, found) == pytest.approx(expected, rel=0.05)


def test_a_row_of_open_holes_has_benades_cut_off() -> None:
    """Benade 1960; Fletcher & Rossing, ch. 15 (from memory): f = 0.11 c (b/a) / √(s tₑ), holes 2s apart.

    Below it the pressure dies away from hole to hole; cosh of the decay falls in a straight line over f²
    and meets 1 there. Within 10 %: tₑ = t + 1.5 b is a rule of thumb.
    """
    spacing, wall, bore, hole = 25.0, 4.0, 19.0, 8.0
    tube = Tube(
        bore_mm=bore,
        length_mm=200.0 + 10 * spacing,
        wall_mm=wall,
        holes_mm=tuple((200.0 + k * spacing, hole) for k in range(10)),
        head_correction_mm=40.0,
    )
    length_mm = wall + 1.5 * hole / 2.0
    expected = 0.11 * SOUND * (hole / bore) / sqrt(spacing / 2.0 * length_mm * 1e-6)
    frequency = expected * np.linspace(0.4, 0.8, 30)
    pressure = np.abs(hole_pressures(tube, np.ones(10), frequency))
    excess = np.cosh(np.log(pressure[0] / pressure[3]) / 3.0) - 1.0
    slope, start = np.polyfit(frequency**2, excess, 1)
    assert sqrt(-start / slope) == pytest.approx(expected, rel=0.10)


def test_what_flows_in_flows_out() -> None:
    """Far below any resonance air is incompressible: the openings' flows add up to the head's."""
    flows = outflows(FLUTE, Fingering("xxoxoo").openness, [10.0])
    assert flows.sum() == pytest.approx(1.0, abs=0.01)


def test_uncovering_a_hole_step_by_step_raises_the_first_resonance() -> None:
    openness = np.zeros((6, 6))
    openness[:, 3] = [0.0, 0.03, 0.1, 0.3, 0.6, 1.0]
    found = resonances(FLUTE, openness, 1).frequency_hz[:, 0]
    assert np.all(np.diff(found) > 0.0)


# --- common practice, no source ----------------------------------------------------------------------


def test_the_top_hole_alone_gives_a_note_a_little_above_the_octave() -> None:
    """Common practice, no source: about a semitone above. The second resonance is the strong one there."""
    closed, top = (resonances(FLUTE, [Fingering(word)], 2) for word in ("xxxxxx", "oxxxxx"))
    above = cents_between(2.0 * float(closed.frequency_hz[0, 0]), float(top.frequency_hz[0, 1]))
    assert 20.0 < above < 120.0
    assert top.strength[0, 1] > top.strength[0, 0]


def test_a_leak_at_the_top_hole_weakens_the_first_resonance_and_spares_the_octave() -> None:
    """Common practice, no source: leaking the top hole of the all-closed fingering doubles the frequency."""
    closed, leaking = (resonances(FLUTE, [Fingering(word)], 2) for word in ("xxxxxx", "vxxxxx"))
    assert leaking.strength[0, 0] < 0.5 * closed.strength[0, 0]
    octave = cents_between(2.0 * float(closed.frequency_hz[0, 0]), float(leaking.frequency_hz[0, 1]))
    assert octave == pytest.approx(0.0, abs=50.0)


def test_the_all_closed_pressure_swings_most_at_the_top_hole() -> None:
    """Common practice, no source: the first register's largest pressure swing is close to the top hole."""
    first = resonances(FLUTE, [Fingering("xxxxxx")], 1).frequency_hz[0]
    pressure = np.abs(hole_pressures(FLUTE, np.zeros(6), first))[:, 0]
    assert pressure[0] > 0.95 * pressure.max()
    assert pressure[0] > 1.3 * pressure[-1]


def test_a_mid_range_flute_sounds_between_300_and_800_hz() -> None:
    """Common practice, no source: about; a quarter tone is allowed."""
    found = resonances(FLUTE, ladder(6), 1).frequency_hz[:, 0]
    assert found[0] > 291.0
    assert found[-1] < 823.0
    assert np.all(np.diff(found) > 0.0)


# --- the search --------------------------------------------------------------------------------------


@pytest.mark.parametrize("word", ["xxxxxx", "oxxxxx", "xxoxoo", "vxxhxo"])
def test_resonances_are_the_maxima_of_the_admittance(word: str) -> None:
    """0.05 cent, and the half-power points half a width to either side within 6 % for the first two."""
    fingering = Fingering(word)
    found = resonances(FLUTE, [fingering], 3)
    for n, centre in enumerate(found.frequency_hz[0]):
        near = centre * 2.0 ** (np.linspace(-2.0, 2.0, 401) / 1200.0)
        level = np.abs(input_admittance(FLUTE, fingering.openness, near))
        assert abs(cents_between(centre, near[np.argmax(level)])) <= 0.05
        assert level.max() == pytest.approx(found.strength[0, n], rel=1e-6)
    for n in (0, 1):
        centre, half = found.frequency_hz[0, n], 0.5 * found.width_hz[0, n]
        sides = np.abs(input_admittance(FLUTE, fingering.openness, [centre - half, centre + half]))
        assert np.sqrt(np.mean(sides**2)) == pytest.approx(found.strength[0, n] / sqrt(2.0), rel=0.06)


def test_many_fingerings_at_once_are_the_same_as_one_by_one() -> None:
    words = [Fingering(word) for word in ("xxxxxx", "oxxxxx", "xxxhoo", "oooooo")] * 40
    together = resonances(FLUTE, words)
    for row in (1, 70, 159):
        alone = resonances(FLUTE, [words[row]])
        np.testing.assert_allclose(together.frequency_hz[row], alone.frequency_hz[0], rtol=1e-9)
    assert input_admittance(FLUTE, openness_of(words), np.array([300.0, 500.0])).shape == (160, 2)


# --- faults ------------------------------------------------------------------------------------------


def test_a_fingering_with_another_number_of_holes_is_refused() -> None:
    with pytest.raises(ValueError, match=r"^the tube has 6 holes, the fingering 5$"):
        resonances(FLUTE, [Fingering("xxxxx")])
    with pytest.raises(ValueError, match=r"^the tube has 6 holes, the fingering 7$"):
        input_admittance(FLUTE, np.zeros(7), [440.0])


def test_impossible_tubes_are_refused() -> None:
    with pytest.raises(ValueError, match=r"^bore, length, wall and hole diameters are above 0 mm$"):
        replace(FLUTE, bore_mm=0.0)
    with pytest.raises(
        ValueError,
        match=r"^the holes do not follow one another from sound hole to foot: \[200.0, 150.0\] mm$",
    ):
        replace(FLUTE, holes_mm=((200.0, 8.0), (150.0, 8.0)))
