"""Standard MIDI Files in and out: against mido, a general MIDI library, and by construction."""

import io
from typing import Any

import mido
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fluteprobe.score.midifile import KeyNote, midi_file, read_midi
from fluteprobe.score.midituning import tuned_keys, tuning_messages
from fluteprobe.score.tune import ScoreError, tune_of

Line = list[tuple[float, float, float]]


def saved(file: mido.MidiFile) -> bytes:
    buffer = io.BytesIO()
    file.save(file=buffer)
    return buffer.getvalue()


def melody(notes: Line, *, ticks: int = 480, channel: int = 0, **meta: Any) -> mido.MidiTrack:
    """Return a track that holds (start, duration, key) in quarter notes."""
    events = [(start, 1, int(key)) for start, _, key in notes]
    events += [(start + duration, 0, int(key)) for start, duration, key in notes]
    track = mido.MidiTrack([mido.MetaMessage(kind, time=0, **values) for kind, values in meta.items()])
    now = 0
    for place, on, key in sorted(events):
        tick = round(place * ticks)
        kind = "note_on" if on else "note_off"
        track.append(mido.Message(kind, note=key, velocity=80, time=tick - now, channel=channel))
        now = tick
    return track


def line(content: bytes, part: str | None = None) -> Line:
    notes = tune_of(read_midi(content), part).notes
    return rounded([(note.start_quarters, note.duration_quarters, note.pitch_semitones) for note in notes])


def rounded(notes: Line) -> Line:
    """Return times to a millionth of a quarter note, far finer than a tick."""
    return [(round(start, 6), round(duration, 6), pitch) for start, duration, pitch in notes]


TUNE: Line = [(0.0, 1.0, 69.0), (1.0, 0.5, 71.0), (1.5, 0.5, 72.0), (2.0, 2.0, 76.0)]


# Reading -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("ticks", [24, 96, 480, 960])
@pytest.mark.parametrize("kind", [0, 1])
def test_a_tune_that_mido_wrote_is_read(ticks: int, kind: int) -> None:
    file = mido.MidiFile(type=kind, ticks_per_beat=ticks, tracks=[melody(TUNE, ticks=ticks)])
    assert line(saved(file)) == TUNE


@settings(max_examples=40)
@given(
    st.lists(
        st.tuples(st.integers(1, 500), st.integers(1, 3000), st.integers(0, 127)), min_size=1, max_size=30
    )
)
def test_any_line_that_mido_wrote_comes_back(steps: list[tuple[int, int, int]]) -> None:
    notes, now = [], 0
    for rest, ticks, key in steps:
        notes.append(((now + rest) / 480, ticks / 480, float(key)))
        now += rest + ticks
    assert line(saved(mido.MidiFile(type=0, tracks=[melody(notes)]))) == rounded(notes)


def test_bars_and_beats_follow_the_time_signatures() -> None:
    track = melody([(k * 0.5, 0.5, 60.0 + k % 12) for k in range(24)])
    track.insert(0, mido.MetaMessage("time_signature", numerator=3, denominator=4, time=0))
    other = mido.MidiTrack([mido.MetaMessage("time_signature", numerator=6, denominator=8, time=6 * 480)])
    notes = tune_of(read_midi(saved(mido.MidiFile(type=1, tracks=[track, other])))).notes
    places = [(note.bar, note.beat) for note in notes]
    assert places[:2] == [("1", 1.0), ("1", 1.5)]  # quarters in 3/4
    assert places[11] == ("2", 3.5)
    assert places[12:15] == [("3", 1.0), ("3", 2.0), ("3", 3.0)]  # eighths in 6/8
    assert places[18] == ("4", 1.0)


def test_parts_are_tracks_and_channels_and_the_drums_are_none() -> None:
    one = melody(TUNE, track_name={"name": "Voice"})
    two = melody([(0.0, 4.0, 48.0)], track_name={"name": "Bass"}, channel=1)
    drums = melody([(0.0, 1.0, 38.0)], channel=9)
    content = saved(mido.MidiFile(type=1, tracks=[mido.MidiTrack(), one, two, drums]))
    assert [part.name for part in read_midi(content).parts] == ["Voice", "Bass"]
    assert line(content, "bass") == [(0.0, 4.0, 48.0)]
    assert line(content, "2") == [(0.0, 4.0, 48.0)]
    assert tune_of(read_midi(content)).cautions == ("it has 2 parts, the first is taken; the others: 2 Bass",)
    with pytest.raises(ScoreError, match=r"^it has no part '3', expected one of 1 Voice, 2 Bass$"):
        tune_of(read_midi(content), "3")


@pytest.mark.parametrize("encoding", ["utf-8", "latin-1"])
def test_a_first_track_without_notes_names_the_tune(encoding: str) -> None:
    # Standard MIDI Files 1.0: the name of the first track of a format 1 file is that of the whole.
    head = mido.MidiTrack([mido.MetaMessage("track_name", name="Über den Rohren")])
    file = mido.MidiFile(type=1, tracks=[head, melody(TUNE)], charset=encoding)
    assert tune_of(read_midi(saved(file))).title == "Über den Rohren"
    assert tune_of(read_midi(saved(mido.MidiFile(type=0, tracks=[melody(TUNE)])))).title is None


def test_one_track_with_two_channels_has_two_parts() -> None:
    track = melody(TUNE)
    track += melody([(0.0, 1.0, 40.0)], channel=3)
    names = [part.name for part in read_midi(saved(mido.MidiFile(type=0, tracks=[track]))).parts]
    assert names == ["track 1, channel 1", "track 1, channel 4"]


def test_played_legato_is_a_line_and_chords_are_told() -> None:
    overlapping = [(0.0, 1.1, 76.0), (1.0, 1.1, 72.0), (2.0, 1.0, 74.0)]
    tune = tune_of(read_midi(saved(mido.MidiFile(type=0, tracks=[melody(overlapping)]))))
    assert [(n.start_quarters, n.duration_quarters) for n in tune.notes] == [
        (0.0, 1.0),
        (1.0, 1.0),
        (2.0, 1.0),
    ]
    assert tune.cautions == ()
    chord = [(0.0, 1.0, 60.0), (0.0, 1.0, 64.0), (0.0, 1.0, 67.0), (1.0, 1.0, 65.0)]
    tune = tune_of(read_midi(saved(mido.MidiFile(type=0, tracks=[melody(chord)]))))
    assert [note.pitch_semitones for note in tune.notes] == [67.0, 65.0]
    assert tune.cautions == ("several notes sound at once: the top line is taken, 2 of 4 left out",)


def test_running_status_and_velocity_nought_and_film_frames() -> None:
    events = bytes.fromhex("00 90 45 50  28 45 00  00 47 50  28 47 00  00 FF 2F 00")
    head = b"MThd\x00\x00\x00\x06\x00\x00\x00\x01"
    content = (
        head + b"\xe7\x28" + b"MTrk" + len(events).to_bytes(4) + events
    )  # 25 frames of 40 ticks a second
    # 1000 ticks a second, so half a second, a quarter note, is 500 ticks.
    assert line(content) == [(0.0, 0.08, 69.0), (0.08, 0.08, 71.0)]


def test_a_file_that_ends_early_is_read_as_far_as_it_goes() -> None:
    content = saved(mido.MidiFile(type=0, tracks=[melody(TUNE)]))
    tune = tune_of(read_midi(content[:-14]))
    assert [note.pitch_semitones for note in tune.notes] == [69.0, 71.0, 72.0]
    assert tune.cautions == ("the file ends early: it was read as far as it goes",)


def test_what_is_no_midi_file_is_told() -> None:
    good = saved(mido.MidiFile(type=0, tracks=[melody(TUNE)]))
    cases = {
        b"MThd": "it is no whole MIDI file: export the tune again",
        good[:12] + b"\0\0" + good[14:]: "it counts no ticks in a quarter note: the file is damaged",
        good[:22] + b"\0\x40\x40\x40" + good[26:]: "track 1 has a byte that is no event: the file is damaged",
        good[:22] + b"\xff" * 5 + good[27:]: (
            "track 1 has a length of more than four bytes: the file is damaged"
        ),
        saved(mido.MidiFile(type=0, tracks=[mido.MidiTrack()])): (
            "it holds no pitched notes: give a score or a MIDI file with a melody"
        ),
        b"MThd" + bytes(4_000_000): "it is larger than 4 MB: export the melody alone",
    }
    for content, told in cases.items():
        with pytest.raises(ScoreError) as caught:
            tune_of(read_midi(content))
        assert str(caught.value) == told


def test_more_notes_than_a_tune_has_are_refused() -> None:
    events = b"\x00\x90\x45\x50" + b"\x01\x45\x00\x00\x45\x50" * 100_002
    content = b"MThd\0\0\0\6\0\0\0\1\1\xe0MTrk" + len(events).to_bytes(4) + events
    with pytest.raises(ScoreError, match=r"^it has more than 100000 notes: export the melody alone$"):
        read_midi(content)


SEED = saved(mido.MidiFile(type=1, tracks=[melody(TUNE, track_name={"name": "a"}), melody(TUNE, channel=2)]))


@settings(max_examples=300)
@given(
    st.lists(st.tuples(st.integers(0, 160), st.integers(0, 9), st.binary(max_size=5)), min_size=1, max_size=4)
)
def test_a_damaged_file_is_read_or_told_in_one_line(cuts: list[tuple[int, int, bytes]]) -> None:
    content = bytearray(SEED)
    for start, length, put in cuts:
        content[start : start + length] = put
    try:
        notes = tune_of(read_midi(bytes(content))).notes
    except ScoreError as error:
        assert "\n" not in str(error)  # noqa: PT017  (either way is right)
    else:
        assert all(0.0 <= note.pitch_semitones <= 127.0 for note in notes)
        assert all(note.duration_quarters >= 0.0 and note.beat >= 1.0 for note in notes)


# Writing -----------------------------------------------------------------------------------------------


def test_a_tuned_scale_reads_in_mido() -> None:
    keys = {67: 391.86, 70: 467.22}
    notes = [KeyNote(key=67, word="xxxxxx"), KeyNote(key=70, word="xxxxxo")]
    content = midi_file(notes, tuning_messages(keys), name="Heron", program=4, bank=2)
    file = mido.MidiFile(file=io.BytesIO(content))
    (track,) = file.tracks
    kinds = [message.type for message in track]
    assert file.type == 0
    assert track.name == "Heron"
    assert kinds.index("sysex") < kinds.index("control_change") < kinds.index("note_on")
    (sysex,) = (message for message in track if message.type == "sysex")
    assert tuned_keys(bytes(sysex.bytes())) == pytest.approx(keys, rel=4e-6)  # 0.0061 cent is 3.5e-6
    assert [m.note for m in track if m.type == "note_on"] == [67, 70]
    assert [m.text for m in track if m.type == "lyrics"] == ["xxxxxx", "xxxxxo"]
    assert file.length == pytest.approx(
        3.0, abs=0.06
    )  # a second of rest, then a second each, but a short gap


def test_the_channel_selects_the_tuning() -> None:
    # MIDI 1.0: registered parameters 00 04 (tuning bank) and 00 03 (tuning program), data entry, then none.
    content = midi_file([KeyNote(key=60, word="")], tuning_messages({60: 262.0}), program=4, bank=2)
    (track,) = mido.MidiFile(file=io.BytesIO(content)).tracks
    changes = [(m.control, m.value) for m in track if m.type == "control_change"]
    released = [(101, 127), (100, 127)]
    assert changes == [(101, 0), (100, 4), (6, 2), *released, (101, 0), (100, 3), (6, 4), *released]


def test_a_written_scale_is_read_back() -> None:
    notes = [KeyNote(key=key, word="x") for key in (60, 62, 64)]
    assert [key for _, _, key in line(midi_file(notes))] == [60.0, 62.0, 64.0]


def test_what_cannot_be_written_is_refused() -> None:
    with pytest.raises(ValueError, match=r"^a key is 0 to 127, not 128$"):
        midi_file([KeyNote(key=128, word="")])
    with pytest.raises(ValueError, match=r"^a system exclusive message runs from F0 to F7$"):
        midi_file([], [b"\x7e"])
