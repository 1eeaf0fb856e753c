"""Recorded flutes that a registry carries, with exactly known frequencies (see concert_flute.py).

The source of every check here is the bank itself: its root keys and corrections, its loops' lengths; for the
registers, the method books of the concert flute; praat-parselmouth is the referee for octaves.
"""

from pathlib import Path

import numpy as np
import parselmouth
import pytest
import soundfile
from concert_flute import FluteSample, concert_flute

import fluteprobe
from fluteprobe.flute.tuning import cents_between

FLUTES = concert_flute()
each_flute = pytest.mark.parametrize("flute", FLUTES, ids=[flute.name for flute in FLUTES])


# The bank ----------------------------------------------------------------------------------------------


def test_the_bank_has_ten_recordings_over_three_registers() -> None:
    assert [flute.register for flute in FLUTES] == [1, 1, 1, 1, 1, 2, 2, 3, 3, 3]
    assert [flute.exact_hz for flute in FLUTES] == sorted(flute.exact_hz for flute in FLUTES)


def test_nearly_all_loops_close() -> None:
    assert [flute.name for flute in FLUTES if not flute.closes] == ["FluteD#7", "FluteF8"]


@each_flute
def test_a_loop_holds_a_whole_number_of_cycles(flute: FluteSample) -> None:
    # Phase is followed through the loop independently of any whole number; 0.06 cycles is what breath noise
    # and vibrato leave, a twelfth of what would make the count doubtful.
    assert abs(flute.slip_cycles) < 0.06


@each_flute
def test_the_exact_frequency_agrees_with_the_root_key_and_correction(flute: FluteSample) -> None:
    # The bank's makers tuned by ear or by a tuner, to within a sixth of a semitone.
    assert cents_between(flute.named_hz, flute.exact_hz) == pytest.approx(0.0, abs=16.0)


@each_flute
def test_praat_hears_the_same_octave(flute: FluteSample) -> None:
    sound = parselmouth.Sound(flute.played_round(1.0), flute.rate_hz)
    track = sound.to_pitch_ac(pitch_floor=150.0, pitch_ceiling=4000.0).selected_array["frequency"]
    assert cents_between(flute.exact_hz, float(np.median(track[track > 0]))) == pytest.approx(0.0, abs=10.0)


@each_flute
def test_a_loop_played_round_repeats_itself(flute: FluteSample) -> None:
    played, length = flute.played_round(2.0), flute.loop_end - flute.loop_start
    assert len(played) == 2 * flute.rate_hz
    assert np.array_equal(played[:length], played[length : 2 * length])


# What we hear ------------------------------------------------------------------------------------------


@each_flute
def test_a_recorded_flute_is_heard_in_the_right_octave(flute: FluteSample, tmp_path: Path) -> None:
    # Within one cycle more or less in the loop, which is what a jump at its seam can do to a count.
    assert abs(cents_between(flute.exact_hz, heard_hz(flute, tmp_path))) < flute.step_cents


@pytest.mark.parametrize("flute", [f for f in FLUTES if f.closes], ids=[f.name for f in FLUTES if f.closes])
def test_a_loop_that_closes_is_heard_within_half_a_cent(flute: FluteSample, tmp_path: Path) -> None:
    assert cents_between(flute.exact_hz, heard_hz(flute, tmp_path)) == pytest.approx(0.0, abs=0.5)


def heard_hz(flute: FluteSample, folder: Path) -> float:
    """Return the frequency of the only tone in the loop, played round for two seconds."""
    path = folder / "take.wav"
    soundfile.write(path, flute.played_round(2.0), flute.rate_hz)
    (reading,) = fluteprobe.hear(path)
    assert reading.tone.kind == "tone"
    assert reading.tone.frequency_hz is not None
    return reading.tone.frequency_hz


def test_registers_heard_alone_are_those_of_the_method_books(tmp_path: Path) -> None:
    """Required: none wrong, at most three undecided; from a third to two thirds of a second of sound each."""
    undecided = 0
    for flute in concert_flute():
        path = tmp_path / f"{flute.name.replace('#', 's')}.wav"
        soundfile.write(path, 0.9 * flute.samples, flute.rate_hz, subtype="FLOAT")
        heard = max(fluteprobe.hear(path), key=lambda reading: reading.tone.end_s - reading.tone.start_s)
        assert heard.call.register in {flute.register, None}, (flute.name, heard.call)
        undecided += heard.call.register is None
    assert undecided <= 3
