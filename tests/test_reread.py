"""The way back from measurements.json: what was written comes back, whatever else a file holds is one line.

The judge of what may be accepted is the published JSON Schema, asked through the library jsonschema. Hostile
files are made from a real one: changed in structure and in single bytes, nested without end, far too large.
"""

import json
import os
import re
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st
from surveys import (
    changed,
    first_register_only,
    full_survey,
    heron,
    nothing_heard,
    one_take,
    sixty_entries,
    strange_words,
)

from fluteprobe.cli import screen
from fluteprobe.pages.contents import chart_contents
from fluteprobe.reread import LARGEST_BYTES, ResultsError, read_results, survey_from_json
from fluteprobe.results import json_text, schema, survey_csv, survey_json

NAN = float("nan")
SURVEYS = [full_survey, heron, one_take, nothing_heard, first_register_only, sixty_entries, strange_words]
VALIDATOR = jsonschema.Draft202012Validator(schema("measurements-1"))


# --- what was written comes back ---------------------------------------------------------------------


@pytest.mark.parametrize("make", SURVEYS)
def test_a_survey_comes_back_as_it_was_written(make: Any) -> None:
    values = json.loads(json_text(survey_json(make())))
    back = survey_from_json(values)
    assert survey_json(back) == values
    assert back.flute == make().flute
    assert back.sitting == make().sitting
    assert back.problems == make().problems
    assert [entry.fingering for entry in back.entries] == [entry.fingering for entry in make().entries]


def test_a_survey_from_before_the_length_was_told_reads_as_one_without_it() -> None:
    values = survey_json(full_survey())
    later = {"bore_profile_mm", "length_mm", "tolerance_mm"}
    older = {key: value for key, value in values["flute"].items() if key not in later}
    flute = survey_from_json({**values, "flute": older}).flute
    assert (flute.bore_profile_mm, flute.length_mm, flute.tolerance_mm) == (None, None, None)


# --- what is wrong is told in one line ---------------------------------------------------------------


@pytest.mark.parametrize(
    ("path", "value", "message"),
    [
        (("schema",), "other/1", 'schema is "other/1", expected "fluteprobe/measurements/1"'),
        (("flute", "holes"), "six", 'flute.holes is "six", expected a whole number from 1 to 10'),
        (("flute", "holes"), 6.0, "flute.holes is 6.0, expected a whole number from 1 to 10"),
        (("flute", "holes"), 5, 'tones[0].fingering is "oxxxxx", expected a fingering of 5 holes'),
        (("flute", "holes_mm"), [[1]],
         "flute.holes_mm[0] is a list of 1, expected a distance and a diameter"),
        (("flute", "bore_profile_mm"), [[0, 19], [385]],
         "flute.bore_profile_mm[1] is a list of 1, expected a distance and a diameter"),
        (("flute", "bore_profile_mm"), [[0, 19]],
         "flute.bore_profile_mm is a list of 1, expected 2 to 60 places, from the sound hole to the foot"),
        (("flute", "bore_profile_mm"), [[10, 19], [0, 18]],
         "flute.bore_profile_mm is a list of 2, expected 2 to 60 places, from the sound hole to the foot"),
        (("flute", "bore_profile_mm"), [[0, 0], [385, 18]],
         "flute.bore_profile_mm[0] is 0.0, expected a number above 0"),
        (("flute", "length_mm"), -1, "flute.length_mm is -1, expected a number above 0"),
        (("session", "a4_hz"), True, "session.a4_hz is true, expected a number"),
        (("session", "a4_hz"), 300, "session.a4_hz is 300, expected a number from 380 to 500"),
        (("tones",), {}, "tones is an object, expected a list"),
        (("tones", 0), 5, "tones[0] is 5, expected an object"),
        (("tones", 0), [], "tones[0] is a list of 0, expected an object"),
        (("tones", 0, "fingering"), "oxz", 'tones[0].fingering is "oxz", expected 1 to 10 of x, o, h and v'),
        (("tones", 0, "fingering"), 7, "tones[0].fingering is 7, expected text"),
        (("tones", 0, "register"), True, "tones[0].register is true, expected one of 1, 2, 3"),
        (("tones", 0, "breath"), "loud", 'tones[0].breath is "loud", expected one of soft, normal, over'),
        (("tones", 0, "partials"), [{"order": 1}], "tones[0].partials[0].frequency_hz is missing"),
        (("tones", 0, "partials", 1, "order"), 0,
         "tones[0].partials[1].order is 0, expected a whole number of 1 or more"),
        (("tones", 0, "frequency_hz"), -1, "tones[0].frequency_hz is -1, expected a number above 0"),
        (("tones", 0, "frequency_hz"), 1e300,
         "tones[0].frequency_hz is 1e+300, expected a number within ±1e+09"),
        (("tones", 0, "frequency_hz"), 10**400,
         "tones[0].frequency_hz is a huge number, expected a number within ±1e+09"),
        (("tones", 0, "start_s"), -0.5, "tones[0].start_s is -0.5, expected a number that is 0 or more"),
        (("tones", 0, "note"), None,
         "tones[0].note is half given: frequency_hz, note and cents go together"),
        (("entries", 0, "frequency_hz"), NAN,
         "entries[0].frequency_hz is NaN, expected a number within ±1e+09"),
        (("entries", 0, "note"), "H5", 'entries[0].note is "H5", expected a note such as C#5'),
        (("entries", 0, "note"), "\x1b[31m\x7f\n" * 20,
         r'entries[0].note is "\u001b[31m\u007f\n\u001b[31m\u007f\n\u…, expected a note such as C#5'),
        (("entries", 0, "takes"), [], "entries[0].takes is a list of 0, expected one take or more"),
        (("entries", 0, "cents"), 51, "entries[0].cents is 51, expected a number from -50 to 50"),
        (("entries", 0, "reliability"), 2, "entries[0].reliability is 2, expected a number from 0 to 1"),
        (("problems", 0, "message"), None, "problems[0].message is null, expected text"),
    ],
)  # fmt: skip
def test_what_is_wrong_in_a_file_is_told_with_its_place(path: Any, value: Any, message: str) -> None:
    with pytest.raises(ResultsError) as caught:
        survey_from_json(changed(survey_json(full_survey()), path, value))
    assert str(caught.value) == message


@pytest.mark.parametrize("values", [None, [], "text", 5])
def test_what_is_no_object_is_told(values: Any) -> None:
    with pytest.raises(ResultsError, match=r"^the file is .*, expected an object$"):
        survey_from_json(values)


def test_files_that_cannot_be_read_are_named(tmp_path: Path) -> None:
    for name, content, words in [
        ("b\x1b.json", b"{", r"b\x1b.json is no JSON: measure the flute again"),
        ("c.json", b'{"schema": 3}', 'c.json: schema is 3, expected "fluteprobe/measurements/1"'),
        ("d.json", b"\xff\xfe", "d.json is no JSON: measure the flute again"),
        ("e.json", b"", "e.json is no JSON: measure the flute again"),
        ("f.json", b"9" * 5000, "f.json is no JSON: measure the flute again"),
    ]:
        (tmp_path / name).write_bytes(content)
        assert told(tmp_path / name) == f"{tmp_path}{os.sep}{words}"
    assert told(tmp_path / "a.json") == f"{tmp_path / 'a.json'} cannot be read: No such file or directory"


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="there are no pipes with names here")
def test_what_never_ends_is_not_read(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe")
    for path in (tmp_path / "pipe", Path("/dev/zero")):
        assert told(path) == f"{path} cannot be read: it is no ordinary file"
    huge = tmp_path / "huge.json"
    with huge.open("wb") as file:
        file.truncate(2**40)  # it takes no room on the disk
    assert told(huge) == f"{huge} cannot be read: it is far too large (over 20 MB)"
    assert told(tmp_path) == f"{tmp_path} cannot be read: Is a directory"


@pytest.mark.parametrize("opening", ["[", '{"a":', '{"schema":"fluteprobe/measurements/1","flute":['])
def test_nesting_without_end_is_one_line(tmp_path: Path, opening: str) -> None:
    path = tmp_path / "deep.json"
    for depth in (10, 500, 990, 100_000, LARGEST_BYTES // len(opening)):
        path.write_text(opening * depth)
        assert told(path) == f"{path} is no JSON: measure the flute again"


def told(path: Path) -> str:
    """Return the one line about a file that cannot be used."""
    with pytest.raises(ResultsError) as caught:
        read_results(path)
    assert is_one_plain_line(str(caught.value))
    return str(caught.value)


def is_one_plain_line(words: str) -> bool:
    return len(words) < 1000 and not re.search(r"[\x00-\x1f\x7f-\x9f\u2028\u202e\ud800-\udfff]", words)


# --- hostile files -----------------------------------------------------------------------------------

RAW = {
    "@deep@": "[" * 900 + "]" * 900,
    "@deeper@": '{"a":' * 200_000,
    "@long@": "9" * 5000,
    "@beyond@": "1e999",
    "@infinite@": "-Infinity",
    "@twice@": '{"schema": 1, "schema": "fluteprobe/measurements/1", "name": "a", "name": []}',
}
ODD: list[Any] = [
    None, True, False, 0, 1, -1, 3.5, 1e308, -1e308, 5e-324, 1e-12, 10**400, 2**63, NAN, "", "1e308", "H5",
    "C5", "x" * 3000, "\x1b]0;title\x07\x9b31m", "\ud800", "\u202egnp", "=HYPERLINK(1)", "oxxxxx",
    "oxxxxxxxxxxx", {}, [], [[]], [None], {"order": 1}, "fluteprobe/measurements/1", *RAW,
]  # fmt: skip


def small() -> dict[str, Any]:
    """Return the values of a survey with few tones and entries."""
    values = survey_json(full_survey())
    return {**values, "tones": values["tones"][:2], "entries": values["entries"][:2]}


def places(values: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    """Yield the way to every value, however deep."""
    steps = values.items() if isinstance(values, dict) else enumerate(values)
    for step, value in steps:
        yield (*path, step)
        if isinstance(value, dict | list):
            yield from places(value, (*path, step))


PLACES = list(places(small()))
CHANGES = st.tuples(
    st.sampled_from(PLACES), st.sampled_from(["put", "drop", "double", "wrap"]), st.sampled_from(ODD)
)


def distorted(changes: list[tuple[tuple[Any, ...], str, Any]]) -> str:
    """Return JSON text with changes made in turn; one whose place is gone by then is passed over."""
    values = small()
    for path, what, odd in changes:
        place: Any = values
        try:
            for step in path[:-1]:
                place = place[step]
            held = place[path[-1]]
            if what == "drop":
                del place[path[-1]]
            else:
                place[path[-1]] = {"put": odd, "double": [held, held], "wrap": {"a": held}}[what]
        except (KeyError, IndexError, TypeError):
            continue
    text = json.dumps(values)
    for word, raw in RAW.items():
        text = text.replace(f'"{word}"', raw)
    return text


def check(content: bytes, folder: Path) -> None:
    """Check that a file is refused in one plain line, or is by the schema and can be shown and written."""
    path = folder / "measurements.json"
    path.write_bytes(content)
    try:
        survey = read_results(path)
    except ResultsError:
        told(path)
        return
    VALIDATOR.validate(json.loads(json_text(survey_json(survey))))
    survey_csv(survey).encode("utf-8")
    assert not re.search(r"[\x00-\x09\x0b-\x1f\x7f-\x9f]", screen.survey_table(survey))
    chart_contents(survey)


FUZZ = settings(max_examples=100, suppress_health_check=[HealthCheck.function_scoped_fixture])


@FUZZ
@given(st.lists(CHANGES, min_size=1, max_size=4))
@example([(("entries", 0, "reliability"), "put", 5e-324)])
def test_a_file_changed_in_structure_is_refused_in_one_line_or_can_be_used(
    tmp_path: Path, changes: list[tuple[tuple[Any, ...], str, Any]]
) -> None:
    check(distorted(changes).encode("utf-8", "surrogatepass"), tmp_path)


@FUZZ
@given(st.data())
def test_a_file_changed_in_its_bytes_is_refused_in_one_line_or_can_be_used(
    tmp_path: Path, data: st.DataObject
) -> None:
    content = bytearray(json_text(small()).encode())
    for _ in range(data.draw(st.integers(1, 3))):
        start = data.draw(st.integers(0, len(content)))
        stop = start + data.draw(st.integers(0, 40))
        content[start:stop] = data.draw(st.binary(max_size=12))
    check(bytes(content), tmp_path)


def test_every_place_bears_odd_values(tmp_path: Path) -> None:
    for k, path in enumerate(PLACES):
        for odd in ODD[k % 9 :: 9]:
            check(distorted([(path, "put", odd)]).encode("utf-8", "surrogatepass"), tmp_path)
