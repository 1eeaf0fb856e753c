"""Notes, cents and air, against standards and handbooks; each source stands beside its check."""

import librosa
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fluteprobe.flute.tuning import (
    A4_HZ,
    Note,
    cents_between,
    nearest_note,
    speed_of_sound_m_per_s,
    temperature_shift_cents,
)

frequencies = st.floats(20.0, 20_000.0)
pitches = st.floats(380.0, 500.0)
temperatures = st.floats(-20.0, 50.0)

# MIDI 1.0 Detailed Specification: note number 60 is middle C, 69 the A of 440 Hz, each number a semitone;
# octave numbers as in scientific pitch notation (middle C is C4). Frequencies to 0.01 Hz: the table of
# equal-tempered notes at A4 = 440 Hz that handbooks of acoustics print, here from memory.
REFERENCE_NOTES = [
    (21, "A0", 27.50),
    (36, "C2", 65.41),
    (48, "C3", 130.81),
    (55, "G3", 196.00),
    (60, "C4", 261.63),
    (61, "C#4", 277.18),
    (62, "D4", 293.66),
    (63, "D#4", 311.13),
    (64, "E4", 329.63),
    (65, "F4", 349.23),
    (66, "F#4", 369.99),
    (67, "G4", 392.00),
    (68, "G#4", 415.30),
    (69, "A4", 440.00),
    (70, "A#4", 466.16),
    (71, "B4", 493.88),
    (72, "C5", 523.25),
    (81, "A5", 880.00),
    (84, "C6", 1046.50),
    (96, "C7", 2093.00),
    (108, "C8", 4186.01),
]


# Notes -------------------------------------------------------------------------------------------------


def test_the_standard_tuning_frequency() -> None:
    # ISO 16:1975: the A in the treble stave is 440 Hz.
    assert A4_HZ == 440.0
    assert nearest_note(440.0) == (Note(69), 0.0)


@pytest.mark.parametrize(("midi", "name", "frequency_hz"), REFERENCE_NOTES)
def test_reference_notes(midi: int, name: str, frequency_hz: float) -> None:
    assert str(Note(midi)) == name
    assert Note(midi).frequency_hz() == pytest.approx(frequency_hz, abs=0.005)  # the table's last digit
    note, cents = nearest_note(frequency_hz)
    assert note == Note(midi)
    assert abs(cents) < cents_between(frequency_hz, frequency_hz + 0.005)


def test_old_and_new_tunings() -> None:
    # By definition of equal temperament; 415 Hz is within a cent of a semitone under 440 Hz.
    assert nearest_note(415.0, a4_hz=415.0) == (Note(69), 0.0)
    note, cents = nearest_note(440.0, a4_hz=415.0)
    assert str(note) == "A#4"
    assert cents == pytest.approx(1.27, abs=0.01)


def test_the_border_between_two_notes_belongs_to_the_upper_one() -> None:
    note, cents = nearest_note(440.0 * 2 ** (0.5 / 12))
    assert str(note) == "A#4"
    assert cents == pytest.approx(-50.0, abs=1e-9)


@given(frequencies)
def test_librosa_names_the_same_note_with_the_same_cents(frequency_hz: float) -> None:
    # librosa 0.11 as referee; it gives whole cents and rounds a border between two notes its own way.
    note, cents = nearest_note(frequency_hz)
    name = librosa.hz_to_note(frequency_hz, unicode=False)
    assert name == str(note) or abs(abs(cents) - 50.0) < 1e-6
    assert 100.0 * float(librosa.hz_to_midi(frequency_hz)) == pytest.approx(
        100.0 * note.midi + cents, abs=1e-6
    )


@given(frequencies, pitches)
def test_a_note_and_its_deviation_give_the_frequency_back(frequency_hz: float, a4_hz: float) -> None:
    note, cents = nearest_note(frequency_hz, a4_hz)
    assert -50.0 <= cents <= 50.0
    assert note.frequency_hz(a4_hz) * 2.0 ** (cents / 1200.0) == pytest.approx(frequency_hz, rel=1e-12)


@given(st.integers(0, 127), pitches)
def test_a_note_in_tune_deviates_by_nothing(midi: int, a4_hz: float) -> None:
    note, cents = nearest_note(Note(midi).frequency_hz(a4_hz), a4_hz)
    assert note == Note(midi)
    assert cents == pytest.approx(0.0, abs=1e-9)


@given(st.integers(0, 115))
def test_an_octave_doubles_the_frequency_and_keeps_the_letter(midi: int) -> None:
    low, high = Note(midi), Note(midi + 12)
    assert high.frequency_hz() == pytest.approx(2.0 * low.frequency_hz(), rel=1e-15)
    assert str(low).rstrip("-0123456789") == str(high).rstrip("-0123456789")
    assert high.octave == low.octave + 1


@pytest.mark.parametrize("frequency_hz", [0.0, -440.0, float("nan")])
def test_what_is_no_frequency_has_no_note(frequency_hz: float) -> None:
    with pytest.raises(ValueError, match=rf"^a frequency is above 0 Hz, not {frequency_hz}$"):
        nearest_note(frequency_hz)


# Cents -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("ratio", "cents"),
    [
        (2.0, 1200.0),  # an octave, by definition (A. J. Ellis 1885)
        (2.0 ** (1 / 12), 100.0),  # an equal-tempered semitone, by definition
        (3 / 2, 701.955),  # a just fifth, printed in handbooks
        (5 / 4, 386.314),  # a just major third
        (81 / 80, 21.506),  # the syntonic comma
    ],
)
def test_intervals_in_cents(ratio: float, cents: float) -> None:
    assert cents_between(440.0, 440.0 * ratio) == pytest.approx(cents, abs=0.0005)
    assert cents_between(440.0 * ratio, 440.0) == pytest.approx(-cents, abs=0.0005)


@given(frequencies, frequencies, frequencies)
def test_cents_add_up(a_hz: float, b_hz: float, c_hz: float) -> None:
    together = cents_between(a_hz, b_hz) + cents_between(b_hz, c_hz)
    assert together == pytest.approx(cents_between(a_hz, c_hz), abs=1e-8)


# Air ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("temperature_c", "speed_m_per_s"),
    [
        (0.0, 331.3),  # handbooks of physics; Cramer's 331.45 m/s is within the tolerance
        (20.0, 343.2),  # handbooks of physics
        (25.0, 346.1),  # the same tables, from memory
    ],
)
def test_speed_of_sound_in_handbooks(temperature_c: float, speed_m_per_s: float) -> None:
    assert speed_of_sound_m_per_s(temperature_c) == pytest.approx(speed_m_per_s, abs=0.2)


def test_speed_of_sound_in_miles_an_hour() -> None:
    # Common practice, no source: about 760 mph in ordinary air. A mile is 1609.344 m by definition.
    assert speed_of_sound_m_per_s(15.0) * 3600.0 / 1609.344 == pytest.approx(760.0, abs=5.0)


def cramer_m_per_s(temperature_c: float, water: float = 0.0) -> float:
    """Return Cramer's speed of sound at 101 325 Pa; `water` is the mole fraction of vapour.

    O. Cramer, JASA 93, 2510 (1993), eq. (15) and table III, coefficients from memory, with 0.04 % of carbon
    dioxide and without the terms that are smaller than 1 mm/s.
    """
    t, p, carbon = temperature_c, 101_325.0, 0.0004
    return (
        331.5024
        + 0.603055 * t
        - 0.000528 * t**2
        + (51.471935 + 0.1495874 * t - 0.000782 * t**2) * water
        + (-1.82e-7 + 3.73e-8 * t - 2.93e-10 * t**2) * p
        + (-85.20931 - 0.228525 * t + 5.91e-5 * t**2) * carbon
        - 2.835149 * water**2
        - 2.15e-13 * p**2
    )


def test_the_coefficients_that_were_remembered_give_the_paper_s_own_dry_value() -> None:
    # The paper's abstract: 331.29 m/s at 0 °C in dry air with 0.0314 % of carbon dioxide was the earlier
    # standard; its own value is 331.45 m/s (both from memory).
    assert cramer_m_per_s(0.0) == pytest.approx(331.45, abs=0.05)


@given(temperatures.filter(lambda t: t >= 0.0), temperatures.filter(lambda t: t >= 0.0))
def test_pitch_moves_with_temperature_as_in_dry_air_after_cramer(from_c: float, to_c: float) -> None:
    # The two formulas' ratios differ by under 0.5 cent per 10 °C; the paper is stated for 0 to 30 °C.
    expected = cents_between(cramer_m_per_s(from_c), cramer_m_per_s(to_c))
    assert temperature_shift_cents(from_c, to_c) == pytest.approx(
        expected, abs=0.05 * abs(to_c - from_c) + 1e-9
    )


def test_humidity_matters_less_than_two_degrees() -> None:
    # Saturated vapour at 20 °C is 2.34 kPa (steam tables), hence a mole fraction of 0.0231.
    humid_cents = cents_between(cramer_m_per_s(20.0), cramer_m_per_s(20.0, water=0.0231))
    assert 5.0 < humid_cents < temperature_shift_cents(20.0, 22.5)


def test_a_degree_is_about_three_cents() -> None:
    # Common practice, no source: three cents for each degree.
    assert temperature_shift_cents(20.0, 21.0) == pytest.approx(3.0, abs=0.1)


@given(temperatures, temperatures)
def test_warmer_air_is_sharper_and_the_way_back_is_the_same(from_c: float, to_c: float) -> None:
    there = temperature_shift_cents(from_c, to_c)
    assert there == pytest.approx(-temperature_shift_cents(to_c, from_c), abs=1e-9)
    assert there * (to_c - from_c) >= 0.0


@pytest.mark.parametrize("temperature_c", [-273.15, -300.0, float("nan")])
def test_what_is_no_temperature_has_no_sound(temperature_c: float) -> None:
    with pytest.raises(ValueError, match=rf"^a temperature is above -273\.15 °C, not {temperature_c}$"):
        speed_of_sound_m_per_s(temperature_c)
