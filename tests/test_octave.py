"""The octave of simulated tones that were once read wrong: regression, made by the simulation in samples/."""

from pathlib import Path

import pytest

from fluteprobe.sound.recording import open_recording
from fluteprobe.sound.tone import read_tones

RECORDINGS = Path(__file__).parent / "recordings"


@pytest.mark.parametrize(
    ("name", "frequency_hz", "why"),
    [
        ("lines-at-even-multiples", 483.9, "noise at the odd multiples of its half is narrow, but no line"),
        ("bumps-at-thirds", 912.5, "breath resonances stand at one and two thirds of a third-register tone"),
    ],
)
def test_noise_between_the_lines_does_not_lower_the_octave(name: str, frequency_hz: float, why: str) -> None:
    (tone,) = read_tones(open_recording(RECORDINGS / f"{name}.flac"))
    assert tone.frequency_hz == pytest.approx(frequency_hz, rel=0.001), why
