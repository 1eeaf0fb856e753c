"""Measurements as files: a Survey becomes measurements.json and measurements.csv (`reread.py`: the way back).

Conventions: the fields are a contract that other programs read; fields may be added, never renamed. Numbers
are rounded to what can be meant: frequencies to 0.0001 Hz, cents to 0.001, levels to 0.01 dB,
uncertainties to three digits. What is not known, and what is no finite number, is null. The JSON Schemas in
`fluteprobe/schema/` say the same strictly.
"""

import csv
import io
import json
import math
import re
from collections.abc import Iterable, Mapping
from dataclasses import asdict
from importlib.resources import files
from pathlib import Path
from typing import Any, Literal, cast

from fluteprobe.files import make_folder, replace_file, replace_files, sweep_passing
from fluteprobe.flute.register import REGISTERS
from fluteprobe.reread import MEASUREMENTS_SCHEMA, ResultsError, read_results, survey_from_json
from fluteprobe.session import Problem, printable
from fluteprobe.sound.tone import BreathResonance, Partial, Vibrato
from fluteprobe.survey import Entry, Reading, Survey
from fluteprobe.version import __version__

__all__ = [
    "CSV_FIELDS",
    "HEARD_SCHEMA",
    "MEASUREMENTS_SCHEMA",
    "ResultsError",
    "heard_json",
    "json_text",
    "read_results",
    "replace_file",
    "schema",
    "survey_csv",
    "survey_from_json",
    "survey_json",
    "write_results",
]

HEARD_SCHEMA = "fluteprobe/heard/1"
CSV_FIELDS = (
    "flute", "fingering", "register", "frequency_hz", "uncertainty_cents", "note", "cents",
    "cents_at_reference", "stretch_cents", "takes", "tones", "reliability",
)  # fmt: skip

# What a spreadsheet would run, also behind a separator that it may split at; the last four in some editions.
_FORMULA = re.compile(r"""(^|[;,|])(?=[\s"']*[=+\-@＝＋－＠])""")


# --- Survey -> files ---------------------------------------------------------------------------------


def heard_json(
    readings: Iterable[Reading], problems: Iterable[Problem], *, a4_hz: float | None = None
) -> dict[str, Any]:
    """Return what was heard in single recordings, as JSON values by the schema heard-1."""
    return {
        "schema": HEARD_SCHEMA,
        "version": __version__,
        "a4_hz": a4_hz,
        "tones": [_tone_json(reading) for reading in readings],
        "problems": [asdict(problem) for problem in problems],
    }


def survey_json(survey: Survey) -> dict[str, Any]:
    """Return a survey as JSON values by the schema measurements-1."""
    return {
        "schema": MEASUREMENTS_SCHEMA,
        "version": __version__,
        "flute": _plain(asdict(survey.flute)),
        "session": _plain(asdict(survey.sitting)),
        "tones": [_tone_json(reading) for reading in survey.readings],
        "entries": [_entry_json(entry) for entry in survey.entries],
        "problems": [asdict(problem) for problem in survey.problems],
    }


def json_text(values: Mapping[str, Any]) -> str:
    """Return JSON text, ended by a newline.

    Raises
    ------
    ValueError
        If a number is not finite, which the functions above rule out.
    """
    text = json.dumps(values, ensure_ascii=False, allow_nan=False, indent=1)
    return text.encode("utf-8", "backslashreplace").decode("utf-8") + "\n"


def survey_csv(survey: Survey) -> str:
    """Return a survey's entries as a table, one row each; to a spreadsheet, text is text and no formula."""
    table = io.StringIO()
    writer = csv.DictWriter(table, CSV_FIELDS, lineterminator="\n")
    writer.writeheader()
    for entry in survey.entries:
        row = {**_entry_json(entry), "flute": survey.flute.name, "takes": "; ".join(entry.takes)}
        writer.writerow({field: _cell(row[field]) for field in CSV_FIELDS})
    return table.getvalue().encode("utf-8", "backslashreplace").decode("utf-8")


def write_results(survey: Survey, folder: Path) -> tuple[Path, Path]:
    """Write measurements.json and measurements.csv into a folder, made if needed, and return their paths.

    Raises
    ------
    OSError
        If the folder cannot be written; the files that were there before are then still there, both.
    """
    make_folder(folder)
    sweep_passing(folder)
    measurements, table = folder / "measurements.json", folder / "measurements.csv"
    replace_files(
        {
            measurements: json_text(survey_json(survey)).encode("utf-8"),
            table: survey_csv(survey).encode("utf-8"),
        }
    )
    return measurements, table


def schema(name: Literal["heard-1", "measurements-1"]) -> dict[str, Any]:
    """Return a published JSON Schema (draft 2020-12)."""
    text = files("fluteprobe").joinpath("schema", f"{name}.schema.json").read_text(encoding="utf-8")
    return cast(dict[str, Any], json.loads(text))


def _tone_json(reading: Reading) -> dict[str, Any]:
    tone, call = reading.tone, reading.call
    return {
        "take": reading.take,
        "start_s": _rounded(tone.start_s, 4),
        "end_s": _rounded(tone.end_s, 4),
        "fingering": None if reading.fingering is None else str(reading.fingering),
        "breath": reading.breath,
        "kind": tone.kind,
        "frequency_hz": _rounded(tone.frequency_hz, 4),
        "uncertainty_cents": _significant(tone.uncertainty_cents),
        "note": reading.note,
        "cents": _rounded(reading.cents, 3),
        "cents_at_reference": _rounded(reading.cents_at_reference, 3),
        "register": call.register,
        "register_probability": {str(k): _rounded(call.probability.get(k, 0.0), 5) for k in REGISTERS},
        "evidence": [{**asdict(item), "log_odds": _rounded(item.log_odds, 3)} for item in call.evidence],
        "partials": [_partial_json(partial) for partial in tone.partials],
        "harmonic_to_noise_db": _rounded(tone.harmonic_to_noise_db, 2),
        "breath_resonances": [_resonance_json(resonance) for resonance in tone.breath_resonances],
        "drift_cents": _rounded(tone.drift_cents, 3),
        "vibrato": None if tone.vibrato is None else _vibrato_json(tone.vibrato),
        "attack_ms": _rounded(tone.attack_ms, 1),
        "cautions": list(tone.cautions),
    }


def _partial_json(partial: Partial) -> dict[str, Any]:
    return {
        "order": partial.order,
        "frequency_hz": _rounded(partial.frequency_hz, 4),
        "level_db": _rounded(partial.level_db, 2),
    }


def _resonance_json(resonance: BreathResonance) -> dict[str, Any]:
    return {
        "frequency_hz": _rounded(resonance.frequency_hz, 2),
        "width_hz": _rounded(resonance.width_hz, 2),
        "prominence_db": _rounded(resonance.prominence_db, 2),
        "chance": _significant(resonance.chance),
    }


def _vibrato_json(vibrato: Vibrato) -> dict[str, Any]:
    return {"rate_hz": _rounded(vibrato.rate_hz, 3), "extent_cents": _rounded(vibrato.extent_cents, 2)}


def _entry_json(entry: Entry) -> dict[str, Any]:
    return {
        "fingering": str(entry.fingering),
        "register": entry.register,
        "frequency_hz": _rounded(entry.frequency_hz, 4),
        "uncertainty_cents": _significant(entry.uncertainty_cents),
        "note": entry.note,
        "cents": _rounded(entry.cents, 3),
        "cents_at_reference": _rounded(entry.cents_at_reference, 3),
        "stretch_cents": _rounded(entry.stretch_cents, 3),
        "takes": list(entry.takes),
        "tones": entry.tones,
        "reliability": _rounded(entry.reliability, 4),
    }


def _rounded(value: float | None, digits: int) -> float | None:
    """Return a number with so many decimals, never a negative zero; None where it is none or not finite."""
    if value is None or not math.isfinite(value):
        return None
    return round(float(value), digits) + 0.0


def _significant(value: float | None) -> float | None:
    """Return a number with three significant digits; None where it is none or not finite."""
    return None if value is None or not math.isfinite(value) else float(f"{value:.3g}")


def _plain(values: Any) -> Any:
    """Return values with tuples as lists and without what is not finite."""
    if isinstance(values, Mapping):
        return {key: _plain(value) for key, value in values.items()}
    if isinstance(values, list | tuple):
        return [_plain(value) for value in values]
    return None if isinstance(values, float) and not math.isfinite(values) else values


def _cell(value: Any) -> Any:
    """Return a cell; in text, what a spreadsheet would run as a formula gets an apostrophe before it."""
    return _FORMULA.sub(r"\1'", printable(value)) if isinstance(value, str) else value
