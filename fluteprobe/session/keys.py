"""The keys of flute.toml: what each takes, and how a person may type it.

Conventions: lengths are in mm, temperatures in °C, `None` is "not given". The same checks serve the file, the
options of `begin` and its questions.
"""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import date, datetime
from difflib import get_close_matches
from itertools import pairwise
from types import MappingProxyType
from typing import Any

from fluteprobe.flute.fingering import MAX_HOLES
from fluteprobe.flute.tuning import A4_RANGE_HZ
from fluteprobe.session.words import UNSAFE, shown

TEMPERATURE_RANGE_C = (-20.0, 50.0)
MOST_PLACES = 60  # of a bore's profile

_DISTANCE_MM, _DIAMETER_MM, _LENGTH_MM = (1.0, 3000.0), (0.1, 50.0), (20.0, 4000.0)
_ALONG_MM, _BORE_MM = (0.0, 4000.0), (2.0, 100.0)
_HOTTEST_F = 122.0
_LONGEST_TEXT, _LONGEST_KEY = 200, 40
_UNITS = r"(?:°\s*[cf]?|[cf]|deg(?:rees)?\.?|celsius|grad|mm|cm|hz|hertz|holes?)"
_NUMBER = re.compile(
    rf"(?:ca\.?|about|~|≈|\+)?\s*(-?[0-9]{{1,9}}(?:[.,][0-9]{{1,9}})?|[.,][0-9]{{1,9}})\.?\s*{_UNITS}?",
    re.IGNORECASE,
)
_OTHER_WORDS = {
    "a4": "a4_hz",
    "air_temperature": "air_temperature_c",
    "bore_shape": "bore_profile_mm",
    "diameter": "bore_mm",
    "fundamental": "key",
    "material": "wood",
    "mic": "microphone",
    "number_of_holes": "holes",
    "pitch": "a4_hz",
    "profile": "bore_profile_mm",
    "recorded": "date",
    "reference": "reference_temperature_c",
    "room": "place",
    "taper": "bore_profile_mm",
    "temp": "air_temperature_c",
    "temperature": "air_temperature_c",
    "temperature_c": "air_temperature_c",
    "thickness": "wall_mm",
    "tuning": "a4_hz",
    "wall_thickness": "wall_mm",
}  # fmt: skip


class UnfitError(ValueError):
    """A value that a key does not take; its text says what was expected."""


Reader = Callable[[Any], Any]


@dataclass(frozen=True, slots=True, kw_only=True)
class Key:
    """A key of flute.toml: what reads its value, whether that is a number, and an example with a remark."""

    read: Reader
    is_number: bool = False
    example: str


def typed(table: str, key: str, text: str) -> Any:
    """Return what a person typed for a key, checked as in the file; None where it is blank.

    Raises
    ------
    UnfitError
        If the key does not take it; the text says what was found and what is expected.
    """
    text = text.strip()
    if not text:
        return None
    try:
        return KEYS[table][key].read(number_in(text) if KEYS[table][key].is_number else text)
    except UnfitError as error:
        raise UnfitError(f"found {shown(text)}, expected {error}") from None


def number_in(text: str) -> float | int | None:
    """Return the one number in `21,5 °C` or `about 19 mm`; None where there is none or more than that."""
    match = _NUMBER.fullmatch(text.strip().replace("−", "-"))
    if match is None:
        return None
    digits = match[1].replace(",", ".")
    return float(digits) if "." in digits else int(digits)


def nearest_key(table: str, key: str) -> str | None:
    """Return the key of a table that was likely meant, or None."""
    word = re.sub(r"[\W_]+", "_", key.strip().lower()).strip("_")
    if _OTHER_WORDS.get(word) in KEYS[table]:
        return _OTHER_WORDS[word]
    near = get_close_matches(word[:_LONGEST_KEY], KEYS[table], n=1)
    return near[0] if near else None


def home_of(key: str) -> str | None:
    """Return the table that a key belongs to, or None."""
    return next((table for table in KEYS if key in KEYS[table]), None)


# --- readers -----------------------------------------------------------------------------------------


def _text(value: Any) -> str | None:
    if isinstance(value, str) and len(value) > _LONGEST_TEXT:
        raise UnfitError(f"at most {_LONGEST_TEXT} letters")
    if isinstance(value, str) and not UNSAFE.search(value):
        return value.strip() or None
    raise UnfitError('text in "quotes", on one line')


def _text_or_number(value: Any) -> str | None:
    return _text(str(value) if isinstance(value, int) and not isinstance(value, bool) else value)


def _date(value: Any) -> str | None:
    if isinstance(value, datetime):
        return value.isoformat(sep=" ")
    if isinstance(value, date):
        return value.isoformat()
    if isinstance(value, str):
        return _text(value)
    raise UnfitError('a date, 2026-01-31, or text in "quotes"')


def _number(low: float, high: float, unit: str) -> Reader:
    def read(value: Any) -> float:
        if isinstance(value, int | float) and not isinstance(value, bool) and low <= value <= high:
            return float(value)
        raise UnfitError(f"a number from {low:g} to {high:g} ({unit}){_unquoted(value)}")

    return read


def _temperature_c(value: Any) -> float:
    low, high = TEMPERATURE_RANGE_C
    if isinstance(value, int | float) and high < value <= _HOTTEST_F:
        raise UnfitError(
            f"a number from {low:g} to {high:g} (°C); {value:g} °F would be {(value - 32.0) / 1.8:.1f}"
        )
    return float(_number(low, high, "°C")(value))


def _whole_number(low: int, high: int) -> Reader:
    def read(value: Any) -> int:
        if isinstance(value, int) and not isinstance(value, bool) and low <= value <= high:
            return value
        raise UnfitError(f"a whole number from {low} to {high}{_unquoted(value)}")

    return read


def _unquoted(value: Any) -> str:
    """Return how to write a number that was given as text."""
    if not isinstance(value, str):
        return ""
    number = number_in(value)
    return ", without quotes" if number is None else f", without quotes: {number}"


def _hole_pairs(value: Any) -> tuple[tuple[float, float], ...]:
    expected = "[[distance from the sound hole, diameter], …] in mm, top hole first"
    pairs = _pairs(value, _number(*_DISTANCE_MM, "mm"), _number(*_DIAMETER_MM, "mm"), expected, "hole")
    if any(later[0] <= earlier[0] for earlier, later in pairwise(pairs)):
        raise UnfitError(f"{expected}, each farther than the one before")
    return pairs


def _bore_pairs(value: Any) -> tuple[tuple[float, float], ...]:
    expected = "[[distance from the sound hole, bore there], …] in mm, from the sound hole to the foot"
    pairs = _pairs(value, _number(*_ALONG_MM, "mm"), _number(*_BORE_MM, "mm"), expected, "place")
    if not 2 <= len(pairs) <= MOST_PLACES:
        raise UnfitError(f"{expected}, 2 to {MOST_PLACES} of them; an even bore is bore_mm")
    places = [place for place, _ in pairs]
    if places != sorted(places) or any(places.count(place) > 2 for place in places):
        raise UnfitError(f"{expected}, none nearer than the one before; at a step one distance twice")
    return pairs


def _pairs(
    value: Any, first: Reader, second: Reader, expected: str, each: str
) -> tuple[tuple[float, float], ...]:
    try:
        return tuple((first(far), second(wide)) for far, wide in value)
    except (TypeError, ValueError):
        raise UnfitError(f"{expected}{_pair_hint(value, each)}") from None


def _pair_hint(value: Any, each: str) -> str:
    """Say what is likely wrong with pairs that are none."""
    if not isinstance(value, list) or not value:
        return ""
    if all(isinstance(item, int | float) for item in value):
        return f": put each {each}'s two numbers into [ ] of their own" if len(value) > 2 else ""
    lengths = {len(item) for item in value if isinstance(item, list)}
    return "; numbers have a point, not a comma: 9.5" if lengths & {3, 4} else ""


KEYS: Mapping[str, Mapping[str, Key]] = MappingProxyType(
    {
        "flute": {
            "name": Key(read=_text, example='"Robin"'),
            "holes": Key(read=_whole_number(1, MAX_HOLES), is_number=True, example="6"),
            "maker": Key(read=_text, example='"who made it"'),
            "serial": Key(read=_text_or_number, example='"12"'),
            "key": Key(read=_text, example='"A minor"'),
            "wood": Key(read=_text, example='"cherry"'),
            "bore_mm": Key(
                read=_number(*_BORE_MM, "mm"),
                is_number=True,
                example="19.0            # inner diameter of the sounding tube",
            ),
            "bore_profile_mm": Key(
                read=_bore_pairs,
                example="[[0.0, 19.0], [385.0, 16.5]]   # if it tapers: distance, bore; at a step one twice",
            ),
            "wall_mm": Key(
                read=_number(0.2, 50.0, "mm"),
                is_number=True,
                example="4.0             # thickness of the wall at the holes",
            ),
            "holes_mm": Key(
                read=_hole_pairs,
                example="[[105.0, 9.0], [127.0, 9.5]]   # distance from the sound hole, diameter; top first",
            ),
            "length_mm": Key(
                read=_number(*_LENGTH_MM, "mm"),
                is_number=True,
                example="385.0         # from the sound hole to the foot",
            ),
            "tolerance_mm": Key(
                read=_number(0.01, 20.0, "mm"),
                is_number=True,
                example="0.5        # how exact these dimensions are",
            ),
        },
        "session": {
            "a4_hz": Key(read=_number(*A4_RANGE_HZ, "Hz"), is_number=True, example="440.0"),
            "air_temperature_c": Key(read=_temperature_c, is_number=True, example="22.0"),
            "reference_temperature_c": Key(
                read=_temperature_c,
                is_number=True,
                example="20.0   # pitches are carried to it, as an estimate",
            ),
            "date": Key(read=_date, example="2026-01-31"),
            "player": Key(read=_text, example='"who played"'),
            "place": Key(read=_text, example='"a carpeted room"'),
            "microphone": Key(read=_text, example='"phone, at arm\'s length"'),
        },
    }
)
