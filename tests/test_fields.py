"""Values of a JSON text, checked one by one: what is read, and the words for what is not.

There is no outside source here.
"""

import json
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

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

READERS: dict[str, Reader[Any]] = {
    "text": text, "number": number, "above_zero": above_zero, "not_below_zero": not_below_zero,
    "between": between(-50.0, 50.0), "whole": whole(1, 10), "one_of": one_of(("soft", 2)),
    "each": each(number), "unless_null": unless_null(text), "field": lambda value: field(value, "a", number),
}  # fmt: skip


@pytest.mark.parametrize(
    ("name", "value", "read"),
    [
        ("text", "a", "a"), ("number", 3, 3.0), ("number", -1e9, -1e9), ("above_zero", 1e-9, 1e-9),
        ("not_below_zero", 0, 0.0), ("between", 50, 50.0), ("whole", 10, 10), ("one_of", 2, 2),
        ("each", [1, 2.5], (1.0, 2.5)), ("each", [], ()), ("unless_null", None, None),
        ("field", {"a": 1}, 1.0),
    ],
)  # fmt: skip
def test_what_is_right_is_read(name: str, value: Any, read: Any) -> None:
    assert READERS[name](value) == read


@pytest.mark.parametrize(
    ("name", "value", "words"),
    [
        ("text", None, "the file is null, expected text"),
        ("number", "3", 'the file is "3", expected a number'),
        ("number", True, "the file is true, expected a number"),
        ("number", 1.1e9, "the file is 1100000000.0, expected a number within ±1e+09"),
        ("above_zero", 0, "the file is 0, expected a number above 0"),
        ("not_below_zero", -1, "the file is -1, expected a number that is 0 or more"),
        ("between", 51, "the file is 51, expected a number from -50 to 50"),
        ("whole", 11, "the file is 11, expected a whole number from 1 to 10"),
        ("whole", True, "the file is true, expected a whole number from 1 to 10"),
        ("one_of", 2.0, "the file is 2.0, expected one of soft, 2"),
        ("each", {"a": 1}, "the file is an object, expected a list"),
        ("each", [1, None], "[1] is null, expected a number"),
        ("field", [], "the file is a list of 0, expected an object"),
        ("field", {}, "a is missing"),
        ("field", {"a": {}}, "a is an object, expected a number"),
    ],
)
def test_what_is_not_right_is_told(name: str, value: Any, words: str) -> None:
    with pytest.raises(UnfitError) as caught:
        READERS[name](value)
    assert str(caught.value) == words


def test_the_whole_way_to_a_value_is_told() -> None:
    def read(values: Any) -> Any:
        return field(values, "a", each(lambda inner: field(inner, "b", each(each(number)))))

    assert read({"a": [{"b": [[1]]}]}) == (((1.0,),),)
    with pytest.raises(UnfitError, match=r"^a\[1\]\.b\[0\]\[2\] is null, expected a number$"):
        read({"a": [{"b": []}, {"b": [[1, 2, None]]}]})


def test_a_field_of_later_editions_may_be_missing() -> None:
    assert field_if_there({}, "a", number, 7.0) == 7.0
    assert field_if_there({"a": 1}, "a", number, 7.0) == 1.0


ANY_JSON = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.sampled_from("abc"), inner, max_size=3),
    max_leaves=8,
)


@given(st.sampled_from(sorted(READERS)), ANY_JSON)
def test_any_value_is_read_or_told_in_one_short_plain_line(name: str, value: Any) -> None:
    try:
        READERS[name](json.loads(json.dumps(value)))
    except UnfitError as error:
        words = str(error).replace("±", "+").replace("…", ".")
        told = words.isascii() and words.isprintable() and len(words) < 120
    else:
        told = True
    assert told
