"""Values from a JSON text, checked one by one: what is not as it should be is told with its place.

Conventions: a reader takes a value and returns it, or raises `UnfitError`; an error gains its path on the way
up, `tones[3].frequency_hz`. Numbers are finite and within ±1e9, far beyond anything that is measured here, so
that no sum or square of them overflows.
"""

import json
import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any, TypeVar

LARGEST = 1e9
SMALLEST = 1e-9  # of what is above zero

_LONGEST_SHOWN = 40

T = TypeVar("T")
Reader = Callable[[Any], T]


class UnfitError(ValueError):
    """A value that is missing or not as it should be. Its text is one line, without control characters."""

    def __init__(self, words: str) -> None:
        super().__init__(words)
        self._path = ""
        self._words = words

    @classmethod
    def found(cls, value: Any, expected: str) -> "UnfitError":
        """Return the error for a value where something else was expected."""
        return cls(f"is {_shown(value)}, expected {expected}")

    def within(self, place: str) -> "UnfitError":
        """Return the same error, seen from farther out: `place` is a key, or an index in brackets."""
        dot = "" if self._path.startswith("[") or not self._path else "."
        self._path = f"{place}{dot}{self._path}"
        return self

    def __str__(self) -> str:
        return f"{self._path or 'the file'} {self._words}"


def field(values: Any, key: str, read: Reader[T]) -> T:
    """Read one field of an object."""
    try:
        value = values[key]
    except (KeyError, TypeError, IndexError):
        if isinstance(values, dict):
            raise UnfitError("is missing").within(key) from None
        raise UnfitError.found(values, "an object") from None
    try:
        return read(value)
    except UnfitError as error:
        raise error.within(key) from None


def field_if_there(values: Any, key: str, read: Reader[T], otherwise: T) -> T:
    """Read one field of an object that older files do not have."""
    return field(values, key, read) if isinstance(values, dict) and key in values else otherwise


def each(read: Reader[T]) -> Reader[tuple[T, ...]]:
    """Return a reader of lists."""

    def read_list(values: Any) -> tuple[T, ...]:
        if not isinstance(values, list):
            raise UnfitError.found(values, "a list")
        found = []
        try:
            for value in values:
                found.append(read(value))  # noqa: PERF401  (its length is the index of what is unfit)
        except UnfitError as error:
            raise error.within(f"[{len(found)}]") from None
        return tuple(found)

    return read_list


def unless_null(read: Reader[T]) -> Reader[T | None]:
    """Return a reader that lets null pass as None."""
    return lambda value: None if value is None else read(value)


def one_of(choices: Sequence[T]) -> Reader[T]:
    """Return a reader of a few texts or whole numbers."""

    def read(value: Any) -> T:
        for choice in choices:
            if value == choice and type(value) is type(choice):
                return choice
        raise UnfitError.found(value, f"one of {', '.join(map(str, choices))}")

    return read


def text(value: Any) -> str:
    """Read text."""
    if not isinstance(value, str):
        raise UnfitError.found(value, "text")
    return value


def number(value: Any) -> float:
    """Read a number."""
    if type(value) is float or type(value) is int:
        if -LARGEST <= value <= LARGEST:
            return float(value)
        raise UnfitError.found(value, f"a number within ±{LARGEST:.0e}")
    raise UnfitError.found(value, "a number")


def above_zero(value: Any) -> float:
    """Read a number above 0."""
    found = number(value)
    if found < SMALLEST:
        raise UnfitError.found(value, "a number above 0")
    return found


def not_below_zero(value: Any) -> float:
    """Read a number that is 0 or more."""
    found = number(value)
    if found < 0.0:
        raise UnfitError.found(value, "a number that is 0 or more")
    return found


def between(low: float, high: float) -> Reader[float]:
    """Return a reader of numbers from `low` to `high`."""

    def read(value: Any) -> float:
        found = number(value)
        if not low <= found <= high:
            raise UnfitError.found(value, f"a number from {low:g} to {high:g}")
        return found

    return read


def whole(low: int, high: int = int(LARGEST)) -> Reader[int]:
    """Return a reader of whole numbers from `low` to `high`."""

    def read(value: Any) -> int:
        if type(value) is int and low <= value <= high:
            return value
        limits = f"from {low} to {high}" if high < LARGEST else f"of {low} or more"
        raise UnfitError.found(value, f"a whole number {limits}")

    return read


def _shown(value: Any) -> str:
    """Return a value in brief, in ASCII without control characters."""
    if isinstance(value, Mapping):
        return "an object"
    if isinstance(value, list | tuple):
        return f"a list of {len(value)}"
    if isinstance(value, int) and not isinstance(value, bool) and abs(value) > LARGEST:
        return "a huge number"
    if isinstance(value, float) and math.isnan(value):
        return "NaN"
    brief = value[: _LONGEST_SHOWN + 1] if isinstance(value, str) else value
    shown = json.dumps(brief, default=lambda _: "something else").replace("\x7f", "\\u007f")
    return shown if len(shown) <= _LONGEST_SHOWN else f"{shown[: _LONGEST_SHOWN - 1]}…"
