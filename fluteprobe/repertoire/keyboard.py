"""A flute's own tuning for a keyboard: which key sounds which measured tone, as files by open standards.

Conventions: keys are MIDI note numbers. A tone belongs to the key of the equal-tempered note nearest to it at
the session's A4; frequencies are absolute, as played. Keys that no fingering gives keep their tuning.
"""

from collections.abc import Iterable
from dataclasses import dataclass

from fluteprobe.flute.tuning import Note, nearest_note
from fluteprobe.repertoire.sounds import Sound
from fluteprobe.score.midifile import KeyNote, midi_file
from fluteprobe.score.midituning import HIGHEST_HZ, LOWEST_HZ, tuning_messages
from fluteprobe.score.writing import WrittenNote, scale_xml

_SECTIONS = {1: "first register", 2: "second register", 3: "third register", None: "register undecided"}


@dataclass(frozen=True, slots=True, kw_only=True)
class Key:
    """A key, the tone it is tuned to and how far that is off its note, in cents; others were passed over."""

    note: Note
    sound: Sound
    cents: float
    others: tuple[Sound, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Address:
    """Whom a tuning message is for: a device (127: all), a tuning program, and a bank or None."""

    device: int = 127
    program: int = 0
    bank: int | None = None


def keys_of(sounds: Iterable[Sound], a4_hz: float) -> tuple[Key, ...]:
    """Return the keys that a flute's tones belong to, low to high.

    Where several fingerings give one note, the key sounds the one that speaks most surely; of those alike
    the one nearest in tune.
    """
    found: dict[int, list[tuple[float, Sound]]] = {}
    for sound in sounds:
        note, cents = nearest_note(sound.frequency_hz, a4_hz)
        if 0 <= note.midi <= 127 and LOWEST_HZ <= sound.frequency_hz <= HIGHEST_HZ:
            found.setdefault(note.midi, []).append((cents, sound))
    keys = []
    for midi, mine in sorted(found.items()):
        (cents, best), *others = sorted(mine, key=_preference)
        keys.append(Key(note=Note(midi), sound=best, cents=cents, others=tuple(sound for _, sound in others)))
    return tuple(keys)


def syx_bytes(keys: Iterable[Key], address: Address) -> bytes:
    """Return the tuning as system exclusive messages alone: a .syx file."""
    return b"".join(_messages(keys, address))


def mid_bytes(keys: Iterable[Key], address: Address, name: str) -> bytes:
    """Return a Standard MIDI File with the tuning at its start and then the scale, fingerings as lyrics."""
    keys = tuple(keys)
    notes = [KeyNote(key=key.note.midi, word=str(key.sound.fingering)) for key in keys]
    return midi_file(
        notes, _messages(keys, address), name=name, program=address.program, bank=address.bank or 0
    )


def musicxml_bytes(sounds: Iterable[Sound], a4_hz: float, name: str) -> bytes:
    """Return every tone as a score, register by register: its fingering and its deviation stand below it."""
    written = [_written(sound, a4_hz) for sound in sounds]
    return scale_xml(sorted(written, key=_section_order), title=name, part=name)


def _messages(keys: Iterable[Key], address: Address) -> tuple[bytes, ...]:
    return tuning_messages(
        {key.note.midi: key.sound.frequency_hz for key in keys},
        device=address.device,
        program=address.program,
        bank=address.bank,
    )


def _preference(candidate: tuple[float, Sound]) -> tuple[bool, float, float, str]:
    cents, sound = candidate
    return not sound.is_sure, -round(sound.reliability, 2), abs(cents), str(sound.fingering)


def _written(sound: Sound, a4_hz: float) -> WrittenNote:
    note, cents = nearest_note(sound.frequency_hz, a4_hz)
    return WrittenNote(
        note=note,
        frequency_hz=sound.frequency_hz,
        words=(str(sound.fingering), f"{round(cents) + 0:+d}".replace("-", "−")),
        section=_SECTIONS[sound.register],
    )


def _section_order(written: WrittenNote) -> tuple[int, float]:
    return list(_SECTIONS.values()).index(written.section), written.frequency_hz
