"""A comparison as JSON values and as CSV.

Conventions: the fields schema, flutes, rows, by, register, cells, flute, frequency_hz, cents,
uncertainty_cents and spread_cents are a contract; others may be added, none renamed. Flutes are named by
their labels, rows by their place. Numbers are rounded as in `results`. The JSON Schema is comparison-1 in
`fluteprobe/schema/`.
"""

import csv
import io
import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import asdict
from typing import Any

from fluteprobe.compare.values import (
    Beats,
    Cell,
    Comparison,
    Difference,
    Drift,
    Flute,
    Pair,
    Parts,
    Row,
)
from fluteprobe.session import printable
from fluteprobe.version import __version__

COMPARISON_SCHEMA = "fluteprobe/comparison/1"
CSV_FIELDS = (
    "by", "register", "note", "flute", "fingering", "frequency_hz", "cents", "uncertainty_cents", "off_cents",
    "stands_out", "row_mean_cents", "row_middle_cents", "row_scatter_cents", "row_spread_cents",
)  # fmt: skip

# What a spreadsheet would run, also behind a separator that it may split at; the last four in some editions.
_FORMULA = re.compile(r"""(^|[;,|])(?=[\s"']*[=+\-@＝＋－＠])""")
_HZ, _CENTS = 4, 3  # decimals


def comparison_json(comparison: Comparison) -> dict[str, Any]:
    """Return a comparison as JSON values by the schema comparison-1."""
    labels = [flute.label for flute in comparison.flutes]
    group = comparison.group
    return {
        "schema": COMPARISON_SCHEMA,
        "version": __version__,
        "by": comparison.by,
        "a4_hz": comparison.a4_hz,
        "temperature_c": comparison.temperature_c,
        "flutes": [_flute_json(flute) for flute in comparison.flutes],
        "rows": [_row_json(row, labels) for row in comparison.rows],
        "pairs": [_pair_json(pair, labels) for pair in comparison.pairs],
        "compared": comparison.compared,
        "notes": [
            {
                "note": reach.note,
                "flutes": [labels[k] for k in reach.flutes],
                "registers": list(reach.registers),
            }
            for reach in comparison.notes
        ],
        "group_pitch": None if group is None else {key: _sized(key, v) for key, v in asdict(group).items()},
        "parts": None if comparison.parts is None else _parts_json(comparison.parts, comparison.flutes),
        "drifts": [_drift_json(drift, comparison.flutes) for drift in comparison.drifts],
        "cautions": list(comparison.cautions),
    }


def comparison_csv(comparison: Comparison) -> str:
    """Return a comparison's cells as a table, one line each; to a spreadsheet, text is no formula."""
    table = io.StringIO()
    writer = csv.DictWriter(table, CSV_FIELDS, lineterminator="\n")
    writer.writeheader()
    labels = [flute.label for flute in comparison.flutes]
    for row in comparison.rows:
        about = {
            "by": row.by,
            "register": row.register,
            "note": row.note,
            "row_mean_cents": _rounded(row.mean_cents, _CENTS),
            "row_middle_cents": _rounded(row.middle_cents, _CENTS),
            "row_scatter_cents": _rounded(row.scatter_cents, _CENTS),
            "row_spread_cents": _rounded(row.spread_cents, _CENTS),
        }
        for cell in row.played:
            told = {**_cell_json(cell, labels), **about, "register": cell.register}
            writer.writerow({field: _field(told[field]) for field in CSV_FIELDS})
    return table.getvalue().encode("utf-8", "backslashreplace").decode("utf-8")


# --- parts of the JSON -------------------------------------------------------------------------------


def _flute_json(flute: Flute) -> dict[str, Any]:
    facts, sitting = flute.facts, flute.sitting
    return {
        "label": flute.label,
        "instrument": flute.kin,
        "name": facts.name,
        "holes": facts.holes,
        "maker": facts.maker,
        "serial": facts.serial,
        "key": facts.key,
        "player": sitting.player,
        "date": sitting.date,
        "a4_hz": sitting.a4_hz,
        "air_temperature_c": sitting.air_temperature_c,
        "carried_cents": _rounded(flute.shift_cents, _CENTS),
    }


def _row_json(row: Row, labels: Sequence[str]) -> dict[str, Any]:
    return {
        "by": row.by,
        "register": row.register,
        "note": row.note,
        "cells": [None if cell is None else _cell_json(cell, labels) for cell in row.cells],
        "spread_cents": _rounded(row.spread_cents, _CENTS),
        "mean_cents": _rounded(row.mean_cents, _CENTS),
        "mean_uncertainty_cents": _significant(row.mean_uncertainty_cents),
        "middle_cents": _rounded(row.middle_cents, _CENTS),
        "scatter_cents": _rounded(row.scatter_cents, _CENTS),
        "fastest_beats": None if row.fastest is None else _beats_json(row.fastest, labels),
    }


def _cell_json(cell: Cell, labels: Sequence[str]) -> dict[str, Any]:
    return {
        "flute": labels[cell.flute],
        "fingering": str(cell.fingering),
        "register": cell.register,
        "frequency_hz": _rounded(cell.frequency_hz, _HZ),
        "as_played_hz": _rounded(cell.as_played_hz, _HZ),
        "cents": _rounded(cell.cents, _CENTS),
        "uncertainty_cents": _significant(cell.uncertainty_cents),
        "reliability": _rounded(cell.reliability, 4),
        "tones": cell.tones,
        "off_cents": _rounded(cell.off_cents, _CENTS),
        "stands_out": cell.stands_out,
    }


def _pair_json(pair: Pair, labels: Sequence[str]) -> dict[str, Any]:
    return {
        "flutes": [labels[k] for k in pair.flutes],
        "offset_cents": _rounded(pair.offset_cents, _CENTS),
        "offset_uncertainty_cents": _significant(pair.offset_uncertainty_cents),
        "offset_verdict": pair.offset_verdict,
        "widened": _rounded(pair.widened, 3),
        "differences": [_difference_json(difference) for difference in pair.differences],
    }


def _difference_json(difference: Difference) -> dict[str, Any]:
    values = asdict(difference)
    beats = values.pop("beats")
    values |= {"beats_hz": beats["rate_hz"], "beats_uncertainty_hz": beats["uncertainty_hz"]}
    return {key: _sized(key, value) for key, value in values.items()}


def _beats_json(beats: Beats, labels: Sequence[str]) -> dict[str, Any]:
    return {
        "flutes": [labels[k] for k in beats.flutes],
        "rate_hz": _rounded(beats.rate_hz, _HZ),
        "uncertainty_hz": _significant(beats.uncertainty_hz),
    }


def _parts_json(parts: Parts, flutes: Sequence[Flute]) -> dict[str, Any]:
    return {
        "players": [_all_sized(asdict(part)) for part in parts.players],
        "flutes": [
            {"flute": _instrument(part.kin, flutes), **_all_sized(asdict(part))} for part in parts.flutes
        ],
        "rests": [
            {"flute": _instrument(rest.kin, flutes), **_all_sized(asdict(rest))} for rest in parts.rests
        ],
        "unseparated": list(parts.unseparated),
    }


def _drift_json(drift: Drift, flutes: Sequence[Flute]) -> dict[str, Any]:
    return {
        "flute": _instrument(drift.kin, flutes),
        "sittings": [
            {
                "flute": flutes[k].label,
                "days": day,
                "level_cents": _rounded(level, _CENTS),
                "uncertainty_cents": _significant(doubt),
            }
            for k, day, level, doubt in zip(
                drift.flutes, drift.days, drift.levels_cents, drift.level_uncertainties_cents, strict=True
            )
        ],
        "cents_per_year": _rounded(drift.cents_per_year, _CENTS),
        "uncertainty_cents_per_year": _significant(drift.uncertainty_cents_per_year),
        "verdict": drift.verdict,
        "notes": [_all_sized(asdict(note)) for note in drift.notes],
    }


def _instrument(kin: int, flutes: Sequence[Flute]) -> str:
    return next(flute.facts.name for flute in flutes if flute.kin == kin)


# --- numbers and text --------------------------------------------------------------------------------


def _all_sized(values: Mapping[str, Any]) -> dict[str, Any]:
    return {key: _sized(key, value) for key, value in values.items()}


def _sized(key: str, value: Any) -> Any:
    """Return a number rounded as its name asks for, anything else as it is."""
    if not isinstance(value, float):
        return value
    if "uncertainty" in key or "probability" in key:
        return _significant(value)
    return _rounded(value, _HZ if key.endswith("_hz") else _CENTS)


def _rounded(value: float | None, digits: int) -> float | None:
    if value is None or not math.isfinite(value):
        return None
    return round(value, digits) + 0.0


def _significant(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else float(f"{value:.3g}")


def _field(value: Any) -> Any:
    return _FORMULA.sub(r"\1'", printable(value)) if isinstance(value, str) else value
