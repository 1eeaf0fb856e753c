"""A flute's tuning as files: keys, bytes and scores, from an invented survey."""

import io
from dataclasses import replace
from math import log2

import mido
import pytest
from musicxml_schema import faults
from surveys import A4_HZ, entry, heron, low_flute, nothing_heard, one_take, reading, strange_words

from fluteprobe.repertoire.keyboard import Address, Key, keys_of, mid_bytes, musicxml_bytes, syx_bytes
from fluteprobe.repertoire.sounds import sounds_of
from fluteprobe.score.midituning import tuned_keys
from fluteprobe.score.musicxml import read_xml
from fluteprobe.score.tune import tune_of
from fluteprobe.survey import Survey

ALL = Address()


def keys(survey: Survey) -> tuple[Key, ...]:
    return keys_of(sounds_of(survey), survey.sitting.a4_hz)


def test_each_key_sounds_a_measured_tone_of_its_own_note() -> None:
    survey = heron()
    back = tuned_keys(syx_bytes(keys(survey), ALL))
    measured = {each.frequency_hz for each in survey.entries} | {
        r.tone.frequency_hz for r in survey.readings if r.tone.frequency_hz
    }
    assert set(back) == {69, 71, *range(72, 80), 81, 82, 84, 85, 86, 87, 88}
    for key, frequency_hz in back.items():
        assert frequency_hz is not None
        nearest = min(measured, key=lambda hz: abs(hz - frequency_hz))
        assert frequency_hz == pytest.approx(nearest, rel=1.8e-6)  # half of 0.0061 cent
        assert abs(1200 * log2(frequency_hz / A4_HZ) - 100 * (key - 69)) <= 50.0


def test_of_several_fingerings_the_surest_and_then_the_nearest_is_taken() -> None:
    survey = replace(
        one_take(),
        entries=(
            entry("xxxxo", 1, 72, 1.0, reliability=0.5),
            entry("xxxoo", 1, 72, 12.0),
            entry("xxoxo", 1, 72, -9.0),
        ),
    )
    (key,) = keys(survey)
    assert str(key.sound.fingering) == "xxoxo"
    assert key.cents == pytest.approx(-9.0)
    assert [str(sound.fingering) for sound in key.others] == ["xxxoo", "xxxxo"]


def test_an_undecided_tone_gives_way_but_is_better_than_none() -> None:
    undecided = reading("oxxxo", kind="tone", frequency_hz=523.25)
    survey = replace(one_take(), readings=(undecided,), entries=(entry("xxxxo", 1, 72, 20.0),))
    assert [str(key.sound.fingering) for key in keys(survey)] == ["xxxxo"]
    assert [str(key.sound.fingering) for key in keys(replace(survey, entries=()))] == ["oxxxo"]


def test_keys_are_named_at_the_session_s_a4_and_frequencies_stay_absolute() -> None:
    survey = one_take()  # E4 at 440
    flat = replace(survey, sitting=replace(survey.sitting, a4_hz=466.16))
    (key,), (other,) = keys(survey), keys(flat)
    assert (key.note.midi, other.note.midi) == (64, 63)
    assert key.sound.frequency_hz == other.sound.frequency_hz


def test_the_midi_file_holds_the_tuning_and_then_the_scale() -> None:
    survey = heron()
    (track,) = mido.MidiFile(file=io.BytesIO(mid_bytes(keys(survey), Address(bank=3), "Heron"))).tracks
    (message,) = (each for each in track if each.type == "sysex")
    assert tuned_keys(bytes(message.bytes())) == tuned_keys(syx_bytes(keys(survey), Address(bank=3)))
    assert bytes(message.bytes())[:6] == bytes.fromhex("F0 7E 7F 08 07 03")
    assert [each.note for each in track if each.type == "note_on"] == [key.note.midi for key in keys(survey)]
    assert [each.text for each in track if each.type == "lyrics"] == [
        str(k.sound.fingering) for k in keys(survey)
    ]


def test_the_score_holds_every_fingering_at_its_true_pitch_register_by_register() -> None:
    survey = heron()
    sounds = sounds_of(survey)
    content = musicxml_bytes(sounds, 440.0, "Heron")
    assert faults(content) == []
    heard = [440.0 * 2 ** ((n.pitch_semitones - 69) / 12) for n in tune_of(read_xml(content)).notes]
    order = sorted(sounds, key=lambda sound: (sound.register or 9, sound.frequency_hz))
    assert heard == pytest.approx([sound.frequency_hz for sound in order], rel=3e-6)
    text = content.decode()
    assert [text.index(f"<words>{name}") for name in ("first", "second", "register undecided")] == sorted(
        text.index(f"<words>{name}") for name in ("first", "second", "register undecided")
    )
    assert "<text>vxxxxx</text>" in text
    assert "<text>−17</text>" in text


def test_strange_names_make_valid_scores() -> None:
    survey = strange_words()
    assert faults(musicxml_bytes(sounds_of(survey), 440.0, survey.flute.name)) == []
    assert mid_bytes(keys(survey), ALL, survey.flute.name)


def test_low_flutes_and_silent_ones() -> None:
    assert min(key.note.midi for key in keys(low_flute())) == 28
    assert keys(nothing_heard()) == ()
    assert syx_bytes((), ALL) == b""
