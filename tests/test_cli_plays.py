"""`fluteprobe plays` and `tuning`: what they print, write and answer, and their JSON by its schemas."""

import json
import re
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from click.testing import CliRunner, Result
from musicxml_schema import faults
from surveys import first_register_only, heron, nothing_heard, one_take, strange_words

from fluteprobe.cli.main import main
from fluteprobe.cli.played import moved
from fluteprobe.repertoire.report import schema
from fluteprobe.results import write_results
from fluteprobe.score.midituning import tuned_keys
from fluteprobe.score.reading import read_tune, score_in
from fluteprobe.score.tune import tune_of

REEDS = Path(__file__).parent.parent / "samples" / "tunes" / "reeds.musicxml"
SURVEYS = {
    "heron": heron(), "wren": one_take(), "coot": first_register_only(), "silent": nothing_heard(),
    "strange": strange_words(),
}  # fmt: skip


def run(*arguments: str | Path) -> Result:
    return CliRunner().invoke(main, [str(argument) for argument in arguments])


@pytest.fixture(autouse=True)
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Return an empty current folder with a folder of measurements for each invented flute."""
    monkeypatch.chdir(tmp_path)
    for name, survey in SURVEYS.items():
        write_results(survey, Path(name))
    return tmp_path


def plays(*arguments: str | Path) -> dict[str, Any]:
    told = run("plays", *arguments, "--json")
    assert told.exit_code == 0, told.output
    values = json.loads(told.stdout)
    jsonschema.Draft202012Validator(schema("plays-1")).validate(values)
    assert isinstance(values, dict)
    return values


# plays ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", list(SURVEYS))
def test_json_is_by_the_schema_for_any_flute(name: str) -> None:
    values = plays(name, "--tune", REEDS, "--scale", "major", "--scale", "0 3.5 7", "--best-a4")
    (flute,) = values["flutes"]
    assert len(flute["scales"]) == 24
    assert flute["tune"]["notes"] == 18


def test_the_schemas_are_schemas_and_can_fail() -> None:
    for name in ("plays-1", "tuning-1"):
        jsonschema.Draft202012Validator.check_schema(schema(name))
        with pytest.raises(jsonschema.ValidationError):
            jsonschema.validate({"schema": "fluteprobe/heard/1"}, schema(name))


def test_all_named_scales_in_all_keys_are_asked_without_a_tune() -> None:
    scales = plays("heron")["flutes"][0]["scales"]
    assert len(scales) == 7 * 12
    assert plays("heron", "--tune", REEDS)["flutes"][0]["scales"] == []
    assert len(plays("heron", "--tune", REEDS, "--tonic", "A")["flutes"][0]["scales"]) == 7


def test_a_scale_as_a_table() -> None:
    told = run("plays", "coot", "--scale", "0 2 4 6 8 10")  # a flute of whole tones from D4
    assert told.exit_code == 0
    assert told.output.splitlines() == [
        "Coot · 6 holes · A4 = 440 Hz · within 20 cents",
        "",
        "0 2 4 6 8 10",
        "  tonic  octave  unbroken     doubtful  not",
        "  D      yes     7: D4 to D5  –         –",
        "",
        "octave: from tonic to tonic; unbroken: the longest row of neighbouring notes;",
        "doubtful: perhaps within the tolerance; not: cannot be played",
    ]


def test_a_single_key_is_told_note_by_note() -> None:
    told = run("plays", "heron", "--scale", "natural minor", "--tonic", "a")
    assert told.exit_code == 0
    lines = told.output.splitlines()
    assert lines[2] == "A natural minor: 0 2 3 5 7 8 10"
    assert lines[3] == "at A4 = 440.0 Hz"
    table = {line.split()[0]: line for line in lines[5:] if line}
    assert table["A4"].split() == ["A4", "yes", "−3.2", "±", "0.6", "xxxxxx", "1"]
    assert table["B4"].split() == ["B4", "perhaps", "−21.0", "±", "4.2", "xxxxxh", "1"]
    assert "vxxxxx −9.4, xxxxxx −17.0" in table["A5"]
    assert "octave A4 to A5: perhaps" in lines
    assert max(map(len, lines)) <= 80


def test_several_flutes_and_one_that_is_not_there() -> None:
    told = run("plays", "heron", "nowhere", "wren", "--scale", "major")
    assert told.exit_code == 1
    assert told.stderr.startswith("Not used: nowhere: ")
    assert told.stdout.count("within 20 cents") == 2
    only = run("plays", "nowhere")
    assert only.exit_code == 1
    assert only.stderr.splitlines()[-1] == "Error: no flute could be used"


def test_a_tune_as_a_table() -> None:
    told = run("plays", "coot", "--tune", REEDS, "--transpose", "0")  # whole tones from D4 to D5
    assert told.exit_code == 0
    lines = told.output.splitlines()
    assert lines[2] == "By the reeds, Flute: 18 notes, A4 to A5"
    assert lines[5].startswith("as written ")
    assert "As written:" in lines
    assert "A4: bar 1 beat 1, bar 8 beat 1" in lines
    assert max(map(len, lines)) <= 80
    down = plays("coot", "--tune", REEDS, "--transpose", "-2")["flutes"][0]["tune"]
    assert down["transpositions"][0]["semitones"] == -2
    assert down["short"][0] == {
        "bar": "1", "beat": 1.0, "start_quarters": 0.0, "written": "A4", "sounds": "G4",
    }  # fmt: skip
    assert [short["written"] for short in down["short"]].count("F#5") == 1


def test_a_tune_is_written_where_it_fits_best() -> None:
    told = run("plays", "coot", "--tune", REEDS, "--write")
    assert told.exit_code == 0
    assert told.stderr == "Wrote reports/coot/reeds-fingered.musicxml\n"
    content = Path("reports/coot/reeds-fingered.musicxml").read_bytes()
    assert faults(content) == []
    best = plays("coot", "--tune", REEDS)["flutes"][0]["tune"]["transpositions"][0]["semitones"]
    assert f"Moved {moved(best)}:" in told.stdout
    back, tune = tune_of(score_in(content)), read_tune(REEDS)
    assert [n.pitch_semitones - best for n in back.notes] == [n.pitch_semitones for n in tune.notes]
    assert re.search(rb"<text>[xo]{6}</text>", content)
    assert "<text>–</text>".encode() in content  # what falls short


def test_a_tune_for_several_flutes_has_a_folder_for_each() -> None:
    assert run("plays", "coot", "heron", "--tune", REEDS, "--write", "--out", "here").exit_code == 0
    assert sorted(map(str, Path("here").rglob("*.musicxml"))) == [
        "here/coot/reeds-fingered.musicxml",
        "here/heron/reeds-fingered.musicxml",
    ]
    assert run("plays", "coot", "--tune", REEDS, "--write", "--out", "there").exit_code == 0
    assert [path.name for path in Path("there").iterdir()] == ["reeds-fingered.musicxml"]


def test_a_tune_that_is_moved_off_the_paper_is_told() -> None:
    told = run("plays", "coot", "--tune", REEDS, "--write", "--transpose", "100")
    assert told.exit_code == 1
    assert told.stderr == ("Error: moved so far the tune cannot be written: a score holds octaves 0 to 9\n")


def test_a_tune_with_several_parts_is_a_caution() -> None:
    two = REEDS.read_text("utf-8").replace(
        "</part-list>", "<score-part id='P2'><part-name>Drone</part-name></score-part></part-list>"
    )
    drone = "<part id='P2'><measure number='1'><note><pitch><step>A</step><octave>3</octave></pitch>"
    drone += "<duration>24</duration></note></measure></part></score-partwise>"
    Path("two.musicxml").write_text(two.replace("</score-partwise>", drone), "utf-8")
    told = run("plays", "heron", "--tune", "two.musicxml")
    assert told.stderr == "Caution: it has 2 parts, the first is taken; the others: 2 Drone\n"
    assert (
        "Drone: 1 notes, A3 to A3"
        in run("plays", "heron", "--tune", "two.musicxml", "--part", "drone").stdout
    )


@pytest.mark.parametrize(
    ("arguments", "told", "code"),
    [
        (["--tune", "no.mid"], "Error: no.mid cannot be read: No such file or directory", 1),
        (["--tune", "."], "Error: . cannot be read: Is a directory", 1),
        (
            ["--tune", "heron/measurements.json"],
            "Error: heron/measurements.json: it is neither MusicXML nor a MIDI file: export the tune as one "
            "of the two",
            1,
        ),
        (
            ["--tune", str(REEDS), "--part", "\x1b[1mloud"],
            f"Error: {REEDS}: it has no part '\\x1b[1mloud', expected one of 1 Flute",
            1,
        ),
        (["--part", "1"], "Error: --part, --transpose and --write need a --tune.", 2),
        (
            ["--tonic", "H"],
            "Error: Invalid value for '--tonic': 'H' is no note, expected A to G, with # or b if need be.",
            2,
        ),
        (
            ["--scale", "0 9 3"],
            "Error: Invalid value for '--scale': '0 9 3' is no scale: its intervals rise from 0 to under 12 "
            "semitones (1200c).",
            2,
        ),
    ],
)
def test_what_is_wrong_is_one_line(arguments: list[str], told: str, code: int) -> None:
    result = run("plays", "heron", *arguments)
    assert result.exit_code == code
    assert result.stderr.splitlines()[-1] == told


def test_a_flute_that_never_spoke_is_told_so() -> None:
    assert "Nothing has been measured." in run("plays", "silent", "--scale", "major", "--tonic", "C").output
    assert "no octave in any key" in run("plays", "silent").output
    assert "Nothing has been measured that could be played." in run("plays", "silent", "--tune", REEDS).output


# tuning --------------------------------------------------------------------------------------------------


def test_three_files_are_written_and_the_keys_told() -> None:
    told = run("tuning", "coot")
    assert told.exit_code == 0
    assert told.stdout.splitlines()[:4] == [
        "Coot · A4 = 440 Hz · 7 keys of 128 tuned",
        "",
        "key  note  cents      Hz  fingering  register  passed over",
        " 62  D4     −6.0  292.65  xxxxxx            1",
    ]
    written = [f"reports/coot/{name}" for name in ("tuning.syx", "tuning.mid", "scale.musicxml")]
    assert told.stderr.splitlines() == [f"Wrote {name}" for name in written]
    assert set(tuned_keys(Path(written[0]).read_bytes())) == {62, 64, 66, 68, 70, 72, 74}
    assert Path(written[1]).read_bytes()[:4] == b"MThd"


def test_one_format_elsewhere_for_one_device() -> None:
    told = run(
        "tuning", "coot/measurements.json", "--format", "syx", "--out", "here", "--device", "5", "--bank", "2"
    )
    assert told.exit_code == 0
    assert [path.name for path in Path("here").iterdir()] == ["tuning.syx"]
    assert Path("here/tuning.syx").read_bytes()[:8] == bytes.fromhex("F0 7E 05 08 07 02 00 07")


@pytest.mark.parametrize("name", ["heron", "wren", "coot", "strange"])
def test_tuning_s_json_is_by_its_schema_and_is_what_is_written(name: str) -> None:
    told = run("tuning", name, "--json")
    assert told.exit_code == 0
    values = json.loads(told.stdout)
    jsonschema.Draft202012Validator(schema("tuning-1")).validate(values)
    back = tuned_keys(Path("reports", name, "tuning.syx").read_bytes())
    assert {key["key"]: pytest.approx(key["frequency_hz"], rel=2e-6) for key in values["keys"]} == back


def test_a_flute_without_tones_has_no_tuning() -> None:
    told = run("tuning", "silent")
    assert told.exit_code == 1
    assert told.stderr == "Error: silent has no tone to tune a key to: record some takes\n"


def test_a_format_that_is_none() -> None:
    told = run("tuning", "coot", "--format", "wav")
    assert told.exit_code == 2
    assert "'wav' is not one of syx, mid, musicxml." in told.stderr
