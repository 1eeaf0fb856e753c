"""Scales and tonics: named ones against librosa and the rule of rotation, lists by construction."""

from contextlib import suppress

import librosa
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fluteprobe.flute.scales import NAMES, Scale, named_scale, tonic_name, tonic_of

# The five modes of the pentatonic scale without semitones are its rotations; gong, shang, jue, zhi and yu are
# their classical names, from the first note on (from memory; any handbook of Chinese music theory).
MODES = ("gong", "shang", "jue", "zhi", "yu")


@pytest.mark.parametrize(("name", "key"), [("major", "C:maj"), ("minor", "C:min")])
def test_major_and_natural_minor_are_those_of_librosa(name: str, key: str) -> None:
    assert named_scale(name).steps == tuple(librosa.key_to_degrees(key))


@pytest.mark.parametrize("mode", range(5))
def test_the_pentatonic_modes_are_rotations_of_the_first(mode: int) -> None:
    first = named_scale("pentatonic-1").steps
    rotated = tuple(sorted((step - first[mode]) % 12 for step in first))
    assert named_scale(f"pentatonic-{mode + 1}").steps == rotated
    assert named_scale(MODES[mode]) == named_scale(f"pentatonic-{mode + 1}")


def test_the_minor_pentatonic_is_the_natural_minor_without_second_and_sixth() -> None:  # handbooks of harmony
    minor = named_scale("natural minor").steps
    assert named_scale("Minor Pentatonic").steps == tuple(minor[k] for k in (0, 2, 3, 4, 6))


@pytest.mark.parametrize(
    ("text", "steps"),
    [
        ("0 2 4 7 9", (0, 2, 4, 7, 9)),
        ("0,2,4,7,9,12", (0, 2, 4, 7, 9)),
        ("2 4 7 9", (0, 2, 4, 7, 9)),
        ("0 204c 386c 702C", (0, 2.04, 3.86, 7.02)),
        ("0 3.5 7", (0, 3.5, 7)),
    ],
)
def test_a_list_of_intervals(text: str, steps: tuple[float, ...]) -> None:
    assert named_scale(text).steps == pytest.approx(steps)


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("0 4 2", "'0 4 2' is no scale: its intervals rise from 0 to under 12 semitones (1200c)"),
        ("0 0 2", "'0 0 2' is no scale: its intervals rise from 0 to under 12 semitones (1200c)"),
        ("0 7 13", "'0 7 13' is no scale: its intervals rise from 0 to under 12 semitones (1200c)"),
        ("0 two", "'0 two' has 'two', expected semitones (4) or cents (386c)"),
        ("0 1e999", "'0 1e999' has '1e999', expected semitones (4) or cents (386c)"),
        (
            "blue",
            "'blue' is no scale, expected major, minor, pentatonic-1, pentatonic-2, pentatonic-3, "
            "pentatonic-4, pentatonic-5 or intervals such as '0 2 4 7 9'",
        ),
    ],
)
def test_what_is_no_scale_is_told(text: str, told: str) -> None:
    with pytest.raises(ValueError, match=r".") as caught:
        named_scale(text)
    assert str(caught.value) == told


@given(st.text(max_size=30))
def test_any_text_is_a_scale_or_one_line(text: str) -> None:
    with suppress(ValueError):
        scale = named_scale(text)
        assert scale.steps[0] == 0.0
        assert all(0.0 <= step < 12.0 for step in scale.steps)


@pytest.mark.parametrize("tonic", range(12))
def test_a_tonic_reads_its_own_name(tonic: int) -> None:
    assert tonic_of(tonic_name(tonic)) == tonic


@pytest.mark.parametrize(("text", "tonic"), [("Bb", 10), ("cb", 11), ("B#", 0), ("f♯", 6), (" E♭ ", 3)])
def test_flats_and_lower_case_are_read(text: str, tonic: int) -> None:
    assert tonic_of(text) == tonic


def test_what_is_no_tonic_is_told() -> None:
    with pytest.raises(ValueError, match=r"^'H' is no note, expected A to G, with # or b if need be$"):
        tonic_of("H")


def test_a_scale_tells_its_names_and_steps() -> None:
    scale = named_scale("yu")
    assert scale.description == "pentatonic mode 5, minor pentatonic, yu"
    assert scale.steps_text == "0 3 5 7 10"
    assert [named_scale(name).name for name in NAMES] == list(NAMES)
    assert Scale(name="0 2", steps=(0, 2)).description == "0 2"
