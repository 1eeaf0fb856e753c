"""flute.toml: every fault told at once, with its line, what was found and what is expected."""

import re
from pathlib import Path

import pytest
from sessions import fault, faults

from fluteprobe.session import FluteFacts, Sitting, create_session, read_session
from fluteprobe.session.keys import UnfitError, typed

PLAIN = "[flute]\nholes = 6\n"


@pytest.fixture
def heron(tmp_path: Path) -> Path:
    """Return a session folder without takes."""
    folder = tmp_path / "heron"
    create_session(folder, FluteFacts(name="Heron", holes=6))
    return folder


# --- read --------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "content",
    [
        PLAIN.encode("utf-8-sig"),
        PLAIN.replace("\n", "\r\n").encode(),
        PLAIN.replace("\n", "\r").encode(),
        PLAIN.encode("utf-16"),
        PLAIN.encode("utf-16-le"),
        PLAIN.encode("utf-16-be"),
        PLAIN.replace(" = ", "\t=\t").encode(),
    ],
)
def test_a_file_as_some_editor_saves_it_is_read(heron: Path, content: bytes) -> None:
    (heron / "flute.toml").write_bytes(content)
    assert read_session(heron).flute.holes == 6


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "cp1252"])
def test_letters_with_marks_are_read_in_every_usual_encoding(heron: Path, encoding: str) -> None:
    (heron / "flute.toml").write_bytes((PLAIN + 'name = "Möwe, größer"\n').encode(encoding))
    assert read_session(heron).flute.name == "Möwe, größer"


# --- faults in flute.toml ----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("", "flute.toml is empty: write at least [flute] and, under it, holes = 6"),
        (" \n\n", "flute.toml is empty: write at least [flute] and, under it, holes = 6"),
        ("# just a note\n", "flute.toml: key holes: missing in [flute], expected holes = 1 to 10"),
        (
            "[flute]\nname = 'A'\n",
            "flute.toml line 1: key holes: missing in [flute], expected holes = 1 to 10",
        ),
        (
            "[flute]\nholes = '6'\n",
            'flute.toml line 2: key holes: found "6", expected a whole number from 1 to 10, '
            "without quotes: 6",
        ),
        (
            "[flute]\nholes = 11\n",
            "flute.toml line 2: key holes: found 11, expected a whole number from 1 to 10",
        ),
        (
            "[flute]\nholes = 0\n",
            "flute.toml line 2: key holes: found 0, expected a whole number from 1 to 10",
        ),
        (
            "[flute]\nholes = 6.0\n",
            "flute.toml line 2: key holes: found 6.0, expected a whole number from 1 to 10",
        ),
        (
            "[flute]\nholes = true\n",
            "flute.toml line 2: key holes: found true, expected a whole number from 1 to 10",
        ),
        (PLAIN + "nmae = 'A'\n", "flute.toml line 3: key nmae: not known in [flute]; did you mean name?"),
        (
            PLAIN + "name = 5\n",
            'flute.toml line 3: key name: found 5, expected text in "quotes", on one line',
        ),
        (
            PLAIN + 'wood = "a\\nb"\n',
            'flute.toml line 3: key wood: found "a\\nb", expected text in "quotes", on one line',
        ),
        (
            PLAIN + "colour = 1\n",
            "flute.toml line 3: key colour: not known in [flute]; "
            "known are name, holes, maker, serial, key, wood, bore_mm, bore_profile_mm, wall_mm, holes_mm, "
            "length_mm, tolerance_mm",
        ),
        (
            PLAIN + "a4_hz = 440\n",
            "flute.toml line 3: key a4_hz: not known in [flute]; it belongs under [session]",
        ),
        (
            PLAIN + "holes_mm = [[100, 9], [120, 9]]\n",
            "flute.toml line 3: key holes_mm: found 2 pairs, expected 6, one for each hole",
        ),
        (
            "[flute]\nholes = 2\nholes_mm = [[120, 9], [100, 9]]\n",
            "flute.toml line 3: key holes_mm: found [[120, 9], [100, 9]], expected [[distance from the sound "
            "hole, diameter], …] in mm, top hole first, each farther than the one before",
        ),
        (
            "[flute]\nholes = 1\nholes_mm = [120, 9]\n",
            "flute.toml line 3: key holes_mm: found [120, 9], expected [[distance from the sound hole, "
            "diameter], …] in mm, top hole first",
        ),
        (
            "[flute]\nholes = 1\nholes_mm = [[120, 9]]\nlength_mm = 120\n",
            "flute.toml line 4: key length_mm: found 120, expected more than 120, where the lowest hole is: "
            "from the sound hole to the foot",
        ),
        (
            PLAIN + "length_mm = 38.5e9\n",
            "flute.toml line 3: key length_mm: found 38500000000.0, expected a number from 20 to 4000 (mm)",
        ),
        (
            PLAIN + "tolerance_mm = 0\n",
            "flute.toml line 3: key tolerance_mm: found 0, expected a number from 0.01 to 20 (mm)",
        ),
        (
            PLAIN + f"name = '{'a' * 201}'\n",
            f'flute.toml line 3: key name: found "{"a" * 58}…, expected at most 200 letters',
        ),
        (
            PLAIN + "[session]\na4_hz = 44.0\n",
            "flute.toml line 4: key a4_hz: found 44.0, expected a number from 380 to 500 (Hz)",
        ),
        (
            PLAIN + "[session]\nair_temperature_c = 72\n",
            "flute.toml line 4: key air_temperature_c: found 72, expected a number from -20 to 50 (°C); "
            "72 °F would be 22.2",
        ),
        (
            PLAIN + "[session]\nair_temperature_c = nan\n",
            "flute.toml line 4: key air_temperature_c: found NaN, expected a number from -20 to 50 (°C)",
        ),
        (
            PLAIN + "[sesion]\na4_hz = 440\n",
            "flute.toml line 3: table [sesion]: not known; did you mean [session]?",
        ),
        (PLAIN + "[room]\n", "flute.toml line 3: table [room]: not known; known are [flute] and [session]"),
        (
            "a4_hz = 440\n" + PLAIN,
            "flute.toml line 1: key a4_hz: stands outside a table; put it under [session]",
        ),
        (PLAIN + "[[session]]\n", "flute.toml line 3: key session: found [{}], expected a line [session]"),
    ],
)
def test_a_fault_is_told_with_its_line_what_was_found_and_what_is_expected(
    heron: Path, text: str, expected: str
) -> None:
    assert fault(heron, text) == expected


BORE = "[[distance from the sound hole, bore there], …] in mm, from the sound hole to the foot"


@pytest.mark.parametrize(
    ("lines", "told"),
    [
        (
            "bore_profile_mm = [0, 19, 385, 16]",
            f"line 3: key bore_profile_mm: found [0, 19, 385, 16], expected {BORE}: put each place's two "
            "numbers into [ ] of their own",
        ),
        (
            "bore_profile_mm = [[0, 19], [385, 16.5, 3]]",
            f"line 3: key bore_profile_mm: found [[0, 19], [385, 16.5, 3]], expected {BORE}; numbers have a "
            "point, not a comma: 9.5",
        ),
        ("bore_profile_mm = 19", f"line 3: key bore_profile_mm: found 19, expected {BORE}"),
        (
            "bore_profile_mm = [[-5, 19], [385, 16]]",
            f"line 3: key bore_profile_mm: found [[-5, 19], [385, 16]], expected {BORE}",
        ),
        (
            "bore_profile_mm = [[0, 1.9], [385, 1.6]]",
            f"line 3: key bore_profile_mm: found [[0, 1.9], [385, 1.6]], expected {BORE}",
        ),
        (
            "bore_profile_mm = [[0, 19]]",
            f"line 3: key bore_profile_mm: found [[0, 19]], expected {BORE}, 2 to 60 of them; an even bore "
            "is bore_mm",
        ),
        (
            "bore_profile_mm = [[0, 19], [385, 16], [200, 18]]",
            f"line 3: key bore_profile_mm: found [[0, 19], [385, 16], [200, 18]], expected {BORE}, none "
            "nearer than the one before; at a step one distance twice",
        ),
        (
            "bore_profile_mm = [[0, 19], [9, 18], [9, 17], [9, 16]]",
            f"line 3: key bore_profile_mm: found [[0, 19], [9, 18], [9, 17], [9, 16]], expected {BORE}, none "
            "nearer than the one before; at a step one distance twice",
        ),
        (
            "bore_profile_mm = [[0, 19], [400, 16]]\nlength_mm = 385",
            "line 3: key bore_profile_mm: found a distance of 400, expected at most 385, where the foot is "
            "(length_mm)",
        ),
        (
            "bore_profile_mm = [[0, 19], [385, 16]]\nbore_mm = 21",
            "line 4: key bore_mm: found 21, expected 16 to 19, as bore_profile_mm has it; with that key "
            "bore_mm may be left out",
        ),
        (
            "bore_profile_mm = [[0, 19] [385, 16]]",
            "line 3: key bore_profile_mm: found [[0, 19] [385, 16]], expected numbers in brackets with "
            "commas between: [[105.0, 9.0], [127.0, 9.5]]",
        ),
        ("taper = 1", "line 3: key taper: not known in [flute]; did you mean bore_profile_mm?"),
        (
            "bore profile = [[0, 19], [385, 16]]",
            "line 3: found bore profile = [[0, 19], [385, 16]], expected bore_profile_mm before =",
        ),
    ],
)
def test_what_is_wrong_with_a_bore_s_profile_is_told(heron: Path, lines: str, told: str) -> None:
    assert fault(heron, f"{PLAIN}{lines}\n") == f"flute.toml {told}"


@pytest.mark.parametrize("bore", ["", "bore_mm = 18.2\n"])
def test_a_bore_s_profile_may_taper_and_step_and_tells_the_bore_at_the_sound_hole(
    heron: Path, bore: str
) -> None:
    text = f"{PLAIN}{bore}bore_profile_mm = [[0, 19], [200, 18], [200, 17.5], [385, 16]]\nlength_mm = 385\n"
    (heron / "flute.toml").write_text(text)
    flute = read_session(heron).flute
    assert flute.bore_profile_mm == ((0.0, 19.0), (200.0, 18.0), (200.0, 17.5), (385.0, 16.0))
    assert flute.bore_at_head_mm == 19.0


def test_without_a_profile_the_bore_is_the_same_at_the_sound_hole() -> None:
    assert FluteFacts(name="A", holes=6, bore_mm=19.5).bore_at_head_mm == 19.5
    assert FluteFacts(name="A", holes=6).bore_at_head_mm is None


# --- what is no TOML ---------------------------------------------------------------------------------

PAIRS = "[[105.0, 9.0], [127.0, 9.5]]"
TWO = "[flute]\nholes = 2\n"


@pytest.mark.parametrize(
    ("line", "told"),
    [
        # numbers
        ("a4_hz = 440,0", "key a4_hz: found 440,0, expected a point in numbers: 440.0"),
        ("air_temperature_c = 22 C", "key air_temperature_c: found 22 C, expected the number alone: 22"),
        (
            "air_temperature_c = 22,5 °C",
            "key air_temperature_c: found 22,5 °C, expected a point in numbers: 22.5",
        ),
        ("air_temperature_c = ca. 22", "key air_temperature_c: found ca. 22, expected the number alone: 22"),
        (
            'air_temperature_c = "22 C"',
            'key air_temperature_c: found "22 C", expected a number from -20 to 50 (°C), without quotes: 22',
        ),
        ("a4_hz = 442Hz", "key a4_hz: found 442Hz, expected the number alone: 442"),
        ("a4_hz = 440.", "key a4_hz: found 440., expected the number alone: 440"),
        ("a4_hz = 0440", "key a4_hz: found 0440, expected the number alone: 440"),
        ("a4_hz = 440;", "key a4_hz: found 440;, expected the number alone: 440"),
        ("a4_hz = high", "key a4_hz: found high, expected a number, such as 440.0"),
        ("a4_hz = 440±1", "key a4_hz: found 440±1, expected a number, such as 440.0"),
        # text
        ("player = Ada", 'key player: found Ada, expected quotes around text: "Ada"'),
        ("player = Ada # here", 'key player: found Ada # here, expected quotes around text: "Ada"'),
        ("date = 31.01.2026", 'key date: found 31.01.2026, expected quotes around text: "31.01.2026"'),
        ("player = “Ada”", 'key player: found “Ada”, expected straight quotes: "Ada"'),
        ("player = ‘Ada’", 'key player: found ‘Ada’, expected straight quotes: "Ada"'),
        ('player = "Ada', 'key player: found "Ada, expected quotes on both sides: "Ada"'),
        ('player = Ada"', 'key player: found Ada", expected quotes on both sides: "Ada"'),
        ("player = \"Ada'", 'key player: found "Ada\', expected quotes on both sides: "Ada"'),
        ('player = """Ada', 'key player: found """Ada, expected quotes on both sides: "Ada"'),
        ('player = "Ada";', 'key player: found "Ada";, expected nothing after the value: "Ada"'),
        (
            'player = "the "big" one"',
            'key player: found "the "big" one", expected quotes around the text alone: "the \'big\' one"',
        ),
        (
            "player = 'O'Hara'",
            "key player: found 'O'Hara', expected quotes around the text alone: \"O'Hara\"",
        ),
        ('place = "C:\\Users"', 'key place: found "C:\\Users", expected no \\ in text: "C:/Users"'),
        ("place =", "key place: found nothing, expected a value after =, or # before the line"),
        ("place = None", "key place: found None, expected a value after =, or # before the line"),
        # signs
        ("a4_hz == 440", "key a4_hz: found = 440, expected = once"),
        ("a4_hz: 440", "found a4_hz: 440, expected = instead of :"),
        ("a4_hz 440", "found a4_hz 440, expected a4_hz = and its value"),
        ("air temperature = 22", "found air temperature = 22, expected air_temperature_c before ="),
        ("§ = 5", "found § = 5, expected one word before =, such as name or holes"),
        (
            "player = 'Ada' place = 'here'",
            "key player: found 'Ada' place = 'here', expected one key in a line",
        ),
        ("a4_hz = 440, player = 'Ada'", "key a4_hz: found 440, player = 'Ada', expected one key in a line"),
        ("// the concert", "found // the concert, expected # before a remark"),
        ("; the concert", "found ; the concert, expected # before a remark"),
        (
            "a note of mine",
            'found a note of mine, expected key = "text" or key = number; or # before a remark',
        ),
        (
            "a4_hz\u00a0= 440",
            "found a4_hz\u00a0= 440, expected plain spaces: another kind of space stands there",
        ),
        ("a4_hz ＝ ４４０", "found a4_hz ＝ ４４０, expected plain letters and signs: a4_hz = 440"),
        ('place = "\x1b[31m"', 'found place = "\\x1b[31m", expected it without \\x1b'),
    ],
)
def test_what_is_no_toml_is_told_in_plain_words(heron: Path, line: str, told: str) -> None:
    assert fault(heron, f"{PLAIN}[session]\n{line}\n# end\n") == f"flute.toml line 4: {told}"


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("[flute\nholes = 6\n", "line 1: found [flute, expected [flute] on a line of its own"),
        ("flute]\nholes = 6\n", "line 1: found flute], expected [flute] on a line of its own"),
        ("(flute)\nholes = 6\n", "line 1: found (flute), expected [flute] on a line of its own"),
        ("flute:\nholes = 6\n", "line 1: found flute:, expected [flute] on a line of its own"),
        ("[flute] holes = 6\n", "line 1: found [flute] holes = 6, expected [flute] on a line of its own"),
        ("［flute］\nholes = 6\n", "line 1: found ［flute］, expected plain letters and signs: [flute]"),
        ("[Flute]\nHoles = 6\n", "line 1: table [Flute]: not known; did you mean [flute]?"),
        ("holes = 6\n", "line 1: key holes: stands outside a table; put it under [flute]"),
        (
            "temp = 6\n" + PLAIN,
            "line 1: key temp: stands outside a table; did you mean air_temperature_c, under [session]?",
        ),
        (
            PLAIN + "holes = 5\n",
            "line 3: found holes = 5, expected each key and each [table] once; it stands on line 2 already",
        ),
        (
            TWO + "holes_mm = [[105, 9], [127, 9.5]\nlength_mm = 385\n",
            "line 3: key holes_mm: found [[105, 9], [127, 9.5], expected "
            f"as many ] as [, and commas between: {PAIRS}",
        ),
        (
            TWO + "holes_mm = [\n  [105, 9],\n  [127, 9.5]\nlength_mm = 385\n",
            "line 3: key holes_mm: found [ [105, 9], [127, 9.5], expected "
            f"as many ] as [, and commas between: {PAIRS}",
        ),
        (
            TWO + "holes_mm = [[105, 9], [127, 9.5]]]\n",
            "line 3: key holes_mm: found [[105, 9], [127, 9.5]]], expected "
            f"as many [ as ], and commas between: {PAIRS}",
        ),
        (
            TWO + "holes_mm = [[105, 9] [127, 9.5]]\n",
            "line 3: key holes_mm: found [[105, 9] [127, 9.5]], expected numbers in brackets with commas "
            f"between: {PAIRS}",
        ),
        (
            TWO + "holes_mm = [[105 mm, 9 mm], [127 mm, 9.5 mm]]\n",
            "line 3: key holes_mm: found [[105 mm, 9 mm], [127 mm, 9.5 mm]], expected numbers in brackets "
            f"with commas between: {PAIRS}",
        ),
    ],
)
def test_tables_and_brackets_that_are_wrong_are_told(heron: Path, text: str, told: str) -> None:
    assert fault(heron, text) == f"flute.toml {told}"


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (b"{\\rtf1\\ansi [flute]}", "is a word processor's file (RTF): save it as plain text (UTF-8)"),
        (
            b"PK\x03\x04word",
            "is a word processor's or spreadsheet's file: save it as plain text (UTF-8)",
        ),
        (b"<html><body>", "is a web page: save it as plain text (UTF-8)"),
        (b"\x00" * 10, "is no text: save it as plain text (UTF-8)"),
        (
            b"[flute]\nname = '\x81\x8d'",
            "has letters in a spelling that is not known: save it as plain text (UTF-8)",
        ),
        (
            b"\xff\xfe[\x00f",
            "has letters in a spelling that is not known: save it as plain text (UTF-8)",
        ),
        (b"#" * 2_000_000, "is far too long: is it another file?"),
        ((PLAIN + "# note\n" * 1000).encode(), "has over 1000 lines: is it another file?"),
        (
            (PLAIN + "x = " + ("[" * 1000 + "\n") * 3).encode(),
            "is nested too deeply: is it another file?",
        ),
        (
            (PLAIN + "a4_hz = " + "9" * 3000).encode(),
            f"line 3: found a4_hz = {'9' * 51}…, expected less than 2000 letters in a line",
        ),
    ],
)
def test_a_file_of_another_kind_is_one_short_line(heron: Path, content: bytes, told: str) -> None:
    assert fault(heron, content) == f"flute.toml {told}"


def test_an_unknown_key_is_told_with_the_nearest_of_either_table(heron: Path) -> None:
    text = PLAIN + "temperature = 22\nmaterial = 'oak'\nbore-mm = 19\n[session]\na4 = 440\nwood = 'oak'\n"
    assert faults(heron, text) == [
        "flute.toml line 3: key temperature: not known in [flute]; "
        "did you mean air_temperature_c, under [session]?",
        "flute.toml line 4: key material: not known in [flute]; did you mean wood?",
        "flute.toml line 5: key bore-mm: not known in [flute]; did you mean bore_mm?",
        "flute.toml line 7: key a4: not known in [session]; did you mean a4_hz?",
        "flute.toml line 8: key wood: not known in [session]; it belongs under [flute]",
    ]


def test_faults_of_the_language_and_of_the_values_are_told_together(heron: Path) -> None:
    text = (
        "flute\nname = Heron\nholes = 60\nbore mm = 1,9\n[session]\na4_hz = 440 Hz\n"
        "air_temperature_c = “72”\n[flute]\nwodo = 'yew'\n"
    )
    assert faults(heron, text) == [
        "flute.toml line 1: found flute, expected [flute] on a line of its own",
        'flute.toml line 2: key name: found Heron, expected quotes around text: "Heron"',
        "flute.toml line 3: key holes: found 60, expected a whole number from 1 to 10",
        "flute.toml line 4: found bore mm = 1,9, expected bore_mm before =",
        "flute.toml line 4: key bore_mm: found 1,9, expected a point in numbers: 1.9",
        "flute.toml line 4: key bore_mm: found 1.9, expected a number from 2 to 100 (mm)",
        "flute.toml line 6: key a4_hz: found 440 Hz, expected the number alone: 440",
        "flute.toml line 7: key air_temperature_c: found “72”, expected the number alone: 72",
        "flute.toml line 7: key air_temperature_c: found 72, expected a number from -20 to 50 (°C); "
        "72 °F would be 22.2",
        "flute.toml line 8: found [flute], expected each key and each [table] once; "
        "it stands on line 1 already",
        "flute.toml line 9: key wodo: not known in [flute]; did you mean wood?",
    ]


def test_a_file_full_of_faults_tells_the_first_twenty(heron: Path) -> None:
    told = faults(heron, "".join(f"junk {k}\n" for k in range(900)))
    assert len(told) == 21
    assert (
        told[0]
        == 'flute.toml line 1: found junk 0, expected key = "text" or key = number; or # before a remark'
    )
    assert told[20] == "flute.toml: has more faults: correct these first, or is it another file?"


def test_all_faults_are_told_at_once_in_the_order_of_lines(heron: Path) -> None:
    text = (
        "[flute]\nnmae = 'A'\nholes = 'six'\nbore_mm = -1\n[session]\na4_hz = 300\n"
        + "\n" * 5
        + "plaice = 'B'\n"
    )
    told = faults(heron, text)
    assert [line.split(":")[0] for line in told] == [f"flute.toml line {line}" for line in (2, 3, 4, 6, 12)]


# --- what is typed -----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("table", "key", "text", "value"),
    [
        ("flute", "holes", "6", 6),
        ("flute", "holes", " 6 holes ", 6),
        ("flute", "bore_mm", "19,5 mm", 19.5),
        ("flute", "name", " Heron ", "Heron"),
        ("flute", "serial", "007", "007"),
        ("session", "air_temperature_c", "−3,5 °C", -3.5),
        ("session", "air_temperature_c", "about 22", 22.0),
        ("session", "date", "2026-01-31", "2026-01-31"),
        ("session", "a4_hz", "", None),
        ("flute", "key", "  ", None),
    ],
)
def test_what_is_typed_may_have_a_comma_and_a_unit(table: str, key: str, text: str, value: object) -> None:
    assert typed(table, key, text) == value


@pytest.mark.parametrize(
    ("table", "key", "text", "message"),
    [
        ("flute", "holes", "12", "found 12, expected a whole number from 1 to 10"),
        ("flute", "holes", "5.5", "found 5.5, expected a whole number from 1 to 10"),
        ("flute", "holes", "six", "found six, expected a whole number from 1 to 10"),
        ("session", "air_temperature_c", "warm", "found warm, expected a number from -20 to 50 (°C)"),
        (
            "session",
            "air_temperature_c",
            "72 F",
            "found 72 F, expected a number from -20 to 50 (°C); 72 °F would be 22.2",
        ),
        ("session", "a4_hz", "4 4 0", "found 4 4 0, expected a number from 380 to 500 (Hz)"),
        ("flute", "name", "a\x1b[31m", 'found a\\x1b[31m, expected text in "quotes", on one line'),
    ],
)
def test_what_is_typed_is_checked_as_in_the_file(table: str, key: str, text: str, message: str) -> None:
    with pytest.raises(UnfitError) as caught:
        typed(table, key, text)
    assert str(caught.value) == message


# --- what the README shows ---------------------------------------------------------------------------

README = (Path(__file__).parent.parent / "README.md").read_text("utf-8")


def test_the_readme_s_faults_are_told_as_it_shows_them(tmp_path: Path) -> None:
    (shown,) = re.findall(r"^```text\n(Error: robin/.*?)^```$", README, re.MULTILINE | re.DOTALL)
    folder = tmp_path / "robin"
    file = create_session(folder, FluteFacts(name="robin", holes=6), Sitting(air_temperature_c=21.5))
    text = file.read_text("utf-8").replace("holes = 6", "holes = 60", 1).replace("= 21.5", "= 22,5 °C")
    assert [f"Error: robin/{line}" for line in faults(folder, text)] == shown.splitlines()
