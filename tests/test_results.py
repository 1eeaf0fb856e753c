"""Measurements on disk: the JSON contract and its schemas, and the table for spreadsheets."""

import csv
import io
import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from surveys import (
    changed,
    first_register_only,
    full_reading,
    full_survey,
    heron,
    nothing_heard,
    one_take,
    sixty_entries,
    strange_words,
)

from fluteprobe import __version__
from fluteprobe.results import (
    CSV_FIELDS,
    heard_json,
    json_text,
    read_results,
    replace_file,
    schema,
    survey_csv,
    survey_from_json,
    survey_json,
    write_results,
)
from fluteprobe.session import Problem

NAN = float("nan")

# The contract, version 1, as agreed with the programs that read these files.
TONE_FIELDS = {
    "take", "start_s", "end_s", "fingering", "breath", "kind", "frequency_hz", "uncertainty_cents", "note",
    "cents", "cents_at_reference", "register", "register_probability", "evidence", "partials",
    "harmonic_to_noise_db", "breath_resonances", "drift_cents", "vibrato", "attack_ms", "cautions",
}  # fmt: skip
ENTRY_FIELDS = {
    "fingering", "register", "frequency_hz", "uncertainty_cents", "note", "cents", "cents_at_reference",
    "stretch_cents", "takes", "tones", "reliability",
}  # fmt: skip


SURVEYS = [full_survey, heron, one_take, nothing_heard, first_register_only, sixty_entries, strange_words]


def check(name: Any, values: Any) -> None:
    """Validate what a reader of the text would get."""
    jsonschema.Draft202012Validator(schema(name)).validate(json.loads(json_text(values)))


# --- schemas -----------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["heard-1", "measurements-1"])
def test_the_schemas_are_valid_draft_2020_12(name: Any) -> None:
    jsonschema.Draft202012Validator.check_schema(schema(name))


def test_both_schemas_mean_the_same_by_a_tone_and_a_problem() -> None:
    heard, measured = schema("heard-1")["$defs"], schema("measurements-1")["$defs"]
    assert heard == {key: measured[key] for key in heard}


def test_the_schema_asks_for_every_field_of_the_contract() -> None:
    defs = schema("measurements-1")["$defs"]
    assert set(defs["tone"]["required"]) == TONE_FIELDS
    assert set(defs["entry"]["required"]) == ENTRY_FIELDS
    assert set(defs["problem"]["required"]) == {"take", "message"}


@pytest.mark.parametrize("make", SURVEYS)
def test_every_survey_is_written_by_the_schema(make: Any) -> None:
    values = survey_json(make())
    check("measurements-1", values)
    assert values["schema"] == "fluteprobe/measurements/1"
    assert values["version"] == __version__
    assert all(set(tone) >= TONE_FIELDS for tone in values["tones"])
    assert all(set(entry) >= ENTRY_FIELDS for entry in values["entries"])


def test_what_was_heard_is_written_by_the_schema() -> None:
    readings = [replace(full_reading(), fingering=None, breath=None), *heron().readings]
    values = heard_json(readings, [Problem(take="a.wav", message="no such file")], a4_hz=440.0)
    check("heard-1", values)
    assert values["schema"] == "fluteprobe/heard/1"
    assert values["tones"][0]["fingering"] is None
    assert values["problems"] == [{"take": "a.wav", "message": "no such file"}]
    check("heard-1", heard_json([], []))


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("tones", 0, "kind"), "whistle"),
        (("tones", 0, "register"), 4),
        (("tones", 0, "breath"), "loud"),
        (("tones", 0, "fingering"), "oxz"),
        (("tones", 0, "frequency_hz"), 0),
        (("tones", 0, "note"), None),
        (("tones", 0, "register_probability"), {"1": 1.0}),
        (("entries", 0, "frequency_hz"), None),
        (("entries", 0, "takes"), []),
        (("entries", 0, "reliability"), 1.5),
        (("entries", 0, "note"), "H5"),
        (("flute", "holes"), 11),
        (("session", "a4_hz"), 300),
        (("schema",), "fluteprobe/measurements/2"),
    ],
)  # fmt: skip
def test_the_schema_refuses_what_is_out_of_contract(path: tuple[Any, ...], value: Any) -> None:
    with pytest.raises(jsonschema.ValidationError):
        check("measurements-1", changed(survey_json(full_survey()), path, value))


def test_fields_may_be_added_anywhere() -> None:
    values = survey_json(full_survey())
    for place in (values, values["flute"], values["session"], values["tones"][0], values["entries"][0]):
        place["more"] = {"and": "more"}
    check("measurements-1", values)
    assert survey_from_json(values).flute.name == "Heron"


# --- numbers -----------------------------------------------------------------------------------------


def test_numbers_are_rounded_to_what_can_be_meant() -> None:
    tone = heard_json([full_reading()], [])["tones"][0]
    assert tone["frequency_hz"] == 938.1235
    assert tone["uncertainty_cents"] == 0.0123
    assert tone["cents_at_reference"] == 1.235
    assert tone["partials"][1] == {"order": 2, "frequency_hz": 1876.2, "level_db": -17.26}
    assert tone["breath_resonances"] == [
        {"frequency_hz": 470.12, "width_hz": 12.35, "prominence_db": 14.57, "chance": 1.23e-7}
    ]
    assert tone["vibrato"] == {"rate_hz": 5.123, "extent_cents": 14.57}
    assert tone["evidence"][0]["log_odds"] == 3.892
    assert tone["register_probability"] == {"1": 0.01, "2": 0.98, "3": 0.01}


def test_no_negative_zero_is_written() -> None:
    text = json_text(heard_json([full_reading()], []))
    assert "-0.0," not in text
    assert json.loads(text)["tones"][0]["drift_cents"] == 0.0


def test_what_is_no_finite_number_is_written_as_null() -> None:
    plain = full_reading()
    tone = replace(plain.tone, harmonic_to_noise_db=float("inf"), drift_cents=NAN, uncertainty_cents=NAN)
    written = json_text(heard_json([replace(plain, tone=tone)], []))
    assert "NaN" not in written
    assert "Infinity" not in written
    assert json.loads(written)["tones"][0]["harmonic_to_noise_db"] is None
    check("heard-1", json.loads(written))


def test_text_that_json_must_not_hold_is_refused() -> None:
    with pytest.raises(ValueError, match="not JSON compliant"):
        json_text({"value": NAN})


# --- the table ---------------------------------------------------------------------------------------


def test_the_table_has_a_row_for_every_entry() -> None:
    rows = list(csv.DictReader(io.StringIO(survey_csv(heron()))))
    assert [row["fingering"] for row in rows] == [str(entry.fingering) for entry in heron().entries]
    assert tuple(rows[0]) == CSV_FIELDS
    first = rows[0]
    assert first["note"] == "A4"
    assert float(first["frequency_hz"]) == pytest.approx(heron().entries[0].frequency_hz, abs=5e-5)
    assert first["cents"] == "-3.2"
    assert first["stretch_cents"] == ""
    assert first["takes"] == "takes/xxxxxx-1-1.wav; takes/xxxxxx-1-2.wav; takes/xxxxxx-1-3.wav"


@pytest.mark.parametrize("start", ["=", "+", "-", "@", " =", "＝"])
def test_no_text_in_the_table_can_be_taken_for_a_formula(start: str) -> None:
    assert flute_column(f"{start}1+1") == {f"'{start}1+1"}


def test_the_table_has_no_control_characters_within_a_cell() -> None:
    assert flute_column("\t=1\r\n\x1b") == {r"\t=1\r\n\x1b"}


def flute_column(name: str) -> set[str]:
    """Return what stands under `flute` for a flute of that name."""
    survey = heron()
    table = survey_csv(replace(survey, flute=replace(survey.flute, name=name)))
    return {row["flute"] for row in csv.DictReader(io.StringIO(table, newline=""))}


# --- files -------------------------------------------------------------------------------------------


def test_results_are_written_read_and_replaced(tmp_path: Path) -> None:
    folder = tmp_path / "reports" / "heron"
    first = write_results(heron(), folder)
    again = write_results(heron(), folder)
    assert first == again == (folder / "measurements.json", folder / "measurements.csv")
    assert sorted(path.name for path in folder.iterdir()) == ["measurements.csv", "measurements.json"]
    assert survey_json(read_results(first[0])) == survey_json(heron())


def test_the_same_survey_gives_the_same_bytes(tmp_path: Path) -> None:
    for name in ("a", "b"):
        write_results(full_survey(), tmp_path / name)
    for file in ("measurements.json", "measurements.csv"):
        assert (tmp_path / "a" / file).read_bytes() == (tmp_path / "b" / file).read_bytes()


def test_a_write_that_fails_leaves_the_old_file_whole(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    target = tmp_path / "file.json"
    replace_file(target, b"old")

    def full_disk(descriptor: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("os.fsync", full_disk)
    with pytest.raises(OSError, match="the disk is full: make room, then run it again") as caught:
        replace_file(target, b"new")
    assert caught.value.filename == str(target)
    assert target.read_bytes() == b"old"
    assert list(tmp_path.iterdir()) == [target]
