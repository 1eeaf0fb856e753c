"""The comparison's JSON and CSV: the contract's fields, the schema, text that a spreadsheet does not run."""

import csv
import io
import json
from importlib.resources import files
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from classes import KEYS, flute

from fluteprobe.compare import compare
from fluteprobe.compare.contract import CSV_FIELDS, comparison_csv, comparison_json
from fluteprobe.compare.values import Comparison

ROWS = len(KEYS)
TOP = Path(__file__).parent.parent


def schema() -> dict[str, Any]:
    text = files("fluteprobe").joinpath("schema", "comparison-1.schema.json").read_text(encoding="utf-8")
    found: dict[str, Any] = json.loads(text)
    return found


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
