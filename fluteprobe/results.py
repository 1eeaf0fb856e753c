"""Measurements as files: a Survey becomes measurements.json and measurements.csv, and comes back.

Conventions: the fields are a contract that other programs read; fields may be added, never renamed. Numbers
are rounded to what can be meant: frequencies to 0.0001 Hz, cents to 0.001, levels to 0.01 dB,
uncertainties to three digits. What is not known, and what is no finite number, is null. The JSON Schemas in
`fluteprobe/schema/` say the same strictly.
"""

import csv
import io
import json
import math
import os
import secrets
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import asdict
from importlib.resources import files
from pathlib import Path
from typing import Any, Literal, TypeVar, cast, get_args

from fluteprobe import __version__
from fluteprobe.flute.fingering import BREATHS, Breath, Fingering
from fluteprobe.flute.register import REGISTERS, Evidence, Register, RegisterCall
from fluteprobe.session import FluteFacts, Problem, Sitting, printable
from fluteprobe.sound.tone import BreathResonance, Kind, Partial, Tone, Vibrato
from fluteprobe.survey import Entry, Reading, Survey

HEARD_SCHEMA = "fluteprobe/heard/1"
MEASUREMENTS_SCHEMA = "fluteprobe/measurements/1"
CSV_FIELDS = (
    "flute", "fingering", "register", "frequency_hz", "uncertainty_cents", "note", "cents",
    "cents_at_reference", "stretch_cents", "takes", "tones", "reliability",
)  # fmt: skip

_FORMULA_STARTS = ("=", "+", "-", "@", "＝", "＋", "－", "＠")  # the latter four count in some editions
_KINDS = get_args(Kind)

T = TypeVar("T")


class ResultsError(ValueError):
    """Measurements that cannot be read; the text is one line that says where and what was expected."""


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
        If the folder cannot be written; files that were there before are then still whole.
    """
    folder.mkdir(parents=True, exist_ok=True)
    contents = {"measurements.json": json_text(survey_json(survey)), "measurements.csv": survey_csv(survey)}
    for name, text in contents.items():
        replace_file(folder / name, text.encode("utf-8"))
    return folder / "measurements.json", folder / "measurements.csv"


def replace_file(path: Path, content: bytes) -> None:
    """Write a file as a whole: under another name in the same folder first, then put into its place.

    Raises
    ------
    OSError
        If it cannot be written, with the file's own name; what was there before is then untouched.
    """
    passing = path.with_name(f".{path.name}.{secrets.token_hex(4)}.tmp")
    try:
        with passing.open("xb") as file:
            file.write(content)
            file.flush()
            os.fsync(file.fileno())
        passing.replace(path)
    except OSError as error:
        raise OSError(error.errno, error.strerror, str(path)) from error
    finally:
        passing.unlink(missing_ok=True)


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
    """Return a cell; text that a spreadsheet would run as a formula gets an apostrophe before it."""
    if not isinstance(value, str):
        return value
    text = printable(value)
    return f"'{text}" if text.lstrip().startswith(_FORMULA_STARTS) else text


# --- files -> Survey ---------------------------------------------------------------------------------


def read_results(path: Path) -> Survey:
    """Return the survey in a measurements.json.

    Raises
    ------
    ResultsError
        If the file is missing, no JSON or not by the schema; the text names the file.
    """
    try:
        values = json.loads(path.read_bytes())
    except OSError as error:
        raise ResultsError(f"{path} cannot be read: {error.strerror}") from None
    except (ValueError, RecursionError):
        raise ResultsError(f"{path} is no JSON: measure the flute again") from None
    try:
        return survey_from_json(values)
    except ResultsError as error:
        raise ResultsError(f"{path}: {error}") from None


def survey_from_json(values: Mapping[str, Any]) -> Survey:
    """Return the survey that `survey_json` wrote, every contract field checked; fields added are passed over.

    Raises
    ------
    ResultsError
        If it is of another schema, or a field is missing or of the wrong kind; the text says which.
    """
    top = _At(values, "")
    found = top["schema"].value
    if found != MEASUREMENTS_SCHEMA:
        raise ResultsError(f"schema is {json.dumps(found)}, expected {json.dumps(MEASUREMENTS_SCHEMA)}")
    return Survey(
        flute=_flute(top["flute"]),
        sitting=_sitting(top["session"]),
        readings=top["tones"].each(_reading),
        entries=top["entries"].each(_entry),
        problems=top["problems"].each(_problem),
    )


class _At:
    """A JSON value and where it stands, for messages: `tones[3].frequency_hz`."""

    def __init__(self, value: Any, path: str) -> None:
        self.value, self.path = value, path

    def __getitem__(self, key: str) -> "_At":
        if not isinstance(self.value, Mapping):
            raise self.unfit("an object")
        path = f"{self.path}.{key}".lstrip(".")
        if key not in self.value:
            raise ResultsError(f"{path} is missing")
        return _At(self.value[key], path)

    def __contains__(self, key: str) -> bool:
        return isinstance(self.value, Mapping) and key in self.value

    def each(self, read: Callable[["_At"], T]) -> tuple[T, ...]:
        if not isinstance(self.value, Sequence) or isinstance(self.value, str):
            raise self.unfit("a list")
        return tuple(read(_At(value, f"{self.path}[{k}]")) for k, value in enumerate(self.value))

    def unless_null(self, read: Callable[["_At"], T]) -> T | None:
        return None if self.value is None else read(self)

    def text(self) -> str:
        if not isinstance(self.value, str):
            raise self.unfit("text")
        return self.value

    def number(self) -> float:
        if isinstance(self.value, int | float) and not isinstance(self.value, bool):
            number = float(self.value)
            if math.isfinite(number):
                return number
        raise self.unfit("a number")

    def above_zero(self) -> float:
        number = self.number()
        if number <= 0.0:
            raise self.unfit("a number above 0")
        return number

    def share(self) -> float:
        number = self.number()
        if not 0.0 <= number <= 1.0:
            raise self.unfit("a number from 0 to 1")
        return number

    def whole(self) -> int:
        if not isinstance(self.value, int) or isinstance(self.value, bool):
            raise self.unfit("a whole number")
        return self.value

    def one_of(self, choices: Sequence[T]) -> T:
        for choice in choices:
            if self.value == choice and type(self.value) is type(choice):
                return choice
        raise self.unfit(f"one of {', '.join(map(str, choices))}")

    def unfit(self, expected: str) -> ResultsError:
        found = json.dumps(self.value, default=str)
        found = found if len(found) <= 40 else f"{found[:39]}…"
        return ResultsError(f"{self.path or 'the file'} is {found}, expected {expected}")


def _flute(at: _At) -> FluteFacts:
    holes = at["holes"].whole()
    if holes < 1:
        raise at["holes"].unfit("a whole number above 0")
    return FluteFacts(
        name=at["name"].text(),
        holes=holes,
        **{key: at[key].unless_null(_At.text) for key in ("maker", "serial", "key", "wood")},
        bore_mm=at["bore_mm"].unless_null(_At.above_zero),
        wall_mm=at["wall_mm"].unless_null(_At.above_zero),
        holes_mm=at["holes_mm"].unless_null(lambda pairs: pairs.each(_pair)),
        length_mm=_added(at, "length_mm"),
        tolerance_mm=_added(at, "tolerance_mm"),
    )


def _added(at: _At, key: str) -> float | None:
    """Return a number above 0 that files of the first editions do not have."""
    return at[key].unless_null(_At.above_zero) if key in at else None


def _pair(at: _At) -> tuple[float, float]:
    pair = at.each(_At.number)
    if len(pair) != 2:
        raise at.unfit("a distance and a diameter")
    return pair[0], pair[1]


def _sitting(at: _At) -> Sitting:
    return Sitting(
        a4_hz=at["a4_hz"].above_zero(),
        air_temperature_c=at["air_temperature_c"].unless_null(_At.number),
        reference_temperature_c=at["reference_temperature_c"].unless_null(_At.number),
        **{key: at[key].unless_null(_At.text) for key in ("date", "player", "place", "microphone")},
    )


def _reading(at: _At) -> Reading:
    return Reading(
        take=at["take"].text(),
        fingering=at["fingering"].unless_null(_fingering),
        breath=at["breath"].unless_null(_breath),
        tone=_tone(at),
        note=at["note"].unless_null(_At.text),
        cents=at["cents"].unless_null(_At.number),
        cents_at_reference=at["cents_at_reference"].unless_null(_At.number),
        call=RegisterCall(
            register=at["register"].unless_null(_register),
            probability={k: at["register_probability"][str(k)].share() for k in REGISTERS},
            evidence=at["evidence"].each(_evidence),
        ),
    )


def _fingering(at: _At) -> Fingering:
    try:
        return Fingering(at.text())
    except ResultsError:
        raise
    except ValueError:
        raise at.unfit("1 to 10 of x, o, h and v") from None


def _breath(at: _At) -> Breath:
    return at.one_of(BREATHS)


def _register(at: _At) -> Register:
    return at.one_of(REGISTERS)


def _tone(at: _At) -> Tone:
    return Tone(
        start_s=at["start_s"].number(),
        end_s=at["end_s"].number(),
        kind=at["kind"].one_of(_KINDS),
        frequency_hz=at["frequency_hz"].unless_null(_At.above_zero),
        uncertainty_cents=at["uncertainty_cents"].unless_null(_At.number),
        partials=at["partials"].each(_partial),
        harmonic_to_noise_db=at["harmonic_to_noise_db"].unless_null(_At.number),
        breath_resonances=at["breath_resonances"].each(_resonance),
        drift_cents=at["drift_cents"].unless_null(_At.number),
        vibrato=at["vibrato"].unless_null(_vibrato),
        attack_ms=at["attack_ms"].unless_null(_At.number),
        cautions=at["cautions"].each(_At.text),
    )


def _partial(at: _At) -> Partial:
    return Partial(
        order=at["order"].whole(),
        frequency_hz=at["frequency_hz"].above_zero(),
        level_db=at["level_db"].number(),
    )


def _resonance(at: _At) -> BreathResonance:
    return BreathResonance(
        frequency_hz=at["frequency_hz"].above_zero(),
        width_hz=at["width_hz"].number(),
        prominence_db=at["prominence_db"].number(),
        chance=at["chance"].share() if "chance" in at else 0.0,
    )


def _vibrato(at: _At) -> Vibrato:
    return Vibrato(rate_hz=at["rate_hz"].number(), extent_cents=at["extent_cents"].number())


def _evidence(at: _At) -> Evidence:
    return Evidence(
        source=at["source"].text(),
        favours=_register(at["favours"]),
        log_odds=at["log_odds"].number(),
        detail=at["detail"].text(),
    )


def _entry(at: _At) -> Entry:
    return Entry(
        fingering=_fingering(at["fingering"]),
        register=_register(at["register"]),
        frequency_hz=at["frequency_hz"].above_zero(),
        uncertainty_cents=at["uncertainty_cents"].number(),
        note=at["note"].text(),
        cents=at["cents"].number(),
        cents_at_reference=at["cents_at_reference"].unless_null(_At.number),
        stretch_cents=at["stretch_cents"].unless_null(_At.number),
        takes=at["takes"].each(_At.text),
        tones=at["tones"].whole(),
        reliability=at["reliability"].share(),
    )


def _problem(at: _At) -> Problem:
    return Problem(take=at["take"].text(), message=at["message"].text())
