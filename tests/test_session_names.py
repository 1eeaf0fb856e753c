"""Names of takes as people type them: what is read, what is refused, and the nearest plain name."""

import unicodedata

import pytest
from hypothesis import given
from hypothesis import strategies as st
from sessions import is_harmless

from fluteprobe.flute.fingering import BREATHS, STATES, Fingering
from fluteprobe.session import parse_take_name
from fluteprobe.session.names import (
    TakeName,
    UnfitNameError,
    read_breath,
    read_fingering,
    read_take_name,
    split_ending,
    stems_of,
    words_of,
)

STATE_WORDS = st.text(alphabet=STATES, min_size=6, max_size=6)


def stem(name: str, *, holes: int = 6, known: frozenset[str] = frozenset()) -> str:
    """Return the plain form of a name."""
    return read_take_name(name, holes, known=known).stem


def refusal(name: str, *others: str) -> str:
    with pytest.raises(UnfitNameError) as caught:
        read_take_name(name, 6, stems_of((name, *others)))
    return str(caught.value)


# --- read --------------------------------------------------------------------------------------------


@given(
    st.text(alphabet=STATES, min_size=1, max_size=10),
    st.sampled_from(BREATHS),
    st.integers(1, 9999),
    st.sampled_from([".wav", ".flac", ".mp3", ".3gp", ""]),
)
def test_every_plain_name_is_read(states: str, breath: str, number: int, ending: str) -> None:
    expected = (Fingering(states), breath, number)
    assert parse_take_name(f"{states}-{breath}-{number}{ending}") == expected
    assert parse_take_name(f"{states}{ending}") == (Fingering(states), "normal", 1)
    assert parse_take_name(f"{states}-{breath}{ending}") == (Fingering(states), breath, 1)
    assert parse_take_name(f"{states}-{number}{ending}") == (Fingering(states), "normal", number)


@pytest.mark.parametrize(
    ("name", "means"),
    [
        ("OXXXXX.WAV", "oxxxxx"),
        ("Oxxxxx-Over-002.Wav", "oxxxxx-over-2"),
        ("oxxxxx_over.wav", "oxxxxx-over"),
        ("oxxxxx over 3.wav", "oxxxxx-over-3"),
        ("oxxxxx.over.2.wav", "oxxxxx-over-2"),
        ("oxxxxx__over__3.WAV", "oxxxxx-over-3"),
        ("oxxxxx – over.wav", "oxxxxx-over"),
        ("oxxxxx;over.wav", "oxxxxx-over"),
        ("-oxxxxx-.wav", "oxxxxx"),
        ("oxxxxx..wav", "oxxxxx"),
        ("oxxxxx.wav ", "oxxxxx"),
        ("oxxxxx-2-over.wav", "oxxxxx-over-2"),
        ("over oxxxxx.wav", "oxxxxx-over"),
        ("oxxxxxover2.wav", "oxxxxx-over-2"),
        ("oxxxxx2.wav", "oxxxxx-2"),
        ("oxxxxx#2.wav", "oxxxxx-2"),
        # no ending, or two
        ("oxxxxx", "oxxxxx"),
        ("oxxxxx.over", "oxxxxx-over"),
        ("oxxxxx.2", "oxxxxx-2"),
        ("oxxxxx.wav.wav", "oxxxxx"),
        ("oxxxxx.m4a.wav", "oxxxxx"),
        # what computers add to a copy
        ("oxxxxx (2).wav", "oxxxxx-2"),
        ("oxxxxx(1).wav", "oxxxxx"),
        ("oxxxxx-over-2 (1).wav", "oxxxxx-over-2"),
        ("Copy of oxxxxx.wav", "oxxxxx"),
        ("oxxxxx copy 2.wav", "oxxxxx-2"),
        ("oxxxxx - Copy (3).wav", "oxxxxx-3"),
        ("oxxxxx Kopie 2.wav", "oxxxxx-2"),
        ("Kopie von oxxxxx-soft.wav", "oxxxxx-soft"),
        ("oxxxxx — копия.wav", "oxxxxx"),
        # letters that look alike: Cyrillic, Greek, full-width, signs, zero
        ("ОХХХХХ-over.wav", "oxxxxx-over"),
        ("oхxхxх.wav", "oxxxxx"),
        ("οχχχχχ.wav", "oxxxxx"),
        ("ｏｘｘｘｘｘ－ｏｖｅｒ.wav", "oxxxxx-over"),
        ("×o××××.wav", "xoxxxx"),
        ("○●●●●●.wav", "oxxxxx"),
        ("0xx0x0-over.wav", "oxxoxo-over"),
        ("000000.wav", "oooooo"),
        # hands apart
        ("oxx xxx.wav", "oxxxxx"),
        ("oxx-xxx-over.wav", "oxxxxx-over"),
        ("o x x x x x 2.wav", "oxxxxx-2"),
        # words
        ("oxxxxx overblown.wav", "oxxxxx-over"),
        ("oxxxxx over blown.wav", "oxxxxx-over"),
        ("oxxxxx softly.wav", "oxxxxx-soft"),
        ("oxxxxx (normal breath).wav", "oxxxxx"),
        ("oxxxxx überblasen.wav", "oxxxxx-over"),
        ("oxxxxx take 2.wav", "oxxxxx-2"),
        # a track's number
        ("01 oxxxxx.wav", "oxxxxx"),
        ("07-oxxxxx-over-2.wav", "oxxxxx-over-2"),
    ],
)
def test_a_name_as_people_type_it_means_what_the_plain_one_does(name: str, means: str) -> None:
    assert stem(name) == means
    assert stem(unicodedata.normalize("NFD", name)) == means


def test_the_flute_s_own_name_may_stand_before_the_fingering() -> None:
    assert stem("Grey_Heron_oxxxxx-over.wav", known=words_of("Grey Heron")) == "oxxxxx-over"
    assert refusal("Wren oxxxxx.wav") == (
        'the name has a word that is not known, "wren": rename it to oxxxxx.wav'
    )


@given(STATE_WORDS, st.sampled_from(BREATHS), st.integers(1, 99), st.sampled_from(" _.-–+,"), st.data())
def test_case_separators_and_look_alikes_change_nothing(
    states: str, breath: str, number: int, mark: str, data: st.DataObject
) -> None:
    alike = {"x": "xXхХ×", "o": "oO0оО", "h": "hHһ", "v": "vV"}
    typed = "".join(data.draw(st.sampled_from(alike[letter])) for letter in states)
    name = mark.join([typed, breath.upper(), str(number)]) + ".WAV"
    expected = TakeName(fingering=Fingering(states), breath=breath, number=number)  # type: ignore[arg-type]
    assert read_take_name(name, 6) == expected


@given(STATE_WORDS, st.sampled_from(BREATHS), st.none() | st.integers(2, 9999))
def test_the_plain_form_of_what_was_read_reads_the_same(states: str, breath: str, number: int | None) -> None:
    take = TakeName(fingering=Fingering(states), breath=breath, number=number)  # type: ignore[arg-type]
    assert read_take_name(f"{take.stem}.wav", 6) == take


@pytest.mark.parametrize(
    ("name", "parts"),
    [
        ("oxxxxx.wav", ("oxxxxx", ".wav")),
        ("oxxxxx.over.FLAC", ("oxxxxx.over", ".FLAC")),
        ("oxxxxx.over", ("oxxxxx.over", "")),
        ("oxxxxx.2", ("oxxxxx.2", "")),
        ("take.oxxxxx", ("take.oxxxxx", "")),
        ("New Recording 12.m4a", ("New Recording 12", ".m4a")),
        (".wav", (".wav", "")),
    ],
)
def test_an_ending_is_what_says_nothing_of_the_take(name: str, parts: tuple[str, str]) -> None:
    assert split_ending(name) == parts


# --- refused -----------------------------------------------------------------------------------------

EXAMPLES = "rename it to its fingering, as oxxxxx.wav or oxxxxx-over-2.wav, or list it in takes.csv"


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("hello.wav", f"the name is no fingering: {EXAMPLES}"),
        ("New Recording 12.m4a", f"the name is no fingering: {EXAMPLES}"),
        ("over.wav", f"the name is no fingering: {EXAMPLES}"),
        ("", f"the name is no fingering: {EXAMPLES}"),
        ("oxxcxx.wav", "the name is no fingering: rename it to oxxxxx.wav"),
        ("occccc-over.wav", "the name is no fingering: rename it to oxxxxx-over.wav"),
        ("pxxxxx.wav", "the name is no fingering: rename it to oxxxxx.wav"),
        (
            "xxxxx.wav",
            "the name has 5 holes where the flute has 6: rename it, or correct holes in flute.toml",
        ),
        ("x.wav", "the name has 1 hole where the flute has 6: rename it, or correct holes in flute.toml"),
        (
            "xxxxxxxxxxxx-over.wav",
            "the name has 12 holes where the flute has 6: rename it, or correct holes in flute.toml",
        ),
        ("oxxxxx xxxxxx.wav", f"the name has two fingerings, oxxxxx and xxxxxx: {EXAMPLES}"),
        (
            "oxxxxx-ovr-2.wav",
            'the name has a word that is not known, "ovr": rename it to oxxxxx-over-2.wav',
        ),
        ("oxxxxx loud.wav", 'the name has a word that is not known, "loud": rename it to oxxxxx-over.wav'),
        ("oxxxxx C#5.wav", 'the name has a word that is not known, "c": rename it to oxxxxx.wav'),
        ("oxxxxx soft over.wav", "the name says both soft and over: rename it to oxxxxx-soft.wav"),
        (
            "oxxxxx 2026-01-31.wav",
            "the name has several numbers, 2026 and 1: rename it to oxxxxx.wav",
        ),
        ("oxxxxx-0.wav", "takes are numbered from 1 to 9999: rename it to oxxxxx.wav"),
        ("oxxxxx-12345.wav", "takes are numbered from 1 to 9999: rename it to oxxxxx.wav"),
        ("oxxxxx\u202e.wav", "the name has signs that cannot be typed: rename it to oxxxxx.wav"),
        ("oxx\x1bxxx.wav", "the name has signs that cannot be typed: rename it to oxxxxx.wav"),
    ],
)
def test_a_name_that_is_not_understood_is_refused_with_the_nearest(name: str, message: str) -> None:
    assert refusal(name) == message


def test_the_proposed_name_is_one_that_is_free() -> None:
    assert refusal("oxxxxx ovr.wav", "oxxxxx-over.wav", "OXXXXX-over-2.flac") == (
        'the name has a word that is not known, "ovr": rename it to oxxxxx-over-3.wav'
    )


def test_without_a_flute_a_name_has_one_to_ten_holes() -> None:
    assert str(parse_take_name("xo-over.wav")[0]) == "xo"
    with pytest.raises(UnfitNameError, match=r"^the name is no fingering: rename it to its fingering, as "):
        parse_take_name("xxxxxxxxxxx.wav")


@given(st.text(max_size=40), st.none() | st.integers(1, 10))
def test_no_name_whatever_breaks_the_reader(name: str, holes: int | None) -> None:
    told, read = "", holes
    try:
        read = read_take_name(name, holes, stems_of((name,))).fingering.holes
    except UnfitNameError as error:
        told = str(error)
    assert is_harmless(told)
    assert len(told) < 300
    assert holes in {None, read}


# --- cells of a table --------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "text", ["oxxxxx", "OXXXXX", " oxx xxx ", "o-x-x-x-x-x", "оххххх", "0xxxxx", "o|xx|xxx"]
)
def test_a_fingering_in_a_table_may_be_typed_in_many_ways(text: str) -> None:
    assert read_fingering(text, 6) == Fingering("oxxxxx")


@pytest.mark.parametrize(
    ("text", "holes", "message"),
    [
        ("oxxx", 6, "6 letters of x, o, h, v, top hole first, as oxxxxx"),
        ("", 6, "6 letters of x, o, h, v, top hole first, as oxxxxx"),
        ("0", 6, "6 letters of x, o, h, v, top hole first, as oxxxxx"),
        ("occccc", 6, "6 letters of x, o, h, v, top hole first, as oxxxxx; did you mean oxxxxx?"),
        ("oo", 1, "one of x, o, h, v, top hole first, as o"),
    ],
)
def test_what_is_no_fingering_in_a_table_is_told(text: str, holes: int, message: str) -> None:
    with pytest.raises(UnfitNameError) as caught:
        read_fingering(text, holes)
    assert str(caught.value) == message


@pytest.mark.parametrize(
    ("text", "breath"),
    [
        ("", "normal"),
        ("Over", "over"),
        ("over blown", "over"),
        ("overblown ", "over"),
        ("SOFT", "soft"),
        ("normal", "normal"),
    ],
)
def test_a_breath_in_a_table_may_be_typed_in_many_ways(text: str, breath: str) -> None:
    assert read_breath(text) == breath


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("ovr", "soft, normal, over or nothing; did you mean over?"),
        ("loud", "soft, normal, over or nothing; did you mean over?"),
        ("soft over", "soft, normal, over or nothing; did you mean soft?"),
        ("?!x", "soft, normal, over or nothing"),
    ],
)
def test_what_is_no_breath_in_a_table_is_told(text: str, message: str) -> None:
    with pytest.raises(UnfitNameError) as caught:
        read_breath(text)
    assert str(caught.value) == message
