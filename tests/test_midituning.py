"""The MIDI Tuning Standard's bytes: against the published format and its own examples, MIDIUtil, and mido.

The format and the examples are those of the MIDI 1.0 Detailed Specification 4.2 (MIDI Tuning, frequency data
format) and CA-020 for the message with a bank. Of the specification's examples, 00 00 01 and those above
8 kHz do not follow from its own rule to the digits it gives; they are left out, and the rule is used.
"""

import io
from contextlib import suppress
from itertools import pairwise
from math import log2

import mido
import pytest
from hypothesis import given
from hypothesis import strategies as st
from midiutil import MIDIFile

from fluteprobe.score.midituning import (
    HIGHEST_HZ,
    LOWEST_HZ,
    RESOLUTION_CENTS,
    frequency_word,
    tuned_keys,
    tuning_messages,
    word_frequency_hz,
)

# From the specification: bytes, Hz to its four decimals.
EXAMPLES = [
    ("00 00 00", 8.1758),
    ("01 00 00", 8.6620),
    ("0C 00 00", 16.3516),
    ("3C 00 00", 261.6256),
    ("3D 00 00", 277.1827),
    ("44 7F 7F", 439.9984),
    ("45 00 00", 440.0000),
]


def cents(low_hz: float, high_hz: float) -> float:
    return 1200.0 * log2(high_hz / low_hz)


@pytest.mark.parametrize(("text", "frequency_hz"), EXAMPLES)
def test_the_specification_s_examples_decode(text: str, frequency_hz: float) -> None:
    first, second, third = bytes.fromhex(text)
    assert word_frequency_hz((first, second, third)) == pytest.approx(frequency_hz, abs=1e-4)


@pytest.mark.parametrize(
    ("frequency_hz", "text"),
    [(440.0, "45 00 00"), (440.0 * 2 ** (-1 / 16384 / 12), "44 7F 7F"), (8.175798915643707, "00 00 00")],
)
def test_the_specification_s_examples_encode(frequency_hz: float, text: str) -> None:
    assert bytes(frequency_word(frequency_hz)) == bytes.fromhex(text)


def test_7f_7f_7f_is_no_change_and_no_frequency_gets_it() -> None:
    assert word_frequency_hz((0x7F, 0x7F, 0x7F)) is None
    assert frequency_word(HIGHEST_HZ) == (0x7F, 0x7F, 0x7E)
    assert frequency_word(HIGHEST_HZ * (1 + 9e-7)) == (0x7F, 0x7F, 0x7E)


@given(st.floats(LOWEST_HZ, HIGHEST_HZ))
def test_a_frequency_comes_back_within_half_the_resolution(frequency_hz: float) -> None:
    back = word_frequency_hz(frequency_word(frequency_hz))
    assert back is not None
    # The last step below "no change" has nothing above it; everywhere else rounding halves the resolution.
    assert abs(cents(frequency_hz, back)) <= RESOLUTION_CENTS / 2 + 1e-6
    assert pytest.approx(0.0061, abs=1e-4) == RESOLUTION_CENTS  # as the specification rounds it


@pytest.mark.parametrize("frequency_hz", [8.17, 13290.0, 0.0, -440.0, float("nan"), float("inf")])
def test_a_frequency_out_of_range_is_refused(frequency_hz: float) -> None:
    with pytest.raises(ValueError, match=r"^a tuning holds 8\.1758 to 13289\.66 Hz, not "):
        frequency_word(frequency_hz)


def test_a_byte_of_eight_bits_is_refused() -> None:
    with pytest.raises(ValueError, match=r"^a tuning's bytes are 0 to 127, not \(69, 128, 0\)$"):
        word_frequency_hz((69, 128, 0))


def test_the_real_time_message_byte_by_byte() -> None:
    # F0 7F <device> 08 02 tt ll [kk xx yy zz] F7
    (message,) = tuning_messages({69: 440.0}, device=0x10, program=3)
    assert message == bytes.fromhex("F0 7F 10 08 02 03 01 45 45 00 00 F7")


def test_the_set_up_message_byte_by_byte() -> None:
    # F0 7E <device> 08 07 bb tt ll [kk xx yy zz] F7
    (message,) = tuning_messages({69: 440.0, 60: 261.6255653}, program=3, bank=5)
    assert message == bytes.fromhex("F0 7E 7F 08 07 05 03 02 3C 3C 00 00 45 45 00 00 F7")


def test_128_keys_take_two_messages_and_none_takes_none() -> None:
    keys = {key: 440.0 * 2 ** ((key - 69) / 12) for key in range(128)}
    messages = tuning_messages(keys)
    assert [message[6] for message in messages] == [127, 1]  # ll has seven bits
    back = tuned_keys(b"".join(messages))
    assert back == pytest.approx(keys)
    assert tuning_messages({}) == ()


@pytest.mark.parametrize("wrong", [{"device": 128}, {"program": -1}, {"bank": 128}])
def test_numbers_of_more_than_seven_bits_are_refused(wrong: dict[str, int]) -> None:
    with pytest.raises(ValueError, match=r"^device, program, bank and keys are 0 to 127$"):
        tuning_messages({69: 440.0}, **wrong)
    with pytest.raises(ValueError, match=r"^device, program, bank and keys are 0 to 127$"):
        tuning_messages({128: 440.0})


@given(st.dictionaries(st.integers(0, 127), st.floats(20.0, 12000.0), max_size=20))
def test_a_tuning_comes_back_and_other_keys_stay(keys: dict[int, float]) -> None:
    other = bytes.fromhex("F0 7E 7F 09 01 F7")  # General MIDI on: passed over
    back = tuned_keys(other + b"".join(tuning_messages(keys)))
    assert set(back) == set(keys)
    for key, frequency_hz in keys.items():
        found = back[key]
        assert found is not None
        assert abs(cents(frequency_hz, found)) <= RESOLUTION_CENTS


def test_the_last_change_of_a_key_counts_and_no_change_is_none() -> None:
    first, second = tuning_messages({69: 440.0}), tuning_messages({69: 430.0})
    assert tuned_keys(first[0] + second[0])[69] == pytest.approx(430.0, abs=0.002)
    assert tuned_keys(bytes.fromhex("F0 7F 7F 08 02 00 01 45 7F 7F 7F F7")) == {69: None}


@pytest.mark.parametrize("text", ["F0 7F 7F 08 02 00 02 45 45 00 00 F7", "F0 7E 7F 08 07 00 00 F7"])
def test_a_message_that_does_not_hold_what_it_says_is_refused(text: str) -> None:
    with pytest.raises(ValueError, match=r"^a tuning change does not hold as many notes as it says$"):
        tuned_keys(bytes.fromhex(text))


@given(st.binary(max_size=60))
def test_any_bytes_are_read_or_refused(content: bytes) -> None:
    with suppress(ValueError):
        assert set(tuned_keys(b"\xf0\x7f\x7f\x08\x02" + content)) <= set(range(256))


def test_midiutil_makes_the_same_messages() -> None:
    """MIDIUtil, a general MIDI library, writes the same standard; it truncates, so a step may be between."""
    keys = {67: 391.86, 70: 467.22, 72: 518.22}
    file = MIDIFile(1)
    file.changeNoteTuning(0, list(keys.items()), sysExChannel=0x7F, realTime=True, tuningProgam=0)
    buffer = io.BytesIO()
    file.writeFile(buffer)
    (theirs,) = (
        bytes(message.bytes())
        for track in mido.MidiFile(file=io.BytesIO(buffer.getvalue())).tracks
        for message in track
        if message.type == "sysex"
    )
    (ours,) = tuning_messages(keys)
    assert len(theirs) == len(ours)
    assert theirs[:7] == ours[:7]
    assert list(tuned_keys(theirs)) == list(keys)
    for key, frequency_hz in tuned_keys(theirs).items():
        assert frequency_hz is not None
        assert abs(cents(frequency_hz, keys[key])) <= RESOLUTION_CENTS


def test_mido_sees_whole_messages() -> None:
    parser = mido.Parser()
    parser.feed(b"".join(tuning_messages({60: 262.0, 69: 441.0})))
    (message,) = list(parser)
    assert message.type == "sysex"
    assert message.data[:4] == (0x7F, 0x7F, 0x08, 0x02)


def test_steps_rise_without_gaps() -> None:
    words = [frequency_word(440.0 * 2 ** (k / 16384 / 12)) for k in range(-200, 200)]
    units = [(xx << 14) | (yy << 7) | zz for xx, yy, zz in words]
    assert {high - low for low, high in pairwise(units)} == {1}
