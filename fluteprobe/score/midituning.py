"""The MIDI Tuning Standard: a frequency for each key as system exclusive bytes, and back.

Conventions: keys are MIDI note numbers, 0 to 127. A frequency is written as the equal-tempered note below it
at A4 = 440 Hz and a fraction of a semitone in 14 bits, three bytes of seven bits each; the resolution is
100 / 2¹⁴ = 0.0061 cent. 7F 7F 7F is "no change". After the MIDI 1.0 Detailed Specification 4.2, MIDI Tuning,
and CA-020 (1999) for messages 08 04 and 08 07 with a bank.

Single note tuning change: F0 7F <device> 08 02 tt ll [kk xx yy zz] … F7 in real time, also for notes
that sound; F0 7E <device> 08 07 bb tt ll [kk xx yy zz] … F7 as a set-up. Keys that are not named keep their
tuning.
"""

from collections.abc import Iterator, Mapping
from math import log2

ALL_DEVICES = 0x7F
LOWEST_HZ = 440.0 * 2.0 ** (-69 / 12)
HIGHEST_HZ = 440.0 * 2.0 ** ((127 + 16382 / 16384 - 69) / 12)
RESOLUTION_CENTS = 100.0 / 16384.0

_A4_HZ, _A4_KEY = 440.0, 69
_UNITS_PER_SEMITONE = 1 << 14
_NO_CHANGE = (0x7F, 0x7F, 0x7F)
_MOST_CHANGES = 127  # `ll` has seven bits


def frequency_word(frequency_hz: float) -> tuple[int, int, int]:
    """Return a frequency as the three bytes xx yy zz, to the nearest 0.0061 cent.

    Raises
    ------
    ValueError
        If it is outside what three bytes hold, 8.1758 to 13289.66 Hz.
    """
    if not LOWEST_HZ * (1.0 - 1e-6) < frequency_hz < HIGHEST_HZ * (1.0 + 1e-6):
        raise ValueError(f"a tuning holds {LOWEST_HZ:.4f} to {HIGHEST_HZ:.2f} Hz, not {frequency_hz:g}")
    units = round(_UNITS_PER_SEMITONE * (_A4_KEY + 12.0 * log2(frequency_hz / _A4_HZ)))
    units = min(max(units, 0), 128 * _UNITS_PER_SEMITONE - 2)
    return units >> 14, (units >> 7) & 0x7F, units & 0x7F


def word_frequency_hz(word: tuple[int, int, int]) -> float | None:
    """Return the frequency that three bytes stand for; None is "no change".

    Raises
    ------
    ValueError
        If a byte has more than seven bits.
    """
    if any(not 0 <= byte <= 0x7F for byte in word):
        raise ValueError(f"a tuning's bytes are 0 to 127, not {word}")
    if word == _NO_CHANGE:
        return None
    semitones = word[0] + ((word[1] << 7) | word[2]) / _UNITS_PER_SEMITONE
    return float(_A4_HZ * 2.0 ** ((semitones - _A4_KEY) / 12.0))


def tuning_messages(
    keys_hz: Mapping[int, float], *, device: int = ALL_DEVICES, program: int = 0, bank: int | None = None
) -> tuple[bytes, ...]:
    """Return single note tuning changes for some keys, low to high; two if all 128 change.

    With a bank they are set-up messages (08 07), without one real-time messages (08 02).

    Raises
    ------
    ValueError
        If a number has more than seven bits, or a frequency is outside the range.
    """
    numbers = (device, program, *(() if bank is None else (bank,)), *keys_hz)
    if any(not 0 <= number <= 0x7F for number in numbers):
        raise ValueError("device, program, bank and keys are 0 to 127")
    head = (
        bytes([0xF0, 0x7F, device, 0x08, 0x02, program])
        if bank is None
        else bytes([0xF0, 0x7E, device, 0x08, 0x07, bank, program])
    )
    changes = [bytes([key, *frequency_word(keys_hz[key])]) for key in sorted(keys_hz)]
    return tuple(
        head + bytes([len(some)]) + b"".join(some) + b"\xf7"
        for some in (changes[k : k + _MOST_CHANGES] for k in range(0, len(changes), _MOST_CHANGES))
    )


def tuned_keys(content: bytes) -> dict[int, float | None]:
    """Return which frequency the single note tuning changes in some bytes give each key; the last counts.

    Other system exclusive messages are passed over; None is "no change".

    Raises
    ------
    ValueError
        If a tuning change does not hold as many notes as it says.
    """
    found: dict[int, float | None] = {}
    for message in _exclusives(content):
        changes = _changes(message)
        for k in range(0, len(changes), 4):
            key, xx, yy, zz = changes[k : k + 4]
            found[key] = word_frequency_hz((xx, yy, zz))
    return found


def _exclusives(content: bytes) -> Iterator[bytes]:
    """Return the system exclusive messages between F0 and F7, both left out."""
    for piece in content.split(b"\xf0")[1:]:
        body, end, _ = piece.partition(b"\xf7")
        if end:
            yield body


def _changes(message: bytes) -> bytes:
    """Return the notes of a tuning change, four bytes each; of another message none."""
    if message[:1] == b"\x7f" and message[2:4] == b"\x08\x02":
        count, changes = message[5:6], message[6:]
    elif message[:1] == b"\x7e" and message[2:4] == b"\x08\x07":
        count, changes = message[6:7], message[7:]
    else:
        return b""
    if not count or len(changes) != 4 * count[0]:
        raise ValueError("a tuning change does not hold as many notes as it says")
    return changes
