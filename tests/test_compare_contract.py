"""The comparison's JSON and CSV: the contract's fields, the schema, text that a spreadsheet does not run."""

import csv
import io
import json
from importlib.resources import files
from typing import Any

import jsonschema
import pytest
from classes import KEYS, flute
from hypothesis import given, settings
from hypothesis import strategies as st

from fluteprobe.compare import compare
from fluteprobe.compare.contract import CSV_FIELDS, comparison_csv, comparison_json
from fluteprobe.compare.values import Comparison
from fluteprobe.survey import Survey

ROWS = len(KEYS)


def schema() -> dict[str, Any]:
    text = files("fluteprobe").joinpath("schema", "comparison-1.schema.json").read_text(encoding="utf-8")
    found: dict[str, Any] = json.loads(text)
    return found


VALIDATOR = jsonschema.Draft202012Validator(schema())


def players() -> Comparison:
    """Return one flute over four dates with two players: every part of a comparison is there."""
    sittings = (("Ada", "2024-01-10"), ("Bela", "2024-07-02"), ("Ada", "2025-01-20"), ("Bela", "2025-07-01"))
    return compare(
        [
            flute("Wren", [float(5 * k)] * ROWS, player=player, date=date, air_temperature_c=19.0 + k)
            for k, (player, date) in enumerate(sittings)
        ]
    )


def mixed() -> Comparison:
    """Return flutes of different builds, one with nothing."""
    five = {("xxxxx", 1): 69, ("xxxxo", 1): 72, ("oxxxx", 2): 81}
    return compare([flute("Wren", [0.0] * ROWS), flute("Coot", [3.0] * 3, scale=five), flute("Rail", {})])


@pytest.mark.parametrize("made", [players(), mixed(), compare([flute("A", {}), flute("B", {})])])
def test_json_is_by_the_schema(made: Comparison) -> None:
    jsonschema.Draft202012Validator.check_schema(schema())
    values = json.loads(json.dumps(comparison_json(made), allow_nan=False))
    jsonschema.validate(values, schema())


def test_the_schema_is_strict_about_what_it_names() -> None:
    values = comparison_json(mixed())
    values["rows"][0]["cells"][0]["frequency_hz"] = "440"
    with pytest.raises(jsonschema.ValidationError, match="'440' is not of type 'number'"):
        jsonschema.validate(values, schema())


def test_the_contract_s_fields_are_there() -> None:
    values = comparison_json(mixed())
    assert values["schema"] == "fluteprobe/comparison/1"
    labels = [each["label"] for each in values["flutes"]]
    for row in values["rows"]:
        assert {"by", "register", "cells", "spread_cents"} <= set(row)
        assert len(row["cells"]) == len(labels)
        for label, cell in zip(labels, row["cells"], strict=True):
            if cell is not None:
                assert cell["flute"] == label
                assert {"frequency_hz", "cents", "uncertainty_cents"} <= set(cell)
    assert values["rows"][0]["cells"][2] is None


def test_every_part_is_told_by_label() -> None:
    values = comparison_json(players())
    labels = {each["label"] for each in values["flutes"]}
    assert {part["player"] for part in values["parts"]["players"]} == {"Ada", "Bela"}
    assert {rest["player"] for rest in values["parts"]["rests"]} == {"Ada", "Bela"}
    (drift,) = values["drifts"]
    assert {sitting["flute"] for sitting in drift["sittings"]} == labels
    assert drift["flute"] == "Wren"
    assert {label for pair in values["pairs"] for label in pair["flutes"]} == labels


def test_csv_has_a_line_for_every_cell() -> None:
    made = mixed()
    lines = list(csv.DictReader(io.StringIO(comparison_csv(made))))
    assert tuple(lines[0]) == CSV_FIELDS
    assert len(lines) == sum(len(row.played) for row in made.rows)
    first = comparison_json(made)["rows"][0]["cells"][0]
    assert float(lines[0]["frequency_hz"]) == first["frequency_hz"]
    assert lines[0]["fingering"] == "xxxxxx"


def test_a_label_is_no_formula_and_has_no_control_characters() -> None:
    made = compare([flute("=1+1", [0.0] * ROWS), flute("a\x1b[31m", [0.0] * ROWS)])
    lines = list(csv.DictReader(io.StringIO(comparison_csv(made))))
    assert {line["flute"] for line in lines} == {"'=1+1", "a\\x1b[31m"}


# --- any surveys -------------------------------------------------------------------------------------

ANY_FLUTE = st.builds(
    flute,
    st.sampled_from(["Wren", "Coot", "Rail"]),
    st.dictionaries(st.sampled_from(KEYS), st.floats(-300.0, 300.0), max_size=ROWS),
    st.sampled_from([0.0, 0.4, 3.0, 400.0]),
    player=st.sampled_from([None, "Ada", "Bela", "Cleo"]),
    date=st.sampled_from([None, "2024-01-10", "2024-07-02", "2025-01-20", "spring"]),
    air_temperature_c=st.sampled_from([None, 0.0, 17.0, 26.0]),
    a4_hz=st.sampled_from([415.0, 440.0]),
)


@given(st.lists(ANY_FLUTE, min_size=2, max_size=6), st.sampled_from([None, "fingering", "note"]))
@settings(max_examples=40)
def test_any_surveys_compare_to_json_by_the_schema(surveys: list[Survey], by: Any) -> None:
    values = json.loads(json.dumps(comparison_json(compare(surveys, by=by)), allow_nan=False))
    VALIDATOR.validate(values)
    comparison_csv(compare(surveys, by=by))


@given(st.lists(ANY_FLUTE, min_size=2, max_size=2))
@settings(max_examples=40)
def test_the_other_way_round_a_difference_has_the_other_sign(surveys: list[Survey]) -> None:
    there, back = (compare(pair, by="fingering", a4_hz=440.0) for pair in (surveys, surveys[::-1]))
    for one, other in zip(there.pairs, back.pairs, strict=True):
        assert [d.cents for d in one.differences] == pytest.approx([-d.cents for d in other.differences])
        assert [d.verdict for d in one.differences] == [d.verdict for d in other.differences]
