"""What sounds between pauses. All recordings are made here, so that every sound's place is known."""

from pathlib import Path

import numpy as np
import pytest
from longs import sounded
from make_long import coughed, spoken
from numpy.typing import NDArray
from tones import as_recording

from fluteprobe.sound.phrases import Phrase, find_phrases, measure_loudness

RATE_HZ = 16_000
LOW = 1200.0 * np.log2(440.0)
EDGE_S = 0.06  # fades and steps of 10 ms

Floats = NDArray[np.float64]


def random() -> np.random.Generator:
    return np.random.default_rng(40)


def pause(seconds: float) -> Floats:
    return np.zeros(int(seconds * RATE_HZ))


def tone(cents: float = LOW, seconds: float = 1.0) -> Floats:
    return sounded(cents, seconds, RATE_HZ, random())


def breath(seconds: float, level: float = 0.03) -> Floats:
    return level * random().standard_normal(int(seconds * RATE_HZ))


def heard(folder: Path, *parts: Floats, room: float = 5e-4) -> tuple[Phrase, ...]:
    whole = np.concatenate(parts)
    whole = whole + room * np.random.default_rng(41).standard_normal(len(whole))
    return find_phrases(as_recording(folder, whole.astype(np.float32), RATE_HZ))


def test_tones_between_pauses_are_phrases_of_their_own(tmp_path: Path) -> None:
    first, second = heard(tmp_path, pause(1.0), tone(), pause(0.8), tone(LOW + 200.0), pause(1.0))
    assert (first.start_s, first.end_s) == pytest.approx((1.0, 2.0), abs=EDGE_S)
    assert (second.start_s, second.end_s) == pytest.approx((2.8, 3.8), abs=EDGE_S)
    assert [round(phrase.tones[0].frequency_hz or 0.0) for phrase in (first, second)] == [440, 494]


def test_a_cut_has_half_a_second_of_the_room_and_nothing_of_the_neighbours(tmp_path: Path) -> None:
    first, second = heard(tmp_path, pause(2.0), tone(), pause(0.4), tone(LOW + 200.0), pause(2.0))
    assert first.start_s - first.cut_start_s == pytest.approx(0.5, abs=0.011)
    assert first.cut_end_s <= second.start_s
    assert second.cut_start_s >= first.end_s
    assert second.cut_end_s - second.end_s == pytest.approx(0.5, abs=0.011)


def test_cuts_stay_within_the_recording(tmp_path: Path) -> None:
    (only,) = heard(tmp_path, pause(0.2), tone(), pause(0.1))
    assert only.cut_start_s == 0.0
    assert only.cut_end_s <= 1.3


def test_two_tones_in_one_breath_are_one_phrase(tmp_path: Path) -> None:
    (only,) = heard(tmp_path, pause(1.0), tone(), pause(0.15), tone(LOW + 1190.0), pause(1.0))
    assert [round(each.frequency_hz or 0.0) for each in only.tones] == [440, 875]


def test_two_fingerings_without_a_pause_are_parted(tmp_path: Path) -> None:
    first, second = heard(tmp_path, pause(1.0), tone(), tone(LOW + 200.0), pause(1.0))
    assert first.end_s == pytest.approx(2.0, abs=0.15)
    assert first.end_s <= second.start_s + 1e-9


def test_breath_without_a_tone_is_told(tmp_path: Path) -> None:
    (only,) = heard(tmp_path, pause(1.0), breath(1.5), pause(1.0))
    assert only.is_breath
    assert only.tones == ()


@pytest.mark.parametrize("seed", range(4))
def test_words_and_coughs_are_neither_tones_nor_breath(tmp_path: Path, seed: int) -> None:
    draws = np.random.default_rng(seed)
    words, cough = spoken(1.5, RATE_HZ, draws), coughed(RATE_HZ, draws)
    for phrase in heard(tmp_path, pause(1.0), words, pause(1.0), cough, pause(1.0)):
        assert not phrase.is_breath
        assert all(each.end_s - each.start_s < 0.8 for each in phrase.tones)


@pytest.mark.parametrize("seed", range(3))
def test_words_in_a_hall_are_no_breath(tmp_path: Path, seed: int) -> None:
    # An echo that falls by 60 dB in 0.6 s fills the gaps between syllables.
    words = spoken(1.2, RATE_HZ, np.random.default_rng(seed))
    fall = 10.0 ** (-3.0 * np.arange(int(0.6 * RATE_HZ)) / (0.6 * RATE_HZ))
    echo = np.convolve(words, 0.02 * fall * random().standard_normal(len(fall)))
    echo[: len(words)] += words
    assert not any(phrase.is_breath for phrase in heard(tmp_path, pause(1.0), echo, pause(1.0)))


def test_a_word_just_before_a_tone_is_not_cut_with_it(tmp_path: Path) -> None:
    words = spoken(0.8, RATE_HZ, random())
    phrases = heard(tmp_path, pause(1.0), words, pause(0.45), tone(), pause(1.0))
    last = phrases[-1]
    assert last.start_s == pytest.approx(2.25 + (len(words) / RATE_HZ - 0.8), abs=EDGE_S)
    assert last.cut_start_s >= 1.0 + len(words) / RATE_HZ - 0.05


@pytest.mark.parametrize("room", [0.0, 5e-4, 1e-2])
def test_a_noisy_room_changes_little(tmp_path: Path, room: float) -> None:
    phrases = heard(tmp_path, pause(1.0), tone(), pause(1.0), tone(LOW + 300.0), pause(1.0), room=room)
    assert [len(phrase.tones) for phrase in phrases] == [1, 1]
    assert phrases[1].start_s == pytest.approx(3.0, abs=0.1)


def test_the_room_s_level_is_that_of_the_pauses(tmp_path: Path) -> None:
    whole = np.concatenate([pause(2.0), tone(seconds=4.0), pause(2.0)])
    whole = whole + 1e-3 * random().standard_normal(len(whole))
    loudness = measure_loudness(as_recording(tmp_path, whole.astype(np.float32), RATE_HZ))
    assert np.median(loudness.room_db) == pytest.approx(-60.0, abs=2.0)  # 20 log10 of 1e-3
    assert np.all(loudness.sounds[230:570])
    assert not np.any(loudness.sounds[:190])


def test_a_recording_longer_than_is_kept_is_read_in_pieces(tmp_path: Path) -> None:
    phrases = heard(tmp_path, *([pause(9.0), tone()] * 8), pause(1.0))
    assert [phrase.start_s for phrase in phrases] == pytest.approx(
        [9.0 + 10.0 * k for k in range(8)], abs=EDGE_S
    )


def test_a_long_tone_is_one_phrase_though_it_is_heard_in_slices(tmp_path: Path) -> None:
    (only,) = heard(tmp_path, pause(2.0), tone(seconds=25.0), pause(2.0))
    assert (only.start_s, only.end_s) == pytest.approx((2.0, 27.0), abs=EDGE_S)
    assert len(only.tones) > 2
    assert {round(each.frequency_hz or 0.0) for each in only.tones} == {440}


def test_a_silent_room_holds_nothing(tmp_path: Path) -> None:
    assert heard(tmp_path, pause(3.0)) == ()
