"""The way back: a measurements.json becomes a Survey again, every field of the contract checked.

Conventions: what is accepted is what the JSON Schema measurements-1 accepts, with bounds on the size of the
file and of its numbers and with as many holes in a fingering as the flute has. Whatever else the file holds,
it is told in one line without control characters.
"""

import json
import re
from itertools import pairwise
from pathlib import Path
from typing import Any

from fluteprobe.fields import (
    Reader,
    UnfitError,
    above_zero,
    between,
    each,
    field,
    field_if_there,
    not_below_zero,
    number,
    one_of,
    text,
    unless_null,
    whole,
)
from fluteprobe.files import read_whole
from fluteprobe.flute.fingering import BREATHS, MAX_HOLES, Fingering
from fluteprobe.flute.register import REGISTERS, Evidence, RegisterCall
from fluteprobe.flute.tuning import A4_RANGE_HZ
from fluteprobe.session import FluteFacts, Problem, Sitting, printable
from fluteprobe.session.keys import MOST_PLACES
from fluteprobe.sound.stored import tone_from
from fluteprobe.survey import Entry, Reading, Survey

MEASUREMENTS_SCHEMA = "fluteprobe/measurements/1"
LARGEST_BYTES = 20_000_000  # some thousand takes

_NOTE = re.compile(r"[A-G]#?-?[0-9]+", re.ASCII)
_WRITTEN_SO = {key: str(key) for key in REGISTERS}


class ResultsError(ValueError):
    """Measurements that cannot be read; the text is one line that says where and what was expected."""


def read_results(path: Path) -> Survey:
    """Return the survey in a measurements.json.

    Raises
    ------
    ResultsError
        If the file is missing, no JSON or not by the schema; the text names the file.
    """
    name = printable(str(path))
    try:
        values = json.loads(read_whole(path, LARGEST_BYTES))
    except OSError as error:
        raise ResultsError(f"{name} cannot be read: {printable(error.strerror or str(error))}") from None
    except (ValueError, RecursionError):
        raise ResultsError(f"{name} is no JSON: measure the flute again") from None
    try:
        return survey_from_json(values)
    except ResultsError as error:
        raise ResultsError(f"{name}: {error}") from None


def survey_from_json(values: Any) -> Survey:
    """Return the survey that `survey_json` wrote, every contract field checked; fields added are passed over.

    Raises
    ------
    ResultsError
        If it is of another schema, or a field is missing or not as it should be; the text says which.
    """
    try:
        return _survey(values)
    except UnfitError as error:
        raise ResultsError(str(error)) from None


def _survey(values: Any) -> Survey:
    field(values, "schema", _schema)
    flute = field(values, "flute", _flute)
    fingering = _fingering_of(flute.holes)
    return Survey(
        flute=flute,
        sitting=field(values, "session", _sitting),
        readings=field(values, "tones", each(lambda tone: _reading(tone, fingering))),
        entries=field(values, "entries", each(lambda entry: _entry(entry, fingering))),
        problems=field(values, "problems", each(_problem)),
    )


def _schema(value: Any) -> None:
    if value != MEASUREMENTS_SCHEMA:
        raise UnfitError.found(value, json.dumps(MEASUREMENTS_SCHEMA))


# --- readers -----------------------------------------------------------------------------------------

_perhaps_text = unless_null(text)
_perhaps_number = unless_null(number)
_perhaps_above_zero = unless_null(above_zero)
_share = between(0.0, 1.0)
_register = one_of(REGISTERS)
_perhaps_register = unless_null(_register)
_perhaps_breath = unless_null(one_of(BREATHS))
_texts = each(text)
_holes = whole(1, MAX_HOLES)
_one_or_more = whole(1)


def _flute(values: Any) -> FluteFacts:
    return FluteFacts(
        name=field(values, "name", text),
        holes=field(values, "holes", _holes),
        maker=field(values, "maker", _perhaps_text),
        serial=field(values, "serial", _perhaps_text),
        key=field(values, "key", _perhaps_text),
        wood=field(values, "wood", _perhaps_text),
        bore_mm=field(values, "bore_mm", _perhaps_above_zero),
        bore_profile_mm=field_if_there(values, "bore_profile_mm", unless_null(_profile), None),
        wall_mm=field(values, "wall_mm", _perhaps_above_zero),
        holes_mm=field(values, "holes_mm", unless_null(each(_pair))),
        length_mm=field_if_there(values, "length_mm", _perhaps_above_zero, None),
        tolerance_mm=field_if_there(values, "tolerance_mm", _perhaps_above_zero, None),
    )


def _pair(values: Any) -> tuple[float, float]:
    pair = each(above_zero)(values)
    if len(pair) != 2:
        raise UnfitError.found(values, "a distance and a diameter")
    return pair[0], pair[1]


def _profile(values: Any) -> tuple[tuple[float, float], ...]:
    profile = each(_place)(values)
    going_back = any(later[0] < earlier[0] for earlier, later in pairwise(profile))
    if going_back or not 2 <= len(profile) <= MOST_PLACES:
        raise UnfitError.found(values, f"2 to {MOST_PLACES} places, from the sound hole to the foot")
    return profile


def _place(values: Any) -> tuple[float, float]:
    pair = each(not_below_zero)(values)
    if len(pair) != 2:
        raise UnfitError.found(values, "a distance and a diameter")
    return pair[0], above_zero(pair[1])


def _sitting(values: Any) -> Sitting:
    return Sitting(
        a4_hz=field(values, "a4_hz", between(*A4_RANGE_HZ)),
        air_temperature_c=field(values, "air_temperature_c", _perhaps_number),
        reference_temperature_c=field(values, "reference_temperature_c", _perhaps_number),
        date=field(values, "date", _perhaps_text),
        player=field(values, "player", _perhaps_text),
        place=field(values, "place", _perhaps_text),
        microphone=field(values, "microphone", _perhaps_text),
    )


def _fingering_of(holes: int) -> Reader[Fingering]:
    """Return a reader of one flute's fingerings; each is made once."""
    made: dict[str, Fingering] = {}

    def read(value: Any) -> Fingering:
        word = text(value)
        if word not in made:
            made[word] = _fingering(word, holes)
        return made[word]

    return read


def _fingering(word: str, holes: int) -> Fingering:
    try:
        fingering = Fingering(word)
    except ValueError:
        raise UnfitError.found(word, f"1 to {MAX_HOLES} of x, o, h and v") from None
    if fingering.holes != holes:
        raise UnfitError.found(word, f"a fingering of {holes} hole{'s' if holes > 1 else ''}")
    return fingering


def _note(value: Any) -> str:
    found = text(value)
    if not _NOTE.fullmatch(found):
        raise UnfitError.found(value, "a note such as C#5")
    return found


_perhaps_note = unless_null(_note)


def _reading(values: Any, fingering: Reader[Fingering]) -> Reading:
    tone = tone_from(values)
    note, cents = field(values, "note", _perhaps_note), field(values, "cents", _perhaps_number)
    if (tone.frequency_hz is None) != (note is None) or (note is None) != (cents is None):
        raise UnfitError("is half given: frequency_hz, note and cents go together").within("note")
    return Reading(
        take=field(values, "take", text),
        fingering=field(values, "fingering", unless_null(fingering)),
        breath=field(values, "breath", _perhaps_breath),
        tone=tone,
        note=note,
        cents=cents,
        cents_at_reference=field(values, "cents_at_reference", _perhaps_number),
        call=RegisterCall(
            register=field(values, "register", _perhaps_register),
            probability=field(values, "register_probability", _probability),
            evidence=field(values, "evidence", _all_evidence),
        ),
    )


def _probability(values: Any) -> dict[Any, float]:
    return {key: field(values, name, _share) for key, name in _WRITTEN_SO.items()}


def _evidence(values: Any) -> Evidence:
    return Evidence(
        source=field(values, "source", text),
        favours=field(values, "favours", _register),
        log_odds=field(values, "log_odds", number),
        detail=field(values, "detail", text),
    )


_all_evidence = each(_evidence)


def _entry(values: Any, fingering: Reader[Fingering]) -> Entry:
    return Entry(
        fingering=field(values, "fingering", fingering),
        register=field(values, "register", _register),
        frequency_hz=field(values, "frequency_hz", above_zero),
        uncertainty_cents=field(values, "uncertainty_cents", not_below_zero),
        note=field(values, "note", _note),
        cents=field(values, "cents", between(-50.0, 50.0)),
        cents_at_reference=field(values, "cents_at_reference", _perhaps_number),
        stretch_cents=field(values, "stretch_cents", _perhaps_number),
        takes=field(values, "takes", _takes),
        tones=field(values, "tones", _one_or_more),
        reliability=round(field(values, "reliability", _share), 4),  # as it is written
    )


def _takes(values: Any) -> tuple[str, ...]:
    takes = _texts(values)
    if not takes:
        raise UnfitError.found(values, "one take or more")
    return takes


def _problem(values: Any) -> Problem:
    return Problem(take=field(values, "take", text), message=field(values, "message", text))
