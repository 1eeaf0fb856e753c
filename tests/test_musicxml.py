"""MusicXML in: scores written here by the published format, and files from anybody.

The format is MusicXML 4.0 (W3C Community Group report, 2021); the scores of these tests are checked against
its XML Schema where they claim to be whole.
"""

import io
import tracemalloc
import zipfile
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from musicxml_schema import faults

from fluteprobe.score.musicxml import read_compressed, read_xml
from fluteprobe.score.reading import read_tune, score_in
from fluteprobe.score.tune import ScoreError, Tune, tune_of

REEDS = Path(__file__).parent.parent / "samples" / "tunes" / "reeds.musicxml"
HEAD = "<?xml version='1.0' encoding='UTF-8'?>\n"
PART_LIST = "<part-list><score-part id='P1'><part-name>Flute</part-name></score-part></part-list>"


def note(name: str, duration: int = 1, more: str = "", before: str = "") -> str:
    """Return a note element: `F#4`, `Bb3`, or `D4` with an alter of its own."""
    alter = {"#": "<alter>1</alter>", "b": "<alter>-1</alter>"}.get(name[1:2], "")
    pitch = f"<pitch><step>{name[0]}</step>{alter}<octave>{name[-1]}</octave></pitch>"
    return f"<note>{before}{pitch}<duration>{duration}</duration>{more}</note>"


def partwise(*bars: str, part_list: str = PART_LIST) -> bytes:
    written = "".join(f"<measure number='{k}'>{bar}</measure>" for k, bar in enumerate(bars, start=1))
    return (
        f"{HEAD}<score-partwise version='4.0'>{part_list}<part id='P1'>{written}</part></score-partwise>"
    ).encode()


def read(*bars: str) -> Tune:
    content = partwise(*bars)
    assert faults(content) == []
    return tune_of(score_in(content))


def brief(tune: Tune) -> list[tuple[float, float, float]]:
    return [(n.start_quarters, n.duration_quarters, n.pitch_semitones) for n in tune.notes]


def archive(files: dict[str, bytes], method: int = zipfile.ZIP_DEFLATED) -> bytes:
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", method) as written:
        for name, content in files.items():
            written.writestr(name, content)
    return buffer.getvalue()


# What a score says ---------------------------------------------------------------------------------------


def test_the_demo_tune() -> None:
    assert faults(REEDS.read_bytes()) == []
    tune = read_tune(REEDS)
    assert (tune.title, tune.part, tune.cautions) == ("By the reeds", "Flute", ())
    assert len(tune.notes) == 18
    assert sum(each.duration_quarters for each in tune.notes) == 24.0  # eight bars of three quarters
    sharp = tune.notes[14]
    assert (sharp.pitch_semitones, sharp.bar, sharp.beat) == (78.0, "7", 1.0)


def test_pitches_are_midi_note_numbers() -> None:  # MIDI 1.0: middle C is 60; MusicXML: its octave is 4
    tune = read(note("C4") + note("A4") + note("Bb3") + note("F#5"))
    assert [pitch for _, _, pitch in brief(tune)] == [60.0, 69.0, 58.0, 78.0]


def test_alter_carries_decimals() -> None:
    quarter_tone = note("D4").replace("<octave>", "<alter>-0.25</alter><octave>")
    assert brief(read(quarter_tone))[0][2] == 61.75


def test_divisions_and_beats_and_bars() -> None:
    time = "<time><beats>6</beats><beat-type>8</beat-type></time>"
    attributes = f"<attributes><divisions>4</divisions>{time}</attributes>"
    tune = read(attributes + note("C4", 6) + note("D4", 6), note("E4", 2) + note("F4", 4) + note("G4", 6))
    assert brief(tune)[:3] == [(0.0, 1.5, 60.0), (1.5, 1.5, 62.0), (3.0, 0.5, 64.0)]
    assert [(n.bar, n.beat) for n in tune.notes] == [("1", 1), ("1", 4), ("2", 1), ("2", 2), ("2", 4)]


def test_tied_notes_are_one() -> None:
    tune = read(note("C4", 1) + note("D4", 3, "<tie type='start'/>"), note("D4", 2, "<tie type='stop'/>"))
    assert brief(tune) == [(0.0, 1.0, 60.0), (1.0, 5.0, 62.0)]


def test_rests_grace_and_cue_notes_and_drums() -> None:
    rest = "<note><rest/><duration>1</duration></note>"
    grace = "<note><grace/><pitch><step>D</step><octave>5</octave></pitch></note>"
    cue = "<note><cue/><pitch><step>C</step><octave>5</octave></pitch><duration>1</duration></note>"
    drum = (
        "<note><unpitched><display-step>E</display-step><display-octave>4</display-octave></unpitched>"
        "<duration>1</duration></note>"
    )
    assert brief(read(rest + cue + drum + grace + note("C5"))) == [(3.0, 0.0, 74.0), (3.0, 1.0, 72.0)]


def test_a_transposing_part_is_read_as_it_sounds() -> None:  # MusicXML: written plus chromatic plus octaves
    transpose = (
        "<attributes><divisions>1</divisions><transpose><diatonic>-1</diatonic><chromatic>-2</chromatic>"
        "<octave-change>1</octave-change></transpose></attributes>"
    )
    assert brief(read(transpose + note("C4")))[0][2] == 70.0


def test_chords_and_voices_give_the_top_line() -> None:
    chord = note("C4", 4) + note("E4", 4, before="<chord/>") + note("G4", 4, before="<chord/>")
    low_voice = "<backup><duration>4</duration></backup>" + note("C3", 2) + note("D3", 2)
    tune = read(chord + low_voice, note("F4", 4))
    assert brief(tune) == [(0.0, 4.0, 67.0), (4.0, 4.0, 65.0)]
    assert tune.cautions == ("several notes sound at once: the top line is taken, 4 of 6 left out",)


def test_a_timewise_score_reads_the_same() -> None:
    bars = [note("C4") + note("D4", 2), note("E4", 3)]
    written = "".join(
        f"<measure number='{k}'><part id='P1'>{bar}</part></measure>" for k, bar in enumerate(bars, 1)
    )
    content = f"{HEAD}<score-timewise version='4.0'>{PART_LIST}{written}</score-timewise>".encode()
    assert faults(content) == []
    assert tune_of(read_xml(content)) == read(*bars)


def test_parts_by_number_and_name() -> None:
    part_list = PART_LIST.replace(
        "</part-list>", "<score-part id='P2'><part-name>Bass</part-name></score-part></part-list>"
    )
    content = partwise(note("C5"), part_list=part_list).replace(
        b"</score-partwise>",
        f"<part id='P2'><measure number='1'>{note('C3')}</measure></part></score-partwise>".encode(),
    )
    assert tune_of(read_xml(content)).cautions == ("it has 2 parts, the first is taken; the others: 2 Bass",)
    assert brief(tune_of(read_xml(content), "Bass")) == brief(tune_of(read_xml(content), "2")) == [(0, 1, 48)]


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16"])
def test_encodings(encoding: str) -> None:
    text = partwise(note("C4")).decode().replace("UTF-8", encoding.removesuffix("-sig").upper())
    assert brief(tune_of(score_in(text.encode(encoding)))) == [(0.0, 1.0, 60.0)]


def test_a_doctype_is_no_reason_to_open_anything() -> None:
    doctype = (
        "<!DOCTYPE score-partwise PUBLIC '-//Recordare//DTD MusicXML 4.0 Partwise//EN' 'file:///nowhere.dtd'>"
    )
    content = partwise(note("C4")).replace(b"?>\n", f"?>\n{doctype}".encode())
    assert brief(tune_of(read_xml(content))) == [(0.0, 1.0, 60.0)]


# Compressed ----------------------------------------------------------------------------------------------

CONTAINER = b"<container><rootfiles><rootfile full-path='tune.xml'/></rootfiles></container>"


@pytest.mark.parametrize("method", [zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED])
def test_a_compressed_score(method: int) -> None:
    files = {"META-INF/container.xml": CONTAINER, "other.xml": b"<x/>", "tune.xml": partwise(note("A4"))}
    assert brief(tune_of(score_in(archive(files, method)))) == [(0.0, 1.0, 69.0)]
    del files["META-INF/container.xml"], files["other.xml"]
    assert brief(tune_of(score_in(archive(files, method)))) == [(0.0, 1.0, 69.0)]


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (archive({"a.png": b"x"}), "its archive holds no score: export the score again"),
        (archive({"a.xml": b"x"})[:-30], "it is a damaged or encrypted archive: export the score again"),
        (
            archive({"tune.xml": partwise(note("A4"))}, zipfile.ZIP_LZMA),
            "it is packed in a way that MusicXML does not use: export the score again",
        ),
        (archive({"tune.xml": bytes(16_000_001)}), "it unpacks to more than 16 MB: export one part alone"),
        (b"PK" + bytes(8_000_000), "it is larger than 8 MB: export one part alone"),
    ],
)  # fmt: skip
def test_an_archive_that_cannot_be_used_is_told(content: bytes, told: str) -> None:
    with pytest.raises(ScoreError) as caught:
        read_compressed(content)
    assert str(caught.value) == told


# What is wrong with a score --------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (b"<html></html>", "its root is <html>, expected <score-partwise>: it is no MusicXML score"),
        (b"<score-partwise>", "it is no whole XML, line 1: no element found: export the score again"),
        (
            b"<?xml version='1.0' encoding='klingon'?><score-partwise/>",
            "its encoding is not known: export the score as UTF-8",
        ),
        (partwise(""), "it holds no pitched notes: give a score or a MIDI file with a melody"),
        (partwise(note("H4")), "bar 1: a note's step is 'H', expected A to G"),
        (partwise("", note("C4").replace(">1<", ">long<")), "bar 2: duration is 'long', expected a number"),
        (partwise(note("C4").replace(">4<", ">1e9<")), "bar 1: octave is '1e9', expected a number"),
        (partwise(note("C4").replace(">1<", ">nan<")), "bar 1: duration is 'nan', expected a number"),
        (
            partwise("<attributes><divisions>0</divisions></attributes>"),
            "bar 1: divisions is '0', expected a number",
        ),
        (
            b"<!DOCTYPE s [<!ENTITY a 'ha'><!ENTITY b '&a;&a;'>]><score-partwise>&b;</score-partwise>",
            "it declares entities, which a score does not need: export the score again",
        ),
        (b"<score-partwise>" + b"<a>" * 70, "its elements are nested too deeply for a score"),
        (partwise("<a/>" * 200_100), "a bar has more than 200000 elements: it is no score for a flute"),
        (
            b"<score-partwise>" + b"".join(b"<part id='%d'><measure/></part>" % k for k in range(1001)),
            "it has more than 1000 parts: export one part alone",
        ),
        (b"<" + bytes(16_000_000), "it is larger than 16 MB: export one part alone"),
        (b"RIFF", "it is neither MusicXML nor a MIDI file: export the tune as one of the two"),
    ],
)  # fmt: skip
def test_what_is_wrong_is_one_line(content: bytes, told: str) -> None:
    with pytest.raises(ScoreError) as caught:
        tune_of(score_in(content))
    assert str(caught.value) == told


def test_memory_stays_small_however_long_the_score() -> None:
    content = partwise(*["<direction/>" * 50] * 1000)  # 0.6 MB of bars that hold no note
    tracemalloc.start()
    try:
        read_xml(content)
        _, peak = tracemalloc.get_traced_memory()
    finally:
        tracemalloc.stop()
    assert peak < 400_000  # a bar and a piece of the file at a time; the whole tree takes 5.5 MB


SEEDS = (REEDS.read_bytes(), archive({"tune.xml": REEDS.read_bytes()}))


@settings(max_examples=150)
@given(
    st.sampled_from(SEEDS),
    st.lists(
        st.tuples(st.floats(0.0, 1.0), st.integers(0, 30), st.binary(max_size=6)), min_size=1, max_size=5
    ),
)
def test_a_damaged_score_is_read_or_told_in_one_line(
    seed: bytes, cuts: list[tuple[float, int, bytes]]
) -> None:
    content = bytearray(seed)
    for place, length, put in cuts:
        start = int(place * len(content))
        content[start : start + length] = put
    try:
        tune_of(score_in(bytes(content)))
    except ScoreError as error:
        told = str(error)
    else:
        told = "read"
    assert told
    assert "\n" not in told
