"""Standard MIDI Files: tracks become parts of plain notes, and a tuned scale becomes a file.

Conventions: Standard MIDI Files 1.0 (MIDI Manufacturers Association, RP-001), formats 0 to 2. Times in
quarter notes; a file that counts in film frames instead is read at two quarters a second. Every channel of
a track is a part; channel 10, the drums, is none. Pitch bends are passed over. Bars are counted from the
time signatures, 4/4 where there is none.
"""

from bisect import bisect_right
from collections import defaultdict
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from itertools import islice

from fluteprobe.score.tune import MOST_NOTES, Part, Score, ScoreError, TuneNote

LARGEST_BYTES = 4_000_000
LEGATO_SHARE = 0.3  # of a note: players and sequencers overlap notes by less
TICKS_PER_QUARTER = 480
QUARTERS_PER_MINUTE = 60

_DRUMS = 9
_GAP_TICKS = 24  # between two notes of a scale
_HEADER_BYTES = 14
_MOST_TRACKS = 1000
_MOST_PRESSED = 15  # times that one key may be down at once, and one more
_TOO_MANY = f"it has more than {MOST_NOTES} notes: export the melody alone"
_LATEST_TICK = 1 << 40
_DATA_BYTES = {0x80: 2, 0x90: 2, 0xA0: 2, 0xB0: 2, 0xC0: 1, 0xD0: 1, 0xE0: 2}
_TRACK_NAME, _LYRIC, _END_OF_TRACK, _TEMPO, _TIME_SIGNATURE = 0x03, 0x05, 0x2F, 0x51, 0x58
_FLUTE_PROGRAM = 73  # General MIDI level 1 counts it as 74
_RPN_TUNING_PROGRAM, _RPN_TUNING_BANK, _RPN_NONE = (0, 3), (0, 4), (127, 127)  # MIDI 1.0, RPN 00 03 and 00 04


@dataclass(frozen=True, slots=True, kw_only=True)
class KeyNote:
    """A key to be pressed, with a word to be shown under it."""

    key: int
    word: str


# --- reading -----------------------------------------------------------------------------------------


@dataclass(slots=True)
class _Track:
    """What a track holds: its name, notes as (start, end, key) for each channel, and time signatures."""

    name: str = ""
    notes: dict[int, list[tuple[int, int, int]]] = field(default_factory=lambda: defaultdict(list))
    pressed: dict[tuple[int, int], list[int]] = field(default_factory=lambda: defaultdict(list))
    signatures: list[tuple[int, int, int]] = field(default_factory=list)  # tick, beats, beat type
    is_whole: bool = True


def read_midi(content: bytes) -> Score:
    """Return the parts of a Standard MIDI File; a file that ends early is read as far as it goes.

    Raises
    ------
    ScoreError
        If it is no MIDI file, is damaged or too large.
    """
    if len(content) > LARGEST_BYTES:
        raise ScoreError(f"it is larger than {LARGEST_BYTES // 1_000_000} MB: export the melody alone")
    ticks_per_quarter = _ticks_per_quarter(content)
    chunks = islice(_track_chunks(content), _MOST_TRACKS)
    tracks = [_read_track(chunk, k) for k, chunk in enumerate(chunks, start=1)]
    if sum(len(notes) for track in tracks for notes in track.notes.values()) > MOST_NOTES:
        raise ScoreError(_TOO_MANY)
    bars = _Bars([each for track in tracks for each in track.signatures], ticks_per_quarter)
    whole = bool(tracks) and all(track.is_whole for track in tracks)
    return Score(
        title=tracks[0].name or None if tracks and not tracks[0].notes else None,
        parts=tuple(part for k, track in enumerate(tracks, start=1) for part in _parts(track, k, bars)),
        legato_share=LEGATO_SHARE,
        cautions=() if whole else ("the file ends early: it was read as far as it goes",),
    )


def _ticks_per_quarter(content: bytes) -> float:
    """Return how finely a file counts time."""
    if content[:4] != b"MThd" or len(content) < _HEADER_BYTES:
        raise ScoreError("it is no whole MIDI file: export the tune again")
    division = int.from_bytes(content[12:14])
    if division & 0x8000:
        frames_per_second = 256 - (division >> 8)
        division = frames_per_second * (division & 0xFF) // 2
    if division == 0:
        raise ScoreError("it counts no ticks in a quarter note: the file is damaged")
    return float(division)


def _track_chunks(content: bytes) -> Iterator[bytes]:
    """Return the track chunks, others passed over; the last may be cut short."""
    place = 8 + int.from_bytes(content[4:8])
    while place + 8 <= len(content):
        length = int.from_bytes(content[place + 4 : place + 8])
        if content[place : place + 4] == b"MTrk":
            yield content[place + 8 : place + 8 + length]
        place += 8 + length


def _read_track(chunk: bytes, number: int) -> _Track:
    """Return what a track holds."""
    track = _Track()
    place = tick = status = running = 0
    try:
        while True:
            delta, place = _varying(chunk, place, number)
            tick = min(tick + delta, _LATEST_TICK)
            if chunk[place] >= 0x80:
                status, place = chunk[place], place + 1
            if status in {0xF0, 0xF7, 0xFF}:
                place = _take_other(track, chunk, place, status, tick, number)
                if place < 0:
                    break
                status = running
            else:
                place, running = _take_channel(track, chunk, place, status, tick, number), status
    except IndexError:
        track.is_whole = False
    for (channel, key), starts in track.pressed.items():
        track.notes[channel] += [(start, tick, key) for start in starts]
    return track


def _varying(chunk: bytes, place: int, number: int) -> tuple[int, int]:
    """Return a variable-length quantity (at most four bytes) and the place after it."""
    value = 0
    for k in range(4):
        byte = chunk[place + k]
        value = (value << 7) | (byte & 0x7F)
        if byte < 0x80:
            return value, place + k + 1
    raise ScoreError(f"track {number} has a length of more than four bytes: the file is damaged")


def _take_other(  # noqa: PLR0913, PLR0917  (a place in a chunk is several numbers)
    track: _Track, chunk: bytes, place: int, status: int, tick: int, number: int
) -> int:
    """Read a meta event or a system exclusive; return the place after it, or -1 at the track's end."""
    kind = 0
    if status == 0xFF:
        kind, place = chunk[place], place + 1
    length, place = _varying(chunk, place, number)
    data = chunk[place : place + length]
    if status != 0xFF:
        pass
    elif kind == _END_OF_TRACK:
        return -1
    elif kind == _TRACK_NAME and not track.name:
        track.name = _text(data[:200])
    elif kind == _TIME_SIGNATURE and length >= 2 and data[0] > 0 and data[1] <= 10:
        track.signatures.append((tick, data[0], 1 << data[1]))
    return place + length


def _text(data: bytes) -> str:
    """Return a name; the standard names no encoding, so UTF-8 where it is, else Latin-1."""
    try:
        return data.decode("utf-8").strip()
    except UnicodeDecodeError:
        return data.decode("latin-1").strip()


def _take_channel(  # noqa: PLR0913, PLR0917
    track: _Track, chunk: bytes, place: int, status: int, tick: int, number: int
) -> int:
    """Read a channel message and return the place after it."""
    kind, channel = status & 0xF0, status & 0x0F
    if kind not in _DATA_BYTES or chunk[place] >= 0x80:
        raise ScoreError(f"track {number} has a byte that is no event: the file is damaged")
    key = chunk[place]
    if kind in {0x80, 0x90} and channel != _DRUMS:
        starts = track.pressed[channel, key]
        if kind == 0x90 and chunk[place + 1] > 0:
            starts[_MOST_PRESSED:] = [tick]
        elif starts:
            track.notes[channel].append((starts.pop(0), tick, key))
            if len(track.notes[channel]) > MOST_NOTES:
                raise ScoreError(_TOO_MANY)
    return place + _DATA_BYTES[kind]


class _Bars:
    """Where the bars begin: a tick becomes a bar's number and a beat."""

    def __init__(self, signatures: Sequence[tuple[int, int, int]], ticks_per_quarter: float) -> None:
        self.ticks_per_quarter = ticks_per_quarter
        found = {tick: (beats, beat_type) for tick, beats, beat_type in signatures}
        found.setdefault(0, (4, 4))
        self._ticks = sorted(found)
        self._beats = [(found[tick][0], 4.0 * ticks_per_quarter / found[tick][1]) for tick in self._ticks]
        self._first = [1]
        for k, (beats, ticks) in enumerate(self._beats[:-1]):
            gone = (self._ticks[k + 1] - self._ticks[k]) / (beats * ticks)
            self._first.append(self._first[-1] + max(1, round(gone + 0.499)))

    def place(self, tick: int) -> tuple[str, float]:
        k = bisect_right(self._ticks, tick) - 1
        beats, ticks = self._beats[k]
        bars, rest = divmod(tick - self._ticks[k], beats * ticks)
        return str(self._first[k] + int(bars)), 1.0 + rest / ticks


def _parts(track: _Track, number: int, bars: _Bars) -> Iterator[Part]:
    """Return a part for every channel with notes."""
    for channel, notes in sorted(track.notes.items()):
        several = f", channel {channel + 1}" if len(track.notes) > 1 else ""
        yield Part(
            name=f"{track.name or f'track {number}'}{several}",
            notes=tuple(_note(*note, bars) for note in sorted(notes)),
        )


def _note(start: int, end: int, key: int, bars: _Bars) -> TuneNote:
    bar, beat = bars.place(start)
    return TuneNote(
        start_quarters=start / bars.ticks_per_quarter,
        duration_quarters=(end - start) / bars.ticks_per_quarter,
        pitch_semitones=float(key),
        bar=bar,
        beat=beat,
    )


# --- writing -----------------------------------------------------------------------------------------


def midi_file(
    notes: Sequence[KeyNote],
    messages: Sequence[bytes] = (),
    *,
    name: str = "",
    program: int = 0,
    bank: int = 0,
) -> bytes:
    """Return a format 0 file: system exclusive messages first, then a scale, a quarter note each.

    Channel 1 is told to use the tuning program and bank that the messages fill (MIDI 1.0, registered
    parameters 00 03 and 00 04). `messages` run from F0 to F7.

    Raises
    ------
    ValueError
        If a key is outside 0 to 127 or a message does not run from F0 to F7.
    """
    track = bytearray(_meta(_TRACK_NAME, name.encode("ascii", "replace")[:127]))
    track += _meta(_TEMPO, round(60e6 / QUARTERS_PER_MINUTE).to_bytes(3))
    for message in messages:
        track += _exclusive(message)
    track += b"".join(_select(_RPN_TUNING_BANK, bank) + _select(_RPN_TUNING_PROGRAM, program))
    track += b"".join([_delta(0), bytes([0xC0, _FLUTE_PROGRAM])])
    for k, note in enumerate(notes):
        track += _sounding(note, TICKS_PER_QUARTER if k == 0 else _GAP_TICKS)
    track += _meta(_END_OF_TRACK, b"")
    header = b"MThd" + (6).to_bytes(4) + b"".join(n.to_bytes(2) for n in (0, 1, TICKS_PER_QUARTER))
    return header + b"MTrk" + len(track).to_bytes(4) + bytes(track)


def _sounding(note: KeyNote, wait_ticks: int) -> bytes:
    """Return a key pressed after a wait, for a little less than a quarter note, and its word."""
    if not 0 <= note.key <= 127:
        raise ValueError(f"a key is 0 to 127, not {note.key}")
    return b"".join([
        _meta(_LYRIC, note.word.encode("ascii", "replace")[:127], wait_ticks),
        _delta(0), bytes([0x90, note.key, 90]),
        _delta(TICKS_PER_QUARTER - _GAP_TICKS), bytes([0x80, note.key, 64]),
    ])  # fmt: skip


def _select(parameter: tuple[int, int], value: int) -> list[bytes]:
    """Return the control changes that set a registered parameter and then let go of it."""
    changes = [
        (101, parameter[0]),
        (100, parameter[1]),
        (6, value),
        (101, _RPN_NONE[0]),
        (100, _RPN_NONE[1]),
    ]
    return [_delta(0) + bytes([0xB0, control, setting]) for control, setting in changes]


def _exclusive(message: bytes) -> bytes:
    if message[:1] != b"\xf0" or message[-1:] != b"\xf7":
        raise ValueError("a system exclusive message runs from F0 to F7")
    return _delta(0) + b"\xf0" + _quantity(len(message) - 1) + message[1:]


def _meta(kind: int, data: bytes, wait_ticks: int = 0) -> bytes:
    return _delta(wait_ticks) + bytes([0xFF, kind]) + _quantity(len(data)) + data


def _delta(ticks: int) -> bytes:
    return _quantity(ticks)


def _quantity(value: int) -> bytes:
    """Return a variable-length quantity: seven bits a byte, all but the last marked."""
    found = [value & 0x7F]
    while value := value >> 7:
        found.append(0x80 | (value & 0x7F))
    return bytes(reversed(found))
